"""From what the user names to shots and quasi-static tests: which files belong to a campaign, and reading them."""

from __future__ import annotations

import hashlib
import os
import re
from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING

from shpb.cli.usage import entries_of
from shpb.errors import FileMistakes, InputError, ShpbError

if TYPE_CHECKING:
    from shpb.merge.from_shot import LeftOut, StoredCurve
    from shpb.merge.quasistatic import QuasistaticTest

_SHOTS = (".h5", ".hdf5")
_TABLES = (".csv", ".txt", ".tsv", ".dat", ".asc")
_SLOW = ("quasistatic", "quasi-static", "quasi_static")  # folders in which every table is meant for the merge
_FIRST = ("", "results", *_SLOW)  # folders searched first, in this order
_HEAD_BYTES = 16_384
_SHEET = re.compile(rb"(?m)^\s*\[\s*(shot|specimen)\s*\]")  # a TOML file beside a scope's record
_FACT_LINE = re.compile(rb"(?m)^\W{0,4}([A-Za-z][\w ]{0,60}?)\s*[:=]")


@dataclass(slots=True)
class Campaign:
    """What was found and read.

    Attributes
    ----------
    root : Path
        Folder to which places refer.
    shots, tests
        What can be merged.
    left_out : list of LeftOut
        Files that cannot be read, and copies, with why.
    bad : dict of str to str
        Messages about the files that are at fault, by their place.
    places : dict of (name, sha256) to str
        Where every file lies, relative to ``root``; empty where that is not known.
    passed_over : int
        Files beside them that are neither shots nor quasi-static tables.
    """

    root: Path
    shots: list[StoredCurve] = field(default_factory=list)
    tests: list[QuasistaticTest] = field(default_factory=list)
    left_out: list[LeftOut] = field(default_factory=list)
    bad: dict[str, str] = field(default_factory=dict)
    places: dict[tuple[str, str], str] = field(default_factory=dict)
    passed_over: int = 0

    @property
    def inputs(self) -> set[Path]:
        """Every file that went in."""
        return {(self.root / place).resolve() for place in self.places.values() if place}

    def place(self, path: Path) -> str:
        """Where a file lies, relative to ``root``."""
        return Path(os.path.relpath(path.resolve(), self.root.resolve())).as_posix()


@dataclass(frozen=True, slots=True)
class Found:
    """One file to read: a shot file, or else a quasi-static table."""

    path: Path
    shot: bool


def root_of(sources: Sequence[Path]) -> Path:
    """The folder that was named, or the one that holds all that were."""
    folders = [source if source.is_dir() else source.parent for source in sources]
    if len(folders) == 1:
        return folders[0]
    try:
        return Path(os.path.commonpath([folder.resolve() for folder in folders]))
    except ValueError:  # different drives
        return folders[0]


def find(sources: Sequence[Path], skip: Path) -> tuple[list[Found], int]:
    """Files of the campaign, each once, and how many others were passed over.

    A folder is searched in itself, in results/ and quasistatic/, and in its other subfolders one level deep; what a
    merge has written into ``skip`` is not looked at.

    Raises
    ------
    InputError
        If something that was named is not there or can be neither.
    """
    found: dict[Path, Found] = {}
    others = 0
    for source in sources:
        if not source.exists():
            raise InputError("there is no such file or folder", where=str(source), mend="Check the name")
        if not source.is_dir():
            found.setdefault(source.resolve(), _named(source))
            continue
        for path in _in_folder(source, skip):
            one = _sorted_out(path)
            if one is None:
                others += 1
            else:
                found.setdefault(path.resolve(), one)
    return list(found.values()), others


def _named(path: Path) -> Found:
    if path.suffix.lower() not in (*_SHOTS, *_TABLES):
        raise InputError(
            f"a file ending in {path.suffix or 'nothing'} is neither a shot file nor a quasi-static table",
            where=str(path),
            mend=f"Name files ending in {', '.join((*_SHOTS, *_TABLES))}, or a folder of them",
        )
    return Found(path, path.suffix.lower() in _SHOTS)


def _in_folder(folder: Path, skip: Path) -> Iterator[Path]:
    below = [path for path in entries_of(folder) if path.is_dir() and not path.name.startswith(".")]
    first = [folder / name for name in _FIRST if name == "" or (folder / name) in below]
    for place in dict.fromkeys([*first, *below]):
        if place.resolve() != skip.resolve() or place == folder:
            try:
                yield from sorted(path for path in place.iterdir() if path.is_file())
            except OSError:
                continue


def _sorted_out(path: Path) -> Found | None:
    """What a file in a searched folder is to the merge; None where it is none of its business."""
    ending = path.suffix.lower()
    if path.name.startswith("."):
        return None
    if ending in _SHOTS:
        from shpb.store.peek import Holds, peek

        held = peek(path).holds
        return None if held in (Holds.OTHER, Holds.MERGE) else Found(path, shot=True)
    if ending not in _TABLES:
        return None
    slow = path.parent.name.casefold() in _SLOW or _is_quasistatic(path)
    return Found(path, shot=False) if slow else None


def _is_quasistatic(path: Path) -> bool:
    """Whether a table states a fact of a quasi-static test above its numbers, or in a TOML file beside it."""
    from shpb.merge.quasistatic_keys import ALSO_CALLED, FACT_TABLE

    names = {name.casefold() for name in (*FACT_TABLE.lookup(), *ALSO_CALLED)}
    # Facts that a scope's preamble or a shot list might state as well tell nothing.
    names -= {"kind", "date", "remarks", "operator", "area", "test", "sample", "specimen", "machine"}
    head = _head(path)
    sidecar = path.with_suffix(".toml")
    if sidecar.is_file():
        beside = _head(sidecar)
        head += b"" if _SHEET.search(beside) else b"\n" + beside
    stated = {
        match.decode("ascii").strip().replace(" ", "_").casefold() for match in _FACT_LINE.findall(head)
    }
    return len(stated & names) > 1 or (bool(stated & names) and "material" in stated)


def _head(path: Path) -> bytes:
    try:
        with path.open("rb") as file:
            return file.read(_HEAD_BYTES).replace(b"\0", b"")
    except OSError:
        return b""


def read_campaign(
    found: Sequence[Found], root: Path, step: Callable[[int], None], *, passed_over: int = 0
) -> Campaign:
    """Read what was found; a file that cannot be read is left out and named, and never stops the others."""
    campaign = Campaign(root, passed_over=passed_over)
    seen: dict[str, str] = {}
    records: dict[str, str] = {}
    for number, one in enumerate(found, 1):
        try:
            copy_of = _copy_of(one, campaign, seen, records)
            if copy_of:
                _leave_out(campaign, one.path, copy_of)
            elif one.shot:
                _read_shot(campaign, one.path)
            else:
                _read_test(campaign, one.path)
        except ShpbError as error:
            _leave_out(campaign, one.path, _short(error, one.path))
            campaign.bad[campaign.place(one.path)] = str(error)
        step(number)
    _drop_machine_tables(campaign)
    _call_by_name(campaign, found)
    return campaign


def _copy_of(one: Found, campaign: Campaign, seen: dict[str, str], records: dict[str, str]) -> str:
    """Why a file would count twice: the same bytes, or the same raw record reduced twice; empty where it does not."""
    place = campaign.place(one.path)
    try:
        sha256 = hashlib.sha256(one.path.read_bytes()).hexdigest()
    except OSError as error:
        raise InputError(
            f"cannot be read: {error.strerror or error}", where=str(one.path), mend="Check the permissions"
        ) from None
    if sha256 in seen:
        return f"a copy of {seen[sha256]}"
    seen[sha256] = place
    if one.shot:
        from shpb.store.peek import peek

        for record in peek(one.path).records:
            if record in records:
                return f"the same record as {records[record]}, reduced twice: keep one of them"
            records[record] = place
    return ""


def _read_shot(campaign: Campaign, path: Path) -> None:
    from shpb.store.merge_input import stored_curve

    shot = stored_curve(path)
    campaign.shots.append(shot)
    campaign.places[shot.origin, shot.sha256] = campaign.place(path)


def _read_test(campaign: Campaign, path: Path) -> None:
    from shpb.merge.quasistatic import read_quasistatic

    test = read_quasistatic(path)
    campaign.tests.append(test)
    for name, sha256 in test.sources:
        campaign.places[name, sha256] = _place_of_source(campaign, path, name, sha256)


def _place_of_source(campaign: Campaign, table: Path, name: str, sha256: str) -> str:
    """Where a file lies that a table was read with: itself, its TOML file, or the machine's own curve."""
    if (table.parent / name).is_file():
        return campaign.place(table.parent / name)
    # A machine's curve is called by what it is and its name: "blank run platens.csv".
    for folder in (table.parent, table.parent.parent, campaign.root):
        for path in (*folder.glob("*.*"), *folder.glob("*/*.*")):
            if name.endswith(path.name) and hashlib.sha256(path.read_bytes()).hexdigest() == sha256:
                return campaign.place(path)
    return ""


def _leave_out(campaign: Campaign, path: Path, why: str) -> None:
    from shpb.merge.from_shot import LeftOut

    campaign.left_out.append(LeftOut(origin=campaign.place(path), why=why))


def _short(error: ShpbError, path: Path) -> str:
    """What is wrong with a file, without its name; of many mistakes the first, all of them are told elsewhere."""
    if isinstance(error, FileMistakes):
        first, *more = error.mistakes
        said = str(first).removeprefix(f"{path.name}: ")
        return f"{said} (and {len(more)} more mistake{'s' if len(more) > 1 else ''})" if more else said
    return f"{error.what}. {error.mend}".removesuffix(". ")


def _drop_machine_tables(campaign: Campaign) -> None:
    """A machine's own curve or blank run lies beside the tests; it is no test that failed."""
    used = set(campaign.places.values())
    campaign.left_out = [one for one in campaign.left_out if one.origin not in used]
    campaign.bad = {place: said for place, said in campaign.bad.items() if place not in used}


def _call_by_name(campaign: Campaign, found: Sequence[Found]) -> None:
    """Files that stayed out are called by their names, as those that are in, unless two have one name."""
    names = Counter(one.path.name for one in found)
    campaign.left_out = [
        replace(one, origin=name) if names[name := Path(one.origin).name] == 1 else one
        for one in campaign.left_out
    ]
