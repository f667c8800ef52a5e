"""A good shot in closed form, and how its findings are asked for; tests change one thing at a time."""

from __future__ import annotations

import dataclasses

import numpy as np

from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.reduction import ShotResult, reduce
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet, Specimen
from shpb.settings import DEFAULT, Settings
from shpb.trust.finding import Finding
from shpb.trust.judge import all_checks
from tests.synthetic import FaceStrains, copper, record_of, rig, sheet, uniform_plastic_shot

DT = 4e-7
# Pulse of 2e-3 and 100 us: impulse E A 2e-3 100 us = 12.57 N s, by the striker's mass 8000 x 0.3 x A = 0.754 kg.
SPEED = 200e9 * 2e-3 * 100e-6 / (8000 * 0.3)
GRAVEST = {check.name: check.gravest for check in all_checks()}


def faces_of(**changes: float) -> FaceStrains:
    return uniform_plastic_shot(rig(), copper(), interval_s=DT, **changes)[0]


def specimen_of(**changes: object) -> Specimen:
    return copper(**{"friction_coefficient": Quantity(0.03), **changes})


def good_sheet(specimen: Specimen | None = None, **changes: object) -> ShotSheet:
    values: dict[str, object] = {"striker_speed_m_s": Quantity(SPEED)}
    return sheet(specimen or specimen_of(), **{**values, **changes})


def quantised(record: Record, lab: Rig) -> Record:
    low, high = lab.incident_gauge.scope_range_v or (-5.0, 5.0)
    step = (high - low) / 2 ** (lab.incident_gauge.scope_bits or 12)
    volts = np.clip(np.round(record.voltage_v / step) * step, low, high - step)
    return dataclasses.replace(record, voltage_v=volts)


def run(
    faces: FaceStrains, lab: Rig | None = None, shot: ShotSheet | None = None, settings: Settings = DEFAULT
) -> ShotResult:
    lab = lab or rig()
    return reduce(quantised(record_of(faces, lab, noise_v=0.004), lab), lab, shot or good_sheet(), settings)


def finding(result: ShotResult, name: str) -> Finding:
    """The finding of one check, which never says worse than the table of checks tells."""
    found = next(f for f in result.findings if f.check == name)
    assert found.weight.gravity <= GRAVEST[name].gravity, name
    return found


def has(result: ShotResult, name: str) -> bool:
    return any(f.check == name for f in result.findings)
