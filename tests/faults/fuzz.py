# ruff: noqa: T201 - a program of its own, which prints figures
"""Damaged files through every reader, in a child process with a time limit for each.

``python -m tests.faults.fuzz --reader text --count 20000 --seed 1`` reads 20,000 mutants and prints what came of
them. Nothing may come out but a whole result or an error of the package. A child that crashes or hangs is counted
with the number of its mutant, and another one goes on behind it: that is how ``shpb watch`` survives such a file.
``--first N --count 1`` reads one mutant again, ``--keep FOLDER`` keeps the faulty ones.
"""

from __future__ import annotations

import argparse
import contextlib
import json
import os
import select
import subprocess
import sys
import tempfile
import time
import traceback
import warnings
from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, NamedTuple

from tests.faults import seeds
from tests.faults.mutants import mutant

TIME_LIMIT_S = 20.0
_START_LIMIT_S = 120.0
_MEMORY_BYTES = 6 << 30  # of a child: a header that promises terabytes fails at once
_LONGEST_MESSAGE = 4000


class Kind(NamedTuple):
    """One reader: its whole files, how one is read, and the ending of its files."""

    seeds: Callable[[], list[bytes]]
    read: Callable[[Path], Any]
    ending: str
    binary: bool = False


def _record(path: Path) -> None:
    import numpy as np

    from shpb.errors import InputError
    from shpb.record.read import is_complete, read_record
    from shpb.rig.rig import RecordHints

    whole = is_complete(path)
    assert whole.reason, "no reason is given"
    try:
        record = read_record(path)
    except InputError as error:
        if "sample interval" not in str(error):
            raise
        # What the file lacks may be stated elsewhere: then it goes a step further.
        record = read_record(path, RecordHints(sample_interval_s=2e-7))
    assert whole.complete, f"read though incomplete: {whole.reason}"
    assert np.isfinite(record.voltage_v).all(), "a sample is not finite"
    assert np.isfinite(record.start_s), "the start is not finite"
    assert record.samples >= 16, "too few samples"
    assert len(set(record.channels)) == len(record.channels) > 0, "two channels of one name"
    assert all(isinstance(text, str) for text in (*record.channels, *record.remarks)), "not text"


def _plain(value: object) -> None:
    """Whatever was read can be stored: no NaN, no infinity, no stray type."""
    from shpb.store.plain import to_plain

    json.dumps(to_plain(value), allow_nan=False)


def _rig(path: Path) -> None:
    from shpb.rig.rig_file import read_rig

    _plain(read_rig(path))


def _sheet(path: Path) -> None:
    from shpb.rig.sheet_file import read_sheet

    _plain(read_sheet(path))


def _list(path: Path) -> None:
    from shpb.rig.shot_list import usable_rows

    sheets, mistakes = usable_rows(path)
    for sheet in sheets:
        _plain(sheet)
    if mistakes is not None:
        raise mistakes


def _session(path: Path) -> None:
    from shpb.calibrate.session_file import read_session

    _plain(read_session(path))


def _calibration(path: Path) -> None:
    from shpb.rig.calibration_file import read_calibration

    _plain(read_calibration(path))


def _quasistatic(path: Path) -> None:
    import numpy as np

    from shpb.merge.quasistatic import read_quasistatic

    test = read_quasistatic(path)
    assert np.isfinite(test.stress_pa).all(), "a stress is not finite"


def _journal(path: Path) -> None:
    from shpb.watch.journal import FILE_NAME, open_journal

    with tempfile.TemporaryDirectory() as folder:
        place = Path(folder, FILE_NAME)
        place.write_bytes(path.read_bytes())
        journal, damaged = open_journal(Path(folder))
        if damaged:
            from shpb.errors import StoreError

            raise StoreError(damaged)
        journal.save()


def _shot(path: Path) -> None:
    from shpb.errors import ShpbError
    from shpb.store.merge_input import stored_curve
    from shpb.store.peek import Holds, peek
    from shpb.store.shot_brief import read_brief
    from shpb.store.shot_file import load

    peeked = peek(path)
    for other in (read_brief, stored_curve):
        with contextlib.suppress(ShpbError):
            other(path)
    stored = load(path)
    assert peeked.holds is Holds.SHOT, f"loads, but is taken for {peeked.holds}"
    assert stored.verdict in ("accept", "restrict", "reject"), f"verdict {stored.verdict!r}"


def _merge(path: Path) -> None:
    from shpb.store.merge_read import load_merge

    load_merge(path)


KINDS = {
    "text": Kind(seeds.text, _record, ".csv"),
    "npy": Kind(seeds.npy, _record, ".npy", binary=True),
    "npz": Kind(seeds.npz, _record, ".npz", binary=True),
    "hdf5": Kind(seeds.hdf5, _record, ".h5", binary=True),
    "matlab-5": Kind(seeds.matlab_5, _record, ".mat", binary=True),
    "matlab-7.3": Kind(seeds.matlab_73, _record, ".mat", binary=True),
    "tdms": Kind(seeds.tdms, _record, ".tdms", binary=True),
    "rig": Kind(seeds.rig, _rig, ".toml"),
    "sheet": Kind(seeds.sheet, _sheet, ".toml"),
    "list": Kind(seeds.shot_list, _list, ".csv"),
    "session": Kind(seeds.session, _session, ".toml"),
    "calibration": Kind(seeds.calibration, _calibration, ".toml"),
    "quasistatic": Kind(seeds.quasistatic, _quasistatic, ".csv"),
    "journal": Kind(seeds.journal, _journal, ".json"),
    "shot": Kind(seeds.stored_shot, _shot, ".h5", binary=True),
    "merge": Kind(seeds.stored_merge, _merge, ".h5", binary=True),
}


# --- in the child -------------------------------------------------------------------------------------------


def outcome_of(kind: Kind, path: Path) -> tuple[str, str]:
    """Read one file; return what came of it in a word, and the details of a fault."""
    from shpb.errors import IncompleteRecordError, ShpbError
    from shpb.view.text import printable

    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        try:
            kind.read(path)
            outcome, details = "read", ""
        except ShpbError as error:
            outcome, details = "refused", ""
            if isinstance(error, IncompleteRecordError):
                outcome = "incomplete"
            lines = str(error).splitlines()
            if not lines or max(map(len, map(printable, lines))) > _LONGEST_MESSAGE:
                outcome, details = "fault", f"the message is too long or empty: {str(error)[:300]}"
        except BaseException:
            outcome, details = "fault", traceback.format_exc()
    if caught and outcome != "fault":
        first = caught[0]
        outcome, details = "fault", f"warning: {first.category.__name__}: {first.message} ({first.filename})"
    return outcome, details


def _child(name: str, seed: int, first: int, end: int) -> None:
    import faulthandler
    import resource

    from shpb.record import registry

    faulthandler.enable()
    # The look-up among installed packages takes longer than all the rest, and finds the same each time.
    elsewhere = registry._declared_elsewhere()
    registry._declared_elsewhere = lambda: elsewhere
    resource.setrlimit(resource.RLIMIT_AS, (_MEMORY_BYTES, _MEMORY_BYTES))
    kind = KINDS[name]
    whole = kind.seeds()
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, f"m{kind.ending}")
        for content in whole:
            path.write_bytes(content)
            outcome, details = outcome_of(kind, path)
            assert outcome == "read", f"a whole file is {outcome}: {details}"
        for number in range(first, end):
            _tell("begin", number)
            _, content = mutant(whole, number, seed, binary=kind.binary)
            path.write_bytes(content)
            _tell("end", number, *outcome_of(kind, path))


def _tell(*words: object) -> None:
    os.write(1, json.dumps(words).encode() + b"\n")


# --- in the parent ------------------------------------------------------------------------------------------


@dataclass
class Tally:
    """What came of the mutants of one reader."""

    counts: Counter[str] = field(default_factory=Counter)
    faults: dict[int, str] = field(default_factory=dict)  # by number
    lost: dict[int, str] = field(default_factory=dict)  # mutants that crashed or hung the child
    seconds: float = 0.0
    slowest: tuple[float, int] = (0.0, -1)

    def __str__(self) -> str:
        said = ", ".join(f"{count} {outcome}" for outcome, count in sorted(self.counts.items()))
        return f"{said}; {self.seconds:.0f} s, slowest {self.slowest[0]:.2f} s (mutant {self.slowest[1]})"


def run(name: str, count: int, seed: int, *, first: int = 0, limit_s: float = TIME_LIMIT_S) -> Tally:
    """Read ``count`` mutants of one reader's files in children."""
    tally, start, number = Tally(), time.monotonic(), first
    while number < first + count:
        number = _one_child(name, seed, number, first + count, tally, limit_s)
    tally.seconds = time.monotonic() - start
    return tally


def _one_child(name: str, seed: int, first: int, end: int, tally: Tally, limit_s: float) -> int:
    """Run one child until it is done or lost; return the number of the next mutant."""
    command = [sys.executable, "-m", "tests.faults.fuzz", "--child", name, str(seed), str(first), str(end)]
    with (
        tempfile.TemporaryFile() as errors,
        subprocess.Popen(
            command, stdout=subprocess.PIPE, stderr=errors, cwd=Path(__file__).parents[2]
        ) as child,
    ):
        current, since = -1, time.monotonic()
        for words in _lines(child, limit_s):
            if words[0] == "begin":
                current, since = words[1], time.monotonic()
                continue
            _, number, outcome, details = words
            tally.counts[outcome] += 1
            tally.slowest = max(tally.slowest, (time.monotonic() - since, number))
            if details:
                tally.faults[number] = details
            first = number + 1
        hung = child.poll() is None and first < end and time.monotonic() - since >= limit_s
        if hung:
            child.kill()
        code = child.wait()
        if first >= end:
            return first
        errors.seek(0)
        said = errors.read().decode(errors="replace")
        if current < first:
            raise RuntimeError(f"the child did not begin: {said[-2000:]}")
        tally.counts["hung" if hung else "crashed"] += 1
        tally.lost[current] = "hung" if hung else f"exit status {code}: {said[:1500]}"
        return current + 1


def _lines(child: subprocess.Popen[bytes], limit_s: float) -> Iterator[list[Any]]:
    """Yield what the child tells; end when it ends or says nothing for too long."""
    assert child.stdout is not None
    stream, rest = child.stdout.fileno(), b""
    begun = False  # it has its imports and whole files to make first
    while select.select([stream], [], [], limit_s if begun else _START_LIMIT_S)[0]:
        begun = True
        block = os.read(stream, 1 << 16)
        if not block:
            child.wait()
            return
        *whole, rest = (rest + block).split(b"\n")
        for line in whole:
            yield json.loads(line)


def _shown(tally: Tally, name: str, seed: int, keep: Path | None) -> None:
    kind = KINDS[name]
    whole = kind.seeds()
    groups: dict[str, list[int]] = {}
    for number, details in tally.faults.items():
        groups.setdefault(_last_lines(details), []).append(number)
    for details, numbers in sorted(groups.items(), key=lambda item: -len(item[1])):
        print(f"--- {len(numbers)} times, as mutant {numbers[:5]}:\n{details}")
    for number, details in tally.lost.items():
        print(f"--- mutant {number} {details}")
    if keep is not None:
        keep.mkdir(parents=True, exist_ok=True)
        for number in (*tally.faults, *tally.lost):
            _, content = mutant(whole, number, seed, binary=kind.binary)
            (keep / f"{name}-{seed}-{number}{kind.ending}").write_bytes(content)


def _last_lines(details: str) -> str:
    return "\n".join(line[:300] for line in details.strip().splitlines()[-7:])


def main(arguments: Sequence[str] | None = None) -> int:
    """Run what was asked for; return 1 if there was a fault."""
    given = sys.argv[1:] if arguments is None else list(arguments)
    if given[:1] == ["--child"]:
        name, seed, first, end = given[1:]
        _child(name, int(seed), int(first), int(end))
        return 0
    parser = argparse.ArgumentParser(prog="python -m tests.faults.fuzz", description=__doc__)
    parser.add_argument("--reader", choices=[*KINDS, "all"], required=True)
    parser.add_argument("--count", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--first", type=int, default=0)
    parser.add_argument("--keep", type=Path)
    options = parser.parse_args(given)
    bad = False
    for name in KINDS if options.reader == "all" else [options.reader]:
        tally = run(name, options.count, options.seed, first=options.first)
        print(f"{name}, seed {options.seed}: {tally}", flush=True)
        _shown(tally, name, options.seed, options.keep)
        bad = bad or bool(tally.faults or tally.lost)
    return int(bad)


if __name__ == "__main__":
    sys.exit(main())
