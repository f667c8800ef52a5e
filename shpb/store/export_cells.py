"""Cells of CSV files: numbers in full, texts that no spreadsheet runs as a formula; never over files of others."""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Iterable, Sequence
from pathlib import Path

from shpb.errors import StoreError
from shpb.whole_file import whole_file

# A cell that begins with one of these is run as a formula by spreadsheets (or becomes one after a blank).
_FORMULA = ("=", "+", "-", "@", "\t", "\r", "\n", "|", "%")
# In a line of comment a spreadsheet may part cells at any of these.
_INNER = re.compile(r"([,;|\"]\s*)([=+\-@%])")


def harmless(text: str) -> str:
    r"""A text that no spreadsheet runs as a formula: an apostrophe before what would be one.

    >>> harmless("=1+1"), harmless("Wrenmoor 3"), harmless(" @SUM(A1)")
    ("'=1+1", 'Wrenmoor 3', "' @SUM(A1)")
    """
    plain = "".join(c if c.isprintable() else " " for c in text)
    return f"'{plain}" if plain.lstrip().startswith(_FORMULA) or text.startswith(_FORMULA) else plain


def cell(value: object) -> str:
    """A number in full, nothing for what is not known, a text that no spreadsheet runs."""
    if value is None:
        return ""
    if isinstance(value, float):
        return f"{value:.8g}" if math.isfinite(value) else ""
    return str(value) if isinstance(value, int) else harmless(str(value))


def comment(label: str, said: object) -> str:
    """A line of comment: ``# label: what is said``, on one line, without a cell inside that would run.

    >>> comment("material", "steel,=1+1"), comment("rate", 1e-3)
    ("# material: steel,'=1+1", '# rate: 0.001')
    """
    text = f"{said:.8g}" if isinstance(said, float) else harmless(str(said))
    return f"# {label}: " + _INNER.sub(r"\1'\2", text)


def csv_text(columns: Sequence[str], rows: Iterable[Sequence[object]], comments: Sequence[str] = ()) -> str:
    """Lines of comment, a line of column names, and rows; line ends as RFC 4180 has them."""
    text = io.StringIO()
    for line in comments:
        text.write(f"{line}\r\n")
    writer = csv.writer(text)
    writer.writerow([harmless(name) for name in columns])
    for row in rows:
        writer.writerow([cell(value) for value in row])
    return text.getvalue()


def write_text(target: Path, text: str, *, mark: str, replace: bool) -> bool:
    """Write an export, unless the same stands there already.

    Parameters
    ----------
    target : Path
    text : str
    mark : str
        How every export of this kind begins: what begins otherwise is not of this program.
    replace : bool
        Whether an earlier export with other contents may be written over.

    Returns
    -------
    bool
        Whether it was written; False where the same stood there.

    Raises
    ------
    StoreError
        If another file stands there, or an earlier export and ``replace`` is not given.
    """
    content = text.encode("utf-8", "replace")
    if target.exists() or target.is_symlink():
        held = _held(target)
        if held == content:
            return False
        if held is None or not held.startswith(mark.encode("utf-8")):
            raise StoreError(
                "a file of this name stands there that this program did not export",
                where=str(target),
                mend="Choose another folder with --into, or move that file away",
            )
        if not replace:
            raise StoreError(
                "an earlier export with other contents stands there",
                where=str(target),
                mend="Give --replace to write over it, or choose another folder with --into",
            )
    with whole_file(target) as part:
        part.write_bytes(content)
    return True


def _held(target: Path) -> bytes | None:
    """What stands there; None where it is no file that can be read."""
    try:
        return target.read_bytes()
    except OSError:
        return None
