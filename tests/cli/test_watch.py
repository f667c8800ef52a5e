"""``shpb watch`` as it is met at the bench: as a process of its own, through pipes, at a terminal, and killed."""

from __future__ import annotations

import contextlib
import json
import os
import random
import select
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

import shpb
from shpb.cli.main import main
from shpb.demo import DemoCampaign, write_demo
from shpb.view.summary import SCHEMA_VERSION

COMMAND = [sys.executable, "-m", "shpb", "watch"]
POSIX = pytest.mark.skipif(sys.platform == "win32", reason="signals and terminals as on POSIX")


@pytest.fixture(scope="module")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("watch_cli") / "demo")


class Lab:
    """A folder of the scope beside the demo's rig files."""

    def __init__(self, folder: Path, demo: Path) -> None:
        self.scope, self._records = folder / "scope", demo / "records"
        shutil.copytree(demo / "calibration", folder / "calibration")
        self.scope.mkdir()

    @property
    def results(self) -> Path:
        return self.scope / "results"

    def shot(self, *shot_ids: str) -> None:
        for shot_id in shot_ids:
            for path in self._records.glob(f"{shot_id}[._]*"):
                shutil.copyfile(path, self.scope / path.name)

    def record(self, name: str) -> None:
        shutil.copyfile(self._records / name, self.scope / name)

    def once(self, *options: str | Path) -> subprocess.CompletedProcess[str]:
        command = [*COMMAND, str(self.scope), "--once", "--figure", "none", *map(str, options)]
        return subprocess.run(
            command, capture_output=True, text=True, timeout=60, check=False, stdin=subprocess.DEVNULL
        )

    @contextlib.contextmanager
    def watching(self, *options: str, ready: bool = True) -> Iterator[subprocess.Popen[str]]:
        process = subprocess.Popen(
            [*COMMAND, str(self.scope), "--figure", "none", *options],
            stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        )  # fmt: skip
        try:
            if ready:
                assert process.stderr is not None
                assert "watching" in process.stderr.readline()
            yield process
        finally:
            process.kill()
            process.communicate()


@pytest.fixture
def lab(campaign: DemoCampaign, tmp_path: Path) -> Lab:
    return Lab(tmp_path, campaign.folder)


def until(what: Callable[[], object], limit_s: float = 30.0) -> None:
    end = time.monotonic() + limit_s
    while not what():
        assert time.monotonic() < end, "it never came"
        time.sleep(0.02)


# --- once ----------------------------------------------------------------------------------------------


@pytest.mark.slow
def test_what_is_there_is_dealt_with_and_shown_on_a_screen(lab: Lab) -> None:
    lab.shot("W-02")
    first = lab.once("--rate", "2000", "--bell")
    assert first.returncode == 0
    assert "  ACCEPT   W-02\n" in first.stdout
    assert "Next shot" in first.stdout
    assert "a first estimate" in first.stdout
    assert "\x1b" not in first.stdout + first.stderr
    assert "\a" in first.stderr
    assert max(map(len, (first.stdout + first.stderr).splitlines())) <= 80
    assert shpb.load(lab.results / "W-02.h5").verdict == "accept"
    lab.shot("W-04", "W-08")
    second = lab.once()
    assert second.returncode == 3
    assert "ACCEPT   W-02" not in second.stdout
    assert "Against 1 earlier shot at this condition: W-02" in second.stdout
    assert "REJECT   W-08" in second.stdout
    assert "2 shots stored" in second.stderr


@pytest.mark.slow
def test_json_lines(lab: Lab) -> None:
    lab.shot("W-02", "W-07")
    lab.record("W-06.h5")
    (lab.scope / "W-06.toml").write_text(
        (lab._records / "W-06.toml").read_text("utf-8").replace("bench_1", "bench_none"), "utf-8"
    )
    done = lab.once("--json")
    lines = [json.loads(line) for line in done.stdout.splitlines()]
    assert {line["shot_id"] for line in lines} == {"W-02", "W-07"}
    assert {line["schema_version"] for line in lines} == {SCHEMA_VERSION}
    channels = next(line for line in lines if line["shot_id"] == "W-07")
    assert channels["record_files"] == ["W-07_CH1.csv", "W-07_CH2.csv"]
    assert all(line["next_shot"]["to_do"] for line in lines)
    assert done.returncode == 2  # a record is left waiting
    assert "there is no such rig file" in done.stderr


@pytest.mark.slow
def test_damaged_files_stop_nothing(lab: Lab) -> None:
    lab.shot("W-02", "W-06", "W-04")
    whole = bytearray((lab.scope / "W-06.h5").read_bytes())
    whole[600:900] = random.Random(4).randbytes(300)
    (lab.scope / "W-06.h5").write_bytes(whole)
    (lab.scope / "W-04.npz").write_bytes((lab.scope / "W-04.npz").read_bytes()[:-900])
    (lab.scope / "junk.mat").write_bytes(random.Random(5).randbytes(3000))
    done = lab.once("--no-questions", "--time-limit", "10")
    assert done.returncode in (1, 2)
    assert "ACCEPT   W-02" in done.stdout
    assert "Traceback" not in done.stdout + done.stderr
    for name in ("W-06", "W-04", "junk.mat"):
        assert name in done.stdout + done.stderr
    assert [path.name for path in lab.results.glob("*.h5")] == ["W-02.h5"]


@pytest.mark.slow
def test_a_record_without_a_sheet_off_a_terminal(lab: Lab) -> None:
    for name in ("W-02.csv", "W-03.txt", "W-04.npz"):
        lab.record(name)
    done = lab.once()
    assert done.returncode == 2
    said = " ".join(done.stderr.split())
    assert said.count("no shot sheet and no list names") == 1
    assert "and 2 more records: no shot sheet and no list names them. Write W-0" in said
    assert "3 records left waiting" in said
    assert not (lab.scope / "W-02.toml").exists()


# --- usage ---------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["{scope}/nowhere"], "there is no such folder"),
        (["{scope}/file.csv"], "this is a file"),
        (["{scope}", "--results", "{scope}"], "would be taken for records"),
        (["{scope}", "--results", "{scope}/file.csv"], "Give a folder for --results"),
        (["{scope}", "--sheets", "{scope}/nowhere.csv"], "Check --sheets"),
        (["{scope}", "--rig", "{scope}/nowhere.toml"], "there is no such rig file"),
        (["{scope}", "--rate", "-5"], "--rate: found -5"),
        (["{scope}", "--rate", "nan"], "--rate: found nan"),
        (["{scope}", "--time-limit", "0"], "--time-limit: found 0"),
        (["{scope}", "--dispersion", "maybe"], "maybe"),
    ],
)
def test_bad_usage_is_said_before_anything_begins(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], options: list[str], words: str
) -> None:
    (tmp_path / "file.csv").write_text("1,2\n")
    assert main(["watch", *(option.format(scope=tmp_path) for option in options), "--once"]) == 2
    assert words in capsys.readouterr().err
    assert [path.name for path in tmp_path.iterdir()] == ["file.csv"]


# --- running -------------------------------------------------------------------------------------------


@POSIX
@pytest.mark.slow
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_it_ends_in_order(lab: Lab, number: int) -> None:
    lab.shot("W-02")
    with lab.watching() as process:
        until((lab.results / "W-02.h5").exists)
        time.sleep(0.5)
        second = lab.once()  # one watch at a time for one results folder
        process.send_signal(number)
        out, err = process.communicate(timeout=20)
    assert process.returncode == 0
    assert "ACCEPT   W-02" in out
    assert "stopped; 1 shot stored; what lands meanwhile is found at the next start" in " ".join(err.split())
    assert (second.returncode, second.stdout) == (2, "")
    assert "another `shpb watch` is at work" in second.stderr


@POSIX
@pytest.mark.slow
def test_cut_short_a_single_pass_is_not_called_done(lab: Lab) -> None:
    lab.shot("W-02")
    with lab.watching("--once", ready=False) as process:
        until((lab.results / "watch_journal.json").exists)
        process.send_signal(signal.SIGINT)
        _, err = process.communicate(timeout=20)
    assert process.returncode == 1
    assert "stopped; 0 shots stored" in " ".join(err.split())


def kill_once(command: list[str], after_s: float) -> None:
    """Start a command, kill it and the processes it started with SIGKILL after a while."""
    process = subprocess.Popen(
        command, stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
        start_new_session=True,
    )  # fmt: skip
    time.sleep(after_s)
    with contextlib.suppress(ProcessLookupError):
        os.killpg(process.pid, signal.SIGKILL)  # the group that was started here, and nothing else
    process.wait()


def require_whole(results: Path) -> list[str]:
    """Load every shot of a folder and its journal; return the names of the shots."""
    names = []
    for path in sorted(results.glob("*.h5")):
        shot = shpb.load(path)
        assert shot.sheet.shot_id == path.stem, path
        assert all(array.size for array in shot.arrays.values()), path
        names.append(path.name)
    journal = results / "watch_journal.json"
    if journal.exists():
        assert json.loads(journal.read_bytes())["format"] == "shpb-watch-journal"
    return names


@POSIX
@pytest.mark.slow
def test_killed_at_any_moment_every_shot_is_whole_and_none_is_missed(lab: Lab) -> None:
    moments = random.Random(11)
    lab.shot("W-02", "W-04")
    for _ in range(2):
        kill_once([*COMMAND, str(lab.scope), "--figure", "none"], moments.uniform(2.0, 3.2))
        require_whole(lab.results)
    done = lab.once()
    assert done.returncode == 0, done.stderr
    require_whole(lab.results)
    names = sorted(path.name for path in lab.results.iterdir() if not path.name.startswith(".watch"))
    assert names == ["W-02.h5", "W-04.h5", "watch_journal.json"]


def _gone(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return True
    return False


@POSIX
@pytest.mark.slow
def test_killed_alone_it_leaves_no_child_behind(lab: Lab) -> None:
    with lab.watching() as process:
        journal = lab.results / "watch_journal.json"
        until(journal.exists)
        (child,) = set(json.loads(journal.read_bytes())["processes"]) - {process.pid}
        assert not _gone(child)
        process.kill()
        process.wait()
        until(lambda: _gone(child))


# --- questions -----------------------------------------------------------------------------------------


class Terminal:
    """A pseudo terminal with the program on it."""

    def __init__(self, command: list[str]) -> None:
        import pty

        self._ours, theirs = pty.openpty()
        self.process = subprocess.Popen(
            command, stdin=theirs, stdout=theirs, stderr=theirs, env={**os.environ, "TERM": "dumb"}
        )
        os.close(theirs)
        self.said = ""

    def wait_for(self, words: str, limit_s: float = 30.0) -> None:
        """Read until ``words`` stand there after what was waited for before."""
        end = time.monotonic() + limit_s
        while words not in self.said:
            assert time.monotonic() < end, f"{words!r} never came; there is {self.said!r}"
            if select.select([self._ours], [], [], 0.1)[0]:
                with contextlib.suppress(OSError):  # how Linux says that the other end is closed
                    self.said += os.read(self._ours, 4096).decode("utf-8", "replace")
        self.said = self.said.partition(words)[2]

    def type(self, line: str) -> None:
        os.write(self._ours, f"{line}\n".encode())

    def close(self) -> None:
        self.process.kill()
        self.process.wait()
        os.close(self._ours)


@POSIX
@pytest.mark.slow
def test_the_few_missing_numbers_are_asked_for_and_become_a_sheet(lab: Lab) -> None:
    lab.record("W-02.csv")
    rig = str(lab.scope.parent / "calibration" / "bench_1.toml")
    terminal = Terminal([*COMMAND, str(lab.scope), "--figure", "none", "--rig", rig])
    try:
        terminal.wait_for("No shot sheet names W-02.csv")
        terminal.wait_for("shot id [W-02]: ")
        terminal.type("")
        terminal.wait_for("(compression, ")
        terminal.type("")
        terminal.wait_for("material: ")
        terminal.type("")
        terminal.wait_for("needed")
        terminal.type("Wrenmoor 3")
        terminal.wait_for("diameter before the shot, mm: ")
        terminal.type("twelve")
        terminal.wait_for('found "twelve", expected a number in mm')
        lab.shot("W-04")  # another shot in the middle of the questions
        terminal.wait_for("ACCEPT   W-04")
        terminal.wait_for("diameter before the shot, mm: ")
        terminal.type("12")
        terminal.wait_for("length before the shot, mm: ")
        terminal.type("4,50 mm")
        terminal.wait_for("temperature, C [20]: ")
        terminal.type("")
        terminal.wait_for("striker speed, m/s [-]: ")
        terminal.type("11.58")
        terminal.wait_for("day of the shot [")
        terminal.type("2031-02-17")
        terminal.wait_for("written: W-02.toml")
        terminal.wait_for("   W-02")
        until((lab.results / "W-02.h5").exists)
    finally:
        terminal.close()
    assert sorted(path.name for path in lab.results.glob("*.h5")) == ["W-02.h5", "W-04.h5"]
    assert 'material = "Wrenmoor 3"' in (lab.scope / "W-02.toml").read_text("utf-8")


@POSIX
@pytest.mark.slow
def test_questions_put_off_wait_for_a_sheet(lab: Lab) -> None:
    lab.record("W-03.txt")
    terminal = Terminal([*COMMAND, str(lab.scope), "--figure", "none"])
    try:
        terminal.wait_for("shot id [W-03]: ")
        terminal.type("later")
        terminal.wait_for("put off: waits for a sheet such as W-03.toml")
        lab.record("W-03.toml")
        terminal.wait_for("   W-03")
        terminal.process.send_signal(signal.SIGINT)
        terminal.wait_for("stopped; 1 shot stored")
        assert terminal.process.wait(20) == 0
    finally:
        terminal.close()
