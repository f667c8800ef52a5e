"""All passages of a calibration shot, carried to one place by the parameters so far and cut there by one window.

Where the ways are counted from the pulse is short and all passages are alike: what the window cuts off is then the same
share of all, and waves that belong to other passages lie farther from it than in the record.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.calibrate.bars.mode_table import mode_at
from shpb.calibrate.bars.passages import MARGIN_RADII, ShotPassages
from shpb.calibrate.bars.ways import bar_of, lengths_of
from shpb.rig.rig import SIDES, Rig
from shpb.wave.propagation import fast_length
from shpb.wave.recording_chain import chain_delay_s

LOWEST_HZ = 3e3
HIGHEST_FA_C0 = 0.25
_NONE_FA_C0 = 0.28  # nothing is carried beyond: the surface strain of the mode vanishes at 0.297
_POWER_BY_NOISE = 10.0  # below that a bin ends the band
_NEIGHBOURS = 2  # bins on either side for the mean of the power
CONTACT = "t contact"


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """What is fitted and what is known beforehand.

    Attributes
    ----------
    rig : Rig
    shots : tuple of ShotPassages
    tied : bool
        One wave speed and one Poisson's ratio for both bars.
    priors : mapping of str to (value, standard uncertainty)
        Of lengths and distances; others are free.
    start : mapping of str to float
        Of every wave speed and Poisson's ratio.
    held : frozenset of str
        Poisson's ratios that stay as they are.
    """

    rig: Rig
    shots: tuple[ShotPassages, ...]
    tied: bool
    priors: Mapping[str, tuple[float, float]]
    start: Mapping[str, float]
    held: frozenset[str] = frozenset()

    @property
    def sides(self) -> tuple[str, ...]:
        """Bars that a pulse passed through."""
        ways = [passage.way for shot in self.shots for passage in shot.passages]
        return tuple(side for side in SIDES if any(bar == side for way in ways for bar, _, _ in way.terms))

    def own(self, kind: str, side: str) -> str:
        """Name of the parameter of a bar."""
        return f"{kind} {self.sides[0] if self.tied else side}"


class Spectra(NamedTuple):
    """Of one shot, all passages carried to the place that ways are counted from; arrays of shape (passages, bins)."""

    frequency_hz: FloatArray  # (bins,)
    values: ComplexArray
    weight: FloatArray  # one by the variance of a bin; zero where the passage has no signal
    zero: ComplexArray  # (2, bins) spectra of offset and slope below the window


class Shot:
    """The spectra of one shot, to be carried anew for each set of parameters."""

    def __init__(self, shot: ShotPassages, rig: Rig) -> None:
        self.shot, self.rig = shot, rig
        passed = {side for one in shot.passages for side, _, _ in one.way.terms}
        self.unit_s = max(float(bar_of(rig, side).radius_time_s) for side in passed)
        interval, margin = shot.interval_s, MARGIN_RADII * self.unit_s
        samples = shot.fired.record.samples
        self._start = max(int((shot.origin_s - 2 * margin) / interval), 0)
        # Flat to a margin behind the pulse; with bars together the soft end lies within it.
        self._count = round((shot.duration_s + (4 if shot.whole else 2) * margin) / interval)
        self._window = _soft(self._count, round(margin / interval))
        self._fade = min(max(round(margin / interval), 8), samples // 20)
        self._length = fast_length(2 * samples + self._count)
        self._grid: FloatArray = np.fft.rfftfreq(self._length, interval).astype(np.float64, copy=False)
        self._spectra = {name: self._spectrum(trace) for name, trace in shot.traces.items()}
        bins: FloatArray = np.fft.rfftfreq(self._count, interval).astype(np.float64, copy=False)
        most = min(HIGHEST_FA_C0 / self.unit_s, 0.45 / interval)
        self._bins = np.flatnonzero((bins >= LOWEST_HZ) & (bins <= most))
        self.frequency_hz = bins[self._bins]
        ramp = np.arange(float(self._count)) - 0.5 * (self._count - 1)
        self._zero = np.fft.rfft(np.stack([self._window, self._window * ramp]))[:, self._bins]
        energy = float((self._window**2).sum())
        self.variance = np.array([energy * shot.noise[one.station] ** 2 for one in shot.passages])

    def _spectrum(self, trace: FloatArray) -> ComplexArray:
        """Spectrum of a trace whose end fades out, behind the last window where there is room."""
        faded = trace.copy()
        faded[-self._fade :] *= 0.5 * (1 + np.cos(np.pi * (np.arange(self._fade) + 1) / (self._fade + 1)))
        return np.fft.rfft(faded, self._length)

    def carried(self, values: Mapping[str, float], problem: Problem) -> Spectra:
        """All passages at the place that ways are counted from."""
        waves = {side: self._wavenumber(values, problem, side) for side in problem.sides}
        passed = next(iter(waves.values())).size
        omega = 2 * np.pi * self._grid[:passed]
        fade = np.clip(
            (self._grid[:passed] * self.unit_s - HIGHEST_FA_C0) / (_NONE_FA_C0 - HIGHEST_FA_C0), 0, 1
        )
        band = 0.5 * (1 + np.cos(np.pi * fade))
        lengths = {name: values[f"m {name}"] for name in lengths_of(self.rig)}
        found = np.empty((len(self.shot.passages), self._bins.size), dtype=complex)
        for row, one in enumerate(self.shot.passages):
            delay = chain_delay_s(self.rig.gauges[one.station])
            delay += values.get(CONTACT, 0.0) if one.way.crosses else 0.0
            phase = omega * delay
            for side, wavenumber in waves.items():
                phase = phase + wavenumber * one.way.length_m(side, lengths)
            full = np.zeros(self._grid.size, dtype=complex)
            full[:passed] = self._spectra[one.station][:passed] * band * np.exp(1j * phase)
            trace = np.fft.irfft(full, self._length)[self._start : self._start + self._count]
            found[row] = one.way.sign * np.fft.rfft(trace * self._window)[self._bins]
        return Spectra(self.frequency_hz, found, self._weight(found, values, problem), self._zero)

    def _wavenumber(self, values: Mapping[str, float], problem: Problem, side: str) -> FloatArray:
        """w/c(f) of one bar on the long grid [1/m]."""
        c, nu = values[problem.own("c", side)], values[problem.own("nu", side)]
        passed = int(np.searchsorted(self._grid * self.unit_s, _NONE_FA_C0))
        radius = float(bar_of(self.rig, side).radius_m) * (1 + values[problem.own("d", side)])
        fa_c0 = self._grid[:passed] * radius / c
        wavenumber: FloatArray = 2 * np.pi * self._grid[:passed] / c * mode_at(fa_c0, nu).slowness
        return wavenumber

    def _weight(self, found: ComplexArray, values: Mapping[str, float], problem: Problem) -> FloatArray:
        """One by the variance, up to where a passage has no signal or its slow waves are not recorded any more."""
        weight = np.zeros(found.shape)
        kernel = np.ones(2 * _NEIGHBOURS + 1)
        count = np.convolve(np.ones(found.shape[1]), kernel, "same")
        lengths = {name: values[f"m {name}"] for name in lengths_of(self.rig)}
        # Slow waves must have passed before the record fades out.
        samples = self.shot.fired.record.samples - self._fade
        last_s = samples * self.shot.interval_s - self.shot.origin_s - MARGIN_RADII * self.unit_s
        for row, one in enumerate(self.shot.passages):
            power = np.convolve(np.abs(found[row]) ** 2, kernel, "same") / count
            poor = np.flatnonzero(power < _POWER_BY_NOISE * self.variance[row])
            late = np.zeros(found.shape[1])
            for side in problem.sides:
                c, radius = values[problem.own("c", side)], float(bar_of(self.rig, side).radius_m)
                mode = mode_at(self.frequency_hz * radius / c, values[problem.own("nu", side)])
                late += one.way.length_m(side, lengths) / c * mode.group_slowness
            missed = np.flatnonzero(late + self.shot.duration_s > last_s)
            stop = min([found.shape[1], *poor[:1], *missed[:1]])
            # Real and imaginary part share the variance of a bin.
            weight[row, :stop] = 2 / self.variance[row]
        return weight


def _soft(samples: int, end: int) -> FloatArray:
    """A window with raised-cosine ends, shape (samples,)."""
    rise = 0.5 * (1 - np.cos(np.pi * (np.arange(end) + 0.5) / end))
    window = np.ones(samples)
    window[:end], window[samples - end :] = rise, rise[::-1]
    return window
