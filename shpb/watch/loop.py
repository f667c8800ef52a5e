"""One turn of the watch: list the folder, see what is whole and whose it is, have it reduced, note what came of it.

Pure of clock and screen: the time is handed in, what there is to say comes out as events, and all that can crash is
done by the child (:mod:`shpb.watch.worker`).
"""

from __future__ import annotations

from collections.abc import Generator, Iterator
from dataclasses import dataclass, replace

from shpb.watch.claim import basis, blocking
from shpb.watch.desk import Desk
from shpb.watch.events import Event, FiguresDrawn, Remark, Tone
from shpb.watch.groups import Group
from shpb.watch.journal import Came
from shpb.watch.landing import Stamp, list_folder
from shpb.watch.looking import TRIES, look, same_content, settle_known
from shpb.watch.opening import OpenGroup, shown_names
from shpb.watch.reducing import match_and_reduce
from shpb.watch.shelf import stamp_of
from shpb.watch.tasks import DrawShot, Refusal, Refused
from shpb.watch.worker import WorkerError

POLL_S = 0.5

Step = Generator[Event, None, bool]


@dataclass(slots=True)
class Watch:
    """Turns of the watch over one desk."""

    desk: Desk
    _papers_seen: int = -1
    _first: bool = True
    _now: float = 0.0

    # --- one turn --------------------------------------------------------------------------------------

    def step(self, now: float) -> Iterator[Event]:
        """Do what there is to do at the time ``now`` [s, monotonic], telling as it goes."""
        self._now = now
        desk = self.desk
        desk.worked = False
        desk.worker.start()
        if not (yield from self._list(now)):
            return
        yield from desk.write_journal(now)  # whose temporary files these are, before there are any
        yield from self._read_papers(now)
        if self._first:
            self._recall()
        self._first = False
        if self._papers_seen != desk.shelf.version:
            self._papers_seen = desk.shelf.version
            self._open_what_sheets_changed()
        groups = desk.inbox.open_groups(desk.shelf)
        for names in desk.open.keys() - {group.names for group in groups}:
            del desk.open[names]
        for group in groups:
            yield from self._deal_with(group, now)
        yield from self._draw_due(now)
        yield from desk.write_journal(now)
        desk.worked = desk.worked or desk.earlier.learn_one(desk.worker.ask)

    def pause_s(self, now: float) -> float:
        """Seconds until the next turn is worth while."""
        desk = self.desk
        if desk.worked:
            return 0.0
        left = desk.landing.until_rest_s(desk.inbox.unsettled, now)
        return POLL_S if left is None else max(min(POLL_S, left), 0.01)

    @property
    def busy(self) -> bool:
        """Whether anything goes on by itself: files come to rest, work was done, the system may yet give in.

        Files count as they stood in the last turn, however long that took: what has come to rest since is for the next.
        """
        desk = self.desk
        fewest = desk.troubles.fewest_tries
        tried = any(0 < one.back_off.tries <= TRIES and one.blocked is None for one in desk.open.values())
        trouble = fewest is not None and fewest <= TRIES
        return self._first or desk.worked or trouble or tried or desk.inbox.moving(self._now)

    @property
    def waiting(self) -> list[tuple[str, str, bool]]:
        """Records that wait, why, and whether that has been said."""
        return [
            (shown_names(names), one.why, one.told)
            for names, one in self.desk.open.items()
            if one.why and not one.rejected
        ]

    @property
    def troubles(self) -> tuple[str, ...]:
        """What the system refuses at present."""
        return self.desk.troubles.there

    # --- what is there ---------------------------------------------------------------------------------

    def _list(self, now: float) -> Step:
        """List the folder and see to it that there is a place for results; whether that went well."""
        desk = self.desk
        if not desk.troubles.due("folder", now):
            return False
        place = desk.folder
        try:
            found = list_folder(desk.folder)
            place = desk.results
            if not place.is_dir():
                place.mkdir()
                desk.journal.changed = True
        except OSError as error:
            text = f"{place} cannot be reached ({error.strerror or error})"
            yield from desk.troubles.refused("folder", text, now)
            return False
        yield from desk.troubles.went_well("folder", "the folder can be reached again")
        for name in desk.inbox.see(found, now):
            if not self._first:
                yield Remark(Tone.NOTE, "seen; waiting until it is written", name)
        return True

    def _read_papers(self, now: float) -> Iterator[Event]:
        for path, mistakes in self.desk.shelf.read(*self.desk.inbox.papers(now)):
            yield Remark(Tone.WAIT, f"{mistakes}\nIt is read again when it changes.", path.name)

    def _recall(self) -> None:
        """At the start: what the journal knows, and whose result is still there, is not done again."""
        desk = self.desk
        records = desk.inbox.records
        for entry in desk.journal.entries.values():
            gone = bool(entry.result) and not (desk.results / entry.result).is_file()
            if entry.came is Came.FAILED or gone:
                continue
            for file in entry.files:
                if records.get(file.name) == file.stamp:
                    desk.inbox.settle([file.name], [file.stamp])
            if entry.figure_due and desk.figure:
                desk.figures_due.append((entry.shot_id, entry.result))

    def _open_what_sheets_changed(self) -> None:
        """Open again what a sheet now says differently."""
        desk = self.desk
        for entry in desk.journal.entries.values():
            if entry.came is Came.SAME or not all(name in desk.inbox.records for name in entry.names):
                continue
            group = desk.inbox.group(entry.names[0], desk.shelf)
            same = len(group.named) == 1 and set(group.names) == set(entry.names)
            if same and entry.sheet != basis(group.named[0], entry.came, desk.rig_path):
                desk.inbox.unsettle(entry.names)

    # --- one group -------------------------------------------------------------------------------------

    def _deal_with(self, group: Group, now: float) -> Iterator[Event]:
        desk = self.desk
        if not desk.inbox.rests(group, now):
            return
        one = desk.open.setdefault(group.names, OpenGroup())
        if group.missing:
            yield from desk.wait(one, group, f"waits for {', '.join(group.missing)}", now, soon=False)
            return
        stamps = tuple(
            desk.inbox.records.get(path.name) or stamp_of(path) or Stamp(-1, 0) for path in group.paths
        )
        if one.stamps != stamps:
            one = desk.open[group.names] = OpenGroup(stamps)
        if one.blocked is not None and one.blocked == blocking(group, stamps, desk.shelf, desk.rig_path):
            if one.why and not one.told:
                yield from desk.wait(one, group, one.why, now, soon=False)
            return
        if not one.back_off.due(now):
            return
        if not one.looks and not (yield from look(desk, one, group, now)):
            return
        if settle_known(desk, group, one):
            return
        entry = desk.journal.of_content(one.content)
        if entry is not None and entry.came is not Came.FAILED and set(entry.names) != set(group.names):
            yield same_content(desk, group, one, entry)
            return
        yield from match_and_reduce(desk, one, group, now)

    # --- figures ----------------------------------------------------------------------------------------

    def _draw_due(self, now: float) -> Iterator[Event]:
        desk = self.desk
        # One a turn: a record that has landed meanwhile comes before the next figure.
        if not desk.figures_due or not desk.troubles.due("figures", now):
            return
        shot_id, result = desk.figures_due[0]
        desk.worked = True
        try:
            reply = desk.worker.ask(DrawShot(result))
        except WorkerError as error:
            reply = Refused(Refusal.INPUT, str(error))
        if isinstance(reply, Refused) and reply.why is Refusal.SYSTEM:
            yield from desk.troubles.refused("figures", reply.text, now)
            return
        desk.figures_due.pop(0)
        entry = desk.journal.of_shot(shot_id)
        if entry is not None:
            desk.journal.put(replace(entry, figure_due=False))
        if isinstance(reply, Refused):
            yield Remark(Tone.TROUBLE, f"its figure cannot be drawn: {reply.text}", f"shot {shot_id}")
            return
        yield from desk.troubles.went_well("figures", "figures are written again")
        yield FiguresDrawn(shot_id, reply.files)
