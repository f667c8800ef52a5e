"""Waves in a bar of complex modulus, against the closed form.

C. Bacon, Exp. Mech. 38 (1998) 242-249: xi^2 = -rho w^2/E*, so for E* = E0 (1 + i eta) the phase speed is
c = sqrt(E0/rho) (1 + eta^2)^(1/4)/cos(delta/2) and the attenuation alpha = (w/c) tan(delta/2), tan delta = eta.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from shpb.quantity import Quantity
from shpb.rig.propagation_table import PropagationTable
from shpb.settings import Dispersion
from shpb.wave.complex_propagation import (
    measured_wave,
    propagation_coefficient_per_m,
    velocity_of_one_wave_m_s,
)
from shpb.wave.propagation import measured_factors
from tests.synthetic import steel_bar

E0, RHO = 5e9, 1200.0


def constant_loss(eta: float, points: int = 40) -> PropagationTable:
    frequency = np.geomspace(1e3, 45e3, points)
    delta = math.atan(eta)
    speed = np.full(points, math.sqrt(E0 / RHO) * (1 + eta**2) ** 0.25 / math.cos(delta / 2))
    nothing = (0.0,) * points
    return PropagationTable(
        frequency_hz=tuple(frequency),
        attenuation_per_m=tuple(2 * np.pi * frequency / speed * math.tan(delta / 2)),
        phase_speed_m_s=tuple(speed),
        u_attenuation_per_m=nothing,
        u_phase_speed_m_s=nothing,
        coherence=(1.0,) * points,
    )


@pytest.mark.parametrize(
    ("eta", "speed", "alpha"), [(0.02, 2041.5476, 0.615470), (0.05, 2043.1534, 1.536660)]
)
def test_speed_and_attenuation_of_constant_loss(eta: float, speed: float, alpha: float) -> None:
    # At 20 kHz, between two points of the table. The numbers are those of xi = i w sqrt(rho/E*), worked out apart.
    xi = propagation_coefficient_per_m(constant_loss(eta), np.array([20e3]))[0]
    assert 2 * np.pi * 20e3 / xi.imag == pytest.approx(speed, abs=1e-4)
    assert xi.real == pytest.approx(alpha, abs=1e-6)
    assert xi**2 == pytest.approx(-RHO * (2 * np.pi * 20e3) ** 2 / (E0 * (1 + 1j * eta)), rel=1e-9)


@pytest.mark.parametrize("eta", [0.02, 0.05])
def test_force_is_the_complex_modulus_times_strain(eta: float) -> None:
    # F = A E* e and v = i w e/xi (Bacon 1998); a bar without lateral contraction. E0 in the bar is off on purpose.
    bar = steel_bar(
        propagation=constant_loss(eta), density_kg_m3=Quantity(RHO), wave_speed_m_s=Quantity(2100.0),
        poisson_ratio=Quantity(0.0),
    )  # fmt: skip
    at = np.array([5e3, 20e3, 40e3])
    slowness, force, velocity = measured_factors(bar, at, Dispersion.PHASE)
    np.testing.assert_allclose(force * bar.young_modulus_pa, E0 * (1 + 1j * eta) * np.ones(3), rtol=1e-9)
    xi = 2j * np.pi * at * (slowness + 1 / 2100.0)
    np.testing.assert_allclose(velocity * 2100.0, 2j * np.pi * at / xi, rtol=1e-12)
    assert (xi.real > 0).all()  # the wave dies away along its travel


def test_below_the_table_the_loss_tangent_is_held() -> None:
    table = constant_loss(0.05)
    xi = propagation_coefficient_per_m(table, np.array([0.0, 10.0, 500.0]))
    assert xi[0] == 0
    np.testing.assert_allclose((-(xi[1:] ** 2)).imag / (-(xi[1:] ** 2)).real, -0.05, rtol=1e-9)


def test_velocity_of_one_wave_has_the_complex_impedance() -> None:
    # A long packet at one frequency: F/v = rho c* A, |c*| by which it is slower and its phase.
    bar = steel_bar(propagation=constant_loss(0.05), density_kg_m3=Quantity(RHO), wave_speed_m_s=Quantity(2000.0),
                    poisson_ratio=Quantity(0.0))  # fmt: skip
    time = np.arange(4000) * 1e-6
    packet = np.exp(-(((time - 2e-3) / 4e-4) ** 2))
    carrier = 2 * np.pi * 10e3 * time
    velocity = velocity_of_one_wave_m_s(packet * np.cos(carrier), 1e-6, bar, 45e3)
    speed = measured_wave(bar, np.array([10e3])).material_speed_m_s[0]
    assert speed == pytest.approx(np.sqrt(E0 * (1 + 0.05j) / RHO), rel=1e-9)
    expected = packet * np.real(np.exp(1j * carrier) / (RHO * speed * bar.area_m2))
    # The packet is 0.8 kHz wide, and the modulus the same throughout.
    np.testing.assert_allclose(velocity, expected, atol=2e-6 * np.abs(expected).max())
