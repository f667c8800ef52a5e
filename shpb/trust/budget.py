"""Uncertainty of one shot's curves: what every source would change, pulse by pulse, carried to stress, strain and rate.

A source acts on a whole trace: one gauge factor scales two pulses at once, a wave speed shifts them against each other
and scales force and velocity. So each source gives one curve of change in every output, and correlations are carried by
adding changes before squaring, never sample by sample. White noise alone is independent from sample to sample.

References
----------
JCGM 100:2008 (GUM), 5.1.2: law of propagation of uncertainty, first order. The sensitivities are the derivatives of the
formulas in :mod:`shpb.response.bar_analysis`, written out.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from shpb.arrays import FloatArray, dot, frozen
from shpb.response.bar_analysis import FaceMotion, integrated
from shpb.response.response import Response
from shpb.rig.bar import Bar
from shpb.rig.gauge import Gauge, TestKind
from shpb.settings import Analysis
from shpb.trust.evidence import Evidence

IntArray = NDArray[np.intp]

OUTPUTS = ("stress_1w", "strain_rate_1w", "strain_1w", "stress_3w", "strain_rate_3w", "strain_3w")

# Where nobody has stated an uncertainty (common practice; relative standard uncertainties).
ASSUMED = {
    "gauge factor": 0.005,
    "excitation": 0.001,
    "gain": 0.002,
    "density": 0.002,
    "wave speed": 0.002,
    "bar diameter": 0.0005,
    "specimen diameter": 0.001,
    "specimen length": 0.002,
    "gauge distance": 0.001,
}


class _Change(NamedTuple):
    """What one standard uncertainty of a source changes: strains at the faces, and scales of the formulas."""

    incident: FloatArray | float = 0.0
    reflected: FloatArray | float = 0.0
    transmitted: FloatArray | float = 0.0
    force_in: float = 0.0  # relative
    force_out: float = 0.0
    velocity_in: float = 0.0
    velocity_out: float = 0.0
    area: float = 0.0
    length: float = 0.0


class _Source(NamedTuple):
    name: str
    shared: bool  # by all shots of the rig, or this shot's own
    assumed: bool  # nobody has stated it
    change: _Change


@dataclass(frozen=True, slots=True, kw_only=True)
class Contribution:
    """One line of the budget, at the middle of what counts.

    ``share`` is the share of the variance of each output, in the order of ``OUTPUTS``.
    """

    source: str
    shared: bool
    assumed: bool
    share: tuple[float, ...]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Budget:
    """Standard uncertainties of the curves, worked out on a thinned grid and laid on the response's when asked for.

    Attributes
    ----------
    time_s : float array, shape (thinned samples,)
        The grid that was worked on; the same as the response's where that is not much finer than need be.
    response_time_s : float array, shape (samples,)
        Time axis of the response, on which all arrays below are given.
    total, shared : float array, shape (outputs, thinned samples)
        Standard uncertainty of each of ``OUTPUTS``, whole and the part that all shots of the rig share.
    true : float array, shape (2, thinned samples)
        Of true strain and of true stress of the curve put forward.
    contributions : tuple of Contribution
        Ranked by their greatest share.
    """

    time_s: FloatArray
    response_time_s: FloatArray
    total: FloatArray
    shared: FloatArray
    true: FloatArray
    contributions: tuple[Contribution, ...] = field(default=())

    @property
    def u(self) -> dict[str, FloatArray]:
        """Standard uncertainty of each output [Pa], [1/s] or [1], shape (samples,) each."""
        return {name: self._laid(row) for name, row in zip(OUTPUTS, self.total, strict=True)}

    @property
    def u_shared(self) -> dict[str, FloatArray]:
        """The part that all shots of the rig share (wave speed, density, bar diameters, gauges)."""
        return {name: self._laid(row) for name, row in zip(OUTPUTS, self.shared, strict=True)}

    @property
    def u_true_strain(self) -> FloatArray:
        """Standard uncertainty of true strain of the curve put forward, shape (samples,)."""
        return self._laid(self.true[0])

    @property
    def u_true_stress_pa(self) -> FloatArray:
        """Standard uncertainty of true stress of the curve put forward [Pa], shape (samples,)."""
        return self._laid(self.true[1])

    def _laid(self, row: FloatArray) -> FloatArray:
        """A row on the time axis of the response, by straight lines."""
        if self.time_s.size == self.response_time_s.size:
            return row
        laid: FloatArray = np.interp(self.response_time_s, self.time_s, row)
        return laid


class _Scene(NamedTuple):
    """What the sources act on, thinned to a grid that still carries all that passed the low-pass."""

    evidence: Evidence
    at: IntArray  # samples of the response that are looked at
    interval_s: float
    time_s: FloatArray
    strains: dict[str, FloatArray]  # at the faces
    slopes: dict[str, FloatArray]  # of those [1/s]
    motion: FaceMotion
    rate_1w: FloatArray
    rate_3w: FloatArray
    stress_1w: FloatArray
    stress_3w: FloatArray


def _scene(evidence: Evidence) -> _Scene:
    faces, response = evidence.faces, evidence.response
    # Ten points in the shortest period that passes: the changes are as smooth as the pulses.
    stride = max(int(0.1 / faces.low_pass.stop_hz / faces.interval_s), 1)
    index = np.append(np.arange(0, response.time_s.size - 1, stride), response.time_s.size - 1)
    strains = {name: getattr(faces, name).strain[index] for name in ("incident", "reflected", "transmitted")}
    time = response.time_s[index]
    one, three = response.one_wave, response.three_wave
    return _Scene(
        evidence,
        index,
        faces.interval_s * stride,
        time,
        strains,
        {name: np.gradient(strain, time) for name, strain in strains.items()},
        FaceMotion(*(values[index] for values in response.motion)),
        one.strain_rate_per_s[index],
        three.strain_rate_per_s[index],
        one.stress_pa[index],
        three.stress_pa[index],
    )


def uncertainty_budget(evidence: Evidence) -> Budget:
    """Propagate every stated (or assumed) uncertainty to the curves, first order.

    The cost is a fraction of the reduction: no transform is done again, and the changes are worked out on a thinned
    grid.
    """
    scene = _scene(evidence)
    shared = np.zeros((len(OUTPUTS), scene.at.size))
    own = np.zeros_like(shared)
    span = evidence.response.span or evidence.response.loading
    middle = int(np.searchsorted(scene.at, (span[0] + span[1]) // 2))
    lines: list[tuple[_Source, FloatArray]] = []
    for source in _sources(scene):
        variance = _carried(source.change, scene) ** 2
        part = shared if source.shared else own
        part += variance
        lines.append((source, variance[:, middle]))
    noise = _white_noise(scene)
    own += noise
    lines.append((_Source("noise", shared=False, assumed=False, change=_Change()), noise[:, middle]))

    total = shared + own
    whole = np.maximum(total[:, middle], 1e-300)
    contributions = [
        Contribution(
            source=source.name,
            shared=source.shared,
            assumed=source.assumed,
            share=tuple(float(share) for share in variance / whole),
        )
        for source, variance in lines
    ]
    u = np.sqrt(total)
    return Budget(
        time_s=frozen(scene.time_s),
        response_time_s=evidence.response.time_s,
        total=frozen(u),
        shared=frozen(np.sqrt(shared)),
        true=frozen(_true(u, scene)),
        contributions=tuple(sorted(contributions, key=lambda c: -max(c.share))),
    )


# --- sources -----------------------------------------------------------------------------------


def _relative(value: float, name: str) -> tuple[float, bool]:
    """Relative standard uncertainty of a quantity, and whether it had to be assumed."""
    u = getattr(value, "u", None)
    return (ASSUMED[name], True) if u is None else (u / abs(value), False)


def _sources(scene: _Scene) -> Iterator[_Source]:
    rig, specimen = scene.evidence.rig, scene.evidence.sheet.specimen
    yield from _gauge_sources(scene, "incident", rig.incident_gauge)
    yield from _gauge_sources(scene, "transmitted", rig.transmitted_gauge)
    if rig.incident_bar == rig.transmitted_bar or _one_stock(rig.incident_bar, rig.transmitted_bar):
        # Bars of one stock: what was measured once acts on both.
        yield from _bar_sources(scene, "bars", rig.incident_bar, incident=True, transmitted=True)
    else:
        yield from _bar_sources(scene, "incident bar", rig.incident_bar, incident=True, transmitted=False)
        yield from _bar_sources(
            scene, "transmitted bar", rig.transmitted_bar, incident=False, transmitted=True
        )
    u, assumed = _relative(specimen.diameter_m, "specimen diameter")
    yield _Source("specimen diameter", False, assumed, _Change(area=2 * u))
    u, assumed = _relative(specimen.length_m, "specimen length")
    yield _Source("specimen length", False, assumed, _Change(length=u))
    yield from _pulse_sources(scene)


def _one_stock(a: Bar, b: Bar) -> bool:
    names = ("material", "density_kg_m3", "wave_speed_m_s", "diameter_m")
    return all(getattr(a, name) == getattr(b, name) for name in names)


def _gauge_sources(scene: _Scene, side: str, gauge: Gauge) -> Iterator[_Source]:
    """Gauge factor, excitation and gain scale the whole trace; the distance shifts pulses against each other."""
    rig, strains = scene.evidence.rig, scene.strains
    for name, value in (
        ("gauge factor", gauge.gauge_factor),
        ("excitation", gauge.excitation_v),
        ("gain", gauge.gain),
    ):
        u, assumed = _relative(value, name)
        if side == "incident":
            change = _Change(incident=u * strains["incident"], reflected=u * strains["reflected"])
        else:
            change = _Change(transmitted=u * strains["transmitted"])
        yield _Source(f"{side} {name}", True, assumed, change)
    u, assumed = _relative(gauge.to_specimen_m, "gauge distance")
    bar = rig.incident_bar if side == "incident" else rig.transmitted_bar
    delay = u * gauge.to_specimen_m / bar.wave_speed_m_s
    transmitted = scene.slopes["transmitted"] * delay
    # Time zero is the incident foot at the face: what moves it moves the two others against it.
    reflected = 2 * scene.slopes["reflected"] * delay if side == "incident" else 0.0
    yield _Source(
        f"{side} gauge distance", True, assumed, _Change(reflected=reflected, transmitted=transmitted)
    )


def _bar_sources(
    scene: _Scene, name: str, bar: Bar, *, incident: bool, transmitted: bool
) -> Iterator[_Source]:
    """Density and diameter scale forces; the wave speed scales force and velocity, and shifts the pulses."""
    rig = scene.evidence.rig
    for what, value, power in (("density", bar.density_kg_m3, 1), ("bar diameter", bar.diameter_m, 2)):
        u, assumed = _relative(value, what)
        change = _Change(force_in=power * u * incident, force_out=power * u * transmitted)
        yield _Source(f"{name}: {what.removeprefix('bar ')}", True, assumed, change)
    u, assumed = _relative(bar.wave_speed_m_s, "wave speed")
    travel_i = rig.incident_gauge.to_specimen_m / rig.incident_bar.wave_speed_m_s * incident
    travel_t = rig.transmitted_gauge.to_specimen_m / rig.transmitted_bar.wave_speed_m_s * transmitted
    yield _Source(
        f"{name}: wave speed",
        True,
        assumed,
        _Change(
            reflected=-2 * u * travel_i * scene.slopes["reflected"],
            transmitted=-u * (travel_i + travel_t) * scene.slopes["transmitted"],
            force_in=2 * u * incident,
            force_out=2 * u * transmitted,
            velocity_in=u * incident,
            velocity_out=u * transmitted,
        ),
    )


def _pulse_sources(scene: _Scene) -> Iterator[_Source]:
    """What each pulse has on its own: its zero line, and the error of gauge linearity, bending and dispersion."""
    evidence = scene.evidence
    pulses, error = evidence.pulses, evidence.settings.pulse_error
    time = scene.time_s - scene.time_s[0]
    for name, pulse in (
        ("incident", pulses.incident),
        ("reflected", pulses.reflected),
        ("transmitted", pulses.transmitted),
    ):
        strain = scene.strains[name]
        slope = pulse.zero.u_slope / pulses.sample_interval_s
        since = time + (
            pulse.start_s - (evidence.strain.start_s + pulse.zero.centre * pulses.sample_interval_s)
        )
        for what, change in (
            ("pulse", error * strain),
            ("zero level", np.full(time.size, pulse.zero.u_level)),
            ("zero slope", slope * since),
        ):
            yield _Source(f"{name} {what}", False, False, _in_pulse(name, change))


def _in_pulse(name: str, change: FloatArray) -> _Change:
    """A change of one pulse alone."""
    if name == "incident":
        return _Change(incident=change)
    return _Change(reflected=change) if name == "reflected" else _Change(transmitted=change)


# --- carried to the outputs -------------------------------------------------------------------------


def _carried(change: _Change, scene: _Scene) -> FloatArray:
    """Change of every output by one standard uncertainty of a source, shape (outputs, thinned samples)."""
    rig, specimen, motion = scene.evidence.rig, scene.evidence.sheet.specimen, scene.motion
    bar_i, bar_t, length = rig.incident_bar, rig.transmitted_bar, specimen.length_m
    zero = np.zeros(scene.at.size)
    incident, reflected, transmitted = (zero + part for part in change[:3])
    force_in = bar_i.force_per_strain_n * (incident + reflected) + change.force_in * motion.force_in_n
    force_out = bar_t.force_per_strain_n * transmitted + change.force_out * motion.force_out_n
    velocity_in = bar_i.wave_speed_m_s * (incident - reflected) + change.velocity_in * motion.velocity_in_m_s
    velocity_out = bar_t.wave_speed_m_s * transmitted + change.velocity_out * motion.velocity_out_m_s
    mismatch = 1 / bar_i.impedance_n_s_m - 1 / bar_t.impedance_n_s_m
    closing_1w = -2 * bar_i.wave_speed_m_s * reflected + mismatch * force_out
    rate_1w = closing_1w / length + (change.velocity_in - change.length) * scene.rate_1w
    rate_3w = (velocity_in - velocity_out) / length - change.length * scene.rate_3w
    return np.stack(
        (
            force_out / specimen.area_m2 - change.area * scene.stress_1w,
            rate_1w,
            integrated(rate_1w, scene.interval_s),
            0.5 * (force_in + force_out) / specimen.area_m2 - change.area * scene.stress_3w,
            rate_3w,
            integrated(rate_3w, scene.interval_s),
        )
    )


def _white_noise(scene: _Scene) -> FloatArray:
    """Variance that the noise of the samples leaves in every output after the low-pass, as :func:`_carried`.

    A running integral of white noise grows as the root of time: variance S t/2 with the one-sided density
    S = 2 sigma^2 dt of a noise of sigma sampled at dt.
    """
    evidence = scene.evidence
    rig, specimen, faces, pulses = evidence.rig, evidence.sheet.specimen, evidence.faces, evidence.pulses
    passed = faces.low_pass.noise_share(faces.interval_s) ** 2
    summed = (scene.time_s - scene.time_s[0]) * faces.interval_s
    i, t = pulses.incident.noise**2, pulses.transmitted.noise**2
    force_i = rig.incident_bar.force_per_strain_n**2 * 2 * i
    force_t = rig.transmitted_bar.force_per_strain_n**2 * t
    speed_i = (rig.incident_bar.wave_speed_m_s / specimen.length_m) ** 2
    speed_t = (rig.transmitted_bar.wave_speed_m_s / specimen.length_m) ** 2
    rate_1w, rate_3w = 4 * speed_i * i, 2 * speed_i * i + speed_t * t
    level = np.full(scene.at.size, passed)
    return np.stack(
        (
            level * force_t / specimen.area_m2**2,
            level * rate_1w,
            summed * rate_1w,
            level * 0.25 * (force_i + force_t) / specimen.area_m2**2,
            level * rate_3w,
            summed * rate_3w,
        )
    )


def _true(u: FloatArray, scene: _Scene) -> FloatArray:
    """Standard uncertainty of true strain and true stress [Pa] of the curve put forward, shape (2, thinned samples).

    Compression: e_t = -ln(1 - e), s_t = s (1 - e); tension with the other sign. Stress and strain enter as
    independent: what they share (the wave speed) is a small part of either.
    """
    evidence = scene.evidence
    response = evidence.response
    which = "1w" if response.analysis is Analysis.ONE_WAVE else "3w"
    sign = 1.0 if evidence.sheet.kind is TestKind.TENSION else -1.0
    stretch = np.maximum(1.0 + sign * response.curve.strain[scene.at], 1e-3)
    u_strain, u_stress = u[OUTPUTS.index(f"strain_{which}")], u[OUTPUTS.index(f"stress_{which}")]
    return np.stack(
        (u_strain / stretch, np.hypot(stretch * u_stress, response.curve.stress_pa[scene.at] * u_strain))
    )


def flow_stress_uncertainty_pa(budget: Budget, response: Response) -> tuple[float | None, ...]:
    """Standard uncertainty of each flow stress at its strain [Pa]; None where there is no flow stress.

    At a given strain the stress carries its own uncertainty and that of the strain, by the slope of the curve.
    """
    if response.span is None:
        return tuple(None for _ in response.flow)
    part = slice(*response.span)
    strain, stress = response.curve.true_strain[part], response.curve.true_stress_pa[part]
    # Slope of the curve over the whole span: enough to weigh the strain's small share.
    centred = strain - strain.mean()
    slope = dot(centred, stress) / max(dot(centred, centred), 1e-300)
    at_strain = np.hypot(budget.u_true_stress_pa[part], slope * budget.u_true_strain[part])
    rising = np.maximum.accumulate(strain)
    return tuple(
        None if point.stress_pa is None else float(np.interp(point.at_strain, rising, at_strain))
        for point in response.flow
    )
