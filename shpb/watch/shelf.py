"""Shot sheets and shot lists as they lie on the shelf: read again when they change, and asked whose a record is."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Container, Iterable, Iterator
from dataclasses import dataclass, field, fields
from pathlib import Path

from shpb.errors import InputError
from shpb.rig.sheet import ShotSheet
from shpb.watch.landing import Stamp
from shpb.watch.names import Role, role_of

_LONGEST_TEXT = 4_000_000


@dataclass(frozen=True, slots=True)
class Named:
    """A shot that a sheet or a row speaks of."""

    sheet: ShotSheet
    source: Path  # the sheet or the list

    @property
    def digest(self) -> str:
        """Hash of what is said, not of how: a row that moves to another line stays the same."""
        rig, sheet = self.sheet.rig_file, self.sheet
        said = [(f.name, getattr(sheet, f.name)) for f in fields(sheet) if f.name not in _NOT_SAID]
        files = [path.name for path in (*sheet.record_files, *([rig] if rig else []))]
        return hashlib.sha256(repr((said, files)).encode()).hexdigest()


# How it is written; and where the folder happens to be mounted.
_NOT_SAID = frozenset(("text", "source", "record_files", "rig_file"))


@dataclass(slots=True)
class _Paper:
    """One sheet or list as last read."""

    stamp: Stamp | None
    shots: tuple[Named, ...] = ()
    mistakes: str = ""
    text: str = ""  # only of one with mistakes: which records it speaks of


@dataclass(slots=True)
class Shelf:
    """Every sheet and list that is known.

    Parameters
    ----------
    more : tuple of Path
        Sheets, lists and folders of sheets besides those in the watched folder.
    """

    more: tuple[Path, ...] = ()
    _papers: dict[Path, _Paper] = field(default_factory=dict)
    rig_files: list[Path] = field(default_factory=list)  # that lie among the sheets
    version: int = 0  # grows when anything was read
    _by_record: dict[str, list[Named]] = field(default_factory=dict)
    _by_stem: dict[str, list[Named]] = field(default_factory=dict)
    _by_id: dict[str, list[Named]] = field(default_factory=dict)

    def read(
        self, papers: Iterable[tuple[Path, Stamp]], unsettled: Container[Path] = ()
    ) -> list[tuple[Path, str]]:
        """Read what is new or has changed; return what is wrong with it.

        Papers that are gone are forgotten; those in ``unsettled`` are being written and stay as they were.
        """
        wanted = dict(papers)
        for path in self._elsewhere():
            wanted.setdefault(path, stamp_of(path) or Stamp(-1, 0))
        gone = [path for path in self._papers if path not in wanted and path not in unsettled]
        for path in gone:
            del self._papers[path]
        said = []
        fresh = [
            path
            for path, stamp in wanted.items()
            if path not in self._papers or self._papers[path].stamp != stamp
        ]
        for path in fresh:
            paper = self._papers[path] = _read(path, wanted[path])
            if path in self.rig_files:
                self.rig_files.remove(path)
            if paper.mistakes and _is_rig_file(path):
                self.rig_files.append(path)
                paper.mistakes = ""
            elif paper.mistakes:
                said.append((path, paper.mistakes))
        if fresh or gone:
            self.rig_files = [path for path in self.rig_files if path in self._papers]
            self.version += 1
            self._index()
        return said

    def _elsewhere(self) -> Iterator[Path]:
        for path in self.more:
            if path.is_dir():
                try:
                    yield from sorted(one for one in path.iterdir() if one.suffix.lower() == ".toml")
                except OSError:
                    continue
            else:
                yield path

    def _index(self) -> None:
        self._by_record, self._by_stem, self._by_id = {}, {}, {}
        for named in self.shots():
            self._by_id.setdefault(named.sheet.shot_id.casefold(), []).append(named)
            for path in named.sheet.record_files:
                self._by_record.setdefault(place_of(path), []).append(named)
            if not named.sheet.record_files and named.source.suffix.lower() == ".toml":
                self._by_stem.setdefault(place_of(named.source.with_suffix("")), []).append(named)

    def shots(self) -> Iterator[Named]:
        """Every shot that some paper speaks of."""
        for paper in self._papers.values():
            yield from paper.shots

    def naming(self, record: Path, stem: str = "") -> list[Named]:
        """The shots that name a record; else the sheet beside it called as it, or ``stem``, that names none."""
        named = self._by_record.get(place_of(record), [])
        beside = record.with_suffix("") if not stem else record.with_name(stem)
        return named or self._by_stem.get(place_of(beside), [])

    def of_id(self, shot_id: str) -> list[Named]:
        """The shots with this id."""
        return self._by_id.get(shot_id.casefold(), [])

    def faulty_about(self, record: Path) -> Path | None:
        """A sheet or list with mistakes that speaks of a record, by its name or by its own."""
        for path, paper in self._papers.items():
            beside = place_of(path.with_suffix("")) == place_of(record.with_suffix(""))
            if paper.mistakes and (beside or record.name in paper.text):
                return path
        return None

    def latest_of(self, material: str) -> Named | None:
        """A shot of a material, the one spoken of last."""
        same = [one for one in self.shots() if one.sheet.specimen.material.casefold() == material.casefold()]
        return same[-1] if same else None


def stamp_of(path: Path) -> Stamp | None:
    """Stamp of one file, None where it cannot be seen."""
    try:
        facts = path.stat()
    except (OSError, ValueError):
        return None
    return Stamp(facts.st_size, facts.st_mtime_ns)


def place_of(path: Path) -> str:
    """A path by which the same file is found again."""
    return os.path.normcase(os.path.abspath(path))


def _text_of(path: Path) -> str:
    try:
        with path.open("rb") as file:
            return file.read(_LONGEST_TEXT).decode("utf-8", "replace")
    except OSError:
        return ""


def _is_rig_file(path: Path) -> bool:
    return path.suffix.lower() == ".toml" and "[incident_bar]" in _text_of(path)


def _read(path: Path, stamp: Stamp) -> _Paper:
    from shpb.rig.sheet_file import read_sheet
    from shpb.rig.shot_list import usable_rows

    try:
        if path.suffix.lower() == ".toml":
            return _Paper(stamp, (Named(read_sheet(path), path),))
        if path.exists() and role_of(path, stamp.size) is not Role.LIST:
            raise InputError(
                "this is no shot list",
                where=str(path),
                mend="Name a shot sheet (.toml) or a shot list (.csv)",
            )
        sheets, mistakes = usable_rows(path)
    except (InputError, OSError) as error:
        return _Paper(stamp, mistakes=str(error), text=_text_of(path))
    shots = tuple(Named(sheet, path) for sheet in sheets)
    if mistakes is None:
        return _Paper(stamp, shots)
    return _Paper(stamp, shots, str(mistakes), _text_of(path))
