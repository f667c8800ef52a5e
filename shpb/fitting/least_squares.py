"""Non-linear least squares: from residuals and a start to parameters, covariance, and what they are worth.

``scipy.optimize.least_squares`` walks to the neighbourhood of the minimum in scaled parameters; Gauss-Newton
steps with a fourth-order Jacobian then take it to the last digits, and the covariance comes from that Jacobian.
Where the walk ends badly (no convergence, parameters that the data do not determine), other starts are tried
(:mod:`shpb.fitting.starts`).

References
----------
J. J. More, in: Numerical Analysis, Lecture Notes in Mathematics 630 (1978) 105-116 (scaling);
D. M. Bates, D. G. Watts, Technometrics 23 (1981) 179-183 (relative offset, the test of convergence);
D. M. Bates, D. G. Watts, Nonlinear Regression Analysis and Its Applications (1988), ch. 2 (covariance).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from shpb.arrays import BoolArray, FloatArray, frozen
from shpb.errors import InputError
from shpb.fitting.derivatives import differences

Residuals = Callable[[FloatArray], FloatArray]
Function = Callable[[FloatArray, FloatArray], FloatArray]
CovarianceKind = Literal["residual", "absolute"]

_SINGULAR = 1e-11  # a singular value below this share of the greatest is rounding, not information
_OFFSET = 1e-5  # relative offset: the distance to the minimum in units of the parameters' own uncertainty
_STEP = 1e-9  # relative length of the last Gauss-Newton step, for fits without residual
_MOST_STEPS = 100
_SHAKY = 1e8  # condition number beyond which other starts are tried
_BIG = 1e60  # what an impossible trial point looks like to the search; its square still is a number


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LeastSquaresFit:
    """Outcome of one fit.

    Attributes
    ----------
    parameters : float array, shape (parameters,)
    covariance : float array, shape (parameters, parameters)
        Infinite on the diagonal, zero beside it, where a parameter is not determined.
    covariance_inside : float array, shape (parameters, parameters)
        The same within the directions that the data determine, also of parameters that are not determined one by one:
        for uncertainties of what is computed from them together. Zero for a parameter at a bound.
    residuals : float array, shape (residuals,)
        Weighted residuals at the minimum.
    sum_of_squares : float
    degrees_of_freedom : int
        Residuals less parameters that were free to move (those at a bound were not).
    determined : bool array, shape (parameters,)
        False where the data say nothing: at a bound, or in a direction that changes no residual.
    at_bound : bool array, shape (parameters,)
    condition_number : float
        Of the Jacobian with columns of unit length.
    converged : bool
        Relative offset below 1e-5, or the last step below 1e-9 of the parameters.
    starts_tried : int
    """

    parameters: FloatArray
    covariance: FloatArray
    covariance_inside: FloatArray
    residuals: FloatArray
    sum_of_squares: float
    degrees_of_freedom: int
    determined: BoolArray
    at_bound: BoolArray
    condition_number: float
    converged: bool
    starts_tried: int = 1

    def __post_init__(self) -> None:
        for array in (
            self.parameters, self.covariance, self.covariance_inside, self.residuals, self.determined, self.at_bound,
        ):  # fmt: skip
            frozen(array)

    @property
    def u_parameters(self) -> FloatArray:
        """Standard deviations of the parameters, shape (parameters,); infinite where not determined."""
        return np.sqrt(np.diag(self.covariance))

    @property
    def residual_sd(self) -> float:
        """Residual standard deviation, sqrt(sum of squares / degrees of freedom)."""
        return float(np.sqrt(self.sum_of_squares / self.degrees_of_freedom))

    @property
    def correlation(self) -> FloatArray:
        """Correlation matrix of the parameters, shape (parameters, parameters); 0 beside one not determined."""
        u = np.where(self.determined, self.u_parameters, 1.0)
        between = np.where(np.outer(self.determined, self.determined), self.covariance, 0.0)
        scale = np.where(u > 0, u, 1.0)  # a fit without residual has no uncertainty to correlate
        matrix = np.asarray(between / np.outer(scale, scale))
        np.fill_diagonal(matrix, 1.0)
        return matrix

    @property
    def sound(self) -> bool:
        """True if it converged to a minimum that determines every parameter well enough to stand alone."""
        return self.converged and bool(self.determined.all()) and self.condition_number < _SHAKY


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Problem:
    """What is to be made small, and where the parameters may go."""

    residuals: Residuals
    lower: FloatArray
    upper: FloatArray
    least: float | FloatArray = 1e-8  # size for which steps are judged where a parameter is smaller
    jacobian: Callable[[FloatArray, bool], FloatArray] | None = (
        None  # (parameters, fine); differences where None
    )

    def at(self, parameters: FloatArray) -> FloatArray:
        """Residuals, without a word from numpy on trial points that overflow."""
        with np.errstate(all="ignore"):
            return np.asarray(self.residuals(parameters), dtype=float)

    def cost(self, parameters: FloatArray) -> float:
        """Sum of squares; infinite where a residual is not a number."""
        return _sum_of_squares(self.at(parameters))

    def slopes(self, parameters: FloatArray, *, fine: bool = False) -> FloatArray:
        """Jacobian, shape (residuals, parameters): given, or by central differences, of order four if ``fine``."""
        if self.jacobian is not None:
            with np.errstate(all="ignore"):
                return np.asarray(self.jacobian(parameters, fine), dtype=float)
        return differences(self.at, parameters, self.lower, self.upper, fine=fine, least=self.least)

    def inside(self, parameters: FloatArray) -> FloatArray:
        """The nearest point within the bounds."""
        return np.clip(parameters, self.lower, self.upper)


def _sum_of_squares(residuals: FloatArray) -> float:
    with np.errstate(all="ignore"):
        total = float(np.einsum("i,i->", residuals, residuals))
    return total if np.isfinite(total) else np.inf


def walk(
    problem: Problem, start: FloatArray, *, evaluations: int = 2000, tolerance: float = 1e-14
) -> FloatArray:
    """Lowest point that the library's methods reach from ``start``; ``start`` itself where they find none."""
    from scipy.optimize import least_squares

    start = problem.inside(start)
    scale = np.where(start != 0, np.abs(start), 1.0)

    def residuals(scaled: FloatArray) -> FloatArray:
        values = problem.at(scaled * scale)
        return np.where(np.isfinite(values), values, _BIG)

    def slopes(scaled: FloatArray) -> FloatArray:
        return np.nan_to_num(problem.slopes(scaled * scale) * scale, nan=0.0, posinf=_BIG, neginf=-_BIG)

    bounded = bool(np.isfinite(problem.lower).any() or np.isfinite(problem.upper).any())
    best, least = start, problem.cost(start)
    for method in ("trf",) if bounded else ("lm", "trf"):
        limits = (problem.lower / scale, problem.upper / scale) if bounded else (-np.inf, np.inf)
        try:
            with np.errstate(all="ignore"):
                found = least_squares(
                    residuals, start / scale, slopes, limits, method=method, x_scale="jac",
                    ftol=tolerance, xtol=tolerance, gtol=tolerance, max_nfev=evaluations,
                )  # fmt: skip
        except (ValueError, np.linalg.LinAlgError):
            continue  # it stepped where the residuals are no numbers; the other method, or another start, goes on
        point = problem.inside(found.x * scale)
        if (cost := problem.cost(point)) < least:
            best, least = point, cost
    return best


def _gauss_newton_step(slopes: FloatArray, residuals: FloatArray) -> FloatArray:
    length = np.sqrt(np.einsum("ij,ij->j", slopes, slopes))
    length = np.where(length > 0, length, 1.0)
    step = np.linalg.lstsq(slopes / length, -residuals, rcond=_SINGULAR)[0]
    return np.asarray(step / length)


def _held(problem: Problem, parameters: FloatArray, slopes: FloatArray, residuals: FloatArray) -> BoolArray:
    """Parameters at a bound that the residuals push outwards."""
    room = 1e-7 * np.maximum(np.abs(parameters), problem.least)
    downhill = -slopes.T @ residuals
    low = (parameters - problem.lower <= room) & (downhill <= 0)
    high = (problem.upper - parameters <= room) & (downhill >= 0)
    return np.asarray(low | high)


def polish(
    problem: Problem,
    start: FloatArray,
    *,
    tolerance: float = 1e-12,
    near: float = _OFFSET,
    fine: bool = True,
    most_steps: int = _MOST_STEPS,
) -> tuple[FloatArray, bool]:
    """Gauss-Newton steps until the last is below ``tolerance`` of the parameters.

    Returns the parameters and whether they are at a minimum: relative offset below ``near``, or last step below 1e-9.
    """
    here = problem.inside(start)
    residuals = problem.at(here)
    cost, last = _sum_of_squares(residuals), np.inf
    for _ in range(most_steps):
        slopes = problem.slopes(here, fine=fine)
        if not (np.isfinite(slopes).all() and np.isfinite(residuals).all()):
            return here, False
        free = ~_held(problem, here, slopes, residuals)
        step = np.zeros_like(here)
        step[free] = _gauss_newton_step(slopes[:, free], residuals) if free.any() else 0.0
        relative = float(np.max(np.abs(step) / np.maximum(np.abs(here), problem.least), initial=0.0))
        along = slopes @ step
        spread = residuals + along
        freedom = max(residuals.size - int(free.sum()), 1)
        offset = np.sqrt(_sum_of_squares(along) / max(int(free.sum()), 1))
        settled = offset <= near * np.sqrt(_sum_of_squares(spread) / freedom) or relative <= _STEP
        if settled and (relative <= tolerance or last * 0.9 < relative < 1e-7):
            return here, True  # steps no longer shrink: rounding is reached
        for halving in range(14):
            trial = problem.inside(here + step / 2**halving)
            trial_residuals = problem.at(trial)
            if (trial_cost := _sum_of_squares(trial_residuals)) <= cost * (1 + 1e-12):
                break
        else:
            return here, bool(settled)
        here, residuals, cost, last = trial, trial_residuals, trial_cost, relative
    return here, bool(settled)


def summary(
    problem: Problem, parameters: FloatArray, converged: bool, kind: CovarianceKind
) -> LeastSquaresFit:
    """Covariance and flags at ``parameters``: inverse of J'J by singular values of the scaled Jacobian."""
    residuals, slopes = problem.at(parameters), problem.slopes(parameters, fine=True)
    sum_of_squares = _sum_of_squares(residuals)
    count = parameters.size
    at_bound = _held(problem, parameters, slopes, residuals)
    free = np.flatnonzero(~at_bound)
    freedom = residuals.size - free.size
    covariance, full = np.diag(np.full(count, np.inf)), np.zeros((count, count))
    determined = np.zeros(count, dtype=bool)
    condition = 1.0
    if free.size and np.isfinite(slopes).all():
        length = np.sqrt(np.einsum("ij,ij->j", slopes[:, free], slopes[:, free]))
        length = np.where(length > 0, length, 1.0)
        _, singular, right = np.linalg.svd(slopes[:, free] / length, full_matrices=False)
        known = singular > _SINGULAR * singular[0] if singular[0] > 0 else np.zeros(singular.size, dtype=bool)
        condition = float(singular[0] / singular[-1]) if singular[-1] > 0 else np.inf
        # A parameter is determined if it has no part in a direction that moves no residual.
        silent = np.sum(right[~known] ** 2, axis=0)
        determined[free] = silent < 1e-8
        inverse = (right[known].T / singular[known] ** 2) @ right[known] / np.outer(length, length)
        variance = 1.0 if kind == "absolute" else sum_of_squares / max(freedom, 1)
        both = np.outer(determined, determined)
        full[np.ix_(free, free)] = inverse * variance
        covariance = np.where(both, full, covariance)
    return LeastSquaresFit(
        parameters=np.array(parameters, dtype=float),
        covariance=covariance,
        covariance_inside=full,
        residuals=residuals,
        sum_of_squares=sum_of_squares,
        degrees_of_freedom=freedom,
        determined=determined,
        at_bound=at_bound,
        condition_number=condition,
        converged=bool(converged and np.isfinite(sum_of_squares)),
    )


def null_directions(problem: Problem, fit: LeastSquaresFit) -> FloatArray:
    """Directions from the minimum in which no residual changes, shape (directions, parameters); parameters at a bound
    stay.
    """
    free = np.flatnonzero(~fit.at_bound)
    slopes = problem.slopes(fit.parameters, fine=True)[:, free]
    length = np.sqrt(np.einsum("ij,ij->j", slopes, slopes))
    length = np.where(length > 0, length, 1.0)
    directions = np.zeros((0, fit.parameters.size))
    if free.size and np.isfinite(slopes).all():
        _, singular, right = np.linalg.svd(slopes / length)
        padded = np.concatenate((singular, np.zeros(free.size - singular.size)))
        silent = right[padded <= _SINGULAR * padded[0]] / length
        directions = np.zeros((silent.shape[0], fit.parameters.size))
        directions[:, free] = silent
    return directions


def solve(
    problem: Problem, starts: Sequence[FloatArray], *, covariance: CovarianceKind = "residual"
) -> LeastSquaresFit:
    """The best of the minima reached from ``starts``; of equal ones, the one nearest the first start."""
    fits: list[LeastSquaresFit] = []
    for start in starts:
        point, converged = polish(problem, walk(problem, np.asarray(start, dtype=float)))
        fits.append(summary(problem, point, converged, covariance))
    return replace(best_of(fits, np.asarray(starts[0], dtype=float)), starts_tried=len(fits))


def best_of(fits: Sequence[LeastSquaresFit], start: FloatArray) -> LeastSquaresFit:
    """Lowest sum of squares; among equal ones (terms exchanged) the converged one nearest to ``start``."""
    least = min(fit.sum_of_squares for fit in fits)
    equal = [fit for fit in fits if fit.sum_of_squares <= least * (1 + 1e-7)]

    def distance(fit: LeastSquaresFit) -> tuple[bool, float]:
        size = np.where(start != 0, np.abs(start), 1.0)
        apart = np.arcsinh(1e3 * fit.parameters / size) - np.arcsinh(1e3 * start / size)
        return not fit.converged, float(apart @ apart)

    return min(equal, key=distance)


def fit_function(
    function: Function,
    x: FloatArray,
    y: FloatArray,
    start: Sequence[float] | FloatArray,
    weights: FloatArray | None = None,
    *,
    lower: Sequence[float] | FloatArray | None = None,
    upper: Sequence[float] | FloatArray | None = None,
    covariance: CovarianceKind = "residual",
    search: bool = True,
) -> LeastSquaresFit:
    """Fit ``y = function(x, parameters)`` by weighted least squares.

    Parameters
    ----------
    function : callable
        ``function(x, parameters)`` gives an array like ``y``; ``parameters`` is a float array, shape (parameters,).
        It may give NaN or infinity where it has no value; such points are avoided.
    x : float array
        Passed on as it is: any shape that the function takes, e.g. (points,) or (predictors, points).
    y : float array, shape (points,)
        In extended precision (``numpy.longdouble``) the residuals are formed in extended precision, if x is too.
    start : sequence of float, shape (parameters,)
    weights : float array, shape (points,), optional
        Weight of each squared residual, 1/u^2 for a point with standard uncertainty u. All 1 where None.
    lower, upper : sequence of float, shape (parameters,), optional
        Bounds; none where None.
    covariance : "residual" or "absolute"
        Whether the covariance is scaled by the residual variance, or the weights are 1/u^2 and taken at their word.
    search : bool
        Whether other starts are tried where the given one ends badly.

    Returns
    -------
    LeastSquaresFit

    Raises
    ------
    InputError
        If shapes do not agree, a number is not finite, there are too few points, or no start gives finite values.

    Examples
    --------
    >>> x = np.array([0.0, 1.0, 2.0, 3.0])
    >>> fit = fit_function(lambda x, p: p[0] * np.exp(-p[1] * x), x, 3 * np.exp(-0.5 * x), [1.0, 1.0])
    >>> np.round(fit.parameters, 6).tolist()
    [3.0, 0.5]
    """
    y, first, root = _checked(y, start, weights)
    low = np.full(first.size, -np.inf) if lower is None else np.asarray(lower, dtype=float)
    high = np.full(first.size, np.inf) if upper is None else np.asarray(upper, dtype=float)
    if low.shape != first.shape or high.shape != first.shape or not (low < high).all():
        raise InputError("each parameter needs a lower bound below its upper bound", where="lower, upper")

    with np.errstate(all="ignore"):
        shape = np.shape(function(x, first.copy()))
    if shape not in (y.shape, (1,), ()):
        raise InputError(f"it gives an array of shape {shape}, expected {y.shape} like y", where="function")

    def residuals(parameters: FloatArray) -> FloatArray:
        # The difference is taken in the precision of the data: where the function meets them to ten digits, double
        # precision leaves too few for the residual.
        return np.asarray(root * np.broadcast_to(function(x, parameters) - y, y.shape), dtype=float)

    least = 1e-8 * np.where(first != 0, np.abs(first), 1.0)
    problem = Problem(residuals=residuals, lower=low, upper=high, least=least)
    fit = solve(problem, [first], covariance=covariance)
    spread = _sum_of_squares(root * (y - np.average(y, weights=root**2)).astype(float))
    if search and not (fit.sound and fit.sum_of_squares < 0.5 * spread):
        from shpb.fitting.starts import other_starts

        others = other_starts(problem, first)
        fits = [fit, *(solve(problem, [one], covariance=covariance) for one in others)]
        fit = replace(best_of(fits, first), starts_tried=len(fits))
    if not np.isfinite(fit.sum_of_squares):
        raise InputError(
            f"the function gives no finite values at the start {first.tolist()} nor near it",
            where="start",
            mend="Start where the function has a value at every point",
        )
    return fit


def _checked(
    y: FloatArray, start: Sequence[float] | FloatArray, weights: FloatArray | None
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Data, start, and roots of the weights, after the guards."""
    y = np.asarray(y)
    y = y if y.dtype == np.longdouble else y.astype(float)
    first = np.atleast_1d(np.asarray(start, dtype=float))
    weight = np.ones(y.shape) if weights is None else np.asarray(weights, dtype=float)
    if y.ndim != 1 or weight.shape != y.shape or first.ndim != 1:
        raise InputError(
            f"y of shape {y.shape}, weights of shape {weight.shape} and start of shape {first.shape} do not belong "
            "together",
            where="fit_function",
            mend="Give y and weights of shape (points,) and start of shape (parameters,)",
        )
    for name, values in (("y", y), ("start", first), ("weights", weight)):
        if not np.isfinite(values).all():
            raise InputError(f"entry {np.flatnonzero(~np.isfinite(values))[0]} is not finite", where=name)
    if (weight < 0).any():
        raise InputError(f"the least is {weight.min():g}, expected 0 or more", where="weights")
    if np.count_nonzero(weight) <= first.size:
        raise InputError(
            f"{np.count_nonzero(weight)} points cannot determine {first.size} parameters and their uncertainty",
            where="y",
            mend=f"Give at least {first.size + 1} points or fix parameters",
        )
    return y, first, np.sqrt(weight)
