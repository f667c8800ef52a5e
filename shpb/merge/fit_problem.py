"""The least-squares problem of a law and its points: search variables, residuals, slopes.

Variables are the free parameters in units of their usual size (logarithms where a parameter spans orders of
magnitude), then one relative scale error d for each shared error:

    own residual     (measured - (1 + sum of d) law) / own uncertainty
    shared residual  d / its relative uncertainty u, times 1 + (d / 3 u)^8

The last factor is 1 for any likely scale error and a wall from three times its uncertainty on: beyond that it is not
the rig that is off, but the law. Where own errors go along a curve (``FlowPoints.own_correlation``), the own residuals
of each condition are combined to ones that are independent, by the inverse root of their correlation.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.fitting.derivatives import differences, forward_differences
from shpb.fitting.least_squares import LeastSquaresFit, Problem, polish, summary, walk
from shpb.merge.adiabatic import PathsOfPoints
from shpb.merge.models.model import Model
from shpb.merge.points import FlowPoints

_LEAST = 1e-3  # of its usual size, for which a parameter's step is chosen where it is smaller
_TOLERANCE = 1e-10  # of the variables, to which the last steps go where they still get shorter
_NEARLY = 1e-2  # relative offset: in units of the parameters' own uncertainty
_ROUGHLY, _FEW = 1e-6, 20
_FLAT = 1e-10
_SAME_WIDTH = 1e-4
_STEEP = 8
WALL = 3.0
_EVALUATIONS, _STEPS = 100, 25
_SCATTERED, _TRIED = 60, 3
_SEED = 1983


class FitProblem:
    """Residuals of a law at points, with some parameters held.

    Parameters
    ----------
    model : Model
    points : FlowPoints
    base : float array, shape (parameters,)
        Values of the held parameters, and a start for the free ones.
    free : bool array, shape (parameters,)
    widened : float
        Factor on the own uncertainties.
    """

    def __init__(
        self, model: Model, points: FlowPoints, base: FloatArray, free: BoolArray, widened: float = 1.0
    ) -> None:
        self.model, self.points, self.base, self.free = model, points, base, free
        self.widened, self.u_own_pa = widened, widened * points.u_own_pa
        self.members = np.array([e.members for e in points.shared], dtype=float).reshape(-1, len(points))
        self.prior_u = np.array([e.relative_u for e in points.shared])
        self.by_ratio = np.array([p.by_ratio for p in model.parameters])[free]
        self.sizes = np.where(self.by_ratio, 1.0, model.sizes(points)[free])
        self._paths = PathsOfPoints(model, points)
        self._apart = _Apart(points)
        low, high = self._inward(model.lower[free]), self._inward(model.upper[free])
        no_bound = np.full(self.prior_u.size, np.inf)
        self.problem = Problem(
            residuals=self.residuals,
            lower=np.concatenate((low, -no_bound)),
            upper=np.concatenate((high, no_bound)),
            least=np.concatenate((np.full(self.count, _LEAST), self.prior_u)),
            jacobian=self.slopes,
        )

    @property
    def count(self) -> int:
        """Number of free parameters."""
        return int(self.free.sum())

    def _inward(self, values: FloatArray) -> FloatArray:
        ratio = np.where(self.by_ratio, np.maximum(values, 1e-300), 1.0)
        return np.where(self.by_ratio, np.log(ratio), values / self.sizes)

    def variables(self, parameters: FloatArray, errors: FloatArray | None = None) -> FloatArray:
        """Search variables of full parameters and scale errors (none where None); shape (variables,)."""
        scale_errors = np.zeros(self.prior_u.size) if errors is None else errors
        return np.concatenate((self._inward(np.asarray(parameters)[self.free]), scale_errors))

    def parameters(self, variables: FloatArray) -> FloatArray:
        """Full parameters of search variables, shape (parameters,)."""
        inner = variables[: self.count]
        full = self.base.copy()
        full[self.free] = np.where(
            self.by_ratio, np.exp(np.where(self.by_ratio, inner, 0.0)), inner * self.sizes
        )
        return full

    def per_variable(self, variables: FloatArray) -> FloatArray:
        """D parameter/d variable of the free ones, shape (free parameters,)."""
        return np.where(self.by_ratio, self.parameters(variables)[self.free], self.sizes)

    def law_pa(self, variables: FloatArray) -> FloatArray:
        """Stress of the law at the points [Pa], without scale errors."""
        return self._paths.stress_pa(self.parameters(variables))

    def temperature_k(self, variables: FloatArray) -> FloatArray:
        """Temperature at the points [K]."""
        return self._paths.temperature_k(self.parameters(variables))

    def factors(self, variables: FloatArray) -> FloatArray:
        """1 + sum of the scale errors of each point, shape (points,)."""
        return np.asarray(1.0 + variables[self.count :] @ self.members)

    def residuals(self, variables: FloatArray) -> FloatArray:
        """Own residuals, then those of the scale errors, shape (points + shared,)."""
        law = self.law_pa(variables) * self.factors(variables)
        own = self._apart((self.points.stress_pa - law) / self.u_own_pa)
        pulls = variables[self.count :] / self.prior_u
        return np.concatenate((own, pulls * (1 + (pulls / WALL) ** _STEEP)))

    def plain_slopes(self, variables: FloatArray, fine: bool) -> FloatArray:
        """Jacobian without the wall, for the covariance: the scale errors are known as well as they state."""
        slopes = self.slopes(variables, fine)
        slopes[len(self.points) :, self.count :] = np.diag(1 / self.prior_u)
        return slopes

    def slopes(self, variables: FloatArray, fine: bool) -> FloatArray:
        """Jacobian of the residuals, shape (points + shared, variables)."""
        errors = variables[self.count :]
        low, high = self.problem.lower[: self.count], self.problem.upper[: self.count]

        def law(inner: FloatArray) -> FloatArray:
            return self.law_pa(np.concatenate((inner, errors)))

        inner = variables[: self.count]
        here = law(inner)
        if fine:
            by_parameter = differences(law, inner, low, high, fine=True, least=_LEAST)
        else:
            by_parameter = forward_differences(law, inner, here, high, least=_LEAST)
        weight = self.factors(variables) / self.u_own_pa
        by_error = -(self.members * (here / self.u_own_pa)).T
        top = self._apart(np.hstack((-by_parameter * weight[:, None], by_error)))
        by_pull = 1 + (_STEEP + 1) * (errors / self.prior_u / WALL) ** _STEEP
        below = np.hstack((np.zeros((self.prior_u.size, self.count)), np.diag(by_pull / self.prior_u)))
        return np.vstack((top, below))

    def chi2(self, variables: FloatArray) -> float:
        """Sum of squares over the stated uncertainties, own and shared."""
        own = self.residuals(variables)[: len(self.points)] * self.widened
        pulls = variables[self.count :] / self.prior_u
        return float(own @ own + pulls @ pulls)

    def freedom(self, fit: LeastSquaresFit) -> int:
        """Degrees of freedom: points less the parameters that were free to move."""
        return len(self.points) - self.count + int(fit.at_bound[: self.count].sum())

    def pull(self, variables: FloatArray) -> float:
        """Root mean square of the scale errors over their stated uncertainties; 0 where there are none."""
        pulls = variables[self.count :] / self.prior_u
        return float(np.sqrt(np.mean(pulls**2))) if pulls.size else 0.0

    def widened_for(self, variables: FloatArray) -> FitProblem | None:
        """The problem with own uncertainties as wide as the scatter (Birge ratio, never below 1); None if they are."""
        own = self.residuals(variables)[: len(self.points)]
        freedom = max(len(self.points) - self.count, 1)
        wider = max(1.0, self.widened * float(np.sqrt(own @ own / freedom)))
        if not np.isfinite(wider) or abs(wider / self.widened - 1) < _SAME_WIDTH:
            return None
        return FitProblem(self.model, self.points, self.base, self.free, wider)

    def solve(self, first: FloatArray) -> LeastSquaresFit:
        """Fit from variables ``first``; seeded other starts around them where that ends badly."""
        best = self.from_(first)
        if best.sound:
            return best
        random = np.random.default_rng(_SEED)
        near = np.maximum(np.abs(first[: self.count]), 0.1)
        moved = np.tile(first, (_SCATTERED, 1))
        moved[:, : self.count] += near * random.normal(0.0, 0.4, (_SCATTERED, self.count))
        moved = np.clip(moved, self.problem.lower, self.problem.upper)
        for one in sorted(moved, key=self.problem.cost)[:_TRIED]:
            other = self.from_(one)
            if (other.sum_of_squares, not other.sound) < (best.sum_of_squares * (1 - 1e-6), not best.sound):
                best = other
        return best

    def again(self, variables: FloatArray) -> LeastSquaresFit:
        """Fit from variables that are near the minimum: no walk unless the short way fails."""
        fit = self._polished(variables)
        return fit if fit.converged else self.from_(variables)

    def roughly(self, variables: FloatArray) -> FloatArray:
        """Variables near the minimum, from near it: to a few hundredths of their uncertainty, in few steps."""
        return walk(self.problem, variables, evaluations=_FEW, tolerance=_ROUGHLY)

    def from_(self, variables: FloatArray) -> LeastSquaresFit:
        """Fit from any variables."""
        return self._polished(self.walked(variables))

    def walked(self, variables: FloatArray) -> FloatArray:
        """Variables near the minimum, as far as the walk from ``variables`` gets."""
        return walk(self.problem, variables, evaluations=_EVALUATIONS, tolerance=_FLAT)

    def _polished(self, variables: FloatArray) -> LeastSquaresFit:
        point, converged = polish(
            self.problem, variables, tolerance=_TOLERANCE, near=_NEARLY, most_steps=_STEPS
        )
        return summary(replace(self.problem, jacobian=self.plain_slopes), point, converged, "absolute")


class _Apart:
    """Makes own residuals independent of each other: the inverse root of their correlation, condition by condition.

    What goes along a curve is one factor on its stress, no larger than the relative uncertainty of its best point: a
    point that is less certain is so by itself. (A common error as large as each point's own would be read off their
    differences and take the fit out of its points: R. W. Peelle's puzzle.) With s each point's stress over its own
    uncertainty, by the largest of the condition, the correlation is ``c s s'`` beside the diagonal. Residuals x over
    ``sqrt(1 - c s^2)`` have the covariance I + v v' with ``v = sqrt(c) s/sqrt(1 - c s^2)``, whose inverse root is
    ``x - v (v'x) k/(v'v)``, ``k = 1 - 1/sqrt(1 + v'v)``: no matrix is needed.
    """

    def __init__(self, points: FlowPoints) -> None:
        c = points.own_correlation
        _, self._group = np.unique(points.condition, return_inverse=True)
        count = int(self._group.max()) + 1
        share = points.stress_pa / points.u_own_pa
        best = np.zeros(count)
        np.maximum.at(best, self._group, share)
        share = share / best[self._group]
        self._root = np.sqrt(1 - c * share**2)
        self._along = np.sqrt(c) * share / self._root
        square = np.bincount(self._group, self._along**2, count)
        self._part = np.divide(1 - 1 / np.sqrt(1 + square), square, out=np.zeros(count), where=square > 0)
        self._needed = c > 0

    def __call__(self, values: FloatArray) -> FloatArray:
        """Of residuals, shape (points,), or of their slopes, shape (points, variables)."""
        if not self._needed:
            return values
        scaled = (values.T / self._root).T
        sums = np.zeros((self._part.size, *values.shape[1:]))
        np.add.at(sums, self._group, (scaled.T * self._along).T)
        common = (sums.T * self._part).T
        return np.asarray(scaled - (common[self._group].T * self._along).T)
