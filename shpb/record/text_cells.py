"""One cell of a text file: a number, an over-range marker, or neither."""

from __future__ import annotations

import re

from shpb.record.units import words

_NUMBER = re.compile(r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?", re.ASCII)
_DECIMAL_COMMA = re.compile(r"[-+]?(?:\d+(?:,\d+)?|,\d+)(?:[eE][-+]?\d+)?", re.ASCII)
# What scopes and DAQ cards write where the digitiser was over range, in lower case, without sign,
# blanks, "-" and "_". Infinity is plus without a sign; a plain "over" may be on either side.
_INFINITE = frozenset(("inf", "infinity", "1.#inf", "∞"))
_OVER = words("ol o.l o/l ovr ovf ovld over overflow overrange overload clip clipped outofrange saturated")
_UNDER = words("under underflow underrange underload udf")
_NO_NUMBER = words("nan 1.#qnan 1.#snan 1.#ind 1.#nan n/a na null none")


def bare(cell: str) -> str:
    """Return ``cell`` without blanks and quotes around it."""
    return cell.strip().strip('"').strip()


def is_number(cell: str, decimal: str = ".") -> bool:
    """Whether a bare cell is a finite number with this decimal mark."""
    return bool((_NUMBER if decimal == "." else _DECIMAL_COMMA).fullmatch(cell))


def is_not_a_number(cell: str) -> bool:
    """Whether a bare cell says in words that it holds no number."""
    dashes = len(cell) > 1 and not cell.strip("-")
    return dashes or _word(cell) in _NO_NUMBER or _word(cell).startswith("nan(")


def over_range(cell: str) -> str:
    """Return "inf", "-inf", or "nan" for a marker without a side; "" if the cell is no marker.

    >>> over_range("+OL"), over_range("-1.#INF"), over_range("****"), over_range("0.5")
    ('inf', '-inf', 'nan', '')
    """
    if len(cell) > 1 and not cell.strip("*#"):
        return "nan"
    word = _word(cell)
    if word in _UNDER:
        return "-inf"
    if word not in _INFINITE and word not in _OVER:
        return ""
    if cell.startswith("-"):
        return "-inf"
    return "inf" if cell.startswith("+") or word in _INFINITE else "nan"


def _word(cell: str) -> str:
    word = cell.casefold().lstrip("+-").replace(" ", "").replace("_", "").replace("-", "")
    return word.rstrip("0123456789") if word.startswith("1.#") else word


def is_value(cell: str, decimal: str = ".") -> bool:
    """Whether a bare cell can stand in a row of samples: a number, a marker, NaN, or nothing."""
    if not cell or is_number(cell, decimal):
        return True
    if cell[-1].isdigit() and "#" not in cell:  # no marker ends so: spare the comparisons
        return False
    return bool(over_range(cell)) or is_not_a_number(cell)
