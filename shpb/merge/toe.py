"""The toe of a compression curve: the straight part is found, and its line gives the zero of strain.

Faces that are not quite flat or parallel, play and lubricant let the first contact yield, so the curve
starts with a foot that is not the specimen's. The straight part above it is carried on to zero stress, and
strain is counted from there (ASTM E9 and D695 describe the construction; from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import BoolArray, FloatArray, require_finite
from shpb.errors import InputError

_KNOTS = 120  # ends that a straight part may have
_LEAST_POINTS = 5
_STEADY = 0.003  # slopes this much below the steepest count as steep
_STRAIGHT = 0.003  # root mean square deviation of a straight part, of its height
_NOISY = 0.05  # the most that noise may excuse, of its height
_LEAST_SHARE = 0.25  # of the stress at its upper end that a straight part must cover
_REPEATED = 0.7  # share of steps in strain, below which the strain was rounded
_KNEE = 0.25  # the first rise is over where the slope stays below this share of its greatest
_CHORD = 6  # steps of stress over which the slope is taken in the search for that end
_BENT = 3.5  # standard uncertainties by which a bend must stand out


@dataclass(frozen=True, slots=True, kw_only=True)
class LinearPart:
    """The straight part of a stress-strain curve: stress = slope (strain - zero).

    Attributes
    ----------
    slope_pa, u_slope_pa : float
        Slope and its standard uncertainty from the scatter about the line [Pa].
    zero_strain, u_zero_strain : float
        Strain at which the line has no stress.
    strain_range, stress_range_pa : (float, float)
        From where to where the line was fitted.
    points : int
        Readings on it.
    first, last : int
        Index of the first reading, and one behind the last.
    noise_pa : float
        Scatter of the readings about the line [Pa].
    """

    slope_pa: float
    u_slope_pa: float
    zero_strain: float
    u_zero_strain: float
    strain_range: tuple[float, float]
    stress_range_pa: tuple[float, float]
    points: int
    first: int
    last: int
    noise_pa: float

    def in_words(self) -> str:
        """The line with its range, for remarks and reports."""
        low, high = (s / 1e6 for s in self.stress_range_pa)
        return (
            f"slope {self.slope_pa / 1e9:.4g} GPa (u {self.u_slope_pa / 1e9:.2g} GPa) between {low:.4g} and "
            f"{high:.4g} MPa, {self.points} readings"
        )


def linear_part(strain: FloatArray, stress_pa: FloatArray) -> LinearPart:
    """Find the straight part of the first rise of a curve: the longest stretch with the steepest steady slope.

    The first rise ends where the slope has fallen to a quarter of its greatest for good. In it, lines are
    fitted by least squares between up to 120 ends, even in stress. A stretch counts as straight if its
    readings lie about the line within 0.3 % of its height, or within noise and rounding of the readings, and no bend
    stands out; it must cover a quarter of the stress at its upper end, with five readings. Among these, the
    steepest slope is the one with the highest lower limit (slope less three standard uncertainties, so that a
    short noisy stretch cannot win), and of all within 0.3 % or two standard uncertainties of it the longest in
    stress is taken.

    Parameters
    ----------
    strain, stress_pa : float array, shape (samples,)
        Engineering strain, not falling, and stress [Pa], loading positive.

    Raises
    ------
    InputError
        If there is no such stretch: a curve that bends from the start, or too few readings in its rise.
    """
    for name, array in (("strain", strain), ("stress", stress_pa)):
        require_finite(array, where=name, mend="Cut the curve before that sample")
    end = _end_of_first_rise(strain, stress_pa)
    e, s = strain[:end], stress_pa[:end]
    noise = reading_noise(e, s)
    knots = _even_in_stress(s, _KNOTS)
    sums = _Sums.of(e, s)
    first, last = (k.ravel() for k in np.meshgrid(knots, knots, indexing="ij"))
    enough = last - first + 1 >= _LEAST_POINTS
    fits = sums.lines(first[enough], last[enough] + 1, noise)
    rise = fits.slope * (e[fits.last - 1] - e[fits.first])  # of the line, because single readings are noisy
    straight = _straight(fits, e, rise, noise, reading_step(e))
    if not straight.any():
        raise _none_found(end, strain.size)
    fits, rise = _Lines(*(column[straight] for column in fits)), rise[straight]
    best = int(np.argmax(fits.slope - 3 * fits.u_slope))
    steep = fits.slope >= fits.slope[best] - np.maximum(
        _STEADY * fits.slope[best], 2 * np.hypot(fits.u_slope, fits.u_slope[best])
    )
    for i in np.flatnonzero(steep)[np.argsort(-rise[steep], kind="stable")]:
        part = slice(int(fits.first[i]), int(fits.last[i]))
        if not _bends(e[part], s[part], noise):
            return _as_part(e, fits, int(i))
    raise _none_found(end, strain.size)


def without_toe(strain: FloatArray, part: LinearPart) -> FloatArray:
    """Strain counted from where the straight part begins at no stress, shape (samples,)."""
    return strain - part.zero_strain


def _straight(fits: _Lines, e: FloatArray, rise: FloatArray, noise_pa: float, step: float) -> BoolArray:
    """Which lines cover enough of the stress at their upper end, with readings no further off than allowed."""
    top = fits.slope * (e[fits.last - 1] - fits.zero)
    # Readings rounded to a step scatter evenly over it.
    noise = np.hypot(noise_pa, fits.slope * step / np.sqrt(12)) * (1 + 2 / np.sqrt(2 * fits.readings))
    allowed = np.maximum(_STRAIGHT * rise, np.minimum(noise, _NOISY * rise))
    return np.asarray((rise > 0) & (rise >= _LEAST_SHARE * top) & (fits.scatter <= allowed))


def reading_step(strain: FloatArray) -> float:
    """Step to which strain was rounded, told by readings that repeat; 0 where they hardly do."""
    steps = np.diff(strain)
    moved = steps > 0
    if not moved.any() or moved.mean() > _REPEATED:
        return 0.0
    return float(np.median(steps[moved]))


def reading_noise(strain: FloatArray, stress_pa: FloatArray) -> float:
    """Standard deviation of single stress readings [Pa], from how each lies off the line of its neighbours.

    The median of the deviations is taken, so a knee or a step does not count as noise.
    """
    if strain.size < _LEAST_POINTS:
        return 0.0
    span = strain[2:] - strain[:-2]
    usable = span > 0
    if not usable.any():
        return 0.0
    share = (strain[1:-1] - strain[:-2])[usable] / span[usable]
    line = (stress_pa[:-2][usable]) * (1 - share) + stress_pa[2:][usable] * share
    off = (stress_pa[1:-1][usable] - line) / np.sqrt(1 + share**2 + (1 - share) ** 2)
    return float(np.median(np.abs(off)) / 0.6745)  # of a normal distribution


class _Lines(NamedTuple):
    """Least-squares lines through stretches of the curve; arrays of shape (stretches,)."""

    first: np.ndarray
    last: np.ndarray
    readings: FloatArray
    slope: FloatArray
    u_slope: FloatArray
    zero: FloatArray
    u_zero: FloatArray
    scatter: FloatArray


class _Sums(NamedTuple):
    """Running sums, by which the line through any stretch costs the same."""

    e: FloatArray
    s: FloatArray
    ee: FloatArray
    es: FloatArray
    ss: FloatArray
    e_mean: float
    s_scale: float
    e_scale: float

    @classmethod
    def of(cls, e: FloatArray, s: FloatArray) -> _Sums:
        """Sums of a curve, scaled to order one so that nothing cancels."""
        e_mean, e_scale, s_scale = float(e.mean()), float(np.ptp(e)) or 1.0, float(np.abs(s).max()) or 1.0
        x, y = (e - e_mean) / e_scale, s / s_scale

        def running(values: FloatArray) -> FloatArray:
            return np.concatenate((np.zeros(1), np.cumsum(values)))

        return cls(
            running(x), running(y), running(x * x), running(x * y), running(y * y), e_mean, s_scale, e_scale
        )

    def lines(self, first: np.ndarray, behind: np.ndarray, noise_pa: float) -> _Lines:
        """Lines through the samples ``first`` to ``behind - 1``."""
        n = (behind - first).astype(np.float64)
        sx, sy, sxx, sxy, syy = (a[behind] - a[first] for a in self[:5])
        mean_x, mean_y = sx / n, sy / n
        vxx = np.maximum(sxx - n * mean_x**2, 0.0)
        vxy = sxy - n * mean_x * mean_y
        spread = (vxx > 1e-14 * np.maximum(sxx, 1e-30)) & (vxy > 0)  # only rising lines matter
        n, mean_x, mean_y, vxx, vxy = n[spread], mean_x[spread], mean_y[spread], vxx[spread], vxy[spread]
        vyy = np.maximum(syy[spread] - n * mean_y**2, 0.0)
        slope = vxy / vxx
        rest = np.sqrt(np.maximum(vyy - slope * vxy, 0.0) / (n - 2))
        # Five readings may lie on a line by chance: their scatter is not believed below the noise.
        error = np.maximum(rest, noise_pa / self.s_scale)
        u_slope = error / np.sqrt(vxx)
        zero = mean_x - mean_y / slope
        u_zero = np.sqrt(error**2 / n + ((mean_x - zero) * u_slope) ** 2) / slope
        scale = self.s_scale / self.e_scale
        return _Lines(
            first[spread], behind[spread], n, slope * scale, u_slope * scale,
            zero * self.e_scale + self.e_mean, u_zero * self.e_scale, rest * self.s_scale,
        )  # fmt: skip


def _end_of_first_rise(strain: FloatArray, stress_pa: FloatArray) -> int:
    """One behind the last sample of the first rise."""
    top = int(np.argmax(stress_pa)) + 1
    if top < _LEAST_POINTS or stress_pa[top - 1] <= 0:
        raise _none_found(top, strain.size)
    knots = _even_in_stress(stress_pa[:top], 2 * _KNOTS)
    de, ds = np.diff(strain[knots]), np.diff(stress_pa[knots])
    if knots.size <= _CHORD:
        return top
    # Several steps together: one alone may hold two readings only. Where a coarse scale shows no strain at all,
    # the slope is not known, and neither sets the greatest nor ends the rise.
    rise, run = (np.convolve(steps, np.ones(_CHORD), "valid") for steps in (ds, de))
    known = run > 0
    slope = np.divide(rise, run, out=np.zeros_like(rise), where=known)
    greatest = np.maximum.accumulate(slope)
    # For good: over the next three places, so that a stick of the machine does not end the rise.
    flat = known & (slope < _KNEE * greatest)
    for i in range(flat.size):
        if flat[i : i + 3].all():
            return max(int(knots[i + 1]) + 1, _LEAST_POINTS)
    return top


def _even_in_stress(stress_pa: FloatArray, count: int) -> np.ndarray:
    """Indices at which the highest stress so far passes even steps, first and last included."""
    highest = np.maximum.accumulate(stress_pa)
    steps = np.linspace(highest[0], highest[-1], count)
    return np.unique(np.clip(np.searchsorted(highest, steps, side="left"), 0, stress_pa.size - 1))


def _bends(e: FloatArray, s: FloatArray, noise_pa: float) -> bool:
    """Whether a parabola fits so much better than the line that the stretch is not straight."""
    if e.size < _LEAST_POINTS + 1 or np.ptp(e) == 0:
        return False
    x = (e - e[0]) / np.ptp(e) * 2 - 1
    coefficients, *_ = np.linalg.lstsq(np.vander(x, 3), s, rcond=None)
    rest = s - np.vander(x, 3) @ coefficients
    spread = max(float(np.sqrt((rest**2).sum() / (e.size - 3))), noise_pa)
    u_bend = spread * float(np.sqrt(np.linalg.inv(np.vander(x, 3).T @ np.vander(x, 3))[0, 0]))
    bend = abs(float(coefficients[0]))
    # The parabola's arrow against the height of the stretch: a bend that matters, and is there.
    return bend > 4 * _STRAIGHT * float(np.ptp(s)) and bend > _BENT * u_bend


def _as_part(e: FloatArray, fits: _Lines, i: int) -> LinearPart:
    first, last = int(fits.first[i]), int(fits.last[i])
    slope, zero = float(fits.slope[i]), float(fits.zero[i])
    ends = float(e[first]), float(e[last - 1])
    return LinearPart(
        slope_pa=slope,
        u_slope_pa=float(fits.u_slope[i]),
        zero_strain=zero,
        u_zero_strain=float(fits.u_zero[i]),
        strain_range=ends,
        stress_range_pa=(slope * (ends[0] - zero), slope * (ends[1] - zero)),
        points=last - first,
        first=first,
        last=last,
        noise_pa=float(fits.scatter[i]),
    )


def _none_found(end: int, size: int) -> InputError:
    return InputError(
        f"the first rise of the curve ({end} of {size} readings) holds no straight part",
        where="toe",
        mend="Record more readings in the elastic part, or switch the toe correction off if the zero is known",
    )
