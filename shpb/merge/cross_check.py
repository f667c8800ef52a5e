"""How far a fitted law can be trusted: each condition left out and predicted, residuals, information criterion."""

from __future__ import annotations

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.merge.fit_problem import FitProblem
from shpb.merge.model_fit import ConditionResidual
from shpb.merge.models.model import Model
from shpb.merge.points import FlowPoints

_ONE_RATE = 1.5  # ratio of rates below which they count as one
_ONE_TEMPERATURE_K = 10.0


def varied(points: FlowPoints) -> set[str]:
    """What varies in the points: "rates", "temperatures"."""
    rates, starts = points.mean_rates_per_s(), points.start_temperatures_k()
    found = set()
    if rates.max() >= _ONE_RATE * rates.min():
        found.add("rates")
    if np.ptp(starts) > _ONE_TEMPERATURE_K:
        found.add("temperatures")
    return found


def unknowable(model: Model, points: FlowPoints) -> BoolArray:
    """Parameters of which the points cannot tell anything, for want of rates or temperatures."""
    there = varied(points)
    return np.array([bool(p.needs) and not there & set(p.needs) for p in model.parameters])


def residuals_by_condition(
    problem: FitProblem, variables: FloatArray, *, leave_out: bool
) -> tuple[ConditionResidual, ...]:
    """Residuals of each condition, and if asked for the error of its prediction by a fit without it."""
    points = problem.points
    law = problem.law_pa(variables) * problem.factors(variables)
    relative = points.stress_pa / law - 1
    rates, starts = points.mean_rates_per_s(), points.start_temperatures_k()
    found = []
    for number, rate, start in zip(points.conditions, rates, starts, strict=True):
        of = points.of(number)
        left_out, reason = _left_out(problem, variables, of) if leave_out else (None, "not asked for")
        found.append(
            ConditionResidual(
                condition=number,
                label=points.label(number),
                rate_per_s=float(rate),
                temperature_k=float(start),
                points=int(of.sum()),
                mean=float(relative[of].mean()),
                rms=float(np.sqrt(np.mean(relative[of] ** 2))),
                longest_run=longest_run(relative[of]),
                left_out_rms=left_out,
                left_out_reason=reason,
            )
        )
    return tuple(found)


def longest_run(values: FloatArray) -> int:
    """Longest row of values of one sign."""
    longest = row = 0
    last = 0.0
    for sign in np.sign(values):
        row = row + 1 if sign == last else 1
        longest, last = max(longest, row), float(sign)
    return longest


def _left_out(problem: FitProblem, variables: FloatArray, of: BoolArray) -> tuple[float | None, str]:
    """Relative rms of the prediction of some points by a fit to the others; None with the reason."""
    points, model = problem.points, problem.model
    if of.all():
        return None, "it is the only condition"
    rest = points.select(~of)
    if len(rest) < problem.count + 1:
        return None, f"without it {len(rest)} points are left for {problem.count} parameters"
    lost = [
        name for name, gone in zip(model.names, unknowable(model, rest) & problem.free, strict=True) if gone
    ]
    if lost:
        return None, f"without it the points cannot tell {', '.join(lost)}"
    without = FitProblem(model, rest, problem.base, problem.free, problem.widened)
    kept = [k for k, error in enumerate(points.shared) if error.members[~of].any()]
    # Each problem has units of its own: what passes between them are parameters.
    near = without.variables(problem.parameters(variables), variables[problem.count :][kept])
    found = without.roughly(near)
    if not np.isfinite(without.problem.cost(found)):
        return None, "the fit without it finds no finite stress"
    errors = np.zeros(len(points.shared))
    errors[kept] = found[without.count :]
    predicted = problem.variables(without.parameters(found), errors)
    law = problem.law_pa(predicted) * problem.factors(predicted)
    with np.errstate(all="ignore"):
        off = float(np.sqrt(np.mean((points.stress_pa[of] / law[of] - 1) ** 2)))
    return (off, "") if np.isfinite(off) else (None, "the fit without it has no value there")


def overall(conditions: tuple[ConditionResidual, ...]) -> float | None:
    """Relative rms over all points of the conditions that could be left out; None if none could."""
    known = [(c.points, c.left_out_rms) for c in conditions if c.left_out_rms is not None]
    if not known:
        return None
    return float(np.sqrt(sum(n * rms**2 for n, rms in known) / sum(n for n, _ in known)))


def corrected_akaike(chi2: float, points: int, parameters: int) -> float | None:
    """Corrected Akaike information criterion for least squares with a variance that is fitted too.

    ``n ln(chi2/n) + 2 k + 2 k (k + 1)/(n - k - 1)``, k the parameters and the variance. None where n is too small
    or there is no residual at all.

    References
    ----------
    C. M. Hurvich, C.-L. Tsai, Biometrika 76 (1989) 297-307; K. P. Burnham, D. R. Anderson, Model Selection and
    Multimodel Inference, 2nd ed. (2002), sect. 2.4.
    """
    k = parameters + 1
    if points - k - 1 <= 0 or chi2 <= 0:
        return None
    return float(points * np.log(chi2 / points) + 2 * k + 2 * k * (k + 1) / (points - k - 1))
