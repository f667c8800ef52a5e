"""The uncertainty engine: identities that hold whatever the numbers, agreement of its two ways, and its refusals."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest
from scipy import stats

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.trust.gum import (
    Covariance,
    Input,
    correlation_matrix,
    propagate,
    propagated_covariance,
    student_t_quantile,
    type_a,
)
from shpb.trust.montecarlo import monte_carlo, numerical_sensitivities, numerical_tolerance, shortest_interval

A, B = Input("a", 3.0, 0.3), Input("b", 5.0, 0.4)


def linear_curves(slopes: Mapping[str, FloatArray]) -> Any:
    """A model that is linear in its inputs, one curve per run."""

    def model(values: Mapping[str, FloatArray]) -> FloatArray:
        return sum((values[name][:, None] * slope for name, slope in slopes.items()), np.zeros((1, 1)))

    return model


def some_curves(samples: int = 40) -> tuple[list[Input], dict[tuple[str, str], float], dict[str, FloatArray]]:
    rng = np.random.default_rng(3)
    inputs = [
        Input("c0", 5000.0, 10.0, shared=True),
        Input("k", 2.1, 0.01, shared=True),
        Input("zero", 0.0, 1e-3, degrees_of_freedom=9),
        Input("foot", 0.0, 2e-6, distribution="rectangular"),
        Input("length", 5e-3, 1e-5, distribution="triangular"),
        Input("hum", 0.0, 1e-3, distribution="arcsine"),
    ]
    slopes = {one.name: rng.normal(size=samples) / one.u for one in inputs}
    return inputs, {("c0", "k"): -0.6}, slopes


# --- linear propagation


@pytest.mark.parametrize("r", [-1.0, -0.5, 0.0, 0.7, 1.0])
def test_sum_and_difference_of_two_correlated_inputs(r: float) -> None:
    # u^2 = 0.09 + 0.16 +- 2 r 0.12; fully correlated the u add or subtract.
    plus = propagate({"a": 1.0, "b": 1.0}, [A, B], {("a", "b"): r})
    minus = propagate({"a": 1.0, "b": -1.0}, [A, B], {("b", "a"): r})
    assert float(plus.u) == pytest.approx(math.sqrt(0.25 + 0.24 * r), rel=1e-12)
    assert float(minus.u) == pytest.approx(math.sqrt(0.25 - 0.24 * r), rel=1e-12)
    assert float(propagate({"a": 4.0, "b": -3.0}, [A, B], {("a", "b"): 1.0}).u) == pytest.approx(0, abs=1e-7)


def test_contributions_sum_to_the_variance() -> None:
    inputs, correlations, slopes = some_curves()
    budget = propagate(slopes, inputs, correlations)
    assert budget.variance_parts.sum(axis=0) == pytest.approx(budget.u**2, rel=1e-12)
    assert budget.u_shared**2 + budget.u_own**2 == pytest.approx(budget.u**2, rel=1e-12)
    # The quadratic form J C J' of 5.2.2, computed straight.
    jacobian = np.array([slopes[one.name] for one in inputs])
    u = np.array([one.u for one in inputs])
    covariance = correlation_matrix(inputs, correlations) * np.outer(u, u)
    assert budget.u**2 == pytest.approx(np.einsum("is,ij,js->s", jacobian, covariance, jacobian), rel=1e-12)
    shared = np.einsum("is,ij,js->s", jacobian[:2], covariance[:2, :2], jacobian[:2])
    assert budget.u_shared**2 == pytest.approx(shared, rel=1e-12)
    for samples in (None, 7, slice(10, 20), np.arange(40) % 3 == 0):
        lines = budget.ranked(samples)
        assert sum(line.share for line in lines) == pytest.approx(1.0)
        assert [line.share for line in lines] == sorted((line.share for line in lines), reverse=True)
    assert {line.name for line in budget.ranked(7)} == set(slopes)
    own = next(line for line in budget.ranked(7) if line.name == "zero")
    assert own.u == pytest.approx(abs(slopes["zero"][7]) * 1e-3)
    assert own.share == pytest.approx(own.u**2 / budget.u[7] ** 2)


def test_half_of_a_cross_term_goes_to_each_side() -> None:
    budget = propagate({"a": 1.0, "b": -1.0}, [A, B], {("a", "b"): 0.9})
    # 0.09 - 0.9 0.12 = -0.018 and 0.16 - 0.108 = 0.052: correlation takes away more than a brings.
    assert budget.variance_parts == pytest.approx([-0.018, 0.052])
    assert [line.name for line in budget.ranked()] == ["b", "a"]


def test_two_shots_share_what_the_rig_brings() -> None:
    inputs, correlations, slopes = some_curves()
    budget = propagate(slopes, inputs, correlations)
    common = propagated_covariance(slopes, slopes, inputs, correlations, only_shared=True)
    assert common == pytest.approx(budget.u_shared**2, rel=1e-12)
    assert propagated_covariance(slopes, slopes, inputs, correlations) == pytest.approx(
        budget.u**2, rel=1e-12
    )


def test_effective_degrees_of_freedom() -> None:
    # G.2b: equal parts of 4 and 16 degrees: (2 v)^2 / (v^2/4 + v^2/16) = 12.8; one source alone keeps its own.
    few, many = Input("few", 0, 1, degrees_of_freedom=4), Input("many", 0, 1, degrees_of_freedom=16)
    both = propagate({"few": [1.0, 1.0, 0.0, 0.0], "many": [1.0, 0.0, 1.0, 0.0]}, [few, many])
    assert both.degrees_of_freedom == pytest.approx([12.8, 4.0, 16.0, math.inf])
    # Correlated, they count as one with the fewer.
    linked = propagate({"few": 1.0, "many": 1.0}, [few, many], {("few", "many"): 0.3})
    assert float(linked.degrees_of_freedom) == pytest.approx(4.0)
    assert both.expanded(0.95)[1] == pytest.approx(2.776445, rel=1e-6)  # t_95(4), scipy.stats


@pytest.mark.parametrize("probability", [0.0005, 0.1, 0.5, 0.6, 0.9, 0.975, 0.995, 0.9995])
def test_student_quantile_against_a_reference_library(probability: float) -> None:
    nu = np.array([1, 1.05, 1.5, 2, 2.7, 3, 4, 9, 30.5, 99, 100, 101, 1e3, 1e6])
    expected = stats.t.ppf(probability, nu)
    rel = 1e-8 if 0.005 <= probability <= 0.995 else 1e-5
    assert student_t_quantile(probability, nu) == pytest.approx(expected, rel=rel, abs=1e-12)
    many = np.linspace(1, 120, 500)
    assert student_t_quantile(probability, many) == pytest.approx(
        stats.t.ppf(probability, many), rel=rel, abs=1e-12
    )
    assert float(student_t_quantile(probability, math.inf)) == pytest.approx(stats.norm.ppf(probability))


def test_sensitivities_are_the_derivatives() -> None:
    inputs = [
        Input("x", 2.0, 0.01),
        Input("y", 0.0, 0.1),
        Input("known", 3.0, 0.0),
        Input("unused", 1.0, 1.0),
    ]
    powers = np.arange(4)

    def model(values: Mapping[str, FloatArray]) -> FloatArray:
        x, y, known = (values[name][:, None] for name in ("x", "y", "known"))
        return np.asarray(x**powers * np.exp(y) + known**2)

    found = numerical_sensitivities(model, inputs)
    # Central differences err by h^2 f'''/6, here below (0.001)^2 8/6.
    assert found["x"] == pytest.approx([0, 1, 4, 12], abs=2e-6)
    assert found["y"] == pytest.approx([1, 2, 4, 8], abs=2e-6)
    assert found["known"] == pytest.approx([6, 6, 6, 6], rel=1e-9)
    assert found["unused"] == pytest.approx([0, 0, 0, 0], abs=1e-12)
    # A step of one u gives the mean slope: ((2.01)^3 - (1.99)^3) / 0.02 = 12.0001.
    assert numerical_sensitivities(model, inputs, step=1.0)["x"][3] == pytest.approx(12.0001, rel=1e-9)


def test_type_a_is_the_covariance_of_the_means() -> None:
    rng = np.random.default_rng(5)
    a, b = rng.normal(size=12), rng.normal(size=12)
    found = type_a({"a": a, "b": a + 0.3 * b})
    assert found.covariance.matrix == pytest.approx(np.cov([a, a + 0.3 * b]) / 12, rel=1e-12)
    assert found.inputs(shared=True)[1].shared
    assert found.inputs()[0].degrees_of_freedom == 11


# --- Monte Carlo


def test_a_linear_model_gives_the_same_both_ways() -> None:
    inputs, correlations, slopes = some_curves()
    draws = 100_000
    linear = propagate(slopes, inputs, correlations)
    found = monte_carlo(linear_curves(slopes), inputs, correlations, draws=draws, seed=11)
    # No input has a kurtosis above 3, so u / sqrt(2 M) bounds the standard error of u. Largest of 40: five of them.
    assert found.u == pytest.approx(linear.u, rel=5 / math.sqrt(2 * draws))
    middle = sum(slopes[one.name] * one.value for one in inputs)
    assert np.all(np.abs(found.mean - middle) < 5 * linear.u / math.sqrt(draws))
    assert found.shortest is None
    assert found.settled is None


def test_intervals_of_curves_from_histograms_are_those_of_sorted_draws() -> None:
    inputs, correlations, slopes = some_curves(samples=6)
    curves = monte_carlo(linear_curves(slopes), inputs, correlations, draws=20_000, seed=12, chunk=700)
    for sample in range(6):
        one = {name: slope[sample] for name, slope in slopes.items()}

        def number(values: Mapping[str, FloatArray], one: Mapping[str, float] = one) -> FloatArray:
            return sum((values[name] * slope for name, slope in one.items()), np.zeros(1))

        alone = monte_carlo(number, inputs, correlations, draws=20_000, seed=12)
        assert curves.mean[sample] == pytest.approx(float(alone.mean), rel=1e-9)
        assert curves.u[sample] == pytest.approx(float(alone.u), rel=1e-9)
        # Same draws: what differs is the interpolation within bins 1/16 u wide. 0.01 u is half the draws' own error.
        assert curves.low[sample] == pytest.approx(float(alone.low), abs=0.01 * float(alone.u))
        assert curves.high[sample] == pytest.approx(float(alone.high), abs=0.01 * float(alone.u))


@pytest.mark.parametrize(
    ("kind", "kurtosis", "half_width"),
    [("normal", 3, 1.959964), ("rectangular", 1.8, 0.95 * math.sqrt(3)), ("triangular", 2.4, None),
     ("arcsine", 1.5, math.sqrt(2) * math.sin(0.475 * math.pi)), ("t", None, None)],
)  # fmt: skip
def test_each_distribution(kind: Any, kurtosis: float | None, half_width: float | None) -> None:
    degrees = 5.0
    one = Input("x", 10.0, 2.0, distribution=kind, degrees_of_freedom=degrees)
    found = monte_carlo(lambda values: values["x"], [one], draws=200_000, seed=13)
    assert found.values is not None
    if kind == "t":
        # JCGM 101, 6.4.9: u is the scale, the standard deviation larger by sqrt(nu/(nu-2)). Kurtosis 9 at nu = 5.
        assert float(found.u) == pytest.approx(2 * math.sqrt(5 / 3), rel=4 * math.sqrt(8 / 8e5))
        half_width = float(student_t_quantile(0.975, degrees))
    else:
        assert kurtosis is not None
        assert float(found.u) == pytest.approx(2, rel=4 * math.sqrt((kurtosis - 1) / 8e5))
        measured = np.mean(((found.values - 10) / 2) ** 4)
        assert measured == pytest.approx(kurtosis, rel=0.03)
    if kind == "triangular":  # closed form: half width sqrt 6, upper tail (1 - x/w)^2 / 2
        half_width = math.sqrt(6) * (1 - math.sqrt(0.05))
    assert half_width is not None
    assert float(found.high) == pytest.approx(10 + 2 * half_width, abs=0.05)
    assert float(found.low) == pytest.approx(10 - 2 * half_width, abs=0.05)


@pytest.mark.parametrize("r", [-1.0, 0.6, 1.0])
def test_correlated_draws(r: float) -> None:
    seen: list[Mapping[str, FloatArray]] = []

    def keep(values: Mapping[str, FloatArray]) -> FloatArray:
        seen.append({name: x.copy() for name, x in values.items()})
        return values["a"] - values["b"]

    found = monte_carlo(keep, [A, Input("c", 1.0, 1.0), B], {("a", "b"): r}, draws=50_000, seed=14)
    a, b, c = (np.concatenate([part[name] for part in seen]) for name in ("a", "b", "c"))
    # Standard error of a correlation: (1 - r^2) / sqrt M.
    assert np.corrcoef(a, b)[0, 1] == pytest.approx(r, abs=5 * (1 - r**2) / math.sqrt(5e4) + 1e-9)
    assert abs(np.corrcoef(a, c)[0, 1]) < 5 / math.sqrt(5e4)
    assert float(found.u) == pytest.approx(math.sqrt(0.25 - 0.24 * r), rel=5 / math.sqrt(1e5))


def test_a_seed_gives_the_same_draws_whatever_the_chunks() -> None:
    inputs, correlations, slopes = some_curves(samples=3)
    model = linear_curves(slopes)
    whole = monte_carlo(model, inputs, correlations, draws=3000, seed=15)
    parts = monte_carlo(model, inputs, correlations, draws=3000, seed=15, chunk=128)
    other = monte_carlo(model, inputs, correlations, draws=3000, seed=16)
    assert parts.mean == pytest.approx(whole.mean, rel=1e-10)
    assert parts.high == pytest.approx(whole.high, rel=1e-10)
    assert not np.allclose(other.mean, whole.mean, rtol=1e-6)


def test_progress_and_chunk_sizes() -> None:
    told: list[tuple[int, int | None]] = []
    sizes: list[int] = []

    def model(values: Mapping[str, FloatArray]) -> FloatArray:
        sizes.append(len(values["a"]))
        return values["a"][:, None] * np.ones(5)

    monte_carlo(model, [A], draws=1000, seed=1, chunk=300, progress=lambda n, of: told.append((n, of)))
    assert max(sizes) <= 300
    assert sum(sizes) == 1000
    assert told == [(n, 1000) for n in np.cumsum(sizes)]


def test_adaptive_curves_settle_and_a_limit_is_owned_up_to() -> None:
    inputs, correlations, slopes = some_curves(samples=4)
    model = linear_curves(slopes)
    found = monte_carlo(model, inputs, correlations, adaptive=1, seed=17)
    assert found.settled is True
    linear = propagate(slopes, inputs, correlations).u
    tolerance = [numerical_tolerance(float(u), 1) for u in linear]
    assert np.all(np.abs(found.u - linear) < tolerance)
    short = monte_carlo(model, inputs, correlations, adaptive=3, seed=17, limit=40_000)
    assert short.settled is False
    assert short.draws == 40_000


def test_a_sample_that_never_varies_is_exact() -> None:
    def model(values: Mapping[str, FloatArray]) -> FloatArray:
        return np.stack([values["a"], np.full(values["a"].shape, 0.1)], axis=1)

    for request in ({"draws": 2000}, {"adaptive": 1}):
        found = monte_carlo(model, [A], seed=1, **request)
        assert found.u[1] < 1e-12  # the rounding of sums over up to 10 000 draws
        assert (found.low[1], found.high[1]) == pytest.approx((0.1, 0.1), rel=1e-12)
        assert found.settled is not False


def test_shortest_interval_of_draws_one_can_count() -> None:
    # 7.7.4: ten draws, 80 %: q = 8; y(9) - y(1) = 8, y(10) - y(2) = 99.
    assert shortest_interval(np.array([0.0, 1, 2, 3, 4, 5, 6, 7, 8, 100]), 0.8) == (0.0, 8.0)


# --- refusals


@pytest.mark.parametrize(
    ("fields", "message"),
    [
        ({"u": -0.1}, "standard uncertainty is -0.1"),
        ({"u": math.nan}, "standard uncertainty is nan"),
        ({"value": math.inf}, "value is inf"),
        ({"name": ""}, "no name"),
        ({"distribution": "gamma"}, "Choose one of normal"),
        ({"degrees_of_freedom": 0.5}, "degrees of freedom are 0.5"),
        ({"degrees_of_freedom": math.nan}, "degrees of freedom are nan"),
        ({"distribution": "t"}, "needs its degrees of freedom"),
    ],
)
def test_impossible_inputs(fields: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Input(**{"name": "x", "value": 1.0, "u": 0.1, **fields})


@pytest.mark.parametrize(
    ("matrix", "message"),
    [
        ([[1.0, 2.0], [2.0, 1.0]], "not positive semi-definite.*eigenvalue -1"),
        ([[-1.0, 0.0], [0.0, 1.0]], "not positive semi-definite"),
        ([[1.0, 0.1], [0.2, 1.0]], "not symmetric"),
        ([[1.0, math.nan], [math.nan, 1.0]], "not finite"),
        ([[0.0, 0.1], [0.1, 1.0]], "exactly known"),
        ([[1.0]], "shape is"),
    ],
)
def test_impossible_covariances(matrix: list[list[float]], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Covariance(("a", "b"), np.array(matrix))


C = Input("c", 0.0, 1.0)


@pytest.mark.parametrize(
    ("correlations", "message"),
    [
        ({("a", "nobody"): 0.5}, "no input 'nobody'"),
        ({("a", "b"): 1.5}, "coefficient is 1.5"),
        ({("a", "b"): math.nan}, "coefficient is nan"),
        ({("a", "a"): 0.5}, "two different inputs"),
        ({("a", "b"): 0.5, ("b", "a"): 0.4}, "each pair once"),
        ({("a", "b"): 0.9, ("b", "c"): 0.9, ("a", "c"): -0.9}, "not positive semi-definite"),
        (Covariance(("a", "b"), np.diag([0.3, 0.4])), "the same unit"),
        (Covariance(("nobody",), np.eye(1)), "no input 'nobody'"),
    ],
)
def test_impossible_correlations(correlations: Any, message: str) -> None:
    with pytest.raises(InputError, match=message):
        propagate({"a": 1.0, "b": 1.0, "c": 1.0}, [A, B, C], correlations)


def test_covariance_matrices_serve_as_correlations() -> None:
    block = Covariance(("b", "a"), np.array([[0.16, 0.06], [0.06, 0.09]]))
    by_matrix = propagate({"a": 1.0, "b": 2.0, "c": 1.0}, [A, B, C], [block])
    by_pair = propagate({"a": 1.0, "b": 2.0, "c": 1.0}, [A, B, C], {("a", "b"): 0.5})
    assert float(by_matrix.u) == pytest.approx(float(by_pair.u), rel=1e-12)
    assert float(by_matrix.u) == pytest.approx(math.sqrt(0.09 + 0.64 + 1 + 2 * 2 * 0.06), rel=1e-12)


@pytest.mark.parametrize(
    ("slopes", "message"),
    [
        ({"a": 1.0}, r"no sensitivity for \['b'\]"),
        ({"a": 1.0, "b": 1.0, "d": 1.0}, r"no input for \['d'\]"),
        ({"a": math.nan, "b": 1.0}, "sensitivity to 'a'"),
        ({"a": [1.0, 2.0], "b": [1.0, 2.0, 3.0]}, "same samples"),
        ({"a": [[1.0]], "b": 1.0}, "same samples"),
    ],
)
def test_sensitivities_that_do_not_fit(slopes: Any, message: str) -> None:
    with pytest.raises(InputError, match=message):
        propagate(slopes, [A, B])


def test_other_refusals_of_the_linear_way() -> None:
    with pytest.raises(InputError, match="name occurs twice"):
        propagate({"a": 1.0}, [A, A])
    with pytest.raises(InputError, match="no inputs"):
        propagate({}, [])
    with pytest.raises(InputError, match="shared by all shots"):
        propagate({"a": 1.0, "b": 1.0}, [A, Input("b", 5, 0.4, shared=True)], {("a", "b"): 0.5})
    with pytest.raises(InputError, match="no sample is chosen"):
        propagate({"a": [1.0, 2.0], "b": 1.0}, [A, B]).ranked(slice(5, 9))
    with pytest.raises(InputError, match="the same number of observations"):
        type_a({"a": [1.0, 2.0], "b": [1.0, 2.0, 3.0]})
    with pytest.raises(InputError, match="two or more"):
        type_a({"a": [1.0]})
    with pytest.raises(InputError, match="observations of 'a', first at sample 1"):
        type_a({"a": [1.0, math.nan]})
    with pytest.raises(InputError, match="coverage up to 0.999"):
        propagate({"a": 1.0}, [A]).expanded(0.99999)
    with pytest.raises(InputError, match="degrees of freedom below 1"):
        student_t_quantile(0.9, [3.0, math.nan])
    with pytest.raises(InputError, match="step is 0"):
        numerical_sensitivities(lambda v: v["a"], [A], step=0)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({}, "one of the two"),
        ({"draws": 1000, "adaptive": 2}, "one of the two"),
        ({"draws": 100}, "Give 200 or more"),
        ({"draws": 1000, "probability": 1.0}, "between 0 and 1"),
        ({"draws": 1000, "chunk": 8}, "32 or more"),
        ({"draws": 1000, "seed": -1}, "seed is -1"),
        ({"adaptive": 0}, "0 significant digits"),
        ({"adaptive": 1, "limit": 15_000}, "20000 or more"),
    ],
)
def test_impossible_requests(arguments: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        monte_carlo(lambda values: values["a"], [A], **{"seed": 1, **arguments})


def test_inputs_that_cannot_be_drawn() -> None:
    rectangular = Input("b", 5.0, 0.4, distribution="rectangular")
    two_degrees = Input("a", 0.0, 1.0, distribution="t", degrees_of_freedom=2)
    with pytest.raises(InputError, match="only normal inputs may be correlated"):
        monte_carlo(lambda v: v["a"], [A, rectangular], {("a", "b"): 0.5}, draws=1000, seed=1)
    with pytest.raises(InputError, match="has no variance"):
        monte_carlo(lambda v: v["a"], [two_degrees], draws=1000, seed=1)
    with pytest.raises(InputError, match="no inputs"):
        monte_carlo(lambda v: np.zeros(1), [], draws=1000, seed=1)


def test_models_that_misbehave() -> None:
    with pytest.raises(InputError, match="not finite at a = -?[0-9.]+"), np.errstate(invalid="ignore"):
        monte_carlo(lambda v: np.sqrt(v["a"] - 3), [A], draws=1000, seed=1)
    with pytest.raises(InputError, match="one row for each run"):
        monte_carlo(lambda v: np.zeros(3), [A], draws=1000, seed=1)
    with pytest.raises(InputError, match="one row for each run"):
        monte_carlo(lambda v: np.zeros((len(v["a"]), len(v["a"]))), [A], draws=1000, seed=1)
    # Still for the first draws, then huge ones in over 2.5 %: no histogram laid out by the first can hold that.
    calls = [0]

    def sleeper(values: Mapping[str, FloatArray]) -> FloatArray:
        calls[0] += 1
        return np.full((len(values["a"]), 1), 1.0 if calls[0] == 1 else 9.0)

    with pytest.raises(InputError, match="rare huge values"):
        monte_carlo(sleeper, [A], draws=1000, seed=1)


@pytest.mark.parametrize(("u", "digits"), [(-1.0, 2), (math.nan, 2), (1.0, 0)])
def test_tolerance_of_nothing(u: float, digits: int) -> None:
    with pytest.raises(InputError, match="zero or more"):
        numerical_tolerance(u, digits)


# --- inputs of many components


def test_a_noise_is_one_input_of_many_components() -> None:
    """Sum of n independent numbers of standard deviation s: s sqrt(n), whatever the chunks; beside a plain input."""
    noise = Input("noise", 0.0, 0.5, components=16)

    def total(values: Mapping[str, FloatArray]) -> FloatArray:
        assert values["noise"].shape == (values["a"].size, 16)
        return np.asarray(values["noise"].sum(axis=1) + values["a"])

    one, other = (monte_carlo(total, [A, noise], draws=20_000, seed=2, chunk=chunk) for chunk in (64, 4096))
    assert float(one.u) == pytest.approx(math.hypot(0.5 * 4, 0.3), rel=0.02)
    assert float(one.mean) == pytest.approx(3.0, abs=0.05)
    np.testing.assert_array_equal(one.values, other.values)


def test_what_cannot_be_done_with_many_components() -> None:
    with pytest.raises(InputError, match="'noise': it has 0 components"):
        Input("noise", 0.0, 0.5, components=0)
    noise = Input("noise", 0.0, 0.5, components=3)
    with pytest.raises(InputError, match="'noise': it has 3 components"):
        propagate({"noise": 1.0}, [noise])
    with pytest.raises(InputError, match="it is correlated, and has 3 components"):
        monte_carlo(lambda v: v["a"], [A, noise], {("a", "noise"): 0.5}, draws=300, seed=1)
    with pytest.raises(InputError, match=r"the model is not finite at a = "):
        monte_carlo(lambda v: v["a"] + np.where(v["a"] > 3, np.nan, 0), [A, noise], draws=300, seed=1)
