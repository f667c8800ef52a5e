"""Collecting all mistakes of a file, and the words they are told in."""

from __future__ import annotations

import datetime
import difflib
from collections.abc import Iterable

from shpb.errors import FileMistakes, Mistake


class Collector:
    """Gathers the mistakes of one file while it is read to the end."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.mistakes: list[Mistake] = []

    def add(self, path: str, found: str, expected: str, mend: str = "") -> None:
        """Note one mistake at the key path ``path``."""
        self.mistakes.append(Mistake(self.file, path, found, expected, mend))

    def finish(self) -> None:
        """Raise FileMistakes if there was any mistake."""
        if self.mistakes:
            raise FileMistakes(self.mistakes)


def shown(value: object) -> str:
    """What stands in the file, short enough for a message."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, int) and value.bit_length() > 200:
        return "a whole number of more than 60 digits"
    if isinstance(value, int | float):
        return f"{value:.12g}" if isinstance(value, float) else str(int(value))
    if isinstance(value, str):
        # Control characters would upset a terminal.
        clean = "".join(c if c.isprintable() else "?" for c in value[:60])
        return f'"{clean}{"…" if len(value) > 60 else ""}"'
    if isinstance(value, list | tuple):
        return f"a list of {len(value)}"
    if isinstance(value, dict):
        return "a table { }"
    if isinstance(value, datetime.date | datetime.time):
        return f"the date or time {value.isoformat()}"
    return "nothing" if value is None else type(value).__name__


def nearest(word: str, known: Iterable[str]) -> str:
    """The known word most like ``word``, whatever its capitals; empty if none is alike."""
    by_fold: dict[str, str] = {}
    for name in known:
        by_fold.setdefault(name.casefold(), name)
    fold = word[:200].casefold()
    # A word cut short, or without its unit, is nearer than any that merely shares letters.
    longer = [name for name in by_fold if len(fold) > 2 and name.startswith(fold)]
    found = longer if len(longer) == 1 else difflib.get_close_matches(fold, by_fold, n=1, cutoff=0.6)
    return by_fold[found[0]] if found else ""
