# ruff: noqa: T201 - a program of its own, which prints figures
"""Every open, write, sync, rename and new folder refused in turn: what stood there or what was to come is whole.

``python -m tests.faults.refusals --verb reduce`` counts the calls of a clean run within the folders of the run and
then runs again for each of them and each kind of refusal, on results of before.
"""

from __future__ import annotations

import argparse
import builtins
import contextlib
import errno
import io
import os
import random
import shutil
import sys
import tempfile
import time
import tomllib
from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from tests.faults.kills import EXAMPLES, prepare

REFUSALS: dict[str, Callable[[], BaseException]] = {
    "ENOSPC": lambda: OSError(errno.ENOSPC, os.strerror(errno.ENOSPC)),
    "EIO": lambda: OSError(errno.EIO, os.strerror(errno.EIO)),
    "EACCES": lambda: PermissionError(errno.EACCES, os.strerror(errno.EACCES)),
    "Ctrl-C": KeyboardInterrupt,
}


class _Writing:
    """An open file whose writes are counted."""

    def __init__(self, file: Any, ask: Callable[[str, object], None], name: object) -> None:
        self._file, self._ask, self._name = file, ask, name

    def write(self, data: Any) -> Any:
        self._ask("write", self._name)
        return self._file.write(data)

    def __getattr__(self, name: str) -> Any:
        return getattr(self._file, name)

    def __enter__(self) -> _Writing:
        self._file.__enter__()
        return self

    def __exit__(self, *error: object) -> Any:
        return self._file.__exit__(*error)

    def __iter__(self) -> Iterator[Any]:
        return iter(self._file)


@dataclass
class Gate:
    """Counts calls on paths within a folder, and refuses one of them."""

    folder: Path
    refuse: int = -1
    error: Callable[[], BaseException] = KeyboardInterrupt
    calls: list[str] = field(default_factory=list)

    def ask(self, kind: str, target: object) -> None:
        name = os.fspath(target) if isinstance(target, str | os.PathLike) else ""
        if isinstance(target, int):
            with contextlib.suppress(OSError):
                name = os.readlink(f"/proc/self/fd/{target}")
        if not str(name).startswith(str(self.folder)):
            return
        self.calls.append(f"{kind} {os.path.relpath(name, self.folder)}")
        if len(self.calls) - 1 == self.refuse:
            raise self.error()

    @contextlib.contextmanager
    def closed(self) -> Iterator[None]:
        real = {name: getattr(os, name) for name in ("open", "fsync", "replace", "mkdir")}
        real_open = io.open

        def counted(kind: str) -> Callable[..., Any]:
            def call(target: Any, *rest: Any, **named: Any) -> Any:
                self.ask(kind, target)
                return real[kind](target, *rest, **named)

            return call

        def opened(target: Any, mode: str = "r", *rest: Any, **named: Any) -> Any:
            self.ask("open", target)
            file = real_open(target, mode, *rest, **named)
            return _Writing(file, self.ask, target) if set(mode) & set("wax+") else file

        try:
            for kind in real:
                setattr(os, kind, counted(kind))
            builtins.open = io.open = opened  # type: ignore[assignment]
            yield
        finally:
            for kind, function in real.items():
                setattr(os, kind, function)
            builtins.open = io.open = real_open


@dataclass(frozen=True)
class Case:
    """One verb on a folder: its arguments, where its results go, what was there before."""

    arguments: Sequence[str]
    results: Path
    before: Path  # results of an earlier run, copied to ``results`` ahead of every run


def of_reduce(place: Path, figure: str = "none") -> Case:
    """Reduce one shot whose result of before is there, with curves."""
    records = prepare(place / "lab")
    results, before = place / "results", place / "before"
    common = ["reduce", str(records / "W-02.toml"), "--csv", "--figure", figure]
    assert _quiet_main([*common, "--results", str(before), "--cutoff-khz", "90"])[0] == 0
    return Case([*common, "--results", str(results)], results, before)


def of_merge(place: Path) -> Case:
    """Merge two shots with three slow tests."""
    records = prepare(place / "lab")
    results, before = place / "results", place / "before"
    assert (
        _quiet_main(["reduce", str(records), "--results", str(before), "--figure", "none", "--workers", "1"])[
            0
        ]
        == 0
    )
    slow = place / "lab" / "quasistatic"
    slow.mkdir()
    for name in ("W_20C_1e-4", "W_20C_1e-3"):
        shutil.copyfile(EXAMPLES / "quasistatic" / f"{name}.csv", slow / f"{name}.csv")
    out = str(results / "merged")
    return Case(["merge", str(results), str(slow), "--results", out, "--figure", "none"], results, before)


def of_watch(place: Path) -> Case:
    """Watch a folder of two records once."""
    records = prepare(place / "lab")
    results, before = place / "results", place / "before"
    before.mkdir()
    watch = ["watch", str(records), "--once", "--no-questions", "--results", str(results), "--csv"]
    return Case([*watch, "--figure", "none"], results, before)


def of_forms(place: Path) -> Case:
    """Templates to fill in."""
    (place / "before").mkdir()
    return Case(["forms", str(place / "results")], place / "results", place / "before")


def _reduced(place: Path) -> tuple[Path, Path]:
    """Stored results of two shots, and their rig file."""
    records, stored = prepare(place / "lab"), place / "stored"
    quiet = ["--results", str(stored), "--figure", "none", "--workers", "1"]
    assert _quiet_main(["reduce", str(records), *quiet])[0] == 0
    return stored, place / "lab" / "calibration" / "bench_1.toml"


def of_report(place: Path) -> Case:
    """Pages of two shots and their campaign, over pages of before."""
    stored, _ = _reduced(place)
    results, before = place / "results", place / "before"
    before.mkdir()
    return Case(["report", str(stored), "--into", str(results), "--workers", "1"], results, before)


def of_export(place: Path) -> Case:
    """Curves of two shots."""
    stored, _ = _reduced(place)
    (place / "before").mkdir()
    return Case(
        ["export", str(stored), "--into", str(place / "results")], place / "results", place / "before"
    )


def of_calibrate(place: Path) -> Case:
    """A session whose calibration gets a name beside an earlier one."""
    from shpb.demo import write_calibration_demo

    write_calibration_demo(place / "lab")
    session = place / "lab" / "session_bench_3_2031-03-19.toml"
    results, before = place / "results", place / "before"
    before.mkdir()
    return Case(["calibrate", str(session), "--into", str(results), "--figure", "svg"], results, before)


def of_recalibrate(place: Path) -> Case:
    """Two shots by another calibration."""
    from shpb.quantity import Quantity
    from shpb.rig.calibration import Calibration, GaugeCalibration, stated_of
    from shpb.rig.calibration_file import write_calibration
    from shpb.rig.rig_file import read_rig

    stored, rig_file = _reduced(place)
    rig = read_rig(rig_file)
    gauge = GaugeCalibration(gauge_factor=Quantity(3.41, 0.01), as_stated=stated_of(rig.transmitted_gauge))
    calibration = Calibration(
        name="new", rig=rig.name, date="2031-02-01", holds_days=365, gauges={"transmitted_gauge": gauge}
    )
    file = write_calibration(calibration, place / "lab" / "new.toml")
    results, before = place / "results", place / "before"
    before.mkdir()
    again = ["recalibrate", str(stored), "--calibration", str(file), "--into", str(results)]
    return Case([*again, "--workers", "1", "--figure", "none", "--csv"], results, before)


def of_demo(place: Path) -> Case:
    """A demo campaign, written only."""
    (place / "before").mkdir()
    return Case(["demo", str(place / "results"), "--write-only"], place / "results", place / "before")


CASES: dict[str, Callable[[Path], Case]] = {
    "reduce": of_reduce,
    "reduce-figure": lambda place: of_reduce(place, "png"),
    "merge": of_merge,
    "watch": of_watch,
    "forms": of_forms,
    "report": of_report,
    "export": of_export,
    "calibrate": of_calibrate,
    "recalibrate": of_recalibrate,
    "demo": of_demo,
}


def _quiet_main(arguments: Sequence[str]) -> tuple[int, str]:
    from shpb.cli.main import main

    said = io.StringIO()
    with contextlib.redirect_stdout(io.StringIO()), contextlib.redirect_stderr(said):
        status = main(list(arguments))
    return status, said.getvalue()


@contextlib.contextmanager
def _in_this_process() -> Iterator[None]:
    """The watch's child does its work here, so that its calls are counted too, and no time passes in waiting."""
    import shpb.watch.worker
    from tests.watch.conftest import InProcess

    real, sleep = shpb.watch.worker.Worker, time.sleep
    shpb.watch.worker.Worker = lambda work, prepare, *, limit_s: _Stopped(InProcess(work))  # type: ignore[misc,assignment]
    try:
        yield
    finally:
        shpb.watch.worker.Worker = real  # type: ignore[misc]
        time.sleep = sleep


class _Stopped:
    def __init__(self, inner: Any) -> None:
        self._inner = inner

    def stop(self) -> None:
        """Nothing to stop."""

    def __getattr__(self, name: str) -> Any:
        return getattr(self._inner, name)


def _run(case: Case, gate: Gate) -> tuple[int, str]:
    if case.results.exists():
        shutil.rmtree(case.results)
    if any(case.before.iterdir()):
        shutil.copytree(case.before, case.results)
    with _in_this_process(), gate.closed():
        return _quiet_main(case.arguments)


def whole(case: Case, expected: set[str], status: int, said: str) -> list[str]:
    """What is wrong after a run in which one call was refused."""
    from shpb.errors import ShpbError
    from shpb.store.merge_read import load_merge
    from shpb.store.peek import Holds, peek
    from shpb.store.shot_file import load

    found = []
    there = {str(path.relative_to(case.results)) for path in case.results.rglob("*") if path.is_file()}
    for name in sorted(there):
        path = case.results / name
        if name.endswith(".part"):
            found.append(f"{name} is left over")
        elif path.suffix == ".h5":
            earlier = case.before / name
            if earlier.exists() and earlier.read_bytes() == path.read_bytes():
                continue
            try:
                if peek(path).holds is Holds.MERGE:
                    load_merge(path)
                else:
                    assert load(path)["response/stress_3w"].size
            except (ShpbError, AssertionError) as error:
                found.append(f"{name}: {error!r}")
        elif path.suffix in (".html", ".svg") and not path.read_bytes().rstrip().endswith(
            (b"</html>", b"</svg>")
        ):
            found.append(f"{name} is cut short")
        elif path.suffix == ".toml":
            try:
                tomllib.loads(path.read_text(encoding="utf-8"))
            except (ValueError, UnicodeError) as error:
                found.append(f"{name}: {error!r}")
        elif path.suffix == ".csv" and case.arguments[0] != "demo" and not path.read_bytes().endswith(b"\n"):
            found.append(f"{name} is cut short")
    if status in (0, 3) and not expected <= there:
        found.append(f"status {status} though {sorted(expected - there)} are missing")
    if status not in (0, 3) and "shpb: " not in said:
        found.append(f"status {status} without a word: {said[-300:]!r}")
    if "Traceback" in said:
        found.append(f"a traceback: {said[-300:]!r}")
    return found


def refuse_each(
    verb: str,
    kinds: Sequence[str] = tuple(REFUSALS),
    *,
    share: float = 1.0,
    seed: int = 1,
    rotate: bool = False,
    say: Callable[[str], None] = lambda _: None,
) -> tuple[Counter[str], list[str]]:
    """Refuse every call in turn; return what was counted and what was not whole.

    ``rotate`` takes one kind of refusal a call, the kinds in turn, in place of all of them.
    """
    counts: Counter[str] = Counter()
    faults: list[str] = []
    luck = random.Random(seed)
    with tempfile.TemporaryDirectory() as folder:
        place = Path(os.path.realpath(folder))
        case = CASES[verb](place)
        clean = Gate(place)
        status, said = _run(case, clean)
        assert status in (0, 3), f"a clean run ends with {status}: {said}"
        expected = {str(path.relative_to(case.results)) for path in case.results.rglob("*") if path.is_file()}
        assert not whole(case, expected, status, said)
        counts["calls of a clean run"] = len(clean.calls)
        say(f"{len(clean.calls)} calls")
        for number, call in enumerate(clean.calls):
            # Hundreds of rows go into one file: the first, the last, and some between stand for all.
            alike = clean.calls[max(number - 1, 0) : number + 2].count(call) == 3
            if luck.random() > (min(share, 0.01) if alike else share):
                continue
            say(f"{number} {call}")
            for kind in [kinds[number % len(kinds)]] if rotate else kinds:
                gate = Gate(place, number, REFUSALS[kind])
                try:
                    status, said = _run(case, gate)
                    wrong = whole(case, expected, status, said)
                except BaseException as error:
                    wrong = [f"raised {error!r}"]
                    status = -1
                counts["refusals"] += 1
                counts[f"status {status}"] += 1
                faults += [f"call {number} ({call}), {kind}: {one}" for one in wrong]
    return counts, faults


def main(arguments: Sequence[str] | None = None) -> int:
    """Refuse what was asked for and print what came of it."""
    parser = argparse.ArgumentParser(prog="python -m tests.faults.refusals", description=__doc__)
    parser.add_argument("--verb", choices=list(CASES), required=True)
    parser.add_argument("--share", type=float, default=1.0, help="of the calls, for slow verbs")
    parser.add_argument("--rotate", action="store_true", help="one kind of refusal a call")
    options = parser.parse_args(arguments)
    since = time.monotonic()
    counts, faults = refuse_each(
        options.verb, share=options.share, rotate=options.rotate, say=lambda text: print(text, flush=True)
    )
    print(f"{options.verb}: {dict(counts)}; {time.monotonic() - since:.0f} s")
    for fault in faults:
        print(f"--- {fault}")
    return int(bool(faults))


if __name__ == "__main__":
    sys.exit(main())
