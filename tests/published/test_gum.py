"""The worked examples of the GUM and of its Supplement 1, through the program's own engine.

``reference/gum_examples.json`` holds the data, exact results computed apart from the program, and what the documents
print; its notes say which of these are from memory.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from shpb.arrays import FloatArray
from shpb.trust.gum import (
    Input,
    TypeA,
    correlation_matrix,
    coverage_factor,
    propagate,
    propagated_covariance,
    type_a,
)
from shpb.trust.montecarlo import monte_carlo, numerical_sensitivities, numerical_tolerance

EXAMPLES = json.loads((Path(__file__).parent / "reference" / "gum_examples.json").read_text(encoding="utf-8"))
H2 = EXAMPLES["gum_h2"]
ADDITIVE = EXAMPLES["jcgm101_9_2"]["cases"]
COMPARISON_LOSS = EXAMPLES["jcgm101_9_4_r0"]["cases"]


# --- JCGM 100:2008, H.2: resistance, reactance and impedance from observations made together


def impedance(values: Mapping[str, FloatArray]) -> FloatArray:
    """R, X, Z in ohm, shape (runs, 3)."""
    z = values["V"] / values["I"]
    return np.stack([z * np.cos(values["phi"]), z * np.sin(values["phi"]), z], axis=1)


def observed() -> TypeA:
    raw = H2["observations"]
    return type_a({"V": raw["V_V"], "I": raw["I_A"], "phi": raw["phi_rad"]})


def test_h2_means_and_their_correlations() -> None:
    exact = H2["inputs_exact"]
    means = observed()
    assert means.mean == pytest.approx(exact["mean"], rel=1e-12)
    assert means.u == pytest.approx(exact["u_of_mean"], rel=1e-9)
    # Sums of five products with six digits left: 1e-9 is far above rounding and far below a factor 5/4 (n for n - 1).
    assert means.covariance.matrix == pytest.approx(np.array(exact["covariance"]), rel=1e-9)
    r = correlation_matrix(means.inputs(), means.covariance)
    assert [r[0, 1], r[0, 2], r[1, 2]] == pytest.approx(
        [exact["r_V_I"], exact["r_V_phi"], exact["r_I_phi"]], rel=1e-9
    )
    printed = H2["published"]
    assert f"{r[0, 1]:.2f} {r[0, 2]:.2f} {r[1, 2]:.2f}" == " ".join(
        printed[key] for key in ("r_V_I", "r_V_phi", "r_I_phi")
    )


def test_h2_resistance_reactance_impedance() -> None:
    means = observed()
    inputs = means.inputs()
    slopes = numerical_sensitivities(impedance, inputs)
    budget = propagate(slopes, inputs, means.covariance)
    exact, printed = H2["approach_1_exact"], H2["published"]
    # The slopes' central differences with steps of 0.01 u (relative 5e-6) err by the square of that.
    assert budget.u == pytest.approx(exact["u"], rel=1e-6)
    for k, name in enumerate("RXZ"):
        # The document prints 0.295 for u(X) where its data give 0.29558: one unit of the last digit.
        assert budget.u[k] == pytest.approx(float(printed[f"u_{name}"]), abs=1e-3)
    y = impedance({one.name: np.array([one.value]) for one in inputs})[0]
    assert y == pytest.approx([exact[name] for name in "RXZ"], rel=1e-12)
    assert [f"{value:.3f}" for value in y] == [printed[name] for name in "RXZ"]


@pytest.mark.parametrize(("first", "second"), [(0, 1), (0, 2), (1, 2)])
def test_h2_correlations_of_the_results(first: int, second: int) -> None:
    means = observed()
    inputs = means.inputs()
    slopes = numerical_sensitivities(impedance, inputs)
    u = propagate(slopes, inputs, means.covariance).u
    a = {name: slope[first] for name, slope in slopes.items()}
    b = {name: slope[second] for name, slope in slopes.items()}
    r = propagated_covariance(a, b, inputs, means.covariance) / (u[first] * u[second])
    key = "r_" + "RXZ"[first] + "RXZ"[second]
    assert r == pytest.approx(H2["approach_1_exact"][key], abs=1e-6)
    assert f"{r:.3f}" == H2["published"][key]


def test_h2_without_the_correlations_is_another_result() -> None:
    # JCGM 100, H.2.4: neglecting them is wrong here; u(R) comes out near 0.20 (about 0.195 by hand).
    inputs = observed().inputs()
    u = propagate(numerical_sensitivities(impedance, inputs), inputs).u
    z, phi = H2["approach_1_exact"]["Z"], 1.04446
    by_hand = math.hypot(
        z * math.cos(phi) * math.hypot(0.0032093613 / 4.999, 9.471008e-6 / 0.019661),
        z * math.sin(phi) * 0.00075206383,
    )
    assert u[0] == pytest.approx(by_hand, rel=1e-6)
    assert u[0] > 2 * H2["approach_1_exact"]["u"][0]


def test_h2_second_approach_from_the_single_results() -> None:
    raw = {key: np.array(values) for key, values in H2["observations"].items()}
    single = impedance({"V": raw["V_V"], "I": raw["I_A"], "phi": raw["phi_rad"]})
    means = type_a({name: single[:, k] for k, name in enumerate("RXZ")})
    exact = H2["approach_2_exact"]
    assert means.mean == pytest.approx([exact[name] for name in "RXZ"], rel=1e-12)
    assert means.u == pytest.approx(exact["u"], rel=1e-9)
    r = correlation_matrix(means.inputs(), means.covariance)
    assert [r[0, 1], r[0, 2], r[1, 2]] == pytest.approx(
        [exact["r_RX"], exact["r_RZ"], exact["r_XZ"]], rel=1e-8
    )


def test_h2_degrees_of_freedom_stay_those_of_five_observations() -> None:
    # Any function of means observed together has n - 1 = 4, to first order.
    means = observed()
    inputs = means.inputs()
    budget = propagate(numerical_sensitivities(impedance, inputs), inputs, means.covariance)
    assert budget.degrees_of_freedom == pytest.approx(4.0)


def test_h2_by_monte_carlo() -> None:
    means = observed()
    draws = 200_000
    found = monte_carlo(impedance, means.inputs(), means.covariance, draws=draws, seed=20)
    # Standard error of a standard deviation of a near normal output: u / sqrt(2 M); four of them.
    assert found.u == pytest.approx(H2["approach_1_exact"]["u"], rel=4 / math.sqrt(2 * draws))


# --- JCGM 100:2008, table G.2 and G.4


def test_student_factors_of_table_g2() -> None:
    # JCGM 100:2008, table G.2 (from memory), p = 95 % and 99 %.
    nu = [1, 2, 3, 4, 5, 10, 20, 50, 100, math.inf]
    assert np.round(coverage_factor(0.95, nu), 2).tolist() == [
        12.71, 4.30, 3.18, 2.78, 2.57, 2.23, 2.09, 2.01, 1.98, 1.96,
    ]  # fmt: skip
    # For 100 degrees the table's last digit follows from 1.984, and 2.626 for 99 %.
    assert np.round(coverage_factor(0.99, nu), 2).tolist() == [
        63.66, 9.92, 5.84, 4.60, 4.03, 3.17, 2.85, 2.68, 2.63, 2.58,
    ]  # fmt: skip


def test_effective_degrees_of_the_product_of_three() -> None:
    # JCGM 100:2008, G.4.1 example (from memory): Y = b X1 X2 X3, relative u 0.25, 0.57, 0.82 %, n = 10, 5, 15
    # observations; u(y)/y = 1.03 %, effective degrees 19.0, t_95(19) = 2.09, U = 2.2 %.
    inputs = [
        Input("X1", 1.0, 0.25e-2, degrees_of_freedom=9),
        Input("X2", 1.0, 0.57e-2, degrees_of_freedom=4),
        Input("X3", 1.0, 0.82e-2, degrees_of_freedom=14),
    ]
    budget = propagate({"X1": 1.0, "X2": 1.0, "X3": 1.0}, inputs)
    assert f"{100 * budget.u:.2f}" == "1.03"
    assert f"{budget.degrees_of_freedom:.1f}" == "19.0"
    assert f"{100 * budget.expanded(0.95):.1f}" == "2.2"


# --- JCGM 101:2008, 7.9.2 and 9


@pytest.mark.parametrize(
    ("u", "digits", "tolerance"),
    # 7.9.2 examples (from memory): u = 0.35 g to two digits: 0.005; 2 K to one digit: 0.5; 0.00032 kg: 0.000 005.
    [(0.35, 2, 0.005), (2.0, 1, 0.5), (0.00032, 2, 0.000005), (0.0996, 2, 0.005), (10.14889, 2, 0.5)],
)
def test_numerical_tolerance(u: float, digits: int, tolerance: float) -> None:
    assert numerical_tolerance(u, digits) == pytest.approx(tolerance, rel=1e-12)


def additive_inputs(clause: str) -> list[Input]:
    shape: Any = "normal" if clause == "9.2.2" else "rectangular"
    last = 10.0 if clause == "9.2.4" else 1.0
    return [Input(f"X{i}", 0.0, last if i == 4 else 1.0, distribution=shape) for i in (1, 2, 3, 4)]


def total(values: Mapping[str, FloatArray]) -> FloatArray:
    return values["X1"] + values["X2"] + values["X3"] + values["X4"]


def end_point_error(values: FloatArray, end: float, probability: float, u: float) -> float:
    """Standard error of a sample quantile, sqrt(q (1 - q) / M) / density, the density from the draws nearby."""
    near = 0.05 * u
    density = np.mean(np.abs(values - end) < near) / (2 * near)
    q = 0.5 - 0.5 * probability
    return float(math.sqrt(q * (1 - q) / len(values)) / density)


@pytest.mark.parametrize("case", ADDITIVE, ids=lambda case: case["clause"])
def test_additive_model(case: dict[str, Any]) -> None:
    inputs = additive_inputs(case["clause"])
    found = monte_carlo(total, inputs, draws=1_000_000, seed=92)
    end, u = case["endpoint_exact"], case["u_exact"]
    assert found.values is not None
    assert found.shortest is not None
    assert abs(float(found.mean)) < 4 * u / 1e3
    # Kurtosis is at most normal here, so u / sqrt(2 M) bounds the standard error of u.
    assert float(found.u) == pytest.approx(u, rel=4 / math.sqrt(2e6))
    four = 4 * end_point_error(found.values, end, 0.95, u)
    assert four < 0.02 * u  # tight enough to tell 3.88 from 3.92 and 17.0 from 19.9
    assert float(found.high) == pytest.approx(end, abs=four)
    assert float(found.low) == pytest.approx(-end, abs=four)
    # Symmetric and of one peak, so the shortest interval is the symmetric one; its length settles faster than its ends.
    assert found.shortest[1] - found.shortest[0] == pytest.approx(2 * end, abs=2 * four)
    assert found.shortest[1] - found.shortest[0] <= found.high - found.low
    linear = propagate({f"X{i}": 1.0 for i in (1, 2, 3, 4)}, inputs)
    assert float(linear.u) == pytest.approx(u, rel=1e-12)
    assert float(linear.expanded(0.95)) == pytest.approx(case["GUM_endpoint"], rel=1e-9)


def test_additive_model_adaptive() -> None:
    # 7.9.4: two significant digits of u = 2 are a tolerance of 0.05, met with about 95 % confidence by each of the four
    # results. Of 30 runs, at most 5 may miss an end point (9 of 10 000 would at 95 %).
    end, u = ADDITIVE[1]["endpoint_exact"], ADDITIVE[1]["u_exact"]
    runs = [monte_carlo(total, additive_inputs("9.2.3"), adaptive=2, seed=seed) for seed in range(30)]
    assert all(run.settled and 20_000 < run.draws < 1_000_000 for run in runs)
    assert sum(abs(float(run.high) - end) > 0.05 for run in runs) <= 5
    assert sum(abs(float(run.low) + end) > 0.05 for run in runs) <= 5
    assert sum(abs(float(run.u) - u) > 0.05 for run in runs) <= 5
    coarse = monte_carlo(total, additive_inputs("9.2.3"), adaptive=1, seed=0)  # tolerance 0.5
    assert coarse.draws <= min(run.draws for run in runs)


@pytest.mark.parametrize("case", COMPARISON_LOSS, ids=lambda case: f"x1={case['x1']}")
def test_comparison_loss(case: dict[str, Any]) -> None:
    inputs = [Input("x1", case["x1"], case["u_x1"]), Input("x2", case["x2"], case["u_x2"])]

    def loss(values: Mapping[str, FloatArray]) -> FloatArray:
        return values["x1"] ** 2 + values["x2"] ** 2

    found = monte_carlo(loss, inputs, {("x1", "x2"): case["r"]}, draws=1_000_000, seed=94)
    u, (low, high) = case["u_exact"], case["shortest_95_exact"]
    assert found.values is not None
    assert found.shortest is not None
    assert float(found.mean) == pytest.approx(case["y_exact"], abs=4 * u / 1e3)
    # Standard error of u: u sqrt((kurtosis - 1) / 4 M); the kurtosis, at most 9 (exponential), from the draws.
    kurtosis = float(np.mean((found.values - found.mean) ** 4) / found.u**4)
    assert float(found.u) == pytest.approx(u, rel=4 * math.sqrt((kurtosis - 1) / 4e6))
    # The shortest interval's ends slide along a flat minimum; its length is good to 1 % and it must hold 95 %.
    length = found.shortest[1] - found.shortest[0]
    assert length == pytest.approx(high - low, rel=0.01)
    assert length < 0.999 * float(found.high - found.low)  # the density is skewed
    # The ends' scatter goes as M^(-1/3); 0.03 u is ten times below the shift to the symmetric interval.
    assert found.shortest == pytest.approx((low, high), abs=0.06 * u)
    inside = np.mean((found.values >= found.shortest[0]) & (found.values <= found.shortest[1]))
    assert inside == pytest.approx(0.95, abs=2e-6)
    linear = propagate(numerical_sensitivities(loss, inputs), inputs)
    # First order misses the curvature: 0 at the origin.
    assert float(linear.u) == pytest.approx(case["GUM_first_order"]["u"], rel=1e-9, abs=1e-15)


def test_mass_calibration() -> None:
    # JCGM 101:2008, 9.3 (numbers from memory; the two standard uncertainties follow in closed form below): a weight of
    # 100 g against one whose conventional mass is 100 000.000 mg (u 0.050), difference 1.234 mg (u 0.020), air density
    # rectangular 1.10 to 1.30, densities of the weights 7 to 9 and 7.95 to 8.05 g/cm3. First order u = 0.0539 mg; the
    # density terms are of second order and bring the draws to 0.0754 mg, 95 % from 1.0834 to 1.3825 mg.
    root = math.sqrt(3)
    inputs = [
        Input("reference", 100_000.0, 0.050),
        Input("difference", 1.234, 0.020),
        Input("air", 1.20, 0.10 / root, distribution="rectangular"),
        Input("weight", 8000.0, 1000.0 / root, distribution="rectangular"),
        Input("standard", 8000.0, 50.0 / root, distribution="rectangular"),
    ]

    def deviation(values: Mapping[str, FloatArray]) -> FloatArray:
        buoyancy = 1 + (values["air"] - 1.2) * (1 / values["weight"] - 1 / values["standard"])
        return (values["reference"] + values["difference"]) * buoyancy - 100_000.0

    linear = propagate(numerical_sensitivities(deviation, inputs), inputs)
    assert f"{float(linear.u):.4f}" == "0.0539"
    found = monte_carlo(deviation, inputs, draws=1_000_000, seed=93)
    assert float(found.mean) == pytest.approx(1.2340, abs=4e-4)

    # Independent factors of mean zero: the variances of the buoyancy term multiply; 1/rho of a rectangular rho has
    # variance 1/(a b) - (ln(b/a)/(b - a))^2 and a mean that is not 1/8000.
    def inverse(a: float, b: float) -> tuple[float, float]:
        mean = math.log(b / a) / (b - a)
        return mean, 1 / (a * b) - mean**2

    (m1, v1), (m2, v2) = inverse(7000, 9000), inverse(7950, 8050)
    air = 0.10**2 / 3
    exact = math.sqrt(0.050**2 + 0.020**2 + 100_001.234**2 * air * (v1 + v2 + (m1 - m2) ** 2))
    assert float(found.u) == pytest.approx(exact, rel=3e-3)
    assert exact == pytest.approx(0.0754, abs=1e-4)
    assert (float(found.low), float(found.high)) == pytest.approx((1.0834, 1.3825), abs=1.5e-3)
