"""Which number of a merge is which column, unit and label in its file: the one table of that layout."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple, TypeVar

import numpy as np

from shpb.arrays import FloatArray
from shpb.fitting.weighted_line import Estimate
from shpb.merge.campaign import MergedMaterial
from shpb.merge.model_fit import ModelFit
from shpb.merge.sensitivity import RateSensitivity
from shpb.merge.temperature import Extreme

FORMAT = "shpb-merge"
FORMAT_VERSION = 1

T = TypeVar("T")
R = TypeVar("R")
Cell = float | int | str | None


class Column(NamedTuple):
    """One column of a table in the file; None is NaN among numbers."""

    name: str
    units: str
    label: str
    values: Sequence[Cell]


def _each(items: Sequence[T | None], of: Callable[[T], R]) -> list[R | None]:
    """What ``of`` gives for each item, None for none."""
    return [None if item is None else of(item) for item in items]


def flow_columns(material: MergedMaterial) -> tuple[Column, ...]:
    """The merged table, one row a condition and plastic strain."""
    rows = material.rows
    return (
        Column("condition", "", "Number of the condition", [r.condition for r in rows]),
        Column("range", "", "Kind of test", [r.range.value for r in rows]),
        Column("plastic_strain", "", "True plastic strain", [r.plastic_strain for r in rows]),
        Column("stress", "Pa", "Mean true stress", [r.stress_pa for r in rows]),
        Column("u_stress", "Pa", "Standard uncertainty of it, own and shared parts", [r.u_pa for r in rows]),
        Column("u_own_stress", "Pa", "Its own part", [r.u_own_pa for r in rows]),
        Column("u_shared_stress", "Pa", "What tests of one rig share", [r.u_shared_pa for r in rows]),
        Column("scatter_stress", "Pa", "Standard deviation among the repeats", [r.scatter_pa for r in rows]),
        Column("tests", "", "Tests that are valid there", [r.count for r in rows]),
        Column("rate", "1/s", "True strain rate there", [r.rate_per_s for r in rows]),
        Column("least_rate", "1/s", "Lowest rate of the condition", [r.rate_range_per_s[0] for r in rows]),
        Column(
            "greatest_rate", "1/s", "Highest rate of the condition", [r.rate_range_per_s[1] for r in rows]
        ),
        Column("temperature", "K", "Temperature at the start", [r.temperature_k for r in rows]),
        Column("temperature_rise", "K", "Adiabatic rise up to there", [r.rise_k for r in rows]),
        Column("isothermal_stress", "Pa", "Stress at the start temperature", [r.isothermal_pa for r in rows]),
        Column(
            "u_isothermal_stress",
            "Pa",
            "Standard uncertainty of the isothermal stress",
            [r.u_isothermal_pa for r in rows],
        ),
    )


def sensitivity_columns(material: MergedMaterial) -> tuple[Column, ...]:
    """Rate sensitivity, one row a plastic strain, temperature and set of tests."""
    found: list[tuple[float, float, str, RateSensitivity | None, str]] = []
    for study in material.rates:
        for tests in ("quasi_static", "bar", "all"):
            held: RateSensitivity | None = getattr(study.sensitivities, tests)
            why = study.sensitivities.reasons.get(tests, "")
            found.append((study.plastic_strain, study.temperature_k, tests, held, why))
    some = [one[3] for one in found]
    columns = [
        Column("plastic_strain", "", "True plastic strain", [one[0] for one in found]),
        Column("temperature", "K", "Temperature of the tests", [one[1] for one in found]),
        Column("tests", "", "Within which tests", [one[2] for one in found]),
        Column("least_rate", "1/s", "Lowest rate", _each(some, lambda s: s.rates_per_s[0])),
        Column("greatest_rate", "1/s", "Highest rate", _each(some, lambda s: s.rates_per_s[1])),
    ]
    columns += estimate_columns("m", "", "d ln(stress)/d ln(rate)", _each(some, lambda s: s.exponent))
    columns += estimate_columns(
        "stress_per_decade", "Pa", "d stress/d log10(rate)", _each(some, lambda s: s.per_decade_pa)
    )
    columns += estimate_columns(
        "C", "", "Rate coefficient at reference_rate", _each(some, lambda s: s.coefficient)
    )
    columns += estimate_columns(
        "activation_volume",
        "m3",
        "sqrt(3) k T/(d stress/d ln rate)",
        _each(some, lambda s: s.activation_volume_m3),
    )
    columns += [
        Column("reference_rate", "1/s", "Of C", _each(some, lambda s: s.reference_rate_per_s)),
        Column("chi2", "", "Of the line", _each(some, lambda s: s.chi2)),
        Column("freedom", "", "Degrees of freedom", _each(some, lambda s: s.freedom)),
        Column("why_not", "", "Why it cannot be told", [one[4] for one in found]),
    ]
    return tuple(columns)


def estimate_columns(name: str, units: str, label: str, estimates: Sequence[Estimate | None]) -> list[Column]:
    """Value, standard uncertainty and both ends of the 95 % interval."""
    low, high = (f"{which} end of the 95 % interval: {label}" for which in ("Lower", "Upper"))
    return [
        Column(name, units, label, _each(estimates, lambda e: e.value)),
        Column(f"u_{name}", units, f"Standard uncertainty: {label}", _each(estimates, lambda e: e.u)),
        Column(f"low_{name}", units, low, _each(estimates, lambda e: e.interval[0])),
        Column(f"high_{name}", units, high, _each(estimates, lambda e: e.interval[1])),
    ]  # fmt: skip


def upturn_columns(material: MergedMaterial) -> tuple[Column, ...]:
    """Whether the stress turns up at high rates, one row a plastic strain and temperature."""
    studies = material.rates
    found = [study.upturn for study in studies]
    return (
        Column("plastic_strain", "", "True plastic strain", [s.plastic_strain for s in studies]),
        Column("temperature", "K", "Temperature of the tests", [s.temperature_k for s in studies]),
        Column("outcome", "", "What the points say", [u.outcome.value for u in found]),
        Column("break_rate", "1/s", "Rate of the break", [u.break_per_s for u in found]),
        *estimate_columns(
            "m_below", "", "d ln(stress)/d ln(rate) below the break", [u.exponent_below for u in found]
        ),
        *estimate_columns(
            "m_above", "", "d ln(stress)/d ln(rate) above the break", [u.exponent_above for u in found]
        ),
        *estimate_columns("rise", "", "Relative rise at the highest rate", [u.rise for u in found]),
        Column("f_value", "", "F of the break against one line", [u.f_value for u in found]),
        Column("p_value", "", "Chance of it without a break", [u.p_value for u in found]),
        Column("allowance", "", "Relative rise allowed for other causes", [u.allowance for u in found]),
        Column("reason", "", "In words", [u.reason for u in found]),
    )


def extreme_attributes(name: str, extreme: Extreme) -> dict[str, object]:
    """A minimum or a peak over temperature, as attributes; what is not known is left out."""
    held: dict[str, object | None] = {
        name: extreme.place.value,
        f"{name}_temperature": extreme.temperature_k,
        f"u_{name}_temperature": extreme.u_temperature_k,
        f"{name}_interval": extreme.interval_k,
        f"{name}_stress": extreme.stress_pa,
        f"u_{name}_stress": extreme.u_stress_pa,
        f"{name}_bracketed_share": extreme.bracketed_share,
    }
    return {key: value for key, value in held.items() if value is not None}


def parameter_columns(fit: ModelFit) -> tuple[Column, ...]:
    """The parameters of a law; ``value_used`` is what its flow curves use, also where none is determined."""
    held = fit.estimates
    return (
        Column("name", "", "As in the formula", [e.name for e in held]),
        Column("unit", "", "SI", [e.unit for e in held]),
        Column("value", "", "Estimate, in its unit", [e.value for e in held]),
        Column("u", "", "Standard uncertainty", [e.u for e in held]),
        Column("low", "", "Lower end of the 95 % interval", [e.low for e in held]),
        Column("high", "", "Upper end of the 95 % interval", [e.high for e in held]),
        Column("standing", "", "How it came by its value", [e.standing.value for e in held]),
        Column("reason", "", "Why it is not fitted", [e.reason for e in held]),
        Column("meaning", "", "Of the parameter", [e.meaning for e in held]),
        Column("value_used", "", "Number that the flow curves use", fit.parameters.tolist()),
    )


def residual_columns(fit: ModelFit) -> tuple[Column, ...]:
    """How a law meets each condition, relative to its stress."""
    held = fit.conditions
    return (
        Column("condition", "", "Number of the condition", [c.condition for c in held]),
        Column("rate", "1/s", "Mean true rate", [c.rate_per_s for c in held]),
        Column("temperature", "K", "Temperature at the start", [c.temperature_k for c in held]),
        Column("points", "", "How many", [c.points for c in held]),
        Column("mean", "", "Mean of measured less law, relative", [c.mean for c in held]),
        Column("rms", "", "Root mean square of it", [c.rms for c in held]),
        Column("longest_run", "", "Longest row of one sign", [c.longest_run for c in held]),
        Column("left_out_rms", "", "Of the prediction by a fit without it", [c.left_out_rms for c in held]),
        Column("left_out_reason", "", "Why there is none", [c.left_out_reason for c in held]),
    )


def point_columns(fit: ModelFit) -> tuple[Column, ...]:
    """The points that a law was fitted to, with its stress there."""
    points = fit.points
    return (
        Column("condition", "", "Number of the condition", points.condition.tolist()),
        Column("plastic_strain", "", "True plastic strain", points.plastic_strain.tolist()),
        Column("rate", "1/s", "True strain rate", points.rate_per_s.tolist()),
        Column("start_temperature", "K", "Temperature at the start", points.temperature_k.tolist()),
        Column("temperature", "K", "Temperature there by the law", fit.temperature_k.tolist()),
        Column("stress", "Pa", "True stress, measured", points.stress_pa.tolist()),
        Column("u_own_stress", "Pa", "Its own standard uncertainty", points.u_own_pa.tolist()),
        Column("law_stress", "Pa", "True stress of the law", fit.stress_pa.tolist()),
        Column(
            "residual", "", "Measured less law, relative", (points.stress_pa / fit.stress_pa - 1).tolist()
        ),
    )


def shared_columns(fit: ModelFit) -> tuple[Column, ...]:
    """Scale errors that the points of a rig or machine share, as the fit found them."""
    return (
        Column("name", "", "Rig or machine", [s.name for s in fit.shared]),
        Column("d", "", "Relative error of stress found", [s.d for s in fit.shared]),
        Column("u", "", "Standard uncertainty of it", [s.u for s in fit.shared]),
        Column("prior_u", "", "Standard uncertainty that was stated", [s.prior_u for s in fit.shared]),
    )


def numbers(values: Sequence[Cell]) -> FloatArray:
    """Values as floats, None as NaN."""
    return np.array([np.nan if value is None else float(value) for value in values], dtype=np.float64)
