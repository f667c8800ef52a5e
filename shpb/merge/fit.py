"""Fit a constitutive law to the points of a campaign: weighted, with shared errors, along the adiabatic path.

Every point counts with its own uncertainty; an error that many points share (the scale of a rig) is one more
unknown with its stated uncertainty. Where points are adiabatic, the law is asked along its own heated path.
What the points cannot tell is held or left open, and said.

References
----------
JCGM 100:2008 and JCGM 102:2011 (shared errors as common terms); R. T. Birge, Phys. Rev. 40 (1932) 207-227 (widening
where the scatter exceeds the stated uncertainty).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.errors import InputError
from shpb.fitting.least_squares import LeastSquaresFit
from shpb.merge.cross_check import corrected_akaike, overall, residuals_by_condition, unknowable
from shpb.merge.estimates import (
    covariance_and_correlation,
    covariance_inside,
    estimates_of,
    shared_estimates,
    shared_factor,
    silent_directions,
)
from shpb.merge.fit_problem import FitProblem
from shpb.merge.model_fit import ModelFit
from shpb.merge.models.model import Model, State
from shpb.merge.points import FlowPoints
from shpb.merge.rise import rise_with_temperature
from shpb.merge.statements import about_parameters, about_points, about_residuals

_ONE_TEMPERATURE_K = 10.0
_WIDENINGS = 20


def fit_model(
    model: Model,
    points: FlowPoints,
    fixed: Mapping[str, float] | None = None,
    *,
    across_peak: bool = False,
    leave_out: bool = True,
) -> ModelFit:
    """Fit a law to flow points.

    Parameters
    ----------
    model : Model
        With its facts stated (:meth:`Model.with_facts`).
    points : FlowPoints
    fixed : mapping of str to float, optional
        Parameters that keep a value [SI].
    across_peak : bool
        Fit a law that can only soften although the stress of the points rises with temperature somewhere.
    leave_out : bool
        Whether each condition is left out in turn and predicted by a fit to the others.

    Returns
    -------
    ModelFit

    Raises
    ------
    InputError
        If there are too few points, a fact or a parameter does not fit, the law has no temperature and the points
        have several, or the stress rises with temperature and the law cannot.
    """
    values = _checked_fixed(model, fixed or {})
    _refuse(model, points)
    warnings = _across_peak(model, points, across_peak)
    base, free, held = _held(model, points, values)
    if not free.any():
        reasons = "; ".join(f"{name} is {why}" for name, why in held.items())
        raise InputError(
            f"nothing is left to fit: the others are fixed, and {reasons}", where=model.key,
            mend="Add points at other rates or temperatures, or fix fewer parameters",
        )  # fmt: skip
    if len(points) < int(free.sum()) + 1:
        raise InputError(
            f"{len(points)} point{'s' if len(points) != 1 else ''} for {int(free.sum())} parameters of {model.name} "
            f"({', '.join(n for n, f in zip(model.names, free, strict=True) if f)})",
            where="points",
            mend=f"Give at least {int(free.sum()) + 1} points, or fix parameters",
        )
    problem, found = _solved(model, points, base, free)
    if not np.isfinite(found.sum_of_squares):
        raise InputError("the law has no finite stress near any start", where=model.key)
    silent = silent_directions(problem, found)
    covariance, correlation = covariance_and_correlation(problem, found)
    estimates = estimates_of(problem, found, fixed=values, held=held, silent=silent)
    shared, factor = shared_estimates(problem, found), shared_factor(problem, found)
    variables, widened, chi2 = found.parameters, problem.widened, problem.chi2(found.parameters)
    conditions = residuals_by_condition(problem, variables, leave_out=leave_out)
    if not found.converged:
        warnings += ("the fit did not converge: its numbers are the best found, not the best there are",)
    return ModelFit(
        model=model,
        points=points,
        estimates=estimates,
        parameters=problem.parameters(variables),
        covariance=covariance,
        covariance_inside=covariance_inside(problem, found),
        correlation=correlation,
        silent=silent,
        shared=shared,
        chi2=chi2,
        degrees_of_freedom=problem.freedom(found),
        scatter_factor=widened,
        shared_factor=factor,
        aicc=corrected_akaike(chi2, len(points), problem.count),
        left_out_rms=overall(conditions),
        conditions=conditions,
        stress_pa=problem.law_pa(variables),
        temperature_k=problem.temperature_k(variables).copy(),
        condition_number=found.condition_number,
        converged=found.converged,
        warnings=(
            *warnings,
            *about_points(model, points),
            *about_parameters(model, estimates, correlation),
            *about_residuals(conditions, shared, widened, factor, points.own_correlation),
        ),
    )


def _checked_fixed(model: Model, fixed: Mapping[str, float]) -> dict[str, float]:
    for name, value in fixed.items():
        parameter = model.parameters[model.position(name)]
        if not (np.isfinite(value) and parameter.lower <= value <= parameter.upper):
            raise InputError(
                f"found {value:g}, expected {parameter.lower:g} to {parameter.upper:g} (unit {parameter.unit})",
                where=f"{model.key}, fixed {name}",
            )
    if len(fixed) == len(model.parameters):
        raise InputError("every parameter is fixed, nothing is left to fit", where=model.key)
    return dict(fixed)


def _refuse(model: Model, points: FlowPoints) -> None:
    facts = model.known_facts()
    state = State(points.plastic_strain, points.rate_per_s, points.temperature_k, facts)
    if why := model.refuses(state):
        raise InputError(why, where=model.key)
    starts = points.start_temperatures_k()
    if not model.uses_temperature and np.ptp(starts) > _ONE_TEMPERATURE_K:
        raise InputError(
            f"mixed temperatures, {starts.min():.0f} to {starts.max():.0f} K, and {model.name} knows no temperature",
            where="points",
            mend="Select the points of one temperature, or take a law with temperature",
        )


def _across_peak(model: Model, points: FlowPoints, allowed: bool) -> tuple[str, ...]:
    rise = rise_with_temperature(points) if model.softening_only else None
    if rise is None:
        return ()
    if not allowed:
        raise InputError(
            f"{model.name} can only soften with temperature, but {rise.in_words()}",
            where="points",
            mend="Fit below or above the peak, take a law that can rise, or say across_peak=True to fit all the same",
        )
    return (f"fitted across a strength peak that {model.name} cannot represent: {rise.in_words()}",)


def _held(
    model: Model, points: FlowPoints, values: dict[str, float]
) -> tuple[FloatArray, BoolArray, dict[str, str]]:
    """Start values with the held ones set, which are free, and why the held ones are held."""
    reasons = {}
    base = model.start(points)
    free = np.ones(base.size, dtype=bool)
    for k, (parameter, cannot) in enumerate(zip(model.parameters, unknowable(model, points), strict=True)):
        if parameter.name in values:
            base[k], free[k] = values[parameter.name], False
        elif cannot:
            base[k], free[k] = parameter.held_at, False
            lacking = " and ".join(f"one {need.removesuffix('s')}" for need in parameter.needs)
            reasons[parameter.name] = (
                f"held at {parameter.held_at:g}: the points hold {lacking} only, and so do not tell it"
            )
    return base, free, reasons


def _solved(
    model: Model, points: FlowPoints, base: FloatArray, free: BoolArray
) -> tuple[FitProblem, LeastSquaresFit]:
    """Problem and minimum, with own uncertainties as wide as the scatter about the law.

    Wider own uncertainties leave less to the shared errors, so the minimum moves with them: they are found together.
    The search begins without shared errors and the width that this needs, and comes down from there: begun with the
    stated uncertainties, the shared errors would take up what a law that does not hold leaves over.
    """
    bare = FitProblem(model, replace(points, shared=()), base, free)
    alone = bare.walked(bare.variables(base))
    width = bare.widened_for(alone)
    problem = FitProblem(model, points, base, free, 1.0 if width is None else width.widened)
    variables = problem.walked(problem.variables(bare.parameters(alone)))
    for _ in range(_WIDENINGS):
        wider = problem.widened_for(variables)
        if wider is None:
            break
        problem = wider
        variables = problem.walked(variables)
    found = problem.solve(variables)
    for _ in range(_WIDENINGS):
        wider = problem.widened_for(found.parameters)
        if wider is None:
            break
        problem = wider
        found = problem.again(found.parameters)
    return problem, found
