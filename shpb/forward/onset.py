"""Where a noise-free pulse starts, defined without the program's own picker."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.settings import Span

# The first rise is over where the slope has first fallen to this share of its steepest.
_SHOULDER = 0.25


def tangent_foot_s(
    time_s: FloatArray, pulse: FloatArray, span_s: Span, *, low: float = 0.1, high: float = 0.6
) -> float:
    """Foot of a noise-free pulse by the tangent: a straight line through its first rise, carried on to zero.

    The height of the first rise is what the pulse has reached where, after the steepest place of the
    span, its slope has first fallen to a quarter of the steepest. The line is the least-squares fit
    through the samples between the first crossings of ``low`` and ``high`` of that height (10 to 60 % by
    default). What follows the first rise - the hardening of a yielded specimen, ringing, a second
    step - has no part in it.

    Parameters
    ----------
    time_s, pulse : float array, shape (samples,)
        Noise free, of either sign, with zero as its base line, on a grid much finer than the rise.
    span_s : (float, float)
        Holds the first rise of the pulse and nothing steeper [s].
    low, high : float
        Shares of the height of the first rise between which the line is laid.

    Returns
    -------
    float
        Time of the foot [s].

    Raises
    ------
    InputError
        If the span holds no rise with at least two samples on it, or the rise is not over within it.

    References
    ----------
    Common practice in reading pulses off a record ("tangent" or "foot" method).
    """
    inside = (time_s >= span_s[0]) & (time_s <= span_s[1])
    time, height = time_s[inside], np.abs(pulse[inside])
    if time.size > 2 and height.max() > 0:
        share = height / _height_of_first_rise(time, height, span_s)
        first, last = int(np.argmax(share >= low)), int(np.argmax(share >= high))
        since, rising = time[first : last + 1] - time[first], share[first : last + 1]
        if since.size > 1:
            slope, level = np.polyfit(since, rising, 1)
            if slope > 0:
                return float(time[first] - level / slope)
    raise _no_foot("no rise was found", span_s, "Give a span with one pulse in it")


def _height_of_first_rise(time: FloatArray, height: FloatArray, span_s: Span) -> float:
    slope = np.gradient(height, time)
    steepest = int(np.argmax(slope))
    gentle = np.flatnonzero(slope[steepest:] <= _SHOULDER * slope[steepest])
    if not gentle.size:
        raise _no_foot("the rise is not over", span_s, "Give a span that reaches beyond the first rise")
    return float(height[steepest + gentle[0]])


def _no_foot(what: str, span_s: Span, mend: str) -> InputError:
    return InputError(what, where=f"{span_s[0]:g} to {span_s[1]:g} s", mend=mend)
