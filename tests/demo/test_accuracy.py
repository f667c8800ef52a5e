"""The demo shots through the whole chain, against the truth of the forward model.

Over the span that counts: stress within 1 %, strain within 1 %, rate within 2 % (root mean square by
that of the truth).
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import shpb
from shpb.demo.campaign import DemoCampaign, WrittenShot, write_demo
from shpb.demo.scenario import Expected, demo_shots
from shpb.demo.truth import demo_truth
from shpb.reduction import ShotResult
from shpb.rig.overrides import hints_for
from shpb.rig.sheet import ShotSheet

GOOD = [shot.shot_id for shot in demo_shots() if shot.expected is Expected.GOOD]


@pytest.fixture(scope="module")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("accuracy") / "demo")


def sheet_of(campaign: DemoCampaign, written: WrittenShot) -> ShotSheet:
    if written.sheet is not None:
        return shpb.read_sheet(written.sheet)
    listed = shpb.read_shot_list(campaign.shot_list)
    return next(sheet for sheet in listed if sheet.shot_id == written.shot.shot_id)


def reduced(campaign: DemoCampaign, shot_id: str) -> ShotResult:
    written = next(w for w in campaign.shots if w.shot.shot_id == shot_id)
    sheet, rig = sheet_of(campaign, written), shpb.read_rig(written.rig_file)
    return shpb.reduce(shpb.read_record(sheet.record_files, hints_for(rig, sheet)), rig, sheet)


@pytest.mark.parametrize("shot_id", GOOD)
def test_good_shots(campaign: DemoCampaign, shot_id: str) -> None:
    result, truth = reduced(campaign, shot_id), demo_truth(shot_id)
    response = result.response
    assert result.verdict.value == "accept"
    assert response.span is not None
    part = slice(*response.span)
    own = (response.time_s + result.faces.record_time_of_zero_s)[part]

    def error(found: np.ndarray, true: np.ndarray) -> float:
        expected = np.interp(own, truth.time_s, true)
        return float(np.sqrt(np.mean((found[part] - expected) ** 2) / np.mean(expected**2)))

    for curve in (response.one_wave, response.three_wave):
        assert error(curve.stress_pa, truth.eng_stress_pa) < 0.01
        assert error(curve.strain, truth.eng_strain) < 0.01
        assert error(curve.strain_rate_per_s, truth.eng_strain_rate_per_s) < 0.02
        assert error(curve.true_stress_pa, truth.true_stress_pa) < 0.01
        assert error(curve.true_strain, truth.true_strain) < 0.01
    assert error(response.motion.force_in_n, truth.force_in_n) < 0.012
    assert error(response.motion.force_out_n, truth.force_out_n) < 0.01


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
