"""What a small change of each quantity does to the pulses at the faces, and to the formulas behind them.

All of it on a thinned grid that still carries what passed the low-pass; the changes are as smooth as the pulses are.

References
----------
Derivatives of the formulas in :mod:`shpb.response.bar_analysis` and of the phase exp(-i w x/c) in
:mod:`shpb.wave.propagation`, written out.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from shpb.arrays import ComplexArray, FloatArray
from shpb.pulse.pulse import Pulse
from shpb.pulse.pulses import TAPER_RADII
from shpb.response.bar_analysis import FaceMotion
from shpb.rig.bar import Bar
from shpb.settings import Dispersion
from shpb.trust.evidence import Evidence
from shpb.trust.sources import BAND_SHARE, PULSES, laid_on_feet
from shpb.trust.station_changes import StationChanges
from shpb.wave.complex_propagation import measured_wave, u_attenuation_per_m
from shpb.wave.pochhammer import first_mode_at_frequency
from shpb.wave.propagation import LowPass, fast_length

IntArray = NDArray[np.intp]

# Relative changes of these numbers in the formulas, in this order.
SCALES = (
    "force_in",
    "force_out",
    "velocity_in",
    "velocity_out",
    "impedance_in",
    "impedance_out",
    "area",
    "length",
)

_DISPERSED = ("poisson", "diameter", "speed", "distance", "attenuation")
_POISSON_STEP = 0.005
_MODE_POINTS = 48
POINTS_IN_A_PERIOD = 6  # of the shortest that passes the low-pass


class Scene(NamedTuple):
    """What the sources act on, thinned; arrays of shape (thinned samples,)."""

    evidence: Evidence
    at: IntArray  # samples of the response that are looked at
    interval_s: float
    time_s: FloatArray
    strains: FloatArray  # at the faces, shape (3, thinned samples)
    slopes: FloatArray  # of those [1/s]
    spectra: NDArray[np.complex128]  # of those, padded, shape (3, bins)
    frequency_hz: FloatArray
    motion: FaceMotion

    def back(self, spectra: NDArray[np.complex128]) -> FloatArray:
        """From changed spectra, shape (..., bins), to the thinned grid."""
        whole = np.fft.irfft(spectra, 2 * (self.frequency_hz.size - 1))
        return whole[..., : self.time_s.size]


def scene_of(evidence: Evidence) -> Scene:
    """Thin a shot to six points in the shortest period that passes the low-pass, nine in that of its cut-off."""
    faces, response = evidence.faces, evidence.response
    stride = max(int(1 / (POINTS_IN_A_PERIOD * faces.low_pass.stop_hz * faces.interval_s)), 1)
    index = np.append(np.arange(0, response.time_s.size - 1, stride), response.time_s.size - 1)
    strains = np.stack([getattr(faces, name).strain[index] for name in PULSES])
    time, interval = response.time_s[index], faces.interval_s * stride
    # Room for what a change of dispersion moves beyond the end; it is short, so a tenth will do.
    length = fast_length(index.size + index.size // 10 + 32)
    return Scene(
        evidence=evidence,
        at=index,
        interval_s=interval,
        time_s=time,
        strains=strains,
        slopes=np.gradient(strains, time, axis=1),
        spectra=np.fft.rfft(strains, length),
        frequency_hz=np.fft.rfftfreq(length, interval).astype(np.float64, copy=False),
        motion=FaceMotion(*(values[index] for values in response.motion)),
    )


def scale_changes(parameter: str) -> dict[str, float]:
    """Relative change of each of ``SCALES`` by that of a quantity: F = rho c^2 A strain, v = c strain, Z = rho c A."""
    what, _, side = parameter.rpartition("_")
    if parameter == "specimen_diameter":
        return {"area": 2.0}
    if parameter == "specimen_length":
        return {"length": 1.0}
    power = {"speed": (2.0, 1.0, 1.0), "density": (1.0, 0.0, 1.0), "diameter": (2.0, 0.0, 2.0)}.get(what)
    if power is None:
        return {}
    return dict(zip((f"force_{side}", f"velocity_{side}", f"impedance_{side}"), power, strict=True))


class PulseChanges:
    """Change of the three pulses at the faces by a unit change of one quantity, worked out when first asked for."""

    def __init__(self, scene: Scene) -> None:
        self._scene = scene
        self._known: dict[str, dict[int, FloatArray]] = {}
        self.stations = (
            StationChanges(scene.evidence, scene.time_s, scene.strains, scene.slopes)
            if scene.evidence.pulses.separated
            else None
        )

    def __call__(self, parameter: str) -> dict[int, FloatArray]:
        """Changes by position of the pulse in ``PULSES``, shape (thinned samples,) each.

        Number 3 is the wave that comes back in the transmitted bar, where stations tell it apart.
        """
        if parameter not in self._known:
            what, _, which = parameter.rpartition("_")
            by_stations = None if self.stations is None else self.stations(parameter)
            if by_stations is not None:
                found = by_stations
            elif parameter == "band":
                found = self._band()
            elif what in _DISPERSED:
                found = _together(self._rigid(what, which), self._dispersed(what, which))
            elif which in PULSES:
                found = {PULSES.index(which): self._of_pulse(what, which)}
            else:
                found = {}
            self._known[parameter] = found
        return self._known[parameter]

    def _of_pulse(self, what: str, which: str) -> FloatArray:
        scene, n = self._scene, PULSES.index(which)
        pulse: Pulse = getattr(scene.evidence.pulses, which)
        if what == "strain":
            return np.asarray(scene.strains[n])
        if what == "level":
            return np.ones(scene.time_s.size)
        if what == "slope":
            evidence = scene.evidence
            interval = evidence.pulses.sample_interval_s
            centre = evidence.strain.start_s + pulse.zero.centre * interval
            return np.asarray(scene.time_s - scene.time_s[0] + (pulse.start_s - centre))
        if what == "delay":
            return np.asarray(-scene.slopes[n])
        assert what == "window", what
        return window_change(
            scene.strains[n], scene.time_s, pulse, self._to_face_s(which), soft_s(pulse, scene.evidence)
        )

    def _to_face_s(self, which: str) -> float:
        """What is added to a time at the gauge to have it on the clock of the faces [s]."""
        evidence = self._scene.evidence
        rig, faces = evidence.rig, evidence.faces
        travel_i = rig.incident_gauge.to_specimen_m / rig.incident_bar.front_speed_m_s
        travel_t = rig.transmitted_gauge.to_specimen_m / rig.transmitted_bar.front_speed_m_s
        travel = {
            "incident": travel_i,
            "reflected": faces.reflected_shift_s - travel_i,
            "transmitted": faces.transmitted_shift_s - travel_t,
        }
        return float(travel[which] - faces.record_time_of_zero_s)

    def _rigid(self, what: str, bar: str) -> dict[int, FloatArray]:
        """A longer way or a slower wave lays pulses earlier against the incident foot, if they are not laid on it."""
        if what not in ("distance", "speed"):
            return {}
        scene = self._scene
        rig = scene.evidence.rig
        laid_r, laid_t = laid_on_feet(scene.evidence)
        if bar == "in":
            travel = rig.incident_gauge.to_specimen_m / rig.incident_bar.wave_speed_m_s
        else:
            travel = rig.transmitted_gauge.to_specimen_m / rig.transmitted_bar.wave_speed_m_s
        earlier = travel if what == "distance" else -travel
        found = {}
        if bar == "in" and not laid_r:
            found[1] = 2 * earlier * scene.slopes[1]
        if not laid_t:
            found[2] = earlier * scene.slopes[2]
        return found

    def _dispersed(self, what: str, bar: str) -> dict[int, FloatArray]:
        """Change of the phase exp(-i w x s) with s = 1/c - 1/c0: -i w x ds times the spectrum."""
        scene = self._scene
        evidence = scene.evidence
        if evidence.settings.dispersion is Dispersion.NONE:
            return {}
        rig = evidence.rig
        x_i, x_t = rig.incident_gauge.to_specimen_m, rig.transmitted_gauge.to_specimen_m
        ways = {0: x_i, 1: -x_i} if bar == "in" else {2: -x_t}
        of = rig.incident_bar if bar == "in" else rig.transmitted_bar
        slope = _slowness_change(what, of, scene.frequency_hz, evidence.faces.low_pass)
        phase = -2j * np.pi * scene.frequency_hz * slope
        if what == "attenuation" and of.propagation is not None:
            # The short spectrum's first bin stands for all below half the next one.
            phase[0] = -u_attenuation_per_m(of.propagation, scene.frequency_hz[1:2] / 2)[0]
        changed = scene.back(np.stack([phase * (way * scene.spectra[n]) for n, way in ways.items()]))
        return dict(zip(ways, changed, strict=True))

    def _band(self) -> dict[int, FloatArray]:
        """All three pulses with a lower cut-off, less what they are: one filter serves them all."""
        scene = self._scene
        lower = lower_band(scene.evidence.faces.low_pass, scene.frequency_hz)
        return dict(enumerate(scene.back(scene.spectra * lower)))


def lower_band(low_pass: LowPass, frequency_hz: FloatArray) -> FloatArray:
    """Relative change of what has passed, by a cut-off lower by ``BAND_SHARE``; -1 where nothing would pass."""
    gain = low_pass.gain(frequency_hz)
    lower = LowPass((1 - BAND_SHARE) * low_pass.cutoff_hz).gain(frequency_hz)
    return np.divide(lower, gain, out=np.ones_like(gain), where=gain > 0) - 1.0


def soft_s(pulse: Pulse, evidence: Evidence) -> float:
    """Length of the soft ends of a window [s]."""
    bar = evidence.rig.transmitted_bar if pulse.name == "transmitted" else evidence.rig.incident_bar
    return float(TAPER_RADII * bar.radius_time_s)


def soft_window(samples: int, soft: float) -> FloatArray:
    """One, with raised-cosine ends of ``soft`` samples, as the pulses were cut, shape (samples,)."""
    inward = np.minimum(np.arange(samples), np.arange(samples)[::-1]) + 0.5
    length = max(min(int(soft), samples // 4), 1)
    window: FloatArray = 0.5 * (1 - np.cos(np.pi * np.clip(inward / length, 0.0, 1.0)))
    return window


def window_change(
    strain: FloatArray, time_s: FloatArray, pulse: Pulse, to_face_s: float, soft: float
) -> FloatArray:
    """Change of a pulse whose window is drawn in by its soft length at both ends, shape of ``strain``."""
    start, stop = (end + to_face_s for end in pulse.window_s)
    inward = np.minimum(time_s - start, stop - time_s)
    kept = 0.5 * (1 - np.cos(np.pi * np.clip(inward / soft - 1.0, 0.0, 1.0)))
    change: FloatArray = (kept - 1.0) * strain
    return change


def _together(first: dict[int, FloatArray], second: dict[int, FloatArray]) -> dict[int, FloatArray]:
    """Two changes of the same pulses, added."""
    return first | {n: change + first[n] if n in first else change for n, change in second.items()}


def _slowness_change(
    what: str, bar: Bar, frequency_hz: FloatArray, low_pass: LowPass
) -> FloatArray | ComplexArray:
    """Change of 1/c - 1/c0 [s/m] by Poisson's ratio, or by a relative change of diameter, wave speed or distance.

    With P = c0/c of x = f a/c0: dP/dnu, x P', -(x P' + P - 1), and for the distance P - 1 itself, all by c0.
    """
    if bar.propagation is not None:
        return _measured_slowness_change(what, bar, frequency_hz)
    at, minus_one, steep, by_poisson = _mode(
        float(bar.poisson_ratio), round(low_pass.stop_hz * bar.radius_time_s, 6)
    )
    row = {"poisson": by_poisson, "diameter": steep, "speed": -(steep + minus_one), "distance": minus_one}[
        what
    ]
    laid: FloatArray = np.interp(frequency_hz * bar.radius_time_s, at, row)
    return laid / bar.wave_speed_m_s


def _measured_slowness_change(what: str, bar: Bar, frequency_hz: FloatArray) -> ComplexArray:
    """The same for a bar with a measured table: its speed is in error by one share at all frequencies, its attenuation
    by its own standard uncertainty; neither diameter nor Poisson's ratio move what was measured.
    """
    if what == "attenuation":
        return attenuation_slowness(bar, frequency_hz)
    slowness = measured_wave(bar, frequency_hz).slowness_s_m - 1.0 / bar.wave_speed_m_s
    return {"speed": -1.0, "distance": 1.0}.get(what, 0.0) * slowness


def attenuation_slowness(bar: Bar, frequency_hz: FloatArray) -> ComplexArray:
    """Change of xi/(i w) by one standard uncertainty of the measured attenuation [s/m], zero at rest."""
    assert bar.propagation is not None
    omega = 2j * np.pi * np.where(frequency_hz > 0, frequency_hz, 1.0)
    change: ComplexArray = u_attenuation_per_m(bar.propagation, frequency_hz) / omega
    return change


@lru_cache(maxsize=32)
def _mode(poisson_ratio: float, stop_fa_c0: float) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Points x = f a/c0 up to a frequency, and P - 1, x P', dP/dnu of the first mode; once for all shots of a bar.

    The slope x P' is c0/c_g - c0/c, because 1/c_g is the slope of f/c.
    """
    at = np.linspace(0.0, stop_fa_c0, _MODE_POINTS)
    mode = first_mode_at_frequency(at, poisson_ratio)
    low, high = max(poisson_ratio - _POISSON_STEP, 0.0), min(poisson_ratio + _POISSON_STEP, 0.49)
    slow, fast = (1 / first_mode_at_frequency(at, nu).phase_speed for nu in (high, low))
    steep = 1 / mode.group_speed - 1 / mode.phase_speed
    return at, 1 / mode.phase_speed - 1, steep, (slow - fast) / (high - low)
