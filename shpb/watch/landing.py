"""What lies in a folder, and since when it has been left alone: polled, on the program's own clock.

Events of the operating system do not cross network mounts, and no portable "file closed" exists. So the folder is
listed again and again, and a file counts as at rest when size and time stamp have not changed for a while. Time stamps
are only ever compared with each other: the clock of a scope or a file server may be hours off.
"""

from __future__ import annotations

import os
import stat
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import NamedTuple

REST_S = 2.0  # common practice: scopes write in bursts with shorter pauses


class Stamp(NamedTuple):
    """By what a file is seen to have changed."""

    size: int
    mtime_ns: int


def list_folder(folder: Path) -> dict[str, Stamp]:
    """Name and stamp of every plain file of a folder; subfolders are not entered.

    Raises
    ------
    OSError
        If the folder cannot be listed. A file that goes meanwhile is left out.
    """
    found: dict[str, Stamp] = {}
    with os.scandir(folder) as entries:
        for entry in entries:
            try:
                facts = entry.stat()
            except OSError:
                continue
            if stat.S_ISREG(facts.st_mode):  # a pipe or a device would be waited for without end
                found[entry.name] = Stamp(facts.st_size, facts.st_mtime_ns)
    return found


@dataclass(slots=True)
class Landing:
    """Which files are at rest.

    Attributes
    ----------
    rest_s : float
        How long a file must be left alone.
    stamps : dict
        What was seen last.
    """

    rest_s: float = REST_S
    stamps: dict[str, Stamp] = field(default_factory=dict)
    _since: dict[str, float] = field(default_factory=dict)

    def see(self, found: Mapping[str, Stamp], now: float) -> list[str]:
        """Take in a new list at the time ``now`` [s, monotonic]; return the names that are new or have changed."""
        changed = [name for name, stamp in found.items() if self.stamps.get(name) != stamp]
        for name in changed:
            self._since[name] = now
        for name in self.stamps.keys() - found.keys():
            del self._since[name]
        self.stamps = dict(found)
        return changed

    def quiet_s(self, name: str, now: float) -> float:
        """Since when [s] a file has been left alone; negative where it is not there."""
        return now - self._since[name] if name in self._since else -1.0

    def at_rest(self, name: str, now: float) -> bool:
        """Whether a file has been left alone long enough."""
        return self.quiet_s(name, now) >= self.rest_s

    def until_rest_s(self, names: Iterable[str], now: float) -> float | None:
        """Seconds until the next of ``names`` comes to rest, None where none is on its way."""
        left = [self.rest_s - (now - self._since[name]) for name in names if name in self._since]
        return min((one for one in left if one > 0), default=None)


@dataclass(slots=True)
class BackOff:
    """When to try again what the system refused: soon at first, then ever more rarely."""

    first_s: float = 1.0
    longest_s: float = 30.0
    tries: int = 0
    _next: float = 0.0

    def failed(self, now: float) -> None:
        """Note a failure at the time ``now``."""
        self._next = now + min(self.first_s * 2.0 ** min(self.tries, 20), self.longest_s)
        self.tries += 1

    def due(self, now: float) -> bool:
        """Whether it is time to try again."""
        return now >= self._next

    def over(self) -> int:
        """Note that it went well; return how often it had failed before."""
        tries, self.tries, self._next = self.tries, 0, 0.0
        return tries
