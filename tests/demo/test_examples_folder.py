"""``examples/`` is the demo campaign as ``shpb demo`` writes it, to be looked at without running anything."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from shpb.demo.campaign import MARKER, DemoCampaign, write_demo
from shpb.record.read import read_record
from shpb.rig.overrides import hints_for
from shpb.rig.rig_file import read_rig

EXAMPLES = Path(__file__).parents[2] / "examples"
PICTURE = "W-02.png"


@pytest.fixture(scope="module")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("examples") / "demo")


def names(folder: Path) -> set[str]:
    return {path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()}


def test_the_same_files_are_there(campaign: DemoCampaign) -> None:
    assert names(EXAMPLES) - {PICTURE} == names(campaign.folder)
    assert (EXAMPLES / PICTURE).stat().st_size > 20_000


def test_what_people_write_is_word_for_word_the_same(campaign: DemoCampaign) -> None:
    for name in names(campaign.folder):
        if (name.startswith(("records/", "quasistatic/")) and not name.endswith(".toml")) or name == MARKER:
            continue
        assert (EXAMPLES / name).read_text(encoding="utf-8") == (campaign.folder / name).read_text(
            encoding="utf-8"
        ), name


def test_the_records_hold_the_same_voltages(campaign: DemoCampaign) -> None:
    from shpb.rig.sheet_file import read_sheet
    from shpb.rig.shot_list import read_shot_list

    sheets = [read_sheet(shot.sheet) for shot in campaign.shots if shot.sheet is not None]
    for sheet in (*sheets, *read_shot_list(campaign.shot_list)):
        assert sheet.rig_file is not None
        hints = hints_for(read_rig(sheet.rig_file), sheet)
        made = read_record(sheet.record_files, hints)
        kept = read_record(
            [EXAMPLES / file.relative_to(campaign.folder) for file in sheet.record_files], hints
        )
        assert kept.channels == made.channels
        # One step of 12 bits: the last bit of a spectrum may differ from machine to machine.
        step = np.diff(np.unique(made.voltage_v))
        np.testing.assert_allclose(kept.voltage_v, made.voltage_v, atol=1.5 * float(step[step > 1e-9].min()))


def test_the_rig_files_of_the_demo_stand_in_calibration_too() -> None:
    calibration = EXAMPLES.parent / "calibration"
    for name in ("bench_1.toml", "bench_2.toml"):
        assert (calibration / name).read_text() == (EXAMPLES / "calibration" / name).read_text()
