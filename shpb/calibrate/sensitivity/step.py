"""One step in a trace, up and perhaps down again: its height, with drift and hum taken out."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.pulse.front import white_noise

_BLOCKS = 400  # the trace is judged on this many means
_MOST_EDGES = 6  # switched by hand: on and off, a bounce or two
_CLEAR = 6.0  # a step is this many times what scatters about its two levels
_HUM_HZ = (50.0, 60.0)
_LEAST_BLOCKS = 8  # on and off, each


class Step(NamedTuple):
    """A step: its height with sign, from the level before it; ``zero`` is that level, ``on`` the sample ranges."""

    height: float
    u_height: float
    zero: float
    on: tuple[tuple[int, int], ...]


def step_in(trace: FloatArray, interval_s: float) -> Step | None:
    """Find the step of a trace that begins at its zero, or None where there is none.

    Parameters
    ----------
    trace : float array, shape (samples,)
    interval_s : float
        Spacing [s]; for hum of 50 and 60 Hz.
    """
    width = max(trace.size // _BLOCKS, 1)
    count = trace.size // width
    if count < 4 * _LEAST_BLOCKS:
        return None
    blocks = trace[: count * width].reshape(count, width)
    means = np.median(blocks, axis=1)
    high = _two_levels(means)
    edges = np.flatnonzero(np.diff(high.astype(np.int8)))
    few = min(int(high.sum()), int((~high).sum()))
    if not 1 <= edges.size <= _MOST_EDGES or few < _LEAST_BLOCKS:
        return None
    on = high if not high[0] else ~high
    settled = np.ones(count, dtype=bool)
    for edge in edges:  # the blocks in which it is switched hold both levels, and the amplifier's rise
        settled[max(edge - 1, 0) : edge + 3] = False
    time: FloatArray = (np.arange(float(count)) + 0.5) * (width * interval_s)
    fit = _level_fit(means, on, settled, time)
    if fit is None or abs(fit.height) < _CLEAR * max(fit.scatter, white_noise(means) / 2):
        return None
    starts = np.flatnonzero(np.diff(np.concatenate(([0], on.astype(np.int8), [0]))))
    ranges = tuple((int(a) * width, int(b) * width) for a, b in zip(starts[::2], starts[1::2], strict=True))
    return Step(fit.height, fit.u_height, fit.zero, ranges)


class _Levels(NamedTuple):
    height: float
    u_height: float
    zero: float
    scatter: float


def _two_levels(means: FloatArray) -> BoolArray:
    """Which block means lie on the higher of two levels: the split with the least sum of squares within."""
    ordered = np.sort(means)
    total = np.cumsum(ordered)
    n = np.arange(1, ordered.size)
    below, above = total[:-1] / n, (total[-1] - total[:-1]) / (ordered.size - n)
    between = n * (ordered.size - n) * (above - below) ** 2
    best = int(np.argmax(between))
    high: BoolArray = means > 0.5 * (below[best] + above[best])
    return high


def _level_fit(means: FloatArray, on: BoolArray, settled: BoolArray, time: FloatArray) -> _Levels | None:
    """Zero, step and drift by least squares, with the hum that the trace holds."""
    if (settled & on).sum() < _LEAST_BLOCKS // 2 or (settled & ~on).sum() < _LEAST_BLOCKS // 2:
        return None
    span = time - time.mean()
    columns = [np.ones_like(time), on.astype(float)]
    # One edge alone cannot be told from a drift as well as two can, but a drift is gentle.
    columns.append(span / max(float(span[-1]), 1e-300))
    best: _Levels | None = None
    for hum in (None, *_HUM_HZ):
        design = np.stack(columns, axis=1)
        if hum is not None:
            if hum * float(time[-1] - time[0]) < 1.5:
                continue
            angle = 2 * np.pi * hum * span
            design = np.column_stack((design, np.cos(angle), np.sin(angle)))
        a, y = design[settled], means[settled]
        x, *_ = np.linalg.lstsq(a, y, rcond=None)
        rest = y - a @ x
        scatter = float(np.sqrt(rest @ rest / max(y.size - a.shape[1], 1)))
        inverse = np.linalg.pinv(a.T @ a)
        found = _Levels(float(x[1]), scatter * float(np.sqrt(inverse[1, 1])), float(x[0]), scatter)
        if best is None or found.scatter < 0.9 * best.scatter:
            best = found
    return best
