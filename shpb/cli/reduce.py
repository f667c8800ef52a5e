"""``shpb reduce``: one shot, several, or a whole shot list."""

from __future__ import annotations

import argparse
import hashlib
import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.cli.usage import FIGURES, require_folder, require_workers
from shpb.errors import InputError, StoreError

if TYPE_CHECKING:
    from concurrent.futures import Executor

    from shpb.cli.batch import Task
    from shpb.errors import ShpbError
    from shpb.reduction import ShotResult
    from shpb.view.listing import ListRow

HELP = "reduce shots: verdict, curves, HDF5 file and figure"
DESCRIPTION = """\
Reduce shots: voltages to stress, strain and strain rate, with a check of
force equilibrium and a verdict. Name a shot sheet (.toml), several, a folder
of them, or a shot list (.csv). Each shot becomes one HDF5 file and one figure
in the results folder; the results of another shot are never overwritten."""
EXAMPLE = """\
examples:
  shpb reduce shots/s014.toml
  shpb reduce shots.csv --rig calibration/rig.toml --workers 2
  shpb reduce shots/s014.toml --full --csv --figure pdf

exit status: 0 done, 1 failed, 2 bad input or usage, 3 done, a shot is rejected
"""

# Fewer say nothing about where a 95 % interval ends; more take an hour.
_LEAST_DRAWS, _MOST_DRAWS = 200, 10_000_000


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument(
        "shots", nargs="+", type=Path, metavar="SHOT", help="shot sheet, shot list or folder of sheets"
    )
    verb.add_argument("--rig", type=Path, metavar="FILE", help="rig file for shots whose sheet names none")
    verb.add_argument(
        "--results",
        type=Path,
        metavar="FOLDER",
        help="where results go (default: results/ beside the sheet or list)",
    )
    verb.add_argument("--figure", choices=FIGURES, default="png", help="kind of figure (default png)")
    verb.add_argument("--csv", action="store_true", help="write the curves as CSV too")
    verb.add_argument(
        "--full", action="store_true", help="show every check, not only those that say something"
    )
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")
    verb.add_argument(
        "--workers", type=int, metavar="N", help="processes for several shots (default: one a core)"
    )
    trust = verb.add_argument_group("uncertainty (a linear budget is always worked out)")
    trust.add_argument(
        "--draws",
        metavar="N",
        help="draws of a Monte Carlo run of every shot too, or adaptive (10000 take seconds)",
    )
    trust.add_argument(
        "--seed", type=int, metavar="N", help="of the draws: the same seed, the same numbers (default 1)"
    )
    trust.add_argument(
        "--budget", action="store_true", help="draw the ranked budget too: SHOT_budget, as with --draws"
    )
    add_choices(verb)


def add_choices(verb: argparse.ArgumentParser) -> None:
    """Declare the choices of the reduction."""
    choices = verb.add_argument_group("choices of the reduction (else rig file, shot sheet, defaults)")
    choices.add_argument(
        "--waves", metavar="WHICH", help="told apart by windows, or by stations on a bar (long pulses)"
    )
    choices.add_argument("--dispersion", metavar="WHICH", help="none, phase or full (phase and amplitude)")
    choices.add_argument("--alignment", metavar="WHICH", help="physical or feet")
    choices.add_argument("--analysis", metavar="WHICH", help="curve put forward: one-wave or three-wave")
    choices.add_argument(
        "--corrections", metavar="LIST", help="corrections that are applied, with commas between, or none"
    )
    choices.add_argument(
        "--cutoff-khz", type=float, metavar="KHZ", help="cut-off of the low-pass of all pulses"
    )


def run(options: argparse.Namespace) -> int:
    """Reduce what was named."""
    from shpb.cli.batch import gather, usual_workers
    from shpb.cli.status import BAD_INPUT

    require_workers(options.workers)
    tasks, errors = gather(options.shots, options.rig)
    folder = options.results or (_folder_of(options.shots[0]) / "results")
    require_folder(folder, "--results")
    drawing = _drawing(options)
    outputs = Outputs(
        folder=folder,
        figure=options.figure,
        csv=options.csv,
        choices=choices_in(options),
        drawing=drawing,
        budget=options.budget or (drawing is not None and options.figure != "none"),
    )
    workers = usual_workers() if options.workers is None else options.workers
    status = reduce_all(tasks, outputs, as_json=options.json, full=options.full, workers=workers)
    for error in errors:
        _say(str(error))
    return BAD_INPUT if errors else status


def _folder_of(source: Path) -> Path:
    return source if source.is_dir() else source.parent


def _drawing(options: argparse.Namespace) -> Drawing | None:
    """What --draws and --seed ask for."""
    if options.draws is None:
        if options.seed is not None:
            raise InputError("there is nothing to draw", where="--seed", mend="Give --draws as well")
        return None
    seed = 1 if options.seed is None else options.seed
    if seed < 0:
        raise InputError(f"found {seed}", where="--seed", mend="Give zero or a positive whole number")
    if options.draws == "adaptive":
        return Drawing(None, seed)
    digits = options.draws.isascii() and options.draws.isdigit() and len(options.draws) <= 8
    if not digits or not _LEAST_DRAWS <= int(options.draws) <= _MOST_DRAWS:
        raise InputError(
            f"found {options.draws!r}",
            where="--draws",
            mend=f"Give {_LEAST_DRAWS} to {_MOST_DRAWS} draws, or adaptive; 10000 are usual",
        )
    return Drawing(int(options.draws), seed)


def choices_in(options: argparse.Namespace) -> dict[str, object]:
    """The choices of the reduction that were made."""
    given = {
        "waves": options.waves,
        "dispersion": options.dispersion,
        "alignment": options.alignment,
        "analysis": options.analysis,
        "corrections": options.corrections,
        "cutoff_kHz": options.cutoff_khz,
    }
    return {name: value for name, value in given.items() if value is not None}


@dataclass(frozen=True, slots=True)
class Drawing:
    """How many draws (None: adaptive), from which seed."""

    draws: int | None
    seed: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Outputs:
    """What is written for each shot, and where."""

    folder: Path
    figure: str = "png"
    csv: bool = False
    choices: Mapping[str, object] = field(default_factory=dict)
    drawing: Drawing | None = None
    budget: bool = False

    def budget_page(self, stem: str) -> Path | None:
        """The page of the budget, where there is to be one."""
        if not self.budget:
            return None
        return self.folder / f"{stem}_budget.{'png' if self.figure == 'none' else self.figure}"


@dataclass(frozen=True, slots=True, kw_only=True)
class Done:
    """What comes back from a worker for one shot: small, and never an exception."""

    row: ListRow
    text: str
    json: dict[str, Any]
    files: tuple[str, ...] = ()
    error: str = ""  # why nothing could be stored, else empty
    bad_input: bool = False


@dataclass(frozen=True, slots=True)
class _Work:
    """Reduce one shot and write its files; picklable, so that a worker process can do it."""

    outputs: Outputs
    full: bool
    figure_later: bool
    as_json: bool
    alone: bool = False  # the only shot: progress of its draws is shown

    def __call__(self, task: Task) -> Done:
        from shpb.errors import InputError, ShpbError
        from shpb.view.listing import list_row_of_error

        try:
            return self.reduced(task)
        except ShpbError as error:
            return Done(
                row=list_row_of_error(task.sheet.shot_id, error),
                text="",
                json=self._error_json(task, error),
                error=str(error),
                bad_input=isinstance(error, InputError),
            )

    def _shot_json(self, result: ShotResult) -> dict[str, Any]:
        """What other programs get, made only where they asked."""
        if not self.as_json:
            return {}
        from shpb.view.summary import shot_json

        return shot_json(result)

    def _error_json(self, task: Task, error: ShpbError) -> dict[str, Any]:
        if not self.as_json:
            return {}
        from shpb.view.summary import error_json

        return {"shot_id": task.sheet.shot_id, **error_json(error)}

    def reduced(self, task: Task) -> Done:
        from shpb.store.shot_file import save_shot
        from shpb.view.listing import list_row
        from shpb.view.terminal import draws_text, shot_text

        drawn = None if self.figure_later else self._drawn
        result, files = reduce_and_store(task, self.outputs, finish=drawn)
        done = Done(
            row=list_row(result),
            text=shot_text(result, full=self.full),
            json=self._shot_json(result),
            files=tuple(map(str, files)),
        )
        if self.figure_later:
            # One shot at the bench: the verdict is on the screen before the figure is drawn.
            print(done.text, flush=True)
            if self.outputs.drawing is not None:
                result = self._drawn(result)
                print(draws_text(result), flush=True)
                save_shot(result, files[0])
        files += draw_pages(result, self.outputs)
        return Done(row=done.row, text=done.text, json=done.json, files=tuple(map(str, files)))

    def _drawn(self, result: ShotResult) -> ShotResult:
        """The shot with its draws, where they are asked for."""
        drawing = self.outputs.drawing
        if drawing is None:
            return result
        from shpb.cli.progress import progress
        from shpb.reduction import draw_shot

        if not self.alone:
            return draw_shot(result, drawing.draws, seed=drawing.seed)
        with progress(drawing.draws, "drawing") as step:
            return draw_shot(result, drawing.draws, seed=drawing.seed, progress=lambda done, _: step(done))


def reduce_and_store(
    task: Task,
    outputs: Outputs,
    *,
    finish: Callable[[ShotResult], ShotResult] | None = None,
    before_saving: Callable[[ShotResult, Path], None] | None = None,
) -> tuple[ShotResult, list[Path]]:
    """Read, reduce and store one shot: its HDF5 file and, where asked for, its curves; figures come after.

    Parameters
    ----------
    task : Task
    outputs : Outputs
    finish : callable
        Adds to the result before it is stored.
    before_saving : callable
        Called with the result and the path of its file when all is ready to be written.

    Raises
    ------
    ShpbError
        If the shot cannot be reduced or stored.
    """
    from shpb.record.read import read_record
    from shpb.reduction import reduce
    from shpb.rig.overrides import hints_for, settings_for, settings_from
    from shpb.store.kept_by_hand import with_kept
    from shpb.store.shot_file import save_shot

    settings = settings_from(outputs.choices, settings_for(task.rig, task.sheet))
    record = read_record(task.sheet.record_files, hints_for(task.rig, task.sheet))
    stem = file_stem(task.sheet.shot_id)
    store, page = outputs.folder / f"{stem}.h5", outputs.budget_page(stem)
    # What somebody moved by hand when the shot was reduced before is not lost by reducing it again.
    settings, by_hand = with_kept(store, record, task.sheet, settings)
    result = replace(reduce(record, task.rig, task.sheet, settings), by_hand=by_hand)
    kinds = [outputs.figure, "csv" if outputs.csv else "none"]
    others = [store.with_suffix(f".{kind}") for kind in kinds if kind != "none"]
    require_free(task, store, others if page is None else [*others, page])
    if finish is not None:
        result = finish(result)
    if before_saving is not None:
        before_saving(result, store)
    files = [save_shot(result, store)]
    if outputs.csv:
        from shpb.store.curves_csv import export_csv

        files.append(export_csv(result, outputs.folder / f"{stem}.csv"))
    return result, files


def draw_pages(result: ShotResult, outputs: Outputs) -> list[Path]:
    """Draw what is wanted of a stored shot: its figure, the page of its budget."""
    stem, files = file_stem(result.sheet.shot_id), list[Path]()
    if outputs.figure != "none":
        from shpb.view.figure import save_figure

        files.append(save_figure(result, outputs.folder / f"{stem}.{outputs.figure}"))
    page = outputs.budget_page(stem)
    if page is not None:
        from shpb.view.budget_page import save_budget_page

        files.append(save_budget_page(result, page))
    return files


def require_free(task: Task, store: Path, others: Sequence[Path]) -> None:
    """Nothing that goes in is written over, nor anything beside a result that this program did not write."""
    sheet, rig = task.sheet, task.sheet.rig_file
    inputs = {path.resolve() for path in (*sheet.record_files, task.named_in, *([rig] if rig else []))}
    for path in (store, *others):
        if path.resolve() in inputs:
            raise StoreError(
                f"shot {sheet.shot_id} would be written over what it was made from",
                where=str(path),
                mend="Choose another folder with --results",
            )
        # Where the shot file of this shot stands, its figure and curves are of this program too.
        if path != store and path.exists() and not store.exists():
            raise StoreError(
                "a file of this name stands there and was not written with a result",
                where=str(path),
                mend="Choose another folder with --results, or move that file away",
            )
        if path != store and path.stem != store.stem and path.with_suffix(".h5").exists():
            raise StoreError(
                "this name belongs to the figure of another shot",
                where=str(path),
                mend="Choose another folder with --results for one of the two",
            )


def file_stem(shot_id: str) -> str:
    """A file name for a shot id: harmless on every system, and different for different ids."""
    safe = re.sub(r"[^A-Za-z0-9._-]", "_", shot_id).strip(".") or "shot"
    if safe == shot_id and len(safe) <= 100:
        return safe
    return f"{safe[:80]}-{hashlib.sha256(shot_id.encode()).hexdigest()[:8]}"


def load_what_workers_need() -> None:
    """Import what reducing and drawing a shot needs, so that the first shot need not wait for it."""
    import shpb.record.read
    import shpb.reduction
    import shpb.rig.overrides
    import shpb.store.shot_file
    import shpb.view.terminal  # noqa: F401
    from shpb.view.figure import load_drawing

    load_drawing()


def reduce_all(
    tasks: Sequence[Task],
    outputs: Outputs,
    *,
    as_json: bool,
    full: bool,
    workers: int = 1,
    pool: Executor | None = None,
) -> int:
    """Reduce every task, print verdicts first, and return the exit status."""
    from shpb.cli.batch import in_parallel
    from shpb.cli.progress import progress

    one = len(tasks) == 1
    work = _Work(outputs, full, figure_later=one and not as_json, as_json=as_json, alone=one)
    found: dict[int, Done] = {}
    with progress(len(tasks), "reducing shots") as step:
        for index, done in in_parallel(work, tasks, workers, step if not one else _silent, pool):
            found[index] = done
    finished = [found[index] for index in range(len(tasks))]
    if as_json:
        _print_json(finished)
    elif one:
        _print_one(finished[0])
    else:
        _print_several(finished, outputs, full=full)
    return _status(finished)


def _silent(done: int) -> None:
    """Show no progress."""


def _say(error: str) -> None:
    from shpb.cli.say import say

    say(error)


def _print_json(finished: Sequence[Done]) -> None:
    from shpb.view.repeats import repeats_json
    from shpb.view.summary import head, json_text

    shots = [{**done.json, "files": list(done.files)} for done in finished]
    repeats = repeats_json(done.row.repeat for done in finished if done.row.repeat is not None)
    said = head("shpb shots")
    print(json_text(said | {"shots": shots, "repeats": repeats}))


def _print_one(done: Done) -> None:
    from shpb.view.text import printable

    if done.error:
        _say(done.error)
        return
    for name in done.files:
        print(f"written: {printable(name)}")


def _print_several(finished: Sequence[Done], outputs: Outputs, *, full: bool) -> None:
    from shpb.view.listing import list_text
    from shpb.view.text import printable

    if full:
        for done in finished:
            if done.text:
                print(done.text, end="\n\n")
    print(list_text([done.row for done in finished]))
    for done in finished:
        if done.error:
            _say(f"shot {done.row.shot_id}: {done.error}")
    print(f"written to {printable(outputs.folder)}")


def _status(finished: Sequence[Done]) -> int:
    from shpb.cli.status import BAD_INPUT, DONE, FAILED, REJECTED

    if any(done.error and not done.bad_input for done in finished):
        return FAILED
    if len(finished) == 1 and finished[0].error and finished[0].row.verdict != "reject":
        return BAD_INPUT
    if any(done.row.verdict in ("reject", "failed") for done in finished):
        return REJECTED
    return DONE
