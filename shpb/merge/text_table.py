"""A table of numbers as a testing machine or a spreadsheet exports it, with facts above the numbers.

Comment lines (``# key: value``) may stand anywhere; the first other line holds the column names, a
line of units may follow it, and every line below is a row of numbers. Unlike a scope's record, the
layout is taken from the names: a row that is none is a mistake that names its line, wherever it stands.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.merge.table_columns import Column, Measure, column_of
from shpb.record.text_cells import is_not_a_number, is_number
from shpb.record.text_layout import encoding_of, split_cells, split_lines
from shpb.record.units import is_unit
from shpb.rig.key import Unit
from shpb.rig.mistakes import Collector, shown
from shpb.rig.text_file import decoded

LARGEST_BYTES = 200_000_000
_SEPARATORS: tuple[str | None, ...] = (",", ";", "\t", None)  # None: any run of blanks
_COMMENT = ("#", "%", "!", "//")
_FACT = re.compile(r"^(?P<key>[A-Za-z][\w ]{0,60}?)\s*[:=]\s*(?P<value>.*)$")
_HUGE = 1e100  # no quantity of any unit is larger, and its square still is a number
_TOLD = 8  # mistakes in the rows that are told one by one


class HeaderFact(NamedTuple):
    """One ``# key: value`` line."""

    line: int
    key: str
    value: str


class TextTable(NamedTuple):
    """What the text holds.

    Attributes
    ----------
    facts : tuple of HeaderFact
        In the order of the file.
    columns : tuple of Column
        Every column, those that are left out included.
    values : dict of str to float array, shape (rows,)
        The numbers in SI, by the name of their measure. Empty where a row was wrong.
    lines : int array, shape (rows,)
        Line of the file on which each row stands, from 1.
    sha256 : str
        Of the whole file.
    """

    facts: tuple[HeaderFact, ...]
    columns: tuple[Column, ...]
    values: dict[str, FloatArray]
    lines: np.ndarray
    sha256: str

    def label(self, measure: Measure) -> str:
        """The name over a column, as it stands in the file."""
        return next(c.label for c in self.columns if c.measure is measure)

    def unit(self, measure: Measure) -> Unit:
        """The unit of a column in the file."""
        return next(c.unit for c in self.columns if c.measure is measure)

    def at(self, measure: Measure, row: int) -> str:
        """Where a number stands, in words."""
        return f"line {self.lines[row]}, column {self.label(measure)}"


def read_bytes(path: Path, what: str) -> bytes:
    """Return the bytes of a file, or raise InputError saying why not."""
    where = str(path)
    try:
        if path.is_dir():
            raise InputError(
                f"this is a folder, not a {what}", where=where, mend=f"Name the {what} inside it"
            )
        if path.stat().st_size > LARGEST_BYTES:
            raise InputError(
                f"{path.stat().st_size / 1e6:.0f} MB are too many for a {what}",
                where=where,
                mend="Thin the table out; a few thousand rows hold any slow test",
            )
        return path.read_bytes()
    except FileNotFoundError:
        raise InputError(
            f"there is no such {what}", where=where, mend="Check the name and the folder"
        ) from None
    except (OSError, ValueError) as error:  # ValueError: a NUL in the name
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(
            f"the {what} cannot be read: {reason}", where=where, mend="Check the name and the permissions"
        ) from None


def read_table(path: Path, what: str, measures: tuple[Measure, ...], seen: Collector) -> TextTable:
    """Read a text table; every mistake in it is noted in ``seen``.

    Parameters
    ----------
    path : Path
        The file.
    what : str
        What it should be, in words for messages.
    measures : tuple of Measure
        The columns that may stand in it.
    seen : Collector
        Gathers the mistakes.

    Raises
    ------
    InputError
        If the file cannot be read at all, or is no text.
    """
    raw = read_bytes(path, what)
    if raw.strip() and not encoding_of(raw[: 1 << 16]):
        raise InputError(f"this is no text, so no {what}", where=str(path), mend="Export the table as text")
    if encoding_of(raw[: 1 << 16]).startswith("utf-16-"):  # without a byte order mark
        raise InputError(
            f"the {what} is in UTF-16 without a mark",
            where=str(path),
            mend="Save the file with the encoding UTF-8",
        )
    text = decoded(raw, str(path), what, latin_1=True)
    facts, rows, last_comment = _parted(text)
    sha256 = hashlib.sha256(raw).hexdigest()
    empty = TextTable(facts, (), {}, np.zeros(0, dtype=np.int64), sha256)
    if rows and last_comment and _is_numeric(rows[0][1]) and _names_anything(last_comment[1], measures):
        rows.insert(0, last_comment)  # the names stand in the last comment line
    if not rows or _is_numeric(rows[0][1]):
        example = ",".join(m.example for m in measures[:2])
        seen.add(
            f"line {rows[0][0]}" if rows else "the table",
            "no line with column names",
            "names with units above the numbers",
            f"Write such a line, for example {example}",
        )
        return empty
    mark = _separator(rows[0][1], measures)
    labels = _with_units(split_cells(rows[0][1], mark, quoted='"' in rows[0][1]), rows, mark, measures)
    columns = _columns(labels, rows[0][0], measures, seen)
    if len(rows) == 1:
        seen.add(
            "the table", "no row below the column names", "one row for each reading", "Export the table again"
        )
        return empty._replace(columns=columns)
    used = [i for i, column in enumerate(columns) if column.measure is not None]
    numbers = _numbers(rows[1:], mark, columns, used, seen) if used else None
    lines = np.array([number for number, _ in rows[1:]])
    if numbers is None:
        return empty._replace(columns=columns, lines=lines)
    values = {}
    for place, i in enumerate(used):
        measure, unit = columns[i].measure, columns[i].unit
        if measure is not None:
            values[measure.name] = numbers[:, place] * unit.factor
    return TextTable(facts, columns, values, lines, sha256)


def _parted(text: str) -> tuple[tuple[HeaderFact, ...], list[tuple[int, str]], tuple[int, str] | None]:
    """Part the lines in facts and rows; also the last comment line above the rows."""
    facts: list[HeaderFact] = []
    rows: list[tuple[int, str]] = []
    last: tuple[int, str] | None = None
    for number, line in enumerate(split_lines(text), 1):
        bare = line.strip().strip('"').strip()
        if not bare.strip(",;"):
            continue
        if not bare.startswith(_COMMENT):
            rows.append((number, line))
            continue
        # A spreadsheet fills a line with separators up to the width of the table.
        words = bare.lstrip("#%!/ \t").rstrip(",;\t ").rstrip('"')
        fact = _FACT.match(words)
        if fact:
            facts.append(HeaderFact(number, fact["key"].strip(), fact["value"].strip().strip('"')))
        elif not rows and words:
            last = (number, words)
    return tuple(facts), rows, last


def _cells(line: str) -> Iterator[list[str]]:
    return (split_cells(line, mark, quoted='"' in line) for mark in _SEPARATORS)


def _is_numeric(line: str) -> bool:
    """Whether a line is a row of numbers under some separator."""
    return any(
        cells and all(is_number(c, mark) or is_not_a_number(c) for c in cells if c) and any(cells)
        for cells in _cells(line)
        for mark in ".,"
    )


def _hits(cells: list[str], measures: tuple[Measure, ...]) -> int:
    return sum(column_of(cell, measures).measure is not None for cell in cells)


def _names_anything(line: str, measures: tuple[Measure, ...]) -> bool:
    return any(_hits(cells, measures) for cells in _cells(line))


def _separator(names: str, measures: tuple[Measure, ...]) -> str | None:
    """The separator under which most column names are known; the more cells, the better, among equals."""

    def score(mark: str | None) -> tuple[int, bool, int]:
        cells = split_cells(names, mark, quoted='"' in names)
        return _hits(cells, measures), mark is not None, len(cells) if mark else 0

    best = max(_SEPARATORS, key=score)
    if score(best)[0] == 0 and len(split_cells(names, best, quoted='"' in names)) == 1:
        return None
    return best


def _with_units(
    labels: list[str], rows: list[tuple[int, str]], mark: str | None, measures: tuple[Measure, ...]
) -> list[str]:
    """Add the line of units below the names, if there is one, to the names; it is taken out of ``rows``."""
    if len(rows) < 2:
        return labels
    units = [cell.strip("()[] ") for cell in split_cells(rows[1][1], mark, quoted='"' in rows[1][1])]
    known = {text.casefold() for m in measures for unit in m.units for text in (unit.symbol, unit.suffix)}
    known |= {"-", "mm/mm", "m/m", "n/mm2", "µm"}
    if (
        len(units) != len(labels)
        or not any(units)
        or not all(u.casefold() in known or is_unit(u) for u in units)
    ):
        return labels
    del rows[1]
    named = []
    for label, unit in zip(labels, units, strict=True):
        alone = column_of(label, measures)
        complete = alone.measure is not None and alone.unit.suffix
        named.append(label if complete or not unit else f"{label} [{unit}]")
    return named


def _columns(
    labels: list[str], line: int, measures: tuple[Measure, ...], seen: Collector
) -> tuple[Column, ...]:
    columns: list[Column] = []
    for label in labels:
        column = column_of(label, measures)
        earlier = next((c for c in columns if c.measure is not None and c.measure is column.measure), None)
        if column.problem is not None:
            found, expected, mend = column.problem
            seen.add(f"line {line}, column {label[:60]}", found, expected, mend)
        elif earlier is not None:
            seen.add(
                f"line {line}, column {label[:60]}",
                f"{earlier.label} too",
                "each quantity once",
                "Call the one that is not to be used note_...",
            )
            column = Column(label)
        columns.append(column)
    return tuple(columns)


def _numbers(
    rows: list[tuple[int, str]],
    mark: str | None,
    columns: tuple[Column, ...],
    used: list[int],
    seen: Collector,
) -> FloatArray | None:
    """The rows of the used columns, shape (rows, used); None where a cell was wrong."""
    comma = mark != "," and any("," in line for _, line in rows) and not any("." in line for _, line in rows)
    texts = [line.replace(",", ".") if comma else line for _, line in rows]
    try:
        numbers = np.loadtxt(
            texts, delimiter=mark, comments=None, usecols=used, ndmin=2, quotechar='"', encoding=None
        )
    except (ValueError, IndexError):
        numbers = np.full((1, 1), np.nan)
    if numbers.shape == (len(rows), len(used)) and (np.abs(numbers) < _HUGE).all():
        return numbers
    decimal = "," if comma else "."
    told = seen.mistakes
    before = len(told)
    wrong = 0
    for number, line in rows:
        for where, found, mend in _wrong_cells(line, mark, decimal, columns, used):
            wrong += 1
            if len(told) - before < _TOLD:
                seen.add(f"line {number}{where}", found, "a number", mend)
    if wrong > _TOLD:
        seen.add("the table", f"{wrong - _TOLD} more cells that are no numbers", "numbers", "Export it again")
    if not wrong:
        seen.add("the table", "rows that cannot be read", "rows of numbers", "Export the table again")
    return None


def _wrong_cells(
    line: str, mark: str | None, decimal: str, columns: tuple[Column, ...], used: list[int]
) -> Iterator[tuple[str, str, str]]:
    cells = split_cells(line, mark, quoted='"' in line)
    if len(cells) <= used[-1]:
        yield (
            "",
            f"{len(cells)} cell{'s' if len(cells) != 1 else ''} under {len(columns)} column names",
            "Complete the row, or remove it",
        )
        return
    for i in used:
        cell = cells[i]
        if is_number(cell, decimal) and abs(float(cell.replace(",", "."))) < _HUGE:
            continue
        where = f", column {columns[i].label}"
        if not cell or is_not_a_number(cell):
            found = "nothing" if not cell else f"{shown(cell)}, which stands for no number"
            yield where, found, "Cut the table before that line, or remove the row"
        elif is_number(cell, ",."[decimal == ","]):
            yield where, shown(cell), f"Use the decimal mark {decimal!r} in every row"
        else:
            yield where, shown(cell), "Write the number alone; the unit stands in the column's name"
