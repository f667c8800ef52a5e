"""What noise and zero lines of the stations of a bar leave in both waves at the specimen's face.

Separation and low-pass are linear and the same at all times: what a unit sample at a station leaves later is a kernel,
and white noise that starts with the station leaves the running sum of its squares.
"""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.pulse import Pulse
from shpb.pulse.separated import SeparatedBar
from shpb.rig.bar import Bar
from shpb.settings import Dispersion
from shpb.wave.laplace import LaplaceGrid, laplace_grid, propagation_at
from shpb.wave.propagation import LowPass
from shpb.wave.stations import Stations


def stations_of(bar: SeparatedBar, material: Bar, interval_s: float, dispersion: Dispersion) -> Stations:
    """Return the stations of a separated bar, to work out more of their waves; ``material`` may be changed."""
    grid = laplace_grid(bar.strain.shape[1], interval_s, bar.stop_hz)
    return stations_on(bar, material, grid, dispersion)


def stations_on(bar: SeparatedBar, material: Bar, grid: LaplaceGrid, dispersion: Dispersion) -> Stations:
    """As :func:`stations_of`, on a grid that is there already."""
    xi = propagation_at(material, grid.p_per_s, dispersion)
    return Stations(np.asarray(bar.positions_m), xi, np.asarray(bar.noise), grid)


def left_at_face_s(bar: SeparatedBar, pulse: Pulse, material: Bar) -> float:
    """When the window of the wave to the left opens at the face, since the bar's stretch of record began [s]."""
    return pulse.window_s[0] - bar.begin_s + bar.positions_m[0] / material.wave_speed_m_s


class FaceKernels:
    """Kernels of one bar's stations at the face, behind the low-pass.

    Attributes
    ----------
    right, left : float array, shape (stations, ahead + samples)
        What a unit sample at a station leaves in each wave; the first ``ahead`` samples are before it.
    """

    def __init__(
        self,
        bar: SeparatedBar,
        material: Bar,
        low_pass: LowPass,
        interval_s: float,
        dispersion: Dispersion,
    ) -> None:
        self._bar, self._interval_s = bar, interval_s
        stations = stations_of(bar, material, interval_s, dispersion)
        far = max(abs(x) for x in bar.positions_m) / material.wave_speed_m_s
        grid = stations.grid
        self.ahead = min(int((1.2 * far + low_pass.settling_s) / interval_s), grid.length - grid.samples)
        kernels = stations.operator(0.0).kernels(low_pass.gain(grid.frequency_hz), self.ahead)
        self.right, self.left = kernels

    def variance(self, kernel: FloatArray, k: int, since_s: FloatArray) -> FloatArray:
        """Variance by unit white noise at station ``k`` through a kernel; ``since_s`` as in :meth:`force_variance`."""
        return self._laid(np.cumsum(kernel**2), k, since_s)

    def step(self, kernel: FloatArray, k: int, since_s: FloatArray) -> FloatArray:
        """What a unit offset of the zero of station ``k`` has grown to, through a kernel."""
        return self._laid(np.cumsum(kernel), k, since_s)

    def _laid(self, running: FloatArray, k: int, since_s: FloatArray) -> FloatArray:
        """A running sum at times since the first station's start [s]."""
        place = since_s / self._interval_s - self._bar.starts[k] + self.ahead
        at = np.clip(place, 0, running.size - 1).astype(np.intp)
        laid: FloatArray = running[at]
        return laid

    def force_variance(self, since_s: FloatArray, left_from_s: float) -> FloatArray:
        """Variance of the face's strain (force by E A) by noise and zero levels of all stations, shape of the times.

        ``since_s`` counts from where the bar's stretch of record begins; before ``left_from_s`` the wave to the left is
        cut.
        """
        total = np.zeros(since_s.size)
        for k, (noise, zero) in enumerate(zip(self._bar.noise, self._bar.zeros, strict=True)):
            parts = [
                noise**2 * self.variance(kernel, k, since_s)
                + (zero.u_level * self.step(kernel, k, since_s)) ** 2
                for kernel in (self.right[k], self.right[k] + self.left[k])
            ]
            total += np.where(since_s >= left_from_s, parts[1], parts[0])
        return total
