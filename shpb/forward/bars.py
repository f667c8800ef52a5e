"""Waves in the bars, as forces: how they travel, and what a gauge on the surface sees of them.

A wave travels as the first longitudinal mode of Pochhammer and Chree: each frequency at its phase
speed. The gauge sees the surface strain, which for a given force is smaller by M1 M2 (mean over
surface strain, mean stress over E times mean strain), and the mean of it over its length.
Above f a/c0 = 0.28 nothing is carried: near 0.297 the surface strain of the mode vanishes.

A bar that is not elastic has a complex modulus: speed and impedance of each frequency then follow from it, and the
section acts as in an elastic bar of that speed.

References
----------
See :mod:`shpb.wave.pochhammer`. Gauge length: sin(x)/x of the grid's length over the wavelength,
K. Oi, Exp. Mech. 6 (1966) 463-469 (from memory).
"""

from __future__ import annotations

from typing import Protocol

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.rig.bar import Bar
from shpb.wave.pochhammer import FirstMode, first_mode_at_frequency
from shpb.wave.propagation import fast_length

# The band fades out between these, f a/c0: below the pole of M1, above all that a reduction keeps.
BAND_WHOLE_FA_C0 = 0.20
BAND_NONE_FA_C0 = 0.28
# Slowest group of the first mode within the band, by c0 (nu up to 0.4): bounds the padding.
_SLOWEST_GROUP = 0.40


class ComplexModulus(Protocol):
    """The modulus of a bar that is not elastic."""

    def modulus_pa(self, frequency_hz: FloatArray) -> ComplexArray:
        """E' + i E'' at each frequency [Pa]; E'' > 0 where motion is ``exp(+i w t)``."""
        ...


class BarWaves:
    """Waves of one bar on one even time grid.

    Parameters
    ----------
    bar : Bar
    samples : int
        Samples of the time grid.
    interval_s : float
        Its spacing [s].
    longest_m : float
        The longest way that a wave will be carried [m]; bounds the zero padding.
    dispersive : bool
        False carries every frequency at c0 and shows force/(E A) at the gauge, whole band.
    solid : ComplexModulus or None
        The material of a bar that is not elastic; the bar's wave speed is then that of its slow waves.
    """

    def __init__(
        self,
        bar: Bar,
        samples: int,
        interval_s: float,
        longest_m: float,
        *,
        dispersive: bool = True,
        solid: ComplexModulus | None = None,
    ) -> None:
        self.bar = bar
        self.samples = samples
        delay = longest_m / bar.wave_speed_m_s / _SLOWEST_GROUP
        self._length = fast_length(samples + int(np.ceil((delay + 200e-6) / interval_s)))
        frequency: FloatArray = np.fft.rfftfreq(self._length, interval_s).astype(np.float64, copy=False)
        unit = bar.radius_m / bar.wave_speed_m_s
        passed = int(np.searchsorted(frequency, BAND_NONE_FA_C0 / unit)) if dispersive else frequency.size
        self._frequency = frequency[:passed]
        self._mode: FirstMode | None = None
        self._band = np.ones(passed)
        self._wavenumber = 2 * np.pi * self._frequency / bar.wave_speed_m_s
        self._modulus: ComplexArray | None = None  # by that of slow waves
        if solid is not None:
            self._modulus = solid.modulus_pa(self._frequency) / bar.young_modulus_pa
            self._wavenumber = self._wavenumber / np.sqrt(self._modulus)
        if dispersive:
            fa_c0 = self._frequency * unit
            if self._modulus is not None:
                fa_c0 = fa_c0 / np.sqrt(self._modulus).real
            self._mode = first_mode_at_frequency(fa_c0, bar.poisson_ratio)
            self._wavenumber = self._wavenumber / self._mode.phase_speed
            fade = np.clip((fa_c0 - BAND_WHOLE_FA_C0) / (BAND_NONE_FA_C0 - BAND_WHOLE_FA_C0), 0.0, 1.0)
            self._band = 0.5 * (1.0 + np.cos(np.pi * fade))

    def spectrum(self, force_n: FloatArray) -> ComplexArray:
        """Spectrum of a wave's force history at one place, zero padded."""
        return np.fft.rfft(force_n, self._length)[: self._frequency.size]

    def carried(self, spectrum: ComplexArray, distance_m: float) -> ComplexArray:
        """Spectrum of the wave after a way of ``distance_m`` along its travel."""
        moved: ComplexArray = spectrum * np.exp(-1j * self._wavenumber * distance_m) * self._band
        return moved

    def history(self, spectrum: ComplexArray) -> FloatArray:
        """Force history of a spectrum on the time grid, shape (samples,) [N]."""
        return np.fft.irfft(self._full(spectrum), self._length)[: self.samples]

    def gauge_strain(self, spectrum: ComplexArray, gauge_length_m: float) -> FloatArray:
        """Surface strain [1] that a gauge sees of a wave, loading positive, shape (samples,)."""
        seen = spectrum * np.sinc(self._wavenumber * gauge_length_m / (2 * np.pi))
        if self._mode is not None:
            seen = seen / self._mode.stress
        if self._modulus is not None:
            seen = seen / self._modulus
        return self.history(seen) / self.bar.force_per_strain_n

    def _full(self, spectrum: ComplexArray) -> ComplexArray:
        full = np.zeros(self._length // 2 + 1, dtype=complex)
        full[: spectrum.size] = spectrum
        return full
