"""The watched folder as last listed: records, papers, what rests, what is dealt with, and what belongs together."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from shpb.watch.groups import Channels, Group, channels_in, group_of
from shpb.watch.landing import Landing, Stamp
from shpb.watch.names import Role, role_of
from shpb.watch.shelf import Shelf

PAPER_REST_S = 0.5  # papers are small and written at once


@dataclass(slots=True)
class Inbox:
    """What lies in a folder.

    Attributes
    ----------
    records : dict
        Stamp of every file that is taken for a record.
    """

    folder: Path
    landing: Landing
    records: dict[str, Stamp] = field(default_factory=dict)
    _roles: dict[str, tuple[Stamp, Role]] = field(default_factory=dict)
    _settled: dict[str, Stamp] = field(default_factory=dict)
    _channels: Channels = field(default_factory=dict)

    def see(self, found: Mapping[str, Stamp], now: float) -> list[str]:
        """Take in a new list; return the names of records that were not there before."""
        before = set(self.records)
        self.landing.see(found, now)
        for name in self._roles.keys() - found.keys():
            del self._roles[name]
        roles = {name: self._role(name, stamp) for name, stamp in found.items()}
        self.records = {name: found[name] for name, role in roles.items() if role is Role.RECORD}
        new = [name for name in self.records if name not in before]
        if new or before - self.records.keys():
            self._channels = channels_in(self.records)
        return new

    def _role(self, name: str, stamp: Stamp) -> Role:
        known = self._roles.get(name)
        if known is None or known[0] != stamp:
            try:
                known = (stamp, role_of(self.folder / name, stamp.size))
            except OSError:
                return Role.RECORD  # whoever reads it in earnest says what is wrong
            self._roles[name] = known
        return known[1]

    def papers(self, now: float) -> tuple[list[tuple[Path, Stamp]], set[Path]]:
        """Sheets and lists that rest, with their stamps, and those that are being written."""
        rest, moving = list[tuple[Path, Stamp]](), set[Path]()
        for name, (stamp, role) in self._roles.items():
            if role in (Role.SHEET, Role.LIST):
                if self.landing.quiet_s(name, now) >= min(PAPER_REST_S, self.landing.rest_s):
                    rest.append((self.folder / name, stamp))
                else:
                    moving.add(self.folder / name)
        return rest, moving

    def settle(self, names: Iterable[str], stamps: Iterable[Stamp]) -> None:
        """Note that files are dealt with as they are."""
        self._settled.update(zip(names, stamps, strict=True))

    def unsettle(self, names: Iterable[str]) -> None:
        """Note that files are to be dealt with again."""
        for name in names:
            self._settled.pop(name, None)

    @property
    def unsettled(self) -> list[str]:
        """Records that are not dealt with, in the order in which they were written."""
        names = [name for name, stamp in self.records.items() if self._settled.get(name) != stamp]
        return sorted(names, key=lambda name: (self.records[name].mtime_ns, name))

    def moving(self, now: float) -> bool:
        """Whether anything that is not dealt with is still being written."""
        return bool(self.papers(now)[1]) or any(not self.landing.at_rest(n, now) for n in self.unsettled)

    def group(self, name: str, shelf: Shelf) -> Group:
        """The group that a record belongs to."""
        return group_of(name, self.folder, self.records, self._channels, shelf)

    def open_groups(self, shelf: Shelf) -> list[Group]:
        """Groups with a file that is not dealt with."""
        groups: dict[tuple[str, ...], Group] = {}
        for name in self.unsettled:
            group = self.group(name, shelf)
            groups.setdefault(group.names, group)
        return list(groups.values())

    def rests(self, group: Group, now: float) -> bool:
        """Whether all files of a group that are there have been left alone long enough."""
        return all(self.landing.at_rest(name, now) for name in group.names if name in self.records)

    def quiet_s(self, group: Group, now: float) -> float:
        """Since when [s] a group has been left alone."""
        return min(
            (self.landing.quiet_s(name, now) for name in group.names if name in self.records), default=0.0
        )
