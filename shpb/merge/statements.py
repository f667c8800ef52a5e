"""What the data cannot tell, in plain words: for the warnings of a fit."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.cross_check import varied
from shpb.merge.model_fit import ConditionResidual, ParameterEstimate, SharedEstimate, Standing
from shpb.merge.models.model import Model
from shpb.merge.points import FlowPoints

_ALIKE = 0.98  # correlation beyond which two parameters trade against each other (common practice)
_VAGUE = 0.5  # relative uncertainty beyond which a value says little
_PULLED = 2.0
_FEW = 3
_RUN_POINTS = 5
_WIDE = 2.0
_STRETCHED = 1.3


def about_parameters(
    model: Model, estimates: tuple[ParameterEstimate, ...], correlation: FloatArray
) -> tuple[str, ...]:
    """Parameters that are held, at a bound, undetermined, vague, or tied to one another."""
    said = [f"{e.name}: {e.reason}" for e in estimates if e.reason and e.standing != Standing.FIXED]
    for one in estimates:
        if one.u and one.value is not None and one.u > _VAGUE * abs(one.value) and one.value != 0:
            said.append(f"{one.name} is known to {100 * one.u / abs(one.value):.0f} % only")
    fitted = [k for k, one in enumerate(estimates) if one.standing == Standing.FITTED]
    for place, i in enumerate(fitted):
        for j in fitted[place + 1 :]:
            if abs(correlation[i, j]) > _ALIKE:
                said.append(
                    f"{model.names[i]} and {model.names[j]} trade against each other (correlation "
                    f"{correlation[i, j]:.3f}): use them together, not one alone"
                )
    return tuple(said)


def about_points(model: Model, points: FlowPoints) -> tuple[str, ...]:
    """What the law or the points leave out."""
    said, there = [], varied(points)
    if not model.uses_rate and "rates" in there:
        rates = points.mean_rates_per_s()
        said.append(
            f"{model.name} knows no rate: points from {rates.min():.3g} to {rates.max():.3g} /s are taken as one"
        )
    if model.uses_temperature and points.adiabatic.any() and points.heat_k_m3_j is None:
        said.append(
            "adiabatic points are taken as if they kept their start temperature: share of heat, density or heat "
            "capacity is not known"
        )
    reference = model.known_facts().get("reference_temperature_k")
    if reference is not None and points.temperature_k.min() < reference - 1.0:
        said.append(
            f"points at {points.temperature_k.min():.0f} K lie below the reference temperature of {reference:.0f} K, "
            "where the law no longer changes with temperature: state a lower one"
        )
    return tuple(said)


def about_residuals(
    conditions: tuple[ConditionResidual, ...],
    shared: tuple[SharedEstimate, ...],
    scatter_factor: float,
    shared_factor: float,
    own_correlation: float,
) -> tuple[str, ...]:
    """Signs that the law does not hold, or that errors are not what they are said to be."""
    said = []
    one_sided = [c for c in conditions if c.points >= _RUN_POINTS and c.longest_run == c.points]
    if own_correlation == 0 and one_sided and 2 * len(one_sided) >= len(conditions):
        said.append(
            f"in {len(one_sided)} of {len(conditions)} conditions every point lies on one side of the law: their "
            "points are not independent, and the intervals are too narrow: state own_correlation, or a shared error of "
            "each condition"
        )
    if scatter_factor > _WIDE:
        said.append(
            f"the points scatter about the law by {scatter_factor:.1f} times their own uncertainty: the law does not "
            "hold within it, or the uncertainty is stated too small; the intervals are widened accordingly"
        )
    if shared_factor > _STRETCHED:
        said.append(
            f"scale errors come out {shared_factor:.1f} times as large as stated: the law does not hold from one "
            "condition to the next, or they are stated too small; the intervals are widened accordingly"
        )
    pulled = [one for one in shared if abs(one.d) > _PULLED * one.prior_u]
    pulled.sort(key=lambda one: -abs(one.d) / one.prior_u)
    for one in pulled[:_FEW]:
        limit = ", where it was stopped" if one.u is None else ""
        said.append(
            f"{one.name}: the fit wants a scale error of {100 * one.d:+.2f} %, {abs(one.d) / one.prior_u:.1f} times "
            f"its stated uncertainty{limit}"
        )
    if len(pulled) > _FEW:
        said.append(f"and {len(pulled) - _FEW} more scale errors beyond {_PULLED:g} times their uncertainty")
    return tuple(said)


def bound_reason(lower: bool, bound: float, unit: str) -> str:
    """Why a parameter at a bound has no uncertainty."""
    side, more = ("lower", "less") if lower else ("upper", "more")
    of_unit = "" if unit == "1" else f" {unit}"
    return (
        f"at its {side} bound {np.format_float_positional(bound, trim='-')}{of_unit}: the points want {more}"
    )
