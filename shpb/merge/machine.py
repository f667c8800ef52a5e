"""What the testing machine adds to a measured displacement: its compliance, and how it is taken out.

A displacement that is not measured on the specimen holds the stretch of load cell, columns, grips and
platens. Three ways to know it: one number, a curve of displacement against load, or a blank run: the
platens driven against each other without a specimen. The curve is not one number, because contacts
stiffen with load. Where none of these was measured, the elastic slope of the test itself serves, if the
true modulus is known (:func:`slope_corrected`).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from shpb.arrays import FloatArray, frozen, require_finite
from shpb.errors import InputError
from shpb.merge.table_columns import COMPLIANCE, DISPLACEMENT, FORCE, MACHINE_MEASURES
from shpb.merge.text_table import read_table
from shpb.rig.mistakes import Collector

_LOAD_STEPS = 200  # into which a measured curve is averaged at most
_LEAST_POINTS = 4
_HALVINGS = 60


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Compliance:
    """Displacement of the machine against load, from nothing at no load; rising, loading positive.

    Attributes
    ----------
    load_n, displacement_m : float array, shape (points,)
        The curve [N], [m]; both strictly rising from zero. Two points are a constant compliance.
    beyond : bool
        Whether the last slope holds beyond the last load too (a stated number), or is not known there.
    origin, sha256 : str
        Where it came from, and the hash of the file's bytes if it was one.
    """

    load_n: FloatArray
    displacement_m: FloatArray
    beyond: bool = False
    origin: str = ""
    sha256: str = ""

    def __post_init__(self) -> None:
        load, moved = (np.array(a, dtype=np.float64) for a in (self.load_n, self.displacement_m))
        where = self.origin or "compliance"
        for array in (load, moved):
            require_finite(array, where=where, mend="Remove the points that are no numbers")
        if load.size < 2 or load.shape != moved.shape or load.ndim != 1:
            raise InputError(
                f"{load.size} loads and {moved.size} displacements",
                where=where,
                mend="Give the same number of both, at least two",
            )
        if load[0] != 0 or moved[0] != 0 or np.diff(load).min() <= 0 or np.diff(moved).min() <= 0:
            raise InputError(
                "the displacement of the machine does not rise from zero with the load",
                where=where,
                mend="Give loads and displacements that both rise, from no load on",
            )
        object.__setattr__(self, "load_n", frozen(load))
        object.__setattr__(self, "displacement_m", frozen(moved))

    @classmethod
    def of_number(cls, compliance_m_n: float, origin: str = "stated number") -> Compliance:
        """Return a compliance [m/N] that is the same at every load."""
        if not 0 < compliance_m_n < np.inf:
            raise InputError(
                f"a compliance of {compliance_m_n * 1e6:g} mm/kN", where=origin, mend="Give a positive number"
            )
        load = np.array([0.0, 1.0])
        return cls(load_n=load, displacement_m=load * compliance_m_n, beyond=True, origin=origin)

    def machine_displacement_m(self, force_n: FloatArray) -> FloatArray:
        """Displacement of the machine [m] under ``force_n`` [N], any shape; odd in the force.

        Between the points the curve is a monotone cubic (F. N. Fritsch, R. E. Carlson, SIAM J. Numer.
        Anal. 17 (1980) 238-246), so it never bends back between two readings.

        Raises
        ------
        InputError
            If a load lies beyond the curve: it is never carried on.
        """
        size = np.abs(np.asarray(force_n, dtype=np.float64))
        self._require_reach(size, self.load_n, "load", "kN", 1e-3)
        if self.beyond:
            return np.sign(force_n) * size * float(self.displacement_m[-1] / self.load_n[-1])
        curve = _monotone(self.load_n, self.displacement_m)
        return np.asarray(np.sign(force_n) * curve(size))

    def force_n(self, displacement_m: FloatArray) -> FloatArray:
        """Load [N] at which the machine itself has moved by ``displacement_m`` [m]: the inverse."""
        size = np.abs(np.asarray(displacement_m, dtype=np.float64))
        self._require_reach(size, self.displacement_m, "displacement", "mm", 1e3)
        if self.beyond:
            return np.sign(displacement_m) * size * float(self.load_n[-1] / self.displacement_m[-1])
        # The curve rises, so the interval of each value is known and halving it cannot fail.
        place = np.clip(np.searchsorted(self.displacement_m, size, side="right"), 1, self.load_n.size - 1)
        low, high = self.load_n[place - 1], self.load_n[place]
        curve = _monotone(self.load_n, self.displacement_m)
        for _ in range(_HALVINGS):
            middle = (low + high) / 2
            under = curve(middle) < size
            low, high = np.where(under, middle, low), np.where(under, high, middle)
        return np.asarray(np.sign(displacement_m) * (low + high) / 2)

    def _require_reach(self, size: FloatArray, axis: FloatArray, what: str, unit: str, scale: float) -> None:
        if not self.beyond and size.size and size.max() > axis[-1] * (1 + 1e-9):
            raise InputError(
                f"the {what} reaches {size.max() * scale:.4g} {unit}, the compliance of the machine is known "
                f"up to {axis[-1] * scale:.4g} {unit}",
                where=self.origin or "compliance",
                mend="Load the blank run at least as high as the test, or cut the test there",
            )


def specimen_displacement_m(
    displacement_m: FloatArray, force_n: FloatArray, compliance: Compliance
) -> FloatArray:
    """Displacement of the specimen alone, u - C(F) [m], shape (samples,).

    Parameters
    ----------
    displacement_m, force_n : float array, shape (samples,)
        As measured, loading positive [m], [N].
    compliance : Compliance
        Of the machine, with grips or platens.

    Raises
    ------
    InputError
        If the test was loaded higher than the compliance is known.
    """
    return displacement_m - compliance.machine_displacement_m(force_n)


def slope_corrected(
    strain: FloatArray, stress_pa: FloatArray, apparent_pa: float, modulus_pa: float
) -> FloatArray:
    """Strain without what makes the elastic slope too low: e - s (1/E_apparent - 1/E_true).

    Holds if whatever gives way does so in proportion to the load; a contact that stiffens does not.

    Parameters
    ----------
    strain, stress_pa : float array, shape (samples,)
        Engineering strain [1] and stress [Pa].
    apparent_pa : float
        Slope of the elastic part as measured [Pa]; state the range that it was taken from.
    modulus_pa : float
        True Young's modulus [Pa].

    Raises
    ------
    InputError
        If a slope is not positive, or the apparent slope is above the modulus: then the strain is too
        small, and no compliance explains it.
    """
    if not (apparent_pa > 0 and modulus_pa > 0):
        raise InputError(
            f"an apparent slope of {apparent_pa / 1e9:g} GPa and a modulus of {modulus_pa / 1e9:g} GPa",
            where="slope correction",
            mend="Both must be positive",
        )
    if apparent_pa > 1.02 * modulus_pa:
        raise InputError(
            f"the apparent slope of {apparent_pa / 1e9:.4g} GPa is above the modulus of {modulus_pa / 1e9:.4g} GPa",
            where="slope correction",
            mend="Check gauge length, area, units and modulus; compliance can only make it smaller",
        )
    return strain - stress_pa * (1 / apparent_pa - 1 / modulus_pa)


def read_compliance(path: Path, *, blank_run: bool) -> Compliance:
    """Read a machine's compliance from a text table.

    Parameters
    ----------
    path : Path
        Columns ``force_kN`` (or N) and ``displacement_mm`` (or ``compliance_mm_per_kN``, displacement over
        load), as a curve that somebody has drawn up, or as a blank run recorded by the machine.
    blank_run : bool
        Whether it is a record: then only its way up to the highest load counts, the readings are averaged
        in even steps of load, and the displacement at first contact is its zero.

    Raises
    ------
    FileMistakes
        With every mistake of the table.
    InputError
        If the file cannot be read.
    """
    what = "blank run" if blank_run else "compliance curve"
    seen = Collector(path.name)
    table = read_table(path, what, MACHINE_MEASURES, seen)
    load, moved = table.values.get(FORCE.name), table.values.get(DISPLACEMENT.name)
    ratio = table.values.get(COMPLIANCE.name)
    if not seen.mistakes and load is None:
        seen.add("the table", "no column of loads", "force_kN or force_N", "Add it")
    if not seen.mistakes and moved is None and ratio is None:
        seen.add("the table", "no column of displacements", "displacement_mm", "Add it")
    seen.finish()
    assert load is not None
    if moved is None and ratio is not None:
        moved = ratio * load
    assert moved is not None
    load, moved = _loading_positive(load, moved)
    points = averaged_by_load(load, moved) if blank_run else _in_order(load, moved, seen)
    seen.finish()
    if points[0].size < 2:
        seen.add(
            "the table", f"{load.size} rows of which no rising curve is left", "displacement rising with load",
            "Check that force and displacement are not exchanged and that the file is the blank run",
        )  # fmt: skip
        seen.finish()
    return Compliance(
        load_n=points[0], displacement_m=points[1], origin=f"{what} {path.name}", sha256=table.sha256
    )


def _loading_positive(load: FloatArray, moved: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Machines count compression negative or positive; its own sign of each is that of its far end."""

    def turned(values: FloatArray) -> FloatArray:
        return -values if abs(values.min()) > abs(values.max()) else values

    return turned(load), turned(moved)


def _in_order(load: FloatArray, moved: FloatArray, seen: Collector) -> tuple[FloatArray, FloatArray]:
    order = np.argsort(load, kind="stable")
    load, moved = load[order], moved[order]
    if load[0] > 0:
        load, moved = np.insert(load, 0, 0.0), np.insert(moved, 0, 0.0)
    bad = np.flatnonzero((np.diff(load) <= 0) | (np.diff(moved) <= 0))
    if bad.size:
        i = bad[0] + 1
        seen.add(
            f"the point at {load[i] / 1e3:g} kN", f"{moved[i] * 1e3:g} mm after {moved[i - 1] * 1e3:g} mm",
            "displacement rising with load, each load once",
            "Remove the point, or give the file as blank_run, which is averaged",
        )  # fmt: skip
    if load[0] < 0 or moved[0] < 0 or (load[0] == 0) != (moved[0] == 0):
        seen.add(
            "the first point", f"{load[0] / 1e3:g} kN and {moved[0] * 1e3:g} mm", "no displacement at no load",
            "Shift the curve to zero",
        )  # fmt: skip
    return load, moved


def averaged_by_load(load_n: FloatArray, displacement_m: FloatArray) -> tuple[FloatArray, FloatArray]:
    """A rising curve from zero out of the readings of a blank run, shapes (points,).

    The way up to the highest load is cut into even steps of load; within each, loads and displacements
    are averaged. Steps whose means do not rise are pooled with their neighbours. The curve is then shifted
    so that its first straight part begins at zero: where the platens touch, not where the machine started.
    """
    top = int(np.argmax(load_n))
    load, moved = load_n[: top + 1], displacement_m[: top + 1]
    floor = 0.01 * load[top]  # below it the platens may not touch yet
    load, moved = load[load > floor], moved[load > floor]
    steps = int(min(_LOAD_STEPS, load.size // 3))
    if steps < _LEAST_POINTS:
        return np.zeros(0), np.zeros(0)
    index = np.minimum(((load - floor) / (load.max() - floor) * steps).astype(np.int64), steps - 1)
    count = np.bincount(index, minlength=steps).astype(np.float64)
    held = count > 0
    mean_load = np.bincount(index, load, steps)[held] / count[held]
    mean_moved = np.bincount(index, moved, steps)[held] / count[held]
    if mean_load.size < _LEAST_POINTS:
        return np.zeros(0), np.zeros(0)
    mean_load, mean_moved = pooled_rising(mean_load, mean_moved, count[held])
    if mean_load.size < 2:
        return np.zeros(0), np.zeros(0)
    first = (mean_moved[1] - mean_moved[0]) / (mean_load[1] - mean_load[0])
    contact = mean_moved[0] - first * mean_load[0]
    return np.insert(mean_load, 0, 0.0), np.insert(mean_moved - contact, 0, 0.0)


def pooled_rising(other: FloatArray, rising: FloatArray, weight: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Pool neighbours until ``rising`` rises strictly; ``other`` is averaged over the same pools.

    Pooling of adjacent violators (R. E. Barlow et al., Statistical Inference under Order Restrictions,
    1972): no reading is dropped and none is favoured, as picking each new highest value would do.

    Parameters
    ----------
    other, rising, weight : float array, shape (points,)
        Weights are positive.

    Returns
    -------
    (float array, float array), shape (pools,)
        Means of ``other`` and of ``rising``.
    """
    pools: list[tuple[float, float, float]] = []
    for a, b, w in zip(other.tolist(), rising.tolist(), weight.tolist(), strict=True):
        mean_a, mean_b, total = a, b, w
        while pools and pools[-1][1] >= mean_b:
            last_a, last_b, last = pools.pop()
            mean_a = (mean_a * total + last_a * last) / (total + last)
            mean_b = (mean_b * total + last_b * last) / (total + last)
            total += last
        pools.append((mean_a, mean_b, total))
    table = np.array(pools).reshape(-1, 3)
    return table[:, 0].copy(), table[:, 1].copy()


def _monotone(load: FloatArray, moved: FloatArray) -> Callable[[FloatArray], FloatArray]:
    if load.size == 2:
        return lambda force: np.interp(force, load, moved)
    from scipy.interpolate import PchipInterpolator

    curve = PchipInterpolator(load, moved)
    return lambda force: np.asarray(curve(np.minimum(force, load[-1])))
