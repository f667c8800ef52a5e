"""A pressure bar and the striker: one material, one constant round section each."""

from __future__ import annotations

import math
from dataclasses import dataclass

from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.rig.propagation_table import PropagationTable


@dataclass(frozen=True, slots=True, kw_only=True)
class Bar:
    """A pressure bar: one material, one constant round section.

    ``wave_speed_m_s`` is the one-dimensional bar speed c0. Where a rig file states Young's
    modulus instead, c0 = sqrt(E/rho) is put here; where both stand, the measured speed rules,
    because a handbook modulus is uncertain by 1 to 3 %.

    With a measured ``propagation`` table the wave speed is only a reference: that of slow waves, at the table's first
    frequencies. ``young_modulus_pa``, ``force_per_strain_n`` and ``impedance_n_s_m`` then hold for slow waves alone;
    what a pulse does at other frequencies is in its force and velocity strain (:mod:`shpb.wave.propagation`).
    """

    material: str
    diameter_m: Quantity
    length_m: Quantity
    density_kg_m3: Quantity
    wave_speed_m_s: Quantity
    poisson_ratio: Quantity
    yield_strength_pa: Quantity | None = None
    stated_modulus_pa: Quantity | None = (
        None  # what the wave speed was worked out from, where it was not measured
    )
    modulus_temperature_coefficient_per_k: Quantity | None = None  # dE/dT/E, negative for metals
    propagation: PropagationTable | None = None  # of a bar that is not elastic, from a calibration

    def __post_init__(self) -> None:
        for name in ("diameter_m", "length_m", "density_kg_m3", "wave_speed_m_s"):
            _require_positive(getattr(self, name), f"bar {name}")
        if not 0.0 <= self.poisson_ratio < 0.5:
            raise InputError(
                f"Poisson's ratio is {float(self.poisson_ratio)}",
                where="bar poisson_ratio",
                mend="Give a value from 0 to 0.49",
            )

    @property
    def radius_m(self) -> float:
        """Radius a [m]."""
        return self.diameter_m / 2

    @property
    def radius_time_s(self) -> float:
        """a/c0 [s], the natural unit of time of the bar's dispersion."""
        return self.radius_m / self.wave_speed_m_s

    @property
    def front_speed_m_s(self) -> float:
        """Speed of a front [m/s], by which pulses are expected and windows laid.

        That of slow waves in an elastic bar; in one whose propagation was measured the greatest phase speed that is
        known within 1 %, because what is stiffer at high frequency sends its fronts ahead.
        """
        table = self.propagation
        if table is None:
            return float(self.wave_speed_m_s)
        pairs = zip(table.phase_speed_m_s, table.u_phase_speed_m_s, strict=True)
        return max((c for c, u in pairs if u < 0.01 * c), default=float(self.wave_speed_m_s))

    @property
    def area_m2(self) -> float:
        """Area of the section [m^2]."""
        return math.pi * self.diameter_m**2 / 4

    @property
    def young_modulus_pa(self) -> float:
        """Young's modulus E = rho c0^2 [Pa]."""
        return self.density_kg_m3 * self.wave_speed_m_s**2

    @property
    def force_per_strain_n(self) -> float:
        """E A [N]: force of a long wave of unit strain."""
        return self.young_modulus_pa * self.area_m2

    @property
    def impedance_n_s_m(self) -> float:
        """Force impedance Z = rho c0 A [N s/m]."""
        return self.density_kg_m3 * self.wave_speed_m_s * self.area_m2


@dataclass(frozen=True, slots=True, kw_only=True)
class Striker:
    """The striker bar, and the pulse shaper in front of it where there is one."""

    length_m: Quantity
    diameter_m: Quantity
    density_kg_m3: Quantity
    wave_speed_m_s: Quantity
    shaper: str = ""  # in words: material and size; empty where none is used
    material: str = ""

    def __post_init__(self) -> None:
        for name in ("length_m", "diameter_m", "density_kg_m3", "wave_speed_m_s"):
            _require_positive(getattr(self, name), f"striker {name}")

    @property
    def impedance_n_s_m(self) -> float:
        """Force impedance Z = rho c A [N s/m]."""
        return self.density_kg_m3 * self.wave_speed_m_s * math.pi * self.diameter_m**2 / 4

    @property
    def mass_kg(self) -> float:
        """Mass [kg]."""
        return self.density_kg_m3 * self.length_m * math.pi * self.diameter_m**2 / 4

    @property
    def pulse_duration_s(self) -> float:
        """Duration of the pulse without a shaper, 2 L/c [s]."""
        return 2 * self.length_m / self.wave_speed_m_s


def one_stock(a: Bar, b: Bar) -> bool:
    """Whether two bars share their values: the same numbers with the same uncertainty from the same origin."""

    def said(value: object) -> tuple[object, ...]:
        return value, getattr(value, "u", None), getattr(value, "origin", "")

    names = ("material", "density_kg_m3", "wave_speed_m_s", "diameter_m", "poisson_ratio", "propagation")
    return all(said(getattr(a, name)) == said(getattr(b, name)) for name in names)


def _require_positive(value: float, where: str) -> None:
    if not (value > 0 and math.isfinite(value)):
        raise InputError(f"value is {float(value)}", where=where, mend="Give a positive number")
