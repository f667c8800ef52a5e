"""Flow stress points of a merged campaign: what a constitutive law is fitted to."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from shpb.arrays import BoolArray, FloatArray, frozen
from shpb.errors import InputError

IntArray = NDArray[np.int_]

# A true strain of 3 is a twentieth of the length: beyond what any compression test reaches, so it is per cent.
_MOST_STRAIN = 3.0
# Metals, polymers and rock flow above 10 kPa: less is MPa without the factor.
_LEAST_STRESS_PA = 1e4
_SAME_TEMPERATURE_K = 1.0


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SharedError:
    """One scale error that acts on all points of a rig, of a testing machine, or of a single specimen.

    Attributes
    ----------
    name : str
    relative_u : float
        Standard uncertainty of the factor (1 + d) on the stress of its points.
    members : bool array, shape (points,)
    """

    name: str
    relative_u: float
    members: BoolArray

    def __post_init__(self) -> None:
        where = f"shared error {self.name}"
        if not 0 < self.relative_u < 1:
            raise InputError(
                f"relative_u is {self.relative_u:g}, expected a fraction above 0 and below 1",
                where=where,
                mend="Write 0.01 for one per cent",
            )
        members = np.array(self.members)
        if members.dtype != np.bool_ or members.ndim != 1:
            raise InputError("members must be a bool array of shape (points,)", where=where)
        object.__setattr__(self, "members", frozen(members))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FlowPoints:
    """Flow stress over plastic strain, rate and temperature, with uncertainty and belonging.

    Attributes
    ----------
    plastic_strain : float array, shape (points,)
        True plastic strain, rising within a condition.
    stress_pa : float array, shape (points,)
        True stress [Pa].
    rate_per_s : float array, shape (points,)
        True strain rate [1/s].
    temperature_k : float array, shape (points,)
        Temperature at the start of the test [K], one value a condition.
    u_own_pa : float array, shape (points,)
        Standard uncertainty of the stress that no other condition shares [Pa].
    condition : int array, shape (points,)
        Points with one number were measured together (one test, or repeats of one condition).
    adiabatic : bool array, shape (points,)
        True where the specimen kept the heat of its plastic work; one value a condition.
    shared : tuple of SharedError
        Errors that points have in common. An error of one specimen alone is one too.
    heat_k_m3_j : float or None
        Temperature rise per plastic work, share/(density * heat capacity) [K m^3/J]; None if not known.
    own_correlation : float
        Part of the own variance of a condition's best point that is one factor on the whole curve, as a wrong diameter
        makes it: the correlation of equally good points. 0 where each point has errors of its own; below 1.
    labels : mapping of int to str, optional
        What to call a condition in messages; "condition 3" where it has none.

    Raises
    ------
    InputError
        At the first thing that cannot be: it names the point and the mend.
    """

    plastic_strain: FloatArray
    stress_pa: FloatArray
    rate_per_s: FloatArray
    temperature_k: FloatArray
    u_own_pa: FloatArray
    condition: IntArray
    adiabatic: BoolArray
    shared: tuple[SharedError, ...] = ()
    heat_k_m3_j: float | None = None
    own_correlation: float = 0.0
    labels: Mapping[int, str] | None = None

    def __post_init__(self) -> None:
        for name in _FLOATS:
            object.__setattr__(self, name, frozen(np.array(getattr(self, name), dtype=float)))
        condition, adiabatic = np.array(self.condition), np.array(self.adiabatic)
        if condition.size and not np.issubdtype(condition.dtype, np.integer):
            raise InputError("condition must hold whole numbers", where="condition")
        if adiabatic.size and adiabatic.dtype != np.bool_:
            raise InputError("adiabatic must hold True or False", where="adiabatic")
        object.__setattr__(self, "condition", frozen(condition))
        object.__setattr__(self, "adiabatic", frozen(adiabatic))
        _check_shapes(self)
        _check_values(self)
        _check_conditions(self)
        if self.heat_k_m3_j is not None and not (np.isfinite(self.heat_k_m3_j) and self.heat_k_m3_j > 0):
            raise InputError(
                f"found {self.heat_k_m3_j:g}, expected share/(density * heat capacity) above 0 in K m3/J",
                where="heat_k_m3_j",
            )
        if not 0 <= self.own_correlation < 1:
            raise InputError(
                f"found {self.own_correlation:g}, expected 0 to below 1", where="own_correlation"
            )

    def __len__(self) -> int:
        return self.stress_pa.size

    @property
    def conditions(self) -> tuple[int, ...]:
        """The numbers of the conditions, in order of first appearance."""
        return tuple(int(number) for number in dict.fromkeys(self.condition.tolist()))

    def of(self, condition: int) -> BoolArray:
        """Which points belong to ``condition``, shape (points,)."""
        return np.asarray(self.condition == condition)

    def label(self, condition: int) -> str:
        """What to call a condition in a message."""
        return (self.labels or {}).get(condition, f"condition {condition}")

    def mean_rates_per_s(self) -> FloatArray:
        """Geometric mean rate of each condition [1/s], shape (conditions,)."""
        return np.array([np.exp(np.mean(np.log(self.rate_per_s[self.of(c)]))) for c in self.conditions])

    def start_temperatures_k(self) -> FloatArray:
        """Start temperature of each condition [K], shape (conditions,)."""
        return np.array([self.temperature_k[self.of(c)][0] for c in self.conditions])

    def select(self, which: BoolArray) -> FlowPoints:
        """The points for which ``which`` is True; shared errors without a member left fall away."""
        which = np.asarray(which)
        if which.dtype != np.bool_ or which.shape != self.stress_pa.shape or not which.any():
            raise InputError(
                "a selection is a bool array of shape (points,) that keeps a point", where="select"
            )
        shared = tuple(
            replace(error, members=error.members[which])
            for error in self.shared
            if error.members[which].any()
        )
        parts: dict[str, Any] = {
            name: getattr(self, name)[which] for name in (*_FLOATS, "condition", "adiabatic")
        }
        return replace(self, **parts, shared=shared)

    def heated_k(self) -> FloatArray:
        """Temperature at each point [K], shape (points,), from the measured stress; the start where isothermal.

        Straight lines between the points of a condition and a constant stress before the first.
        """
        temperature = self.temperature_k.copy()
        if self.heat_k_m3_j is None:
            return temperature
        for number in self.conditions:
            of = self.of(number) & self.adiabatic
            if of.any():
                strain, stress = self.plastic_strain[of], self.stress_pa[of]
                steps = np.diff(strain) * 0.5 * (stress[1:] + stress[:-1])
                work = np.concatenate(([strain[0] * stress[0]], strain[0] * stress[0] + np.cumsum(steps)))
                temperature[of] += self.heat_k_m3_j * work
        return temperature


_FLOATS = tuple(
    f.name for f in fields(FlowPoints)
    if f.name in ("plastic_strain", "stress_pa", "rate_per_s", "temperature_k", "u_own_pa")
)  # fmt: skip


def _check_shapes(points: FlowPoints) -> None:
    count = points.stress_pa.size
    if points.stress_pa.ndim != 1 or count == 0:
        raise InputError(
            f"shape {points.stress_pa.shape}, expected (points,) with at least one point", where="stress_pa"
        )
    for name in (*_FLOATS, "condition", "adiabatic"):
        if (shape := getattr(points, name).shape) != (count,):
            raise InputError(f"shape {shape}, expected ({count},) like stress_pa", where=name)
    for error in points.shared:
        if error.members.shape != (count,) or not error.members.any():
            raise InputError(
                f"members of shape {error.members.shape} with {np.count_nonzero(error.members)} True, expected "
                f"({count},) with at least one",
                where=f"shared error {error.name}",
            )
    names = [error.name for error in points.shared]
    if len(set(names)) < len(names):
        raise InputError("two shared errors have one name", where="shared")


def _check_values(points: FlowPoints) -> None:
    for name in _FLOATS:
        values = getattr(points, name)
        if not np.isfinite(values).all():
            first = int(np.flatnonzero(~np.isfinite(values))[0])
            raise InputError(
                f"found {values[first]}, expected a number",
                where=f"{name}, point {first}",
                mend="Leave the point out",
            )
    _require(points, "plastic_strain", points.plastic_strain >= 0, "0 or more",
             "Take the elastic part off with the true modulus and leave out what lies before yield")  # fmt: skip
    _require(points, "plastic_strain", points.plastic_strain <= _MOST_STRAIN,
             f"a plain ratio of at most {_MOST_STRAIN:g}",
             "This looks like strain in per cent: divide by 100")  # fmt: skip
    _require(points, "stress_pa", points.stress_pa > 0, "more than 0 (loading is positive)",
             "Give compressive stress as positive")  # fmt: skip
    _require(points, "rate_per_s", points.rate_per_s > 0, "more than 0 per second",
             "Give the true strain rate of the test, not 0 for a slow one")  # fmt: skip
    _require(points, "temperature_k", points.temperature_k > 0, "more than 0 K",
             "Add 273.15 to a temperature in degrees Celsius")  # fmt: skip
    _require(points, "u_own_pa", points.u_own_pa > 0, "more than 0 Pa",
             "Every point needs an uncertainty: without one it would count for ever")  # fmt: skip
    if points.stress_pa.max() < _LEAST_STRESS_PA:
        raise InputError(
            f"the greatest stress is {points.stress_pa.max():g} Pa",
            where="stress_pa",
            mend="This looks like MPa: multiply by 1e6",
        )


def _require(points: FlowPoints, name: str, good: BoolArray, expected: str, mend: str) -> None:
    if good.all():
        return
    first = int(np.flatnonzero(~good)[0])
    raise InputError(
        f"found {getattr(points, name)[first]:g}, expected {expected}",
        where=f"{name}, point {first} ({points.label(int(points.condition[first]))})",
        mend=mend,
    )


def _check_conditions(points: FlowPoints) -> None:
    for number in points.conditions:
        of, label = points.of(number), points.label(number)
        strain = points.plastic_strain[of]
        if (np.diff(strain) < 0).any():
            first = int(np.flatnonzero(np.diff(strain) < 0)[0]) + 1
            raise InputError(
                f"strain falls from {strain[first - 1]:g} to {strain[first]:g} at its point {first}",
                where=f"plastic_strain, {label}",
                mend="Cut the curve where unloading begins, and give the points of a condition by rising strain",
            )
        temperature = points.temperature_k[of]
        if np.ptp(temperature) > _SAME_TEMPERATURE_K:
            raise InputError(
                f"mixed temperatures, {temperature.min():g} to {temperature.max():g} K",
                where=f"temperature_k, {label}",
                mend="temperature_k is that at the start of the test, one a condition; heating is worked out",
            )
        if len(set(points.adiabatic[of].tolist())) > 1:
            raise InputError("some points are adiabatic and some are not", where=f"adiabatic, {label}")
