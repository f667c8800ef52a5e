"""A merged campaign for other programs: numbers and words without curves, strict JSON, SI units in the key names.

A number that is not known is null; so is an end of an interval that does not exist. Conditions are numbered from 1.
"""

from __future__ import annotations

from typing import Any

from shpb.fitting.weighted_line import Estimate
from shpb.merge.campaign import CourseAtRate, Merged, MergedMaterial, RateStudy
from shpb.merge.model_fit import ModelFit
from shpb.merge.peak_shift import PeakShift
from shpb.merge.repeats import Repeats
from shpb.merge.sensitivity import RateSensitivity
from shpb.merge.temperature import Extreme
from shpb.view.merge_words import why_not_fitted
from shpb.view.summary import head

Json = dict[str, Any]


def merge_json(merged: Merged) -> Json:
    """Return a merge, fit for :func:`shpb.view.summary.json_text`."""
    settings = merged.settings
    return {
        **head("shpb merge"),
        "settings": {
            "plastic_strains": list(settings.strains),
            "indentation_out": settings.indentation_out,
            "laws": list(settings.models) or "all",
            "facts": dict(settings.facts),
            "reference_rate_per_s": settings.reference_rate_per_s,
            "allowances": dict(settings.allowances),
            "course_decades": settings.course_decades,
            "u_temperature_k": settings.u_temperature_k,
            "seed": settings.seed,
        },
        "files_used": [{"name": name, "sha256": sha256} for name, sha256 in merged.used],
        "left_out": [{"name": one.origin, "why": one.why} for one in merged.left_out],
        "offset_yields": [
            {
                "name": one.origin,
                "offset_strain": one.offset,
                "eng_stress_pa": one.stress_pa,
                "slope_from": one.slope_from,
                "why_none": one.why,
            }
            for one in merged.offsets
        ],
        "materials": [_material(material) for material in merged.materials],
    }


def _material(material: MergedMaterial) -> Json:
    return {
        "material": material.material,
        "kind": material.kind.value,
        "conditions": [_condition(i, one) for i, one in enumerate(material.conditions, 1)],
        "table": [
            {
                "condition": row.condition + 1,
                "plastic_strain": row.plastic_strain,
                "true_stress_pa": row.stress_pa,
                "u_true_stress_pa": row.u_pa,
                "u_own_true_stress_pa": row.u_own_pa,
                "u_shared_true_stress_pa": row.u_shared_pa,
                "scatter_pa": row.scatter_pa,
                "tests": int(row.count),
                "true_rate_per_s": row.rate_per_s,
                "rate_range_per_s": list(row.rate_range_per_s),
                "temperature_k": row.temperature_k,
                "temperature_rise_k": row.rise_k,
                "isothermal_stress_pa": row.isothermal_pa,
                "u_isothermal_stress_pa": row.u_isothermal_pa,
            }
            for row in material.rows
        ],
        "rate_sensitivity": [_study(study) for study in material.rates],
        "temperature_courses": [_course(course) for course in material.courses],
        "peak_shift": None if material.shift is None else _shift(material.shift),
        "why_no_peak_shift": material.why_no_shift,
        "laws": [_law(fit) for fit in material.fits],
        "laws_not_fitted": [
            {"law": one.model.key, "why": why_not_fitted(one)} for one in material.not_fitted
        ],
    }


def _condition(number: int, condition: Repeats) -> Json:
    grid = condition.plastic_strain
    return {
        "condition": number,
        "range": condition.range.value,
        "mean_true_rate_per_s": condition.mean_rate_per_s,
        "rate_range_per_s": list(condition.rate_range_per_s),
        "temperature_k": condition.temperature_k,
        "temperature_range_k": list(condition.temperature_range_k),
        "plastic_strain_span": [float(grid[0]), float(grid[-1])],
        "common_plastic_strain_span": None if condition.common_span is None else list(condition.common_span),
        "tests": [
            {
                "file": curve.origin,
                "sha256": curve.sha256,
                "mean_true_rate_per_s": curve.mean_rate_per_s,
                "temperature_k": curve.temperature_k,
                "plastic_strain_span": list(curve.span),
                "remarks": list(curve.remarks),
            }
            for curve in condition.curves
        ],
        "outlying": [
            {
                "file": one.origin or None,
                "files": list(one.origins),
                "mean_relative_difference": one.difference,
                "largest_relative_difference": one.largest,
                "at_plastic_strain": one.at_strain,
                "standard_uncertainties": one.ratio,
                "in_words": one.in_words(),
            }
            for one in condition.outliers
        ],
    }


def _estimate(estimate: Estimate | None) -> Json | None:
    if estimate is None:
        return None
    return {"value": estimate.value, "u": estimate.u, "interval_95": list(estimate.interval)}


def _sensitivity(held: RateSensitivity | None) -> Json | None:
    if held is None:
        return None
    return {
        "m": _estimate(held.exponent),
        "stress_per_decade_pa": _estimate(held.per_decade_pa),
        "c": _estimate(held.coefficient),
        "reference_rate_per_s": held.reference_rate_per_s,
        "activation_volume_m3": _estimate(held.activation_volume_m3),
        "activation_volume_open": held.activation_volume_open,
        "rates_per_s": list(held.rates_per_s),
        "chi2": held.chi2,
        "degrees_of_freedom": int(held.freedom),
    }


def _study(study: RateStudy) -> Json:
    found, up = study.sensitivities, study.upturn
    return {
        "plastic_strain": study.plastic_strain,
        "temperature_k": study.temperature_k,
        "quasi_static": _sensitivity(found.quasi_static),
        "bar": _sensitivity(found.bar),
        "all": _sensitivity(found.all),
        "why_not": dict(found.reasons),
        "upturn": {
            "outcome": up.outcome.value,
            "reason": up.reason,
            "break_rate_per_s": up.break_per_s,
            "m_below": _estimate(up.exponent_below),
            "m_above": _estimate(up.exponent_above),
            "relative_rise": _estimate(up.rise),
            "f_value": up.f_value,
            "p_value": up.p_value,
            "allowance": up.allowance,
        },
    }


def _extreme(extreme: Extreme) -> Json:
    return {
        "place": extreme.place.value,
        "temperature_k": extreme.temperature_k,
        "u_temperature_k": extreme.u_temperature_k,
        "interval_95_k": None if extreme.interval_k is None else list(extreme.interval_k),
        "stress_pa": extreme.stress_pa,
        "u_stress_pa": extreme.u_stress_pa,
        "bracketed_share": extreme.bracketed_share,
    }


def _course(one: CourseAtRate) -> Json:
    said: Json = {
        "plastic_strain": one.plastic_strain,
        "rate_per_s": one.rate_per_s,
        "conditions": [number + 1 for number in one.conditions],
        "why_not": one.why_not,
    }
    course = one.course
    if course is None:
        return said
    return said | {
        "temperatures_k": course.temperature_k.tolist(),
        "true_stresses_pa": course.stress_pa.tolist(),
        "u_own_true_stresses_pa": course.u_pa.tolist(),
        "rises": bool(course.rises),
        "rise_pa": course.rise_pa,
        "u_rise_pa": course.u_rise_pa,
        "rise_between_k": list(course.rise_between_k),
        "chance": course.chance,
        "minimum": _extreme(course.minimum),
        "peak": _extreme(course.peak),
        "reason": course.reason,
    }


def _shift(shift: PeakShift) -> Json:
    return {
        "kelvin_per_decade": _estimate(shift.kelvin_per_decade),
        "activation_energy_j": _estimate(shift.activation_energy_j),
        "activation_energy_j_per_mol": _estimate(shift.activation_energy_j_per_mol),
        "activation_energy_open": shift.energy_open,
        "rates_used_per_s": list(shift.used),
        "rates_left_out_per_s": list(shift.left_out),
    }


def _law(fit: ModelFit) -> Json:
    return {
        "law": fit.model.key,
        "name": fit.model.name,
        "formula": fit.model.formula,
        "source": fit.model.source,
        "taken_as_known": dict(fit.model.known_facts()),
        "points": len(fit.points),
        "conditions": len(fit.points.conditions),
        "parameters": [
            {
                "name": e.name,
                "unit": e.unit,
                "meaning": e.meaning,
                "standing": e.standing.value,
                "value": e.value,
                "u": e.u,
                "interval_95": None if e.low is None or e.high is None else [e.low, e.high],
                "reason": e.reason,
            }
            for e in fit.estimates
        ],
        "covariance": fit.covariance.tolist(),
        "correlation": fit.correlation.tolist(),
        "shared_errors": [
            {"name": s.name, "relative_error": s.d, "u": s.u, "stated_u": s.prior_u} for s in fit.shared
        ],
        "chi2": fit.chi2,
        "degrees_of_freedom": int(fit.degrees_of_freedom),
        "scatter_factor": fit.scatter_factor,
        "shared_factor": fit.shared_factor,
        "aicc": fit.aicc,
        "left_out_rms": fit.left_out_rms,
        "residuals": [
            {
                "condition": one.condition + 1,
                "rate_per_s": one.rate_per_s,
                "temperature_k": one.temperature_k,
                "points": int(one.points),
                "relative_mean": one.mean,
                "relative_rms": one.rms,
                "longest_run": int(one.longest_run),
                "left_out_rms": one.left_out_rms,
                "left_out_reason": one.left_out_reason,
            }
            for one in fit.conditions
        ],
        "condition_number": fit.condition_number,
        "converged": bool(fit.converged),
        "warnings": list(fit.warnings),
    }
