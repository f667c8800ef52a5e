"""Where a noise-free pulse starts, defined without the program's own picker."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.settings import Span


def tangent_foot_s(
    time_s: FloatArray, pulse: FloatArray, span_s: Span, *, low: float = 0.1, high: float = 0.5
) -> float:
    """Foot of a pulse by the tangent: a straight line through its rise, carried on to zero.

    Of the span, the largest magnitude is the peak; the line is the least-squares fit through the
    samples between the first crossings of ``low`` and ``high`` of it (10 to 50 % by default).

    Parameters
    ----------
    time_s, pulse : float array, shape (samples,)
        Noise free, of either sign, with zero as its base line.
    span_s : (float, float)
        Holds the pulse and no other [s].
    low, high : float
        Shares of the peak between which the line is laid.

    Returns
    -------
    float
        Time of the foot [s].

    Raises
    ------
    InputError
        If the span holds no rise with at least two samples on it.

    References
    ----------
    Common practice in reading pulses off a record ("tangent" or "foot" method).
    """
    inside = (time_s >= span_s[0]) & (time_s <= span_s[1])
    time, height = time_s[inside], np.abs(pulse[inside])
    if time.size and height.max() > 0:
        share = height / height.max()
        rise = slice(int(np.argmax(share >= low)), int(np.argmax(share >= high)) + 1)
        since, rising = time[rise] - time[rise][0], share[rise]
        if since.size > 1:
            slope, level = np.polyfit(since, rising, 1)
            if slope > 0:
                return float(time[rise][0] - level / slope)
    raise InputError(
        "no rise was found",
        where=f"{span_s[0]:g} to {span_s[1]:g} s",
        mend="Give a span with one pulse in it",
    )
