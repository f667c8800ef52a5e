# ruff: noqa: T201 - a program of its own, which prints figures
"""SIGKILL at random moments: what is stored afterwards is whole, and the next run completes.

``python -m tests.faults.kills --verb reduce --count 200 --seed 1`` kills that many runs in a folder of the demo's
records and prints figures. The runs are forked from a process that has imported everything, so that the moments
fall on reading, reducing, storing and drawing and not on imports.
"""

from __future__ import annotations

import argparse
import os
import random
import shutil
import signal
import sys
import tempfile
import time
from collections import Counter
from collections.abc import Callable, Sequence
from pathlib import Path

EXAMPLES = Path(__file__).parents[2] / "examples"
SHOTS = ("W-02", "W-04")
_PNG_END = b"IEND\xaeB`\x82"


def prepare(folder: Path) -> Path:
    """A folder with two shots of the demo, their sheets and their rig; return that of the records."""
    records = folder / "records"
    records.mkdir(parents=True)
    (folder / "calibration").mkdir()
    for path in (EXAMPLES / "calibration").glob("*.toml"):
        shutil.copyfile(path, folder / "calibration" / path.name)
    for path in (EXAMPLES / "records").iterdir():
        if path.stem in SHOTS:
            shutil.copyfile(path, records / path.name)
    return records


def command(verb: str, records: Path, results: Path, figure: str = "none") -> list[str]:
    """Arguments of one run."""
    common = [str(records), "--results", str(results), "--csv", "--figure", figure]
    if verb == "reduce":
        return ["reduce", *common, "--workers", "1"]
    return ["watch", *common, "--once", "--no-questions"]


def started(arguments: Sequence[str]) -> int:
    """Fork a run in a process group of its own; return its id."""
    from shpb.cli.main import main

    process = os.fork()
    if process:
        return process
    status = 70
    try:
        os.setpgid(0, 0)
        for stream in (1, 2):
            os.dup2(os.open(os.devnull, os.O_WRONLY), stream)
        status = main(arguments)
    finally:
        os._exit(status)
    raise AssertionError


def ended(process: int) -> int:
    """Wait for a run; return its exit status, negative for a signal."""
    return os.waitstatus_to_exitcode(os.waitpid(process, 0)[1])


def faults_in(results: Path) -> list[str]:
    """Every result that is not whole, and every temporary file that could pass for one."""
    from shpb.errors import ShpbError
    from shpb.store.shot_file import load
    from shpb.watch.journal import FILE_NAME, open_journal

    found = []
    for path in sorted(results.iterdir()) if results.is_dir() else ():
        if path.name.endswith(".part"):
            if not path.name.startswith("."):
                found.append(f"{path.name} is not hidden")
        elif path.suffix == ".h5":
            try:
                stored = load(path)
                assert stored["response/stress_3w"].size
                assert stored.record.samples
                assert stored.verdict in ("accept", "restrict", "reject")
            except (ShpbError, AssertionError) as error:
                found.append(f"{path.name}: {error!r}")
        elif path.suffix == ".png":
            if not path.read_bytes().endswith(_PNG_END):
                found.append(f"{path.name} is cut short")
        elif path.suffix == ".csv":
            if not path.read_bytes().endswith(b"\n"):
                found.append(f"{path.name} is cut short")
        elif path.name == FILE_NAME:
            _, damaged = open_journal(results)
            found += [damaged] if damaged else []
        elif not path.name.startswith(".") and path.name != "watch.lock":
            found.append(f"{path.name} is not expected")
    return found


def kill_runs(verb: str, count: int, seed: int, say: Callable[[str], None] = lambda _: None) -> Counter[str]:
    """Kill ``count`` runs and let one complete in each folder; return what was counted.

    Raises
    ------
    AssertionError
        If anything was not whole, or a run after the kills did not complete.
    """
    from shpb.cli.reduce import load_what_workers_need

    load_what_workers_need()
    counts: Counter[str] = Counter()
    luck = random.Random(seed)
    with tempfile.TemporaryDirectory() as place:
        records = prepare(Path(place, "lab"))
        before = {path.name: path.read_bytes() for path in records.iterdir()}
        results = Path(place, "clean")
        since = time.monotonic()
        assert ended(started(command(verb, records, results))) == 0, "a clean run does not complete"
        usual_s = time.monotonic() - since
        say(f"a clean run takes {usual_s:.2f} s")
        killed, folder = 0, 0
        while killed < count:
            folder += 1
            results = Path(place, f"results-{folder}")
            # Several kills in one folder: the later ones strike while results are replaced.
            for _ in range(min(luck.randint(1, 6), count - killed)):
                figure = luck.choice(("png", "none", "none", "none"))
                arguments = command(verb, records, results, figure)
                killed += _killed(arguments, luck.uniform(0.02, 1.05) * usual_s, luck, counts)
                faults = faults_in(results)
                assert not faults, f"after kill {killed} (seed {seed}): {faults}"
                parts = len(list(results.glob(".*.part"))) if results.is_dir() else 0
                counts["kills that left a temporary file" if parts else "kills without"] += 1
            status = ended(started(command(verb, records, results)))
            assert status == 0, f"the run after kill {killed} ended with {status}"
            assert not faults_in(results)
            stored = {path.stem for path in results.glob("*.h5")}
            assert stored == {f"{shot}" for shot in SHOTS}, f"stored are {stored}"
            counts["runs afterwards that completed"] += 1
            shutil.rmtree(results)
            say(f"{killed} killed: {dict(counts)}")
        assert before == {path.name: path.read_bytes() for path in records.iterdir()}, "records were changed"
    return counts


def _killed(arguments: Sequence[str], after_s: float, luck: random.Random, counts: Counter[str]) -> int:
    process = started(arguments)
    time.sleep(after_s)
    # A terminal that goes takes the whole group along, the kernel's memory killer one process.
    if luck.random() < 0.5:
        try:
            os.killpg(process, signal.SIGKILL)
        except ProcessLookupError:  # its group is not there yet
            os.kill(process, signal.SIGKILL)
    else:
        os.kill(process, signal.SIGKILL)
    status = ended(process)
    counts["killed" if status == -signal.SIGKILL else "ended before the kill"] += 1
    return int(status == -signal.SIGKILL)


def main(arguments: Sequence[str] | None = None) -> int:
    """Kill what was asked for and print the figures."""
    parser = argparse.ArgumentParser(prog="python -m tests.faults.kills", description=__doc__)
    parser.add_argument("--verb", choices=("reduce", "watch"), required=True)
    parser.add_argument("--count", type=int, default=200)
    parser.add_argument("--seed", type=int, default=1)
    options = parser.parse_args(arguments)
    since = time.monotonic()
    counts = kill_runs(options.verb, options.count, options.seed, lambda text: print(text, flush=True))
    print(f"{options.verb}, seed {options.seed}: {dict(counts)}; {time.monotonic() - since:.0f} s")
    return 0


if __name__ == "__main__":
    sys.exit(main())
