"""Flow stress against temperature at one rate: does it rise anywhere, where is the minimum, where the peak?

Most metals only soften. Some ordered alloys fall, rise to a peak and fall again. Nothing is assumed about which:
the points decide, and a rise within their uncertainty is none.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from shpb.arrays import FloatArray, require_finite
from shpb.errors import InputError

_DRAWS = 4000
_LEVEL = 0.05
_SURE = 0.95  # share of the draws that must agree on where an end is not
_SAME_K = 3.0  # tests nearer in temperature than this are one point


class Place(StrEnum):
    """Where a minimum or a peak lies."""

    INSIDE = "between tested temperatures"
    AT_END = "at or beyond the last temperature"
    AT_START = "at or below the first temperature"
    NONE = "none"


@dataclass(frozen=True, slots=True, kw_only=True)
class Extreme:
    """A minimum or a peak of the flow stress over temperature.

    Attributes
    ----------
    place : Place
        Whether tests on both sides bracket it.
    temperature_k, u_temperature_k : float or None
        Where, with standard uncertainty [K]; None unless it is bracketed. No better than half the spacing of the
        tests allows.
    interval_k : (float, float) or None
        95 % interval [K], at least half a spacing to either side.
    stress_pa, u_stress_pa : float or None
        Stress there [Pa].
    bracketed_share : float
        Share of the draws in which both neighbours were on the same side of it.
    """

    place: Place
    temperature_k: float | None = None
    u_temperature_k: float | None = None
    interval_k: tuple[float, float] | None = None
    stress_pa: float | None = None
    u_stress_pa: float | None = None
    bracketed_share: float = 0.0


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class TemperatureCourse:
    """Flow stress against temperature at one rate and plastic strain.

    Attributes
    ----------
    temperature_k, stress_pa, u_pa : float array, shape (temperatures,)
        The points, tests at one temperature averaged, rising temperature.
    rises : bool
        Whether the stress rises with temperature anywhere, beyond the uncertainty.
    rise_pa, u_rise_pa : float
        Largest rise from one temperature to a higher one [Pa], zero or less where there is none.
    rise_between_k : (float, float)
        Between which temperatures.
    chance : float
        Chance of a rise that stands out as much if the stress did not depend on temperature at all.
    minimum, peak : Extreme
        Before and after the rise; ``Place.NONE`` where there is none.
    reason : str
        In words.
    """

    temperature_k: FloatArray
    stress_pa: FloatArray
    u_pa: FloatArray
    rises: bool
    rise_pa: float
    u_rise_pa: float
    rise_between_k: tuple[float, float]
    chance: float
    minimum: Extreme
    peak: Extreme
    reason: str


def temperature_course(
    temperature_k: FloatArray,
    stress_pa: FloatArray,
    u_pa: FloatArray,
    *,
    u_temperature_k: float = 0.0,
    seed: int = 0,
    draws: int = _DRAWS,
) -> TemperatureCourse:
    """Find minimum and peak of the flow stress over temperature, if there are any.

    The largest rise from any temperature to any higher one, over its uncertainty, is compared with what the same
    points would show if the stress did not depend on temperature at all (drawn; a stress that falls would show
    less). Only a rise that has a chance below 5 % counts. Then the stresses (and temperatures) are drawn again and
    again within their uncertainties; in each draw the peak is the extreme of a curve through the highest point after
    the rise and its neighbours (cubics through four points, a parabola through three where these have none), the
    minimum likewise before it. It is called bracketed if in 95 % of the draws it has tests on both sides.

    An error that all points share, of rig or machine, moves every stress by one factor and no extreme: leave it
    out of ``u_pa``.

    Parameters
    ----------
    temperature_k, stress_pa, u_pa : float array, shape (tests,)
        Start temperature [K], flow stress [Pa] at one plastic strain and rate, and the standard uncertainty that
        each has alone [Pa].
    u_temperature_k : float
        Standard uncertainty of each temperature [K].
    seed, draws : int
        Of the random draws.

    Raises
    ------
    InputError
        If there are fewer than three temperatures, or a number is not usable.
    """
    t, s, u = _points(temperature_k, stress_pa, u_pa)
    random = np.random.default_rng(seed)
    rise, u_rise, low, high = _largest_rise(s, u)
    chance = _chance(rise / u_rise, u, random, draws)
    if rise <= 0 or chance >= _LEVEL:
        reason = "the stress falls from temperature to temperature"
        if rise > 0:
            reason = (
                f"no rise beyond the uncertainty: {rise / 1e6:.3g} MPa (u {u_rise / 1e6:.2g} MPa) from {t[low]:.4g} to "
                f"{t[high]:.4g} K"
            )
        none = Extreme(place=Place.NONE)
        return TemperatureCourse(
            temperature_k=t, stress_pa=s, u_pa=u, rises=False, rise_pa=rise, u_rise_pa=u_rise,
            rise_between_k=(float(t[low]), float(t[high])), chance=chance, minimum=none, peak=none, reason=reason,
        )  # fmt: skip
    drawn_s = s + u * random.standard_normal((draws, s.size))
    drawn_t = t + u_temperature_k * random.standard_normal((draws, s.size))
    ordered = np.all(np.diff(drawn_t, axis=1) > 0, axis=1, keepdims=True)
    drawn_t = np.where(ordered, drawn_t, t)
    peak = _extreme(t, s, drawn_t, drawn_s, slice(low, None), sign=1.0)
    minimum = _extreme(t, s, drawn_t, drawn_s, slice(None, high + 1), sign=-1.0)
    return TemperatureCourse(
        temperature_k=t, stress_pa=s, u_pa=u, rises=True, rise_pa=rise, u_rise_pa=u_rise,
        rise_between_k=(float(t[low]), float(t[high])), chance=chance, minimum=minimum, peak=peak,
        reason=f"the stress rises by {rise / 1e6:.3g} MPa (u {u_rise / 1e6:.2g} MPa) from {t[low]:.4g} to "
        f"{t[high]:.4g} K",
    )  # fmt: skip


def _points(
    temperature_k: FloatArray, stress_pa: FloatArray, u_pa: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Rising temperatures; tests within 3 K of the first of their group are averaged with their weights."""
    t, s, u = (np.asarray(a, dtype=np.float64) for a in (temperature_k, stress_pa, u_pa))
    if t.ndim != 1 or t.shape != s.shape or t.shape != u.shape:
        raise InputError(
            f"temperatures, stresses and uncertainties of shapes {t.shape}, {s.shape}, {u.shape}",
            where="temperature course",
            mend="Give the same number of each",
        )
    for name, array in (("temperature", t), ("stress", s), ("uncertainty", u)):
        require_finite(array, where=f"temperature course, {name}", mend="Leave that test out")
        if array.size and array.min() <= 0:
            raise InputError(
                f"{name} is {array.min():g} at its lowest",
                where="temperature course",
                mend="It must be above 0",
            )
    order = np.argsort(t, kind="stable")
    t, s, u = t[order], s[order], u[order]
    groups: list[list[int]] = []
    for i in range(t.size):
        if groups and t[i] - t[groups[-1][0]] <= _SAME_K:
            groups[-1].append(i)
        else:
            groups.append([i])
    if len(groups) < 3:
        raise InputError(
            f"{len(groups)} different temperatures", where="temperature course",
            mend="It takes three at least to see whether the stress rises",
        )  # fmt: skip
    weight = [1 / u[g] ** 2 for g in groups]
    return (
        np.array([np.average(t[g], weights=w) for g, w in zip(groups, weight, strict=True)]),
        np.array([np.average(s[g], weights=w) for g, w in zip(groups, weight, strict=True)]),
        np.array([1 / np.sqrt(w.sum()) for w in weight]),
    )


def _largest_rise(s: FloatArray, u: FloatArray) -> tuple[float, float, int, int]:
    """Rise that stands out most from its uncertainty, that uncertainty, and between which points."""
    low, high = np.triu_indices(s.size, 1)
    rise, u_rise = s[high] - s[low], np.hypot(u[high], u[low])
    i = int(np.argmax(rise / u_rise))
    return float(rise[i]), float(u_rise[i]), int(low[i]), int(high[i])


def _chance(ratio: float, u: FloatArray, random: np.random.Generator, draws: int) -> float:
    """Chance of a rise as large over its uncertainty among points that are all one stress."""
    low, high = np.triu_indices(u.size, 1)
    noise = u * random.standard_normal((draws, u.size))
    largest = ((noise[:, high] - noise[:, low]) / np.hypot(u[high], u[low])).max(axis=1)
    return float((1 + (largest >= ratio).sum()) / (1 + draws))


def _extreme(
    t: FloatArray, s: FloatArray, drawn_t: FloatArray, drawn_s: FloatArray, part: slice, *, sign: float
) -> Extreme:
    """Peak (sign 1) or minimum (sign -1) among the points of ``part``."""
    offset = part.start or 0
    best = offset + int(np.argmax(sign * s[part]))
    found = offset + np.argmax(sign * drawn_s[:, part], axis=1)
    inside = (found > 0) & (found < s.size - 1)
    share = float(inside.mean())
    if share < _SURE:
        at_end = (found == s.size - 1).mean() >= (found == 0).mean()
        return Extreme(place=Place.AT_END if at_end else Place.AT_START, bracketed_share=share)
    drawn, _ = _vertices(drawn_t[inside], drawn_s[inside], found[inside], sign)
    (centre, height), (off_k, off_pa) = _vertices(t[None], s[None], np.array([best]), sign)
    spacing = float(t[best + 1] - t[best - 1]) / 2
    # The curve between two tests is only a shape: what the two shapes differ by, and no better than half a
    # spacing, stays uncertain.
    u_shape = max(spacing / 2 / np.sqrt(3), abs(float(off_k[0])))
    arrow = _arrow_pa(t[best - 1 : best + 2], s[best - 1 : best + 2], spacing / 2)
    spread_k, spread_pa = (float(v.std(ddof=1)) for v in drawn)
    low, high = (float(q) for q in np.quantile(drawn[0], (0.025, 0.975)))
    at, half = float(centre[0]), 1.96 * float(np.hypot(spread_k, u_shape))
    return Extreme(
        place=Place.INSIDE,
        temperature_k=at,
        u_temperature_k=float(np.hypot(spread_k, u_shape)),
        interval_k=(min(low, at - half), max(high, at + half)),
        stress_pa=float(height[0]),
        u_stress_pa=float(np.sqrt(spread_pa**2 + arrow**2 / 3 + float(off_pa[0]) ** 2)),
        bracketed_share=share,
    )


Pair = tuple[FloatArray, FloatArray]  # temperature [K] and stress [Pa] by row


def _vertices(t: FloatArray, s: FloatArray, middle: np.ndarray, sign: float) -> tuple[Pair, Pair]:
    """Extreme next to each row's point ``middle``, and by how much the parabola there differs.

    The mean of the cubics through the point, both neighbours and the next point on either side; the parabola
    through the three where no cubic has an extreme between the neighbours.
    """
    parabola = _parabola_vertex(t, s, middle, sign)
    total = np.zeros((2, middle.size))
    count = np.zeros(middle.size)
    for first in (-2, -1):
        rows = np.flatnonzero((middle + first >= 0) & (middle + first + 3 < t.shape[1]))
        if not rows.size:
            continue
        x, y, held = _cubic_vertex(t[rows], s[rows], middle[rows], first, sign)
        total[:, rows[held]] += x[held], y[held]
        count[rows[held]] += 1
    cubic = count > 0
    found = np.where(cubic, total / np.maximum(count, 1), parabola)
    off = found - parabola
    return (found[0], found[1]), (off[0], off[1])


def _cubic_vertex(
    t: FloatArray, s: FloatArray, middle: np.ndarray, first: int, sign: float
) -> tuple[FloatArray, FloatArray, np.ndarray]:
    """Extreme of the cubic through four points from ``middle + first`` on, and where it has one that counts."""
    rows = np.arange(middle.size)
    places = middle[:, None] + np.arange(first, first + 4)
    centre, scale = t[rows, middle], t[rows, middle + 1] - t[rows, middle - 1]
    x = (t[rows[:, None], places] - centre[:, None]) / scale[:, None]
    powers = x[:, :, None] ** np.arange(4)
    c0, c1, c2, c3 = np.linalg.solve(powers, s[rows[:, None], places][:, :, None])[:, :, 0].T
    under = c2**2 - 3 * c1 * c3
    below = -c2 + sign * np.sqrt(np.maximum(under, 0.0))
    # This form of the root keeps its digits where the cubic term vanishes.
    step = np.divide(c1, below, out=np.full_like(c1, np.inf), where=below != 0)
    left, right = ((t[rows, middle + k] - centre) / scale for k in (-1, 1))
    held = (under > 0) & (step >= left) & (step <= right)
    step = np.where(held, step, 0.0)
    return centre + step * scale, c0 + step * (c1 + step * (c2 + step * c3)), held


def _parabola_vertex(t: FloatArray, s: FloatArray, middle: np.ndarray, sign: float) -> FloatArray:
    """Extreme of the parabola through ``middle`` and its neighbours, shape (2, rows)."""
    rows = np.arange(middle.size)
    x0, x1, x2 = (t[rows, middle + k] for k in (-1, 0, 1))
    y0, y1, y2 = (s[rows, middle + k] for k in (-1, 0, 1))
    left, right = (y1 - y0) / (x1 - x0), (y2 - y1) / (x2 - x1)
    bend = (right - left) / (x2 - x0)
    # y = y1 + slope (x - x1) + bend (x - x1)^2; the middle point is the outermost, so bend has the right sign
    # unless all three are equal.
    slope = (left * (x2 - x1) + right * (x1 - x0)) / (x2 - x0)
    curved = sign * bend < 0
    step = np.divide(-slope, 2 * bend, out=np.zeros_like(slope), where=curved)
    return np.stack((x1 + step, y1 + slope * step + bend * step**2))


def _arrow_pa(t: FloatArray, s: FloatArray, half_k: float) -> float:
    """By how much the parabola through three points falls off within ``half_k`` of its vertex [Pa]."""
    bend = np.diff(np.diff(s) / np.diff(t))[0] / (t[2] - t[0])
    return abs(float(bend)) * half_k**2
