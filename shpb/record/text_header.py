"""What the lines above the numbers say: facts, column names, units."""

from __future__ import annotations

import re
from typing import NamedTuple

from shpb.record.stated import Stated, facts_from, is_known_key, merged
from shpb.record.text_cells import bare, is_number
from shpb.record.text_layout import Layout
from shpb.record.units import is_unit, plain_unit, split_unit

_COMMENT = "#%!/*;'\" \t"
_KEY_SIGN_VALUE = re.compile(r"^(?P<key>[^:=]{1,60}?)\s*[:=]\s*(?P<value>.+)$")
_KEY_NUMBER = re.compile(r"^(?P<key>[^\d\s].{0,60}?)\s+(?P<value>[-+]?[.,]?\d.*)$")


class Header(NamedTuple):
    """The names and units of the used cells, and the facts stated in the preamble."""

    names: tuple[str, ...]
    units: tuple[str, ...]
    stated: Stated


def header_of(layout: Layout, *, where: str) -> Header:
    """Read the header of a text file.

    The row of names is the last line above the numbers, apart from a row of units, a ruled line
    and blank lines, that has as many cells as the numbers have. Every line that begins with a
    known key is a fact.

    Raises
    ------
    InputError
        If two lines state different values of the same fact.
    """
    facts = [fact for line in layout.header if (fact := _fact(line, layout)) is not None]
    facts += [facts_from(cells[0], cells[1:]) for cells in layout.beside if cells and cells[0]]
    stated = merged(facts, where=f"{where}, header")
    rows = [line for line in layout.header if line.strip(_COMMENT + "-=_+|")]
    units = _units(rows[-1], layout) if rows else []
    if units:
        rows.pop()
    names = _names(rows[-1], layout) if rows else []
    if names and not units and len(rows) > 1:
        units = _units(rows[-2], layout)
    units = units or [""] * len(layout.used)
    if not names:
        return Header(("",) * len(layout.used), tuple(units), stated)
    split = [split_unit(name) for name in names]
    return Header(
        tuple(name for name, _ in split),
        tuple(below or within for below, (_, within) in zip(units, split, strict=True)),
        stated,
    )


def _fact(line: str, layout: Layout) -> Stated | None:
    """Return the fact that a preamble line states, or None."""
    text = line.strip().lstrip(_COMMENT).strip()
    signed = _KEY_SIGN_VALUE.match(text)
    cells = [
        bare(cell)
        for cell in (text.split(layout.delimiter) if layout.delimiter else re.split(r"\t|  +", text))
    ]
    if len(cells) > 1 and is_known_key(cells[0].rstrip(":= ")):
        return facts_from(cells[0].rstrip(":= "), _with_decimal_point(cells[1:], layout))
    if signed and is_known_key(signed["key"]):
        values = signed["value"].split(layout.delimiter or "\t")
        return facts_from(signed["key"], _with_decimal_point([bare(value) for value in values], layout))
    # A preamble may use other separators than the rows do.
    for pattern in (r"\t", r";", r",(?!\d)|(?<!\d),", r","):
        key, *rest = re.split(pattern, text)
        if rest and is_known_key(key):
            return facts_from(key, _with_decimal_point([bare(cell) for cell in rest], layout))
    numbered = _KEY_NUMBER.match(text)
    if numbered and is_known_key(numbered["key"]):
        return facts_from(numbered["key"], _with_decimal_point([numbered["value"]], layout))
    return None


def _with_decimal_point(values: list[str], layout: Layout) -> list[str]:
    if layout.decimal == ".":
        return values
    return [re.sub(r"(?<=\d),(?=\d)", ".", value) for value in values]


def _cells_over_numbers(line: str, layout: Layout) -> list[str]:
    """Return the cells of a header line that stand over the numbers, or [] if they do not match them."""
    text = line.strip("\r\n ").lstrip("#%!* ") if line.lstrip()[:1] in "#%!*" else line.strip("\r\n")
    for cells in _ways_to_split(text, layout):
        if len(cells) == layout.cells or len(cells) > layout.used[-1]:
            chosen = [cells[i] for i in layout.used]
            return chosen if any(chosen) else []
        if len(cells) == len(layout.used):
            return cells
    return []


def _ways_to_split(text: str, layout: Layout) -> list[list[str]]:
    """Split a header line as the rows are split, then as people write names over them all the same."""
    # "Time (s)  CH1 (V)" is two cells, not four.
    joined = re.sub(r"\s+(?=[(\[])", "\0", text.strip())
    by_blank = [bare(cell.replace("\0", " ")) for cell in joined.split()]
    wide = [bare(cell) for cell in re.split(r"\t|\s{2,}", text.strip())]
    others = [[bare(cell) for cell in text.split(mark)] for mark in (",", ";", "\t") if mark in text]
    ways = [cells for cells in (by_blank, wide, *others) if len(cells) == layout.cells]
    if layout.delimiter is None:
        return ways
    own = layout.split(text)
    return [own] if len(own) > 1 else [own, *ways]


def _units(line: str, layout: Layout) -> list[str]:
    """Return the units in ``line``, or [] if it is no row of units."""
    cells = _cells_over_numbers(line, layout)
    if all(is_unit(cell) for cell in cells if cell) and any(plain_unit(cell) for cell in cells):
        return [plain_unit(cell) or cell.strip("()[] ") for cell in cells]
    return []


def _names(line: str, layout: Layout) -> list[str]:
    """Return the names in ``line``, or [] if it is no row of names."""
    cells = _cells_over_numbers(line, layout)
    if not cells or (_fact(line, layout) is not None and len(layout.used) <= 2):
        return []
    if is_known_key(cells[0]) and cells[0].casefold() not in {"samples", "points", "start"}:
        return []
    # "Firmware,1.2": a key with a number is no row of names; "time,1,2" is one.
    if is_number(cells[0]) or (len(cells) == 2 and is_number(cells[1]) and "." in cells[1]):
        return []
    return cells
