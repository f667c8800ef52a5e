"""Flow curves of a fitted law: heating, uncertainty, extrapolation."""

from __future__ import annotations

import re

import numpy as np
import pytest
from scipy.integrate import trapezoid

from shpb.errors import InputError
from shpb.merge.fit import fit_model
from shpb.merge.model_fit import ModelFit
from tests.merge.campaign import HEAT, grid, law, planted

JC = law("johnson-cook")


def some_fit() -> ModelFit:
    return fit_model(JC, planted(JC, grid(heat=None), 0.01, 1), leave_out=False)


def test_flow_curve_isothermal_and_adiabatic() -> None:
    fit = fit_model(JC, planted(JC, grid(), 0.01, 3), leave_out=False)
    strain = np.array([0.1, 0.2, 0.3])
    cold = fit.flow_curve(strain, 1e3, 293.0)
    warm = fit.flow_curve(strain, 1e3, 293.0, adiabatic=True)
    assert cold.stress_pa == pytest.approx(JC.stress_pa(fit.parameters, strain, 1e3, 293.0), rel=1e-12)
    assert (warm.stress_pa < cold.stress_pa).all()
    work = trapezoid(
        fit.flow_curve(np.linspace(1e-9, 0.3, 4001), 1e3, 293.0, adiabatic=True).stress_pa,
        np.linspace(1e-9, 0.3, 4001),
    )
    assert warm.temperature_k[-1] - 293 == pytest.approx(HEAT * work, rel=1e-5)
    assert not cold.extrapolated.any()
    assert not cold.reasons


def test_uncertainty_of_a_flow_curve_is_its_scatter_over_fits() -> None:
    model, points = law("voce"), grid((1e-3,), (293.0,), np.linspace(0.01, 0.4, 15))
    strain = np.array([0.02, 0.1, 0.35])
    curves = [
        fit_model(model, planted(model, points, 0.01, seed), leave_out=False).flow_curve(strain, 1e-3, 293.0)
        for seed in range(200)
    ]
    scatter = np.std([curve.stress_pa for curve in curves], axis=0)
    # 200 fits know their scatter to 5 %; widening lifts the stated one by a few per cent.
    assert np.mean([curve.u_stress_pa for curve in curves], axis=0) == pytest.approx(scatter, rel=0.17)


@pytest.mark.parametrize(
    ("strain", "rate", "temperature", "reason"),
    [
        (0.5, 1e-3, 293.0, "plastic strain outside 0.02 to 0.3"),
        (0.1, 1e5, 293.0, r"1e\+05 /s is outside 0.001 to 3e\+03 /s"),
        (0.1, 1e-3, 900.0, "temperature outside 293 to"),
        (0.1, 1e-3, 200.0, "temperature outside 293 to"),
    ],
)
def test_extrapolation_is_marked(strain: float, rate: float, temperature: float, reason: str) -> None:
    fit = fit_model(JC, planted(JC, grid(), 0.01, 3), leave_out=False)
    curve = fit.flow_curve(np.array([0.1, strain]), rate, temperature)
    assert curve.extrapolated[1]
    assert curve.extrapolated[0] == (strain == 0.1)
    assert any(re.search(reason, words) for words in curve.reasons)


def test_a_corner_without_tests_is_extrapolation_too() -> None:
    # Fast only at room temperature, hot only slow: fast and hot together was never tested.
    points = grid()
    tested = (points.temperature_k < 300) | (points.rate_per_s < 0.01)
    fit = fit_model(JC, planted(JC, points, 0.01, 3).select(tested), leave_out=False)
    assert not fit.flow_curve(np.array([0.1]), 1e3, 293.0).extrapolated.any()
    assert not fit.flow_curve(np.array([0.1]), 1e-3, 673.0).extrapolated.any()
    corner = fit.flow_curve(np.array([0.1]), 1e3, 673.0)
    assert corner.extrapolated.all()
    assert "no tests surround" in corner.reasons[0]


def test_refusals_of_a_flow_curve() -> None:
    fit = some_fit()
    with pytest.raises(InputError, match="numbers of 0 or more"):
        fit.flow_curve(np.array([-0.1]), 1.0, 293.0)
    with pytest.raises(InputError, match="rate_per_s: found 0, expected more than 0"):
        fit.flow_curve(np.array([0.1]), 0.0, 293.0)
    with pytest.raises(InputError, match="heat_k_m3_j = share"):
        fit.flow_curve(np.array([0.1]), 1.0, 293.0, adiabatic=True)
    with pytest.raises(InputError, match="no parameter 'c'"):
        fit.estimate("c")
