"""``shpb recalibrate``: a whole campaign reduced again with another calibration, beside the earlier results."""

from __future__ import annotations

import argparse
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.cli.say import say
from shpb.cli.usage import FIGURES, require_folder, require_workers
from shpb.errors import InputError, StoreError

if TYPE_CHECKING:
    from shpb.reduction import ShotResult
    from shpb.rig.calibration import Calibration
    from shpb.view.recalibrated import Compared

HELP = "reduce stored shots again with another calibration"
DESCRIPTION = """\
Reduce stored shots again with another calibration: record, shot sheet and
settings as they were stored, the rig as its rig file stated it. The new results
go into a folder beside; the earlier ones are not touched. Shots of other rigs
are left alone."""
EXAMPLE = """\
examples:
  shpb recalibrate results --calibration calibration/bench_1_2031-08-11.toml
  shpb recalibrate results/W-0*.h5 --calibration new.toml --into results-new

exit status: 0 done, 1 failed, 2 bad input or usage, 3 done, a shot is rejected
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument(
        "results", nargs="+", type=Path, metavar="RESULTS", help="folder of shot files, or shot files (.h5)"
    )
    verb.add_argument(
        "--calibration", type=Path, metavar="FILE", required=True, help="calibration file to use"
    )
    verb.add_argument(
        "--into",
        type=Path,
        metavar="FOLDER",
        help="where the new results go (default: beside the folder of the earlier ones, under its name and that of "
        "the calibration)",
    )
    verb.add_argument("--figure", choices=FIGURES, default="png", help="kind of figure (default png)")
    verb.add_argument("--csv", action="store_true", help="write the curves as CSV too")
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")
    verb.add_argument("--workers", type=int, metavar="N", help="processes (default: one a core)")


def run(options: argparse.Namespace) -> int:
    """Reduce what is stored again."""
    from shpb.cli.batch import in_parallel, usual_workers
    from shpb.cli.progress import progress
    from shpb.rig.calibration_file import read_calibration

    require_workers(options.workers)
    calibration = read_calibration(options.calibration)
    tasks = find(options.results, options.into, calibration.name)
    work = _Work(calibration, options.figure, options.csv)
    workers = usual_workers() if options.workers is None else options.workers
    found: dict[int, Done] = {}
    with progress(len(tasks), "reducing shots again") as step:
        for index, done in in_parallel(work, tasks, workers, step):
            found[index] = done
    finished = [found[index] for index in range(len(tasks))]
    if options.json:
        _print_json(finished, calibration)
    else:
        _print_text(finished, calibration)
    return _status(finished)


@dataclass(frozen=True, slots=True)
class Task:
    """One earlier result, and the file of the new one."""

    source: Path
    target: Path


@dataclass(frozen=True, slots=True, kw_only=True)
class Done:
    """What comes back from a worker for one shot: small, and never an exception."""

    task: Task
    compared: Compared | None = None
    files: tuple[str, ...] = ()
    other_rig: str = ""  # why it was left alone
    error: str = ""  # why there is no new result
    error_json: dict[str, Any] = field(default_factory=dict)
    bad_input: bool = False

    @property
    def name(self) -> str:
        """What the shot is called."""
        return self.task.source.stem if self.compared is None else self.compared.shot_id


def find(sources: Sequence[Path], into: Path | None, calibration: str) -> list[Task]:
    """The shot files that are named or lie in folders that are named, each with where its new result goes.

    Raises
    ------
    InputError
        If something that was named is not there, or there is no shot file at all; if two new results would have one
        name, or the new ones would go where the earlier ones are.
    """
    from shpb.cli.reduce import file_stem
    from shpb.store.peek import Holds, peek

    files: dict[Path, Path] = {}
    for source in sources:
        if not source.exists():
            raise InputError("there is no such file or folder", where=str(source), mend="Check the name")
        inside = [source]
        if source.is_dir():
            held = (Holds.SHOT, Holds.DAMAGED)
            inside = [path for path in sorted(source.glob("*.h5")) if peek(path).holds in held]
        for path in inside:
            files.setdefault(path.resolve(), path)
    if not files:
        named = ", ".join(map(str, sources))
        raise InputError("there is no shot file", where=named, mend="Name a folder that shpb reduce wrote to")
    if into is not None:
        require_folder(into, "--into")
    tasks: list[Task] = []
    taken: dict[Path, Path] = {}
    for whole, path in files.items():
        folder = into or _beside(path.parent, file_stem(calibration))
        if folder.resolve() == whole.parent:
            raise InputError(
                "the earlier results are in this folder", where=str(folder), mend="Name another for --into"
            )
        target = folder / f"{path.stem}.h5"
        other = taken.setdefault(target.resolve(), path)
        if other is not path:
            raise InputError(
                f"{path} and {other} have one name", where=str(folder), mend="Do one folder after the other"
            )
        tasks.append(Task(path, target))
    return tasks


def _beside(folder: Path, calibration: str) -> Path:
    """``results-<calibration>`` beside ``results``."""
    whole = folder.resolve()
    # As it was named, where that has a name: messages and listings stay short.
    parent = folder.parent if folder.name not in ("", "..") else whole.parent
    return parent / f"{whole.name}-{calibration}"


@dataclass(frozen=True, slots=True)
class _Work:
    """Reduce one shot again and write its files; picklable, so that a worker process can do it."""

    calibration: Calibration
    figure: str
    csv: bool

    def __call__(self, task: Task) -> Done:
        from shpb.errors import InputError, ShpbError
        from shpb.store.recalibrated import OtherRigError
        from shpb.view.summary import error_json

        try:
            return self.reduced(task)
        except OtherRigError as error:
            return Done(task=task, other_rig=error.what)
        except ShpbError as error:
            return Done(
                task=task,
                error=str(error),
                error_json=error_json(error),
                bad_input=isinstance(error, InputError),
            )

    def reduced(self, task: Task) -> Done:
        from shpb.store.recalibrated import recalibrate

        others = [
            task.target.with_suffix(f".{kind}")
            for kind in (self.figure, "csv" if self.csv else "none")
            if kind != "none"
        ]
        for path in others:
            # Where the new shot file stands already, its figure and curves are of this program too.
            if path.exists() and not task.target.exists():
                raise StoreError(
                    "a file of this name stands there and was not written with a result",
                    where=str(path),
                    mend="Name another folder with --into",
                )
        result, compared = recalibrate(task.source, self.calibration, task.target)
        files = (task.target, *self.drawn(result, task.target))
        return Done(task=task, compared=compared, files=tuple(map(str, files)))

    def drawn(self, result: ShotResult, target: Path) -> list[Path]:
        """Figure and curves, where they are asked for."""
        files = []
        if self.csv:
            from shpb.store.curves_csv import export_csv

            files.append(export_csv(result, target.with_suffix(".csv")))
        if self.figure != "none":
            from shpb.view.figure import save_figure

            files.append(save_figure(result, target.with_suffix(f".{self.figure}")))
        return files


def _print_text(finished: Sequence[Done], calibration: Calibration) -> None:
    from shpb.view.recalibrated import recalibrated_text
    from shpb.view.text import printable

    said = recalibrated_text(
        [done.compared for done in finished if done.compared is not None],
        calibration,
        other_rigs=[(done.name, done.other_rig) for done in finished if done.other_rig],
        failed=[(done.name, done.error) for done in finished if done.error],
    )
    print(said)
    for done in finished:
        if done.error:
            say(done.error)
    for folder in dict.fromkeys(done.task.target.parent for done in finished if done.compared):
        print(f"written to {printable(folder)}")


def _print_json(finished: Sequence[Done], calibration: Calibration) -> None:
    from shpb.view.recalibrated import compared_json, recalibrated_json
    from shpb.view.summary import json_text

    shots = []
    for done in finished:
        shot: dict[str, Any] = {"earlier_file": str(done.task.source), "files": list(done.files)}
        if done.compared is not None:
            shot |= compared_json(done.compared)
        elif done.other_rig:
            shot["left_alone"] = done.other_rig
        else:
            shot |= done.error_json
        shots.append(shot)
    print(json_text(recalibrated_json(shots, calibration)))


def _status(finished: Sequence[Done]) -> int:
    from shpb.cli.status import BAD_INPUT, DONE, FAILED, REJECTED

    if any(done.error and not done.bad_input for done in finished):
        return FAILED
    compared = [done.compared for done in finished if done.compared is not None]
    if not compared or any(done.error for done in finished):
        return BAD_INPUT
    return REJECTED if any(one.after.verdict == "reject" for one in compared) else DONE
