"""What came of every record, kept beside the results, so that a restart neither repeats nor misses a shot.

One JSON file, written whole each time. A file of the same name, size and time stamp is taken for the same; everything
else is decided by the hash of the content.
"""

from __future__ import annotations

import json
import os
from collections.abc import Iterable
from dataclasses import asdict, dataclass, field
from enum import StrEnum
from pathlib import Path
from typing import Any

from shpb.version import VERSION
from shpb.watch.landing import Stamp
from shpb.whole_file import PART_SUFFIX, whole_file

FILE_NAME = "watch_journal.json"
FORMAT, FORMAT_VERSION = "shpb-watch-journal", 1
_LARGEST_BYTES = 200_000_000


class Came(StrEnum):
    """What came of a record."""

    STORED = "stored"
    UNUSABLE = "unusable"  # the record itself is at fault: the shot is rejected, there is nothing to store
    FAILED = "failed"  # tried again when one of its files changes, and at the next start
    SAME = "same"  # the content of another record: a copy, or renamed


@dataclass(frozen=True, slots=True, kw_only=True)
class Seen:
    """One record file as it was when it was dealt with."""

    name: str
    size: int
    mtime_ns: int
    sha256: str

    @property
    def stamp(self) -> Stamp:
        """Size and time stamp."""
        return Stamp(self.size, self.mtime_ns)


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry:
    """One shot: its files and what came of them.

    Attributes
    ----------
    sheet : str
        Hash of what the sheet said; another one means that the shot is to be reduced again.
    result : str
        Name of the shot file in the results folder, empty where there is none.
    said : str
        Why it failed, or which record it is a copy of.
    revision : int
        1 for the first content of this shot.
    figure_due : bool
        The shot is stored, its figure is not drawn yet.
    """

    files: tuple[Seen, ...]
    came: Came
    shot_id: str = ""
    verdict: str = ""
    sheet: str = ""
    result: str = ""
    said: str = ""
    revision: int = 1
    figure_due: bool = False

    @property
    def names(self) -> tuple[str, ...]:
        """Names of its files."""
        return tuple(file.name for file in self.files)

    @property
    def content(self) -> tuple[str, ...]:
        """Hashes of its files, in an order of their own."""
        return tuple(sorted(file.sha256 for file in self.files))


@dataclass(slots=True)
class Journal:
    """All entries, by the names of their files."""

    path: Path
    entries: dict[tuple[str, ...], Entry] = field(default_factory=dict)
    answers: dict[str, str] = field(default_factory=dict)  # given last at the terminal
    processes: list[int] = field(default_factory=list)  # whose temporary files may be left over
    changed: bool = False

    def put(self, entry: Entry) -> None:
        """Note what came of a shot; an entry that shares a file with it is superseded."""
        names = set(entry.names)
        for key in [key for key in self.entries if names & set(key)]:
            del self.entries[key]
        self.entries[entry.names] = entry
        self.changed = True

    def of_content(self, content: tuple[str, ...]) -> Entry | None:
        """The entry of the shot that has this content; copies do not count."""
        return next(
            (one for one in self.entries.values() if one.content == content and one.came is not Came.SAME),
            None,
        )

    def of_shot(self, shot_id: str) -> Entry | None:
        """The stored entry of a shot id."""
        return next(
            (
                one
                for one in self.entries.values()
                if one.shot_id.casefold() == shot_id.casefold() and one.came is Came.STORED
            ),
            None,
        )

    def save(self) -> None:
        """Write the journal whole.

        Raises
        ------
        StoreError
            If the disk refuses; what stood there before stands there still.
        """
        content = {
            "format": FORMAT,
            "format_version": FORMAT_VERSION,
            "program_version": VERSION,
            "processes": self.processes,
            "answers": self.answers,
            "shots": [asdict(entry) for entry in self.entries.values()],
        }
        text = json.dumps(content, indent=1)
        with whole_file(self.path) as part:
            part.write_text(text, encoding="ascii")
        self.changed = False


def open_journal(folder: Path) -> tuple[Journal, str]:
    """Read the journal of a results folder, or begin one.

    Returns
    -------
    Journal, str
        And, in words, what is wrong with the one that stood there; it is set aside, never written over. Empty where
        nothing is.

    Raises
    ------
    OSError
        If it is there but cannot be read or set aside.
    """
    path = folder / FILE_NAME
    try:
        if path.stat().st_size > _LARGEST_BYTES:
            raise ValueError("it is far too large")
        return _parsed(path, json.loads(path.read_bytes())), ""
    except FileNotFoundError:
        return Journal(path), ""
    except (ValueError, KeyError, TypeError, AttributeError, RecursionError, OverflowError) as error:
        aside = _free_name(path)
        os.replace(path, aside)
        why = str(error).splitlines()[0] if str(error) else type(error).__name__
        return Journal(path), f"{path.name} cannot be read ({why}); it is set aside as {aside.name}"


def _parsed(path: Path, content: Any) -> Journal:
    if content["format"] != FORMAT:
        raise ValueError("it is no journal of this program")
    if content["format_version"] > FORMAT_VERSION:
        raise ValueError(f"it was written by a later version of the program, {content['program_version']}")
    journal = Journal(path)
    for one in content["shots"]:
        files = tuple(
            Seen(
                name=str(file["name"]),
                size=int(file["size"]),
                mtime_ns=int(file["mtime_ns"]),
                sha256=str(file["sha256"]),
            )
            for file in one["files"]
        )
        texts = {key: str(one[key]) for key in ("shot_id", "verdict", "sheet", "result", "said")}
        journal.put(
            Entry(
                files=files,
                came=Came(one["came"]),
                revision=int(one["revision"]),
                figure_due=bool(one["figure_due"]),
                **texts,
            )
        )
    journal.answers = {str(key): str(value) for key, value in content["answers"].items()}
    journal.processes = [int(one) for one in content["processes"]]
    journal.changed = False
    return journal


def _free_name(path: Path) -> Path:
    number = 1
    while (aside := path.with_name(f"{path.stem}_damaged_{number}{path.suffix}")).exists():
        number += 1
    return aside


def clear_left_over(folder: Path, processes: Iterable[int]) -> list[str]:
    """Remove temporary files of processes that were killed while they wrote; return the names.

    Those of the journal go whoever wrote them: to be called by the one watch that may write it.
    """
    removed = []
    for name in (f".{FILE_NAME}.*{PART_SUFFIX}", *(f".*.{process}{PART_SUFFIX}" for process in processes)):
        for part in folder.glob(name):
            try:
                part.unlink()
            except OSError:
                continue
            removed.append(part.name)
    return removed
