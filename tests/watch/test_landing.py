"""Files come to rest on the program's own clock; what is no record is passed over."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from shpb.watch.landing import BackOff, Landing, Stamp, list_folder
from shpb.watch.names import Role, role_of, stem_of


def test_a_file_rests_when_size_and_time_stamp_stay() -> None:
    landing = Landing(rest_s=2.0)
    landing.see({"a.csv": Stamp(10, 5)}, 100.0)
    landing.see({"a.csv": Stamp(10, 5)}, 101.9)
    assert not landing.at_rest("a.csv", 101.9)
    assert landing.until_rest_s(["a.csv"], 101.9) == pytest.approx(0.1)
    assert landing.at_rest("a.csv", 102.0)


@pytest.mark.parametrize("changed", [Stamp(11, 5), Stamp(10, 6), Stamp(10, 4), Stamp(9, 5)])
def test_any_change_starts_the_wait_anew(changed: Stamp) -> None:
    # Time stamps earlier than before count too: a file server's clock may be set back.
    landing = Landing(rest_s=2.0)
    landing.see({"a.csv": Stamp(10, 5)}, 0.0)
    assert landing.see({"a.csv": changed}, 1.9) == ["a.csv"]
    assert not landing.at_rest("a.csv", 3.8)
    assert landing.at_rest("a.csv", 3.9)


def test_a_time_stamp_far_off_does_not_matter() -> None:
    landing = Landing(rest_s=2.0)
    landing.see({"past": Stamp(1, 0), "future": Stamp(1, 2**62)}, 0.0)
    assert landing.at_rest("past", 2.0)
    assert landing.at_rest("future", 2.0)


def test_what_is_gone_is_forgotten() -> None:
    landing = Landing(rest_s=2.0)
    landing.see({"a.csv": Stamp(10, 5)}, 0.0)
    landing.see({}, 5.0)
    assert landing.quiet_s("a.csv", 5.0) < 0
    landing.see({"a.csv": Stamp(10, 5)}, 6.0)
    assert not landing.at_rest("a.csv", 7.9)


def test_only_plain_files_are_listed(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("1")
    (tmp_path / "results").mkdir()
    (tmp_path / "loose").symlink_to(tmp_path / "nowhere")
    if hasattr(os, "mkfifo"):
        os.mkfifo(tmp_path / "pipe.csv")  # opening it would wait without end
    assert list(list_folder(tmp_path)) == ["a.csv"]


def test_a_refusal_is_tried_again_ever_more_rarely() -> None:
    back_off, now, waits = BackOff(first_s=1.0, longest_s=30.0), 0.0, []
    for _ in range(8):
        back_off.failed(now)
        start = now
        while not back_off.due(now):
            now += 0.25
        waits.append(now - start)
    assert waits == [1, 2, 4, 8, 16, 30, 30, 30]
    assert back_off.over() == 8
    assert back_off.due(now)


@pytest.mark.parametrize(
    ("name", "head", "role"),
    [
        ("S-1.csv", "time,a,b\n", Role.RECORD),
        ("S-1.h5", "x", Role.RECORD),
        ("S-1", "x", Role.RECORD),
        ("S-1.toml", "[shot]\n", Role.SHEET),
        ("shots.csv", "# comment\nshot_id,kind,record\n", Role.LIST),
        ("shots.csv", '\ufeff"shot_id";"kind";"record"\n', Role.LIST),
        ("S-1.csv", "time_us,counts,true_strain,x\n", Role.NOTHING),
        ("S-1.csv", "", Role.NOTHING),
        (".S-1.csv", "x", Role.NOTHING),
        ("~S-1.csv", "x", Role.NOTHING),
        ("S-1.csv~", "x", Role.NOTHING),
        ("S-1.csv.part", "x", Role.NOTHING),
        ("S-1.csv.TMP", "x", Role.NOTHING),
        ("S-1.h5.earlier-1", "x", Role.NOTHING),
        ("S-1.png", "x", Role.NOTHING),
        ("notes.md", "x", Role.NOTHING),
    ],
)
def test_what_a_file_is_taken_for(tmp_path: Path, name: str, head: str, role: Role) -> None:
    path = tmp_path / name
    path.write_text(head, "utf-8")
    assert role_of(path, path.stat().st_size) is role


@pytest.mark.parametrize(
    ("name", "stem", "channel"),
    [
        ("S-014_CH1.csv", "S-014", 1),
        ("S-014_CH2.csv", "S-014", 2),
        ("S-014 Channel 12.txt", "S-014", 12),
        ("S-014-C3.npz", "S-014", 3),
        ("rec0001CH2.csv", "rec0001", 2),
        ("plate_C45.csv", "plate_C45", None),
        ("S-014.csv", "S-014", None),
        ("CH1.csv", "CH1", None),  # no shot is named
        ("march4.csv", "march4", None),
        ("bench2.csv", "bench2", None),
        ("epoch3.csv", "epoch3", None),
    ],
)
def test_the_shot_and_the_channel_in_a_name(name: str, stem: str, channel: int | None) -> None:
    assert stem_of(name) == (stem, channel)
