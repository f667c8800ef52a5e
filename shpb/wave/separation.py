"""Two waves that run against each other in a bar, told apart by two or more gauge stations.

At the stations x_k the strain is the sum of a wave that runs to the right and one that runs to the left,

    e_k(p) = P(p) exp(-xi (x_k - x)) + N(p) exp(xi (x_k - x))

with P and N at the place x. At each complex frequency p = s + i w (:mod:`shpb.wave.laplace`) P and N are found by least
squares over the stations with the weights 1/noise^2. For two stations that is

    P = (e_A exp(xi (x_B - x)) - e_B exp(xi (x_A - x)))/(2 sinh xi (x_B - x_A))

and, in a bar without dispersion, the recursion p_A(t) = e_A(t) - e_B(t - tau) + p_A(t - 2 tau), started from rest. So
errors add up over the record: white noise as the root of the number of terms, t/(2 tau); an offset of one station's
zero with that number itself. A frequency for which all spacings are whole multiples of half a wave cannot be told
apart; slow changes (f = 0) are always among them and rest on the start from rest alone.

References
----------
B. Lundberg, A. Henchoz, Exp. Mech. 17 (1977) 213-218 (two stations, time domain); H. Zhao, G. Gary, J. Mech. Phys.
Solids 45 (1997) 1185-1202 (two stations, dispersive); M.-N. Bussac, P. Collet, G. Gary, R. Othman, J. Mech. Phys.
Solids 50 (2002) 321-349 (several stations, maximum likelihood).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from shpb.arrays import ComplexArray, FloatArray, frozen, require_finite
from shpb.errors import InputError
from shpb.wave.laplace import LaplaceGrid
from shpb.wave.stations import Operator, Stations, Waves

# A frequency counts as one that the stations cannot tell apart where steady noise is lifted beyond this many times.
SINGULAR_GAIN = 10.0
_STEADY_POINTS = 6000  # of the fine grid on which such frequencies are sought


class NoiseGain(NamedTuple):
    """What noise does in either wave, by the noise of one station (root mean square over the stations)."""

    frequency_hz: FloatArray  # shape (bins,)
    by_frequency: Waves  # on the line of the transform: bounded by the length of the record, shape (bins,)
    by_time: Waves  # white noise from the start on, within the band, shape (samples,)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Separated:
    """Both waves at one place.

    Attributes
    ----------
    right, left : float array, shape (samples,)
        Strain of the wave that runs to larger x, and to smaller x [1].
    contributions : Waves
        Share of each station's own strain in them, shape (stations, samples) each.
    operator : Operator
    gain : NoiseGain
    singular_hz : tuple of float
        Frequencies within the band that no spacing tells apart, zero first [Hz].
    whole : int
        Samples up to which the end of the record is not felt.
    """

    right: FloatArray
    left: FloatArray
    contributions: Waves
    operator: Operator
    gain: NoiseGain
    singular_hz: tuple[float, ...]
    whole: int


def separate(
    strains: FloatArray,
    positions_m: ArrayLike,
    xi_per_m: ComplexArray,
    noise: ArrayLike,
    grid: LaplaceGrid,
    *,
    place_m: float = 0.0,
) -> Separated:
    """Tell the two waves of a bar apart.

    Parameters
    ----------
    strains : float array, shape (stations, samples)
        Of two or more stations on one clock, zero lines removed, at rest at the start [1].
    positions_m : float array, shape (stations,)
        Along the bar [m]; "right" is where they grow.
    xi_per_m : complex array, shape (bins,)
        Propagation coefficient of the bar at ``grid.p_per_s`` [1/m].
    noise : float array, shape (stations,)
        Standard deviation of one sample at each station [1]; only their ratios act on the waves.
    grid : LaplaceGrid
        For this record; nothing above its ``stop_hz`` is left whole.
    place_m : float
        Where the waves are wanted [m].

    Raises
    ------
    InputError
        If there are fewer than two stations, two at one place, or arrays that do not fit together.
    """
    x, sigma = np.asarray(positions_m, dtype=np.float64), np.asarray(noise, dtype=np.float64)
    _require_fit(strains, x, sigma, grid)
    require_finite(strains, where="station strains", mend="Cut the record before that sample")
    bar = Stations(x, xi_per_m, sigma, grid)
    operator = bar.operator(place_m)
    contributions = bar.contributions(strains, operator, place_m)
    return Separated(
        right=frozen(contributions.right.sum(axis=0)),
        left=frozen(contributions.left.sum(axis=0)),
        contributions=contributions,
        operator=operator,
        gain=_noise_gain(operator, sigma),
        singular_hz=singular_frequencies_hz(x, xi_per_m, sigma, grid),
        whole=max(grid.samples - bar.felt_samples, 0),
    )


def _require_fit(strains: FloatArray, x: FloatArray, sigma: FloatArray, grid: LaplaceGrid) -> None:
    where = "wave separation"
    if strains.ndim != 2 or strains.shape[0] < 2:
        raise InputError(
            f"strain of {strains.shape[0] if strains.ndim == 2 else 1} station(s)",
            where=where,
            mend="Two waves need two or more stations on the bar, one row each",
        )
    if not (x.shape == sigma.shape == strains.shape[:1] and strains.shape[1] == grid.samples):
        raise InputError(
            f"strains of shape {strains.shape}, {x.size} positions, {sigma.size} noises, a record of {grid.samples}",
            where=where,
            mend="Give one row of strain, one position and one noise a station, all on the record's one clock",
        )
    if not (np.isfinite(sigma).all() and (sigma > 0).all() and np.isfinite(x).all()):
        raise InputError("a noise or a position is no positive number", where=where, mend="Give it for each")
    apart = np.abs(x[:, None] - x[None, :])[np.triu_indices(x.size, 1)]
    if float(apart.min()) < 1e-6:
        raise InputError(
            f"two stations stand at one place, {x[np.argmin(np.abs(np.diff(np.sort(x))))]:g} m",
            where=where,
            mend="Stations at one place see the same sum of both waves: give one of them, or check the distances",
        )


# --- noise, and what cannot be told apart ------------------------------------------------------------


def _noise_gain(operator: Operator, sigma: FloatArray) -> NoiseGain:
    kernels = operator.kernels(operator.grid.fade, operator.grid.samples)
    usual = float(np.sqrt(np.mean(sigma**2)))
    share = (sigma / usual)[:, None]

    def over_frequency(side: ComplexArray) -> FloatArray:
        gain: FloatArray = np.sqrt((np.abs(share * side) ** 2).sum(axis=0))
        return frozen(gain)

    def over_time(kernel: FloatArray) -> FloatArray:
        grown = np.cumsum((share * kernel) ** 2, axis=-1).sum(axis=0)
        gain: FloatArray = np.sqrt(grown[operator.grid.samples :])
        return frozen(gain)

    return NoiseGain(
        operator.grid.frequency_hz,
        Waves(over_frequency(operator.right), over_frequency(operator.left)),
        Waves(over_time(kernels.right), over_time(kernels.left)),
    )


def singular_frequencies_hz(
    positions_m: ArrayLike, xi_per_m: ComplexArray, noise: ArrayLike, grid: LaplaceGrid
) -> tuple[float, ...]:
    """Frequencies up to the fade at which steady noise would be lifted more than tenfold: one for each such stretch.

    Zero, which is always one of them, stands first.
    """
    found = [0.0]
    frequency, gain = steady_gain(positions_m, xi_per_m, noise, grid)
    edges = np.flatnonzero(np.diff(np.concatenate(([0], (gain > SINGULAR_GAIN).astype(np.int8), [0]))))
    for start, stop in zip(edges[::2], edges[1::2], strict=True):
        if start > 0:
            found.append(float(0.5 * (frequency[start] + frequency[stop - 1])))
    return tuple(found)


def steady_gain(
    positions_m: ArrayLike, xi_per_m: ComplexArray, noise: ArrayLike, grid: LaplaceGrid
) -> tuple[FloatArray, FloatArray]:
    """Noise gain of a record without end, on a fine frequency grid up to the fade [Hz]; capped at 1e6.

    The standard deviation of P by least squares, by that of one station: sqrt(m) times the root of
    sum w |left|^2/sum of pairs w w |2 sinh xi dx|^2, in the middle of the stations.
    """
    x, sigma = np.asarray(positions_m, dtype=np.float64), np.asarray(noise, dtype=np.float64)
    frequency = np.linspace(0.0, grid.stop_hz, _STEADY_POINTS)
    # Off the line, back to the real axis: what s adds to the attenuation is s by the group speed.
    slope = np.gradient(xi_per_m.imag, 2 * np.pi * grid.frequency_hz)
    attenuation = np.maximum(xi_per_m.real - grid.decay_per_s * slope, 0.0)
    xi = np.interp(frequency, grid.frequency_hz, attenuation) + 1j * np.interp(
        frequency, grid.frequency_hz, xi_per_m.imag
    )
    xi[0] = xi[0].real
    usual = np.mean(sigma**2)
    weight = usual / sigma**2
    apart = x[None, :] - x[:, None]
    minors = np.abs(2 * np.sinh(xi * apart[:, :, None])) ** 2
    total = 0.5 * (weight[:, None, None] * weight[None, :, None] * minors).sum(axis=(0, 1))
    far = np.exp(2 * xi.real * (x - x.mean())[:, None])
    gain = np.sqrt((weight[:, None] * far).sum(axis=0) / np.maximum(total, 1e-12))
    return frequency, np.minimum(gain, 1e6)
