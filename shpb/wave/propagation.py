"""Carry a pulse along a bar: spectral phase of the first mode, one zero-phase low-pass for all.

A pulse that travels the distance x along the bar is delayed by x/c(f) at each frequency. That delay
is split into the rigid part x/c0, done on the time axis, and the residual phase
exp(-i w x (1/c - 1/c0)), done in the spectrum; so the sample grid is not rotated and the zero
padding only has to hold the residual delay. Where the propagation of a bar was measured, its table rules: the factor is
exp(-x (xi - i w/c0)), which also undoes the attenuation, and the impedance is complex.

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
from shpb.wave.complex_propagation import measured_wave
from shpb.wave.pochhammer import FirstMode, first_mode_at_frequency

# The surface-strain factor M1 has a pole at f a/c0 = 0.297 (Davies 1948): the correction of the
# amplitude is whole up to 0.20 (12 % at nu = 0.29), fades out to nothing at 0.25, and never nears it.
AMPLITUDE_WHOLE_FA_C0 = 0.20
AMPLITUDE_NONE_FA_C0 = 0.25
STOP_BY_CUTOFF = 1.5  # where nothing passes the low-pass any more


@dataclass(frozen=True, slots=True)
class LowPass:
    """The one zero-phase low-pass: a raised cosine, half its height at the cut-off.

    It is 1 below half the cut-off and 0 above one and a half of it: beyond that nothing enters at all.
    """

    cutoff_hz: float

    @property
    def stop_hz(self) -> float:
        """Frequency from which nothing passes [Hz]."""
        return STOP_BY_CUTOFF * self.cutoff_hz

    @property
    def settling_s(self) -> float:
        """Time by which the ringing of a step has fallen below 0.1 % [s]."""
        return 4.0 / self.cutoff_hz

    def noise_share(self, interval_s: float) -> float:
        """Share of the standard deviation of white noise, sampled at ``interval_s``, that passes.

        The equivalent noise bandwidth of the raised cosine, the integral of its squared gain, is 0.875 of the cut-off.
        """
        return float(min(np.sqrt(2 * 0.875 * self.cutoff_hz * interval_s), 1.0))

    def gain(self, frequency_hz: FloatArray) -> FloatArray:
        """Gain at each frequency, shape of ``frequency_hz``."""
        x = np.clip(frequency_hz / self.cutoff_hz - 0.5, 0.0, 1.0)
        return 0.5 * (1.0 + np.cos(np.pi * x))


class CarriedPulse(NamedTuple):
    """A pulse at a specimen face, on the face's time grid.

    All three are strains [1] of one shape; without amplitude correction they are one array in an elastic bar.
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


@dataclass(frozen=True, slots=True, eq=False)
class BarTransfer:
    """What one bar does to the spectrum of a pulse, for one FFT length: made once, used for every pulse in it.

    Arrays are over the frequencies that pass the low-pass, shape (bins,).
    """

    bar: Bar
    interval_s: float
    length: int  # of the FFT
    low_pass: LowPass
    frequency_hz: FloatArray
    # 1/c - 1/c0: what dispersion adds to a rigid shift; complex where the bar attenuates, xi/(i w) - 1/c0.
    slowness_s_m: FloatArray | ComplexArray
    # Surface strain to F/(E A) with E = rho c0^2; None without amplitude correction in an elastic bar.
    force_factor: FloatArray | ComplexArray | None
    velocity_factor: FloatArray | ComplexArray | None  # surface strain to v/c0

    def carry(
        self,
        strain: FloatArray,
        start_s: float,
        grid: Grid,
        distance_m: float,
        shift_s: float = 0.0,
        chain: FloatArray | None = None,
    ) -> CarriedPulse:
        """Carry one windowed pulse; arguments as in :func:`carry_pulse`.

        ``chain`` is the gain of the recording chain at ``frequency_hz``, to be undone. The interval of ``grid`` may be
        a whole multiple of that of the strain, if the FFT length is one too: nothing that passes is lost.
        """
        every = round(grid.interval_s / self.interval_s)
        delay = start_s + distance_m / self.bar.wave_speed_m_s + shift_s - grid.start_s
        whole = int(np.floor(delay / grid.interval_s))
        rest = delay - whole * grid.interval_s
        spectrum = np.fft.rfft(strain, self.length)
        phase = -2j * np.pi * self.frequency_hz * (rest + distance_m * self.slowness_s_m)
        gain = self.low_pass.gain(self.frequency_hz)
        if chain is not None:
            gain = gain / chain
        passed = spectrum[: self.frequency_hz.size] * (gain * np.exp(phase))

        def on_grid(factor: FloatArray | ComplexArray | None) -> FloatArray:
            coarse = self.length // every
            carried = np.zeros(coarse // 2 + 1, dtype=np.complex128)
            carried[: passed.size] = passed if factor is None else passed * factor
            circular = np.fft.irfft(carried, coarse)
            if every > 1:
                circular /= every
            return _placed(circular, whole, self.low_pass, grid.interval_s, grid.samples)

        surface = on_grid(None)
        return CarriedPulse(
            surface,
            surface if self.force_factor is None else on_grid(self.force_factor),
            surface if self.velocity_factor is None else on_grid(self.velocity_factor),
        )


def bar_transfer(
    bar: Bar, interval_s: float, length: int, low_pass: LowPass, dispersion: Dispersion
) -> BarTransfer:
    """Solve the first mode of a bar at the frequencies of an FFT that pass the low-pass, or look into its table."""
    frequency: FloatArray = np.fft.rfftfreq(length, interval_s).astype(np.float64, copy=False)
    frequency = frequency[: int(np.searchsorted(frequency, low_pass.stop_hz))]
    if bar.propagation is not None and dispersion is not Dispersion.NONE:
        measured = measured_factors(bar, frequency, dispersion)
        return BarTransfer(bar, interval_s, length, low_pass, frequency, *measured)
    slowness, force, velocity = np.zeros_like(frequency), None, None
    if dispersion is not Dispersion.NONE:
        mode = first_mode_at_frequency(frequency * bar.radius_time_s, bar.poisson_ratio)
        slowness = (1.0 / mode.phase_speed - 1.0) / bar.wave_speed_m_s
        if dispersion is Dispersion.FULL:
            force, velocity = capped_factor(mode, mode.stress), capped_factor(mode, mode.velocity)
    return BarTransfer(bar, interval_s, length, low_pass, frequency, slowness, force, velocity)


def measured_factors(
    bar: Bar, frequency_hz: FloatArray, dispersion: Dispersion
) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
    """Slowness, force and velocity factor of a bar with a measured table, as in :class:`BarTransfer`.

    With phase alone only the material's own modulus and speed turn strain into force and velocity, with amplitude the
    section factors too. Neither depends on c0: what the rigid shift and E A hold of it is taken out again here.
    """
    wave = measured_wave(bar, frequency_hz)
    by_c0 = wave.material_speed_m_s / bar.wave_speed_m_s
    force, velocity = by_c0**2, by_c0
    if dispersion is Dispersion.FULL:
        force = force * capped_factor(wave.mode, wave.mode.stress)
        velocity = velocity * capped_factor(wave.mode, wave.mode.velocity)
    return wave.slowness_s_m - 1.0 / bar.wave_speed_m_s, force, velocity


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
    length = padded_length(strain.size, distance_m, bar, low_pass, grid.interval_s)
    transfer = bar_transfer(bar, grid.interval_s, length, low_pass, dispersion)
    return transfer.carry(strain, start_s, grid, distance_m, shift_s)


def capped_factor(mode: FirstMode, factor: FloatArray) -> FloatArray:
    """A section factor below the pole, tapered to 1 from f a/c0 = 0.20 to 0.25."""
    x = (mode.frequency_fa_c0 - AMPLITUDE_WHOLE_FA_C0) / (AMPLITUDE_NONE_FA_C0 - AMPLITUDE_WHOLE_FA_C0)
    share = 0.5 * (1.0 + np.cos(np.pi * np.clip(x, 0.0, 1.0)))
    # Above the taper the factor may be infinite; there it is not looked at.
    return 1.0 + np.where(share > 0, factor - 1.0, 0.0) * share


def padded_length(samples: int, distance_m: float, bar: Bar, low_pass: LowPass, interval_s: float) -> int:
    """Window and the longest residual delay and ringing that may stand on either side of it, for a fast FFT."""
    # The slowest group of the first mode: above 0.36 c0 from nu = 0.25 on, above 0.14 c0 for any (solver).
    slowest = 0.36 if bar.poisson_ratio >= 0.25 else 0.14
    residual = (1 / slowest - 1) * abs(distance_m) / bar.wave_speed_m_s
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
