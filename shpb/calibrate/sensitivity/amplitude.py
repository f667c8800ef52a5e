"""By how much one pulse is larger than another that should be its copy, and by how much it is late.

``y(t) = a x(t - d)`` by least squares over a stretch of the pulse: linear in a and a d, with y shifted back by the
delay found so far until nothing is left of it.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, dot
from shpb.calibrate.sensitivity.pulses_of import CutPulse
from shpb.wave.propagation import LowPass

_ITERATIONS = 8
_SETTLED_S = 1e-11


class Amplitude(NamedTuple):
    """One pulse against another.

    Attributes
    ----------
    scale : float
        a.
    delay_s : float
        d [s].
    u_scale : float
        Standard uncertainty of ``scale`` from noise and zero lines.
    rms : float
        What the fit leaves, root mean square by the peak of the other pulse.
    other : float array
        The other pulse, shifted back by the delay; shape of the first.
    """

    scale: float
    delay_s: float
    u_scale: float
    rms: float
    other: FloatArray


def amplitude(
    first: FloatArray,
    other_at: Callable[[float], FloatArray],
    inside: slice,
    interval_s: float,
    low_pass: LowPass,
    pulses: tuple[CutPulse, CutPulse],
) -> Amplitude:
    """Fit the other pulse by the first.

    Parameters
    ----------
    first : float array, shape (samples,)
        x, carried to the common place.
    other_at : callable
        y at that place with a further rigid shift [s].
    inside : slice
        Samples that are compared.
    interval_s : float
    low_pass : LowPass
        That both have passed.
    pulses : (CutPulse, CutPulse)
        Where x and y come from, for their noise and zero lines.
    """
    x, slope = first[inside], np.gradient(first, interval_s)[inside]
    xx, xs, ss = dot(x, x), dot(x, slope), dot(slope, slope)
    determinant = max(xx * ss - xs**2, 1e-300)
    delay, scale = 0.0, 1.0
    other = other_at(0.0)
    for _ in range(_ITERATIONS):
        y = other[inside]
        xy, sy = dot(x, y), dot(slope, y)
        scale = (ss * xy - xs * sy) / determinant
        step = -((xx * sy - xs * xy) / determinant) / scale if scale else 0.0
        if abs(step) < _SETTLED_S:
            break
        # A step of more than the rise of the pulse is beyond the linear form: go there in bounded steps.
        bound = 0.5 / low_pass.cutoff_hz
        delay += min(max(step, -bound), bound)
        other = other_at(-delay)
    rest = other[inside] - scale * x
    u = _u_scale(x, scale, xx, ss / determinant, interval_s, low_pass, pulses)
    peak = float(np.abs(other[inside]).max(initial=1e-12))
    return Amplitude(float(scale), delay, u, float(np.sqrt(np.mean(rest**2))) / peak, other)


def _u_scale(
    x: FloatArray,
    scale: float,
    xx: float,
    inverse_xx: float,
    interval_s: float,
    low_pass: LowPass,
    pulses: tuple[CutPulse, CutPulse],
) -> float:
    """Noise that is white within the band repeats itself over 1/(2 band): that many samples count as one."""
    one, two = pulses
    passed = low_pass.noise_share(interval_s)
    alike = max(1.0 / (2 * low_pass.cutoff_hz * interval_s), 1.0)
    by_noise = float(np.hypot(two.noise, scale * one.noise)) * passed * np.sqrt(alike * inverse_xx)
    by_level = float(np.hypot(two.u_level(), scale * one.u_level())) * abs(float(x.sum())) / xx
    return float(np.hypot(by_noise, by_level))


def loaded(strain: FloatArray, near: int) -> tuple[int, int]:
    """Samples between which a loading pulse stands above half of its level, around the sample ``near``.

    The level is the median of what is above half of the peak, so that ringing does not set it.
    """
    high = strain[strain > 0.5 * float(strain.max())]
    half = 0.5 * float(np.median(high))
    below = np.flatnonzero(strain < half)
    before, after = below[below < near], below[below > near]
    start = int(before[-1]) + 1 if before.size else 0
    return start, int(after[0]) if after.size else strain.size
