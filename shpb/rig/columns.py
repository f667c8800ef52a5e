"""The columns of a shot list: the keys of a shot sheet, flattened, and how a cell becomes a value."""

from __future__ import annotations

import re
from dataclasses import dataclass

from shpb.rig.key import Key, Kind, Table, Unit
from shpb.rig.keys import SHEET_FILE
from shpb.rig.mistakes import shown
from shpb.rig.values import Unreadable

RECORD_COLUMNS = ("record", "record_2", "record_3", "record_4")
NOTE_PREFIX = "note_"  # a column of the lab's own, kept with the shot and otherwise not used
_NUMERIC = {Kind.QUANTITY, Kind.NUMBER, Kind.INTEGER, Kind.SPAN, Kind.NUMBERS, Kind.NUMBER_OR_NUMBERS}
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")


@dataclass(frozen=True, slots=True)
class Column:
    """One column: which key of which table it fills, and which part of the key's value."""

    name: str
    table: Table
    key: Key
    unit: Unit
    part: str = ""  # "u", "origin", "start", "end", or empty for the value itself

    @property
    def key_name(self) -> str:
        """The key as written in a shot sheet."""
        return self.key.written(self.unit)


def _all_columns() -> dict[str, Column]:
    """Every column that a shot list may have, by name, in the order of the shot sheet's keys."""
    columns = (
        column
        for table in SHEET_FILE
        for key in table.keys
        for _, unit in key.names()
        for column in _columns_of(table, key, unit)
    )
    found: dict[str, Column] = {}
    for column in columns:
        found.setdefault(column.name, column)  # a test holds that no two keys share a column
    return found


def _columns_of(table: Table, key: Key, unit: Unit) -> list[Column]:
    if key.kind is Kind.FILES:
        return [Column(name, table, key, unit) for name in RECORD_COLUMNS]
    names = key.columns(unit)
    if key.kind is Kind.SPAN:
        return [
            Column(name, table, key, unit, end) for name, end in zip(names, ("start", "end"), strict=True)
        ]
    columns = [Column(names[0], table, key, unit)]
    if key.kind is Kind.QUANTITY:
        columns += [Column(f"{part}_{names[0]}", table, key, unit, part) for part in ("u", "origin")]
    return columns


COLUMNS = _all_columns()


def cell_value(cell: str, column: Column, *, decimal_comma: bool) -> object:
    """Return what a cell would be in a shot sheet: a number, a text, a switch or a list.

    Parameters
    ----------
    cell : str
        Text of the cell, not empty, without space around it.
    column : Column
        The column it stands in.
    decimal_comma : bool
        Whether "20,5" is a number; only where columns are not separated by commas.

    Raises
    ------
    Unreadable
        If a number or a switch is expected and something else stands there.
    """
    kind = column.key.kind
    if column.part == "origin":
        return cell
    if column.key.automatic and cell.casefold() == "automatic":
        return "automatic"
    if kind is Kind.SWITCH:
        if cell.casefold() not in _SWITCHES:
            raise Unreadable(shown(cell), "true or false")
        return _SWITCHES[cell.casefold()]
    if kind is Kind.CHOICES:
        return [] if cell.casefold() == "none" else [part.strip() for part in re.split(r"[|,]", cell)]
    if kind not in _NUMERIC:
        return [part.strip() for part in cell.split("|")] if kind is Kind.TEXTS else cell
    if column.part or kind not in {Kind.NUMBERS, Kind.NUMBER_OR_NUMBERS}:
        return _number(cell, column, decimal_comma)
    parts = cell.split("|") if "|" in cell else cell.split()
    return [_number(part.strip(), column, decimal_comma) for part in parts]


_SWITCHES = {"true": True, "yes": True, "false": False, "no": False}


def _number(cell: str, column: Column, decimal_comma: bool) -> float:
    text = cell.replace(",", ".") if decimal_comma and cell.count(",") == 1 and "." not in cell else cell
    text = text.replace("−", "-")  # the true minus sign, as some spreadsheets write it
    if _NUMBER.fullmatch(text):
        return float(text)
    expected = "a number from 0" if column.part == "u" else column.key.expected(column.unit)
    if _NUMBER.fullmatch(text.replace(",", ".", 1)) and not decimal_comma:
        mend = "Write a decimal point, or separate the columns with semicolons"
    elif _NUMBER.match(text) and re.search(r"[A-Za-zµ°%]", text):
        mend = "Write the number alone; the unit stands in the column's name"
    else:
        mend = "Write a plain number without thousands marks, or leave the cell empty"
    raise Unreadable(shown(cell), expected, mend)
