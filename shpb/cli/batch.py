"""From what the user names to a list of shots, and the list through worker processes."""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, TypeVar

from shpb.errors import InputError
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet

if TYPE_CHECKING:
    from concurrent.futures import Executor

T = TypeVar("T")
R = TypeVar("R")


@dataclass(frozen=True, slots=True)
class Task:
    """One shot to reduce: its sheet, its rig, and the file that named it."""

    sheet: ShotSheet
    rig: Rig
    named_in: Path


def gather(sources: Sequence[Path], rig_file: Path | None) -> tuple[list[Task], list[InputError]]:
    """Read sheets and lists, and the rig file of each shot; what is wrong with some does not stop the others.

    Parameters
    ----------
    sources : sequence of Path
        Shot sheets (.toml), shot lists (.csv), or folders of shot sheets.
    rig_file : Path or None
        Rig file for shots whose sheet names none.

    Returns
    -------
    list of Task, list of InputError
        The shots that can be reduced, and every mistake of every file that keeps others from it.

    Raises
    ------
    InputError
        If no shot can be reduced at all.
    """
    from shpb.rig.sheet_file import check_sheet_fits_rig

    tasks: list[Task] = []
    rigs: dict[Path, Rig] = {}
    errors: list[InputError] = []
    for source, sheet in _sheets(sources, errors):
        try:
            task = Task(sheet, _rig_of(sheet, source, rig_file, rigs), source)
            check_sheet_fits_rig(sheet, task.rig)
            _require_new(task, tasks)
        except InputError as error:
            errors.append(error)
        else:
            tasks.append(task)
    if not tasks and errors:
        raise _together(errors)
    if not tasks:
        named = ", ".join(map(str, sources))
        raise InputError("there is no shot to reduce", where=named, mend="Name a shot sheet or a shot list")
    return tasks, errors


def _sheets(sources: Sequence[Path], errors: list[InputError]) -> Iterator[tuple[Path, ShotSheet]]:
    for source in sources:
        try:
            if source.is_dir():
                for path in sorted(source.glob("*.toml")):
                    # A folder may hold its rig file too; only sheets have a [shot] table.
                    if _is_sheet(path):
                        yield from _one_sheet(path, errors)
            elif source.suffix.lower() == ".toml":
                yield from _one_sheet(source, errors)
            else:
                from shpb.rig.shot_list import usable_rows

                sheets, mistakes = usable_rows(source)
                if mistakes is not None:
                    errors.append(mistakes)
                for sheet in sheets:
                    yield source, sheet
        except InputError as error:
            errors.append(error)


def _is_sheet(path: Path) -> bool:
    try:
        return re.search(rb"(?m)^\s*\[\s*(shot|specimen)\s*\]", path.read_bytes()) is not None
    except OSError:
        return True  # let the reader say what is wrong with it


def _one_sheet(path: Path, errors: list[InputError]) -> Iterator[tuple[Path, ShotSheet]]:
    from shpb.rig.sheet_file import read_sheet

    try:
        yield path, read_sheet(path)
    except InputError as mistakes:
        if path.is_file() and b"[incident_bar]" in path.read_bytes():
            mend = "Name the sheet of a shot; the rig file is named in the sheet or with --rig"
            errors.append(InputError("this is a rig file, not a shot sheet", where=str(path), mend=mend))
        else:
            errors.append(mistakes)


def _rig_of(sheet: ShotSheet, source: Path, rig_file: Path | None, rigs: dict[Path, Rig]) -> Rig:
    from shpb.rig.rig_file import read_rig

    path = sheet.rig_file or rig_file
    if path is None:
        raise InputError(
            f"shot {sheet.shot_id} names no rig file",
            where=str(source),
            mend='Add rig = "..." or give --rig FILE',
        )
    if path not in rigs:
        rigs[path] = read_rig(path)
    return rigs[path]


def _require_new(task: Task, earlier: Sequence[Task]) -> None:
    """Two shots share neither an id nor a record."""
    files = {path.resolve() for path in task.sheet.record_files}
    for other in earlier:
        if other.sheet.shot_id.casefold() == task.sheet.shot_id.casefold():
            raise InputError(
                f"shot id {task.sheet.shot_id} is used twice, first in {other.named_in.name}",
                where=str(task.named_in),
                mend="Give every shot an id of its own",
            )
        if files & {path.resolve() for path in other.sheet.record_files}:
            raise InputError(
                f"shot {task.sheet.shot_id} names the record of shot {other.sheet.shot_id} in {other.named_in.name}",
                where=str(task.named_in),
                mend="Name each record in one sheet only",
            )


def _together(errors: Sequence[InputError]) -> InputError:
    if len(errors) == 1:
        return errors[0]
    unique = list(dict.fromkeys(str(error) for error in errors))
    return InputError("\n".join(unique))


def start_workers(count: int, prepare: Callable[[], None]) -> Executor | None:
    """Start worker processes ahead of their work, each running ``prepare`` meanwhile; None for a single one."""
    if count <= 1:
        return None
    from concurrent.futures import ProcessPoolExecutor

    pool = ProcessPoolExecutor(count, initializer=_start_worker, initargs=(prepare,))
    pool.submit(int)  # the first task starts the processes
    return pool


def in_parallel(
    function: Callable[[T], R],
    items: Sequence[T],
    workers: int,
    done: Callable[[int], None],
    pool: Executor | None = None,
) -> Iterator[tuple[int, R]]:
    """Yield (index, result) as they come; one worker stays in this process.

    ``function`` must not raise: it returns what went wrong as part of its result, so that one bad shot
    never stops the rest. ``pool`` are workers started ahead; it is shut down at the end.
    """
    workers = min(workers, len(items))
    if workers <= 1:
        for index, item in enumerate(items):
            yield index, function(item)
            done(index + 1)
        return
    from concurrent.futures import ProcessPoolExecutor, as_completed

    # Few items a parcel keeps all workers busy to the end; many spare the traffic between processes.
    size = max(1, min(16, len(items) // (4 * workers)))
    parcels = [range(start, min(start + size, len(items))) for start in range(0, len(items), size)]
    with pool or ProcessPoolExecutor(workers, initializer=_start_worker) as crew:
        futures = {crew.submit(_several, function, [items[i] for i in parcel]): parcel for parcel in parcels}
        finished = 0
        for future in as_completed(futures):
            for index, result in zip(futures[future], future.result(), strict=True):
                yield index, result
            finished += len(futures[future])
            done(finished)


def _start_worker(prepare: Callable[[], None] | None = None) -> None:
    """End with the parent, even one that was killed; then prepare."""
    import multiprocessing
    import signal
    import threading
    from multiprocessing.connection import wait

    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the parent hears Ctrl-C and ends its workers in order
    parent = multiprocessing.parent_process()
    if parent is not None:
        sentinel = parent.sentinel

        def follow() -> None:
            wait([sentinel])
            os._exit(1)

        threading.Thread(target=follow, daemon=True).start()
    if prepare is not None:
        prepare()


def _several(function: Callable[[T], R], items: list[T]) -> list[R]:
    return [function(item) for item in items]


def usual_workers() -> int:
    """Processors this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1
