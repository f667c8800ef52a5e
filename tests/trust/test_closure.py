"""The forward run against the record: quiet on good shots, and it names what is wrong on the others.

The faults are what laboratories get wrong in a rig file or a sheet; the records are those of the demo campaign and of
the two-dimensional simulation, which knows nothing of this program.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

import shpb.reduction
from shpb.demo.campaign import DemoCampaign, write_demo
from shpb.demo.scenario import Expected, demo_shots
from shpb.pulse.pulse import Pulses
from shpb.quantity import Quantity
from shpb.record.read import read_record
from shpb.record.record import Record
from shpb.reduction import ShotResult, reduce
from shpb.rig.bar import Bar
from shpb.rig.gauge import Arrangement
from shpb.rig.overrides import hints_for, settings_for
from shpb.rig.rig import Rig
from shpb.rig.rig_file import read_rig
from shpb.rig.sheet import ShotSheet
from shpb.rig.sheet_file import read_sheet
from shpb.rig.shot_list import read_shot_list
from shpb.settings import Correction
from shpb.trust.closure import Misfit
from shpb.trust.finding import Finding, Weight
from shpb.wave.faces import FacePulses, carry_to_faces
from tests.virtual_rig.conftest import load_shot

GOOD = [shot.shot_id for shot in demo_shots() if shot.expected is Expected.GOOD]
Shot = tuple[Record, Rig, ShotSheet]
Fault = Callable[[Rig, ShotSheet], tuple[Rig, ShotSheet]]


@pytest.fixture(scope="module")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("closure") / "demo")


def load(campaign: DemoCampaign, shot_id: str) -> Shot:
    written = next(one for one in campaign.shots if one.shot.shot_id == shot_id)
    if written.sheet is not None:
        sheet = read_sheet(written.sheet)
    else:
        sheet = next(one for one in read_shot_list(campaign.shot_list) if one.shot_id == shot_id)
    rig = read_rig(Path(written.rig_file))
    return read_record(sheet.record_files, hints_for(rig, sheet)), rig, sheet


def finding(result: ShotResult) -> Finding:
    return next(one for one in result.findings if one.check == "closure")


def worst(result: ShotResult) -> Misfit:
    assert result.closure is not None
    return result.closure.worst


@pytest.mark.parametrize("corrected", [False, True], ids=["indentation in", "indentation out"])
@pytest.mark.parametrize("shot_id", GOOD)
def test_quiet_on_good_shots(campaign: DemoCampaign, shot_id: str, corrected: bool) -> None:
    record, rig, sheet = load(campaign, shot_id)
    on = (Correction.MISMATCH, *((Correction.INDENTATION,) if corrected else ()))
    result = reduce(record, rig, sheet, settings_for(rig, sheet).replaced(corrections=on))
    assert finding(result).weight is Weight.FINE
    # Half the limit: what is stated of the demo rig is true, so nothing should come near it.
    assert worst(result).excess < 1.2
    assert result.closure is not None
    assert result.closure.reflected.rms < 0.02
    assert abs(result.closure.reflected.delay_s) < 0.3e-6


@pytest.mark.parametrize("noisy", [False, True])
def test_quiet_on_the_simulated_shot(noisy: bool) -> None:
    # Dispersion, inertia, indentation and the bulge of the specimen are in this record by themselves.
    metal = load_shot("metal-1k", noisy=noisy)
    result = reduce(metal.record, metal.rig, metal.sheet)
    assert finding(result).weight is Weight.FINE
    assert result.closure is not None
    assert result.closure.reflected.rms < 0.02


# --- faults --------------------------------------------------------------------------------------------


def swapped_factors(rig: Rig, sheet: ShotSheet) -> tuple[Rig, ShotSheet]:
    one, two = rig.incident_gauge, rig.transmitted_gauge
    return dataclasses.replace(
        rig,
        incident_gauge=dataclasses.replace(one, gauge_factor=two.gauge_factor),
        transmitted_gauge=dataclasses.replace(two, gauge_factor=one.gauge_factor),
    ), sheet


def radius_as_diameter(rig: Rig, sheet: ShotSheet) -> tuple[Rig, ShotSheet]:
    specimen = dataclasses.replace(sheet.specimen, diameter_m=Quantity(sheet.specimen.diameter_m / 2))
    return rig, dataclasses.replace(sheet, specimen=specimen)


def speed_of_the_other_bench(rig: Rig, sheet: ShotSheet) -> tuple[Rig, ShotSheet]:
    other = 5110.0 if rig.incident_bar.wave_speed_m_s < 5000 else 4870.0

    def wrong(bar: Bar) -> Bar:
        return dataclasses.replace(bar, wave_speed_m_s=Quantity(other, 5.0))

    return dataclasses.replace(
        rig, incident_bar=wrong(rig.incident_bar), transmitted_bar=wrong(rig.transmitted_bar)
    ), sheet


_MORE_ARMS = {
    Arrangement.QUARTER: Arrangement.HALF_OPPOSITE,
    Arrangement.HALF_OPPOSITE: Arrangement.FULL_POISSON,
    Arrangement.FULL_POISSON: Arrangement.FULL,
}


def one_arm_too_many(side: str) -> Fault:
    def fault(rig: Rig, sheet: ShotSheet) -> tuple[Rig, ShotSheet]:
        gauge = getattr(rig, f"{side}_gauge")
        more = dataclasses.replace(gauge, arrangement=_MORE_ARMS[gauge.arrangement])
        return dataclasses.replace(rig, **{f"{side}_gauge": more}), sheet  # type: ignore[arg-type]

    return fault


FAULTS: dict[str, Fault] = {
    "gauge factors swapped": swapped_factors,
    "radius given as diameter": radius_as_diameter,
    "wave speed of another bar": speed_of_the_other_bench,
    "an arm too many, incident": one_arm_too_many("incident"),
    "an arm too many, transmitted": one_arm_too_many("transmitted"),
}


@pytest.mark.parametrize("fault", FAULTS)
@pytest.mark.parametrize("shot_id", ["W-01", "W-03", "W-09", "H-01", "H-03", "H-04"])
def test_faults_are_caught(campaign: DemoCampaign, shot_id: str, fault: str) -> None:
    record, rig, sheet = load(campaign, shot_id)
    settings = settings_for(rig, sheet)
    rig, sheet = FAULTS[fault](rig, sheet)
    result = reduce(record, rig, sheet, settings)
    assert finding(result).weight in (Weight.NOTE, Weight.REJECT), worst(result)


def bars_of_another_diameter(factor: float) -> Fault:
    def fault(rig: Rig, sheet: ShotSheet) -> tuple[Rig, ShotSheet]:
        bars = {
            name: dataclasses.replace(
                getattr(rig, name), diameter_m=Quantity(factor * getattr(rig, name).diameter_m)
            )
            for name in ("incident_bar", "transmitted_bar")
        }
        return dataclasses.replace(rig, **bars), sheet  # type: ignore[arg-type]

    return fault


def diameter_as_radius(rig: Rig, sheet: ShotSheet) -> tuple[Rig, ShotSheet]:
    specimen = dataclasses.replace(sheet.specimen, diameter_m=Quantity(2 * sheet.specimen.diameter_m))
    return rig, dataclasses.replace(sheet, specimen=specimen)


def one_arm_too_many_on_both(rig: Rig, sheet: ShotSheet) -> tuple[Rig, ShotSheet]:
    return one_arm_too_many("transmitted")(*one_arm_too_many("incident")(rig, sheet))


@pytest.mark.parametrize(
    ("fault", "named"),
    [
        (bars_of_another_diameter(0.5), "incident against striker"),
        (bars_of_another_diameter(2.0), "incident against striker"),
        (diameter_as_radius, "specimen mass"),
        (one_arm_too_many_on_both, "incident against striker"),
    ],
    ids=[
        "bars' radius as diameter",
        "bars' diameter as radius",
        "diameter as radius",
        "an arm too many on both",
    ],
)
@pytest.mark.parametrize("shot_id", ["W-03", "H-02", "H-03"])
def test_what_scales_everything_is_for_other_checks(
    campaign: DemoCampaign, shot_id: str, fault: Fault, named: str
) -> None:
    record, rig, sheet = load(campaign, shot_id)
    settings = settings_for(rig, sheet)
    rig, sheet = fault(rig, sheet)
    rejecting = [
        one.check for one in reduce(record, rig, sheet, settings).findings if one.weight is Weight.REJECT
    ]
    assert rejecting[0] == named  # the cause before what follows from it


@pytest.mark.parametrize("shot_id", GOOD)
def test_a_reflected_pulse_one_microsecond_late(
    campaign: DemoCampaign, shot_id: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    def late(pulses: Pulses, rig: Rig, sheet: ShotSheet, settings: shpb.Settings) -> FacePulses:
        moved = dataclasses.replace(pulses.reflected, start_s=pulses.reflected.start_s + 1e-6)
        return carry_to_faces(dataclasses.replace(pulses, reflected=moved), rig, sheet, settings)

    monkeypatch.setattr(shpb.reduction, "carry_to_faces", late)
    record, rig, sheet = load(campaign, shot_id)
    result = reduce(record, rig, sheet)
    assert result.closure is not None
    # The reduced curve swallows a part of the shift where the specimen is still elastic.
    assert 0.5e-6 < result.closure.reflected.delay_s < 1.2e-6
    said = finding(result)
    assert said.weight in (Weight.NOTE, Weight.REJECT), worst(result)
    assert "wrong place" in said.action


def test_u_of_the_delay_follows_the_wave_speed(campaign: DemoCampaign) -> None:
    # 2 x/c u(c)/c with 1 % of uncertainty: 3.8 us, next to which distances and model do not count.
    record, rig, sheet = load(campaign, "H-01")
    vague = {
        name: dataclasses.replace(
            getattr(rig, name), wave_speed_m_s=Quantity(float(getattr(rig, name).wave_speed_m_s), 50.0)
        )
        for name in ("incident_bar", "transmitted_bar")
    }
    result = reduce(record, dataclasses.replace(rig, **vague), sheet)  # type: ignore[arg-type]
    assert result.closure is not None
    assert result.closure.reflected.u_delay_s == pytest.approx(2 * 0.9 / 4870 * 50 / 4870, rel=0.02)
    assert np.isfinite(result.closure.reflected.expected)
