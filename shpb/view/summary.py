"""The result of one shot for other programs: names and numbers without curves, strict JSON.

Key names carry SI units. A number that is not known is null. ``schema_version`` grows when a key changes
its meaning or goes; new keys may come at any time.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from shpb.errors import FileMistakes, ShpbError
from shpb.limits import USUAL, set_by_lab
from shpb.pulse.pulse import Pulse
from shpb.record.record import Record, Source
from shpb.reduction import ShotResult
from shpb.response.equilibrium import R_DEFINITION, Equilibrium
from shpb.rig.calibration import Calibration
from shpb.trust.budget import ALL_OUTPUTS, COVERAGE_FACTOR, flow_stress_uncertainty_pa
from shpb.version import VERSION
from shpb.view.by_hand_words import by_hand_json
from shpb.view.forward_words import closure_json, corrections_json
from shpb.view.wording import cutoff_fa_c0, formulas, verdict_sentence

if TYPE_CHECKING:
    from shpb.trust.draws import Draws

SCHEMA_VERSION = 1


def head(schema: str) -> Json:
    """What every JSON of the program begins with."""
    return {"schema": schema, "schema_version": SCHEMA_VERSION, "program_version": VERSION}


Json = dict[str, Any]


def shot_json(result: ShotResult) -> Json:
    """Return the summary of one shot, fit for ``json.dumps(..., allow_nan=False)``."""
    sheet, response = result.sheet, result.response
    specimen = sheet.specimen
    counted = slice(*(response.span or response.loading))
    summary = {
        **head("shpb shot"),
        "shot_id": sheet.shot_id,
        "verdict": result.verdict.value,
        "verdict_in_words": verdict_sentence(result),
        "kind": sheet.kind.value,
        "date": sheet.date,
        "temperature_k": sheet.temperature_k,
        "striker_speed_m_s": sheet.striker_speed_m_s,
        "specimen": {
            "material": specimen.material,
            "diameter_m": specimen.diameter_m,
            "length_m": specimen.length_m,
            "length_after_m": specimen.length_after_m,
        },
        "inputs": {
            "records": [
                _source(source) for source in result.record.sources
            ],
            "rig": result.rig.source,
            "sheet": sheet.source,
            "calibration": calibration_json(result.rig.calibration),
        },
        "counts": _span(result),
        "uncertainty": _uncertainty(result),
        "strain_rate": _rate(result),
        "equilibrium": _equilibrium(response.equilibrium),
        "equilibrium_without_tuning": None
        if response.untuned_equilibrium is None
        else _equilibrium(response.untuned_equilibrium),
        "flow": [
            {
                "at_strain": flow.at_strain,
                "strain_kind": "true plastic" if flow.plastic else "total true",
                "true_stress_pa": flow.stress_pa,
                "true_strain_rate_per_s": flow.rate_per_s,
            }
            for flow in response.flow
        ],
        "yield_back_extrapolated_pa": response.yield_back_extrapolated_pa,
        "apparent_slope_pa": response.apparent_slope_pa,
        "indentation_strain": float(response.indentation_strain[counted].max()),
        "corrections": corrections_json(result),
        "greatest_temperature_rise_k": None
        if response.heating_k is None
        else float(response.heating_k.max()),
        "closure": closure_json(result),
        "work_at_faces_j": response.balance.work_j,
        "work_in_specimen_j": response.balance.specimen_work_j,
        "incident_impulse_n_s": response.balance.incident_impulse_n_s,
        "striker_momentum_n_s": response.balance.striker_momentum_n_s,
        "pulses": {pulse.name: _pulse(pulse) for pulse in result.pulses},
        "by_hand": by_hand_json(result.by_hand),
        "processing": _processing(result),
        "remarks": [*result.record.remarks, *result.pulses.remarks],
        "limits_set_by_lab": {
            name: {"limit": getattr(result.settings.limits, name), "usual": getattr(USUAL, name)}
            for name in set_by_lab(result.settings.limits)
        },
        "findings": [
            {
                "check": f.check,
                "weight": f.weight.value,
                "measured": f.measured,
                "limit": f.limit,
                "source": f.source,
                "action": f.action,
            }
            for f in result.findings
        ],
    }  # fmt: skip
    return _plain(summary)  # type: ignore[no-any-return]


def calibration_json(calibration: Calibration | None) -> Json | None:
    """Which calibration, for other programs; None where there is none."""
    if calibration is None:
        return None
    return {
        "name": calibration.name,
        "rig": calibration.rig,
        "date": calibration.date,
        "holds_days": calibration.holds_days,
        "sha256": calibration.sha256,
        "file": calibration.source,
    }


def record_json(record: Record) -> Json:
    """Return what a record holds: files, clock, channels and their extremes, remarks."""
    return _plain(  # type: ignore[no-any-return]
        {
            **head("shpb record"),
            "records": [_source(source) for source in record.sources],
            "samples": record.samples,
            "sample_interval_s": record.sample_interval_s,
            "start_s": record.start_s,
            "channels": [
                {"position": position, "name": name, "least_v": float(v.min()), "greatest_v": float(v.max())}
                for position, (name, v) in enumerate(zip(record.channels, record.voltage_v, strict=True), 1)
            ],
            "remarks": record.remarks,
        }
    )


def error_json(error: BaseException) -> Json:
    """Return an error as an object: what is wrong, where, and the mend."""
    said: Json = {"kind": type(error).__name__, "message": str(error)}
    if isinstance(error, ShpbError):
        said |= {"what": error.what, "where": error.where, "mend": error.mend}
    check = getattr(error, "check", None)
    if isinstance(check, str):
        said["check"] = check
    if isinstance(error, FileMistakes):
        said["mistakes"] = [
            {"file": m.file, "key": m.key, "found": m.found, "expected": m.expected, "mend": m.mend}
            for m in error.mistakes
        ]
    return _plain(  # type: ignore[no-any-return]
        {**head("shpb error"), "error": said}
    )


def json_text(content: object) -> str:
    """Return strict JSON in ASCII, whatever the console's encoding."""
    return json.dumps(_plain(content), indent=2, allow_nan=False)


def _source(source: Source) -> Json:
    return {
        "name": source.name,
        "sha256": source.sha256,
        "size_bytes": source.size_bytes,
        "reader": source.reader,
    }


def _span(result: ShotResult) -> Json | None:
    response = result.response
    if response.span is None or response.strain_span is None:
        return None
    start, stop = response.span
    return {
        "from_true_strain": response.strain_span[0],
        "to_true_strain": response.strain_span[1],
        "from_time_s": response.time_s[start],
        "to_time_s": response.time_s[stop - 1],
    }


def _uncertainty(result: ShotResult) -> Json:
    """Standard uncertainties at the middle of what counts, of flow stresses, and the ranked budget."""
    span = result.response.span or result.response.loading
    middle, budget = (span[0] + span[1]) // 2, result.budget
    ratio = result.response.equilibrium.ratio
    unit = {"stress": "_pa", "strain": "", "strain_rate": "_per_s"}

    def at_middle(values: Mapping[str, Any]) -> Json:
        named = ((name.rsplit("_", 1), array) for name, array in values.items())
        return {f"u_{what}_{wave}{unit[what]}": float(array[middle]) for (what, wave), array in named}

    return {
        "at_mid_span": at_middle(budget.u),
        "shared_by_all_shots_at_mid_span": at_middle(budget.u_shared),
        "u_flow_stress_pa": list(
            flow_stress_uncertainty_pa(budget, result.response, result.sheet.specimen.young_modulus_pa)
        ),
        "coverage_factor": COVERAGE_FACTOR,
        "equilibrium_ratio_at_mid_span": {
            "u_by_all_sources": float(budget.u_force_difference[middle]),
            "interval": [float(end[middle]) for end in budget.interval("force_difference", ratio)],
        },
        "draws": None if result.draws is None else _draws(result.draws, middle),
        "budget": [
            {
                "source": line.source,
                "shared": line.shared,
                "assumed": line.assumed,
                "note": line.note,
                "share_of_variance": {
                    f"of_{name}": share for name, share in zip(ALL_OUTPUTS, line.share, strict=True)
                },
            }
            for line in budget.contributions
        ],
    }


def _draws(draws: Draws, middle: int) -> Json:
    """What the draws give at mid-span, and for the flow stresses."""
    from shpb.trust.drawn_curves import CURVES

    units = {"stress": "_pa", "rate": "_per_s"}

    def unit(curve: str) -> str:
        return next((end for word, end in units.items() if word in curve.split("_")), "")

    return {
        "draws": draws.draws,
        "seed": draws.seed,
        "probability": draws.probability,
        "settled": draws.settled,
        "at_mid_span": {
            f"{which}_{curve}{unit(curve)}": float(draws.of(which, curve)[middle])
            for curve in CURVES
            for which in ("mean", "u", "low", "high")
        },
        "flow": [
            {
                "at_strain": point.at_strain,
                "mean_pa": point.mean_pa,
                "u_pa": point.u_pa,
                "low_pa": point.low_pa,
                "high_pa": point.high_pa,
            }
            for point in draws.flow
        ],
    }


def _rate(result: ShotResult) -> Json:
    rate = result.response.rate
    return {
        "over": "what counts" if result.response.span else "the whole loading",
        "mean_per_s": rate.mean_per_s,
        "mean_true_per_s": rate.mean_true_per_s,
        "median_per_s": rate.median_per_s,
        "least_per_s": rate.least_per_s,
        "greatest_per_s": rate.greatest_per_s,
        "variation": rate.variation,
        "slope": rate.slope,
    }


def _equilibrium(equilibrium: Equilibrium) -> Json:
    return {
        "outcome": equilibrium.outcome.value,
        "definition": R_DEFINITION,
        "limit": equilibrium.limit,
        "mean_ratio": equilibrium.mean_ratio,
        "floor": equilibrium.typical_floor,
        "true_strain_at_start": equilibrium.strain_at_start,
        "share_within": equilibrium.share_within,
        "nrms": equilibrium.nrms,
        "impulse_ratio": equilibrium.impulse_ratio,
        "reverberations": equilibrium.reverberations,
    }


def _pulse(pulse: Pulse) -> Json:
    foot, automatic = pulse.foot, pulse.automatic_foot
    return {
        "window_start_s": pulse.window_s[0],
        "window_end_s": pulse.window_s[1],
        "automatic_window_start_s": pulse.automatic_window_s[0],
        "automatic_window_end_s": pulse.automatic_window_s[1],
        "foot_s": None if foot is None else foot.time_s,
        "u_foot_s": None if foot is None else foot.u_time_s,
        "automatic_foot_s": None if automatic is None else automatic.time_s,
        "set_by_hand": pulse.set_by_hand,
        "noise_strain": pulse.noise,
    }


def _processing(result: ShotResult) -> Json:
    faces = result.faces
    return {
        "waves": result.settings.waves.value,
        "dispersion": result.settings.dispersion.value,
        "alignment": result.settings.alignment.value,
        "analysis": result.response.analysis.value,
        "formulas": formulas(result),
        "low_pass_cutoff_hz": faces.low_pass.cutoff_hz,
        "low_pass_cutoff_fa_c0": cutoff_fa_c0(result),
        "record_time_of_zero_s": faces.record_time_of_zero_s,
        "reflected_misalignment_s": faces.reflected_misalignment_s,
        "transmitted_misalignment_s": faces.transmitted_misalignment_s,
        "u_misalignment_s": faces.u_misalignment_s,
        "reflected_shift_s": faces.reflected_shift_s,
        "transmitted_shift_s": faces.transmitted_shift_s,
    }


def _plain(value: object) -> Any:
    """Numbers, text, lists and dicts only; null for a number that is not finite."""
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if value is None or isinstance(value, bool | int):
        return value
    if isinstance(value, float):  # numpy's double and Quantity are floats
        return float(value) if math.isfinite(value) else None
    # Half a surrogate pair, from a file name that is no UTF-8, is not text that JSON readers take.
    return str(value).encode("utf-8", "backslashreplace").decode("utf-8")
