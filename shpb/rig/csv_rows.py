"""From the text of a shot list to its rows of cells, whatever spreadsheet wrote it."""

from __future__ import annotations

import csv
import io
from collections.abc import Collection, Iterator
from dataclasses import dataclass

from shpb.errors import InputError

SEPARATORS = (",", ";", "\t")


@dataclass(frozen=True, slots=True)
class Row:
    """One row: the line on which it starts, its cells, and its characters as they stand in the file."""

    line: int
    cells: tuple[str, ...]
    raw: str

    def cell(self, position: int) -> str:
        """The cell at ``position``; spreadsheets leave out empty cells at the end of a row."""
        return self.cells[position] if position < len(self.cells) else ""


def split_rows(text: str, name: str, known: Collection[str]) -> tuple[str, Row, list[Row]]:
    """Return the separator, the row of column names and the rows below it.

    Parameters
    ----------
    text : str
        The whole file.
    name : str
        What messages call it.
    known : collection of str
        Column names; the separator is the one that gives most of them.

    Raises
    ------
    InputError
        If there are no column names, no rows below them, or a quote is not closed.
    """
    # No cell may hold a NUL, and the CSV reader of some Python versions stops at one.
    text = text.replace("\x00", "\ufffd")
    top = next(_Lines(text), "")
    hits = {mark: sum(cell.strip(' "\r\n') in known for cell in top.split(mark)) for mark in SEPARATORS}
    separator = max(SEPARATORS, key=lambda mark: (hits[mark], top.count(mark)))
    rows = list(_rows(text, separator, name))
    if not rows:
        raise InputError(
            "there is no row with column names",
            where=name,
            mend="Begin with a row such as shot_id,kind,record,material,diameter_mm,length_mm",
        )
    if len(rows) == 1:
        raise InputError(
            "there is no shot below the column names", where=name, mend="Write one row for each shot"
        )
    return separator, rows[0], rows[1:]


class _Lines:
    """The lines of the file for the CSV reader, without blank and comment lines between two rows.

    Inside a quoted cell such lines belong to the cell; the consumer says when a new row begins.
    """

    def __init__(self, text: str) -> None:
        self._lines = io.StringIO(text, newline="").readlines()
        self._next = 0
        self.row_starts = True
        self.first = 0  # line on which the current row began

    def __iter__(self) -> Iterator[str]:
        return self

    def __next__(self) -> str:
        while self.row_starts and self._next < len(self._lines) and _is_skipped(self._lines[self._next]):
            self._next += 1
        if self._next >= len(self._lines):
            raise StopIteration
        if self.row_starts:
            self.first, self.row_starts = self._next + 1, False
        self._next += 1
        return self._lines[self._next - 1]

    def raw(self) -> str:
        """The characters of the current row."""
        return "".join(self._lines[self.first - 1 : self._next]).rstrip("\r\n")


def _is_skipped(line: str) -> bool:
    # A spreadsheet puts quotes around a remark that holds the separator.
    return not line.strip() or line.lstrip(' \t"').startswith("#")


def _rows(text: str, separator: str, name: str) -> Iterator[Row]:
    lines = _Lines(text)
    reader = csv.reader(lines, delimiter=separator, strict=True)
    while True:
        lines.row_starts = True
        try:
            cells = tuple(cell.strip() for cell in next(reader))
        except StopIteration:
            return
        except csv.Error as error:
            raise InputError(
                f"the row cannot be split into cells ({error})",
                where=f"{name}, line {lines.first}",
                mend='Look for a quote " that is not closed; inside a quoted cell write "" for one',
            ) from None
        if any(cells):  # a row of separators alone is a blank one
            yield Row(lines.first, cells, lines.raw())
