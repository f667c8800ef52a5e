"""Kill ``shpb watch`` or ``shpb reduce`` at random moments and look whether every shot is whole.

    python -m tests.cli.kill_watch FOLDER_OF_A_DEMO 200

counts a series; the suite does a few.
"""

from __future__ import annotations

import argparse
import contextlib
import json
import os
import random
import shutil
import signal
import subprocess
import sys
import tempfile
import time
from collections import Counter
from pathlib import Path

import shpb


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


def _moments_of_work(command: list[str], results: Path) -> tuple[float, float]:
    """Let a command run until both shots are stored: when [s] the first and the last stood there."""
    process = subprocess.Popen(
        command, stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
        start_new_session=True,
    )  # fmt: skip
    start, first = time.monotonic(), 0.0
    while len(stored := list(results.glob("*.h5"))) < len(SHOTS):
        first = first or (time.monotonic() - start if stored else 0.0)
        assert time.monotonic() - start < 120, "it does not get on"
        time.sleep(0.01)
    last = time.monotonic() - start
    with contextlib.suppress(ProcessLookupError):
        os.killpg(process.pid, signal.SIGKILL)
    process.wait()
    return first or last, last


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


SHOTS = ("W-02", "W-04")
_A_ROUND = 10
# The wait for a file to rest is the same pause each time; without most of it more kills fall into the work.
_QUICK = (
    "import sys; from shpb.watch.landing import Landing; "
    "Landing.__init__.__defaults__ = (0.2, *Landing.__init__.__defaults__[1:]); "
    "from shpb.cli.main import main; sys.exit(main(sys.argv[1:]))"
)


def _write_sheets(lab: Path, demo: Path, number: int) -> float:
    """Sheets with another length for every kill, so that every shot is due again; return the length [mm]."""
    length = 4.5 + 0.001 * number
    for shot_id in SHOTS:
        text = (demo / "records" / f"{shot_id}.toml").read_text("utf-8")
        new = text.replace("length_mm = { value = 4.50", f"length_mm = {{ value = {length:.3f}")
        assert new != text or not number
        (lab / "scope" / f"{shot_id}.toml").write_text(new, "utf-8")
    return length


def series(demo: Path, count: int, verb: str, *, seed: int = 1) -> Counter[str]:
    """Kill so often; after every kill all is whole, after a round a last run finds all that is due.

    Returns
    -------
    Counter
        How many kills came before the first result of a run, between two, and after the last.
    """
    moments, found = random.Random(seed), Counter[str]()
    for first in range(0, count, _A_ROUND):
        with tempfile.TemporaryDirectory() as place:
            lab = Path(place)
            shutil.copytree(demo / "calibration", lab / "calibration")
            (lab / "scope").mkdir()
            for shot_id in SHOTS:
                for path in (demo / "records").glob(f"{shot_id}[._]*"):
                    shutil.copyfile(path, lab / "scope" / path.name)
            results, length = lab / "results", 0.0
            inputs = [lab / "scope"] if verb == "watch" else [lab / "scope" / f"{one}.toml" for one in SHOTS]
            run = [
                sys.executable,
                "-c",
                _QUICK,
                verb,
                *map(str, inputs),
                "--figure",
                "none",
                "--results",
                str(results),
            ]
            stored: set[str] = set()
            # Where in a run the work falls depends on the machine: measured anew, so that the kills fall into it.
            _write_sheets(lab, demo, 0)
            begins, ends = _moments_of_work(run, results)
            for number in range(first, min(first + _A_ROUND, count)):
                length = _write_sheets(lab, demo, number + 1)
                kill_once(run, moments.uniform(0.6 * begins, 1.2 * ends))
                names = require_whole(results)
                assert stored <= set(names), "a stored shot is gone"
                stored = set(names)
                lengths = [_length_mm(results / name) for name in names]
                new = sum(abs(one - length) < 1e-6 for one in lengths)
                found[("before", "between", "after")[new]] += 1
                sys.stderr.write(f"\r{number + 1} of {count}")
            done = subprocess.run(
                [*run, *(["--once"] if verb == "watch" else [])],
                capture_output=True,
                timeout=120,
                check=False,
            )
            assert done.returncode == 0, done.stderr
            assert require_whole(results) == [f"{shot_id}.h5" for shot_id in SHOTS]
            assert all(abs(_length_mm(results / f"{one}.h5") - length) < 1e-6 for one in SHOTS), (
                "one was missed"
            )
            left = [path.name for path in results.iterdir() if path.name.endswith(".part")]
            assert verb != "watch" or not left, left
    return found


def _length_mm(path: Path) -> float:
    return 1e3 * float(shpb.load(path).sheet.specimen.length_m)


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("demo", type=Path)
    parser.add_argument("count", type=int)
    parser.add_argument("--verb", choices=("watch", "reduce"), default="watch")
    parser.add_argument("--seed", type=int, default=1)
    given = parser.parse_args()
    tally = series(given.demo, given.count, given.verb, seed=given.seed)
    sys.stdout.write(
        f"\n{given.count} kills of {given.verb}; against the results of the run: {dict(tally)}\n"
    )
