"""Other starts for a least-squares fit whose first one ended badly.

Parameters that enter linearly are found by the routine itself and solved for exactly at each trial of the others
(variable projection), so that a coarse scatter of the others is enough to find the right valley.

References
----------
G. H. Golub, V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413-432.
"""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.fitting.least_squares import Problem

_SEED = 20240229
_SCATTERED = 400  # of each of the two kinds of scatter
_KEPT = 12


def linear_parameters(problem: Problem, at: FloatArray) -> tuple[int, ...]:
    """Indices of parameters in which the residuals are jointly linear, as tried at ``at``."""
    here = problem.at(at)
    if not np.isfinite(here).all():
        return ()
    size = np.where(at != 0, np.abs(at), 1.0)

    def change(moves: dict[int, float]) -> FloatArray:
        point = at.copy()
        for k, share in moves.items():
            point[k] += share * size[k]
        return problem.at(point) - here

    def same(a: FloatArray, b: FloatArray) -> bool:
        scale = np.abs(a).max(initial=0.0) + 1e-6 * np.abs(here).max(initial=0.0)
        return bool(np.isfinite(a).all() and np.isfinite(b).all() and np.abs(a - b).max() <= 1e-8 * scale)

    found: list[int] = []
    for k in range(at.size):
        one = change({k: 0.37})
        if not (same(one * 5, change({k: 1.85})) and same(-one, change({k: -0.37})) and np.any(one)):
            continue
        if all(same(one + change({j: 0.61}), change({k: 0.37, j: 0.61})) for j in found):
            found.append(k)
    return tuple(found)


def _trials(others: FloatArray) -> list[FloatArray]:
    """Trial values of the parameters that are not linear: all scaled alike, then scattered far and near."""
    random = np.random.default_rng(_SEED)
    trials = [others * 10.0**power for power in np.arange(-8.0, 8.01, 0.25)]
    size = np.where(others != 0, others, 1.0)
    for _ in range(_SCATTERED):
        signs = np.where(random.random(others.size) < 0.15, -1.0, 1.0)
        trials.append(signs * size * 10.0 ** random.normal(0.0, 1.0, others.size))
        trials.append(others + 0.3 * size * random.normal(0.0, 1.0, others.size))
    return trials


def _completed(
    problem: Problem, trial: FloatArray, start: FloatArray, linear: list[int], rest: list[int]
) -> FloatArray | None:
    """The trial with the best linear parameters; None where it has no value or lies outside the bounds."""
    point = start.copy()
    point[rest] = trial
    if not linear:
        return point
    point[linear] = 0.0
    base = problem.at(point)
    columns = []
    for k in linear:
        one = point.copy()
        one[k] = 1.0
        columns.append(problem.at(one) - base)
    design = np.column_stack(columns)
    length = np.sqrt(np.sum(design**2, axis=0))
    if not (np.isfinite(design).all() and np.isfinite(base).all() and np.isfinite(length).all()):
        return None
    length = np.where(length > 0, length, 1.0)
    point[linear] = np.linalg.lstsq(design / length, -base, rcond=1e-10)[0] / length
    return point


def other_starts(problem: Problem, start: FloatArray, *, keep: int = _KEPT) -> list[FloatArray]:
    """The ``keep`` best of many trial points around ``start``, no two of them alike; seeded, hence repeatable."""
    linear = list(linear_parameters(problem, problem.inside(start)))
    rest = [k for k in range(start.size) if k not in linear]
    ranked: list[tuple[float, FloatArray]] = []
    with np.errstate(all="ignore"):
        for trial in _trials(start[rest]):
            point = _completed(problem, trial, start, linear, rest)
            if point is None or not (np.isfinite(point).all() and np.all(point == problem.inside(point))):
                continue
            cost = problem.cost(point)
            if np.isfinite(cost):
                ranked.append((cost, point))
    ranked.sort(key=lambda pair: pair[0])
    kept: list[FloatArray] = []
    for _, point in ranked:
        if all(np.abs(np.arcsinh(point) - np.arcsinh(one)).max() > 0.05 for one in kept):
            kept.append(point)
        if len(kept) == keep:
            break
    return kept
