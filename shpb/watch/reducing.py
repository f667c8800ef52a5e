"""From a whole record to its stored shot: whose it is, the reduction in the child, what came of it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from shpb.errors import ShpbError
from shpb.rig.rig import Rig
from shpb.watch.claim import blocking, claimed
from shpb.watch.compare import compared, next_steps, speed_step
from shpb.watch.desk import Desk
from shpb.watch.events import Event, SheetWanted, ShotRefused, ShotShown
from shpb.watch.groups import Group
from shpb.watch.journal import Came, Entry
from shpb.watch.looking import crashed, note_failure
from shpb.watch.opening import OpenGroup
from shpb.watch.shelf import Named
from shpb.watch.tasks import ReduceShot, Refusal, Refused, Shown
from shpb.watch.worker import WorkerError


def match_and_reduce(desk: Desk, one: OpenGroup, group: Group, now: float) -> Iterator[Event]:
    """Find the shot that a whole record belongs to, and have it reduced; else say what is missing."""
    if group.alone and not group.named:
        yield from desk.wait(
            one,
            group,
            "waits for the other channels of this shot, or for a sheet that names it alone",
            now,
            soon=False,
        )
        return
    if not group.named:
        yield from _without_sheet(desk, one, group, now)
        return
    try:
        named, rig = claimed(group, desk.shelf, desk.rig_path)
    except ShpbError as error:
        yield from desk.wait(one, group, str(error), now)
        return
    if not desk.troubles.due("results", now):
        return
    yield from _reduce(desk, one, group, named, rig, now)


def _without_sheet(desk: Desk, one: OpenGroup, group: Group, now: float) -> Iterator[Event]:
    faulty = desk.shelf.faulty_about(group.paths[0])
    if faulty is not None:
        yield from desk.wait(one, group, f"waits until {faulty.name} is mended", now)
        return
    one.blocked, one.why, one.told = (
        blocking(group, one.stamps, desk.shelf, desk.rig_path),
        "no shot sheet names it",
        True,
    )
    yield SheetWanted(group.paths, group.stem)


def _reduce(desk: Desk, one: OpenGroup, group: Group, named: Named, rig: Rig, now: float) -> Iterator[Event]:
    shot_id, content = named.sheet.shot_id, one.content
    sheet = named.sheet if named.sheet.record_files else replace(named.sheet, record_files=group.paths)
    earlier = desk.journal.of_shot(shot_id)
    new_content = earlier is not None and earlier.content != content
    revision = 1 if earlier is None else earlier.revision + new_content
    desk.worked = True
    task = ReduceShot(sheet, rig, named.source, content, f"earlier-{max(revision - 1, 1)}")
    try:
        reply: Shown | Refused = desk.worker.ask(task)
    except WorkerError as error:
        yield from crashed(desk, one, group, str(error), now, named)
        return
    if isinstance(reply, Refused):
        yield from _refused(desk, one, group, named, reply, now)
        return
    yield from desk.troubles.went_well("results", "results are stored again")
    if new_content or reply.set_aside:
        why = "the record has changed under its name"
    else:
        why = "" if earlier is None else "its sheet has changed"
        if earlier is not None and earlier.sheet == named.digest:
            why = "its result was gone"
    desk.stored += 1
    desk.journal.put(
        Entry(
            files=one.seen, came=Came.STORED, shot_id=shot_id, verdict=reply.verdict, sheet=named.digest,
            result=reply.result, revision=max(revision, 2) if reply.set_aside else revision,
            figure_due=desk.figure,
        )
    )  # fmt: skip
    desk.settle(group, one)
    yield from desk.write_journal(now)
    entry = desk.journal.entries[group.names]
    yield ShotShown(
        shown=reply,
        names=group.names,
        revision=entry.revision,
        why_again=why,
        comparison=compared(reply.past, desk.earlier.but(reply.result)),
        steps=tuple(next_steps(reply.findings)),
        speed=speed_step(reply, desk.rate_per_s),
    )
    desk.earlier.remember(reply)
    if desk.figure:
        desk.figures_due.append((shot_id, reply.result))


def _refused(
    desk: Desk, one: OpenGroup, group: Group, named: Named, reply: Refused, now: float
) -> Iterator[Event]:
    if reply.why is Refusal.SYSTEM:
        yield from desk.troubles.refused("results", reply.text, now)
        return
    if reply.why is Refusal.CHANGED:
        one.looks = ()
        one.back_off.failed(now)
        return
    unusable = reply.why is Refusal.UNUSABLE
    came = Came.UNUSABLE if unusable else Came.FAILED
    note_failure(desk, one, group, named, came, reply.text)
    desk.block(one, group, reply.text)
    one.rejected = unusable
    yield ShotRefused(
        names=group.names, shot_id=named.sheet.shot_id, text=reply.text, unusable=unusable,
        bad_input=not unusable, json=reply.json,
    )  # fmt: skip
