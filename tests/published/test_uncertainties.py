"""Closed-form budgets of a bar shot against a general-purpose library of numbers with uncertainties.

Bars, specimen and pulses are those of an ideal shot worked out by hand: steel bars of 200 GPa and 5000 m/s, 20 mm
thick; a specimen of 10 x 5 mm that flows at 500 MPa (all exact by E = rho c^2 and F = E A strain).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
import uncertainties

from shpb.trust.gum import Input, propagate
from shpb.trust.montecarlo import monte_carlo, numerical_sensitivities

PERCENT = 0.01


def model_of(formula):  # type: ignore[no-untyped-def]
    return lambda values: formula(**values)


def all_three(formula, inputs: list[Input], correlations=None):  # type: ignore[no-untyped-def]
    """Relative u by the library, by our linear way and by our draws."""
    names = [one.name for one in inputs]
    matrix = np.eye(len(inputs))
    for (a, b), r in (correlations or {}).items():
        i, j = names.index(a), names.index(b)
        matrix[i, j] = matrix[j, i] = r
    values = uncertainties.correlated_values_norm([(one.value, one.u) for one in inputs], matrix)
    theirs = formula(**dict(zip(names, values, strict=True)))
    model = model_of(formula)
    linear = propagate(numerical_sensitivities(model, inputs), inputs, correlations)
    drawn = monte_carlo(model, inputs, correlations, draws=40_000, seed=11)
    usual = float(theirs.nominal_value)
    return float(theirs.std_dev) / usual, float(linear.u) / usual, float(drawn.u) / usual


def relative(name: str, value: float, percent: float) -> Input:
    return Input(name, value, abs(value) * percent * PERCENT)


def stress(modulus, diameter, specimen, factor, excitation, gain, ratio):  # type: ignore[no-untyped-def]
    """One-wave stress E A strain/A_s of a half bridge, strain = 2 r/(k V g)."""
    strain = 2 * ratio / (factor * excitation * gain)
    return modulus * (diameter / specimen) ** 2 * strain


def test_budget_of_a_stress_is_1_17_percent() -> None:
    # u(E) 1, k 0.5, excitation 0.1, gain 0.2, bar diameter 0.05, specimen diameter 0.125, all %:
    # sqrt(1 + 0.25 + 0.01 + 0.04 + 0.01 + 0.0625) = 1.1715 %.
    inputs = [
        relative("modulus", 200e9, 1.0), relative("diameter", 0.020, 0.05), relative("specimen", 0.010, 0.125),
        relative("factor", 2.1, 0.5), relative("excitation", 5.0, 0.1), relative("gain", 200.0, 0.2),
        Input("ratio", 6.25e-4 * 2.1 * 5 * 200 / 2, 0.0),
    ]  # fmt: skip
    theirs, linear, drawn = all_three(stress, inputs)
    assert theirs == pytest.approx(0.0117, abs=5e-5)
    assert linear == pytest.approx(theirs, rel=1e-6)
    assert drawn == pytest.approx(theirs, rel=0.015)  # 40,000 draws know u within 0.35 %


def strain(speed, length, factor, excitation, gain, baseline, ratio):  # type: ignore[no-untyped-def]
    """One-wave strain 2 c R t/L after 100 us, with the baseline as a factor on the pulse."""
    return 2 * speed * (2 * ratio * baseline / (factor * excitation * gain)) * 100e-6 / length


def test_budget_of_a_strain_is_0_79_percent() -> None:
    # u(c0) 0.2, k 0.5, gain 0.2, excitation 0.1, L 0.2, baseline 0.5, all %: root of the squares 0.7937 %.
    inputs = [
        relative("speed", 5000.0, 0.2), relative("length", 0.005, 0.2), relative("factor", 2.1, 0.5),
        relative("excitation", 5.0, 0.1), relative("gain", 200.0, 0.2), relative("baseline", 1.0, 0.5),
        Input("ratio", 1.375e-3 * 2.1 * 5 * 200 / 2, 0.0),
    ]  # fmt: skip
    theirs, linear, drawn = all_three(strain, inputs)
    assert theirs == pytest.approx(0.0079, abs=5e-5)
    assert linear == pytest.approx(theirs, rel=1e-6)
    assert drawn == pytest.approx(theirs, rel=0.015)
    usual = strain(5000.0, 0.005, 2.1, 5.0, 200.0, 1.0, 1.375e-3 * 2.1 * 5 * 200 / 2)
    assert usual == pytest.approx(0.275)


def three_wave_stress(modulus, factor_in, factor_out, incident, reflected, transmitted):  # type: ignore[no-untyped-def]
    """E A/(2 A_s) (I + R + T), A/A_s = 4, with the gauge factors of the two bars by their usual value."""
    return modulus * 2.0 * ((incident + reflected) / factor_in + transmitted / factor_out)


@pytest.mark.parametrize("r", [0.0, 0.6, 1.0])
def test_one_calibration_for_both_gauges(r: float) -> None:
    # Equal halves: u^2 = (2 + 2 r) (0.5 %)^2/4 of the gauge factors, 500 MPa.
    inputs = [
        Input("modulus", 200e9, 0.0), Input("factor_in", 1.0, 0.005), Input("factor_out", 1.0, 0.005),
        Input("incident", 2e-3, 0.0), Input("reflected", -1.375e-3, 0.0), Input("transmitted", 6.25e-4, 0.0),
    ]  # fmt: skip
    correlations = {("factor_in", "factor_out"): r}
    theirs, linear, drawn = all_three(three_wave_stress, inputs, correlations)
    assert theirs == pytest.approx(0.005 * math.sqrt((1 + r) / 2), rel=1e-6)
    assert linear == pytest.approx(theirs, rel=1e-6)
    assert drawn == pytest.approx(theirs, rel=0.015)
    assert three_wave_stress(200e9, 1, 1, 2e-3, -1.375e-3, 6.25e-4) == pytest.approx(500e6)
