"""Reading a shot list: one row a shot, for labs that keep a spreadsheet in place of shot sheets."""

from __future__ import annotations

import os
from collections.abc import Mapping
from pathlib import Path

from shpb.errors import FileMistakes, Mistake
from shpb.rig.columns import COLUMNS, NOTE_PREFIX, RECORD_COLUMNS, Column, cell_value
from shpb.rig.csv_rows import Row, split_rows
from shpb.rig.key import Kind
from shpb.rig.keys import SHEET_FILE
from shpb.rig.mistakes import Collector, nearest, shown
from shpb.rig.sheet import ShotSheet
from shpb.rig.sheet_file import sheet_from_document
from shpb.rig.text_file import read_text
from shpb.rig.toml_text import toml_comment, toml_document
from shpb.rig.values import Unreadable

Document = dict[str, dict[str, object]]


def read_shot_list(path: str | Path) -> tuple[ShotSheet, ...]:
    """Read and check a shot list.

    Parameters
    ----------
    path : str or Path
        The CSV file: comma, semicolon or tab; a decimal comma where the separator is no comma;
        UTF-8, UTF-16 or Latin-1. Blank rows and rows that begin with # are skipped; an empty cell
        means not stated. Record and rig files are taken as seen from its folder.

    Returns
    -------
    tuple of ShotSheet
        In the order of the rows. The ``text`` of each is a shot sheet of the same content, with the
        row word for word in a remark above it, so that it can be stored and read again alone.

    Raises
    ------
    FileMistakes
        With all mistakes of all rows at once, each with line and column.
    InputError
        If the file cannot be read or has no rows.

    Examples
    --------
    >>> import shpb
    >>> [sheet.shot_id for sheet in shpb.read_shot_list(folder / "shot_list.csv")][:2]
    ['H-01', 'H-02']
    """
    path = Path(path)
    return shot_list_from_text(read_text(path, "shot list", latin_1=True), str(path), path.parent)


def usable_rows(path: str | Path) -> tuple[tuple[ShotSheet, ...], FileMistakes | None]:
    """Read what can be used of a shot list: the sheets of its sound rows, and the mistakes of the others.

    Raises InputError as :func:`read_shot_list` does where the file or its header cannot be used at all.
    """
    path = Path(path)
    text = read_text(path, "shot list", latin_1=True)
    sheets, mistakes = _rows_of(text, str(path), path.parent)
    return sheets, FileMistakes(mistakes) if mistakes else None


def shot_list_from_text(text: str, name: str, folder: str | Path) -> tuple[ShotSheet, ...]:
    """Return the sheets that the text of a shot list describes; see :func:`read_shot_list`."""
    sheets, mistakes = _rows_of(text, name, Path(folder))
    if mistakes:
        raise FileMistakes(mistakes)
    return sheets


def _rows_of(text: str, name: str, folder: Path) -> tuple[tuple[ShotSheet, ...], list[Mistake]]:
    """Sheets of the rows without a mistake, and the mistakes of all others."""
    separator, header, rows = split_rows(text, name, COLUMNS)
    seen = _RowCollector(name)
    columns = _columns(header, rows, seen)
    seen.finish()  # a misnamed column would only bring a mistake on every row
    once = _Once(folder)
    sheets: list[ShotSheet] = []
    for row in rows:
        seen.begin(row)
        before = len(seen.mistakes)
        document = _document(row, columns, separator != ",", seen)
        _check_surplus(row, len(header.cells), seen)
        once.check(document, row, seen)
        sheet = sheet_from_document(
            document, _sheet_text(name, header, row, document), folder, seen, f"{name}, line {row.line}"
        )
        if sheet is not None and len(seen.mistakes) == before:
            sheets.append(sheet)
    return tuple(sheets), seen.mistakes


class _RowCollector(Collector):
    """Collects mistakes by line and column, in words for cells instead of keys."""

    def __init__(self, file: str) -> None:
        super().__init__(file)
        self._where = ""
        self._spoiled: set[str] = set()  # keys whose cell was refused already

    def begin(self, row: Row) -> None:
        """Tell that the mistakes to come are in ``row``."""
        self._where, self._spoiled = f"line {row.line}", set()

    def add_cell(self, column: str, found: str, expected: str, mend: str = "") -> None:
        """Note a mistake in a cell, and that its key needs no further one."""
        self._spoiled.add(_key_path(COLUMNS[column]) if column in COLUMNS else column)
        super().add(f"{self._where}, column {column}", found, expected, mend)

    def is_spoiled(self, column: Column) -> bool:
        """Whether a cell of the column's key was refused in this row."""
        return _key_path(column) in self._spoiled

    def add(self, path: str, found: str, expected: str, mend: str = "") -> None:
        """Note a mistake at a key path of the sheet that the row stands for."""
        column = _column_of(path)
        if found == "nothing":
            if column is not None and self.is_spoiled(column):
                return
            found, mend = "an empty cell", "Fill it in"
        super().add(f"{self._where}, column {column.name if column else path}", found, expected, mend)


def _key_path(column: Column) -> str:
    return f"{column.table.name}.{column.key.stem}"


def _column_of(path: str) -> Column | None:
    """The column that fills the key path of a shot sheet: ``specimen.diameter_mm.u``, ``shot.id``."""
    table, _, rest = path.partition(".")
    name, _, part = rest.partition(".")
    found = [c for c in COLUMNS.values() if c.table.name == table and c.key_name == name]
    return next((c for c in found if c.part == part), found[0] if found else None)


def _columns(header: Row, rows: list[Row], seen: _RowCollector) -> dict[int, Column]:
    """What each column means, by position, leaving out notes and empty columns."""
    seen.begin(header)
    columns: dict[int, Column] = {}
    present: set[str] = set()
    for position, name in enumerate(header.cells):
        if name and name in header.cells[:position]:
            seen.add_cell(name, "the column twice", "each column once", "Remove or rename one of them")
        elif name in COLUMNS:
            columns[position] = COLUMNS[name]
            present.add(_key_path(COLUMNS[name]) if not COLUMNS[name].part else name)
        elif not name:
            used = next((row for row in rows if row.cell(position)), None)
            if used:
                found = f"no name above {shown(used.cell(position))} in line {used.line}"
                seen.add_cell(str(position + 1), found, "a column name", "Name the column or empty it")
        elif not name.startswith(NOTE_PREFIX):
            guess = nearest(name, COLUMNS)
            if guess:
                present.add(_key_path(COLUMNS[guess]))
            own = f"call it {NOTE_PREFIX}… to keep it as a note of your own"
            seen.add_cell(
                shown(name).strip('"'),
                "an unknown column",
                "a column of the shot list, its unit in the name",
                f"Did you mean {guess}? Otherwise {own}" if guess else own.capitalize(),
            )
    needed = [c for c in COLUMNS.values() if c.key.required and not c.part and c.unit == c.key.units[0]]
    for column in (COLUMNS["record"], *needed):
        if _key_path(column) not in present:
            seen.add_cell(column.name, "no such column", column.key.meaning, "Add the column")
    return columns


def _document(row: Row, columns: Mapping[int, Column], decimal_comma: bool, seen: _RowCollector) -> Document:
    """The row as the tables of a shot sheet."""
    document: Document = {table.name: {} for table in SHEET_FILE}
    parts: dict[tuple[str, str], dict[str, object]] = {}
    for position, column in columns.items():
        cell = row.cell(position)
        if not cell:
            continue
        try:
            value = cell_value(cell, column, decimal_comma=decimal_comma)
        except Unreadable as bad:
            seen.add_cell(column.name, bad.found, bad.expected, bad.mend)
            continue
        part = column.name if column.name in RECORD_COLUMNS else column.part or "value"
        parts.setdefault((column.table.name, column.key_name), {})[part] = value
    by_name = {(c.table.name, c.key_name): c for c in columns.values()}
    for (table, key_name), given in parts.items():
        column = by_name[table, key_name]
        value = _joined(column, given, seen)
        if value is not None:
            document[table][key_name] = value
    if "record" not in document["shot"]:
        seen.add("shot.record", "nothing", "a file name")
    return document


def _joined(column: Column, given: dict[str, object], seen: _RowCollector) -> object:
    """The value of one key from the cells of its columns."""
    if column.key.kind is Kind.FILES:
        files = [given[name] for name in RECORD_COLUMNS if name in given]
        return files[0] if len(files) == 1 else files
    if column.key.kind is Kind.SPAN:
        if given.get("start") == "automatic" or given.get("end") == "automatic":
            return "automatic"
        for end, name in zip(("start", "end"), column.key.columns(column.unit), strict=True):
            if end not in given:
                seen.add_cell(
                    name, "an empty cell", "both ends of the window or none", "Fill in the other end"
                )
                return None
        return [given["start"], given["end"]]
    if "value" not in given:
        part, alone = next(iter(given)), column.key.columns(column.unit)[0]
        if not seen.is_spoiled(column):
            seen.add_cell(
                f"{part}_{alone}", "a cell without its value", f"a value in column {alone} too", "Fill it in"
            )
        return None
    return given["value"] if list(given) == ["value"] else given


def _check_surplus(row: Row, width: int, seen: _RowCollector) -> None:
    surplus = [cell for cell in row.cells[width:] if cell]
    if surplus:
        seen.add_cell(
            str(width + 1),
            f"{shown(surplus[0])} beyond the last column",
            f"at most {width} cells",
            "Put text that holds the separator in quotes, or name the column",
        )


class _Once:
    """Notes shots and records that stand in two rows."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self._shots: dict[str, int] = {}
        self._records: dict[str, int] = {}

    def check(self, document: Document, row: Row, seen: _RowCollector) -> None:
        """Note what ``row`` has in common with an earlier one."""
        shot = document["shot"].get("id")
        # Results are files: on many systems CU-1 and cu-1 would be the same one.
        first = self._shots.setdefault(str(shot).casefold(), row.line)
        if shot is not None and first != row.line:
            seen.add_cell(
                "shot_id", f"{shown(shot)}, as in line {first}", "a name of its own", "Rename the shot"
            )
        record = document["shot"].get("record", [])
        for file, column in zip(
            [record] if isinstance(record, str) else _list(record), RECORD_COLUMNS, strict=False
        ):
            path = os.path.normpath(self._folder / str(file).replace("\\", "/"))
            first = self._records.setdefault(path, row.line)
            if first != row.line:
                seen.add_cell(
                    column,
                    f"{shown(file)}, as in line {first}",
                    "a record of its own",
                    "Name this shot's record",
                )


def _list(value: object) -> list[object]:
    return value if isinstance(value, list) else []


def _sheet_text(name: str, header: Row, row: Row, document: Document) -> str:
    """The row as the text of a shot sheet, the row itself above it."""
    top = toml_comment(f"From {Path(name).name}, line {row.line}; the row as it stood there:")
    return top + toml_comment(header.raw) + toml_comment(row.raw) + "\n" + toml_document(document)
