"""What ``shpb adjust`` opens and what it writes: a shot from its sheet or its file, and back whole or not at all."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from shpb.cli.say import say
from shpb.cli.usage import require_folder
from shpb.errors import InputError, ShpbError, StoreError

if TYPE_CHECKING:
    from shpb.adjust.following import ByHand
    from shpb.record.record import Record
    from shpb.reduction import ShotResult
    from shpb.rig.rig import Rig
    from shpb.rig.sheet import ShotSheet
    from shpb.settings import Settings

_KINDS = ("png", "pdf", "svg")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Opened:
    """A shot to adjust: what it is reduced from, what hands have moved so far, and where it is stored.

    ``draws`` are number and seed of the draws that it was stored with.
    """

    record: Record
    rig: Rig
    sheet: ShotSheet
    settings: Settings
    by_hand: tuple[ByHand, ...]
    target: Path
    draws: tuple[int, int] | None = None


def open_shot(path: Path, rig_file: Path | None, results: Path | None) -> Opened:
    """Open a stored shot, or read the shot of a sheet.

    Raises
    ------
    ShpbError
        If it cannot be read, or names no shot or several.
    """
    if path.suffix.lower() in (".h5", ".hdf5"):
        for option, given in (("--rig", rig_file), ("--results", results)):
            if given is not None:
                raise InputError(
                    "a stored shot holds its rig and stays where it is",
                    where=option,
                    mend="Leave it out, or name the shot sheet",
                )
        return _stored(path)
    return _of_sheet(path, rig_file, results)


def _stored(path: Path) -> Opened:
    from shpb.store.shot_file import load

    stored = load(path)
    drawn = stored.attributes.get("trust/draws")
    return Opened(
        record=stored.record,
        rig=stored.rig,
        sheet=stored.sheet,
        settings=stored.settings,
        by_hand=stored.by_hand,
        target=path,
        draws=None if drawn is None else (int(drawn["draws"]), int(drawn["seed"])),
    )


def _of_sheet(path: Path, rig_file: Path | None, results: Path | None) -> Opened:
    from shpb.cli.batch import gather
    from shpb.cli.reduce import file_stem, require_free
    from shpb.record.read import read_record
    from shpb.rig.overrides import hints_for, settings_for
    from shpb.store.kept_by_hand import with_kept

    tasks, errors = gather([path], rig_file)
    if errors:
        raise errors[0]
    if len(tasks) != 1:
        raise InputError(
            f"names {len(tasks)} shots, and one at a time is adjusted",
            where=str(path),
            mend="Name the sheet of one shot (.toml), or its stored file (.h5)",
        )
    task = tasks[0]
    folder = results or (path if path.is_dir() else path.parent) / "results"
    require_folder(folder, "--results")
    target = folder / f"{file_stem(task.sheet.shot_id)}.h5"
    require_free(task, target, [] if target.exists() else [target.with_suffix(f".{kind}") for kind in _KINDS])
    record = read_record(task.sheet.record_files, hints_for(task.rig, task.sheet))
    settings, history = with_kept(target, record, task.sheet, settings_for(task.rig, task.sheet))
    return Opened(
        record=record, rig=task.rig, sheet=task.sheet, settings=settings, by_hand=history, target=target
    )


def store(opened: Opened, result: ShotResult, figure: str | None) -> tuple[ShotResult, list[Path]]:
    """Store an adjusted shot, and draw anew what stands beside it.

    Returns
    -------
    ShotResult, list of Path
        With its draws where it had some; what was written, the shot file first.

    Raises
    ------
    StoreError
        If the shot was adjusted by somebody else meanwhile, or the disk refuses.
    """
    from shpb.reduction import draw_shot
    from shpb.store.shot_file import load, save_shot
    from shpb.view.text import printable

    target = opened.target
    if target.exists() and load(target).by_hand != opened.by_hand:
        raise StoreError(
            "the shot was adjusted by somebody else meanwhile",
            where=str(target),
            mend="Open it again and look at that change first; nothing was stored",
        )
    if opened.draws is not None:
        result = draw_shot(result, opened.draws[0], seed=opened.draws[1])
    target.parent.mkdir(parents=True, exist_ok=True)
    beside = {kind for kind in _KINDS if target.with_suffix(f".{kind}").exists()}
    wanted = beside or {"png"} if figure is None else beside | ({figure} - {"none"})
    files = [save_shot(result, target)]
    try:
        files += _beside(result, target, sorted(wanted))
    except (ShpbError, OSError) as error:
        # The change is kept; that its figure is not must be said, and must not look like the opposite.
        said = printable(error.strerror or error if isinstance(error, OSError) else error)
        say(f"the shot is stored, but not all that stands beside it: {said}")
    return result, files


def _beside(result: ShotResult, target: Path, kinds: list[str]) -> list[Path]:
    """Figures and curves that would else show the earlier result."""
    files = []
    table = target.with_suffix(".csv")
    if table.exists():
        from shpb.store.curves_csv import export_csv

        files.append(export_csv(result, table))
    if kinds:
        from shpb.view.figure import save_figure

        files += [save_figure(result, target.with_suffix(f".{kind}")) for kind in kinds]
    pages = [page for kind in _KINDS if (page := target.with_name(f"{target.stem}_budget.{kind}")).exists()]
    if pages:
        from shpb.view.budget_page import save_budget_page

        files += [save_budget_page(result, page) for page in pages]
    return files
