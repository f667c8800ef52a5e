"""What the system refuses is said once, tried again and mended by itself; a restart neither repeats nor misses."""

from __future__ import annotations

import contextlib
import errno
import hashlib
import os
import shutil
from pathlib import Path
from typing import Any

import pytest

import shpb
import shpb.whole_file
from shpb.store.peek import peek
from shpb.watch.journal import FILE_NAME
from shpb.watch.landing import list_folder
from shpb.watch.looking import TRIES
from shpb.watch.tasks import FileLook, Look, ReduceShot
from shpb.watch.worker import WorkerError
from tests.watch.conftest import Bench


@pytest.fixture
def disk_full(monkeypatch: pytest.MonkeyPatch) -> set[str]:
    """Endings of file names for which the disk is full: the sync that every whole write ends with fails."""
    full: set[str] = set()
    real = shpb.whole_file._sync

    def sync(path: Path) -> None:
        if any(f"{ending}." in path.name for ending in full):
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        real(path)

    monkeypatch.setattr(shpb.whole_file, "_sync", sync)
    return full


def left_over(bench: Bench) -> list[str]:
    return [path.name for path in bench.results.iterdir() if path.name.endswith(".part")]


# --- the disk ------------------------------------------------------------------------------------------


def test_a_full_disk_is_said_once_and_the_shot_is_stored_when_there_is_room(
    bench: Bench, disk_full: set[str]
) -> None:
    disk_full.add(".h5")
    bench.shot("W-02")
    bench.turn(60)
    (said,) = bench.remarks
    assert "No space left on device" in said
    assert "It is tried again; the watch goes on" in said
    assert bench.shown == []
    assert bench.stored == left_over(bench) == []
    assert 4 <= bench.reductions <= 8  # at growing intervals
    assert bench.watch.troubles
    disk_full.clear()
    bench.turn(40)
    assert bench.stored == ["W-02.h5"]
    assert bench.remarks[1:] == [
        f": results are stored again (after {bench.reductions - 1} tries that failed)"
    ]
    assert bench.watch.troubles == ()
    assert shpb.load(bench.results / "W-02.h5").verdict == "accept"


def test_a_full_disk_keeps_the_earlier_result(bench: Bench, disk_full: set[str]) -> None:
    bench.shot("W-02")
    bench.turn(4)
    before = (bench.results / "W-02.h5").read_bytes()
    disk_full.add(".h5")
    text = bench.text_of("W-02.toml").replace("value = 4.50", "value = 4.60")
    bench.write("W-02.toml", text)
    bench.turn(10)
    assert (bench.results / "W-02.h5").read_bytes() == before
    disk_full.clear()
    bench.turn(40)
    assert len(bench.shown) == 2


def test_a_journal_that_cannot_be_written_stops_no_shot(bench: Bench, disk_full: set[str]) -> None:
    disk_full.add(".json")
    bench.shot("W-02")
    bench.turn(5)
    bench.shot("W-04")
    bench.turn(5)
    assert bench.stored == ["W-02.h5", "W-04.h5"]
    assert len(bench.remarks) == 1
    assert not (bench.results / FILE_NAME).exists()
    disk_full.clear()
    bench.turn(40)
    assert "the journal is written again" in bench.remarks[1]
    bench.start()
    bench.turn(6)
    assert bench.reductions == 0


def test_a_folder_without_permission(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    # As from the file system: the tests may run as a user who is refused nothing.
    def refused(folder: Path) -> Any:
        raise PermissionError(errno.EACCES, "Permission denied", str(folder))

    bench.shot("W-02")
    monkeypatch.setattr("shpb.watch.loop.list_folder", refused)
    bench.turn(60)
    assert len(bench.remarks) == 1
    assert "cannot be reached (Permission denied)" in bench.remarks[0]
    monkeypatch.setattr("shpb.watch.loop.list_folder", list_folder)
    bench.turn(40)
    assert bench.stored == ["W-02.h5"]


def test_a_share_that_goes_and_comes_back(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    away = bench.lab / "away"
    bench.scope.rename(away)
    bench.turn(60)
    assert len(bench.remarks) == 1
    assert "cannot be reached (No such file or directory)" in bench.remarks[0]
    assert not bench.scope.exists()  # not made anew on the local disk
    shutil.copyfile(bench.demo / "records" / "W-04.npz", away / "W-04.npz")
    shutil.copyfile(bench.demo / "records" / "W-04.toml", away / "W-04.toml")
    away.rename(bench.scope)
    bench.turn(40)
    assert "the folder can be reached again (after" in bench.remarks[1]
    assert bench.stored == ["W-02.h5", "W-04.h5"]
    assert bench.reductions == 2


def test_a_share_that_goes_in_the_middle_of_a_reduction(bench: Bench) -> None:
    away = bench.lab / "away"

    def unplug(task: object) -> None:
        if isinstance(task, ReduceShot) and bench.scope.exists():
            bench.scope.rename(away)

    bench.worker.hook = unplug
    bench.shot("W-02")
    bench.turn(20)
    assert bench.shown == []
    assert bench.refused == []
    assert not bench.scope.exists()
    bench.worker.hook = None
    away.rename(bench.scope)
    bench.turn(40)
    assert bench.stored == ["W-02.h5"]


def test_a_record_that_is_locked_for_a_while(bench: Bench) -> None:
    def locked(task: object) -> Any:
        if isinstance(task, Look):
            return tuple(FileLook(path.name, None, refused="Permission denied") for path in task.paths)
        return None

    bench.worker.hook = locked
    bench.shot("W-02")
    bench.turn(30)
    assert bench.remarks == ["W-02.csv: cannot be read (Permission denied); it is tried again"]
    bench.worker.hook = None
    bench.turn(40)
    assert bench.stored == ["W-02.h5"]


# --- the child -----------------------------------------------------------------------------------------


def test_a_record_that_brings_the_child_down_is_left_after_a_second_try(bench: Bench) -> None:
    def crash(task: object) -> None:
        if isinstance(task, Look) and task.paths[0].name == "W-06.h5":
            raise WorkerError("the reading crashed (SIGSEGV)")

    bench.worker.hook = crash
    bench.shot("W-06")
    bench.shot("W-02")
    bench.turn(60)
    assert bench.stored == ["W-02.h5"]
    (refused,) = bench.refused
    assert refused.names == ("W-06.h5",)
    assert "SIGSEGV" in refused.text
    assert "left alone until it changes" in refused.text
    crashes = [task for task in bench.worker.asked if isinstance(task, Look) and "06" in task.paths[0].name]
    assert len(crashes) == TRIES
    bench.worker.hook = None
    bench.put("W-06.h5")  # exported again
    bench.turn(5)
    assert bench.stored == ["W-02.h5", "W-06.h5"]


def test_memory_that_was_short_once(bench: Bench) -> None:
    failing = [WorkerError("there is not enough memory for this record")]

    def short(task: object) -> None:
        if isinstance(task, ReduceShot) and failing:
            raise failing.pop()

    bench.worker.hook = short
    bench.shot("W-02")
    bench.turn(8)
    assert bench.refused == []
    assert "not enough memory" in bench.remarks[0]
    assert bench.stored == ["W-02.h5"]


def test_a_record_that_changes_while_it_is_read_is_read_again(bench: Bench) -> None:
    whole = (bench.demo / "records" / "W-02.csv").read_bytes()
    changed = whole.replace(b"-0,002441", b"0,000000", 1)

    def write(task: object) -> None:
        if isinstance(task, ReduceShot) and (bench.scope / "W-02.csv").read_bytes() == whole:
            bench.write("W-02.csv", changed)

    bench.worker.hook = write
    bench.shot("W-02")
    bench.turn(12)
    (event,) = bench.shown
    assert bench.reductions == 2
    assert peek(bench.results / "W-02.h5").records == (hashlib.sha256(changed).hexdigest(),)
    assert event.revision == 1  # nothing was stored of the first


# --- restart -------------------------------------------------------------------------------------------


def test_what_landed_while_it_was_off_is_found(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    bench.shot("W-04")
    bench.start()
    bench.turn(4)
    assert [event.shown.shot_id for event in bench.shown] == ["W-04"]
    assert bench.reductions == 1


def test_a_record_that_changed_while_it_was_off(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    whole = (bench.demo / "records" / "W-02.csv").read_bytes()
    bench.write("W-02.csv", whole.replace(b"-0,002441", b"0,000000", 1))
    bench.start()
    bench.turn(4)
    assert [event.revision for event in bench.shown] == [2]


def test_a_sheet_that_changed_while_it_was_off(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    bench.write("W-02.toml", bench.text_of("W-02.toml").replace("value = 4.50", "value = 4.60"))
    bench.start()
    bench.turn(4)
    assert [event.why_again for event in bench.shown] == ["its sheet has changed"]


def test_a_result_that_is_gone_is_made_again(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    (bench.results / "W-02.h5").unlink()
    bench.start()
    bench.turn(4)
    assert [event.why_again for event in bench.shown] == ["its result was gone"]
    assert bench.stored == ["W-02.h5"]


def test_without_a_journal_everything_is_reduced_again_and_nothing_is_lost(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    (bench.results / FILE_NAME).unlink()
    bench.start()
    bench.turn(4)
    assert bench.stored == ["W-02.h5"]
    assert bench.shown[0].shown.set_aside == ()  # of the same record


def test_a_failure_is_tried_again_at_the_next_start(bench: Bench) -> None:
    def crash(task: object) -> None:
        if isinstance(task, ReduceShot):
            raise WorkerError("the reading crashed (SIGSEGV)")

    bench.worker.hook = crash
    bench.shot("W-02")
    bench.turn(10)
    assert len(bench.refused) == 1
    bench.start()
    bench.turn(4)
    assert bench.stored == ["W-02.h5"]


@pytest.mark.parametrize("stop_after", range(6))
def test_ended_between_any_two_tasks(bench: Bench, stop_after: int) -> None:
    count = 0

    def killed(task: object) -> None:
        nonlocal count
        count += 1
        if count > stop_after:
            raise KeyboardInterrupt

    bench.worker.hook = killed
    for shot_id in ("W-02", "W-04"):
        bench.shot(shot_id)
    with contextlib.suppress(KeyboardInterrupt):
        bench.turn(6)
    done = bench.reductions
    bench.start()
    bench.turn(6)
    assert bench.stored == ["W-02.h5", "W-04.h5"]
    assert bench.reductions <= 2
    assert done + bench.reductions <= 3  # at most the one that was cut off is done twice
    bench.start()
    bench.turn(6)
    assert bench.reductions == 0
