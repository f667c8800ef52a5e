"""Carry a pulse along a bar: spectral phase of the first mode, one zero-phase low-pass for all.

A pulse that travels the distance x along the bar is delayed by x/c(f) at each frequency. That delay
is split into the rigid part x/c0, done on the time axis, and the residual phase
exp(-i w x (1/c - 1/c0)), done in the spectrum; so the sample grid is not rotated and the zero
padding only has to hold the residual delay.

References
----------
P. S. Follansbee, C. Frantz, J. Eng. Mater. Technol. 105 (1983) 61-66; D. A. Gorham, J. Phys. E 16
(1983) 477-479; J. M. Lifshitz, H. Leber, Int. J. Impact Eng. 15 (1994) 723-733; amplitude after
A. Tyas, A. J. Watson, Int. J. Impact Eng. 25 (2001) 87-101.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.rig.bar import Bar
from shpb.settings import Dispersion
from shpb.wave.pochhammer import FirstMode, first_mode_at_frequency

# The surface-strain factor M1 has a pole at f a/c0 = 0.297 (Davies 1948): the correction of the
# amplitude is whole up to 0.20 (12 % at nu = 0.29), fades out to nothing at 0.25, and never nears it.
AMPLITUDE_WHOLE_FA_C0 = 0.20
AMPLITUDE_NONE_FA_C0 = 0.25


@dataclass(frozen=True, slots=True)
class LowPass:
    """The one zero-phase low-pass: a raised cosine, half its height at the cut-off.

    It is 1 below half the cut-off and 0 above one and a half: beyond that nothing enters at all.
    """

    cutoff_hz: float

    @property
    def stop_hz(self) -> float:
        """Frequency from which nothing passes [Hz]."""
        return 1.5 * self.cutoff_hz

    @property
    def settling_s(self) -> float:
        """Time by which the ringing of a step has fallen below 0.1 % [s]."""
        return 4.0 / self.cutoff_hz

    def gain(self, frequency_hz: FloatArray) -> FloatArray:
        """Gain at each frequency, shape of ``frequency_hz``."""
        x = np.clip(frequency_hz / self.cutoff_hz - 0.5, 0.0, 1.0)
        return 0.5 * (1.0 + np.cos(np.pi * x))


class CarriedPulse(NamedTuple):
    """A pulse at a specimen face, on the face's time grid.

    All three are strains [1] of one shape; without amplitude correction they are one array.
    Force is E A times ``force_strain``, velocity c0 times ``velocity_strain``.
    """

    strain: FloatArray  # at the surface, as a gauge there would show it
    force_strain: FloatArray
    velocity_strain: FloatArray


class Grid(NamedTuple):
    """An even time grid: start [s], interval [s], number of samples."""

    start_s: float
    interval_s: float
    samples: int

    @property
    def time_s(self) -> FloatArray:
        """Time of each sample [s]."""
        time: FloatArray = self.start_s + self.interval_s * np.arange(float(self.samples))
        return time


def residual_phase(frequency_hz: FloatArray, distance_m: float, bar: Bar, mode: FirstMode) -> ComplexArray:
    """exp(-i w x (1/c - 1/c0)): what dispersion adds to a rigid shift over ``distance_m``.

    ``distance_m`` is positive along the travel of the pulse, negative back to where it came from.
    """
    slowness = (1.0 / mode.phase_speed - 1.0) / bar.wave_speed_m_s
    phase: ComplexArray = np.exp(-2j * np.pi * frequency_hz * distance_m * slowness)
    return phase


def carry_pulse(
    strain: FloatArray,
    start_s: float,
    grid: Grid,
    distance_m: float,
    bar: Bar,
    low_pass: LowPass,
    dispersion: Dispersion,
    shift_s: float = 0.0,
) -> CarriedPulse:
    """Carry one windowed pulse to another place on its bar.

    Parameters
    ----------
    strain : float array, shape (samples,)
        Strain at the gauge [1], zero outside the window; spacing as in ``grid``.
    start_s : float
        Time of the first sample [s].
    grid : Grid
        Time grid of the result.
    distance_m : float
        Along the travel of the pulse: positive to where it will come, negative to where it was [m].
    bar : Bar
        The bar it travels in.
    low_pass : LowPass
        The one filter of all pulses.
    dispersion : Dispersion
        none, phase, or phase and amplitude.
    shift_s : float
        A further rigid delay [s], zero unless the feet are aligned.

    Returns
    -------
    CarriedPulse
        Each array of shape (grid.samples,).
    """
    interval = grid.interval_s
    delay = (start_s + distance_m / bar.wave_speed_m_s + shift_s - grid.start_s) / interval
    whole = int(np.floor(delay))
    length = _padded_length(strain.size, distance_m, bar, low_pass, interval)
    spectrum = np.fft.rfft(strain, length)
    frequency: FloatArray = np.fft.rfftfreq(length, interval).astype(np.float64, copy=False)
    passed = int(np.searchsorted(frequency, low_pass.stop_hz))
    frequency = frequency[:passed]

    transfer: ComplexArray = low_pass.gain(frequency) * np.exp(
        -2j * np.pi * frequency * (delay - whole) * interval
    )
    force = velocity = None
    if dispersion is not Dispersion.NONE:
        mode = first_mode_at_frequency(frequency * bar.radius_m / bar.wave_speed_m_s, bar.poisson_ratio)
        transfer *= residual_phase(frequency, distance_m, bar, mode)
        if dispersion is Dispersion.FULL:
            force, velocity = capped_factor(mode, mode.stress), capped_factor(mode, mode.velocity)

    def on_grid(factor: FloatArray | None) -> FloatArray:
        carried = np.zeros_like(spectrum)
        carried[:passed] = spectrum[:passed] * (transfer if factor is None else transfer * factor)
        return _placed(np.fft.irfft(carried, length), whole, low_pass, interval, grid.samples)

    surface = on_grid(None)
    return CarriedPulse(
        surface,
        surface if force is None else on_grid(force),
        surface if velocity is None else on_grid(velocity),
    )


def capped_factor(mode: FirstMode, factor: FloatArray) -> FloatArray:
    """A section factor below the pole, tapered to 1 from f a/c0 = 0.20 to 0.25."""
    x = (mode.frequency_fa_c0 - AMPLITUDE_WHOLE_FA_C0) / (AMPLITUDE_NONE_FA_C0 - AMPLITUDE_WHOLE_FA_C0)
    share = 0.5 * (1.0 + np.cos(np.pi * np.clip(x, 0.0, 1.0)))
    # Above the taper the factor may be infinite; there it is not looked at.
    return 1.0 + np.where(share > 0, factor - 1.0, 0.0) * share


def _padded_length(samples: int, distance_m: float, bar: Bar, low_pass: LowPass, interval_s: float) -> int:
    """Window and the longest residual delay and ringing that may stand on either side of it."""
    # The slowest group of the first mode travels at 0.37 c0 (METALS: 0.38 at nu = 0.3), so its
    # residual delay is below 1.7 x/c0.
    residual = 1.7 * abs(distance_m) / bar.wave_speed_m_s
    extra = int(np.ceil((residual + 2 * low_pass.settling_s) / interval_s))
    return fast_length(samples + extra)


def fast_length(samples: int) -> int:
    """The next even length whose only prime factors are 2, 3 and 5, for which an FFT is fast."""
    best = 1 << max(samples - 1, 1).bit_length()
    for fives in (1, 5, 25, 125, 625):
        for threes in (1, 3, 9, 27, 81):
            odd = fives * threes
            twos = max(-(-samples // odd) - 1, 1)
            best = min(best, odd << max(twos.bit_length(), 1))
    return best


def _placed(
    circular: FloatArray, offset: int, low_pass: LowPass, interval_s: float, samples: int
) -> FloatArray:
    """Lay a circular result on the grid: its first samples at ``offset``, the wrapped head before them."""
    settled = int(np.ceil(low_pass.settling_s / interval_s))
    head = min(settled, circular.size)
    line = np.concatenate((circular[circular.size - head :], circular[: circular.size - head]))
    first = offset - head
    out = np.zeros(samples)
    start, stop = max(first, 0), min(first + line.size, samples)
    if start < stop:
        out[start:stop] = line[start - first : stop - first]
    return out
