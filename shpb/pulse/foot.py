"""One statistical onset picker for all pulses: the foot of the tangent to the first rise.

A straight line is fitted by least squares to the first rise between a tenth and six tenths of its
height and extrapolated to zero. The same fractions serve every pulse, so that what bias a rounded
front brings is common to all and cancels in differences. Because many samples enter, the foot is
known to a fraction of a sample, with a standard uncertainty from the scatter about the line.

References
----------
Tangent method: common practice at the bar. Uncertainty of the intercept: straight-line regression,
JCGM 100:2008, H.3.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, dot
from shpb.pulse.front import moving_mean

LOWER, UPPER = 0.10, 0.6  # shares of the first rise between which the line is fitted
_SHOULDER = 0.25  # the first rise ends where its slope falls below this share of its steepest
_LIFT = 0.10  # share of the peak that the first front lifts the trace by, at least
_LEAST_SIGNAL_TO_NOISE = 5.0
_LEAST_POINTS = 4


class Foot(NamedTuple):
    """Onset of a pulse."""

    time_s: float
    u_time_s: float  # standard uncertainty from the scatter about the tangent
    sign: int  # of the pulse
    rise_s: float  # from the foot to the end of the first rise, along the tangent


def pick_foot(
    strain: FloatArray,
    start_s: float,
    interval_s: float,
    noise: float,
    smoothing_s: float,
    sign: int | None = None,
) -> Foot | None:
    """Pick the foot of the one pulse that ``strain`` holds.

    Parameters
    ----------
    strain : float array, shape (samples,)
        From well before the pulse to beyond its first rise; zero line removed.
    start_s, interval_s : float
        Time of the first sample and spacing [s].
    noise : float
        Standard deviation of one sample.
    smoothing_s : float
        Shortest running mean used to find the rise [s]; it is doubled until the slope stands clear
        of the noise. The line itself is fitted to the samples as they are.
    sign : int or None
        +1 or -1 where known; otherwise that of the largest excursion.

    Returns
    -------
    Foot or None
        None where no pulse stands clear of the noise.
    """
    width = max(int(round(smoothing_s / interval_s)) | 1, 3)
    if strain.size < 4 * width:
        return None
    for _ in range(6):
        smooth = moving_mean(moving_mean(strain, width), width)
        if sign is None:
            sign = 1 if smooth[np.argmax(np.abs(smooth))] > 0 else -1
        rise = _first_rise(sign * smooth, noise, width)
        if rise is not None or 8 * width > strain.size:
            break
        width = 2 * width + 1
    if rise is None:
        return None
    return _tangent_foot(sign * strain, sign * smooth, rise, start_s, interval_s, sign)


class _Rise(NamedTuple):
    steepest: int
    height: float


def _first_rise(smooth: FloatArray, noise: float, width: int) -> _Rise | None:
    """The first steep part of the front and the height at which it ends."""
    peak = float(smooth.max())
    if peak <= _LEAST_SIGNAL_TO_NOISE * noise / np.sqrt(width):
        return None
    top = int(np.argmax(smooth >= 0.9 * peak))
    slope = np.gradient(smooth[: top + 2]) if top >= 2 else np.empty(0)
    if slope.size == 0:
        return None
    greatest = float(slope.max())
    # Slope noise of a twice running mean: second difference over the width of white noise.
    if np.sqrt(2.0) * noise / width**1.5 > 0.12 * greatest:
        return None
    steepest = _steepest_of_first_front(smooth, slope, greatest, peak)
    gentle = np.flatnonzero(slope[steepest:] < _SHOULDER * slope[steepest])
    shoulder = steepest + int(gentle[0]) if gentle.size else slope.size - 1
    return _Rise(steepest, float(smooth[shoulder]))


def _steepest_of_first_front(smooth: FloatArray, slope: FloatArray, greatest: float, peak: float) -> int:
    """Steepest sample of the first front: the first steep run that lifts the trace by a good part of its peak.

    A steeper step may follow (a shaped pulse, a staircase); noise makes short steep runs that lift nothing.
    """
    edges = np.flatnonzero(np.diff(np.concatenate(([0], (slope >= 0.4 * greatest).astype(np.int8), [0]))))
    for start, stop in zip(edges[::2], edges[1::2], strict=True):
        if smooth[min(stop, smooth.size - 1)] - smooth[start] >= _LIFT * peak:
            return int(start + np.argmax(slope[start:stop]))
    return int(np.argmax(slope))


def _tangent_foot(
    strain: FloatArray, smooth: FloatArray, rise: _Rise, start_s: float, interval_s: float, sign: int
) -> Foot | None:
    low, high = LOWER * rise.height, UPPER * rise.height
    # The smoothed trace says which samples lie between the two heights, next to the steepest.
    middle = rise.steepest
    below = np.flatnonzero(smooth[: middle + 1] < low)
    start = int(below[-1]) + 1 if below.size else 0
    above = np.flatnonzero(smooth[start:] > high)
    stop = start + int(above[0]) if above.size else smooth.size
    if stop - start < _LEAST_POINTS:
        # Few samples on a steep front: take the neighbours, still on the rise.
        start, stop = max(start - 1, 0), min(max(stop, start + _LEAST_POINTS), strain.size)
    index = np.arange(start, stop, dtype=float)
    values = strain[start:stop]
    centre, mean = index.mean(), values.mean()
    spread = float(((index - centre) ** 2).sum())
    slope = float(((index - centre) * (values - mean)).sum() / spread)
    if slope <= 0:
        return None
    foot = centre - mean / slope
    residual = values - (mean + slope * (index - centre))
    scatter = dot(residual, residual) / max(values.size - 2, 1)
    u_foot = np.sqrt(scatter * (1 / values.size + (mean / slope) ** 2 / spread)) / slope
    return Foot(
        float(start_s + interval_s * foot),
        float(interval_s * u_foot),
        sign,
        float(interval_s * rise.height / slope),
    )
