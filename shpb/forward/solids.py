"""Materials of bars that are not elastic."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.errors import InputError


@dataclass(frozen=True, slots=True, kw_only=True)
class StandardLinearSolid:
    """A spring beside a spring with a dashpot: ``E* = E_r + (E_u - E_r) i w tau/(1 + i w tau)``.

    Causal, and E* in closed form; its loss tangent has one peak, ``(E_u - E_r)/(2 sqrt(E_u E_r))`` at
    ``w tau = sqrt(E_r/E_u)``.

    Attributes
    ----------
    relaxed_pa, unrelaxed_pa : float
        E_r of slow and E_u of fast motion [Pa].
    relaxation_time_s : float
        tau, of the stress at held strain [s].

    References
    ----------
    C. Zener, Elasticity and Anelasticity of Metals (1948), from memory.
    """

    relaxed_pa: float
    unrelaxed_pa: float
    relaxation_time_s: float

    def __post_init__(self) -> None:
        if not (0 < self.relaxed_pa <= self.unrelaxed_pa and self.relaxation_time_s > 0):
            raise InputError(
                f"moduli {self.relaxed_pa:g} and {self.unrelaxed_pa:g} Pa, time {self.relaxation_time_s:g} s",
                where="standard linear solid",
                mend="Give 0 < relaxed <= unrelaxed modulus and a time above zero",
            )

    def modulus_pa(self, frequency_hz: FloatArray) -> ComplexArray:
        """E* at each frequency, shape of ``frequency_hz`` [Pa]."""
        turning = np.asarray(2j * np.pi * frequency_hz * self.relaxation_time_s, dtype=np.complex128)
        modulus: ComplexArray = self.relaxed_pa + (self.unrelaxed_pa - self.relaxed_pa) * turning / (
            1 + turning
        )
        return modulus

    def wave_speed_m_s(self, density_kg_m3: float) -> float:
        """Speed of slow waves, sqrt(E_r/rho) [m/s]."""
        return float(np.sqrt(self.relaxed_pa / density_kg_m3))

    def phase_speed_m_s(self, frequency_hz: FloatArray, density_kg_m3: float) -> FloatArray:
        """Speed c of a thin bar, ``w/c = Re(w sqrt(rho/E*))`` [m/s]."""
        slowness = np.sqrt(density_kg_m3 / self.modulus_pa(frequency_hz))
        speed: FloatArray = 1.0 / slowness.real
        return speed

    def attenuation_per_m(self, frequency_hz: FloatArray, density_kg_m3: float) -> FloatArray:
        """Attenuation of the amplitude in a thin bar, ``-Im(w sqrt(rho/E*))`` [Np/m]."""
        slowness = np.sqrt(density_kg_m3 / self.modulus_pa(frequency_hz))
        attenuation: FloatArray = -2 * np.pi * frequency_hz * slowness.imag
        return attenuation
