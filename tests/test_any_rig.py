"""Shots of rigs drawn at random: other bars, gauges, polarities, clocks and sampling rates, without a hand.

Truth: the forward model (dispersive bars whose faces give way, specimen of elements), recorded with noise, hum, drift
and 12 bits. A shot whose truth is in equilibrium must come out right; none may raise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest

from shpb.forward.flow import FlowLaw
from shpb.forward.recording import Disturbance, recorded, sampled
from shpb.forward.shot import ForwardShot, ShotPlan, fire
from shpb.forward.specimen import SpecimenModel
from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.reduction import ShotResult, reduce
from shpb.response.equilibrium import Outcome
from shpb.rig.bar import Bar, Striker
from shpb.rig.gauge import Arrangement, Gauge, TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet, Specimen
from shpb.settings import DEFAULT, Correction, Settings

Q = Quantity

# Density, bar speed, Poisson's ratio: handbook values of bar materials, from memory.
MATERIALS = [(7830.0, 5129.0, 0.285), (8000.0, 4873.0, 0.30), (2700.0, 5051.0, 0.33), (4430.0, 5068.0, 0.342)]


@dataclass(frozen=True)
class RandomShot:
    plan: ShotPlan
    truth: ForwardShot
    record: Record
    clock_s: float


def random_plan(random: np.random.Generator) -> ShotPlan:
    density, speed, nu = MATERIALS[random.integers(4)]
    out_density, out_speed, out_nu = (
        MATERIALS[random.integers(4)] if random.random() < 0.3 else (density, speed, nu)
    )
    diameter = random.choice([0.012, 0.016, 0.019, 0.020, 0.025])
    striker_length, velocity = random.uniform(0.20, 0.33), random.uniform(6.0, 22.0)
    strain = velocity / 2 / speed
    full_scale = strain * 2.4 * 2.1 * 5.0 * 200.0

    def bar(length: float, material: tuple[float, float, float]) -> Bar:
        return Bar(
            material="drawn", diameter_m=Q(diameter), length_m=Q(length), density_kg_m3=Q(material[0]),
            wave_speed_m_s=Q(material[1]), poisson_ratio=Q(material[2]),
        )  # fmt: skip

    def gauge(channel: str, distance: float) -> Gauge:
        return Gauge(
            to_specimen_m=Q(distance), channels=(channel,), gauge_factor=Q(2.1), excitation_v=Q(5.0), gain=Q(200.0),
            arrangement=random.choice(list(Arrangement)), tension_sign=int(random.choice([-1, 1])),
            scope_range_v=(-full_scale, full_scale), scope_bits=12,
        )  # fmt: skip

    incident = bar(random.uniform(1.9, 2.4), (density, speed, nu))
    rig = Rig(
        name="drawn",
        incident_bar=incident,
        transmitted_bar=bar(random.uniform(1.6, 2.2), (out_density, out_speed, out_nu)),
        incident_gauge=gauge("a", random.uniform(striker_length + 0.45, 1.05)),
        transmitted_gauge=gauge("b", random.uniform(0.3, 0.6)),
        striker=Striker(
            length_m=Q(striker_length),
            diameter_m=Q(diameter),
            density_kg_m3=Q(density),
            wave_speed_m_s=Q(speed),
        ),
    )
    flow = random.uniform(100e6, 900e6)
    area = random.uniform(0.25, 0.55) * incident.force_per_strain_n * strain / (1.4 * flow)
    width = min(2 * np.sqrt(area / np.pi), 0.7 * diameter)
    law = FlowLaw(
        initial_pa=flow, hardening_pa=random.uniform(0.3, 1.2) * flow, hardening_exponent=random.uniform(0.3, 0.8),
        rate_coefficient=0.015, reference_rate_per_s=1e-3, melting_temperature_k=1500.0, softening_exponent=1.0,
    )  # fmt: skip
    specimen = SpecimenModel(
        diameter_m=width, length_m=width * random.uniform(0.4, 0.7), young_modulus_pa=random.uniform(90e9, 210e9),
        density_kg_m3=random.uniform(4000, 8900), flow=law, heat_capacity_j_kg_k=450.0,
    )  # fmt: skip
    return ShotPlan(
        rig=rig, specimen=specimen, striker_speed_m_s=velocity, rise_s=random.uniform(12e-6, 30e-6)
    )


def random_shot(seed: int) -> RandomShot:
    random = np.random.default_rng(seed)
    plan = random_plan(random)
    truth = fire([plan], 0.75e-3, elements=3, courant=0.3)[0]
    interval = random.choice([1e-7, 2e-7, 4e-7, 1e-6])
    start = max(truth.arrivals_s["incident"] - random.uniform(80e-6, 200e-6), truth.time_s[2])
    time = np.arange(start, truth.time_s[-3] - 20e-6, interval)
    clock = random.choice([0.0, 4.2e-3, -0.7e-3])
    volts = []
    for strain, gauge, bar in (
        (truth.incident_strain, plan.rig.incident_gauge, plan.rig.incident_bar),
        (truth.transmitted_strain, plan.rig.transmitted_gauge, plan.rig.transmitted_bar),
    ):
        seen = sampled(strain, truth.time_s, time)
        peak = float(np.abs(seen).max()) * 2.1 * 5.0 * 200.0 / 2
        chain = Disturbance(
            white_rms_v=peak * 10 ** (-random.uniform(42, 54) / 20), hum_v=0.01 * peak,
            hum_phase_rad=random.uniform(0, 6), offset_v=random.uniform(-0.05, 0.05) * peak,
            drift_v_per_s=random.uniform(-15, 15) * peak,
        )  # fmt: skip
        volts.append(
            recorded(seen, gauge, bar.poisson_ratio, time, disturbance=chain, random=random).voltage_v
        )
    record = Record(
        voltage_v=np.stack(volts),
        sample_interval_s=float(interval),
        start_s=float(start + clock),
        channels=("a", "b"),
    )
    return RandomShot(plan, truth, record, float(clock))


def reduced(shot: RandomShot, settings: Settings) -> ShotResult:
    model = shot.plan.specimen
    specimen = Specimen(
        material="drawn", diameter_m=Q(model.diameter_m), length_m=Q(model.length_m),
        young_modulus_pa=Q(model.young_modulus_pa), density_kg_m3=Q(model.density_kg_m3),
    )  # fmt: skip
    sheet = ShotSheet(
        shot_id="drawn", kind=TestKind.COMPRESSION, specimen=specimen,
        striker_speed_m_s=Q(shot.plan.striker_speed_m_s),
    )  # fmt: skip
    return reduce(shot.record, shot.plan.rig, sheet, settings)


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(16))
def test_a_rig_drawn_at_random(seed: int) -> None:
    shot = random_shot(seed)
    # The indentation left in and taken off in turn.
    taken_off = bool(seed % 2)
    corrections = (Correction.MISMATCH, *([Correction.INDENTATION] if taken_off else []))
    result, truth = reduced(shot, DEFAULT.replaced(corrections=corrections)), shot.truth
    response = result.response
    own = response.time_s + result.faces.record_time_of_zero_s - shot.clock_s
    # The tangent foot lies within the rise after the geometric arrival of the front.
    assert -6e-6 < own[0] - response.time_s[0] < 0.5 * shot.plan.rise_s + 2e-6
    true_in, true_out = (
        np.interp(own, truth.time_s, force) for force in (truth.force_in_n, truth.force_out_n)
    )
    part = slice(*(response.span or response.loading))

    def error(found: np.ndarray, true: np.ndarray) -> float:
        expected = np.interp(own, truth.time_s, true)[part]
        return float(np.sqrt(np.mean((found[part] - expected) ** 2) / np.mean(expected**2)))

    if response.equilibrium.outcome is Outcome.REACHED:
        three = response.three_wave
        indentation = (truth.indentation_in_m + truth.indentation_out_m) / shot.plan.specimen.length_m
        strain = truth.eng_strain if taken_off else truth.eng_strain + indentation
        rate = np.gradient(strain, truth.time_s)
        assert error(response.motion.force_out_n, truth.force_out_n) < 0.016
        assert error(three.stress_pa, truth.eng_stress_pa) < 0.025
        assert error(three.strain, strain) < 0.016
        assert error(response.indentation_strain, indentation) < 0.03
        mean_rate = np.interp(own, truth.time_s, rate)[part].mean()
        assert three.strain_rate_per_s[part].mean() == pytest.approx(mean_rate, rel=0.02)
    # What the program says of equilibrium must not contradict the truth.
    difference = np.abs(true_in - true_out)[part].mean() / (0.5 * (true_in + true_out))[part].mean()
    if response.equilibrium.outcome is Outcome.REACHED:
        assert difference < 0.06
    if response.equilibrium.outcome is Outcome.NOT_REACHED:
        assert difference > 0.02
