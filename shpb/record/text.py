"""Delimited text, as scopes and DAQ cards export it."""

from __future__ import annotations

from itertools import islice
from pathlib import Path
from typing import NamedTuple

import numpy as np

from shpb.errors import IncompleteRecordError, InputError, ShpbError
from shpb.record.raw import Completeness, RawColumn, RawTable, Reader
from shpb.record.text_cells import is_number
from shpb.record.text_header import header_of
from shpb.record.text_layout import Layout, encoding_of, layout_of, split_lines
from shpb.record.text_rows import numbered_lines, read_rows
from shpb.rig.rig import RecordHints

_BLOCK = 1 << 18
_TAIL = 1 << 14
_COMPARED_ROWS = 200
_LF, _CR = 10, 13


def recognises(head: bytes, path: Path) -> bool:
    """Whether the file is text with rows of numbers near its top."""
    if not encoding_of(head):
        return False
    try:
        layout_of(path)
    except InputError:
        return False
    return True


def read(path: Path, hints: RecordHints) -> RawTable:  # noqa: ARG001
    """Read a text file: see :mod:`shpb.record.text_layout` for what is understood.

    Raises
    ------
    IncompleteRecordError
        If the file ends in the middle of a row or holds fewer rows than its header says.
    InputError
        If it holds no rows of numbers, or a row that is none; the message names the line.
    """
    layout = layout_of(path)
    header = header_of(layout, where=path.name)
    ending = _ending(path, layout)
    whole = _completeness(layout, header.stated.samples, ending)
    if not whole.complete:
        raise IncompleteRecordError(whole.reason, where=path.name, mend=_MEND_CUT)
    table, layout = read_rows(path, layout, header.names)
    remarks = _check_row_count(path, layout, len(table), ending)
    stated = header.stated.samples
    if stated is not None and len(table) > stated:
        remarks.append(f"the file holds {len(table)} rows though its header says {stated}")
    columns = []
    for i, (name, unit) in enumerate(zip(header.names, header.units, strict=True)):
        if np.isnan(table[0, i]) and np.isnan(table[:, i]).all():
            remarks.append(f"column {name or layout.used[i] + 1!r} holds no numbers and was left out")
            continue
        columns.append(RawColumn(values=table[:, i], name=name, unit=unit))
    return RawTable(
        columns=tuple(columns),
        stated=header.stated,
        first_line=None if _EVERY_OTHER in remarks else layout.skip + 1,
        remarks=tuple(remarks),
    )


_EVERY_OTHER = "every other line of the file is blank"
_MEND_CUT = "Wait until it is written, or export it again; if it is whole, end a copy of it with a line break"


def is_complete(path: Path) -> Completeness:
    """Whether the last row is whole and there are as many rows as the header says."""
    try:
        layout = layout_of(path)
        stated = header_of(layout, where=path.name).stated.samples
    except ShpbError as error:
        return Completeness(False, error.what)
    return _completeness(layout, stated, _ending(path, layout))


class _Ending(NamedTuple):
    """How a file ends.

    Attributes
    ----------
    lines : int
        Lines in the file, counted as the parser does: CR, LF and CR LF each end one.
    tail : str
        The last few thousand characters.
    zero_tail : bool
        Whether the last bytes are zero: space that is reserved and not written yet.
    """

    lines: int
    tail: str
    zero_tail: bool

    @property
    def line_break(self) -> bool:
        """Whether the last line is ended."""
        return self.tail.endswith(("\n", "\r"))

    @property
    def blank_at_end(self) -> int:
        """Blank lines at the end, as far as the tail shows."""
        lines = split_lines(self.tail.rstrip(" \t"))
        blank = next((i for i, line in enumerate(reversed(lines)) if line.strip()), len(lines))
        return max(blank - 1, 0)  # what follows the last line break is no line

    def last_lines(self, count: int) -> list[str]:
        """Return up to ``count`` of the last lines that hold something."""
        lines = split_lines(self.tail)
        return [line for line in (lines[1:] if len(lines) > count else lines) if line.strip()][-count:]


def _ending(path: Path, layout: Layout) -> _Ending:
    codec, wide = _codec(path, layout.encoding)
    breaks = 0
    after_cr = False
    buffer = bytearray(_BLOCK)
    block = np.frombuffer(buffer, dtype=np.uint8)
    with path.open("rb", buffering=0) as file:
        while size := file.readinto(buffer):
            codes = block[: size // 2 * 2].view(wide) if wide else block[:size]
            ends = codes == _LF
            breaks += int(np.count_nonzero(ends))
            if after_cr and codes.size and ends[0]:
                breaks -= 1
            after_cr = False
            if buffer.find(b"\r", 0, size) >= 0:
                returns = codes == _CR
                breaks += int(np.count_nonzero(returns) - np.count_nonzero(returns[:-1] & ends[1:]))
                after_cr = bool(returns[-1])
    size = path.stat().st_size
    with path.open("rb") as file:
        file.seek(max(0, size - _TAIL) // 2 * 2)
        end = file.read()
    tail = end.decode(codec, "replace")
    return _Ending(breaks + (not tail.endswith(("\n", "\r"))), tail, end.endswith(bytes(4)))


def _codec(path: Path, encoding: str) -> tuple[str, str]:
    """Return the codec of the file's end, and the type of its characters if they have two bytes."""
    if encoding == "utf-16":
        with path.open("rb") as file:
            encoding = "utf-16-be" if file.read(2) == b"\xfe\xff" else "utf-16-le"
    return encoding, {"utf-16-le": "<u2", "utf-16-be": ">u2"}.get(encoding, "")


def _completeness(layout: Layout, stated: int | None, ending: _Ending) -> Completeness:
    if ending.zero_tail:
        return Completeness(False, "the file ends in zero bytes: its space is reserved but not written yet")
    rows = ending.lines - layout.skip
    if stated is not None and rows < stated:
        return Completeness(False, f"the file holds {rows} rows, its header says {stated}")
    last_lines = ending.last_lines(_COMPARED_ROWS)
    if not last_lines:
        return Completeness(False, "the file ends in blank space")
    last = last_lines[-1]
    cells = layout.split(last)
    if len(cells) < layout.cells and len(cells) <= layout.used[-1]:
        return Completeness(
            False, f"the last row has {len(cells)} cells where the others have {layout.cells}"
        )
    if ending.line_break:
        return Completeness(True, f"{rows} rows, the last one ends with a line break")
    widths = [_width(line, layout) for line in last_lines[:-1] if _is_row(line, layout)]
    if widths and _width(last, layout) < max(widths):
        return Completeness(
            False, f"the file ends without a line break in a row that may be cut: {last[-40:]!r}"
        )
    return Completeness(True, f"{rows} rows, the last one as long as the others")


def _is_row(line: str, layout: Layout) -> bool:
    cells = layout.split(line)
    return len(cells) == layout.cells and is_number(cells[layout.used[-1]], layout.decimal)


def _width(line: str, layout: Layout) -> tuple[int, int]:
    """Return the cells of a row and the characters of its last number, the sign left out."""
    cells = layout.split(line)
    last = cells[layout.used[-1]] if len(cells) > layout.used[-1] else ""
    return len(cells), len(last.lstrip("+-"))


def _check_row_count(path: Path, layout: Layout, rows: int, ending: _Ending) -> list[str]:
    """Refuse blank lines within the samples: they part two blocks. Blank lines at the end are fine."""
    lines = ending.lines - layout.skip
    if rows in (lines, lines - ending.blank_at_end):
        return []
    blank = [number for number, line in numbered_lines(path, layout) if not line.strip()]
    if len(blank) != lines - rows:
        raise InputError(
            f"{rows} rows were read but {lines - len(blank)} lines hold something",
            where=path.name,
            mend="Export the record again",
        )
    last_row = layout.skip + lines
    at_end = 0
    for number in reversed(blank):
        if number != last_row - at_end:
            break
        at_end += 1
    within = blank[: len(blank) - at_end]
    if not within:
        return []
    if len(within) >= rows - 1 and all(
        b - a == 2 for a, b in zip(within, islice(within, 1, None), strict=False)
    ):
        return [_EVERY_OTHER]
    raise InputError(
        "a blank line parts the samples in two blocks",
        where=f"{path.name}, line {within[0]}",
        mend="Export one record a file",
    )


READER = Reader("text", "delimited text, as scopes and DAQ cards export it", recognises, read, is_complete)
