"""Corrections against published formulas and their worked numbers."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.quantity import Quantity
from shpb.response.corrections.friction import friction_factor
from shpb.response.corrections.heating import adiabatic_work_j_m3, thermal_factor
from shpb.response.corrections.inertia import inertia_stress
from shpb.rig.bar import Bar
from shpb.rig.gauge import Arrangement, Gauge
from shpb.wave.hot_bar import HotEnd
from shpb.wave.recording_chain import chain_delay_s, chain_gain, chain_rise_s
from tests.synthetic import copper, steel_bar

ONE = np.ones(1)


def inertia(rate: float, change: float, **other: float) -> tuple[float, float, float]:
    values = {"density": 8000.0, "radius": 4e-3, "height": 4e-3, **other}
    stress = inertia_stress(
        values["density"], values["radius"] * ONE, values["height"] * ONE, rate * ONE, change * ONE
    )
    return float(stress.front_pa[0]), float(stress.back_pa[0]), float(stress.mean_pa[0])


def test_inertia_of_a_disc_at_constant_rate() -> None:
    # Energy and momentum balance of an incompressible disc (Samanta 1971, Gorham 1989, re-derived): rho 8000,
    # radius and height 4 mm, 1e4 /s: back face 2.9333 MPa above the flow stress, the mean of both 0.2667 MPa below.
    _, back, mean = inertia(1e4, 0.0)
    assert back == pytest.approx(2.9333e6, rel=1e-4)
    assert mean == pytest.approx(-0.2667e6, rel=1e-3)
    assert inertia(1e3, 0.0)[1] == pytest.approx(0.0293e6, rel=2e-3)


def test_inertia_of_a_disc_that_speeds_up() -> None:
    # The same disc, 1e3 /s and 1e8 /s2: -0.504 MPa on the back face, 2.664 MPa in the mean.
    _, back, mean = inertia(1e3, 1e8)
    assert back == pytest.approx(-0.504e6, rel=1e-3)
    assert mean == pytest.approx(2.664e6, rel=1e-3)


def test_first_order_is_davies_and_hunter() -> None:
    # E. D. H. Davies, S. C. Hunter, J. Mech. Phys. Solids 11 (1963) 155-179, nu = 1/2, back face at rest:
    # s = s2 + rho (l^2/6 - d^2/32) e'', s = s1 - rho (l^2/3 + d^2/32) e''. rho 8960, l 5 mm, d 10 mm, 1e8 /s2:
    # corrections +0.93333, -10.26667 and (mean of both faces) -4.66667 MPa.
    front, back, mean = inertia(0.0, 1e8, density=8960.0, radius=5e-3, height=5e-3)
    assert -back == pytest.approx(0.933333e6, rel=1e-5)
    assert -front == pytest.approx(-10.266667e6, rel=1e-5)
    assert -mean == pytest.approx(-4.666667e6, rel=1e-5)


def test_davies_and_hunters_best_length() -> None:
    # l/d = sqrt(3)/2 nu = 0.4330 for nu = 1/2: inertia to first order leaves the back face alone.
    _, back, mean = inertia(0.0, 1e8, density=8960.0, radius=5e-3, height=10e-3 * 0.4330127018922193)
    assert abs(back) < 1e-6 * mean


def test_momentum_of_the_disc() -> None:
    # P1 - P2 = rho h d/dt((v1 + v2)/2): with the back face at 2e5 m/s2 and e'' = 1e7, e' = 2e3 it is
    # rho h (2e5 + h/2 (e'' - e'^2)).
    stress = inertia_stress(8000.0, 4e-3 * ONE, 5e-3 * ONE, 2e3 * ONE, 1e7 * ONE, 2e5)
    difference = float((stress.front_pa - stress.back_pa)[0])
    assert difference == pytest.approx(8000 * 5e-3 * (2e5 + 2.5e-3 * (1e7 - 4e6)), rel=1e-12)


@pytest.mark.parametrize(("mu", "rand"), [(0.05, 1.03418), (0.1, 1.07014)])
def test_friction_after_rand_and_siebel(mu: float, rand: float) -> None:
    # Rand 1967 (from memory), d/h = 2: 1.03418 and 1.07014; Siebel's 1 + mu d/(3 h) is its limit for small mu d/h.
    assert friction_factor(np.array([2 * mu]))[0] == pytest.approx(rand, abs=1e-5)
    small = np.array([1e-4, 2e-3])
    np.testing.assert_allclose(friction_factor(small), 1 + small / 3, rtol=5e-7)
    # No step where the series takes over from the quotient.
    near = friction_factor(np.array([0.999e-3, 1.001e-3]))
    assert near[1] - near[0] == pytest.approx(2e-6 / 3, rel=0.01)


@pytest.mark.parametrize(
    ("stress", "density", "capacity", "rise"),
    [(300e6, 8960, 385, 15.654), (1000e6, 7850, 470, 48.787), (1200e6, 4430, 526, 92.697)],
)
def test_heat_of_plastic_work(stress: float, density: float, capacity: float, rise: float) -> None:
    # G. I. Taylor, H. Quinney 1934, a share of 0.9 of constant stress over a strain of 0.2: copper, steel, Ti-6Al-4V.
    plastic = np.linspace(0.0, 0.2, 7)
    work = adiabatic_work_j_m3(plastic, np.full(7, stress))
    assert 0.9 * work[-1] / (density * capacity) == pytest.approx(rise, abs=1e-3)


def test_isothermal_stress_of_johnson_cook_copper() -> None:
    # OFHC copper of Johnson & Cook 1983 at 1e3 /s from 293 K, share 0.9, 8960 kg/m3, 383 J/(kg K): integrating the
    # adiabatic path by itself gives 306.80 K and 310.705 MPa at 0.2, isothermal 313.458 MPa; at 0.5 it gives
    # 333.92 K, 370.797 and 381.758 MPa.
    melting, m, reference = 1356.0, 1.09, 293.0

    def flow(strain: float, temperature: float) -> float:
        hard = 90e6 + 292e6 * strain**0.31
        return float(
            hard * (1 + 0.025 * np.log(1e3)) * (1 - ((temperature - reference) / (melting - reference)) ** m)
        )

    steps = np.linspace(0.0, 0.5, 20001)
    temperature, stress = [293.0], [flow(0.0, 293.0)]
    for strain in steps[1:]:
        warmer = temperature[-1] + 0.9 * stress[-1] * (steps[1] - steps[0]) / (8960 * 383)
        temperature.append(warmer)
        stress.append(flow(strain, warmer))
    adiabatic, warm = np.array(stress), np.array(temperature)
    rise = 0.9 * adiabatic_work_j_m3(steps, adiabatic) / (8960 * 383)
    specimen = copper(melting_temperature_k=Quantity(melting), softening_exponent=Quantity(m))
    factor = thermal_factor(specimen, 293.15, 293.15 + rise)
    assert factor is not None
    at = np.searchsorted(steps, [0.2, 0.5])
    np.testing.assert_allclose(293 + rise[at], [306.80, 333.92], atol=0.01)
    np.testing.assert_allclose(adiabatic[at] / 1e6, [310.705, 370.797], atol=0.02)
    np.testing.assert_allclose((adiabatic / factor)[at] / 1e6, [313.458, 381.758], atol=0.02)
    np.testing.assert_allclose(warm[at], 293 + rise[at], atol=0.01)


def test_a_slow_temperature_gradient_keeps_the_energy_flux() -> None:
    # D. Chiddister, L. E. Malvern, Exp. Mech. 3 (1963) 81-90: with E_hot/E_cold = 0.8 force by 0.94574, velocity
    # by 1.05737.
    end = HotEnd(steel_bar(), 293.15 + 500, 0.1, -0.2 / 500)
    assert end.stiffness_ratio**0.25 == pytest.approx(0.94574, abs=1e-5)
    assert end.stiffness_ratio**-0.25 == pytest.approx(1.05737, abs=1e-5)


def gauge_of(length_m: float, bandwidth_hz: float | None) -> tuple[Gauge, Bar]:
    gauge = Gauge(
        to_specimen_m=Quantity(1.0),
        channels=(1,),
        gauge_factor=Quantity(2.0),
        excitation_v=Quantity(5.0),
        arrangement=Arrangement.QUARTER,
        length_m=Quantity(length_m),
        bandwidth_hz=None if bandwidth_hz is None else Quantity(bandwidth_hz),
    )
    return gauge, steel_bar()


@pytest.mark.parametrize(
    ("fl_c", "loss"), [(0.07809, 0.01), (0.17568, 0.05), (0.25041, 0.10), (0.44295, 0.29289)]
)
def test_gauge_length(fl_c: float, loss: float) -> None:
    # sin(pi x)/(pi x) at x = f L/c, -1, -5, -10 % and -3 dB; L = 2 mm at 5000 m/s: 195, 439, 626, 1107 kHz.
    gauge, bar = gauge_of(2e-3, None)
    assert 1 - chain_gain(np.array([fl_c * 5000 / 2e-3]), gauge, bar)[0] == pytest.approx(loss, abs=2e-5)


def test_amplifier_rise_and_delay() -> None:
    # Two-pole Butterworth at 100 kHz: -3 dB there, delay sqrt 2/(2 pi f) = 2.25 us; rise 0.35/f = 3.5 us, and
    # L/c = 0.4 us.
    gauge, bar = gauge_of(2e-3, 100e3)
    only_amplifier = chain_gain(np.array([100e3]), gauge_of(0.0, 100e3)[0], bar)[0]
    assert 20 * np.log10(only_amplifier) == pytest.approx(-3.0103, abs=1e-4)
    assert 1e6 * chain_delay_s(gauge) == pytest.approx(2.2508, abs=1e-3)
    assert 1e6 * chain_rise_s(gauge, bar) == pytest.approx(np.hypot(3.5, 0.4), rel=1e-6)
