"""How a text file is laid out, seen from its first 64 KiB: encoding, delimiter, first row of samples.

Later lines never change the verdict: a row further down that is no row of numbers is an error that
names its line, not a second header.
"""

from __future__ import annotations

import codecs
import re
from collections import Counter
from itertools import islice, pairwise
from pathlib import Path
from typing import NamedTuple

from shpb.errors import IncompleteRecordError, InputError
from shpb.record.raw import HEAD_BYTES
from shpb.record.text_cells import bare, is_number, is_value

# In order of preference where a line can be read in more than one way. None: any run of blanks. The
# last serves only numbers in quotation marks: "0,5","1,5".
_DIALECTS = (
    (",", "."),
    (";", "."),
    ("\t", "."),
    (";", ","),
    ("\t", ","),
    (None, "."),
    (None, ","),
    (",", ","),
)
_SAMPLED_LINES = 40
_ROWS_IN_A_RUN = 8
_CONTROL = bytes(set(range(32)) - set(b"\t\n\r\f\v\x1a")) + b"\x7f"


class Layout(NamedTuple):
    """Where the numbers of a text file stand.

    Attributes
    ----------
    encoding : str
        Codec that reads the rows.
    delimiter : str or None
        Between cells; None is any run of blanks.
    decimal : str
        "." or ",".
    decimal_seen : bool
        Whether the head holds a number with a decimal mark at all.
    quoted : bool
        Whether numbers stand in quotation marks.
    cells : int
        Cells of a row, empty ones included.
    used : tuple of int
        Which of them hold numbers.
    skip : int
        Lines before the first row of samples.
    header : tuple of str
        These lines.
    beside : tuple of tuple of str
        Cells left of the numbers in the first rows, where some instruments write the preamble.
    """

    encoding: str
    delimiter: str | None
    decimal: str
    decimal_seen: bool
    quoted: bool
    cells: int
    used: tuple[int, ...]
    skip: int
    header: tuple[str, ...]
    beside: tuple[tuple[str, ...], ...] = ()

    def split(self, line: str) -> list[str]:
        """Return the bare cells of ``line``."""
        return split_cells(line, self.delimiter, self.quoted)


def split_cells(line: str, delimiter: str | None, quoted: bool) -> list[str]:
    """Split a line into bare cells; a delimiter inside quotation marks does not count."""
    if delimiter is None:
        return [bare(cell) for cell in line.split()]
    if quoted and '"' in line:
        line = re.sub(r'"[^"]*"', lambda match: match[0].replace(delimiter, "\0"), line)
        return [bare(cell.replace("\0", delimiter)) for cell in line.split(delimiter)]
    return [bare(cell) for cell in line.split(delimiter)]


def read_head(path: Path) -> bytes:
    """Return the first 64 KiB of a file."""
    with path.open("rb") as file:
        return file.read(HEAD_BYTES)


def encoding_of(head: bytes) -> str:
    """Return the codec for the rows of a text file, or "" if this is no text."""
    if head.startswith((b"\xff\xfe", b"\xfe\xff")):
        return "utf-16"
    if head.startswith(b"\xef\xbb\xbf"):
        return "utf-8-sig"
    text = head.rstrip(b"\0")
    if b"\0" in text[:400]:
        # Two bytes a character and no mark: every other byte of plain digits is zero.
        odd, even = text[1:400:2].count(0), text[0:400:2].count(0)
        few = len(text[:400]) // 10
        if odd > len(text[:400]) // 3 and even < few:
            return "utf-16-le"
        return "utf-16-be" if even > len(text[:400]) // 3 and odd < few else ""
    # Latin-1 reads every byte: rows of numbers hold none that differ in other 8-bit codes.
    return "latin-1" if text and len(text.translate(None, _CONTROL)) == len(text) else ""


def _decoded(head: bytes, encoding: str) -> str:
    if encoding == "latin-1":
        try:
            # Incremental, because the head may end within a character.
            return codecs.getincrementaldecoder("utf-8")().decode(head)
        except UnicodeDecodeError:
            return head.decode("latin-1")
    return head.decode(encoding, "replace")


def split_lines(text: str) -> list[str]:
    """Split at CR LF, CR and LF alone, which is where the parser of the rows ends a line."""
    return text.replace("\r\n", "\n").replace("\r", "\n").split("\n")


def head_lines(path: Path, head: bytes, encoding: str) -> list[str]:
    """Return the complete lines of the head; of a file that ends in it, the last one too."""
    lines = split_lines(_decoded(head.rstrip(b"\0") if encoding == "latin-1" else head, encoding))
    if (len(head) >= HEAD_BYTES and path.stat().st_size > len(head)) or lines[-1] == "":
        lines.pop()
    return lines


def layout_of(path: Path) -> Layout:
    """Find the layout of a text file.

    Raises
    ------
    IncompleteRecordError
        If the file is empty.
    InputError
        If the first 64 KiB hold no rows of numbers; the first line is printed.
    """
    head = read_head(path)
    if not head:
        raise IncompleteRecordError("the file is empty", where=path.name, mend="Wait until it is written")
    encoding = encoding_of(head)
    if not encoding:
        raise InputError(
            "this is not text", where=path.name, mend="Export the record as text, NPZ, HDF5, MATLAB or TDMS"
        )
    lines = head_lines(path, head, encoding)
    found = _dialect(lines)
    first = _first_row(lines, found) if found else None
    if found is None or first is None:
        shown = next((line.strip() for line in lines if line.strip()), "")[:60]
        raise InputError(
            f"no rows of numbers in the first {HEAD_BYTES // 1024} KiB; the first line is {shown!r}",
            where=path.name,
            mend="Export the record as columns of numbers with one row a sample",
        )
    layout = _layout(lines, first, encoding, found)
    if layout.delimiter == "," and layout.cells >= 4 and layout.cells % 2 == 0:
        body = lines[first : first + _SAMPLED_LINES]
        _refuse_comma_twice([layout.split(line) for line in body if line.strip()], path.name)
    return layout


class _Dialect(NamedTuple):
    """How the cells of a row are told apart."""

    delimiter: str | None
    decimal: str
    cells: int
    used: tuple[int, ...]


def _dialect(lines: list[str]) -> _Dialect | None:
    """Return delimiter, decimal mark, cells of a row and used cells that read most of the lines."""
    filled = [line for line in lines if line.strip()]
    step = max(1, len(filled) // _SAMPLED_LINES)
    sample = filled[step // 2 :: step]
    best: tuple[tuple[int, int], _Dialect] | None = None
    for delimiter, decimal in _DIALECTS:
        rows = [split_cells(line, delimiter, quoted='"' in line) for line in sample]
        numeric = [row for row in rows if any(row) and all(is_value(cell, decimal) for cell in row)]
        numeric = [row for row in numeric if any(is_number(cell, decimal) for cell in row)]
        if not numeric:
            continue
        cells, _ = Counter(map(len, numeric)).most_common(1)[0]
        alike = [row for row in numeric if len(row) == cells]
        used = tuple(i for i in range(cells) if any(row[i] for row in alike))
        score = (len(alike), len(used))
        if best is None or score > best[0]:
            best = score, _Dialect(delimiter, decimal, cells, used)
            if len(used) > 1 and len(alike) > 0.8 * len(sample):
                break  # no other delimiter can serve as well
    if best is None:
        return None
    return _Dialect(None, ",", 1, (0,)) if _is_one_decimal_comma(sample, best[1]) else best[1]


def _is_one_decimal_comma(sample: list[str], found: _Dialect) -> bool:
    """Whether "0,0123" is one number with a decimal comma, and not two whole numbers."""
    if found.delimiter != "," or found.cells != 2:
        return False
    pairs = [re.fullmatch(r"\s*([-+]?\d+),(\d+)(?:[eE][-+]?\d+)?\s*", line) for line in sample]
    rows = [(pair[1], pair[2]) for pair in pairs if pair]
    if len(rows) < len(sample) // 2:
        return False
    led_by_zero = any((len(tail) > 1 and tail.startswith("0")) or whole == "-0" for whole, tail in rows)
    widths = {len(tail) for _, tail in rows}
    counts_up = all(int(a[0]) < int(b[0]) for a, b in pairwise(rows))
    return led_by_zero or (len(widths) == 1 and min(widths) >= 3 and not counts_up)


def _refuse_comma_twice(rows: list[list[str]], name: str) -> None:
    """Refuse "0,001,0,5": a comma cannot be the decimal mark and stand between the cells."""
    cells = [cell for row in rows for cell in row]
    tails = [cell for row in rows for cell in row[1::2]]
    if all(re.fullmatch(r"[-+]?\d+", cell) for cell in cells) and any(
        len(tail) > 1 and tail.startswith("0") for tail in tails
    ):
        raise InputError(
            "commas seem to stand both between the columns and within the numbers",
            where=name,
            mend="Export with a decimal point, or with semicolons or tabs between the columns",
        )


def _first_row(lines: list[str], dialect: _Dialect) -> int | None:
    """Return the first line that begins a run of rows of numbers."""

    def is_row(line: str) -> bool:
        row = split_cells(line, dialect.delimiter, quoted='"' in line)
        return (
            len(row) == dialect.cells
            and all(is_value(row[i], dialect.decimal) for i in dialect.used)
            and any(is_number(row[i], dialect.decimal) for i in dialect.used)
        )

    run_start: int | None = None
    run = 0
    for i, line in enumerate(lines):
        if not line.strip():
            continue
        if is_row(line):
            run_start = i if run == 0 else run_start
            run += 1
            if run >= _ROWS_IN_A_RUN:
                return run_start
        elif i == len(lines) - 1 and run:
            return run_start  # the last line may be cut short, which is judged elsewhere
        else:
            run = 0
    return run_start if run else None


def _layout(lines: list[str], first: int, encoding: str, dialect: _Dialect) -> Layout:
    filled = (line for line in islice(lines, first, None) if line.strip())
    body = list(islice(filled, _SAMPLED_LINES))
    quoted = any('"' in line for line in body)
    rows = [split_cells(line, dialect.delimiter, quoted) for line in body]
    left = dialect.used[0]
    return Layout(
        encoding=encoding,
        delimiter=dialect.delimiter,
        decimal=dialect.decimal,
        decimal_seen=any(dialect.decimal in cell for row in rows for cell in row),
        quoted=quoted,
        cells=dialect.cells,
        used=dialect.used,
        skip=first,
        header=tuple(lines[:first]),
        beside=tuple(tuple(row[:left]) for row in rows if any(row[:left])),
    )
