"""Plain text: outside strings made harmless, numbers rounded, lines wrapped by the columns they take."""

from __future__ import annotations

import math
import re
import unicodedata

NOT_KNOWN = "not known"

# A number is not parted from its unit at a line end. The joint is a control character: none is left in
# text that has passed `printable`, and it is no space to `str.split`.
_JOINT = "\x00"
_NUMBER_AND_UNIT = re.compile(r"(?<=\d) (?=(?:%|us|/s|MPa|GPa|kHz|J|N s|K|V|mV|kN|MS/s|C)(?:\W|$))")


def printable(text: object) -> str:
    r"""Return ``text`` on one line with every control character spelt out.

    File names, channel names and remarks come from outside. A terminal would obey an escape sequence
    in them, an XML file would break on one: line ends and odd spaces become plain spaces, whatever
    else does not print (controls, direction marks, half of a surrogate pair) is written as ``\x1b``.

    Examples
    --------
    >>> printable("shot\x1b[31m 7\n")
    'shot\\x1b[31m 7 '
    """
    text = str(text)
    return text if text.isprintable() else "".join(map(_harmless, text))


def _harmless(character: str) -> str:
    if character.isprintable():
        return character
    if character.isspace():
        return " "
    code = ord(character)
    return f"\\x{code:02x}" if code < 0x100 else f"\\u{code:04x}"


def rounded(value: float | None, digits: int = 3) -> str:
    """Return a number with at least ``digits`` significant digits, without an exponent if it can be.

    Examples
    --------
    >>> rounded(1258.6), rounded(23.94), rounded(0.0123456), rounded(float("nan")), rounded(3.2e-7)
    ('1259', '23.9', '0.0123', 'not known', '3.20e-07')
    """
    if value is None or not math.isfinite(value):
        return NOT_KNOWN
    if value == 0:
        return "0"
    magnitude = math.floor(math.log10(abs(value)))
    if not -5 < magnitude < 7:
        return f"{value:.{digits - 1}e}"
    return f"{value:.{max(digits - 1 - magnitude, 0)}f}"


def columns_of(text: str) -> int:
    """Columns that ``text`` takes on a terminal: wide East Asian characters take two, combining ones none."""
    if text.isascii():
        return len(text)
    return sum(
        0 if unicodedata.combining(c) else 2 if unicodedata.east_asian_width(c) in "WF" else 1 for c in text
    )


def fitted(text: str, width: int, ellipsis: str = "...") -> str:
    """Cut ``text`` to ``width`` columns, with three dots where something is left out."""
    if columns_of(text) <= width:
        return text
    room = width - len(ellipsis)
    kept = ""
    for character in text:
        room -= columns_of(character)
        if room < 0:
            break
        kept += character
    return kept + ellipsis


def padded(text: str, width: int) -> str:
    """Cut or fill ``text`` with spaces to exactly ``width`` columns."""
    text = fitted(text, width)
    return text + " " * (width - columns_of(text))


def wrapped(text: str, width: int, first: str = "", rest: str | None = None) -> list[str]:
    """Wrap ``text`` to lines of at most ``width`` columns.

    Parameters
    ----------
    text : str
        Words parted by spaces; a word longer than a line is broken.
    width : int
        Columns, the indents included.
    first, rest : str
        What begins the first and the other lines; ``rest`` is blank of the width of ``first`` unless given.
    """
    rest = " " * columns_of(first) if rest is None else rest
    lines, line, empty = [], first, True
    for word in _NUMBER_AND_UNIT.sub(_JOINT, text).split():
        remaining = word.replace(_JOINT, " ")
        while remaining:
            gap = "" if empty else " "
            if columns_of(line) + len(gap) + columns_of(remaining) <= width:
                line, empty, remaining = line + gap + remaining, False, ""
            elif not empty:
                lines.append(line)
                line, empty = rest, True
            else:
                piece = fitted(remaining, max(width - columns_of(line), 2), ellipsis="")
                lines.append(line + piece)
                line, remaining = rest, remaining[len(piece) :]
    if not empty or not lines:
        lines.append(line.rstrip() if empty else line)
    return lines
