"""The journal comes back bit for bit; one that is damaged is set aside, never written over and never fatal."""

from __future__ import annotations

import json
import os
from pathlib import Path

import pytest

import shpb.whole_file
from shpb.errors import StoreError
from shpb.watch.journal import FILE_NAME, Came, Entry, Journal, Seen, clear_left_over, open_journal


def entry(name: str = "S-1.csv", sha256: str = "aa", **changes: object) -> Entry:
    values: dict[str, object] = {
        "files": (Seen(name=name, size=10, mtime_ns=1_800_000_000_123_456_789, sha256=sha256),),
        "came": Came.STORED,
        "shot_id": "S-1",
        "verdict": "accept",
        "sheet": "bb",
        "result": "S-1.h5",
        "revision": 3,
        "figure_due": True,
    }
    return Entry(**{**values, **changes})  # type: ignore[arg-type]


def test_it_comes_back(tmp_path: Path) -> None:
    journal = Journal(tmp_path / FILE_NAME)
    journal.put(entry(shot_id="S-1 µ <b>"))
    journal.put(entry("S-2.csv", "cc", came=Came.UNUSABLE, said="swapped\nchannels"))
    journal.answers, journal.processes = {"material": "Wrenmoor 3"}, [12, 34]
    journal.save()
    again, wrong = open_journal(tmp_path)
    assert wrong == ""
    assert (again.entries, again.answers, again.processes) == (
        journal.entries,
        journal.answers,
        journal.processes,
    )
    assert not again.changed


def test_an_entry_that_shares_a_file_is_superseded(tmp_path: Path) -> None:
    journal = Journal(tmp_path / FILE_NAME)
    one, two = (Seen(name=f"S_CH{n}.csv", size=1, mtime_ns=n, sha256=f"{n}") for n in (1, 2))
    journal.put(entry(files=(one,)))
    journal.put(entry(files=(one, two)))
    assert list(journal.entries) == [("S_CH1.csv", "S_CH2.csv")]
    assert journal.of_content(("1", "2")) is not None
    assert journal.of_content(("1",)) is None


def test_a_copy_is_not_the_entry_of_a_content(tmp_path: Path) -> None:
    journal = Journal(tmp_path / FILE_NAME)
    journal.put(entry("copy.csv", "aa", came=Came.SAME))
    assert journal.of_content(("aa",)) is None
    assert journal.of_shot("S-1") is None


@pytest.mark.parametrize(
    ("content", "why"),
    [
        (b"", "Expecting value"),
        (b"\x00" * 300, "Expecting value"),
        (b'{"format": "shpb-watch-journal", "format_version": 1, "shots": [{"fi', "Unterminated string"),
        (b"[]", "list indices"),
        (b"null", "NoneType"),
        (b'{"format": "something else"}', "no journal of this program"),
        (
            b'{"format": "shpb-watch-journal", "format_version": 99, "program_version": "9.9"}',
            "written by a later version of the program, 9.9",
        ),
        (
            b'{"format": "shpb-watch-journal", "format_version": 1, "shots": [{"files": [{"name": 1}]}]}',
            "size",
        ),
        (b"[" * 100_000, "set aside"),
        (b"\xff\xfe\xfd", "set aside"),
    ],
)
def test_a_damaged_one_is_set_aside(tmp_path: Path, content: bytes, why: str) -> None:
    (tmp_path / FILE_NAME).write_bytes(content)
    (tmp_path / "watch_journal_damaged_1.json").write_bytes(b"an earlier one")
    journal, wrong = open_journal(tmp_path)
    assert journal.entries == {}
    assert why in wrong
    assert "set aside as watch_journal_damaged_2.json" in wrong
    assert (tmp_path / "watch_journal_damaged_1.json").read_bytes() == b"an earlier one"
    assert (tmp_path / "watch_journal_damaged_2.json").read_bytes() == content
    journal.put(entry())
    journal.save()
    assert open_journal(tmp_path)[0].entries == journal.entries


@pytest.mark.parametrize("cut", range(0, 900, 60))
def test_cut_anywhere_it_is_whole_or_set_aside(tmp_path: Path, cut: int) -> None:
    journal = Journal(tmp_path / FILE_NAME)
    journal.put(entry())
    journal.save()
    whole = (tmp_path / FILE_NAME).read_bytes()
    (tmp_path / FILE_NAME).write_bytes(whole[:cut])
    again, wrong = open_journal(tmp_path)
    assert (again.entries == journal.entries) == (wrong == "")
    assert bool(wrong) == (cut < len(whole))


def test_a_full_disk_leaves_the_old_one(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    journal = Journal(tmp_path / FILE_NAME)
    journal.put(entry())
    journal.save()
    before = (tmp_path / FILE_NAME).read_bytes()

    def full(_part: Path) -> None:
        raise OSError(28, os.strerror(28))

    monkeypatch.setattr(shpb.whole_file, "_sync", full)
    journal.put(entry("S-2.csv", "cc"))
    with pytest.raises(StoreError, match="No space left"):
        journal.save()
    assert journal.changed
    assert (tmp_path / FILE_NAME).read_bytes() == before
    assert [path.name for path in tmp_path.iterdir()] == [FILE_NAME]


def test_what_killed_processes_left_is_cleared_and_nothing_else(tmp_path: Path) -> None:
    ours = [".S-1.h5.77.part", ".S-2.png.77.part", ".watch_journal.json.4242.part"]
    for name in (*ours, ".S-1.h5.177.part", "S-1.h5", "mine.77.part"):
        (tmp_path / name).write_text("x")
    assert sorted(clear_left_over(tmp_path, [77, 5])) == ours
    assert sorted(path.name for path in tmp_path.iterdir()) == [".S-1.h5.177.part", "S-1.h5", "mine.77.part"]


def test_it_is_strict_json_in_ascii(tmp_path: Path) -> None:
    journal = Journal(tmp_path / FILE_NAME)
    journal.put(entry(shot_id="Probe µ"))
    journal.save()
    content = json.loads((tmp_path / FILE_NAME).read_bytes().decode("ascii"))
    assert content["shots"][0]["files"][0]["mtime_ns"] == 1_800_000_000_123_456_789
