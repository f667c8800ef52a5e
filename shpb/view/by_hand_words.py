"""Windows and feet moved by hand, in words: what stands, by whom, how far from the program's own choice, and why."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from shpb.pulse.by_hand import ByHand, InForce, Move, in_force
from shpb.reduction import ShotResult
from shpb.view.text import fitted, printable

_US = 1e6
_LEAST_US = 0.005  # what two decimals do not show
_LONGEST = 200


def by_hand_words(result: ShotResult) -> tuple[str, ...]:
    """What stands where a hand put it, one sentence a window or foot, without the last full stop."""
    standing = in_force(result.by_hand, result.pulses)
    told = {(one.move.pulse, one.move.part) for one in standing}
    said = [_sentence(one) for one in standing]
    for pulse in result.pulses:
        stated = [("window", pulse.window_s != pulse.automatic_window_s), ("foot", pulse.foot_by_hand)]
        parts = [part for part, by_hand in stated if by_hand and (pulse.name, part) not in told]
        if parts:
            said.append(f"{pulse.name} {' and '.join(parts)} set by hand in shot sheet, list or rig file")
    earlier = sum(len(kept.moves) for kept in result.by_hand) - len(standing)
    if earlier > 0:
        changes = "1 earlier change" if earlier == 1 else f"{earlier} earlier changes"
        said.append(f"{changes} by hand {'is' if earlier == 1 else 'are'} kept in the shot file")
    return tuple(said)


def _sentence(one: InForce) -> str:
    by, why = (
        fitted(printable(words), _LONGEST).strip().rstrip(".") for words in (one.kept.by, one.kept.why)
    )
    # A name that ends in an initial keeps its full stop.
    name = fitted(printable(one.kept.by), _LONGEST).strip() if one.kept.by.strip().endswith(".") else by
    return (
        f"{one.move.pulse} {one.move.part} moved by hand by {name} on {printable(one.kept.at_utc[:10])}: "
        f"{shift_words(one.move)}, because {why}"
    )


def shift_words(move: Move) -> str:
    """How far a window or foot was moved from the program's own choice."""
    if not move.by_hand:
        return "given back to the program"
    own, now = move.automatic_s, move.after_s
    if move.part == "foot":
        return f"at {now[0] * _US:.2f} us, where the program found none" if not own else _off(own[0], now[0])
    ends = [
        f"{verb} {_off(mine, its)}"
        for verb, mine, its in zip(("starts", "ends"), own, now, strict=True)
        if abs(its - mine) * _US >= _LEAST_US
    ]
    return ", ".join(ends) or "left as the program has it"


def _off(own_s: float, now_s: float) -> str:
    off = (now_s - own_s) * _US
    if abs(off) < _LEAST_US:
        return "where the program has it"
    return f"{abs(off):.2f} us {'later' if off > 0 else 'earlier'}"


def change_words(move: Move) -> str:
    """One change, from what to what: "incident window: -20.69 to 358.68 us, now -20.69 to 160.00 us"."""
    return f"{move.pulse} {move.part}: {times_words(move.before_s)}, now {times_words(move.after_s)}"


def times_words(times_s: Sequence[float]) -> str:
    """A window or a foot in microseconds."""
    if not times_s:
        return "none found"
    return " to ".join(f"{time * _US:.2f}" for time in times_s) + " us"


def by_hand_json(history: Sequence[ByHand]) -> list[dict[str, Any]]:
    """All that was ever moved in a shot, oldest first."""
    return [
        {
            "by": kept.by,
            "at_utc": kept.at_utc,
            "why": kept.why,
            "moves": moves_json(kept.moves),
        }
        for kept in history
    ]


def moves_json(moves: Sequence[Move]) -> list[dict[str, Any]]:
    """Single changes, times on the record's clock."""
    return [
        {
            "pulse": move.pulse,
            "part": move.part,
            "automatic_s": list(move.automatic_s),
            "before_s": list(move.before_s),
            "after_s": list(move.after_s),
            "by_hand": move.by_hand,
        }
        for move in moves
    ]


__all__ = ["by_hand_json", "by_hand_words", "change_words", "moves_json", "shift_words", "times_words"]
