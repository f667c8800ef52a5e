"""Stored shots that a new one is held against: read one at a time while nothing else is to be done."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from shpb.watch.landing import Stamp, list_folder
from shpb.watch.shelf import stamp_of
from shpb.watch.tasks import PastShot, ReadEarlier, Shown
from shpb.watch.worker import WorkerError


@dataclass(slots=True)
class EarlierShots:
    """What is known of the shot files of a results folder."""

    results: Path
    _known: dict[str, tuple[Stamp, PastShot | None]] = field(default_factory=dict)

    def learn_one(self, ask: Callable[[object], Any]) -> bool:
        """Read one file that is new or has changed; whether there was one."""
        try:
            found = {n: s for n, s in list_folder(self.results).items() if n.lower().endswith(".h5")}
        except OSError:
            return False
        for name in self._known.keys() - found.keys():
            del self._known[name]
        for name, stamp in found.items():
            if name in self._known and self._known[name][0] == stamp:
                continue
            try:
                shot = ask(ReadEarlier(self.results / name))
            except WorkerError:
                shot = None  # damaged: nothing to be held against
            self._known[name] = (stamp, shot)
            return True
        return False

    def remember(self, shown: Shown) -> None:
        """Add a shot that was stored just now."""
        stamp = stamp_of(self.results / shown.result)
        if stamp is not None:
            self._known[shown.result] = (stamp, shown.past)

    def but(self, result: str) -> Iterable[PastShot]:
        """All that are known but for one file."""
        return [shot for name, (_, shot) in self._known.items() if shot is not None and name != result]
