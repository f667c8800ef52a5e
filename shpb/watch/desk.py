"""What all parts of the watch work on: the folder, the child, the journal, the shelf, and what is open."""

from __future__ import annotations

import os
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Protocol

from shpb.errors import StoreError
from shpb.watch.claim import blocking
from shpb.watch.earlier import EarlierShots
from shpb.watch.events import Event, Remark, Tone
from shpb.watch.groups import Group
from shpb.watch.inbox import Inbox
from shpb.watch.journal import Journal
from shpb.watch.landing import Landing
from shpb.watch.opening import OpenGroup, shown_names
from shpb.watch.shelf import Shelf
from shpb.watch.trouble import Troubles

_MOST_PROCESSES = 20  # that may have left something over
PATIENCE_S = 10.0  # before a record that is not whole, or a channel that is alone, is worth a word

Names = tuple[str, ...]


class Asked(Protocol):
    """The child process, or what stands in for it in a test."""

    @property
    def process_id(self) -> int | None:
        """Of the child."""

    def ask(self, task: object) -> Any:
        """The reply to a task; raises WorkerError where there is none."""

    def start(self) -> None:
        """Start the child if there is none."""


@dataclass(slots=True)
class Desk:
    """A watched folder and what is known of it.

    Parameters
    ----------
    folder, results : Path
    worker : Asked
    journal : Journal
    shelf : Shelf
    rig_file : Path or None
        For shots whose sheet names none.
    rate_per_s : float or None
        Strain rate that is wanted next.
    figure : bool
        Whether figures are drawn.
    landing : Landing

    Attributes
    ----------
    stored : int
        Shots stored since the start.
    open : dict
        Groups that are not dealt with.
    figures_due : list
        Shot id and result of stored shots without their figure.
    worked : bool
        Whether this turn has done anything.
    """

    folder: Path
    results: Path
    worker: Asked
    journal: Journal
    shelf: Shelf = field(default_factory=Shelf)
    rig_file: Path | None = None
    rate_per_s: float | None = None
    figure: bool = True
    landing: Landing = field(default_factory=Landing)
    stored: int = 0
    worked: bool = False
    troubles: Troubles = field(default_factory=Troubles)
    open: dict[Names, OpenGroup] = field(default_factory=dict)
    figures_due: list[tuple[str, str]] = field(default_factory=list)
    inbox: Inbox = field(init=False)
    earlier: EarlierShots = field(init=False)

    def __post_init__(self) -> None:
        self.inbox = Inbox(self.folder, self.landing)
        self.earlier = EarlierShots(self.results)

    @property
    def rig_path(self) -> Path | None:
        """The rig file of shots whose sheet names none: the one given, else the only one in the folder."""
        if self.rig_file is not None:
            return self.rig_file
        return self.shelf.rig_files[0] if len(self.shelf.rig_files) == 1 else None

    def block(self, one: OpenGroup, group: Group, why: str) -> None:
        """Let a group wait until something changes; why has been said."""
        one.blocked = blocking(group, one.stamps, self.shelf, self.rig_path)
        one.why, one.told = why, True

    def wait(
        self, one: OpenGroup, group: Group, why: str, now: float, *, soon: bool = True
    ) -> Iterator[Event]:
        """Let a group wait; say why once, at once or when patience is over."""
        if one.why != why:
            one.why, one.told = why, False
        one.blocked = blocking(group, one.stamps, self.shelf, self.rig_path)
        quiet = self.inbox.quiet_s(group, now)
        if not one.told and (soon or quiet >= self.landing.rest_s + PATIENCE_S):
            one.told = True
            yield Remark(Tone.WAIT, why, shown_names(group.names))

    def settle(self, group: Group, one: OpenGroup) -> None:
        """Note that a group is dealt with as it is."""
        self.inbox.settle(group.names, one.stamps)
        self.open.pop(group.names, None)

    def write_journal(self, now: float) -> Iterator[Event]:
        """Write the journal if it has changed."""
        mine = (os.getpid(), self.worker.process_id)
        new = [one for one in mine if one is not None and one not in self.journal.processes]
        if new:
            self.journal.processes = [*self.journal.processes[-_MOST_PROCESSES:], *new]
            self.journal.changed = True
        if not self.journal.changed or not self.troubles.due("journal", now) or not self.results.is_dir():
            return
        try:
            self.journal.save()
        except (StoreError, OSError) as error:
            yield from self.troubles.refused("journal", str(error), now)
        else:
            yield from self.troubles.went_well("journal", "the journal is written again")
