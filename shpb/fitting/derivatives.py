"""Derivatives of a vector function by central differences, as accurate as rounding allows."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from shpb.arrays import FloatArray

VectorFunction = Callable[[FloatArray], FloatArray]

_EPS = float(np.finfo(float).eps)


def differences(
    function: VectorFunction,
    at: FloatArray,
    lower: FloatArray,
    upper: FloatArray,
    *,
    fine: bool,
    least: float | FloatArray = 1e-8,
) -> FloatArray:
    """Derivatives of a vector function, shape (values, parameters).

    Central differences of order two, or of order four if ``fine``; one-sided of order two where a bound is near
    or the function has no value on one side. ``least`` is the size for which the step is chosen where a parameter is
    smaller.
    """
    columns, sizes = [], np.maximum(np.abs(at), least)
    for k, size in enumerate(sizes):
        # The step that balances rounding against the next term: eps^(1/5) for order four, eps^(1/3) for two.
        step = (_EPS**0.2 if fine else _EPS ** (1 / 3)) * float(size)
        column = _central(function, at, k, step, fine) if _room(at[k], step, lower[k], upper[k]) else None
        if column is None:
            column = _one_sided(function, at, k, _EPS ** (1 / 3) * float(size), lower[k], upper[k])
        columns.append(column)
    return np.column_stack(columns)


def _room(value: float, step: float, lower: float, upper: float) -> bool:
    return lower <= value - 2 * step and value + 2 * step <= upper


def _shifted(function: VectorFunction, at: FloatArray, k: int, shift: float) -> FloatArray:
    point = at.copy()
    point[k] += shift
    return function(point)


def _central(function: VectorFunction, at: FloatArray, k: int, step: float, fine: bool) -> FloatArray | None:
    near = _shifted(function, at, k, step) - _shifted(function, at, k, -step)
    if fine:
        far = _shifted(function, at, k, 2 * step) - _shifted(function, at, k, -2 * step)
        column = (8 * near - far) / (12 * step)
    else:
        column = near / (2 * step)
    return np.asarray(column) if np.isfinite(column).all() else None


def _one_sided(
    function: VectorFunction, at: FloatArray, k: int, step: float, lower: float, upper: float
) -> FloatArray:
    here = function(at)
    for side in (1, -1):
        if lower <= at[k] + 2 * side * step <= upper:
            one, two = _shifted(function, at, k, side * step), _shifted(function, at, k, 2 * side * step)
            column = side * (4 * one - 3 * here - two) / (2 * step)
            if np.isfinite(column).all():
                return np.asarray(column)
    return np.full_like(here, np.nan)


def forward_differences(
    function: VectorFunction, at: FloatArray, here: FloatArray, upper: FloatArray, *, least: float
) -> FloatArray:
    """Derivatives to five digits with one evaluation each, shape (values, parameters), for finding the way.

    ``here`` is the function at ``at``; ``least`` as in :func:`differences`. Backward where ``upper`` is too near.
    """
    columns = []
    for k, value in enumerate(at):
        step = 1e-6 * max(abs(float(value)), 10 * least)
        step = step if value + step <= upper[k] else -step
        columns.append((_shifted(function, at, k, step) - here) / step)
    return np.column_stack(columns)
