"""Straight lines through points whose errors are partly common: generalised least squares, with intervals."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError

# A stated standard uncertainty is itself known to about 25 %: as good as eight degrees of freedom
# (JCGM 100:2008, G.4.2, equation G.3).
_STATED_FREEDOM = 8
_DOUBT = 0.05  # chance below which the scatter contradicts the stated uncertainties


@dataclass(frozen=True, slots=True, kw_only=True)
class Estimate:
    """A number read off a fit.

    Attributes
    ----------
    value, u : float
        Best estimate and standard uncertainty, in SI.
    interval : (float, float)
        95 % interval of Student's distribution.
    freedom : int
        Its degrees of freedom, see :attr:`Fit.interval_freedom`.
    """

    value: float
    u: float
    interval: tuple[float, float]
    freedom: int

    def scaled(self, factor: float) -> Estimate:
        """The same in another unit."""
        ends = sorted((self.interval[0] * factor, self.interval[1] * factor))
        return Estimate(
            value=self.value * factor,
            u=self.u * abs(factor),
            interval=(ends[0], ends[1]),
            freedom=self.freedom,
        )


class Fit(NamedTuple):
    """A linear fit.

    Attributes
    ----------
    coefficients : float array, shape (p,)
        Best estimates.
    covariance : float array, shape (p, p)
        Of the coefficients: from the stated uncertainties, made larger where the points scatter more than these
        say (factor chi2/freedom, R. T. Birge, Phys. Rev. 40 (1932) 207), never smaller.
    chi2 : float
        Weighted sum of squared residuals.
    freedom : int
        Points less coefficients.
    """

    coefficients: FloatArray
    covariance: FloatArray
    chi2: float
    freedom: int

    @property
    def contradicted(self) -> bool:
        """Whether the points scatter more than the stated uncertainties allow (5 %)."""
        if self.freedom < 1:
            return False
        from scipy.special import chdtrc

        return float(chdtrc(self.freedom, self.chi2)) < _DOUBT

    @property
    def interval_freedom(self) -> int:
        """Degrees of freedom of the intervals.

        Where the stated uncertainties explain the scatter they count, with the eight degrees of freedom that
        such statements are worth; where they do not, the scatter alone tells.
        """
        return self.freedom if self.contradicted else self.freedom + _STATED_FREEDOM

    def estimate(self, gradient: FloatArray, value: float) -> Estimate:
        """Estimate of a quantity with that value and that gradient over the coefficients."""
        from scipy.special import stdtrit

        u = math.sqrt(max(float(gradient @ self.covariance @ gradient), 0.0))
        freedom = self.interval_freedom
        half = float(stdtrit(freedom, 0.975)) * u
        return Estimate(value=value, u=u, interval=(value - half, value + half), freedom=freedom)


def common_covariance(own: FloatArray, shared: Sequence[Mapping[str, float]]) -> FloatArray:
    """Covariance of points with errors of their own and errors shared in groups, shape (points, points).

    Parameters
    ----------
    own : float array, shape (points,)
        Standard uncertainty that each point has alone.
    shared : sequence of mapping
        Per point, standard uncertainty by name of the group that it shares with all points of that name.
    """
    covariance = np.diag(np.asarray(own, dtype=np.float64) ** 2)
    for name in sorted({name for groups in shared for name in groups}):
        part = np.array([groups.get(name, 0.0) for groups in shared])
        covariance += np.outer(part, part)
    return covariance


def fitted(design: FloatArray, values: FloatArray, covariance: FloatArray) -> Fit:
    """Generalised least squares (A. C. Aitken, Proc. R. Soc. Edinb. 55 (1936) 42).

    Parameters
    ----------
    design : float array, shape (points, p)
        Column per coefficient.
    values : float array, shape (points,)
        What is fitted.
    covariance : float array, shape (points, points)
        Of the values.

    Raises
    ------
    InputError
        If there are fewer points than coefficients, or the points do not tell the coefficients apart.
    """
    points, size = design.shape
    if points < size:
        raise InputError(f"{points} points for {size} coefficients", where="fit", mend="Give more points")
    root = np.linalg.cholesky(covariance)
    a, y = np.linalg.solve(root, design), np.linalg.solve(root, values)
    lengths = np.linalg.norm(a, axis=0)
    if not lengths.all() or np.linalg.matrix_rank(a / lengths, tol=1e-9) < size:
        raise InputError(
            "the points do not tell the coefficients apart", where="fit", mend="Give points at more places"
        )
    q, r = np.linalg.qr(a)
    inverse = np.linalg.inv(r)
    coefficients = inverse @ (q.T @ y)
    rest = y - a @ coefficients
    chi2, freedom = float(rest @ rest), points - size
    birge = max(1.0, chi2 / freedom) if freedom else 1.0
    return Fit(coefficients, inverse @ inverse.T * birge, chi2, freedom)
