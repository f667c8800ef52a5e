"""Numerical Laplace transform of a record that is not periodic, and a bar's propagation at complex frequencies.

A finite record that neither repeats nor ends at rest is multiplied by exp(-s t) before its FFT and what comes out by
exp(s t): the transform is then taken at p = s + i w, where whatever wraps round the end of the FFT of length T has
fallen by exp(-s T). Causal operators keep what they do up to the end of the record, and those that have poles at real
frequencies (two stations on a bar: f = n c/(2 dx), zero among them) are finite on the line.

References
----------
Exponential window: E. Kausel, J. M. Roesset, J. Eng. Mech. 118 (1992) 1711-1730 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.rig.bar import Bar
from shpb.settings import Dispersion
from shpb.wave.complex_propagation import complex_speed_m_s
from shpb.wave.pochhammer import complex_wavenumber
from shpb.wave.propagation import fast_length

# What wraps round is let fall to this: below the step of a 16-bit digitiser, 1.5e-5. Rounding (1e-16) is lifted by its
# inverse root over the record, which is half of the FFT.
WRAPPED = 1e-6
# Above the frequency up to which the waves are wanted, the spectrum fades to nothing over this share of it.
FADE = 0.4


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LaplaceGrid:
    """The line p = s + i w on which a record of ``samples`` is transformed, up to ``stop_hz`` and its fade.

    Attributes
    ----------
    length : int
        Of the FFT: at least twice the record.
    decay_per_s : float
        s [1/s].
    frequency_hz : float array, shape (bins,)
        Im p/(2 pi) [Hz].
    fade : float array, shape (bins,)
        1 up to ``stop_hz``, then a raised cosine to 0.
    """

    samples: int
    interval_s: float
    length: int
    decay_per_s: float
    stop_hz: float
    frequency_hz: FloatArray
    fade: FloatArray

    @property
    def p_per_s(self) -> ComplexArray:
        """Complex frequency p = s + i w [1/s], shape (bins,)."""
        return np.asarray(self.decay_per_s + 2j * np.pi * self.frequency_hz, dtype=np.complex128)

    @property
    def noise_share(self) -> float:
        """Share of the standard deviation of white noise that the fade lets through."""
        return float(np.sqrt((2 * (self.fade**2).sum() - 1.0) / self.length))

    def transform(self, values: FloatArray) -> ComplexArray:
        """From time, shape (..., samples), to the line, shape (..., bins)."""
        time = self.interval_s * np.arange(float(values.shape[-1]))
        spectrum = np.fft.rfft(values * np.exp(-self.decay_per_s * time), self.length)
        return spectrum[..., : self.frequency_hz.size].astype(np.complex128, copy=False)

    def back(self, spectra: ComplexArray, ahead: int = 0) -> FloatArray:
        """From the line to time, shape (..., ahead + samples): the first ``ahead`` samples are before time zero."""
        whole = np.fft.irfft(self._full(spectra), self.length)
        line = np.concatenate((whole[..., self.length - ahead :], whole[..., : self.samples]), axis=-1)
        time = self.interval_s * (np.arange(float(line.shape[-1])) - ahead)
        found: FloatArray = line * np.exp(self.decay_per_s * time)
        return found

    def _full(self, spectra: ComplexArray) -> ComplexArray:
        full = np.zeros((*spectra.shape[:-1], self.length // 2 + 1), dtype=np.complex128)
        full[..., : spectra.shape[-1]] = spectra
        return full


def laplace_grid(samples: int, interval_s: float, stop_hz: float) -> LaplaceGrid:
    """Return the line for a record: s such that exp(-s T) = 1e-6 over the FFT, which is twice the record.

    A larger s would lift rounding and put weight on the start of the record alone; a smaller one would let in what
    wraps round.
    """
    length = fast_length(2 * samples)
    frequency: FloatArray = np.fft.rfftfreq(length, interval_s).astype(np.float64, copy=False)
    frequency = frequency[: int(np.searchsorted(frequency, (1 + FADE) * stop_hz))]
    over = np.clip((frequency / stop_hz - 1) / FADE, 0.0, 1.0)
    return LaplaceGrid(
        samples=samples,
        interval_s=interval_s,
        length=length,
        decay_per_s=float(-np.log(WRAPPED) / (length * interval_s)),
        stop_hz=stop_hz,
        frequency_hz=frequency,
        fade=0.5 * (1.0 + np.cos(np.pi * over)),
    )


def propagation_at(bar: Bar, p_per_s: ComplexArray, dispersion: Dispersion) -> ComplexArray:
    """Propagation coefficient xi of a bar at complex frequencies [1/m]: a wave is exp(-xi x) after a way x.

    Parameters
    ----------
    bar : Bar
        With a measured table of propagation, that is continued from the real axis; else the first mode is solved.
    p_per_s : complex array, shape (bins,)
        On one line s + i w, w from zero on [1/s].
    dispersion : Dispersion
        ``none`` takes every frequency at c0.
    """
    if dispersion is Dispersion.NONE:
        plain: ComplexArray = p_per_s / bar.wave_speed_m_s
        return plain
    if bar.propagation is not None:
        return _continued(bar, p_per_s)
    unit = bar.radius_time_s
    wavenumber = complex_wavenumber(p_per_s * (-1j * unit), float(bar.poisson_ratio))
    found: ComplexArray = 1j * wavenumber / bar.radius_m
    return found


def _continued(bar: Bar, p_per_s: ComplexArray) -> ComplexArray:
    """The measured table off the real axis: its complex speed v = p/xi varies slowly, so its Taylor series is short.

    v(s + i w) = v(i w) + s v' + s^2 v''/2 with v' = dv/dp. A real bar has v(-i w) = v(i w)*, so that below the table's
    first point the imaginary part falls to zero with the frequency.
    """
    assert bar.propagation is not None
    frequency = p_per_s.imag / (2 * np.pi)
    on_line = complex_speed_m_s(bar.propagation, frequency)
    on_line = on_line.real + 1j * on_line.imag * np.minimum(frequency / bar.propagation.frequency_hz[0], 1.0)
    first = -1j * np.gradient(on_line, p_per_s.imag)
    second = -1j * np.gradient(first, p_per_s.imag)
    s = p_per_s.real
    found: ComplexArray = p_per_s / (on_line + s * first + 0.5 * s**2 * second)
    return found
