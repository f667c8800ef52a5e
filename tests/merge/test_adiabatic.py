"""Paths of a specimen that keeps its heat, against closed forms and a general-purpose solver."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from shpb.errors import InputError
from shpb.merge.adiabatic import PathsOfPoints, adiabatic_stress_pa
from shpb.merge.models.registry import model_named
from tests.merge.campaign import HEAT, PLANTED, grid, law, planted

COPPER = np.array(PLANTED["johnson-cook"])


@pytest.mark.parametrize("m", [0.55, 1.09, 1.68])
def test_against_a_general_purpose_solver(m: float) -> None:
    # The same equation, stepped by an eighth-order Runge-Kutta method to ten digits.
    model, p = law("johnson-cook"), np.array([*COPPER[:4], m])
    solved = solve_ivp(
        lambda e, t: HEAT * model.stress_pa(p, e, 1e3, t), (0, 0.5), [293.0], t_eval=[0.1, 0.2, 0.5],
        method="DOP853", rtol=1e-12, atol=1e-10,
    )  # fmt: skip
    _, temperature = adiabatic_stress_pa(model, p, np.array([0.1, 0.2, 0.5]), 1e3, 293.0, HEAT)
    assert temperature == pytest.approx(solved.y[0], abs=1e-6)


def test_strong_softening_still_settles() -> None:
    # m = 1 at the reference rate: dT = (Tm - T0)(1 - exp(-heat W/(Tm - T0))), W the work without softening.
    model = law("johnson-cook")
    p, heat = np.array([900e6, 500e6, 0.3, 0.0, 1.0]), 8 * HEAT
    e = np.array([0.05, 0.5, 1.0])
    work = p[0] * e + p[1] * e ** (p[2] + 1) / (p[2] + 1)
    span = 1356.0 - 293.0
    _, temperature = adiabatic_stress_pa(model, p, e, 1.0, 293.0, heat)
    assert temperature - 293 == pytest.approx(span * -np.expm1(-heat * work / span), rel=1e-7)


def test_no_heat_is_isothermal_and_a_law_without_temperature_does_not_mind() -> None:
    points = planted(law("johnson-cook"), grid(heat=None))
    p = np.array(PLANTED["johnson-cook"])
    assert PathsOfPoints(law("johnson-cook"), points).temperature_k(p) is points.temperature_k
    voce = PathsOfPoints(model_named("voce"), grid())
    assert voce.stress_pa(np.array([4e8, 1e8, 0.1])) == pytest.approx(
        model_named("voce").stress_pa(np.array([4e8, 1e8, 0.1]), grid().plastic_strain, 1.0, 300.0)
    )


def test_only_adiabatic_conditions_are_heated_each_from_its_own_start() -> None:
    points, model = grid(), law("johnson-cook")
    temperature = PathsOfPoints(model, points).temperature_k(COPPER)
    slow = ~points.adiabatic
    assert temperature[slow].tolist() == points.temperature_k[slow].tolist()
    for number in points.conditions:
        of = points.of(number)
        if points.adiabatic[of][0]:
            rate, start = float(points.rate_per_s[of][0]), float(points.temperature_k[of][0])
            _, alone = adiabatic_stress_pa(model, COPPER, points.plastic_strain[of], rate, start, HEAT)
            assert temperature[of] == pytest.approx(alone, abs=1e-6)
            assert (np.diff(temperature[of]) > 0).all()


def test_rate_along_the_path_is_that_of_the_test() -> None:
    # A rate that falls from 4000 to 1000 /s heats between what the two would alone, and the stress at the end is
    # that of 1000 /s at that temperature.
    model, e = law("johnson-cook"), np.linspace(0.01, 0.4, 14)
    rate = np.linspace(4000.0, 1000.0, 14)
    stress, temperature = adiabatic_stress_pa(model, COPPER, e, rate, 293.0, HEAT)
    fast, slow = (adiabatic_stress_pa(model, COPPER, e, r, 293.0, HEAT)[1][-1] for r in (4000.0, 1000.0))
    assert slow < temperature[-1] < fast
    assert stress[-1] == pytest.approx(
        float(model.stress_pa(COPPER, 0.4, 1000.0, temperature[-1])), rel=1e-12
    )


def test_refusals() -> None:
    with pytest.raises(InputError, match="numbers of 0 or more"):
        adiabatic_stress_pa(law("johnson-cook"), COPPER, np.array([-0.1, 0.2]), 1e3, 293.0, HEAT)
    bad = np.array(PLANTED["mechanical-threshold"])
    bad[3] = 0.5 * bad[0]
    with pytest.raises(InputError, match="no finite stress on this path"):
        adiabatic_stress_pa(law("mechanical-threshold"), bad, np.array([0.2]), 1e3, 293.0, HEAT)
