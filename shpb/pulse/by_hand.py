"""What a person changed about the windows and feet of a shot: from what, to what, by whom, when and why.

The settings of a shot say what is used; this is the history beside them, oldest first, of which nothing is ever lost.
"""

from __future__ import annotations

import datetime
import math
from collections.abc import Sequence
from dataclasses import dataclass, fields

from shpb.errors import InputError
from shpb.pulse.pulse import Pulse, Pulses
from shpb.settings import Settings

PULSES = ("incident", "reflected", "transmitted")
PARTS = ("window", "foot")
_LONGEST = 2000  # letters of a reason


@dataclass(frozen=True, slots=True, kw_only=True)
class Move:
    """One window or foot that was moved; times on the record's clock [s], two for a window, one for a foot.

    Attributes
    ----------
    pulse, part : str
        incident, reflected or transmitted; window or foot.
    automatic_s : tuple of float
        What the program chose; empty where it found no foot.
    before_s, after_s : tuple of float
        What stood before and stands since; empty where there was no foot.
    by_hand : bool
        False where it was given back to the program.
    """

    pulse: str
    part: str
    automatic_s: tuple[float, ...]
    before_s: tuple[float, ...]
    after_s: tuple[float, ...]
    by_hand: bool

    def __post_init__(self) -> None:
        if self.pulse not in PULSES or self.part not in PARTS:
            raise InputError(
                f"there is no {self.part} of a pulse named {self.pulse}",
                where="change by hand",
                mend=f"A pulse is one of {', '.join(PULSES)}, its part window or foot",
            )
        for field in fields(self):
            value = getattr(self, field.name)
            if isinstance(value, tuple) and not all(map(math.isfinite, value)):
                raise InputError(
                    f"found {value}", where=f"change by hand, {field.name}", mend="Give times in seconds"
                )


@dataclass(frozen=True, slots=True, kw_only=True)
class ByHand:
    """Changes that were kept at one time: by whom, when (UTC, ISO 8601), why, and each of them.

    Raises
    ------
    InputError
        If nobody is named or no reason is given.
    """

    by: str
    at_utc: str
    why: str
    moves: tuple[Move, ...]

    def __post_init__(self) -> None:
        for name, words, mend in (
            ("by", self.by, "Give the name of the person who answers for the change"),
            ("why", self.why, "Say in a few words why the program's own choice does not serve"),
        ):
            if not words.strip():
                raise InputError("is empty", where=name, mend=mend)
            if len(words) > _LONGEST:
                raise InputError(f"has {len(words)} letters", where=name, mend=f"Give at most {_LONGEST}")


def setting_of(pulse: str, part: str) -> str:
    """The field of Settings that holds this window or foot."""
    return f"{pulse}_{part}_s"


SETTINGS = tuple(setting_of(pulse, part) for pulse in PULSES for part in PARTS)


def kept_now(by: str, why: str, moves: Sequence[Move]) -> ByHand:
    """Changes kept at this moment, names and reasons without odd spaces at their ends."""
    now = datetime.datetime.now(datetime.UTC).isoformat(timespec="seconds")
    return ByHand(by=by.strip(), at_utc=now, why=why.strip(), moves=tuple(moves))


def moves_between(
    own: Pulses, before: Pulses, after: Pulses, stood: Settings, used: Settings
) -> tuple[Move, ...]:
    """What was moved from one choice of windows and feet to another.

    Parameters
    ----------
    own : Pulses
        As the program chose them, nothing set by hand.
    before, after : Pulses
        By the two choices; where the earlier one gave no pulses at all, those that the program chose.
    stood, used : Settings
        Of the earlier and the later choice.
    """
    moves = []
    for chosen, earlier, later in zip(own, before, after, strict=True):
        for part in PARTS:
            was, is_now = (getattr(settings, setting_of(later.name, part)) for settings in (stood, used))
            left = _stated(was) or _times(earlier, part)
            now = _times(later, part)
            # What follows another change by itself (a foot sought in a moved window) was moved by nobody.
            if left != now and (was is not None or is_now is not None):
                moves.append(
                    Move(
                        pulse=later.name,
                        part=part,
                        automatic_s=_times(chosen, part),
                        before_s=left,
                        after_s=now,
                        by_hand=is_now is not None,
                    )
                )
    return tuple(moves)


def _stated(setting: tuple[float, ...] | float | None) -> tuple[float, ...]:
    """A window or foot that is set by hand; empty where it is not."""
    if setting is None:
        return ()
    return tuple(setting) if isinstance(setting, tuple | list) else (float(setting),)


def _times(pulse: Pulse, part: str) -> tuple[float, ...]:
    if part == "window":
        return pulse.window_s
    return () if pulse.foot is None else (pulse.foot.time_s,)


def _is_by_hand(pulse: Pulse, part: str) -> bool:
    return pulse.foot_by_hand if part == "foot" else pulse.window_s != pulse.automatic_window_s


@dataclass(frozen=True, slots=True)
class InForce:
    """A change that stands: the move and what it belongs to."""

    move: Move
    kept: ByHand


def in_force(history: Sequence[ByHand], pulses: Pulses) -> tuple[InForce, ...]:
    """The changes that stand in these pulses, each by whoever made it last."""
    found = []
    for pulse in pulses:
        for part in PARTS:
            if not _is_by_hand(pulse, part):
                continue
            last = next(
                (
                    InForce(move, kept)
                    for kept in reversed(history)
                    for move in kept.moves
                    if (move.pulse, move.part) == (pulse.name, part)
                ),
                None,
            )
            # A later sheet may have set it once more.
            if last is not None and last.move.by_hand and last.move.after_s == _times(pulse, part):
                found.append(last)
    return tuple(found)


def without_hands(settings: Settings) -> Settings:
    """The same settings with every window and foot left to the program."""
    return settings.replaced(**dict.fromkeys(SETTINGS))
