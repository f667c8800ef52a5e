"""The three pulses of one shot carried to the faces many times at once, each time with other bars and other errors.

Nothing above the end of the low-pass comes to the faces, so a windowed pulse is fully described by the few bins of its
spectrum below that: 100 to 300 of them. A draw changes these bins (scale, zero line, window, noise, band limit), turns
their phases for its own wave speed, radius, Poisson's ratio and distances, and goes back to time on a thinned grid.

The first mode is solved for three Poisson's ratios and three ratios of radius to wave speed; in between, a polynomial
of second degree in both serves.

References
----------
As :mod:`shpb.wave.propagation`; the same steps, written for rows of draws.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.pulse.pulse import Pulse
from shpb.rig.bar import Bar
from shpb.settings import Dispersion
from shpb.trust.changes import (
    POINTS_IN_A_PERIOD,
    attenuation_slowness,
    lower_band,
    soft_s,
    soft_window,
    window_change,
)
from shpb.trust.evidence import Evidence
from shpb.trust.sources import PULSES, laid_on_feet
from shpb.wave.pochhammer import first_mode_at_frequency
from shpb.wave.propagation import LowPass, capped_factor, fast_length, measured_factors

_LEAST_STEP = 0.005  # of the nodes: relative for radius by wave speed, absolute for Poisson's ratio
_BARS = ("in", "out")
_BAR_OF = ("in", "in", "out")  # of each pulse

Factor = FloatArray | ComplexArray


class FaceStrains(NamedTuple):
    """Strains at the faces by draw, shape (draws, samples); force and velocity strains are one without amplitude
    correction.
    """

    force: tuple[FloatArray, ...]  # incident, reflected, transmitted
    velocity: tuple[FloatArray, ...]


class Drawn(NamedTuple):
    """What a chunk of draws changes: factors and sums of all sources by quantity, and noise."""

    factors: Mapping[str, FloatArray]  # of relative quantities, shape (draws,)
    sums: Mapping[str, FloatArray]  # of the others, shape (draws,)
    noise: Mapping[
        str, FloatArray
    ]  # by pulse: standard deviation times standard normal, shape (draws, 2 bins)
    draws: int

    def factor(self, parameter: str) -> FloatArray:
        """Factor on a relative quantity, shape (draws, 1)."""
        value = self.factors.get(parameter)
        return np.ones((self.draws, 1)) if value is None else value[:, None]

    def sum(self, parameter: str) -> FloatArray:
        """What is added to a quantity, shape (draws, 1)."""
        value = self.sums.get(parameter)
        return np.zeros((self.draws, 1)) if value is None else value[:, None]


class DrawnFaces:
    """Carries the pulses of one shot to the faces, many draws at once.

    ``spread`` gives the standard uncertainty of Poisson's ratio and of radius by wave speed (relative) of each bar: how
    far the modes must be known.

    Attributes
    ----------
    time_s : float array, shape (samples,)
        The thinned grid, on the clock of the faces.
    bins : int
        Bins of the spectrum that pass.
    """

    def __init__(self, evidence: Evidence, spread: Mapping[str, tuple[float, float]]) -> None:
        faces, rig = evidence.faces, evidence.rig
        dt, low_pass = evidence.pulses.sample_interval_s, faces.low_pass
        self.evidence, self.low_pass = evidence, low_pass
        self._ways = (rig.incident_gauge.to_specimen_m, rig.transmitted_gauge.to_specimen_m)
        self._laid = laid_on_feet(evidence)
        start = faces.record_time_of_zero_s + faces.time_s[0]
        travels = self._travels()
        shifts = (0.0, faces.reflected_shift_s, faces.transmitted_shift_s)
        self._delays = [
            pulse.start_s + travel + shift - start
            for pulse, travel, shift in zip(evidence.pulses, travels, shifts, strict=True)
        ]
        length = self._length(dt)
        self.frequency_hz: FloatArray = np.fft.rfftfreq(length, dt).astype(np.float64, copy=False)
        self.frequency_hz = self.frequency_hz[: int(np.searchsorted(self.frequency_hz, low_pass.stop_hz))]
        self.bins = self.frequency_hz.size
        self._short = fast_length(int(np.ceil(POINTS_IN_A_PERIOD * low_pass.stop_hz * length * dt)))
        self.interval_s = length * dt / self._short
        samples = int((faces.time_s[-1] - faces.time_s[0]) / self.interval_s) + 1
        self.time_s: FloatArray = faces.time_s[0] + self.interval_s * np.arange(float(samples))
        self._scale = self._short / length
        self._noise_scale = np.sqrt(length / 2.0) * np.ones(self.bins)
        self._noise_scale[0] *= np.sqrt(2.0)  # the mean is real: all of its variance is in one number
        self._gain = low_pass.gain(self.frequency_hz)
        self._lower = self._gain * lower_band(low_pass, self.frequency_hz)
        self._bases = [_basis(pulse, evidence, length, self.bins) for pulse in evidence.pulses]
        bars = dict(zip(_BARS, (rig.incident_bar, rig.transmitted_bar), strict=True))
        self._modes = {
            side: _Modes(bar, spread[side], self.frequency_hz, evidence.settings.dispersion)
            for side, bar in bars.items()
        }

    def _travels(self) -> tuple[float, float, float]:
        """Rigid delay of each pulse from gauge to face as it was reduced [s]."""
        rig = self.evidence.rig
        travel_i = self._ways[0] / rig.incident_bar.wave_speed_m_s
        return travel_i, -travel_i, -self._ways[1] / rig.transmitted_bar.wave_speed_m_s

    def _length(self, dt: float) -> int:
        """FFT length for which nothing that wraps around comes onto the grid."""
        faces = self.evidence.faces
        low, high = 0.0, faces.time_s.size * faces.interval_s
        bars = (self.evidence.rig.incident_bar, self.evidence.rig.transmitted_bar)
        slow = max(
            _slowest_residual(bar, self.low_pass) * way for bar, way in zip(bars, self._ways, strict=True)
        )
        margin = self.low_pass.settling_s + 1.1 * slow
        for pulse, delay in zip(self.evidence.pulses, self._delays, strict=True):
            low = min(low, delay - margin)
            high = max(high, delay + pulse.strain.size * dt + margin)
        return fast_length(int(np.ceil((high - low) / dt)))

    def __call__(self, drawn: Drawn) -> FaceStrains:
        """Strains at the faces of a chunk of draws."""
        slowness = {side: self._modes[side].slowness(drawn, side) for side in _BARS}
        way = [
            side_way * drawn.factor(f"distance_{side}")
            for side, side_way in zip(_BARS, self._ways, strict=True)
        ]
        gain = self._gain + drawn.sum("band") * self._lower
        rigid = self._rigid(drawn, way)
        force: list[FloatArray] = []
        velocity: list[FloatArray] = []
        for n, side in enumerate(_BAR_OF):
            distance = (way[0], -way[0], -way[1])[n]
            phase = np.exp((-2j * np.pi * self.frequency_hz) * (rigid[n] + distance * slowness[side]))
            spectrum = self._spectrum(n, drawn) * gain * phase
            factors = self._modes[side].factors(drawn, side)
            if factors is None:
                force.append(self._to_time(spectrum))
                velocity.append(force[-1])
            else:
                force.append(self._to_time(spectrum * factors[0]))
                velocity.append(self._to_time(spectrum * factors[1]))
        return FaceStrains(tuple(force), tuple(velocity))

    def _spectrum(self, n: int, drawn: Drawn) -> ComplexArray:
        """Bins of one windowed pulse at its gauge, shape (draws, bins)."""
        name = PULSES[n]
        parts = np.concatenate(
            [
                drawn.factor(f"strain_{name}"),
                *(drawn.sum(f"{what}_{name}") for what in ("level", "slope", "window")),
            ],
            axis=1,
        )
        spectrum: ComplexArray = np.einsum("dk,kb->db", parts, self._bases[n])
        noise = drawn.noise.get(name)
        if noise is not None:
            spectrum += np.ascontiguousarray(noise).view(np.complex128) * self._noise_scale
        return spectrum

    def _rigid(self, drawn: Drawn, way: list[FloatArray]) -> list[FloatArray]:
        """Rigid delay of each pulse, shape (draws, 1), on a clock whose zero is the draw's own incident foot."""
        rig = self.evidence.rig
        travel_i = way[0] / (rig.incident_bar.wave_speed_m_s * drawn.factor("speed_in"))
        travel_t = way[1] / (rig.transmitted_bar.wave_speed_m_s * drawn.factor("speed_out"))
        usual_i, _, usual_t = self._travels()
        moved = (-2 * (travel_i - usual_i), -(travel_i - usual_i) - (travel_t + usual_t))
        delays = [self._delays[0] + np.zeros((drawn.draws, 1))]
        for n, laid in enumerate(self._laid, 1):
            delays.append(self._delays[n] + (0.0 if laid else moved[n - 1]) + drawn.sum(f"delay_{PULSES[n]}"))
        return delays

    def _to_time(self, spectrum: ComplexArray) -> FloatArray:
        """From bins to the thinned grid, shape (draws, samples)."""
        whole = np.fft.irfft(spectrum, self._short, axis=1)
        strain: FloatArray = whole[:, : self.time_s.size] * self._scale
        return strain


def _basis(pulse: Pulse, evidence: Evidence, length: int, bins: int) -> ComplexArray:
    """Bins of a pulse, of a unit level in its window, of a unit slope, and of the change of its window: (4, bins)."""
    dt = evidence.pulses.sample_interval_s
    time = pulse.start_s + dt * np.arange(float(pulse.strain.size))
    centre = evidence.strain.start_s + pulse.zero.centre * dt
    soft = soft_s(pulse, evidence)
    window = soft_window(pulse.strain.size, soft / dt)
    rows = (
        pulse.strain,
        window,
        window * (time - centre),
        window_change(pulse.strain, time, pulse, 0.0, soft),
    )
    return np.stack([np.fft.rfft(row, length)[:bins] for row in rows])


def _slowest_residual(bar: Bar, low_pass: LowPass) -> float:
    """1/c_g - 1/c0 of the slowest group that passes the low-pass with any strength [s/m]."""
    frequency = np.linspace(0.0, low_pass.stop_hz, 60)
    frequency = frequency[low_pass.gain(frequency) > 1e-3]
    group = first_mode_at_frequency(frequency * bar.radius_time_s, bar.poisson_ratio).group_speed
    return float((1 / group.min() - 1) / bar.wave_speed_m_s)


class _Modes:
    """The first mode of a bar about its own values: slowness, and factors of force and velocity with amplitude."""

    def __init__(
        self, bar: Bar, spread: tuple[float, float], frequency_hz: FloatArray, dispersion: Dispersion
    ) -> None:
        self._bar, self._dispersion = bar, dispersion
        nu = float(bar.poisson_ratio)
        step = max(2 * spread[0], _LEAST_STEP)
        middle = min(max(nu, step), 0.49 - step)
        self._poisson = np.array([middle - step, middle, middle + step])
        self._stretch = np.array([-1.0, 0.0, 1.0]) * max(2 * spread[1], _LEAST_STEP)
        self._attenuation: ComplexArray | None = (
            None  # by one standard uncertainty, of a bar with a measured table
        )
        if dispersion is Dispersion.NONE:
            return
        if bar.propagation is not None:
            # One table for all nodes: neither radius nor Poisson's ratio move what was measured.
            measured = measured_factors(bar, frequency_hz, dispersion)
            self._table, *factors = (row[None] for row in measured)
            self._measured_factors = factors[0], factors[1]
            self._attenuation = attenuation_slowness(bar, frequency_hz)
            return
        slowness, force, velocity = [], [], []
        for poisson in self._poisson:
            for stretch in self._stretch:
                mode = first_mode_at_frequency(
                    frequency_hz * bar.radius_time_s * (1 + stretch), float(poisson)
                )
                slowness.append((1 / mode.phase_speed - 1) / bar.wave_speed_m_s)
                if dispersion is Dispersion.FULL:
                    force.append(capped_factor(mode, mode.stress))
                    velocity.append(capped_factor(mode, mode.velocity))
        self._slowness = np.stack(slowness)
        self._factors = tuple(map(np.stack, (force, velocity))) if force else ()

    def slowness(self, drawn: Drawn, side: str) -> FloatArray | ComplexArray:
        """1/c - 1/c0, shape (draws, bins) [s/m]."""
        if self._dispersion is Dispersion.NONE:
            return np.zeros((drawn.draws, 1))
        if self._attenuation is not None:
            lossy: ComplexArray = self._table / drawn.factor(f"speed_{side}")
            return lossy + drawn.sum(f"attenuation_{side}") * self._attenuation
        found: FloatArray = np.einsum("dk,kb->db", self._weights(drawn, side), self._slowness)
        return found / drawn.factor(f"speed_{side}")

    def factors(self, drawn: Drawn, side: str) -> tuple[Factor, Factor] | None:
        """Surface strain to force strain and to velocity strain, shape (draws, bins); None without amplitude."""
        if self._attenuation is not None:
            return self._measured_factors
        if self._dispersion is not Dispersion.FULL:
            return None
        weights = self._weights(drawn, side)
        force, velocity = (np.einsum("dk,kb->db", weights, table) for table in self._factors)
        return force, velocity

    def _weights(self, drawn: Drawn, side: str) -> FloatArray:
        """Lagrange's weights of the nine nodes, shape (draws, 9)."""
        poisson = self._bar.poisson_ratio + drawn.sum(f"poisson_{side}")[:, 0]
        stretch = (drawn.factor(f"diameter_{side}") / drawn.factor(f"speed_{side}"))[:, 0] - 1.0
        a, b = _lagrange(np.clip(poisson, 0.0, 0.49), self._poisson), _lagrange(stretch, self._stretch)
        return (a[:, :, None] * b[:, None, :]).reshape(drawn.draws, 9)


def _lagrange(x: FloatArray, nodes: FloatArray) -> FloatArray:
    """Weights of three nodes for a parabola through them, shape (values, 3)."""
    p, q, r = nodes
    return np.stack(
        (
            (x - q) * (x - r) / ((p - q) * (p - r)),
            (x - p) * (x - r) / ((q - p) * (q - r)),
            (x - p) * (x - q) / ((r - p) * (r - q)),
        ),
        axis=1,
    )
