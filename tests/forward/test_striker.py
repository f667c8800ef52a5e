"""Striker and shaper against closed forms, momentum and energy.

Unequal bars: one-dimensional elastic wave theory, W. Johnson, Impact Strength of Materials (1972), chapter 1;
values in data/closed_forms.json, made independently of this package.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.forward.striker import (
    Shaper,
    impact_force,
    limited_by_yield,
    shaped_impact_force,
    staircase,
)
from tests.forward.conftest import Q, bar, striker

TIME = np.arange(0.0, 600e-6, 5e-8)
STEP = TIME[1]


def test_identical_striker_gives_stress_duration_momentum_and_energy(closed_forms: dict[str, Any]) -> None:
    for case in closed_forms["striker_identical"]:
        diameter = Q(case["bar_diameter_m"])
        same = {
            "diameter_m": diameter,
            "density_kg_m3": Q(case["rho_kg_m3"]),
            "wave_speed_m_s": Q(case["c0_m_s"]),
        }
        rod, hammer = bar(**same), striker(length_m=Q(case["striker_length_m"]), **same)
        time = np.linspace(-20e-6, 600e-6, 200001)
        step = time[1] - time[0]
        force = impact_force(hammer, rod, case["V_m_s"], time, rise_s=12e-6)
        assert force.max() == pytest.approx(case["force_N"], rel=1e-12)
        # The rounding of the rise keeps the impulse; the sum of a smooth pulse is exact to rounding.
        assert force.sum() * step == pytest.approx(case["impulse_N_s"], rel=1e-7)
        sharp = impact_force(hammer, rod, case["V_m_s"], time, rise_s=0.0)
        energy = (sharp**2).sum() * step / rod.impedance_n_s_m
        # One sample in duration: 3.1 ns of some 100 us.
        assert energy == pytest.approx(case["pulse_energy_J"], rel=1e-4)
        assert (sharp > 0).sum() * step == pytest.approx(case["pulse_duration_s"], abs=2 * step)


def test_unequal_striker_gives_the_staircase(closed_forms: dict[str, Any]) -> None:
    for case in closed_forms["striker_different"]:
        rod = bar(
            density_kg_m3=Q(case["rho_bar"]),
            wave_speed_m_s=Q(case["c_bar"]),
            diameter_m=Q(np.sqrt(4 * case["A_bar_m2"] / np.pi)),
        )
        hammer = striker(
            density_kg_m3=Q(case["rho_striker"]),
            wave_speed_m_s=Q(case["c_striker"]),
            diameter_m=Q(np.sqrt(4 * case["A_striker_m2"] / np.pi)),
            length_m=Q(case["L_striker_m"]),
        )
        first, ratio, duration = staircase(hammer, rod, case["V_m_s"])
        assert first == pytest.approx(case["initial_force_N"], rel=1e-12)
        assert duration == pytest.approx(case["step_interval_s"], rel=1e-12)
        steps = case["interface_force_per_step_N"]
        middle = (np.arange(len(steps)) + 0.5) * duration
        time = np.sort(np.concatenate((TIME, middle, [2e-3])))
        force = impact_force(hammer, rod, case["V_m_s"], time, rise_s=5e-6)
        np.testing.assert_allclose(np.interp(middle, time, force), steps, rtol=1e-9, atol=1e-6 * first)
        assert ratio == pytest.approx(0.0 if case["separates_after_first_step"] else case["ratio_per_step"])


def test_half_impedance_striker() -> None:
    # F = V Zs Zb/(Zs + Zb) with Zs = Zb/2, V = 20 m/s on 20 mm steel: 83.776 kN.
    half = striker(diameter_m=Q(0.02 / np.sqrt(2)))
    force = impact_force(half, bar(), 20.0, TIME, rise_s=10e-6)
    assert force.max() == pytest.approx(83775.8, rel=1e-6)


def test_thin_shaper_is_no_shaper() -> None:
    # The limit of a vanishing thickness: V Zb Zs/(Zb + Zs) until 2 L/c, then nothing (equal impedances).
    thin = Shaper(diameter_m=0.01, thickness_m=2e-6, stress_pa=400e6)
    force = shaped_impact_force(striker(), bar(), 20.0, TIME, shaper=thin)
    plateau = force[(TIME > 10e-6) & (TIME < 119e-6)]
    np.testing.assert_allclose(plateau, 125663.7, rtol=1e-6)
    assert np.abs(force[TIME > 122e-6]).max() < 1e-6 * 125663.7


def test_shaper_follows_its_own_equation() -> None:
    # h e' = V - F/Zb - F/Zs until the first echo, F = A s0 e^n/((1 - e^m)(1 - e)): solved here by scipy.
    from scipy.integrate import solve_ivp

    shaper = Shaper(diameter_m=0.010, thickness_m=0.002, stress_pa=330e6, exponent=0.3)
    rod, hammer = bar(), striker()
    both = 1 / rod.impedance_n_s_m + 1 / hammer.impedance_n_s_m

    def rate(_: float, strain: Any) -> Any:
        return [(15.0 - shaper.force_n(float(strain[0])) * both) / shaper.thickness_m]

    # From a strain a little above zero, where the force's slope is infinite: e' = V/h there.
    start = 1e-7
    solved = solve_ivp(rate, (start * 0.002 / 15.0, 115e-6), [start], method="LSODA", rtol=1e-9, atol=1e-13,
                       dense_output=True)  # fmt: skip
    inside = (TIME > 5e-6) & (TIME < 115e-6)
    expected = [shaper.force_n(float(e)) for e in solved.sol(TIME[inside])[0]]
    force = shaped_impact_force(hammer, rod, 15.0, TIME, shaper=shaper)[inside]
    # Heun's error at the start, where e^0.3 is steep, and 50 ns steps.
    np.testing.assert_allclose(force, expected, rtol=1e-3)


def test_shaped_pulse_takes_no_more_momentum_than_the_striker_has() -> None:
    shaper = Shaper(diameter_m=0.010, thickness_m=0.002, stress_pa=330e6)
    time = np.arange(0.0, 1.5e-3, 5e-8)
    force = shaped_impact_force(striker(), bar(), 15.0, time, shaper=shaper)
    momentum = 15.0 * striker().mass_kg
    # The shaper stretches the pulse; with equal impedances the striker ends almost at rest.
    assert 0.97 * momentum < force.sum() * time[1] <= 1.0005 * momentum
    assert (force > 0.01 * force.max()).sum() * time[1] > 1.3 * striker().pulse_duration_s


def test_bar_beyond_its_yield_strength_carries_no_more() -> None:
    soft = bar(yield_strength_pa=Q(300e6))
    limit = 300e6 * soft.area_m2
    force = np.array([0.5, 0.999, 1.0, 1.5]) * limit
    np.testing.assert_allclose(limited_by_yield(force, soft, hardening=0.0), np.minimum(force, limit))
    assert limited_by_yield(force, soft)[-1] == pytest.approx(1.01 * limit)
    np.testing.assert_array_equal(limited_by_yield(force, bar()), force)


def test_refuses_negative_speed() -> None:
    with pytest.raises(InputError, match="striker speed -1 m/s"):
        impact_force(striker(), bar(), -1.0, TIME, rise_s=0.0)
