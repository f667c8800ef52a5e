"""Which files make one shot: by the sheet that names them, else by their names."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path

from shpb.watch.landing import Stamp
from shpb.watch.names import stem_of
from shpb.watch.shelf import Named, Shelf, place_of, stamp_of


@dataclass(frozen=True, slots=True)
class Group:
    """The files of one shot, and the shots that claim them.

    Attributes
    ----------
    paths : tuple of Path
        In the order of the sheet, else of the channels.
    named : tuple of Named
        One where all is well, none where no paper speaks of the record.
    missing : tuple of str
        Names of files that are not there yet.
    alone : bool
        Whether the name speaks of a channel and no other channel is there.
    """

    paths: tuple[Path, ...]
    stem: str
    named: tuple[Named, ...] = ()
    missing: tuple[str, ...] = ()
    alone: bool = False

    @property
    def names(self) -> tuple[str, ...]:
        """Names of its files."""
        return tuple(path.name for path in self.paths)


Channels = dict[tuple[str, str], tuple[str, ...]]  # files of one channel each, by stem and suffix


def channels_in(names: Iterable[str]) -> Channels:
    """Files whose names differ in the channel alone, in the order of the channels."""
    found: dict[tuple[str, str], list[tuple[int, str]]] = {}
    for name in names:
        stem, channel = stem_of(name)
        if channel is not None:
            found.setdefault((stem, Path(name).suffix.lower()), []).append((channel, name))
    return {key: tuple(name for _, name in sorted(files)) for key, files in found.items()}


def group_of(
    name: str, folder: Path, records: Mapping[str, Stamp], channels: Channels, shelf: Shelf
) -> Group:
    """The group that a record file belongs to."""
    stem, channel = stem_of(name)
    files = (name,) if channel is None else channels.get((stem, Path(name).suffix.lower()), (name,))
    named = shelf.naming(folder / name)
    if not named and channel is not None:
        named = shelf.naming(folder / name, stem)
    own = [one for one in named if one.sheet.record_files]
    if len(own) == 1:
        paths = tuple(_as_listed(path, folder, records) for path in own[0].sheet.record_files)
        missing = tuple(path.name for path in paths if path.name not in records and stamp_of(path) is None)
        return Group(paths, own[0].sheet.shot_id, tuple(named), missing)
    # A channel that another sheet names is not one of these.
    free = [one for one in files if one == name or not shelf.naming(folder / one)]
    paths = tuple(folder / one for one in free)
    return Group(paths, stem, tuple(named), alone=channel is not None and len(free) == 1)


def _as_listed(path: Path, folder: Path, records: Mapping[str, Stamp]) -> Path:
    """The file as it is called in the folder: a sheet may name it in other capitals, or by another way."""
    if path.name in records and place_of(path) == place_of(folder / path.name):
        return folder / path.name
    return path
