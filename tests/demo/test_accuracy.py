"""The demo shots through the whole chain, against the truth of the forward model.

Over the span that counts: stress within 1 %, strain within 1 %, rate within 2 % (root mean square by
that of the truth). The bars see the approach of their faces, the specimen's own shortening and both
indentations; with the indentation taken off, the curves are the specimen's own.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import shpb
from shpb.demo.campaign import DemoCampaign, WrittenShot, write_demo
from shpb.demo.scenario import Expected, demo_shots
from shpb.demo.truth import DemoTruth, demo_truth
from shpb.reduction import ShotResult
from shpb.rig.overrides import hints_for
from shpb.rig.sheet import ShotSheet
from shpb.settings import DEFAULT, Correction, Settings

AS_SEEN = DEFAULT.replaced(corrections=())
OWN = DEFAULT.replaced(corrections=(Correction.INDENTATION,))

GOOD = [shot.shot_id for shot in demo_shots() if shot.expected is Expected.GOOD]


@pytest.fixture(scope="module")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("accuracy") / "demo")


def sheet_of(campaign: DemoCampaign, written: WrittenShot) -> ShotSheet:
    if written.sheet is not None:
        return shpb.read_sheet(written.sheet)
    listed = shpb.read_shot_list(campaign.shot_list)
    return next(sheet for sheet in listed if sheet.shot_id == written.shot.shot_id)


def reduced(campaign: DemoCampaign, shot_id: str, settings: Settings = AS_SEEN) -> ShotResult:
    written = next(w for w in campaign.shots if w.shot.shot_id == shot_id)
    sheet, rig = sheet_of(campaign, written), shpb.read_rig(written.rig_file)
    record = shpb.read_record(sheet.record_files, hints_for(rig, sheet))
    return shpb.reduce(record, rig, sheet, settings)


def error(
    result: ShotResult, truth: DemoTruth, found: np.ndarray, true: np.ndarray, *, after_s: float = 0.0
) -> float:
    """Root mean square difference over the span that counts (or later), by the root mean square of the truth."""
    assert result.response.span is not None
    first, last = result.response.span
    part = slice(first + round(after_s / result.faces.interval_s), last)
    own = (result.response.time_s + result.faces.record_time_of_zero_s)[part]
    expected = np.interp(own, truth.time_s, true)
    return float(np.sqrt(np.mean((found[part] - expected) ** 2) / np.mean(expected**2)))


def indentation_strain(truth: DemoTruth) -> np.ndarray:
    return (truth.indentation_in_m + truth.indentation_out_m) / truth.shot.plan.specimen.length_m


@pytest.mark.parametrize("settings", [AS_SEEN, OWN], ids=["indentation left in", "indentation taken off"])
@pytest.mark.parametrize("shot_id", GOOD)
def test_good_shots(campaign: DemoCampaign, shot_id: str, settings: Settings) -> None:
    result, truth = reduced(campaign, shot_id, settings), demo_truth(shot_id)
    response = result.response
    assert result.verdict.value == "accept"
    strain, area = truth.eng_strain, truth.shot.plan.specimen.area_m2
    if settings is AS_SEEN:
        strain = strain + indentation_strain(truth)
    force = area * truth.eng_stress_pa
    for curve in (response.one_wave, response.three_wave):
        assert error(result, truth, curve.stress_pa, truth.eng_stress_pa) < 0.01
        assert error(result, truth, curve.strain, strain) < 0.01
        # The specimen's own rate jumps up where it yields, in the H shots within the span; the low-pass rounds that
        # over some 6 us.
        rate = np.gradient(strain, truth.time_s)
        assert error(result, truth, curve.strain_rate_per_s, rate, after_s=12e-6) < 0.01
        assert error(result, truth, curve.strain_rate_per_s, rate) < (0.02 if settings is AS_SEEN else 0.035)
        # True values are those of a specimen as long as the strain says.
        assert error(result, truth, curve.true_stress_pa, force / area * (1 - strain)) < 0.01
        assert error(result, truth, curve.true_strain, -np.log1p(-strain)) < 0.01
    assert error(result, truth, response.motion.force_in_n, truth.force_in_n) < 0.012
    assert error(result, truth, response.motion.force_out_n, truth.force_out_n) < 0.01


@pytest.mark.parametrize("shot_id", GOOD)
def test_indentation_is_estimated(campaign: DemoCampaign, shot_id: str) -> None:
    # The same statics in both: forces, clock, radius and length must be right. Forces are to 1 %.
    result, truth = reduced(campaign, shot_id), demo_truth(shot_id)
    true = indentation_strain(truth)
    assert error(result, truth, result.response.indentation_strain, true) < 0.015
    # Enough to see: left in, it would spoil the strain of the narrow H specimens beyond their 1 %.
    if shot_id.startswith("H"):
        assert error(result, truth, result.response.three_wave.strain, truth.eng_strain) > 0.015


def test_good_shots_are_at_three_rates_and_of_two_alloys() -> None:
    good = [shot for shot in demo_shots() if shot.expected is Expected.GOOD]
    assert len({shot.alloy.name for shot in good}) == 2
    assert len(demo_shots()) >= 12
    assert len(good) >= 6


@pytest.mark.parametrize(
    "shot_id", [s.shot_id for s in demo_shots() if s.expected in (Expected.GOOD, Expected.NOISY)]
)
def test_windows_are_set_without_a_hand(campaign: DemoCampaign, shot_id: str) -> None:
    result, truth = reduced(campaign, shot_id), demo_truth(shot_id)
    at, pulses = truth.arrivals_s, result.pulses
    # Each window begins before its own front and ends before the next wave's.
    assert pulses.incident.window_s[0] < at["incident"]
    assert pulses.incident.window_s[1] <= at["reflected"]
    assert at["reflected"] - 25e-6 < pulses.reflected.window_s[0] < at["reflected"]
    assert pulses.reflected.window_s[1] <= at["second loading at the gauge"] + 1e-6
    assert at["transmitted"] - 35e-6 < pulses.transmitted.window_s[0] < at["transmitted"]
    assert pulses.transmitted.window_s[1] <= at["end reflection"] + 1e-6


def test_truth_is_not_in_the_users_folder(campaign: DemoCampaign) -> None:
    names = {path.name for path in Path(campaign.folder).rglob("*")}
    assert not {name for name in names if "truth" in name}
