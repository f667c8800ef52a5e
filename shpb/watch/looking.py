"""Looking at the files of a group: are they whole, is their content known already, can they be read at all."""

from __future__ import annotations

from collections.abc import Generator, Iterator
from dataclasses import replace

from shpb.watch.claim import basis
from shpb.watch.desk import Desk
from shpb.watch.events import Event, Remark, ShotRefused, Tone
from shpb.watch.groups import Group
from shpb.watch.journal import Came, Entry
from shpb.watch.opening import OpenGroup, shown_names
from shpb.watch.shelf import Named
from shpb.watch.tasks import FileLook, Look
from shpb.watch.worker import WorkerError

TRIES = 2  # of a record that crashes or hangs its reader


def look(desk: Desk, one: OpenGroup, group: Group, now: float) -> Generator[Event, None, bool]:
    """Have the files hashed and asked whether they are whole; whether to go on."""
    entry = desk.journal.entries.get(group.names)
    if entry is not None and tuple(file.stamp for file in entry.files) == one.stamps:
        one.looks = tuple(FileLook(f.name, f.stamp, f.sha256, complete=True) for f in entry.files)
        return True
    desk.worked = True
    try:
        looks: tuple[FileLook, ...] = desk.worker.ask(Look(group.paths))
    except WorkerError as error:
        yield from crashed(desk, one, group, str(error), now)
        return False
    refused = next((look for look in looks if look.refused), None)
    if refused is not None:
        one.back_off.failed(now)
        text = f"cannot be read ({refused.refused}); it is tried again"
        if one.why != text:
            one.why = text
            one.told = True
            yield Remark(Tone.TROUBLE, text, refused.name)
        return False
    if tuple(look.stamp for look in looks) != one.stamps:
        one.back_off.failed(now)  # it was written to just now: the next list shows it
        return False
    one.back_off.over()
    if all(look.ours for look in looks):
        desk.settle(group, one)
        return False
    if desk.journal.of_content(tuple(sorted(look.sha256 for look in looks))) is None:
        broken = next((look for look in looks if not look.complete), None)
        if broken is not None:
            why = f"is not a whole record: {broken.reason}. It is looked at again when it changes"
            yield from desk.wait(one, group, why, now, soon=False)
            return False
    one.looks = looks
    return True


def settle_known(desk: Desk, group: Group, one: OpenGroup) -> bool:
    """Whether this very content under these names is dealt with already: touched, or written again."""
    entry = desk.journal.entries.get(group.names)
    if entry is None or entry.content != one.content or entry.came is Came.FAILED:
        return False
    if entry.came is not Came.SAME:
        if entry.result and not (desk.results / entry.result).is_file():
            return False
        if len(group.named) == 1 and entry.sheet != basis(group.named[0], entry.came, desk.rig_path):
            return False
    desk.journal.put(replace(entry, files=one.seen))
    desk.settle(group, one)
    return True


def same_content(desk: Desk, group: Group, one: OpenGroup, entry: Entry) -> Event:
    """A copy, or a record that was renamed: not reduced again."""
    was = shown_names(entry.names)
    if any(name in desk.inbox.records for name in entry.names):
        desk.journal.put(
            Entry(files=one.seen, came=Came.SAME, shot_id=entry.shot_id, said=f"the content of {was}")
        )
        text = f"has the very content of {was}, which is shot {entry.shot_id}: not reduced twice"
    else:
        desk.journal.put(replace(entry, files=one.seen))
        desk.inbox.unsettle(entry.names)
        text = f"was called {was} before; it is shot {entry.shot_id} already: not reduced twice"
    desk.settle(group, one)
    return Remark(Tone.NOTE, text, shown_names(group.names))


def crashed(
    desk: Desk, one: OpenGroup, group: Group, text: str, now: float, named: Named | None = None
) -> Iterator[Event]:
    """The child was lost over this record: try a few times, the memory may have been short; then leave it."""
    one.crashes += 1
    one.back_off.failed(now)
    about = shown_names(group.names)
    if one.crashes < TRIES:
        yield Remark(Tone.TROUBLE, f"{text}; it is tried again ({one.crashes} of {TRIES})", about)
        return
    said = f"{text}, {TRIES} times: left alone until it changes; the file may be damaged, export it again"
    desk.block(one, group, said)
    shot_id = named.sheet.shot_id if named else group.stem
    if one.looks:
        note_failure(desk, one, group, named, Came.FAILED, said)
    yield ShotRefused(names=group.names, shot_id=shot_id, text=said, unusable=False, bad_input=False)


def note_failure(
    desk: Desk, one: OpenGroup, group: Group, named: Named | None, came: Came, text: str
) -> None:
    """Note in the journal that a record gave no shot; ``named`` is the sheet it was tried with."""
    earlier = desk.journal.entries.get(group.names)
    if earlier is not None and earlier.came is Came.STORED:
        return  # the stored result of earlier content stays the one that counts
    desk.journal.put(
        Entry(
            files=one.seen,
            came=came,
            shot_id=named.sheet.shot_id if named else group.stem,
            verdict="reject" if came is Came.UNUSABLE else "",
            sheet=basis(named, came, desk.rig_path) if named else "",
            said=text,
        )
    )  # fmt: skip
