"""``shpb export``: stored curves, merged tables and flow-curve tables as CSV."""

from __future__ import annotations

import argparse
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.cli.usage import LACKING, require_folder
from shpb.errors import InputError, StoreError

if TYPE_CHECKING:
    from shpb.store.export_flow import Asked, FlowTable
    from shpb.store.merge_read import StoredMerge

HELP = "write curves, merged tables and flow-curve tables as CSV"
DESCRIPTION = """\
Write stored results as CSV, units in the column names. A shot (.h5) gives its
curves. A merged.h5 gives the merged table and, for each material, a table of
flow curves: plastic strain against true stress at several rates and
temperatures, in long form (one row a cell) and in wide form (one column a
curve), for any solver. They are the measured curves of the conditions, or with
--law those of a law that was fitted. Cells outside what was tested are
flagged. Comments above a table name law, constants, range and hashes."""
EXAMPLE = """\
examples:
  shpb export results/S-014.h5 --into curves
  shpb export first-campaign/merged/merged.h5 --into tables --law johnson-cook
  shpb export merged.h5 --into tables --law swift --rates 0.001,1,1000 --units SI

exit status: 0 done, 1 failed, 2 bad input or usage
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument(
        "sources", nargs="+", type=Path, metavar="RESULT", help="shot file, merged.h5, or folder of them"
    )
    verb.add_argument(
        "--into", type=Path, required=True, metavar="FOLDER", help="where the files go; made if need be"
    )
    verb.add_argument(
        "--units",
        choices=("MPa", "SI"),
        default="MPa",
        help="MPa, kN, microseconds; or pascal, newton, second",
    )
    verb.add_argument("--replace", action="store_true", help="write over earlier exports that differ")
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")
    tables = verb.add_argument_group("flow-curve tables of a merge")
    tables.add_argument("--law", metavar="LAW", help="of this fitted law (default: measured curves)")
    tables.add_argument("--rates", metavar="LIST", help="rates in 1/s, with commas between (with --law)")
    tables.add_argument(
        "--temperatures", metavar="LIST", help="temperatures in C, with commas between (with --law)"
    )
    tables.add_argument("--adiabatic", action="store_true", help="the specimen keeps its heat (with --law)")
    tables.add_argument("--strain-step", metavar="STRAIN", help="step of plastic strain (default 0.01)")
    tables.add_argument(
        "--strain-end", metavar="STRAIN", help="last plastic strain (default: the greatest tested)"
    )


def run(options: argparse.Namespace) -> int:
    """Export what was named."""
    from shpb.cli.export_files import find_results
    from shpb.cli.progress import progress
    from shpb.cli.say import say
    from shpb.cli.status import BAD_INPUT, DONE, FAILED

    require_folder(options.into, "--into")
    asked = _asked(options)
    found = find_results(options.sources)
    if not found.merges:
        _require_no_table_options(options)
    work = _Exports(options.into, si=options.units == "SI", replace=options.replace)
    total = len(found.shots) + len(found.merges)
    with progress(total, "exporting") as step:
        for number, path in enumerate(found.shots, 1):
            work.guarded(path, lambda path=path: work.shot(path))  # type: ignore[misc]
            step(number)
        for number, path in enumerate(found.merges, len(found.shots) + 1):
            work.guarded(path, lambda path=path: work.merge(path, options.law, asked))  # type: ignore[misc]
            step(number)
    if options.json:
        _print_json(work)
    else:
        _print_text(work)
    for error in work.errors:
        say(str(error))
    if work.failed:
        return FAILED
    return BAD_INPUT if work.errors else DONE


# --- choices -------------------------------------------------------------------------------------------


def _asked(options: argparse.Namespace) -> Asked:
    from shpb.store.export_flow import Asked

    chosen: dict[str, Any] = {"adiabatic": options.adiabatic}
    if options.rates is not None:
        chosen["rates_per_s"] = _numbers(
            options.rates, "--rates", "Give rates in 1/s, such as 0.001,1,1000", 1e-9, 1e9
        )
    if options.temperatures is not None:
        mend = "Give temperatures in C, such as 20,200,400"
        celsius = _numbers(options.temperatures, "--temperatures", mend, -273.0, 5000.0)
        chosen["temperatures_k"] = tuple(one + 273.15 for one in celsius)
    for name, option, text in (
        ("step", "--strain-step", options.strain_step),
        ("most", "--strain-end", options.strain_end),
    ):
        if text is not None:
            (chosen[name],) = _numbers(
                text, option, "Give one plastic strain: 0.01 is 1 %", 1e-5, 3.0, one=True
            )
    if options.law is not None:
        _require_law(options.law)
    return Asked(**chosen)


def _numbers(
    text: str, where: str, mend: str, low: float, high: float, *, one: bool = False
) -> tuple[float, ...]:
    found = []
    for part in text.split(","):
        try:
            value = float(part)
        except ValueError:
            value = math.nan
        if not low <= value <= high:
            raise InputError(f"found {part.strip()!r}", where=where, mend=f"{mend} ({low:g} to {high:g})")
        found.append(value)
    if one and len(found) > 1:
        raise InputError(f"found {text!r}", where=where, mend=mend)
    if len(set(found)) < len(found):
        raise InputError(f"one number stands twice in {text!r}", where=where, mend="Name each once")
    return tuple(found)


def _require_law(key: str) -> None:
    from shpb.merge.models.registry import model_named

    try:
        model_named(key)
    except InputError as error:
        raise InputError(error.what, where="--law", mend=error.mend) from None


def _require_no_table_options(options: argparse.Namespace) -> None:
    for name in ("law", "rates", "temperatures", "strain_step", "strain_end"):
        if getattr(options, name) is not None:
            raise InputError(
                "is for the flow-curve tables of a merge, and only shots are named",
                where="--" + name.replace("_", "-"),
                mend="Name a merged.h5, or leave it out",
            )


# --- work ----------------------------------------------------------------------------------------------


@dataclass(slots=True)
class _Exports:
    """What has been written so far, and what could not be."""

    into: Path
    si: bool
    replace: bool
    files: list[tuple[Path, bool]] = field(
        default_factory=list
    )  # whether it was written; else it stood there
    errors: list[InputError | StoreError] = field(default_factory=list)
    failed: bool = False
    owners: dict[str, Path] = field(default_factory=dict)

    def guarded(self, path: Path, work: Callable[[], None]) -> None:
        """Export one result; what is wrong with it does not stop the others."""
        try:
            work()
        except (InputError, StoreError) as error:
            self.errors.append(error)
        except LACKING as error:
            what = f"something in it is missing or wrong ({type(error).__name__}: {error})"
            mend = "Reduce the raw record again, or merge again"
            self.errors.append(StoreError(what, where=str(path), mend=mend))

    def shot(self, path: Path) -> None:
        """The curves of a shot."""
        from shpb.cli.reduce import file_stem
        from shpb.store.export_curves import CURVES_MARK, curves_text
        from shpb.store.shot_file import load

        stored = load(path)
        text = curves_text(stored, si=self.si)
        self._write(path, f"{file_stem(stored.sheet.shot_id)}.csv", text, CURVES_MARK)

    def merge(self, path: Path, law: str | None, asked: Asked) -> None:
        """The merged table, and a table of flow curves for each material."""
        from shpb.store.export_curves import TABLE_MARK, table_text
        from shpb.store.export_flow import file_stems
        from shpb.store.merge_read import load_merge

        merge = load_merge(path)
        self._write(path, f"{path.stem}.csv", table_text(merge, si=self.si), TABLE_MARK)
        stems = file_stems(merge)
        missing: list[InputError] = []
        for number, stem in enumerate(stems, 1):
            try:
                table = _table(merge, number, law, asked)
            except InputError as error:
                missing.append(error)
                continue
            self._write_table(path, f"{stem}_{law or 'measured'}", table)
        self.errors += missing

    def _write_table(self, source: Path, stem: str, table: FlowTable) -> None:
        from shpb.store.export_flow import FLOW_MARK, long_text, wide_text

        for form, text in (("long", long_text(table, si=self.si)), ("wide", wide_text(table, si=self.si))):
            self._write(source, f"{stem}_{form}.csv", text, FLOW_MARK)

    def _write(self, source: Path, name: str, text: str, mark: str) -> None:
        from shpb.store.export_cells import write_text

        target = self.into / name
        owner = self.owners.setdefault(name.casefold(), source)
        if owner != source:
            raise InputError(
                f"would be written over the export of {owner}",
                where=str(source),
                mend="Export it into a folder of its own with --into",
            )
        try:
            self.files.append((target, write_text(target, text, mark=mark, replace=self.replace)))
        except StoreError:
            self.failed = True
            raise


def _table(merge: StoredMerge, number: int, law: str | None, asked: Asked) -> FlowTable:
    from shpb.store.export_flow import law_table, measured_table

    return measured_table(merge, number, asked) if law is None else law_table(merge, number, law, asked)


# --- words ---------------------------------------------------------------------------------------------


def _print_text(work: _Exports) -> None:
    from shpb.view.text import printable

    for path, written in work.files:
        print(f"{'written' if written else 'up to date'}: {printable(path)}")


def _print_json(work: _Exports) -> None:
    from shpb.view.summary import error_json, head, json_text

    def paths(which: bool) -> Sequence[str]:
        return [str(path) for path, written in work.files if written is which]

    said = {
        **head("shpb export"),
        "files_written": paths(True),
        "files_up_to_date": paths(False),
        "not_exported": [error_json(error) for error in work.errors],
    }
    print(json_text(said))
