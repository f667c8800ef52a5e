"""Repeats at one condition: which tests are repeats, their mean at equal plastic strain, and who stands out."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from shpb.arrays import BoolArray, FloatArray, frozen
from shpb.errors import InputError
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.merge.outliers import Outlier, outliers_of
from shpb.rig.gauge import TestKind


class Between(StrEnum):
    """What stands between two points of a curve when it is resampled."""

    STRAIGHT = "straight"
    MONOTONE = "monotone"  # cubic of Fritsch & Carlson 1980: no overshoot, smoother where points are few


@dataclass(frozen=True, slots=True, kw_only=True)
class RepeatSettings:
    """What counts as one condition, and how its curves are averaged.

    Attributes
    ----------
    temperature_k : float
        How far a start temperature may lie from the middle of the others [K].
    bar_rate : float
        How far a mean rate of a bar shot may, relative.
    quasistatic_decades : float
        How far a quasi-static rate may, in decades.
    step : float
        Of the even grid of plastic strain.
    between : Between
        Straight lines, or a monotone cubic.
    outlier : float
        Standard uncertainties by which a repeat must differ to be named.
    """

    temperature_k: float = 10.0
    bar_rate: float = 0.20
    quasistatic_decades: float = 0.2
    step: float = 1e-3
    between: Between = Between.STRAIGHT
    outlier: float = 3.0

    def __post_init__(self) -> None:
        for name in ("temperature_k", "bar_rate", "quasistatic_decades", "step", "outlier"):
            value = getattr(self, name)
            if not (isinstance(value, int | float) and 0 < value < 1e4):
                raise InputError(f"found {value!r}", where=f"settings.{name}", mend="Give a positive number")
        object.__setattr__(self, "between", Between(self.between))


DEFAULT = RepeatSettings()


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Repeats:
    """Mean of the curves of one condition on an even grid of plastic strain; arrays of shape (grid,).

    Attributes
    ----------
    plastic_strain, stress_pa, rate_per_s : float array
        Grid, mean true stress [Pa] and mean true rate [1/s] of the curves that are valid there.
    count : int array
        How many these are. Where it changes, the mean may jump: a curve ends there.
    common : bool array
        Where all of them are.
    scatter_pa : float array
        Standard deviation among the curves [Pa]; NaN where there is only one, which shows none.
    u_own_pa : float array
        Standard uncertainty of the mean without the shared parts [Pa]: of the curves' own errors or of their
        scatter, each over the square root of their number, whichever is larger.
    shared : dict of str to float array
        Relative standard uncertainty of the mean by rig or machine. Repeats do not make it smaller.
    temperature_k, temperature_range_k : float, (float, float)
        Mean and extremes of the start temperatures [K].
    temperature_rise_k : float array or None
        Mean adiabatic rise [K]; None unless every curve has one.
    mean_rate_per_s : float
        Geometric mean of the curves' mean rates [1/s].
    rate_range_per_s : (float, float)
        Extremes of the true rate over all valid spans.
    outliers : tuple of Outlier
        Repeats that differ from the others. They are in the mean all the same.
    curves : tuple of MaterialCurve
        What was averaged.
    """

    plastic_strain: FloatArray
    stress_pa: FloatArray
    rate_per_s: FloatArray
    count: np.ndarray
    common: BoolArray
    scatter_pa: FloatArray
    u_own_pa: FloatArray
    shared: dict[str, FloatArray]
    temperature_k: float
    temperature_range_k: tuple[float, float]
    temperature_rise_k: FloatArray | None
    mean_rate_per_s: float
    rate_range_per_s: tuple[float, float]
    outliers: tuple[Outlier, ...]
    curves: tuple[MaterialCurve, ...]

    @property
    def material(self) -> str:
        """Material by name."""
        return self.curves[0].material

    @property
    def kind(self) -> TestKind:
        """Compression or tension."""
        return self.curves[0].kind

    @property
    def range(self) -> RateRange:
        """Quasi-static machine or bar."""
        return self.curves[0].range

    def u_pa(self) -> FloatArray:
        """Standard uncertainty of the mean with the shared parts [Pa], shape (grid,)."""
        parts = [self.u_own_pa, *(u * self.stress_pa for u in self.shared.values())]
        return np.sqrt(sum(part**2 for part in parts))

    @property
    def common_span(self) -> tuple[float, float] | None:
        """Plastic strains between which every curve is valid; None if there are none."""
        inside = np.flatnonzero(self.common)
        if not inside.size:
            return None
        return float(self.plastic_strain[inside[0]]), float(self.plastic_strain[inside[-1]])


def group_repeats(
    curves: Sequence[MaterialCurve], settings: RepeatSettings = DEFAULT
) -> tuple[tuple[MaterialCurve, ...], ...]:
    """Sort curves into conditions: one material, kind, range, temperature and rate.

    Within material, kind and range the curves are ordered by temperature, and a condition is closed when the
    next one would lie too far from its middle, or push another out; likewise by rate within each. The order of
    the input does not matter.

    Returns
    -------
    tuple of tuple of MaterialCurve
        By material, kind, range, temperature, rate; every curve exactly once.
    """
    by_name: dict[tuple[str, str, str], list[MaterialCurve]] = {}
    for curve in curves:
        by_name.setdefault((curve.material, curve.kind, curve.range), []).append(curve)
    found = []
    for name in sorted(by_name, key=lambda n: (n[0], n[1], n[2] == RateRange.BAR)):
        decades = math.log10(1 + settings.bar_rate)
        if name[2] == RateRange.QUASI_STATIC:
            decades = settings.quasistatic_decades
        for warm in _near(by_name[name], lambda c: c.temperature_k, settings.temperature_k):
            found += _near(warm, lambda c: math.log10(c.mean_rate_per_s), decades)
    return tuple(tuple(group) for group in found)


def _near(
    curves: Sequence[MaterialCurve], key: Callable[[MaterialCurve], float], allowed: float
) -> list[list[MaterialCurve]]:
    """Cut curves, ordered by ``key``, into groups that stay within ``allowed`` of their median."""
    groups: list[list[MaterialCurve]] = []
    for curve in sorted(curves, key=lambda c: (key(c), c.origin)):
        if groups:
            values = [key(c) for c in (*groups[-1], curve)]
            middle = float(np.median(values))
            if values[-1] - middle <= allowed * (1 + 1e-9) and middle - values[0] <= allowed * (1 + 1e-9):
                groups[-1].append(curve)
                continue
        groups.append([curve])
    return groups


def average_repeats(curves: Sequence[MaterialCurve], settings: RepeatSettings = DEFAULT) -> Repeats:
    """Average the curves of one condition at equal plastic strain.

    Each curve is resampled inside its own valid span only, never beyond it. Averaging in time, or point by
    point, would mix different strains. Which curves are repeats is the caller's choice, see
    :func:`group_repeats`.

    Parameters
    ----------
    curves : sequence of MaterialCurve
        At least one; of one material, kind and range.
    settings : RepeatSettings
        Grid, interpolation, limit for outliers.

    Raises
    ------
    InputError
        If there is no curve, materials, kinds or ranges are mixed, or the grid holds no point of any curve.
    """
    curves = tuple(curves)
    _require_one_condition(curves)
    grid = _grid(curves, settings.step)
    if not grid.size:
        raise InputError(
            f"the curves count over less than one step of plastic strain, {settings.step:g}",
            where=", ".join(c.origin for c in curves),
            mend="Choose a smaller step of plastic strain",
        )
    inside = np.array([(grid >= c.span[0]) & (grid <= c.span[1]) for c in curves])
    keep = inside.any(axis=0)  # spans that do not meet leave a gap, which stays one
    grid, inside = grid[keep], inside[:, keep]
    stress, rate, own = (
        np.array([_resampled(grid, c, getattr(c, name), settings.between) for c in curves])
        for name in ("stress_pa", "rate_per_s", "u_own_pa")
    )
    count = inside.sum(axis=0)

    def mean(values: FloatArray) -> FloatArray:
        return np.asarray(np.where(inside, values, 0.0).sum(axis=0) / count)

    middle = mean(stress)
    squares = np.where(inside, (stress - middle) ** 2, 0.0).sum(axis=0)
    scatter = np.full(grid.size, np.nan)
    several = count > 1
    scatter[several] = np.sqrt(squares[several] / (count[several] - 1))
    u_own = np.sqrt(mean(own**2) / count)
    u_own[several] = np.maximum(u_own[several], scatter[several] / np.sqrt(count[several]))
    temperatures = [c.temperature_k for c in curves]
    rates = [c.rate_range_per_s for c in curves]
    for array in (grid, middle, count, scatter, u_own):
        frozen(array)
    return Repeats(
        plastic_strain=grid,
        stress_pa=middle,
        rate_per_s=frozen(mean(rate)),
        count=count,
        common=frozen(count == len(curves)),
        scatter_pa=scatter,
        u_own_pa=u_own,
        shared=_shared(curves, inside, stress, middle, count),
        temperature_k=float(np.mean(temperatures)),
        temperature_range_k=(min(temperatures), max(temperatures)),
        temperature_rise_k=_mean_rise(curves, grid, settings.between, mean),
        mean_rate_per_s=float(np.exp(np.mean([math.log(c.mean_rate_per_s) for c in curves]))),
        rate_range_per_s=(min(r[0] for r in rates), max(r[1] for r in rates)),
        outliers=outliers_of(curves, grid, inside, stress, own, settings.outlier),
        curves=curves,
    )


def _require_one_condition(curves: tuple[MaterialCurve, ...]) -> None:
    if not curves:
        raise InputError("no curve", where="repeats", mend="Give at least one curve")
    for name in ("material", "kind", "range"):
        found = list(dict.fromkeys(str(getattr(c, name)) for c in curves))
        if len(found) > 1:
            raise InputError(
                f"curves of different {name}: {', '.join(found)}",
                where="repeats",
                mend="Average only repeats of one condition",
            )


def _grid(curves: tuple[MaterialCurve, ...], step: float) -> FloatArray:
    """Multiples of ``step`` from the first start to the last end, so that all conditions share their points."""
    first = math.ceil(min(c.span[0] for c in curves) / step - 1e-9)
    last = math.floor(max(c.span[1] for c in curves) / step + 1e-9)
    if last - first > 1_000_000:
        raise InputError(
            f"a step of {step:g} makes {last - first} points",
            where="settings.step",
            mend="Choose a larger step",
        )
    grid = np.arange(first, last + 1, dtype=np.float64) * step
    # A multiple that misses an end by rounding alone is that end.
    for end in (end for c in curves for end in c.span):
        grid[np.abs(grid - end) <= 1e-9 * step] = end
    return grid


def _resampled(grid: FloatArray, curve: MaterialCurve, values: FloatArray, between: Between) -> FloatArray:
    """Values on the grid; outside the curve they are clamped and never used."""
    place = np.clip(grid, curve.plastic_strain[0], curve.plastic_strain[-1])
    if between is Between.STRAIGHT or values.size < 3:
        return np.interp(place, curve.plastic_strain, values)
    from scipy.interpolate import PchipInterpolator

    return np.asarray(PchipInterpolator(curve.plastic_strain, values)(place))


def _shared(
    curves: tuple[MaterialCurve, ...],
    inside: BoolArray,
    stress: FloatArray,
    mean: FloatArray,
    count: np.ndarray,
) -> dict[str, FloatArray]:
    """Relative uncertainty of the mean by group: one error moves all curves of the group together."""
    shared: dict[str, FloatArray] = {}
    for curve, held, values in zip(curves, inside, stress, strict=True):
        if curve.u_shared:
            part = np.where(held, curve.u_shared * values, 0.0) / (count * mean)
            shared[curve.shared_group] = shared.get(curve.shared_group, np.zeros_like(mean)) + part
    return {name: frozen(part) for name, part in shared.items()}


def _mean_rise(
    curves: tuple[MaterialCurve, ...],
    grid: FloatArray,
    between: Between,
    mean: Callable[[FloatArray], FloatArray],
) -> FloatArray | None:
    rises = [c.temperature_rise_k for c in curves]
    if any(rise is None for rise in rises):
        return None
    return frozen(
        mean(
            np.array(
                [_resampled(grid, c, r, between) for c, r in zip(curves, rises, strict=True) if r is not None]
            )
        )
    )
