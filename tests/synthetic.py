"""Shots from closed forms: strains at the specimen faces, carried to the gauges and turned into volts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from shpb.pulse.bridge import bridge_output
from shpb.quantity import Quantity, as_quantity
from shpb.record.record import Record
from shpb.rig.bar import Bar, Striker
from shpb.rig.gauge import Arrangement, Gauge, TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet, Specimen
from shpb.settings import Dispersion
from shpb.wave.propagation import Grid, LowPass, carry_pulse

Array = NDArray[np.float64]
Q = Quantity


def steel_bar(**changes: object) -> Bar:
    """E = 200 GPa, rho = 8000 kg/m3: c0 = 5000 m/s exactly, diameter 20 mm, length 2 m."""
    values: dict[str, object] = {
        "material": "steel",
        "diameter_m": Q(0.02),
        "length_m": Q(2.0),
        "density_kg_m3": Q(8000.0),
        "wave_speed_m_s": Q(5000.0),
        "poisson_ratio": Q(0.29),
        "yield_strength_pa": Q(1.8e9),
    }
    return Bar(**{**values, **changes})  # type: ignore[arg-type]


def gauge(channel: str, to_specimen_m: float, **changes: object) -> Gauge:
    values: dict[str, object] = {
        "to_specimen_m": as_quantity(to_specimen_m),
        "channels": (channel,),
        "gauge_factor": Q(2.1),
        "excitation_v": Q(5.0),
        "arrangement": Arrangement.HALF_OPPOSITE,
        "gain": Q(200.0),
        "tension_sign": 1,
        "scope_range_v": (-5.0, 5.0),
        "scope_bits": 14,
    }
    return Gauge(**{**values, **changes})  # type: ignore[arg-type]


def rig(**changes: object) -> Rig:
    values: dict[str, object] = {
        "name": "closed form",
        "calibration_date": "2031-02-03",
        "incident_bar": steel_bar(),
        "transmitted_bar": steel_bar(),
        "incident_gauge": gauge("A", 1.0),
        "transmitted_gauge": gauge("B", 0.6),
        "striker": Striker(
            length_m=Q(0.3), diameter_m=Q(0.02), density_kg_m3=Q(8000.0), wave_speed_m_s=Q(5000.0)
        ),
    }
    return Rig(**{**values, **changes})  # type: ignore[arg-type]


def sheet(specimen: Specimen | None = None, **changes: object) -> ShotSheet:
    values: dict[str, object] = {
        "shot_id": "closed-form-1",
        "kind": TestKind.COMPRESSION,
        "specimen": specimen or copper(),
        "date": "2031-02-17",
    }
    return ShotSheet(**{**values, **changes})  # type: ignore[arg-type]


def copper(**changes: object) -> Specimen:
    values: dict[str, object] = {
        "material": "copper-like",
        "diameter_m": Q(0.010),
        "length_m": Q(0.005),
        "young_modulus_pa": Q(120e9),
        "density_kg_m3": Q(8900.0),
        "poisson_ratio": Q(0.34),
    }
    return Specimen(**{**values, **changes})  # type: ignore[arg-type]


@dataclass(frozen=True)
class FaceStrains:
    """Strains at the faces, loading positive, on one clock whose zero is the front at the incident face."""

    time_s: Array
    incident: Array
    reflected: Array
    transmitted: Array


def record_of(
    faces: FaceStrains,
    lab: Rig,
    kind: TestKind = TestKind.COMPRESSION,
    *,
    noise_v: float = 0.0,
    seed: int = 1,
    before_s: float = 350e-6,
    after_s: float = 520e-6,
    start_s: float = -200e-6,
) -> Record:
    """Carry the face strains to the gauges (backwards for the incident pulse) and record them.

    The record's clock begins at ``start_s``; the front is at the incident face ``before_s`` after that.
    """
    interval = float(faces.time_s[1] - faces.time_s[0])
    samples = int((before_s + after_s) / interval)
    grid = Grid(-before_s, interval, samples)
    everything = LowPass(0.32 / interval)  # passes all up to nearly half the sampling rate

    def at_gauge(strain: Array, bar: Bar, distance: float) -> Array:
        return carry_pulse(
            strain, float(faces.time_s[0]), grid, distance, bar, everything, Dispersion.PHASE
        ).strain

    x_i, x_t = lab.incident_gauge.to_specimen_m, lab.transmitted_gauge.to_specimen_m
    incident = at_gauge(faces.incident, lab.incident_bar, -x_i) + at_gauge(
        faces.reflected, lab.incident_bar, x_i
    )
    transmitted = at_gauge(faces.transmitted, lab.transmitted_bar, x_t)
    sign = 1.0 if kind is TestKind.TENSION else -1.0  # gauges call tension positive
    volts = np.stack(
        [
            bridge_output(sign * incident, lab.incident_gauge, lab.incident_bar.poisson_ratio),
            bridge_output(sign * transmitted, lab.transmitted_gauge, lab.transmitted_bar.poisson_ratio),
        ]
    )
    if noise_v:
        volts = volts + np.random.default_rng(seed).normal(0.0, noise_v, volts.shape)
    names = (str(lab.incident_gauge.channels[0]), str(lab.transmitted_gauge.channels[0]))
    return Record(voltage_v=volts, sample_interval_s=interval, start_s=start_s, channels=names)


def smooth_pulse(time_s: Array, height: float, duration_s: float, rise_s: float) -> Array:
    """A pulse with raised-cosine flanks that begins at time zero."""
    up = np.clip(time_s / rise_s, 0, 1)
    down = np.clip((time_s - duration_s) / rise_s, 0, 1)
    return height * (0.5 * (1 - np.cos(np.pi * up)) - 0.5 * (1 - np.cos(np.pi * down)))


def uniform_plastic_shot(
    lab: Rig,
    specimen: Specimen,
    *,
    yield_pa: float = 400e6,
    hardening_pa: float = 1e9,
    height: float = 2e-3,
    duration_s: float = 100e-6,
    rise_s: float = 25e-6,
    interval_s: float = 2e-7,
) -> tuple[FaceStrains, Array]:
    """A specimen in equilibrium throughout, elastic up to its yield stress, then linearly hardening.

    d e/dt = (2 c/L)(I - A_s s/(E A)), T = A_s s/(E A), R = T - I, integrated in small steps. Returns the face
    strains and the engineering strain. Equal bars.
    """
    bar = lab.incident_bar
    time = np.arange(-40e-6, 220e-6, interval_s)
    incident = smooth_pulse(time, height, duration_s, rise_s)
    modulus = 100e9
    ratio = specimen.area_m2 / bar.force_per_strain_n
    strain, stress, plastic = np.zeros_like(time), np.zeros_like(time), 0.0
    steps = 200
    for i in range(1, time.size):
        e = strain[i - 1]
        for k in range(steps):
            now = incident[i - 1] + (incident[i] - incident[i - 1]) * (k + 0.5) / steps
            trial = modulus * (e - plastic)
            limit = yield_pa + hardening_pa * plastic
            if trial > limit:
                plastic += (trial - limit) / (modulus + hardening_pa)
                trial = modulus * (e - plastic)
            e += interval_s / steps * 2 * bar.wave_speed_m_s / specimen.length_m * (now - ratio * trial)
        trial = modulus * (e - plastic)
        strain[i], stress[i] = e, trial
    transmitted = ratio * stress
    return FaceStrains(time, incident, transmitted - incident, transmitted), strain
