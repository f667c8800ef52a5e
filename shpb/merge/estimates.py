"""From the minimum of a fit to its parameters: uncertainty, interval, and what was not determined."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from shpb.arrays import FloatArray
from shpb.fitting.least_squares import LeastSquaresFit, null_directions
from shpb.merge.fit_problem import WALL, FitProblem
from shpb.merge.model_fit import ParameterEstimate, SharedEstimate, Standing
from shpb.merge.models.model import Model, Parameter
from shpb.merge.statements import bound_reason

_TINY = 1e-300
_ENOUGH_SHARED = 3
_STOPPED = 0.9 * WALL
_MOVES = 1e-9  # share of a silent direction below which a parameter does not take part in it


def covariance_inside(problem: FitProblem, found: LeastSquaresFit) -> FloatArray:
    """Covariance within the directions that the points determine, shape (parameters, parameters)."""
    count, free = problem.count, np.flatnonzero(problem.free)
    size, per = len(problem.model.parameters), problem.per_variable(found.parameters)
    covariance = np.zeros((size, size))
    covariance[np.ix_(free, free)] = found.covariance_inside[:count, :count] * np.outer(per, per)
    covariance *= shared_factor(problem, found) ** 2
    return covariance


def covariance_and_correlation(problem: FitProblem, found: LeastSquaresFit) -> tuple[FloatArray, FloatArray]:
    """Of all parameters, shape (parameters, parameters): zero covariance where not fitted, infinite variance where not
    determined.
    """
    count, free = problem.count, np.flatnonzero(problem.free)
    size, per = len(problem.model.parameters), problem.per_variable(found.parameters)
    covariance, correlation = np.zeros((size, size)), np.eye(size)
    correlation[np.ix_(free, free)] = found.correlation[:count, :count]
    known = np.where(np.isfinite(found.covariance), found.covariance, 0.0)[:count, :count]
    covariance[np.ix_(free, free)] = known * np.outer(per, per) * shared_factor(problem, found) ** 2
    open_ones = free[~found.determined[:count] & ~found.at_bound[:count]]
    covariance[open_ones, open_ones] = np.inf
    return covariance, correlation


def shared_factor(problem: FitProblem, found: LeastSquaresFit) -> float:
    """By how much the covariance is widened because the scale errors are larger than stated, never below 1.

    Root mean square of their pulls; from three on, since of one or two it says nothing.
    """
    return max(1.0, problem.pull(found.parameters)) if problem.prior_u.size >= _ENOUGH_SHARED else 1.0


def silent_directions(problem: FitProblem, found: LeastSquaresFit) -> FloatArray:
    """Directions of the parameters along which no point changes, shape (directions, parameters).

    Each is so long that the parameter that moves most moves by itself, or by its usual size if it is smaller.
    """
    inner = null_directions(problem.problem, found)[:, : problem.count]
    full = np.zeros((inner.shape[0], len(problem.model.parameters)))
    full[:, problem.free] = inner * problem.per_variable(found.parameters)
    moves = np.abs(full) / _sizes(problem, found)
    return np.asarray(full / np.max(moves, axis=1, keepdims=True, initial=_TINY))


def _sizes(problem: FitProblem, found: LeastSquaresFit) -> FloatArray:
    values = np.abs(problem.parameters(found.parameters))
    return np.asarray(np.maximum(values, problem.model.sizes(problem.points)))


def estimates_of(
    problem: FitProblem,
    found: LeastSquaresFit,
    *,
    fixed: Mapping[str, float],
    held: Mapping[str, str],
    silent: FloatArray,
) -> tuple[ParameterEstimate, ...]:
    """Estimate of every parameter of the law: ``fixed`` by the user, ``held`` for a reason, or fitted."""
    values = problem.parameters(found.parameters)
    moves = np.abs(silent) / _sizes(problem, found)
    factor = shared_factor(problem, found)
    place, estimates = 0, []
    for k, parameter in enumerate(problem.model.parameters):
        value = float(values[k])
        if parameter.name in fixed:
            one = _without_u(parameter, Standing.FIXED, value, "fixed by the user")
        elif parameter.name in held:
            one = _without_u(parameter, Standing.HELD, value, held[parameter.name])
        else:
            if found.at_bound[place]:
                one = _at_bound(parameter, value)
            elif not found.determined[place]:
                one = _without_u(parameter, Standing.NOT_DETERMINED, None, _instead(problem.model, moves, k))
            else:
                one = _fitted(parameter, value, problem, found, place, factor)
            place += 1
        estimates.append(one)
    return tuple(estimates)


def _without_u(
    parameter: Parameter, standing: Standing, value: float | None, reason: str
) -> ParameterEstimate:
    return ParameterEstimate(
        name=parameter.name, unit=parameter.unit, meaning=parameter.meaning, standing=standing, value=value,
        reason=reason,
    )  # fmt: skip


def _at_bound(parameter: Parameter, value: float) -> ParameterEstimate:
    lower = abs(value - parameter.lower) <= abs(value - parameter.upper)
    bound = parameter.lower if lower else parameter.upper
    return _without_u(parameter, Standing.AT_BOUND, bound, bound_reason(lower, bound, parameter.unit))


def _instead(model: Model, moves: FloatArray, k: int) -> str:
    """Why the points do not determine parameter ``k``: which others can take its place."""
    along = moves[moves[:, k] > _MOVES]
    names = [model.names[i] for i in np.flatnonzero((along > _MOVES).any(axis=0)) if i != k]
    return (
        "no point changes with it" if not names else f"the points cannot tell it from {' and '.join(names)}"
    )


def _fitted(
    parameter: Parameter, value: float, problem: FitProblem, found: LeastSquaresFit, place: int, factor: float
) -> ParameterEstimate:
    from scipy.special import stdtrit

    inner = factor * float(found.u_parameters[place])
    u = inner * float(problem.per_variable(found.parameters)[place])
    reach = float(stdtrit(problem.freedom(found), 0.975))
    if parameter.by_ratio:
        wide = float(np.exp(min(reach * inner, 700.0)))  # beyond it a factor is infinite for all purposes
        low, high = value / wide, value * wide
    else:
        low, high = value - reach * u, value + reach * u
    return ParameterEstimate(
        name=parameter.name, unit=parameter.unit, meaning=parameter.meaning, standing=Standing.FITTED, value=value,
        u=u, low=max(low, parameter.lower), high=min(high, parameter.upper),
    )  # fmt: skip


def shared_estimates(problem: FitProblem, found: LeastSquaresFit) -> tuple[SharedEstimate, ...]:
    """What the fit found for each shared error."""
    errors, u = found.parameters[problem.count :], found.u_parameters[problem.count :]
    return tuple(
        SharedEstimate(
            name=one.name,
            d=float(d),
            u=float(spread) if abs(d) < _STOPPED * one.relative_u else None,
            prior_u=one.relative_u,
        )
        for one, d, spread in zip(problem.points.shared, errors, u, strict=True)
    )
