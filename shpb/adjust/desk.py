"""The state of an adjustment: which mark is held, where all of them stand, what can be undone."""

from __future__ import annotations

import math
from dataclasses import dataclass

from shpb.adjust.following import Following, Live
from shpb.adjust.marks import FOOT, MARKS, Mark, by_hand, placed, pulse_of, reach, time_of
from shpb.pulse.by_hand import PARTS, SETTINGS, Move, setting_of
from shpb.settings import Settings


@dataclass(frozen=True, slots=True)
class _Step:
    """One thing that can be undone: the settings before it and which mark was held."""

    settings: Settings
    mark: Mark
    nudge: bool = False  # further nudges of the same mark belong to it


class Desk:
    """Moves marks of a shot, and takes it back.

    Parameters
    ----------
    shot : Following
    settings : Settings
        As the shot was reduced.
    """

    def __init__(self, shot: Following, settings: Settings) -> None:
        self.shot = shot
        self.settings = settings
        self.mark = MARKS[0]
        self._kept = settings  # as stored, or as read
        self._done: list[_Step] = []
        self._undone: list[_Step] = []
        self._held: Settings | None = None  # before a drag began
        self.live: Live = shot.live(settings, shot.own)

    # --- what stands ------------------------------------------------------------------------------

    def time(self, mark: Mark) -> float | None:
        """Where a mark stands [s], None for a foot that was not found."""
        return time_of(mark, self.live.pulses)

    def own_time(self, mark: Mark) -> float | None:
        """Where the program put a mark [s]."""
        return time_of(mark, self.shot.own)

    def by_hand(self, mark: Mark) -> bool:
        """Whether a mark stands where a hand put it."""
        return by_hand(mark, self.settings)

    @property
    def changed(self) -> bool:
        """Whether anything differs from what was kept last."""
        return any(getattr(self.settings, name) != getattr(self._kept, name) for name in SETTINGS)

    @property
    def marks(self) -> tuple[Mark, ...]:
        """The marks in the order of their times, so that the next one is the next on the screen."""
        places = {mark: self.time(mark) for mark in MARKS}
        return tuple(sorted(MARKS, key=lambda mark: (mark.pulse == "transmitted", _or_end(places[mark]))))

    def moves(self) -> tuple[Move, ...]:
        """What was moved since it was kept last.

        Raises
        ------
        ShpbError
            If the pulses cannot be cut with these windows.
        """
        return self.shot.moves(self._kept, self.settings)

    # --- moving -----------------------------------------------------------------------------------

    def select(self, mark: Mark) -> None:
        """Hold a mark."""
        self.mark = mark

    def next(self, by: int = 1) -> None:
        """Hold the next mark, or the one before it."""
        order = self.marks
        self.mark = order[(order.index(self.mark) + by) % len(order)]

    def drag_to(self, time_s: float) -> None:
        """Move the held mark while the mouse is down; one step to undo once it is let go."""
        if self._held is None:
            self._held = self.settings
        self._place(self.mark, time_s)

    def slide_to(self, start_s: float) -> None:
        """Move the whole window of the held mark while the mouse is down; a foot set by hand stays inside."""
        if self._held is None:
            self._held = self.settings
        name, (first, last) = self.mark.pulse, self.shot.record_s
        start, end = pulse_of(self.live.pulses, name).window_s
        foot = getattr(self.settings, setting_of(name, "foot"))
        low = first if foot is None else max(first, foot - (end - start))
        high = last - (end - start) if foot is None else min(last - (end - start), foot)
        if low > high:
            return
        new = self._rounded(min(max(start_s, low), high))
        new = min(max(new, low), high)
        self._use(self.settings.replaced(**{setting_of(name, "window"): (new, new + (end - start))}))

    def let_go(self) -> bool:
        """End a drag; whether anything was moved by it."""
        held, self._held = self._held, None
        if held is None or held == self.settings:
            return False
        self._remember(held)
        return True

    def cancel(self) -> None:
        """End a drag and leave all as it was before."""
        held, self._held = self._held, None
        if held is not None:
            self._use(held)

    def nudge(self, samples: int) -> bool:
        """Move the held mark by samples of the record; whether it moved."""
        time_s = self.time(self.mark)
        if time_s is None:
            return False
        before = self.settings
        self._place(self.mark, time_s + samples * self.shot.strain.sample_interval_s, exact=True)
        if self.settings == before:
            return False
        last = self._done[-1] if self._done else None
        if last is None or not last.nudge or last.mark != self.mark or self._undone:
            self._remember(before, nudge=True)
        return True

    def begin_foot(self) -> bool:
        """Put a foot where the program found none: in the middle of its window."""
        if self.mark.part != FOOT or self.time(self.mark) is not None:
            return False
        before = self.settings
        start, end = pulse_of(self.live.pulses, self.mark.pulse).window_s
        self._place(self.mark, 0.5 * (start + end))
        self._remember(before)
        return True

    def reset(self, pulse: str | None = None) -> bool:
        """Give one pulse, or all, back to the program; whether that changes anything."""
        names = SETTINGS if pulse is None else [setting_of(pulse, part) for part in PARTS]
        settings = self.settings.replaced(**dict.fromkeys(names))
        if settings == self.settings:
            return False
        before = self.settings
        self._use(settings)
        self._remember(before)
        return True

    def undo(self) -> bool:
        """Take the last step back."""
        return self._step(self._done, self._undone)

    def redo(self) -> bool:
        """Do again what was taken back."""
        return self._step(self._undone, self._done)

    def kept(self) -> None:
        """What stands now has been stored."""
        self._kept = self.settings

    # --- inside -----------------------------------------------------------------------------------

    def _place(self, mark: Mark, time_s: float, *, exact: bool = False) -> None:
        pulses = self.live.pulses
        low, high = reach(mark, pulses, self.settings, self.shot.record_s)
        if low > high:
            return
        time_s = time_s if exact else self._rounded(time_s)
        self._use(placed(mark, min(max(time_s, low), high), pulses, self.settings))

    def _rounded(self, time_s: float) -> float:
        """A mouse does not point finer than this: plain decimals that can be typed as options too."""
        decimals = -math.floor(math.log10(self.shot.strain.sample_interval_s))
        return round(time_s, decimals)

    def _use(self, settings: Settings) -> None:
        if settings != self.settings:
            self.settings = settings
            self.live = self.shot.live(settings, self.live.pulses)

    def _remember(self, before: Settings, *, nudge: bool = False) -> None:
        self._done.append(_Step(before, self.mark, nudge))
        self._undone.clear()

    def _step(self, taken: list[_Step], given: list[_Step]) -> bool:
        if not taken:
            return False
        step = taken.pop()
        given.append(_Step(self.settings, step.mark))
        self.mark = step.mark
        self._use(step.settings)
        return True


def _or_end(time_s: float | None) -> float:
    return math.inf if time_s is None else time_s
