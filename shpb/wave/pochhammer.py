"""Pochhammer-Chree: the first longitudinal mode of a solid round bar.

Everything is dimensionless: lengths in bar radii a, speeds in c0 = sqrt(E/rho), so that one
Poisson's ratio gives one curve. With K = (k a)^2, W = (omega a/c0)^2 and

    X = W (c0/c1)^2 - K,   Y = W (c0/c2)^2 - K      (c1, c2: dilatational and shear speeds)

the frequency equation, divided by J1(sqrt X) J1(sqrt Y), holds Bessel functions only in the one
ratio psi(x) = sqrt(x) J0(sqrt x)/J1(sqrt x), which is real and smooth for x of either sign:

    F = 2 X (Y + K) - (Y - K)^2 psi(X) - 4 K X psi(Y) = 0

References
----------
L. Pochhammer, J. reine angew. Math. 81 (1876) 324-336; C. Chree, Trans. Camb. Phil. Soc. 14
(1889) 250-369; frequency equation in the form of D. Bancroft, Phys. Rev. 59 (1941) 588-593.
Section factors: R. M. Davies, Phil. Trans. R. Soc. A 240 (1948) 375-457; A. Tyas, A. J. Watson,
Int. J. Impact Eng. 25 (2001) 87-101.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from shpb.arrays import BoolArray, ComplexArray, FloatArray, frozen
from shpb.errors import InputError

# First zero of J1'(x). Where k a equals it, c = sqrt(2) c2 exactly, for every Poisson's ratio
# (Lame's mode): the curve is bracketed on either side of this point and cannot be mistaken.
LAME_WAVENUMBER = 1.8411837813406593
# Just below x = j_{1,1}^2 = 14.6819706..., where psi has its first pole. The first mode keeps Y below it.
_POLE_OF_PSI = 14.68197
_ITERATIONS = 60
_COMPLEX_ITERATIONS = 5  # from a start that is good to the square of the imaginary part


class _Speeds(NamedTuple):
    """The two body-wave speeds, as the squares that the equation uses."""

    dilatational: float  # (c0/c1)^2
    shear: float  # (c0/c2)^2


@dataclass(frozen=True, slots=True, eq=False)
class FirstMode:
    """The first mode at a set of frequencies or wavenumbers; arrays of one shape, read-only.

    Attributes
    ----------
    frequency_fa_c0 : float array
        f a/c0.
    wavenumber_ka : float array
        k a = 2 pi a/Lambda.
    phase_speed : float array
        c/c0.
    group_speed : float array
        c_g/c0 = d omega/d k.
    mean_strain : float array
        M1: mean axial strain over the section by axial strain at the surface. It has a pole near
        f a/c0 = 0.297, where the surface strain vanishes.
    """

    frequency_fa_c0: FloatArray
    wavenumber_ka: FloatArray
    phase_speed: FloatArray
    group_speed: FloatArray
    mean_strain: FloatArray

    @property
    def modulus(self) -> FloatArray:
        """M2: mean axial stress by E times mean axial strain, (c/c0)^2 exactly."""
        return self.phase_speed**2

    @property
    def stress(self) -> FloatArray:
        """M1 M2: force by E A times surface strain."""
        return self.mean_strain * self.modulus

    @property
    def velocity(self) -> FloatArray:
        """(c/c0) M1: mean axial velocity by c0 times surface strain."""
        return self.mean_strain * self.phase_speed


def first_mode_at_frequency(fa_c0: ArrayLike, poisson_ratio: float) -> FirstMode:
    """Solve the first mode for given frequencies.

    Parameters
    ----------
    fa_c0 : float array, any shape
        Frequency times radius by bar speed, f a/c0, zero or positive.
    poisson_ratio : float
        0 to 0.49.

    Returns
    -------
    FirstMode
        Root good to about 1e-13 of c; arrays of the shape of ``fa_c0``.

    Raises
    ------
    InputError
        If Poisson's ratio or a frequency is out of range.
    """
    speeds = _body_speeds(poisson_ratio)
    fa_c0 = np.array(fa_c0, dtype=float)
    _require_non_negative(fa_c0, "f a/c0")
    omega = 2 * np.pi * fa_c0.ravel()
    ka = _solve(omega, _wavenumber_bracket(omega, speeds), speeds, by_frequency=True)
    return _first_mode(fa_c0.shape, omega, ka, speeds)


def first_mode_at_wavelength(a_over_lambda: ArrayLike, poisson_ratio: float) -> FirstMode:
    """Solve the first mode for given radius by wavelength, a/Lambda.

    The same as :func:`first_mode_at_frequency`, on the grid of the published tables.
    """
    speeds = _body_speeds(poisson_ratio)
    a_over_lambda = np.array(a_over_lambda, dtype=float)
    _require_non_negative(a_over_lambda, "a/Lambda")
    ka = 2 * np.pi * a_over_lambda.ravel()
    omega = _solve(ka, _frequency_bracket(ka, speeds), speeds, by_frequency=False)
    return _first_mode(a_over_lambda.shape, omega, ka, speeds)


def phase_speed_ratio(fa_c0: ArrayLike, poisson_ratio: float) -> FloatArray:
    """Return c/c0 of the first mode at frequencies f a/c0, see :func:`first_mode_at_frequency`."""
    return first_mode_at_frequency(fa_c0, poisson_ratio).phase_speed


def complex_wavenumber(omega: ComplexArray, poisson_ratio: float) -> ComplexArray:
    """Return k a of the first mode at complex frequencies omega a/c0 a little off the real axis.

    The analytic continuation of the real curve, as a numerical Laplace transform needs it: the first two terms of the
    series about the real frequency, k + (omega - Re omega) c0/c_g, and then Newton's method in the equation itself.

    Parameters
    ----------
    omega : complex array, shape (frequencies,)
        Real part zero or positive; imaginary part small against 1.
    poisson_ratio : float
        0 to 0.49.
    """
    speeds = _body_speeds(poisson_ratio)
    mode = first_mode_at_frequency(omega.real / (2 * np.pi), poisson_ratio)
    root: Any = mode.wavenumber_ka + 1j * omega.imag / mode.group_speed
    # Very long waves: k a = omega (1 + nu^2 omega^2/4), to 1e-13, where the equation itself is all rounding.
    long_waves = np.abs(omega) < 1e-3
    frequency: Any = np.where(long_waves, 1.0, omega)
    root = np.where(long_waves, 1.0, root)
    for _ in range(_COMPLEX_ITERATIONS):
        F, by_k, _ = _equation(root**2, frequency**2, speeds)
        root = np.where(long_waves, root, root - F / (2 * root * by_k))
    found: ComplexArray = np.where(long_waves, omega * (1 + (poisson_ratio * omega) ** 2 / 4), root)
    return found


# --- the equation ------------------------------------------------------------------------------


def _body_speeds(poisson_ratio: float) -> _Speeds:
    nu = float(poisson_ratio)
    if not 0.0 <= nu <= 0.49:
        raise InputError(
            f"Poisson's ratio is {nu:g}", where="poisson_ratio", mend="Give a value from 0 to 0.49"
        )
    return _Speeds(dilatational=(1 + nu) * (1 - 2 * nu) / (1 - nu), shear=2 * (1 + nu))


def _require_non_negative(values: FloatArray, name: str) -> None:
    if not (np.isfinite(values).all() and (values >= 0).all()):
        raise InputError("values must be finite and not negative", where=name, mend="Mask them first")


def _psi(x: FloatArray) -> FloatArray:
    """sqrt(x) J0(sqrt x)/J1(sqrt x) for x of either sign, by the continued fraction of J0/J1.

    For x < 0 (modified Bessel functions) every term is positive, so nothing cancels and nothing
    overflows. Source: Abramowitz & Stegun, Handbook of Mathematical Functions, 9.1.73.
    """
    quarter = x / 4
    # Terms fall off faster than any power once their index passes sqrt|x|/2.
    terms = 14 + int(np.sqrt(np.abs(x).max(initial=0.0)))
    fraction = np.full_like(x, float(terms))
    for n in range(terms - 1, 0, -1):
        fraction = n - quarter / fraction
    return 2 * fraction


def _psi_slope(x: FloatArray, psi: FloatArray) -> FloatArray:
    """D psi/dx, from Bessel's equation in Riccati form; its series where x is small."""
    near = np.abs(x) < 1e-3
    safe = np.where(near, 1.0, x)
    return np.where(near, -0.25 - x / 48, (2 * psi - x - psi**2) / (2 * safe))


def _equation(K: FloatArray, W: FloatArray, speeds: _Speeds) -> tuple[FloatArray, FloatArray, FloatArray]:
    """F and its partial slopes with respect to K and W."""
    X, Y = W * speeds.dilatational - K, W * speeds.shear - K
    psi_x, psi_y = _psi(X), _psi(Y)
    F = 2 * X * (Y + K) - (Y - K) ** 2 * psi_x - 4 * K * X * psi_y
    by_x = 2 * (Y + K) - (Y - K) ** 2 * _psi_slope(X, psi_x) - 4 * K * psi_y
    by_y = 2 * X - 2 * (Y - K) * psi_x - 4 * K * X * _psi_slope(Y, psi_y)
    by_k = 2 * X + 2 * (Y - K) * psi_x - 4 * X * psi_y - by_x - by_y
    by_w = by_x * speeds.dilatational + by_y * speeds.shear
    return F, by_k, by_w


# --- the root, bracketed ----------------------------------------------------------------------


def _wavenumber_bracket(omega: FloatArray, speeds: _Speeds) -> tuple[FloatArray, FloatArray]:
    """Bounds of k a at given omega a/c0 that hold the first mode and no other."""
    lame_speed = np.sqrt(2 / speeds.shear)  # sqrt(2) c2 by c0 = 1/sqrt(1 + nu)
    long_waves = omega <= LAME_WAVENUMBER * lame_speed
    # Long waves: sqrt(2) c2 <= c <= c0. Short waves: c below sqrt(2) c2 and Y below the pole of psi.
    fastest = np.minimum(omega / lame_speed, np.sqrt(np.maximum(0, omega**2 * speeds.shear)))
    by_pole = np.sqrt(np.maximum(omega**2 * speeds.shear - _POLE_OF_PSI, 0.0))
    lower = np.where(long_waves, omega, np.maximum(fastest, by_pole))
    upper = np.where(long_waves, np.minimum(omega / lame_speed, LAME_WAVENUMBER), omega / _slowest(speeds))
    return lower, upper


def _frequency_bracket(ka: FloatArray, speeds: _Speeds) -> tuple[FloatArray, FloatArray]:
    """Bounds of omega a/c0 at given k a that hold the first mode and no other."""
    lame_speed = np.sqrt(2 / speeds.shear)
    long_waves = ka <= LAME_WAVENUMBER
    by_pole = np.sqrt((ka**2 + _POLE_OF_PSI) / speeds.shear)
    lower = np.where(long_waves, ka * lame_speed, ka * _slowest(speeds))
    upper = np.where(long_waves, ka, np.minimum(ka * lame_speed, by_pole))
    return lower, upper


def _slowest(speeds: _Speeds) -> float:
    """A speed below all of the first mode: 0.85 c2 (Rayleigh's speed is 0.874 to 0.955 c2)."""
    return float(0.85 / np.sqrt(speeds.shear))


def _solve(
    known: FloatArray, bracket: tuple[FloatArray, FloatArray], speeds: _Speeds, *, by_frequency: bool
) -> FloatArray:
    """Newton's method kept inside a shrinking bracket, for all points at once."""
    low, high = (bound.copy() for bound in bracket)
    root = 0.5 * (low + high)
    todo: BoolArray = known > 0
    root[~todo] = 0.0
    if not todo.any():
        return root

    def residual(point: FloatArray, where: BoolArray) -> tuple[FloatArray, FloatArray]:
        k, w = (point, known[where]) if by_frequency else (known[where], point)
        F, by_k, by_w = _equation(k**2, w**2, speeds)
        return F, (by_k if by_frequency else by_w) * 2 * point

    # F keeps one sign between the long-wave side of the bracket and the root.
    sign_low = -1.0 if by_frequency else 1.0
    for _ in range(_ITERATIONS):
        x = root[todo]
        F, slope = residual(x, todo)
        lower_half = np.sign(F) == sign_low
        low[todo] = np.where(lower_half, x, low[todo])
        high[todo] = np.where(lower_half, high[todo], x)
        with np.errstate(divide="ignore", invalid="ignore"):
            stepped = x - F / slope
        inside = (stepped >= low[todo]) & (stepped <= high[todo])
        stepped = np.where(inside, stepped, 0.5 * (low[todo] + high[todo]))
        root[todo] = stepped
        todo[todo] = np.abs(stepped - x) > 1e-15 * x
        if not todo.any():
            break
    return root


def _first_mode(shape: tuple[int, ...], omega: FloatArray, ka: FloatArray, speeds: _Speeds) -> FirstMode:
    moving = ka > 0
    safe_k, safe_w = np.where(moving, ka, 1.0), np.where(moving, omega, 1.0)
    K, W = safe_k**2, safe_w**2
    phase = np.where(moving, safe_w / safe_k, 1.0)
    _, by_k, by_w = _equation(K, W, speeds)
    # dF = 0 along the curve: d omega/d k = -(dF/dK)(2k)/((dF/dW)(2 omega)).
    with np.errstate(divide="ignore", invalid="ignore"):
        group = np.where(moving, -by_k * safe_k / (by_w * safe_w), 1.0)
        X, Y = W * speeds.dilatational - K, W * speeds.shear - K
        # Both potentials at r = a; written without the quotient that is 0/0 at Lame's point.
        mean = 2 * (K - Y + 2 * X) / ((K - Y) * _psi(X) + 2 * X * _psi(Y))
    mean = np.where(moving, mean, 1.0)
    values = (omega / (2 * np.pi), ka, phase, group, mean)
    return FirstMode(*(frozen(value.reshape(shape)) for value in values))
