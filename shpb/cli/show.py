"""``shpb show``: stored shots and merges in the terminal, as a figure, or several shots compared on one page."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.cli.usage import LACKING
from shpb.errors import InputError, StoreError

if TYPE_CHECKING:
    from shpb.cli.export_files import Results
    from shpb.reduction import ShotResult
    from shpb.view.listing import ListRow
    from shpb.view.report.stored import ReportedShot

HELP = "show stored shots or a merge; compare several shots on one page"
DESCRIPTION = """\
Show what is stored, without writing results. One shot (.h5): the text that
`shpb reduce` printed. Several, or a folder: a listing, and the stresses at
equal strain against the first shot of each material. A merged.h5: its
conditions, stresses, rate sensitivity and laws. With --figure one shot is
drawn on the usual page; several become one page with the curves of all that
count, their rates and R, the listing and the differences."""
EXAMPLE = """\
examples:
  shpb show results/S-014.h5 --full
  shpb show results/S-01*.h5 --figure compared.pdf
  shpb show first-campaign/merged/merged.h5

exit status: 0 done, 1 failed, 2 bad input or usage
"""

_FIGURES = (".png", ".pdf", ".svg")


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument(
        "sources", nargs="+", type=Path, metavar="SHOT", help="shot file, merged.h5, or folder of them"
    )
    verb.add_argument(
        "--figure", type=Path, metavar="FILE", help="draw it too: a name ending in .png, .pdf or .svg"
    )
    verb.add_argument("--replace", action="store_true", help="write over a figure that stands there")
    verb.add_argument(
        "--full", action="store_true", help="one shot: budget, corrections, checks; a merge: all laws"
    )
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")


def run(options: argparse.Namespace) -> int:
    """Show what was named."""
    from shpb.cli.export_files import find_results

    found = find_results(options.sources)
    if options.figure is not None:
        _check_figure(options.figure, options.replace, found)
    if len(found.shots) == 1 and not found.merges:
        return _show_one(found.shots[0], options)
    shown = _Shown()
    if found.shots:
        _show_shots(found.shots, options, shown)
    for path in found.merges:
        _show_merge(path, options, shown)
    return _finish(shown, as_json=options.json)


@dataclass(slots=True)
class _Shown:
    """What is to be said when everything has been read."""

    texts: list[str] = field(default_factory=list)
    json: dict[str, Any] = field(default_factory=dict)
    files: list[Path] = field(default_factory=list)
    errors: list[StoreError] = field(default_factory=list)


def _check_figure(path: Path, replace: bool, found: Results) -> None:
    """Refuse a figure that cannot be, before any work."""
    from shpb.view.compare_page import require_few

    if path.suffix.lower() not in _FIGURES:
        raise InputError(
            f"a figure cannot be written as {path.suffix or 'a file without an ending'}",
            where=str(path),
            mend="Let the name end in .png, .pdf or .svg",
        )
    require_few(len(found.shots))
    if found.merges and not found.shots:
        raise InputError(
            "shows shots only", where="--figure", mend="`shpb merge` draws the figures of a merge"
        )
    if path.exists() and not replace:
        raise InputError(
            "a file of this name stands there",
            where=str(path),
            mend="Give another name, or --replace to write over it",
        )


# --- one shot ------------------------------------------------------------------------------------------


def _show_one(path: Path, options: argparse.Namespace) -> int:
    from shpb.cli.status import DONE
    from shpb.store.export_again import worked_out_again
    from shpb.store.shot_file import load
    from shpb.view.terminal import shot_text

    again = worked_out_again(load(path))
    if again.differs:
        _say(
            StoreError(
                again.differs, where=str(path), mend="Shown as this version finds it; `shpb reduce` stores it"
            )
        )
    files = _draw_one(again.result, options.figure)
    if options.json:
        _print_one(again.result, path, again.differs, files)
    else:
        print(shot_text(again.result, full=options.full))
        _print_written(files)
    return DONE


def _draw_one(result: ShotResult, figure: Path | None) -> list[Path]:
    if figure is None:
        return []
    from shpb.view.figure import save_figure

    return [save_figure(result, figure)]


def _print_one(result: ShotResult, path: Path, differs: str, files: Sequence[Path]) -> None:
    from shpb.view.summary import json_text, shot_json

    said = {
        "file": str(path),
        "differs_from_stored": differs or None,
        "files_written": [str(one) for one in files],
    }
    print(json_text({**shot_json(result), **said}))


# --- several -------------------------------------------------------------------------------------------


def _read_shot(path: Path) -> tuple[ReportedShot, ListRow]:
    from shpb.store.report_input import read_for_report
    from shpb.store.shot_brief import read_brief
    from shpb.view.report.stored import ReportedShot
    from shpb.view.show_compare import stored_list_row

    read = read_for_report(path)
    shot = ReportedShot(stored=read.stored, budget=read.budget, sha256=read.sha256)
    return shot, stored_list_row(shot, read_brief(path).repeat)


def _show_shots(paths: Sequence[Path], options: argparse.Namespace, shown: _Shown) -> None:
    from shpb.cli.progress import progress
    from shpb.view.listing import list_row_of_error, list_text
    from shpb.view.repeats import repeats_json
    from shpb.view.show_compare import compared, compared_json, compared_text, shot_brief_json

    shots: list[ReportedShot] = []
    rows, briefs = [], []
    with progress(len(paths), "reading shots") as step:
        for number, path in enumerate(paths, 1):
            try:
                shot, row = _read_shot(path)
                rows.append(row)
                briefs.append(shot_brief_json(shot, str(path)))
                shots.append(shot)
            except StoreError as error:
                shown.errors.append(error)
                rows.append(list_row_of_error(path.stem, error))
            except LACKING as error:
                problem = StoreError(
                    f"something in it is missing or wrong ({type(error).__name__}: {error})",
                    where=str(path),
                    mend="Reduce the raw record again",
                )
                shown.errors.append(problem)
                rows.append(list_row_of_error(path.stem, problem))
            step(number)
    groups = compared(shots)
    shown.texts += [list_text(rows), compared_text(groups)]
    shown.json["shots"] = briefs
    shown.json["repeats"] = repeats_json(row.repeat for row in rows if row.repeat is not None)
    shown.json["compared"] = compared_json(groups)
    if options.figure is not None and shots:
        from shpb.view.compare_page import save_compare_figure

        shown.files.append(save_compare_figure(shots, options.figure))


def _show_merge(path: Path, options: argparse.Namespace, shown: _Shown) -> None:
    from shpb.store.merge_read import load_merge
    from shpb.view.show_merge import stored_merge_json, stored_merge_text

    try:
        merge = load_merge(path)
        shown.texts.append(stored_merge_text(merge, full=options.full))
        shown.json.setdefault("merges", []).append(stored_merge_json(merge, str(path)))
    except StoreError as error:
        shown.errors.append(error)
    except LACKING as error:
        shown.errors.append(
            StoreError(
                f"something in it is missing or wrong ({type(error).__name__}: {error})",
                where=str(path),
                mend="Merge again",
            )
        )


def _finish(shown: _Shown, *, as_json: bool) -> int:
    from shpb.cli.status import BAD_INPUT, DONE

    if as_json:
        from shpb.view.summary import error_json, head, json_text

        tail = {
            "not_shown": [error_json(error) for error in shown.errors],
            "files_written": [str(path) for path in shown.files],
        }
        print(json_text(head("shpb show") | shown.json | tail))
    else:
        print("\n\n".join(text for text in shown.texts if text))
        _print_written(shown.files)
    for error in shown.errors:
        _say(error)
    return BAD_INPUT if shown.errors else DONE


def _print_written(files: Sequence[Path]) -> None:
    from shpb.view.text import printable

    for path in files:
        print(f"written: {printable(path)}")


def _say(error: StoreError) -> None:
    from shpb.cli.say import say

    say(str(error), sys.stderr)
