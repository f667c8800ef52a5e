"""What repeats see of a stored shot is what they see of the shot as it was reduced."""

from __future__ import annotations

from pathlib import Path

import pytest

from shpb.demo import DemoCampaign, write_demo
from shpb.errors import StoreError
from shpb.record.read import read_record
from shpb.reduction import reduce
from shpb.rig.overrides import hints_for, settings_for
from shpb.rig.rig_file import read_rig
from shpb.rig.sheet_file import read_sheet
from shpb.store.shot_brief import read_brief
from shpb.store.shot_file import save_shot
from shpb.trust.repeats import repeat_shot


@pytest.fixture(scope="module")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("brief") / "demo")


@pytest.mark.parametrize("shot_id", ["W-02", "W-08"])  # one that counts, one that does not
def test_the_stored_shot_gives_the_same(campaign: DemoCampaign, tmp_path: Path, shot_id: str) -> None:
    sheet = read_sheet(campaign.folder / "records" / f"{shot_id}.toml")
    assert sheet.rig_file is not None
    rig = read_rig(sheet.rig_file)
    record = read_record(sheet.record_files, hints_for(rig, sheet))
    result = reduce(record, rig, sheet, settings_for(rig, sheet))
    brief = read_brief(save_shot(result, tmp_path / "shot.h5"))
    assert (brief.shot_id, brief.verdict) == (shot_id, result.verdict.value)
    assert brief.repeat == repeat_shot(result)
    assert (brief.repeat is None) == (shot_id == "W-08")
    span = result.response.strain_span
    assert brief.end_strain == (None if span is None else pytest.approx(span[1], abs=0))


@pytest.mark.parametrize("content", [b"", b"\x89HDF\r\n\x1a\n" + bytes(200), b"time,a,b\n"])
def test_what_is_no_shot_is_refused(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "shot.h5").write_bytes(content)
    with pytest.raises(StoreError):
        read_brief(tmp_path / "shot.h5")
