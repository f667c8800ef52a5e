"""The fitting routine: closed forms of linear regression, a general-purpose fitting library, bounds, bad input."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.fitting.derivatives import differences, forward_differences
from shpb.fitting.least_squares import Problem, best_of, fit_function, solve
from shpb.fitting.starts import linear_parameters

X = np.linspace(0.0, 4.0, 21)


def decay(x: FloatArray, p: FloatArray) -> FloatArray:
    return np.asarray(p[0] * np.exp(-p[1] * x) + p[2])


def noisy(seed: int = 4, sd: float = 0.02) -> FloatArray:
    return decay(X, np.array([3.0, 0.8, 0.5])) + sd * np.random.default_rng(seed).standard_normal(X.size)


def test_straight_line_has_the_textbook_covariance() -> None:
    # Weighted linear regression in closed form: (X' W X)^-1, and with the residual variance before it.
    y, weights = 2.0 + 0.7 * X + np.sin(40 * X), 1.0 / (1.0 + X)
    design = np.column_stack((np.ones_like(X), X))
    normal = design.T @ (weights[:, None] * design)
    solution = np.linalg.solve(normal, design.T @ (weights * y))
    rest = float(np.sum(weights * (y - design @ solution) ** 2))
    for kind, scale in (("absolute", 1.0), ("residual", rest / 19)):
        fit = fit_function(lambda x, p: p[0] + p[1] * x, X, y, [1.0, 1.0], weights, covariance=kind)  # type: ignore[arg-type]
        assert fit.parameters == pytest.approx(solution, rel=1e-11)
        assert fit.covariance == pytest.approx(np.linalg.inv(normal) * scale, rel=1e-9)
        assert fit.sum_of_squares == pytest.approx(rest, rel=1e-11)
        assert fit.degrees_of_freedom == 19
    off = normal[0, 1] / np.sqrt(normal[0, 0] * normal[1, 1])
    assert fit.correlation[0, 1] == pytest.approx(-off, rel=1e-9)
    assert fit.residual_sd == pytest.approx(np.sqrt(rest / 19), rel=1e-11)


def test_parameters_and_covariance_of_a_general_purpose_library() -> None:
    lmfit = pytest.importorskip("lmfit")
    y, u = noisy(), 0.02 * (1 + X / 4)
    start = lmfit.create_params(a=1.0, k=1.0, c=0.0)

    def residual(p: object) -> FloatArray:
        values = np.array(list(p.valuesdict().values()))  # type: ignore[attr-defined]
        return np.asarray((decay(X, values) - y) / u)

    # scipy's own Levenberg-Marquardt behind it, with tight tolerances.
    theirs = lmfit.minimize(residual, start, method="leastsq", scale_covar=True, ftol=1e-15, xtol=1e-15)
    ours = fit_function(decay, X, y, [1.0, 1.0, 0.0], 1 / u**2)
    assert ours.parameters == pytest.approx([p.value for p in theirs.params.values()], rel=1e-7)
    # Their covariance comes from a Jacobian of forward differences: four digits.
    assert ours.covariance == pytest.approx(theirs.covar, rel=1e-4)
    assert ours.correlation[0, 1] == pytest.approx(theirs.params["a"].correl["k"], abs=1e-4)
    assert ours.sum_of_squares == pytest.approx(theirs.chisqr, rel=1e-12)


def test_scale_of_the_parameters_does_not_matter() -> None:
    scale = np.array([1e9, 1e-6, 1e-12])
    plain = fit_function(decay, X, noisy(), [1.0, 1.0, 0.1])
    scaled = fit_function(lambda x, p: decay(x, p / scale), X, noisy(), scale * [1.0, 1.0, 0.1])
    assert scaled.parameters == pytest.approx(plain.parameters * scale, rel=1e-9)
    assert scaled.u_parameters == pytest.approx(plain.u_parameters * scale, rel=1e-7)


def test_a_parameter_at_its_bound_is_said_to_be() -> None:
    fit = fit_function(decay, X, noisy(), [1.0, 1.0, 0.9], lower=[0, 0, 0.7], upper=[np.inf, 5, 2])
    held = fit_function(lambda x, p: decay(x, np.array([*p, 0.7])), X, noisy(), [1.0, 1.0])
    assert fit.at_bound.tolist() == [False, False, True]
    assert fit.determined.tolist() == [True, True, False]
    assert fit.parameters[2] == pytest.approx(0.7, abs=1e-7)
    # The others are then what a fit with it fixed there gives, uncertainty and freedom included.
    assert fit.parameters[:2] == pytest.approx(held.parameters, rel=1e-6)
    assert fit.u_parameters[:2] == pytest.approx(held.u_parameters, rel=1e-5)
    assert fit.degrees_of_freedom == held.degrees_of_freedom == 19
    assert np.isinf(fit.u_parameters[2])


def test_what_the_data_do_not_determine_gets_no_uncertainty() -> None:
    fit = fit_function(lambda x, p: p[0] * p[1] * x + p[2], X, 2 + 3 * X + np.sin(9 * X), [1.0, 1.0, 1.0])
    assert fit.determined.tolist() == [False, False, True]
    assert np.isinf(fit.u_parameters[:2]).all()
    assert fit.parameters[0] * fit.parameters[1] == pytest.approx(3.0, abs=0.2)
    assert not fit.sound
    assert fit.correlation[0, 2] == 0.0


def test_other_starts_are_tried_where_the_first_ends_badly() -> None:
    # A narrow peak set far beside the data is zero at every point: nothing pulls it back.
    def peak(x: FloatArray, p: FloatArray) -> FloatArray:
        return np.asarray(p[0] * np.exp(-(((x - p[1]) / p[2]) ** 2)))

    y = peak(X, np.array([2.0, 1.3, 0.6])) + 0.02 * np.random.default_rng(6).standard_normal(X.size)
    lost = fit_function(peak, X, y, [1.0, 9.0, 0.2], search=False)
    found = fit_function(peak, X, y, [1.0, 9.0, 0.2])
    assert found.starts_tried > 1 == lost.starts_tried
    assert found.parameters == pytest.approx(fit_function(peak, X, y, [2.0, 1.3, 0.6]).parameters, rel=1e-8)
    assert found.sum_of_squares < 0.01 * lost.sum_of_squares


def test_of_equal_minima_the_one_near_the_start_is_taken() -> None:
    def two(x: FloatArray, p: FloatArray) -> FloatArray:
        return np.asarray(p[0] * np.exp(-p[1] * x) + p[2] * np.exp(-p[3] * x))

    y = two(X, np.array([2.0, 0.3, 1.0, 2.0]))
    one, other = (fit_function(two, X, y, start) for start in ([1.5, 0.2, 1.5, 3.0], [1.5, 3.0, 1.5, 0.2]))
    assert one.parameters == pytest.approx([2.0, 0.3, 1.0, 2.0], rel=1e-8)
    assert other.parameters == pytest.approx([1.0, 2.0, 2.0, 0.3], rel=1e-8)
    assert best_of([other, one], np.array([1.5, 0.2, 1.5, 3.0])) is one


def test_points_without_a_value_are_avoided() -> None:
    def law(x: FloatArray, p: FloatArray) -> FloatArray:
        return np.asarray(p[0] * (p[1] + x) ** p[2])  # no number where p[1] + x < 0

    y = law(X, np.array([2.0, 0.01, 0.5]))
    fit = fit_function(law, X, y, [1.0, 3.0, 1.0])
    assert fit.converged
    assert fit.parameters == pytest.approx([2.0, 0.01, 0.5], rel=1e-6)


def test_extended_precision_where_the_function_meets_the_data() -> None:
    # Data rounded to 13 digits: residuals of 1e-13 are formed from values near 2. Where the machine has extended
    # precision it must reach the sum of squares of the rounding itself.
    if np.finfo(np.longdouble).eps >= np.finfo(float).eps:
        pytest.skip("no extended precision here")
    x = np.arange(24, dtype=np.longdouble) / 20
    exact = np.exp(-x) + np.longdouble(1.5) * np.exp(-5 * x)
    y = np.round(exact * np.longdouble(1e12)) / np.longdouble(1e12)
    fit = fit_function(
        lambda x, p: p[0] * np.exp(-p[1] * x) + p[2] * np.exp(-p[3] * x), x, y, [2, 0.5, 1, 8.0]
    )
    rounding = np.asarray(y - exact, dtype=float)
    design = differences(
        lambda p: np.asarray(p[0] * np.exp(-p[1] * x) + p[2] * np.exp(-p[3] * x), dtype=float),
        np.array([1.0, 1.0, 1.5, 5.0]), np.full(4, -np.inf), np.full(4, np.inf), fine=True,
    )  # fmt: skip
    left = rounding - design @ np.linalg.lstsq(design, rounding, rcond=None)[0]
    assert fit.sum_of_squares == pytest.approx(float(left @ left), rel=1e-3)


def test_differences_are_good_to_ten_digits() -> None:
    at, free = np.array([2.0, 0.3]), np.full(2, np.inf)

    def function(p: FloatArray) -> FloatArray:
        return np.array([p[0] ** 3 * np.sin(p[1]), np.exp(p[0] * p[1])])

    exact = np.array([[12 * np.sin(0.3), 8 * np.cos(0.3)], [0.3 * np.exp(0.6), 2 * np.exp(0.6)]])
    assert differences(function, at, -free, free, fine=True) == pytest.approx(exact, rel=1e-10)
    assert differences(function, at, -free, free, fine=False) == pytest.approx(exact, rel=1e-8)
    quick = forward_differences(function, at, function(at), free, least=1e-3)
    assert quick == pytest.approx(exact, rel=1e-4)
    assert forward_differences(function, at, function(at), at, least=1e-3) == pytest.approx(exact, rel=1e-4)
    # At a bound, from one side.
    assert differences(function, at, at, free, fine=True) == pytest.approx(exact, rel=1e-6)
    assert differences(function, at, -free, at, fine=True) == pytest.approx(exact, rel=1e-6)


def test_linear_parameters_are_found() -> None:
    problem = Problem(
        residuals=lambda p: p[0] * np.exp(-p[1] * X) + p[2] * X * p[3],
        lower=np.full(4, -9.0),
        upper=np.full(4, 9.0),
    )
    assert linear_parameters(problem, np.array([1.0, 0.5, 2.0, 1.0])) == (0, 2)


def test_solve_takes_the_best_of_its_starts() -> None:
    problem = Problem(
        residuals=lambda p: np.array([p[0] ** 4 - 8 * p[0] ** 2 + p[0], 0.0]) + 20.0,
        lower=np.array([-np.inf]), upper=np.array([np.inf]),
    )  # fmt: skip
    fit = solve(problem, [np.array([1.9]), np.array([-2.1])])
    assert fit.starts_tried == 2
    assert fit.parameters[0] < 0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"y": np.ones(20)}, r"function: it gives an array of shape \(21,\), expected \(20,\) like y"),
        ({"start": [1.0] * 21}, "21 points cannot determine 21 parameters.*at least 22 points"),
        ({"y": np.where(X == 0, np.nan, 1.0)}, "y: entry 0 is not finite"),
        ({"start": [1.0, np.inf, 0.0]}, "start: entry 1 is not finite"),
        ({"weights": -np.ones(21)}, "weights: the least is -1"),
        ({"weights": np.ones(3)}, "do not belong together"),
        ({"lower": [0.0, 0.0, 5.0], "upper": [1.0, 1.0, 1.0]}, "lower bound below its upper bound"),
        ({"function": lambda x, p: np.full(21, np.nan)}, "no finite values at the start"),
    ],
)
def test_refusals(arguments: dict[str, object], message: str) -> None:
    values: dict[str, object] = {"function": decay, "x": X, "y": noisy(), "start": [1.0, 1.0, 0.0]}
    with pytest.raises(InputError, match=message):
        fit_function(**{**values, **arguments})  # type: ignore[arg-type]


def test_results_cannot_change() -> None:
    fit = fit_function(decay, X, noisy(), [1.0, 1.0, 0.0])
    with pytest.raises(ValueError, match="read-only"):
        fit.parameters[0] = 0.0
