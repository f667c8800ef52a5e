"""A smooth complex curve through the noisy points of a spectrum: weighted local quadratic regression.

Around each frequency a parabola is fitted to the points near by, with the weights 1/u^2 of the points times a kernel
that falls to zero at the distance h. How far h reaches is chosen by Mallows' criterion: the sum of squared residuals by
u^2 plus twice the number of coefficients that the fit spends, which estimates the error of the curve itself. A fifth
less is taken, so that noise rather than bending by the parabola is what is left.

References
----------
W. S. Cleveland, S. J. Devlin, J. Am. Stat. Assoc. 83 (1988) 596-610; C. L. Mallows, Technometrics 15 (1973) 661-675.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.arrays import ComplexArray, FloatArray

_LEAST_POINTS = 4  # under the narrowest kernel, for three coefficients
NARROWER = 0.8  # than the width of least error
_STEPS = 16  # of widths that are tried
_WIDER = 1.3  # than the chosen kernel: what tells how much that one bends


class Smoothed(NamedTuple):
    """A curve and how well it is known.

    ``u`` is that of its real and of its imaginary part alike: from the points' own, made larger by the misfit where
    that is above 1, and from what the kernel's width may have bent. ``misfit`` is the mean square of residuals by
    their expected size about the least smooth curve: 1 where the points scatter as they say.
    """

    values: ComplexArray  # shape (frequencies asked for,)
    u: FloatArray
    width: float
    misfit: float


def smoothed(x: FloatArray, points: ComplexArray, u: FloatArray, at: FloatArray) -> Smoothed:
    """Smooth curve at ``at`` through ``points`` at ``x``.

    Parameters
    ----------
    x : float array, shape (points,)
        Rising.
    points : complex array, shape (points,)
        Real and imaginary part have independent errors of one size.
    u : float array, shape (points,)
        That size.
    at : float array, shape (any,)
        Evenly spaced within ``x``.
    """
    widths = _widths(x)
    misfit = max(_misfit(x, points, u, float(widths[0])), 1e-12)
    scatter = np.sqrt(max(misfit, 1.0)) * u
    costs = [_cost(x, points, scatter, float(width)) for width in widths]
    width = max(NARROWER * float(widths[int(np.argmin(costs))]), float(widths[0]))
    rows, wider = _rows(x, u, at, width), _rows(x, u, at, _WIDER * width)
    own = (rows**2) @ scatter**2
    return Smoothed(
        rows @ points, np.sqrt(own + _bent(rows - wider, points, scatter, at, width)), width, misfit
    )


def _cost(x: FloatArray, points: ComplexArray, u: FloatArray, width: float) -> float:
    """Mallows' criterion for a complex curve: two residuals and two spent coefficients each."""
    rows = _rows(x, u, x, width)
    return float((np.abs(points - rows @ points) ** 2 / u**2).sum() + 4 * np.trace(rows))


def _misfit(x: FloatArray, points: ComplexArray, u: FloatArray, width: float) -> float:
    rows = _rows(x, u, x, width)
    rest = float((np.abs(points - rows @ points) ** 2 / u**2).sum())
    # What independent errors of the stated size would leave: sum |e|^2/u^2 = 2 tr (I - L) (I - L)^T.
    expected = 2 * float(np.sum((np.eye(x.size) - rows) ** 2 * (u[None, :] / u[:, None]) ** 2))
    return rest / expected if expected > 1e-9 else 1.0


def _bent(
    change: FloatArray, points: ComplexArray, u: FloatArray, at: FloatArray, width: float
) -> FloatArray:
    """Square of what the width may have bent, real and imaginary part alike, shape of ``at``.

    A parabola errs by the third power of the width at the ends of the range and by the fourth within, so the curve
    errs by at most what a 1.3 times wider kernel moves it: less what noise alone makes of that, averaged over half the
    width.
    """
    size = max(round(0.5 * width / float(at[1] - at[0])), 1)
    beyond = np.abs(change @ points) ** 2 / 2 - (change**2) @ u**2
    kernel = np.ones(2 * size + 1)
    mean = np.convolve(beyond, kernel)[size:-size] / np.convolve(np.ones(at.size), kernel)[size:-size]
    bent: FloatArray = np.maximum(mean, 0.0)
    return bent


def _widths(x: FloatArray) -> FloatArray:
    """From what holds enough points everywhere to twice the whole range."""
    least = max(float(np.sort(np.abs(x - place))[_LEAST_POINTS - 1]) for place in x)
    least *= 1.3  # what lies at the kernel's very end has no weight
    widths: FloatArray = np.geomspace(least, max(2.0 * float(x[-1] - x[0]), 1.1 * least), _STEPS)
    return widths


def _rows(x: FloatArray, u: FloatArray, at: FloatArray, width: float) -> FloatArray:
    """What each point adds to the curve at each place, shape (places, points)."""
    rows = np.empty((at.size, x.size))
    for n, place in enumerate(at):
        offset = (x - place) / width
        # The cube of 1 - |t|^3, times the points' weights; through the roots, so that the fit stays well conditioned.
        root = np.sqrt(np.clip(1.0 - np.abs(offset) ** 3, 0.0, 1.0) ** 3) * (u.min() / u)
        design = root[:, None] * np.stack((np.ones_like(offset), offset, offset**2), axis=1)
        q, r = np.linalg.qr(design)
        rows[n] = np.linalg.solve(r.T, np.array([1.0, 0.0, 0.0])) @ (q.T * root)
    return rows
