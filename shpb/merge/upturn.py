"""Whether the flow stress turns up at high rates, and whether that is the material.

Near 1000 /s inertia and friction raise the measured stress and heating lowers it, so an upturn there is only
believed if it is larger than what these could have done.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.fitting.weighted_line import Estimate, Fit, fitted
from shpb.merge.sensitivity import RatePoint, relative_covariance

USUAL_BREAK_PER_S = 1000.0
_SEARCHED = (200.0, 5000.0)
_STEPS = 41
_LEVEL = 0.05
_NOTHING = 1e-9  # improvement of chi2 that is rounding


class UpturnOutcome(StrEnum):
    """What the points say."""

    NONE = "no upturn"  # a straight line does
    DOWNTURN = "downturn"
    WITHIN = "upturn within the allowance"
    REAL = "upturn"
    UNDECIDED = "cannot be decided"


@dataclass(frozen=True, slots=True, kw_only=True)
class Upturn:
    """Test for a break of ln(stress) over ln(rate).

    Attributes
    ----------
    outcome : UpturnOutcome
        What the points say.
    reason : str
        In words.
    break_per_s : float or None
        Rate of the break [1/s].
    searched : bool
        Whether it was searched for; that costs a degree of freedom.
    exponent_below, exponent_above : Estimate or None
        m on either side.
    rise : Estimate or None
        Relative rise at the highest rate above the line of the lower rates.
    f_value, p_value : float or None
        F-test of the break against one straight line; infinite F where the broken line is exact.
    allowance : float
        Relative rise that could be something else than the material.
    """

    outcome: UpturnOutcome
    reason: str
    break_per_s: float | None = None
    searched: bool = False
    exponent_below: Estimate | None = None
    exponent_above: Estimate | None = None
    rise: Estimate | None = None
    f_value: float | None = None
    p_value: float | None = None
    allowance: float = 0.0


def upturn(
    points: Sequence[RatePoint],
    *,
    break_per_s: float | None = USUAL_BREAK_PER_S,
    allowances: Mapping[str, float] | None = None,
) -> Upturn:
    """Test for an upturn at high rates.

    ln(stress) = a + m ln(rate) + d max(0, ln(rate/break)), by generalised least squares with shared errors as
    common terms, against the same without d: F-test at 5 %, and the 95 % interval of the rise at the highest rate
    must leave zero. The rise is the material's only if the lower end of its interval is above the sum of the
    allowances.

    Parameters
    ----------
    points : sequence of RatePoint
        At one plastic strain and temperature.
    break_per_s : float or None
        Rate of the break; None searches between 200 and 5000 /s.
    allowances : mapping of str to float, optional
        Relative rise of the measured stress at the highest rate that each other cause may account for, such as
        inertia, friction, or heating (which lowers the stress of the highest rates, so that leaving it out hides
        an upturn: it counts with its sign). The sum counts, not below zero.

    Raises
    ------
    InputError
        If an allowance is no relative number.

    References
    ----------
    P. S. Follansbee, G. T. Gray, Mater. Sci. Eng. A 138 (1991): the upturn of copper above 1000 /s. From memory.
    """
    allowances = dict(allowances or {})
    for name, share in allowances.items():
        if not -1 < share < 1:
            raise InputError(
                f"an allowance of {share}",
                where=f"upturn, {name}",
                mend="Give it relative to the stress: 0.02 is 2 %",
            )
    allowance = max(0.0, sum(allowances.values()))
    points = sorted(points, key=lambda p: p.rate_per_s)
    candidates = _candidates(points, break_per_s)
    extra = 1 if break_per_s is not None else 2
    if len(points) - 2 - extra < 1 or not candidates:
        return Upturn(
            outcome=UpturnOutcome.UNDECIDED,
            reason=_why_not(points, extra, candidates, break_per_s),
            allowance=allowance,
            searched=break_per_s is None,
        )
    log_rate = np.log([p.rate_per_s for p in points])
    values = np.log([p.stress_pa for p in points])
    covariance = relative_covariance(points)
    one = fitted(np.column_stack((np.ones(values.size), log_rate)), values, covariance)
    broken = [(_fit_broken(log_rate, values, covariance, rate), rate) for rate in candidates]
    best, place = min(broken, key=lambda found: found[0].chi2)
    f_value, p_value = _f_test(one, best, extra, values.size)
    reach = float(log_rate[-1]) - math.log(place)
    bend = float(best.coefficients[2])
    rise = best.estimate(np.array([0.0, 0.0, reach * math.exp(bend * reach)]), math.expm1(bend * reach))
    below = best.estimate(np.array([0.0, 1.0, 0.0]), float(best.coefficients[1]))
    above = best.estimate(np.array([0.0, 1.0, 1.0]), float(best.coefficients[1] + bend))
    outcome, reason = _outcome(rise, p_value, allowance, points[-1].rate_per_s)
    return Upturn(
        outcome=outcome,
        reason=reason,
        break_per_s=place,
        searched=break_per_s is None,
        exponent_below=below,
        exponent_above=above,
        rise=rise,
        f_value=f_value,
        p_value=p_value,
        allowance=allowance,
    )


def _candidates(points: Sequence[RatePoint], break_per_s: float | None) -> list[float]:
    """Rates of a break with two different rates below it and one above."""
    rates = sorted({round(math.log(p.rate_per_s), 2) for p in points})
    if len(rates) < 3:
        return []
    asked = [break_per_s] if break_per_s is not None else list(np.geomspace(*_SEARCHED, _STEPS))
    return [float(r) for r in asked if rates[1] < math.log(r) + 0.01 and math.log(r) < rates[-1] - 0.05]


def _why_not(
    points: Sequence[RatePoint], extra: int, candidates: list[float], break_per_s: float | None
) -> str:
    if not candidates:
        where = "the searched rates" if break_per_s is None else f"{break_per_s:g} /s"
        return f"it takes two rates below {where} and one above"
    return f"{len(points)} points are too few: a broken line needs {3 + extra} at least"


def _fit_broken(log_rate: FloatArray, values: FloatArray, covariance: FloatArray, rate: float) -> Fit:
    bend = np.maximum(0.0, log_rate - math.log(rate))
    return fitted(np.column_stack((np.ones(values.size), log_rate, bend)), values, covariance)


def _f_test(one: Fit, broken: Fit, extra: int, points: int) -> tuple[float, float]:
    """F of the break, and the chance of one as large where there is none."""
    from scipy.special import fdtrc

    freedom = points - 2 - extra
    gained = one.chi2 - broken.chi2
    if gained <= _NOTHING:
        return 0.0, 1.0
    if broken.chi2 <= _NOTHING * gained:
        return math.inf, 0.0
    f_value = gained / extra / (broken.chi2 / freedom)
    return f_value, float(fdtrc(extra, freedom, f_value))


def _outcome(rise: Estimate, p_value: float, allowance: float, rate: float) -> tuple[UpturnOutcome, str]:
    low, high = rise.interval
    size = (
        f"{100 * rise.value:+.1f} % at {rate:.3g} /s (95 % interval {100 * low:+.1f} to {100 * high:+.1f} %)"
    )
    if p_value >= _LEVEL or low <= 0 <= high:
        return UpturnOutcome.NONE, f"a straight line describes the points; the break would be {size}"
    if high < 0:
        return UpturnOutcome.DOWNTURN, f"the stress lies below the line of the lower rates: {size}"
    if low <= allowance:
        return (
            UpturnOutcome.WITHIN,
            f"the stress turns up, {size}, but {100 * allowance:.1f} % could be inertia, friction or heating",
        )
    return (
        UpturnOutcome.REAL,
        f"the stress turns up, {size}: more than the {100 * allowance:.1f} % allowed for other causes",
    )
