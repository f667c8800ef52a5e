"""To which shot and rig a whole record belongs, and what must change before one that waits is tried again."""

from __future__ import annotations

import hashlib
from pathlib import Path

from shpb.errors import InputError
from shpb.rig.rig import Rig
from shpb.watch.groups import Group
from shpb.watch.journal import Came
from shpb.watch.landing import Stamp
from shpb.watch.shelf import Named, Shelf, stamp_of


def claimed(group: Group, shelf: Shelf, rig_file: Path | None) -> tuple[Named, Rig]:
    """The one shot that the files belong to, and its rig.

    Raises
    ------
    InputError
        If more than one claims them, an id is used twice, or the rig file is not named, cannot be used or does not
        fit.
    """
    from shpb.rig.rig_file import read_rig
    from shpb.rig.sheet_file import check_sheet_fits_rig

    named = group.named[0]
    if len(group.named) > 1:
        ids = ", ".join(one.sheet.shot_id for one in group.named)
        raise InputError(
            f"is named for more than one shot ({ids}; {_sources(group.named)})", mend="Name it once"
        )
    twice = shelf.of_id(named.sheet.shot_id)
    if len(twice) > 1:
        raise InputError(
            f"shot id {named.sheet.shot_id} is used twice ({_sources(twice)})",
            mend="Give each shot an id of its own",
        )
    path = named.sheet.rig_file or rig_file
    if path is None:
        raise InputError(
            f"shot {named.sheet.shot_id} names no rig file",
            where=named.source.name,
            mend='Add rig = "..." to it, or start with --rig FILE',
        )
    rig = read_rig(path)
    check_sheet_fits_rig(named.sheet, rig)
    return named, rig


def _sources(shots: list[Named] | tuple[Named, ...]) -> str:
    return " and ".join(dict.fromkeys(one.source.name for one in shots))


def basis(named: Named, came: Came, rig_file: Path | None) -> str:
    """On what an outcome rests: the sheet; where a shot failed, the rig file too."""
    if came is Came.STORED:
        return named.digest
    path = named.sheet.rig_file or rig_file
    stamp = None if path is None else stamp_of(path)
    return hashlib.sha256(repr((named.digest, stamp)).encode()).hexdigest()


def blocking(group: Group, stamps: tuple[Stamp, ...], shelf: Shelf, rig_file: Path | None) -> object:
    """What a group that waits is waiting on: it is tried again when this differs."""
    path = (group.named[0].sheet.rig_file if group.named else None) or rig_file
    claims = tuple((named.digest, str(named.source)) for named in group.named)
    twice = tuple(len(shelf.of_id(named.sheet.shot_id)) for named in group.named)
    faulty = None if group.named else shelf.faulty_about(group.paths[0])
    return (stamps, claims, twice, faulty, None if path is None else stamp_of(path), group.alone)
