"""One curve of the material, wherever it was measured: true stress over true plastic strain, with rate and heat."""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from shpb.arrays import FloatArray, frozen, require_finite
from shpb.errors import InputError
from shpb.rig.gauge import TestKind


class RateRange(StrEnum):
    """By which kind of test a curve was measured: their errors differ, and so does what disturbs them."""

    QUASI_STATIC = "quasi-static"
    BAR = "bar"


@dataclass(frozen=True, slots=True, kw_only=True)
class FlowPoint:
    """A curve at one plastic strain.

    Attributes
    ----------
    plastic_strain, stress_pa, rate_per_s : float
        True plastic strain, true stress [Pa], true strain rate [1/s].
    u_own_pa : float
        Standard uncertainty of the stress that is this curve's own [Pa].
    temperature_rise_k : float or None
        Adiabatic rise up to this strain [K]; None where isothermal or not known.
    """

    plastic_strain: float
    stress_pa: float
    rate_per_s: float
    u_own_pa: float
    temperature_rise_k: float | None


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class MaterialCurve:
    """True stress over true plastic strain of one test; arrays of shape (points,).

    Attributes
    ----------
    plastic_strain : float array
        True plastic strain e_t - s_t/E with the true modulus, strictly rising.
    stress_pa : float array
        True stress [Pa], above 0.
    rate_per_s : float array
        True strain rate [1/s], above 0.
    temperature_k : float
        Of the specimen at the start [K].
    temperature_rise_k : float array or None
        Adiabatic rise along the curve [K]; None for an isothermal test.
    u_own_pa : float array
        Standard uncertainty of the stress that this test does not share with others [Pa], above 0.
    u_shared : float
        Relative standard uncertainty of the stress that every test of ``shared_group`` has in common.
    shared_group : str
        Name of the rig or machine; empty where ``u_shared`` is 0.
    span : (float, float)
        Plastic strains between which the curve is valid; nothing outside is ever used.
    range : RateRange
        Quasi-static machine or bar.
    material, kind
        Material by name, compression or tension.
    origin, sha256 : str
        File or shot that it came from, and the hash of its bytes.
    sources : tuple of (str, str)
        Name and hash of every file that went into it, where there is more than one.
    remarks : tuple of str
        What was done and assumed on the way.
    """

    plastic_strain: FloatArray
    stress_pa: FloatArray
    rate_per_s: FloatArray
    temperature_k: float
    temperature_rise_k: FloatArray | None = None
    u_own_pa: FloatArray
    u_shared: float = 0.0
    shared_group: str = ""
    span: tuple[float, float]
    range: RateRange
    material: str
    kind: TestKind
    origin: str = ""
    sha256: str = ""
    sources: tuple[tuple[str, str], ...] = ()
    remarks: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        where = self.origin or "material curve"
        names = ["plastic_strain", "stress_pa", "rate_per_s", "u_own_pa"]
        names += [] if self.temperature_rise_k is None else ["temperature_rise_k"]
        shape = np.shape(self.plastic_strain)
        if len(shape) != 1 or shape[0] < 2:
            raise InputError(
                f"plastic strain of shape {shape}", where=where, mend="A curve needs at least two points"
            )
        for name in names:
            array = np.array(getattr(self, name), dtype=np.float64)
            if array.shape != shape:
                raise InputError(
                    f"{name} has the shape {array.shape}, plastic_strain {shape}",
                    where=where,
                    mend="Give arrays of the same length",
                )
            require_finite(array, where=f"{where}, {name}", mend="Cut the curve before that point")
            object.__setattr__(self, name, frozen(array))
        self._require_physical(where)

    def _require_physical(self, where: str) -> None:
        strain = self.plastic_strain
        falls = np.flatnonzero(np.diff(strain) <= 0)
        if falls.size:
            i = int(falls[0]) + 1
            raise InputError(
                f"plastic strain {strain[i]:.6g} after {strain[i - 1]:.6g}",
                where=f"{where}, point {i}",
                mend="Plastic strain must rise from point to point",
            )
        if strain[-1] > 3:
            raise InputError(
                f"plastic strain up to {strain[-1]:.4g}", where=where, mend="Give fractions, not per cent"
            )
        for name in ("stress_pa", "rate_per_s", "u_own_pa"):
            lowest = float(getattr(self, name).min())
            if lowest <= 0:
                raise InputError(
                    f"{name} is {lowest:g} at its lowest", where=where, mend="It must be above 0"
                )
        if not (self.temperature_k > 0 and math.isfinite(self.temperature_k)):
            raise InputError(
                f"a temperature of {self.temperature_k:g} K",
                where=where,
                mend="Give the temperature in kelvin",
            )
        if not 0 <= self.u_shared < 1 or (self.u_shared > 0 and not self.shared_group):
            raise InputError(
                f"a shared relative uncertainty of {self.u_shared:g} in the group {self.shared_group!r}",
                where=where,
                mend="Give a share below 1, and the rig or machine that shares it",
            )
        low, high = self.span
        if not strain[0] <= low < high <= strain[-1]:
            raise InputError(
                f"valid from {low:.4g} to {high:.4g} on a curve from {strain[0]:.4g} to {strain[-1]:.4g}",
                where=where,
                mend="The valid span must lie on the curve",
            )

    @property
    def mean_rate_per_s(self) -> float:
        """Mean true rate over the valid span, weighted by strain [1/s]: span over the time spent in it."""
        strain, rate = self._inside()
        pace = 1 / rate
        time = float(((pace[1:] + pace[:-1]) / 2 * np.diff(strain)).sum())
        return (float(strain[-1]) - float(strain[0])) / time

    @property
    def rate_range_per_s(self) -> tuple[float, float]:
        """Lowest and highest true rate in the valid span [1/s]."""
        rate = self._inside()[1]
        return float(rate.min()), float(rate.max())

    def _inside(self) -> tuple[FloatArray, FloatArray]:
        low, high = self.span
        inner = self.plastic_strain[(self.plastic_strain > low) & (self.plastic_strain < high)]
        strain = np.concatenate(([low], inner, [high]))
        return strain, np.interp(strain, self.plastic_strain, self.rate_per_s)

    def holds(self, plastic_strain: float) -> bool:
        """Whether a strain lies in the valid span."""
        return self.span[0] <= plastic_strain <= self.span[1]

    def at(self, plastic_strain: float) -> FlowPoint | None:
        """The curve at one plastic strain, by straight lines; None outside the valid span."""
        if not self.holds(plastic_strain):
            return None

        def value(array: FloatArray) -> float:
            return float(np.interp(plastic_strain, self.plastic_strain, array))

        rise = self.temperature_rise_k
        return FlowPoint(
            plastic_strain=plastic_strain,
            stress_pa=value(self.stress_pa),
            rate_per_s=value(self.rate_per_s),
            u_own_pa=value(self.u_own_pa),
            temperature_rise_k=None if rise is None else value(rise),
        )
