"""From a file to its text and from TOML text to its tables, with plain words for what can go wrong."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

from shpb.errors import InputError

LARGEST_BYTES = 4_000_000  # ten thousand rows of a shot list; a scope record is mostly larger


def read_text(path: Path, what: str, *, latin_1: bool = False) -> str:
    """Return the text of a file that people write, without byte order mark.

    Parameters
    ----------
    path : Path
        The file.
    what : str
        What it should be, in words for the message: "rig file", "shot sheet", "shot list".
    latin_1 : bool
        Whether a file that is not UTF-8 is taken for Latin-1, as older spreadsheets write it.

    Raises
    ------
    InputError
        If there is no such file, it is a folder, cannot be read, is empty, is far too large
        or is in another encoding.
    """
    where = str(path)
    try:
        if path.is_dir():
            raise InputError(
                f"this is a folder, not a {what}", where=where, mend=f"Name the {what} inside it"
            )
        size = path.stat().st_size
        if size > LARGEST_BYTES:
            raise InputError(
                f"{size / 1e6:.0f} MB are too many for a {what}",
                where=where,
                mend=f"Name the {what}, not the record",
            )
        raw = path.read_bytes()
    except FileNotFoundError:
        raise InputError(
            f"there is no such {what}", where=where, mend="Check the name and the folder"
        ) from None
    except (OSError, ValueError) as error:  # ValueError: a NUL in the name
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(
            f"the {what} cannot be read: {reason}", where=where, mend="Check the name and the permissions"
        ) from None
    return decoded(raw, where, what, latin_1=latin_1)


def decoded(raw: bytes, where: str, what: str, *, latin_1: bool = False) -> str:
    """Return ``raw`` as text; see :func:`read_text`."""
    save = "Save the file with the encoding UTF-8"
    if raw.startswith((b"\xff\xfe", b"\xfe\xff")):
        if not latin_1:
            raise InputError(f"the {what} is in UTF-16", where=where, mend=save)
        try:
            text = raw.decode("utf-16")
        except UnicodeDecodeError:
            raise InputError(f"the {what} is in a damaged UTF-16", where=where, mend=save) from None
    else:
        try:
            text = raw.decode("utf-8-sig")
        except UnicodeDecodeError as error:
            if not latin_1:
                line = raw.count(b"\n", 0, error.start) + 1
                raise InputError(
                    f"the byte 0x{raw[error.start]:02x} is not UTF-8",
                    where=f"{where}, line {line}",
                    mend=save,
                ) from None
            text = raw.decode("latin-1")
    if not text.strip():
        raise InputError(
            f"the {what} is empty", where=where, mend="Fill it in; `shpb forms FOLDER` shows every key"
        )
    return text


def toml_tables(text: str, name: str) -> dict[str, Any]:
    """Parse TOML 1.0 text.

    Raises
    ------
    InputError
        With file, line, the line itself and what to do, if the text breaks the rules of TOML.
    """
    try:
        return tomllib.loads(text.replace("\r\n", "\n"))
    except RecursionError:
        raise InputError(
            "brackets are nested too deeply", where=name, mend="Look for a run of [ or { without end"
        ) from None
    except ValueError as error:  # the parser's own error, and a whole number of thousands of digits
        lines = text.splitlines() or [""]
        found = re.search(r"at line (\d+)", str(error))
        last = max((i for i, line in enumerate(lines, 1) if line.strip()), default=1)
        number = min(int(found[1]), len(lines)) if found else last
        line = lines[number - 1].strip()
        reason = re.sub(r"\s*\(at .*\)$", "", str(error).splitlines()[0]) or "not valid TOML"
        raise InputError(
            f"{_plain_reason(reason)}: {line[:80]!r}",
            where=f"{name}, line {number}",
            mend=_mend(line, reason),
        ) from None


def _plain_reason(reason: str) -> str:
    if reason.startswith(("Cannot overwrite", "Cannot declare", "Cannot mutate", "Duplicate")):
        return "a key or table stands twice"
    if reason.startswith("Exceeds the limit"):
        return "a number has thousands of digits"
    return reason[0].lower() + reason[1:]


def _mend(line: str, reason: str) -> str:
    """The most likely mend of a line that the TOML parser refused."""
    if _plain_reason(reason) == "a key or table stands twice":
        return "Keep one of the two"
    if re.search(r"=\s*[-+]?\d+,\d", line):
        return "Write numbers with a decimal point, 20.5"
    if "\\" in line:
        return "Write paths with / or put them in 'single quotes'"
    if re.match(r"[^=\[]+$", line) and not line.startswith("#"):
        return "Write key = value; a remark begins with #"
    if line.count('"') % 2:
        return 'Close the text with "'
    if line.startswith("[") and "]" not in line:
        return "Close the table's name with ]"
    if re.search(r"=\s*[-+.]?\d[\d.]*\s*[A-Za-zµ°%]", line):
        return "Write the number alone; its unit is the end of the key"
    if re.search(r"=\s*[A-Za-z]", line):
        return 'Put text in "quotes"; a switch is true or false in small letters'
    if re.search(r"=\s*([-+]?\.\d|[-+]?\d+\.(\s|$)|[-+]?0\d)", line):
        return "Write a digit on both sides of the decimal point, and no leading zero: 0.5, 2.0"
    return "Write key = value, text in quotes, numbers with a decimal point, lists in [ ]"
