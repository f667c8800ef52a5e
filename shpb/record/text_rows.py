"""The rows of a text file as one array: numpy's own parser, fed the path.

Three ways, each only when the one before it cannot serve: the parser on the file itself; the parser
on lines that are put right one by one (decimal comma, over-range markers); a search for the line
that is wrong, to name it.
"""

from __future__ import annotations

import re
from collections.abc import Generator, Iterable, Iterator
from contextlib import closing, suppress
from pathlib import Path

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.errors import InputError
from shpb.record.text_cells import is_not_a_number, is_number, over_range
from shpb.record.text_layout import Layout

# numpy opens a name with one of these endings through a decompressor, whatever the content.
_PACKED_ENDINGS = {".gz", ".bz2", ".xz", ".lzma"}
_PLAIN_LINE = re.compile(r"[-+.\deE;,\t \r\n]*")


def read_rows(path: Path, layout: Layout, names: tuple[str, ...]) -> tuple[FloatArray, Layout]:
    """Return the numbers of the used cells, shape (rows, used cells), and the layout that held.

    Samples over range are +inf or -inf. A cell that says "nan" is left to whoever knows which columns count.

    Raises
    ------
    InputError
        If a row is no row of numbers, has other than the usual number of cells or an empty cell; the message
        names line and channel.
    """
    if layout.decimal == ".":
        # What fails here holds a marker, a decimal comma further down, or a mistake: read by line to know.
        with suppress(ValueError, OverflowError):
            return _from_path(path, layout), layout
    try:
        return _read_with_care(path, layout, names), layout
    except InputError:
        if layout.decimal == "," or layout.delimiter == "," or layout.decimal_seen:
            raise
        # The head held whole numbers only, so the decimal mark was still open.
        with suppress(InputError):
            comma = layout._replace(decimal=",")
            return _read_with_care(path, comma, names), comma
        raise


def _read_with_care(path: Path, layout: Layout, names: tuple[str, ...]) -> FloatArray:
    try:
        table = _from_lines(path, layout)
    except (ValueError, OverflowError) as error:
        raise _complaint(path, layout, names, error) from None
    nan = np.isnan(table)
    if nan.any():
        # The lines held no NaN of their own if the search finds none: these are markers without a side.
        found = _first_bad_row(path, layout, names)
        if found is not None:
            raise found
        for column, missing in zip(table.T, nan.T, strict=True):
            if missing.any():
                _give_sides(column, missing)
    return table


def _from_path(path: Path, layout: Layout) -> FloatArray:
    if path.suffix.lower() in _PACKED_ENDINGS:
        with path.open(encoding=layout.encoding) as file:
            return _loadtxt(file, layout, skip=layout.skip)
    return _loadtxt(str(path.resolve()), layout, skip=layout.skip)


def _from_lines(path: Path, layout: Layout) -> FloatArray:
    with closing(_lines_put_right(path, layout)) as lines:
        return _loadtxt(lines, layout, skip=0)


def _loadtxt(source: str | Iterable[str], layout: Layout, *, skip: int) -> FloatArray:
    return np.loadtxt(
        source,
        delimiter=layout.delimiter,
        skiprows=skip,
        comments=None,
        encoding=layout.encoding,
        ndmin=2,
        usecols=None if len(layout.used) == layout.cells else layout.used,
        quotechar='"' if layout.quoted else None,
    )


def numbered_lines(path: Path, layout: Layout) -> Iterator[tuple[int, str]]:
    """Yield the number, from 1, and the text of every line from the first row of samples on."""
    # Numbers read alike in Latin-1 and UTF-8; markers such as the sign of infinity do not.
    encoding = "utf-8" if layout.encoding == "latin-1" else layout.encoding
    with path.open(encoding=encoding, errors="replace") as file:
        for number, line in enumerate(file, 1):
            if number > layout.skip:
                yield number, line


def _lines_put_right(path: Path, layout: Layout) -> Generator[str]:
    comma = layout.decimal == ","
    for _, original in numbered_lines(path, layout):
        line = original.replace(",", ".") if comma and '"' not in original else original
        if line.isspace():
            continue
        if _PLAIN_LINE.fullmatch(line):
            yield line
            continue
        cells = layout.split(line)
        for i, cell in enumerate(cells):
            cells[i] = over_range(cell) or (cell.replace(",", ".") if comma else cell)
        yield (layout.delimiter or " ").join(cells) + "\n"


def _give_sides(column: FloatArray, missing: BoolArray) -> None:
    """Give each marker without a side the sign of the last finite sample before it, in place."""
    finite = np.isfinite(column)
    if not finite.any():
        column[missing] = np.inf
        return
    places = np.where(finite, np.arange(column.size), -1)
    last = np.maximum.accumulate(places)
    last[last < 0] = np.flatnonzero(finite)[0]
    column[missing] = np.copysign(np.inf, column[last[missing]])


def _complaint(path: Path, layout: Layout, names: tuple[str, ...], error: Exception) -> InputError:
    found = _first_bad_row(path, layout, names)
    return found or InputError(
        f"the rows cannot be read: {error}", where=path.name, mend="Export the record again"
    )


def _first_bad_row(path: Path, layout: Layout, names: tuple[str, ...]) -> InputError | None:
    """Return an error that names the first line which is no row of numbers, or None."""
    for number, line in numbered_lines(path, layout):
        if not line.strip():
            continue
        cells = layout.split(line.replace("\0", "\N{REPLACEMENT CHARACTER}"))
        where = f"{path.name}, line {number}"
        if len(cells) != layout.cells and not (
            len(cells) > layout.used[-1] and len(layout.used) < layout.cells
        ):
            return InputError(
                f"the row has {len(cells)} cells where the others have {layout.cells}: {line.strip()[:60]!r}",
                where=where,
                mend="Remove what is no sample from the file, or export the record again",
            )
        for name, i in zip(names, layout.used, strict=True):
            cell = cells[i]
            if is_number(cell, layout.decimal) or over_range(cell):
                continue
            channel = f"channel {name!r}" if name else f"column {i + 1}"
            if not cell or is_not_a_number(cell):
                what = "is empty" if not cell else f"holds {cell!r}, no number"
            else:
                what = f"holds {cell[:40]!r}, no number"
            return InputError(
                f"{channel} {what}",
                where=where,
                mend="Samples must be complete: export the record again, or cut it before that line",
            )
    return None
