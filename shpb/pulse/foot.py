"""One statistical onset picker for all pulses: the foot of the tangent to the first rise.

The foot is where the straight line through the first rise, from 10 to 60 % of its height, meets zero;
the first rise is over where its slope has first fallen to a quarter of its steepest. The same fractions
serve every pulse, so that what bias a rounded front brings is common to all and cancels in differences.

It is found twice. The tangent itself, by least squares through the samples, has no bias but a large
scatter in noise: the line is short and carried far. The most likely front of a fixed shape
(:mod:`shpb.pulse.front_shape`) has a small scatter but is biased by what the shape lacks. The result is
the mean of the two with the least expected square error: the tangent in a clean record, the shape in a
noisy one, with nothing to set.

References
----------
Tangent method: common practice at the bar. Uncertainty: propagation of the noise of every sample through
both feet at once, with the shape's bias as a further component, JCGM 100:2008, 5.1 and F.2.4.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, dot
from shpb.pulse.front import moving_mean
from shpb.pulse.front_shape import (
    LACK_ON_RISE,
    STEEPEST,
    STEEPEST_AT,
    FittedFront,
    Front,
    block_means,
    fit_front,
    slopes,
)

LOWER, UPPER = 0.10, 0.6  # shares of the first rise between which the line is fitted
_SHOULDER = 0.25  # the first rise ends where its slope falls below this share of its steepest
_LIFT = 0.10  # share of the peak that the first front lifts the trace by, at least
_LEAST_SIGNAL_TO_NOISE = 5.0
_LEAST_POINTS = 4

# The search for the first rise smooths until the noise of the slope is below the first share of the
# steepest slope; where the trace is too short for that, the second is the most that is let pass.
_CLEAR_SLOPE, _LEAST_CLEAR_SLOPE = 0.08, 0.2
# Fronts at a gauge rise within some 8 to 80 a/c0, depending on impact, shaper and the way travelled (common
# practice); the smoothing that callers ask for is half of a/c0.
_USUAL_RISE = 50.0
# The shape's foot is off by about this share of the rise (standard deviation over incident, reflected and
# transmitted fronts).
_SHAPE_BIAS = 0.02
# Where noise moves the tangent by less than this share of that bias, the shape is not asked.
_NO_SAY, _NEARLY_CLEAN = 0.15, 0.02  # the latter of the height: beyond it there is no need to look
_SAMPLES_ON_RISE = 64  # more are averaged in blocks
_BEFORE_RISE, _AFTER_RISE = 1.0, 0.6  # rises fitted before and after the front itself
_NEXT_STEP = 1.3  # the fit ends where the trace passes this multiple of the first rise


class Foot(NamedTuple):
    """Onset of a pulse."""

    time_s: float
    u_time_s: float  # standard uncertainty: noise, and the bias of the shape where it was used
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
        Standard deviation of one sample under white noise; of a filtered trace, before the filter.
    smoothing_s : float
        Half of a/c0 of the bar [s]: the shortest running mean used to find the rise. It is lengthened
        until the slope stands clear of the noise. The foot itself comes from the samples as they are.
    sign : int or None
        +1 or -1 where known; otherwise that of the largest excursion.

    Returns
    -------
    Foot or None
        None where no pulse stands clear of the noise.
    """
    width = max(round(smoothing_s / interval_s) | 1, 3)
    if strain.size < 4 * width:
        return None
    found = _find_rise(strain, noise, width, sign)
    if found is None:
        return None
    rise, sign = found
    loading = strain if sign > 0 else -strain

    start = max(int(rise.front.start - _BEFORE_RISE * rise.front.rise), 0)
    stop = int(rise.front.start + (1.0 + _AFTER_RISE) * rise.front.rise) + 3
    stop = min(stop, rise.next_step, strain.size)
    block = max(int(rise.front.rise / _SAMPLES_ON_RISE), 1)
    values = block_means(loading[start:stop], block)
    if values.size < 2 * _LEAST_POINTS:
        return None
    time = start + 0.5 * (block - 1) + block * np.arange(values.size, dtype=float)
    noise = noise / np.sqrt(block)
    foot = _clean_foot(time, values, block_means(rise.smooth[start:stop], block), rise.front, noise)
    if foot is None:
        fitted = fit_front(time, values, noise, rise.front, _USUAL_RISE * smoothing_s / interval_s)
        if fitted is None:
            return None
        foot = _combine(
            fitted, _tangent(time, values, _mended(time, values, fitted, noise), fitted, noise), noise
        )
    return Foot(
        float(start_s + interval_s * foot.time),
        float(interval_s * foot.u_time),
        sign,
        float(interval_s * foot.rise),
    )


# --- where to look -----------------------------------------------------------------------------


class _Rise(NamedTuple):
    """The first rise as the smoothed trace shows it."""

    smooth: FloatArray  # loading-positive, twice a running mean of ``width`` samples
    width: int
    front: Front
    next_step: int  # sample at which a further step has begun
    unclear: float  # noise of the slope, share of the steepest


def _find_rise(strain: FloatArray, noise: float, width: int, sign: int | None) -> tuple[_Rise, int] | None:
    """First rise in a trace smoothed no more than its noise asks for, and the sign of the pulse."""
    rise, wider = None, width
    while True:
        smooth = moving_mean(moving_mean(strain, wider), wider)
        if sign is None:
            sign = 1 if smooth[np.argmax(np.abs(smooth))] > 0 else -1
        rise = _first_rise(smooth if sign > 0 else -smooth, noise, wider) or rise
        clear = rise is not None and rise.unclear <= _CLEAR_SLOPE
        if clear or 8 * wider > strain.size:
            break
        # The noise of the slope falls with the width to the power 3/2; the steepest slope falls with it.
        wanted = 1.0 if rise is None else 1.2 * (rise.unclear / _CLEAR_SLOPE) ** (2 / 3)
        wider = int(max(1.5, wanted) * wider) | 1
    if rise is None or rise.unclear > _LEAST_CLEAR_SLOPE:
        return None
    return _gentler_before(strain, noise, width, sign, rise) or rise, sign


def _gentler_before(strain: FloatArray, noise: float, width: int, sign: int, rise: _Rise) -> _Rise | None:
    """A first step too gentle to be seen beside the steep one that follows, if the trace stands on one."""
    # Well before the steep front, lest its own toe be taken for a step.
    stop = int(rise.front.start - 0.5 * rise.front.rise) - rise.width
    if stop < 4 * width:
        return None
    peak = float(np.abs(rise.smooth).max())
    if float(rise.smooth[stop]) < _LIFT * peak + 2.0 * noise / np.sqrt(rise.width):
        return None
    before = _find_rise(strain[:stop], noise, width, sign)
    return before[0] if before is not None and before[0].front.height >= _LIFT * peak else None


def _first_rise(smooth: FloatArray, noise: float, width: int) -> _Rise | None:
    """The first steep part of the front and the height at which it ends."""
    peak = float(smooth.max())
    if peak <= _LEAST_SIGNAL_TO_NOISE * noise / np.sqrt(width):
        return None
    top = int(np.argmax(smooth >= 0.9 * peak))
    if top < 2:
        return None
    slope = slopes(smooth)
    rising = slope[: top + 2]
    greatest = float(rising.max())
    steepest = _steepest_of_first_front(smooth, rising, greatest, peak)
    gentle = np.flatnonzero(slope[steepest:] < _SHOULDER * slope[steepest])
    shoulder = steepest + int(gentle[0]) if gentle.size else smooth.size - 1
    height = float(smooth[shoulder])
    if height <= 0:
        return None
    higher = np.flatnonzero(smooth[shoulder:] > _NEXT_STEP * height)
    next_step = shoulder + int(higher[0]) if higher.size else smooth.size
    # A twice running mean lengthens the rise: second moments add.
    apparent = STEEPEST * height / float(slope[steepest])
    length = max(np.sqrt(max(apparent**2 - 2.5 * width**2, 0.1 * apparent**2)), 2.0)
    front = Front(steepest - STEEPEST_AT * length, length, height, 0.0)
    # Slope noise of a twice running mean: second difference over the width of white noise.
    return _Rise(smooth, width, front, next_step, float(np.sqrt(2.0) * noise / width**1.5 / greatest))


def _steepest_of_first_front(smooth: FloatArray, slope: FloatArray, greatest: float, peak: float) -> int:
    """Steepest sample of the first front: the first steep run that lifts the trace by a good part of its peak.

    A steeper step may follow (a shaped pulse, a staircase); noise makes short steep runs that lift nothing.
    """
    edges = np.flatnonzero(np.diff(np.concatenate(([0], (slope >= 0.4 * greatest).astype(np.int8), [0]))))
    for start, stop in zip(edges[::2], edges[1::2], strict=True):
        if smooth[min(stop, smooth.size - 1)] - smooth[start] >= _LIFT * peak:
            return int(start + np.argmax(slope[start:stop]))
    return int(np.argmax(slope))


# --- the two feet and their mean ---------------------------------------------------------------


class _Picked(NamedTuple):
    """Times in samples."""

    time: float
    u_time: float
    rise: float  # from the foot to the height of the first rise, along the tangent


class _Tangent(NamedTuple):
    foot: float
    by_sample: FloatArray  # derivative of the foot with respect to each sample
    rise: float  # from the foot to the height of the first rise
    scatter: float  # variance of a sample about the line, at least that of the noise


def _clean_foot(
    time: FloatArray, values: FloatArray, smooth: FloatArray, rise: Front, noise: float
) -> _Picked | None:
    """The tangent alone, where noise moves it so little that the shape would have no say; else None."""
    if noise > _NEARLY_CLEAN * rise.height:
        return None
    tangent = _tangent(
        time, values, smooth, FittedFront(front=rise, curve=smooth, foot_by_sample=smooth), noise
    )
    if tangent is None:
        return None
    u_foot = np.sqrt(dot(tangent.by_sample, tangent.by_sample))
    if noise * u_foot > _NO_SAY * _SHAPE_BIAS * rise.rise:
        return None
    return _Picked(tangent.foot, float(np.sqrt(tangent.scatter) * u_foot), tangent.rise)


def _tangent(
    time: FloatArray, values: FloatArray, curve: FloatArray, fitted: FittedFront, noise: float
) -> _Tangent | None:
    """Least-squares line through the first rise, carried on to zero; None where the line does not rise.

    ``curve`` says which samples lie on the rise.
    """
    start, stop, height = _stretch(time, curve, fitted.front)
    here, model = values[start:stop], fitted.curve[start:stop]
    centre, level, at_fit = float(time[start:stop].mean()), float(here.mean()), float(model.mean())
    offset = time[start:stop] - centre
    spread = dot(offset, offset)
    slope, slope_of_fit = dot(offset, here) / spread, dot(offset, model) / spread
    if slope <= 0 or slope_of_fit <= 0:
        return None
    # Taken at the fitted front: at the line's own slope, a line that noise made steep would seem certain.
    by_sample = np.zeros(time.size)
    by_sample[start:stop] = (offset * (at_fit / (slope_of_fit * spread)) - 1.0 / here.size) / slope_of_fit
    residual = here - (level + slope * offset)
    scatter = max(noise**2, dot(residual, residual) / max(here.size - 2, 1))
    return _Tangent(centre - level / slope, by_sample, height / slope, scatter)


def _mended(time: FloatArray, values: FloatArray, fitted: FittedFront, noise: float) -> FloatArray:
    """The fitted curve and as much of the smoothed residual as is more likely the shape's fault than noise."""
    width = int(fitted.front.rise / (10 * (time[1] - time[0]))) | 1
    lack = (LACK_ON_RISE * fitted.front.height) ** 2
    believed = lack / (lack + 0.67 * noise**2 / width)  # 2/3: variance of a twice running mean
    return fitted.curve + believed * moving_mean(moving_mean(values - fitted.curve, width), width)


def _stretch(time: FloatArray, curve: FloatArray, front: Front) -> tuple[int, int, float]:
    """Samples from 10 to 60 % of the first rise of ``curve``, and its height."""
    slope = slopes(curve)
    first, last = np.searchsorted(time, (front.start + 0.2 * front.rise, front.start + 0.9 * front.rise))
    first = min(int(first), time.size - 2)
    steepest = first + int(np.argmax(slope[first : max(int(last), first + 1)]))
    gentle = np.flatnonzero(slope[steepest:] <= _SHOULDER * slope[steepest])
    height = float(curve[steepest + int(gentle[0]) if gentle.size else -1])
    below = np.flatnonzero(curve[: steepest + 1] < LOWER * height)
    start = int(below[-1]) + 1 if below.size else 0
    above = np.flatnonzero(curve[start:] > UPPER * height)
    stop = start + int(above[0]) if above.size else time.size
    if stop - start < _LEAST_POINTS:
        # Few samples on a steep front: take the neighbours, still on the rise.
        start, stop = max(start - 1, 0), min(max(stop, start + _LEAST_POINTS), time.size)
    return start, stop, height


def _combine(fitted: FittedFront, tangent: _Tangent | None, noise: float) -> _Picked:
    """The mean of the two feet with the least expected square error.

    With a and b the derivatives of tangent and shape and s the noise of a sample, the mean w T + (1 - w) M
    has the expected square error s^2 |w a + (1 - w) b|^2 + (1 - w)^2 bias^2, which is least at the w below.
    """
    front, by_shape = fitted.front, fitted.foot_by_sample
    bias = _SHAPE_BIAS * front.rise
    length = front.rise / STEEPEST
    if tangent is None:
        return _Picked(front.foot, float(np.hypot(noise * np.sqrt(dot(by_shape, by_shape)), bias)), length)
    apart = tangent.by_sample - by_shape
    expected = noise**2 * dot(apart, apart) + bias**2
    weight = min(max((bias**2 - noise**2 * dot(by_shape, apart)) / expected, 0.0), 1.0)
    # The foot of a line that noise made nearly level lies anywhere: beyond what is expected it counts no more.
    bound = 2.0 * np.sqrt(expected)
    foot = front.foot + weight * min(max(tangent.foot - front.foot, -bound), bound)
    by_sample = by_shape + weight * apart
    u_foot = np.sqrt(tangent.scatter * dot(by_sample, by_sample) + ((1.0 - weight) * bias) ** 2)
    return _Picked(foot, float(u_foot), weight * tangent.rise + (1.0 - weight) * length)
