"""From what the user names to shots, campaigns and the pages that they become; never over a file of others."""

from __future__ import annotations

import os
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from urllib.parse import quote

from shpb.cli.usage import RESULTS, result_files
from shpb.errors import InputError, StoreError

CAMPAIGN_PAGE = "campaign.html"
_HEAD_BYTES = 16_384


@dataclass(frozen=True, slots=True)
class Campaign:
    """One campaign to report.

    Attributes
    ----------
    name : str
        Of its folder.
    page : Path
        The page to write.
    shots : tuple of Path
        Shot files that belong to it.
    merge : Path or None
        Its merged file.
    """

    name: str
    page: Path
    shots: tuple[Path, ...]
    merge: Path | None


@dataclass(frozen=True, slots=True)
class ShotTask:
    """One shot to report: its file, its page, and the address of its campaign's page (empty where it has none)."""

    file: Path
    page: Path
    campaign: str


@dataclass(frozen=True, slots=True)
class Plan:
    """Everything that is to be done, and what is wrong with what was named."""

    shots: tuple[ShotTask, ...]
    campaigns: tuple[Campaign, ...]
    errors: tuple[InputError, ...]


def plan(sources: Sequence[Path], into: Path | None) -> Plan:
    """Sort out what was named; what is wrong with some of it does not stop the rest.

    Raises
    ------
    InputError
        If a name is wrong, or two reports would become one file.
    """
    files: dict[Path, Path] = {}
    campaigns: list[Campaign] = []
    errors: list[InputError] = []
    for source in sources:
        if not source.exists():
            raise InputError("there is no such file or folder", where=str(source), mend="Check the name")
        if source.is_dir():
            campaigns.append(_campaign_of_folder(source, into))
        else:
            _sort_file(source, into, files, campaigns, errors)
    for one in campaigns:
        for path in one.shots:
            files.setdefault(path.resolve(), path)
    found = Plan(tuple(_tasks(files.values(), campaigns, into)), tuple(campaigns), tuple(errors))
    if not found.shots and not found.campaigns and not errors:
        raise InputError("there is nothing to report", mend="Name shot files or the folder of a campaign")
    _require_apart(found)
    return found


def _sort_file(
    source: Path,
    into: Path | None,
    files: dict[Path, Path],
    campaigns: list[Campaign],
    errors: list[InputError],
) -> None:
    from shpb.store.peek import Holds, peek

    held = peek(source).holds
    if held is Holds.SHOT:
        files.setdefault(source.resolve(), source)
    elif held is Holds.MERGE:
        campaigns.append(_campaign_of_merge(source, into))
    else:
        what = "cannot be read as HDF5" if held is Holds.DAMAGED else "is not a result of this program"
        mend = "Name a shot file that `shpb reduce` wrote, a merged.h5, or the folder of a campaign"
        errors.append(InputError(what, where=str(source), mend=mend))


def _campaign_of_folder(folder: Path, into: Path | None) -> Campaign:
    """The shots of a folder and of results/ below it, and its merge."""
    from shpb.store.peek import Holds, peek

    shots: list[Path] = []
    merge: Path | None = None
    for place in (folder, folder / "results", folder / "merged"):
        for path in result_files(place):
            held = peek(path).holds
            if held is Holds.MERGE:
                merge = merge or path
            elif held is not Holds.OTHER and place.name != "merged":  # a damaged one is named when it is read
                shots.append(path)
    if not shots and merge is None:
        raise InputError(
            "there is no shot file and no merged.h5 in it, in results/ or in merged/",
            where=str(folder),
            mend="Reduce the shots first (`shpb reduce`), or name their folder",
        )
    return Campaign(folder.resolve().name, (into or folder) / CAMPAIGN_PAGE, tuple(shots), merge)


def _campaign_of_merge(source: Path, into: Path | None) -> Campaign:
    """A merge, with those of its shot files that are still where they lay."""
    from shpb.store.merge_read import load_merge

    try:
        merge = load_merge(source)
    except StoreError as error:
        raise InputError(error.what, where=error.where, mend=error.mend) from None
    root = merged_root(source, [one.place for one in merge.used])
    places = [one.place for one in merge.used if Path(one.place).suffix.lower() in RESULTS]
    shots = [] if root is None else [root / place for place in places if (root / place).is_file()]
    name = (source.resolve().parent if root is None else root.resolve()).name
    return Campaign(name, (into or source.parent) / CAMPAIGN_PAGE, tuple(shots), source)


def merged_root(merge: Path, places: Sequence[str]) -> Path | None:
    """The folder to which the places in a merge refer: where most of them are found; None where none is."""
    here = merge.resolve().parent
    known = [place for place in places if place]
    best = max((here.parent, here), key=lambda root: sum((root / place).is_file() for place in known))
    return best if any((best / place).is_file() for place in known) else None


def _tasks(files: Iterable[Path], campaigns: Sequence[Campaign], into: Path | None) -> Iterable[ShotTask]:
    of = {path.resolve(): one for one in reversed(campaigns) for path in one.shots}
    for path in files:
        page = (into or path.parent) / f"{path.stem}.html"
        campaign = of.get(path.resolve())
        yield ShotTask(path, page, "" if campaign is None else address(campaign.page, page))


def address(target: Path, page: Path) -> str:
    """The address of a file for a page, relative to it; empty where there is none (another drive)."""
    try:
        way = os.path.relpath(target.resolve(), page.resolve().parent)
    except ValueError:
        return ""
    return quote(os.fsencode(Path(way).as_posix()))


def _require_apart(found: Plan) -> None:
    """Two reports never become one file."""
    pages: dict[str, Path] = {}
    for page, file in [(one.page, one.file) for one in found.shots] + [
        (one.page, one.merge or one.page.parent) for one in found.campaigns
    ]:
        key = str(page.resolve()).casefold()
        if key in pages:
            raise InputError(
                f"the reports of {pages[key]} and {file} would be one file",
                where=str(page),
                mend="Report them into different folders with --into",
            )
        pages[key] = file


def standing(page: Path) -> dict[str, str] | None:
    """What the program once wrote into a page that stands there, empty if it is not ours; None where there is none."""
    from shpb.view.report.html import marks_of

    try:
        with page.open("rb") as file:
            head = file.read(_HEAD_BYTES)
    except FileNotFoundError:
        return None
    except OSError:
        return {}
    return marks_of(head.decode("utf-8", "replace"))


def require_ours(page: Path, marks: dict[str, str] | None, kind: str, shot_id: str = "") -> None:
    """Refuse to write over a file of others, or over the report of another shot.

    Raises
    ------
    StoreError
    """
    from shpb.view.report.shot_page import KIND, SHOT

    if marks is None:
        return
    what = ""
    if marks.get(KIND) != kind:
        what = "a file of this name stands there, and it is not such a report of this program"
    elif kind == "shot" and marks.get(SHOT) != shot_id:
        what = f"the report of shot {marks.get(SHOT)} stands there"
    if what:
        mend = "Choose another folder with --into, or move that file away"
        raise StoreError(what, where=str(page), mend=mend)
