"""Small shots with a closed-form answer, reduced once each, for what is written and drawn of them.

The specimen is in equilibrium and hardens linearly, so that with the bars' c0, A, E
    d e/dt = (2 c0/L) (e_I - A_s s(e)/(E A)),   e_T = A_s s/(E A),   e_R = e_T - e_I
(H. Kolsky, Proc. Phys. Soc. B 62 (1949) 676-700), integrated here by small steps for any incident pulse.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Callable
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from shpb.limits import Limits
from shpb.pulse.bridge import strain_from_voltage
from shpb.quantity import Quantity
from shpb.record.record import Record, Source
from shpb.reduction import ShotResult, reduce
from shpb.rig.bar import Bar, Striker
from shpb.rig.gauge import Arrangement, Gauge, TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet, Specimen
from shpb.settings import Alignment, Analysis, Dispersion, Settings

INTERVAL_S = 4e-7
SAMPLES = 3000
START_S = -200e-6
SPEED, DENSITY, DIAMETER = 5000.0, 8000.0, 20e-3
YIELD_PA, HARDENING_PA, MODULUS_PA = 300e6, 800e6, 70e9
TO_SPECIMEN_M = 1.0

SORTS = (
    "good",
    "noisy",
    "not in equilibrium",
    "tension",
    "feet",
    "by hand",
    "no modulus",
    "nasty names",
    "long names",
)
NASTY = "a$x^2$ [/x] \x1b[2J\x1b[31m \u202e <b>&amp;"


def _bar() -> Bar:
    return Bar(
        material="bar steel",
        diameter_m=Quantity(DIAMETER),
        length_m=Quantity(2.5),
        density_kg_m3=Quantity(DENSITY),
        wave_speed_m_s=Quantity(SPEED),
        poisson_ratio=Quantity(0.29),
        yield_strength_pa=Quantity(1.2e9),
    )


def _gauge(channel: str) -> Gauge:
    return Gauge(
        to_specimen_m=Quantity(TO_SPECIMEN_M),
        channels=(channel,),
        gauge_factor=Quantity(2.1),
        excitation_v=Quantity(5.0),
        arrangement=Arrangement.HALF_OPPOSITE,
        gain=Quantity(100.0),
        linear_amplifier=True,
        scope_range_v=(-2.0, 2.0),
        scope_bits=12,
    )


def _rig(name: str) -> Rig:
    striker = Striker(
        length_m=Quantity(0.35), diameter_m=Quantity(DIAMETER), density_kg_m3=Quantity(DENSITY),
        wave_speed_m_s=Quantity(SPEED),
    )  # fmt: skip
    return Rig(
        name=name, incident_bar=_bar(), transmitted_bar=_bar(), incident_gauge=_gauge("A"),
        transmitted_gauge=_gauge("B"), striker=striker, calibration_date="2031-02-03",
    )  # fmt: skip


def _specimen(material: str) -> Specimen:
    return Specimen(
        material=material, diameter_m=Quantity(8e-3), length_m=Quantity(6e-3),
        young_modulus_pa=Quantity(MODULUS_PA), density_kg_m3=Quantity(2700.0),
        length_after_m=Quantity(4.445e-3), friction_coefficient=Quantity(0.03),
    )  # fmt: skip


def _incident(time_s: np.ndarray) -> np.ndarray:
    """Incident strain at the face: smooth rise and fall over 24 us, 160 us long, 0.0015 high."""

    def step(t: np.ndarray) -> np.ndarray:
        return 0.5 - 0.5 * np.cos(np.pi * np.clip(t / 24e-6, 0, 1))

    return 0.0015 * (step(time_s) - step(time_s - 140e-6))


def _pulses_at_face(time_s: np.ndarray, specimen: Specimen) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    incident = _incident(time_s)
    share = specimen.area_m2 / (np.pi * DIAMETER**2 / 4 * DENSITY * SPEED**2)
    strain, plastic, stress = 0.0, 0.0, np.zeros(time_s.size)
    dt = time_s[1] - time_s[0]
    for k in range(time_s.size - 1):
        rate = 2 * SPEED / specimen.length_m * (incident[k] - share * stress[k])
        strain += rate * dt
        elastic = MODULUS_PA * (strain - plastic)
        over = elastic - (YIELD_PA + HARDENING_PA * plastic)
        if over > 0:
            plastic += over / (MODULUS_PA + HARDENING_PA)
        stress[k + 1] = max(MODULUS_PA * (strain - plastic), 0.0)
    transmitted = share * stress
    return incident, transmitted - incident, transmitted


def _record(kind: TestKind, specimen: Specimen, transmitted_gain: float, noise: float, name: str) -> Record:
    time_s = START_S + INTERVAL_S * np.arange(SAMPLES)
    fine = np.arange(0.0, 500e-6, INTERVAL_S / 8)
    incident, reflected, transmitted = _pulses_at_face(fine, specimen)
    travel = TO_SPECIMEN_M / SPEED

    def at(pulse: np.ndarray, delay: float) -> np.ndarray:
        return np.interp(time_s - delay, fine, pulse, left=0.0, right=0.0)

    strains = np.stack(
        (
            at(incident, 0.0) + at(reflected, 2 * travel),
            transmitted_gain * at(transmitted, 2 * travel),
        )
    )
    sign = 1 if kind is TestKind.TENSION else -1
    per_volt = strain_from_voltage(np.array([1.0]), _gauge("A"), 0.29)[0]
    voltage = sign * strains / per_volt
    voltage += noise * np.random.default_rng(7).normal(size=voltage.shape)
    source = Source(name=name, sha256="0" * 64, size_bytes=1, reader="text")
    return Record(
        voltage_v=voltage,
        sample_interval_s=INTERVAL_S,
        start_s=START_S,
        channels=("A", "B"),
        sources=(source,),
    )


@cache
def _shot(
    *, kind: TestKind, transmitted_gain: float, noise: float, name: str, modulus: bool, settings: Settings
) -> ShotResult:
    specimen = _specimen(name)
    record = _record(kind, specimen, transmitted_gain, noise, name)
    if not modulus:
        specimen = dataclasses.replace(specimen, young_modulus_pa=None)
    sheet = ShotSheet(
        shot_id=name, kind=kind, specimen=specimen, striker_speed_m_s=Quantity(15.0), remarks=name,
        record_files=(Path(name.replace("/", "_")),), date="2031-02-17",
    )  # fmt: skip
    return reduce(record, _rig(name), sheet, settings)


@pytest.fixture(scope="session")
def shot() -> Callable[..., ShotResult]:
    """Reduce a shot of the closed-form specimen, altered as asked."""

    def make(
        *,
        kind: TestKind = TestKind.COMPRESSION,
        transmitted_gain: float = 1.0,
        noise: float = 0.0,
        name: str = "K-101",
        modulus: bool = True,
        settings: Settings | None = None,
    ) -> ShotResult:
        # The pulses were made without dispersion, so none is taken out.
        used = settings or Settings(dispersion=Dispersion.NONE)
        return _shot(
            kind=kind,
            transmitted_gain=transmitted_gain,
            noise=noise,
            name=name,
            modulus=modulus,
            settings=used,
        )

    return make


@pytest.fixture(scope="session")
def shots(shot: Callable[..., ShotResult]) -> dict[str, ShotResult]:
    """Shots of every sort that the texts and the figure must cope with."""
    feet = Settings(dispersion=Dispersion.NONE, alignment=Alignment.FEET, analysis=Analysis.THREE_WAVE)
    by_hand = Settings(
        incident_window_s=(-40e-6, 350e-6), reflected_foot_s=401e-6, limits=Limits(late_strain=1e-4)
    )
    return {
        "good": shot(),
        "noisy": shot(noise=0.004),
        "not in equilibrium": shot(transmitted_gain=0.75),
        "tension": shot(kind=TestKind.TENSION),
        "feet": shot(settings=feet),
        "by hand": shot(settings=by_hand),
        "no modulus": shot(modulus=False),
        "nasty names": shot(name=NASTY),
        "long names": shot(name="a very long name of a shot " * 8),
    }


@pytest.fixture(params=SORTS)
def sort(request: pytest.FixtureRequest) -> str:
    """The name of every sort of shot in turn."""
    return str(request.param)


@pytest.fixture(scope="session")
def flow_stress_pa() -> Callable[..., float]:
    """True flow stress [Pa] of the specimen at a true plastic strain e_t - s_t/E, in closed form."""

    def at_plastic(true_plastic: float, kind: TestKind) -> float:
        def true(p: float) -> tuple[float, float]:
            stress = YIELD_PA + HARDENING_PA * p  # engineering, by engineering plastic strain
            strain = p + stress / MODULUS_PA
            stretch = 1 + strain if kind is TestKind.TENSION else 1 - strain
            return abs(math.log(stretch)), stress * stretch

        low, high = 0.0, 0.6
        for _ in range(60):  # bisection
            p = 0.5 * (low + high)
            strain, stress = true(p)
            low, high = (p, high) if strain - stress / MODULUS_PA < true_plastic else (low, p)
        return true(low)[1]

    return at_plastic
