"""Maximum-likelihood fit of one smooth front to noisy samples: nothing, a rise, then a straight line.

Under white Gaussian noise the most likely front is the one of least squares. Noise of a fifth of the
front moves a straight line laid through part of the rise by many samples; a shape that also has to be
zero before the front and level off after it is held from both sides. What the shape lacks of a real
front is stated as a share of its height (``LACK_*``) and counts as noise that is alike for an eighth of
the rise: in a clean record the rise itself then decides, not the ringing or the hardening after it.

The rise is C(x) = (1 - cos(pi x^1.5))/2 for 0 <= x <= 1: a long toe and a short shoulder, as dispersion
and the yielding of a specimen make them.

References
----------
Least squares as maximum likelihood, and prior knowledge as further observations: A. Gelman et al.,
*Bayesian Data Analysis*, 3rd ed., ch. 14. Damped steps: D. W. Marquardt, J. SIAM 11 (1963) 431.
Propagation of the noise: JCGM 100:2008, 5.1.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, dot

# Of the shape, in units of its rise: where it is steepest; that slope in heights per rise; and where the
# least-squares line through 10 to 60 % of the height it has where the slope is a quarter of the steepest,
# carried on, meets zero.
STEEPEST_AT, STEEPEST, TANGENT_FOOT = 0.6791, 1.9077, 0.3044

# Standard deviation of what the shape lacks, as shares of the height: before, on and after the rise.
LACK_BEFORE, LACK_ON_RISE, LACK_AFTER = 0.01, 0.03, 0.10
_ALIKE = 8.0  # the lack is alike over this part of the rise
# Prior knowledge, each worth one observation: the rise within a factor 1.8 of the usual one, and the line
# after it climbing or falling by no more than about half the height within another rise.
_SPREAD_OF_RISE = 0.6  # standard deviation of its logarithm
_SPREAD_OF_SLOPE = 0.5  # heights per rise

# The line is gentler than the rise as a whole; without this, a straight front could pass for the line
# after a tiny one.
_STEEPEST_AFTER = 1.0  # heights per rise

_LEAST_RISE = 2.0  # values
_NEVER_NIL = 1e-200  # a parameter that nothing depends on stays as it is
_COARSE = 32  # blocks of the search


class Front(NamedTuple):
    """A front: zero until ``start``, ``height`` C over ``rise``, then a line. Times in samples."""

    start: float
    rise: float
    height: float
    slope: float  # of the line after the rise, per rise

    @property
    def foot(self) -> float:
        """Foot of the tangent to the rise."""
        return self.start + TANGENT_FOOT * self.rise


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FittedFront:
    """The most likely front.

    Attributes
    ----------
    front : Front
        Its parameters.
    curve : float array, shape (samples,)
        The front at the samples.
    foot_by_sample : float array, shape (samples,)
        Derivative of the foot with respect to each sample.
    """

    front: Front
    curve: FloatArray
    foot_by_sample: FloatArray


def fit_front(
    time: FloatArray, values: FloatArray, noise: float, first_guess: Front, usual_rise: float
) -> FittedFront | None:
    """Fit a front.

    Parameters
    ----------
    time : float array, shape (samples,)
        Evenly spaced, in samples of the record.
    values : float array, shape (samples,)
        The trace, loading-positive, from before the front to a little beyond its rise.
    noise : float
        Standard deviation of one value.
    first_guess : Front
        Where to search: a third to three halves of its rise, and six tenths of it sooner or later.
    usual_rise : float
        What fronts usually take to rise, in samples of the record.

    Returns
    -------
    FittedFront or None
        None where no rising front fits.
    """
    spacing = float(time[1] - time[0])
    variance = max(noise, 1e-4 * first_guess.height) ** 2
    begin = _search(time, values, variance, first_guess, usual_rise)
    if begin is None:
        return None
    alike = max(begin.rise / (_ALIKE * spacing), 1.0)
    lack = np.where(
        time < begin.start, LACK_BEFORE, np.where(time < begin.start + begin.rise, LACK_ON_RISE, LACK_AFTER)
    )
    weights = variance / (variance + alike * (lack * begin.height) ** 2)
    return _Fit(time, values, weights, variance, usual_rise).from_guess(begin)


def _search(
    time: FloatArray, values: FloatArray, variance: float, guess: Front, usual_rise: float
) -> Front | None:
    """Best of a coarse grid of starts and rises; height and slope follow from linear least squares."""
    least_rise = _LEAST_RISE * float(time[1] - time[0])
    block = max(time.size // _COARSE, 1)
    time, values = block_means(time, block), block_means(values, block)
    starts = guess.start + guess.rise * np.linspace(-0.6, 0.6, 7)
    rises = np.maximum(guess.rise * np.array([0.45, 0.7, 1.0, 1.4]), least_rise)
    start, rise = np.repeat(starts, rises.size), np.tile(rises, starts.size)
    since = (time - start[:, None]) / rise[:, None]
    within = np.minimum(np.maximum(since, 0.0), 1.0)
    on_rise = 0.5 - 0.5 * np.cos(np.pi * within * np.sqrt(within))
    after = np.maximum(since - 1.0, 0.0)
    a11, a12, a22 = (np.einsum("ij,ij->i", p, q) for p, q in ((on_rise,) * 2, (on_rise, after), (after,) * 2))
    b1, b2 = on_rise @ values, after @ values
    # The prior on the slope keeps the two apart where the window holds nothing after the rise.
    a22 = a22 + variance / (block * (_SPREAD_OF_SLOPE * guess.height) ** 2)
    determinant = np.maximum(a11 * a22 - a12**2, 1e-300)
    height, slope = (a22 * b1 - a12 * b2) / determinant, (a11 * b2 - a12 * b1) / determinant
    prior = (variance / block) * (np.log(rise / usual_rise) / _SPREAD_OF_RISE) ** 2
    rising = (height > 0) & (slope < _STEEPEST_AFTER * height)
    explained = np.where(rising, height * b1 + slope * b2 - prior, -np.inf)
    best = int(np.argmax(explained))
    if not np.isfinite(explained[best]):
        return None
    return Front(float(start[best]), float(rise[best]), float(height[best]), float(slope[best]))


@dataclass(frozen=True, slots=True, eq=False)
class _Fit:
    """Damped least squares in the four parameters of a front."""

    time: FloatArray
    values: FloatArray
    weights: FloatArray
    variance: float
    usual_rise: float

    def from_guess(self, front: Front) -> FittedFront:
        damping = 1e-2
        spacing, longest = float(self.time[1] - self.time[0]), float(self.time[-1] - self.time[0])
        curve, jacobian, cost = self._state(front)
        for _ in range(20):
            normal, gradient = self._normal(front, curve, jacobian)
            damped = normal.copy()
            damped.flat[::5] = (1.0 + damping) * normal.diagonal() + _NEVER_NIL
            step = np.linalg.solve(damped, gradient)
            trial = Front(
                front.start + float(step[0]),
                float(min(max(front.rise + step[1], _LEAST_RISE * spacing), longest)),
                front.height + float(step[2]),
                front.slope + float(step[3]),
            )
            state = self._state(trial)
            # A front that begins behind the last values, or is over before the first, is none.
            inside = trial.start < self.time[-1] - 2 * spacing and trial.start + trial.rise > self.time[1]
            if inside and trial.height > 0 and state[2] <= cost:
                front, (curve, jacobian, cost) = trial, state
                damping *= 0.2
                # A step that gained less than a tenth of one observation was shorter than a third of the
                # uncertainties, and the next will be far shorter.
                if float(gradient @ step) < 0.1 * self.variance:
                    break
            else:
                damping *= 10.0
                if damping > 1e4:
                    break
        normal, _ = self._normal(front, curve, jacobian)
        normal.flat[::5] = (1.0 + 1e-10) * normal.diagonal() + _NEVER_NIL
        # Derivatives of start and rise with respect to the samples, at the minimum.
        start, rise = np.linalg.solve(normal, np.eye(4)[:, :2]).T
        by_sample = ((start + TANGENT_FOOT * rise) @ jacobian) * self.weights
        return FittedFront(front=front, curve=curve, foot_by_sample=by_sample)

    def _state(self, front: Front) -> tuple[FloatArray, FloatArray, float]:
        """Curve, its derivatives (shape (4, samples)) and the cost."""
        start, rise, height, slope = front
        since = (self.time - start) / rise
        within = np.minimum(np.maximum(since, 0.0), 1.0)
        root = np.sqrt(within)
        phase = np.pi * within * root
        after = np.maximum(since - 1.0, 0.0)
        jacobian = np.empty((4, since.size))
        # Beyond both ends sin(phase) is nil, so the derivative is.
        jacobian[0] = (-0.75 * np.pi * height / rise) * root * np.sin(phase)
        jacobian[0] -= (slope / rise) * (after > 0.0)
        np.multiply(jacobian[0], since, out=jacobian[1])
        jacobian[2] = 0.5 - 0.5 * np.cos(phase)
        jacobian[3] = after
        curve = height * jacobian[2] + slope * after
        residual = self.values - curve
        cost = dot(residual * residual, self.weights)
        if height > 0:
            tilt, odd = self._priors(front)
            cost += self.variance * (tilt**2 + odd**2)
        return curve, jacobian, cost

    def _priors(self, front: Front) -> tuple[float, float]:
        """Slope and logarithm of the rise in standard deviations of what is known beforehand."""
        return (
            front.slope / (_SPREAD_OF_SLOPE * front.height),
            float(np.log(front.rise / self.usual_rise)) / _SPREAD_OF_RISE,
        )

    def _normal(self, front: Front, curve: FloatArray, jacobian: FloatArray) -> tuple[FloatArray, FloatArray]:
        weighted = jacobian * self.weights
        # Four rows of a few hundred samples: too short for threads.
        normal, gradient = weighted @ jacobian.T, weighted @ (self.values - curve)
        tilt, odd = self._priors(front)
        by_rise, by_slope = 1.0 / (_SPREAD_OF_RISE * front.rise), 1.0 / (_SPREAD_OF_SLOPE * front.height)
        normal[1, 1] += self.variance * by_rise**2
        normal[3, 3] += self.variance * by_slope**2
        gradient[1] -= self.variance * odd * by_rise
        gradient[3] -= self.variance * tilt * by_slope
        return normal, gradient


def block_means(values: FloatArray, block: int) -> FloatArray:
    """Means over blocks of ``block`` samples; what is left over at the end is dropped."""
    if block == 1:
        return values
    count = values.size // block
    means: FloatArray = values[: count * block].reshape(count, block).mean(axis=1)
    return means


def slopes(values: FloatArray) -> FloatArray:
    """Central differences per sample, one-sided at the ends."""
    slope = np.empty(values.size)
    np.subtract(values[2:], values[:-2], out=slope[1:-1])
    slope[1:-1] *= 0.5
    slope[0], slope[-1] = values[1] - values[0], values[-1] - values[-2]
    return slope
