"""The bars-apart shots of a session, and the pairs of passages in them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from shpb.calibrate.propagation.passage_pairs import PassagePair, Passages, passage_pairs
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.errors import InputError
from shpb.rig.rig import Rig


def shots_of(fired: Sequence[FiredShot], bar: str) -> list[FiredShot]:
    """The bars-apart shots of one bar.

    Raises
    ------
    InputError
        If there is none, or one record is used twice.
    """
    shots = [one for one in fired if one.shot.kind is ShotKind.BARS_APART and one.shot.bar == bar]
    if not shots:
        there = (
            ", ".join(f"{one.shot_id} ({one.shot.kind.value}, {one.shot.bar} bar)" for one in fired) or "none"
        )
        raise InputError(
            f"no shot with the {bar} bar alone; there are: {there}",
            where="propagation",
            mend="Fire the striker at one end of the bar with its other end free, and name the shot bars-apart",
        )
    for n, one in enumerate(shots):
        for other in shots[:n]:
            if _same_record(one, other):
                raise InputError(
                    f"shots {other.shot_id} and {one.shot_id} have one and the same record",
                    where=f"shot {one.shot_id}",
                    mend="Name each shot's own record; one counted twice makes the result look too sure",
                )
    return shots


def _same_record(one: FiredShot, other: FiredShot) -> bool:
    a, b = one.record, other.record
    if a is b or (a.sources and {s.sha256 for s in a.sources} == {s.sha256 for s in b.sources}):
        return True
    return a.voltage_v.shape == b.voltage_v.shape and bool(np.array_equal(a.voltage_v, b.voltage_v))


def pairs_of(shots: Sequence[FiredShot], rig: Rig) -> tuple[list[PassagePair], tuple[str, ...]]:
    """All pairs there and back; only where there is none, those from station to station, and why so.

    Raises
    ------
    InputError
        If no two passages can be told apart in any shot.
    """
    pairs: list[PassagePair] = []
    refused: list[str] = []
    for one in shots:
        found, why = passage_pairs(one, rig)
        pairs += found
        refused += why
    turned = [pair for pair in pairs if pair.passages.turned]
    if not pairs:
        raise InputError(
            "no two passages of the pulse can be told apart. " + ". ".join(refused),
            where="propagation",
            mend="Use a shorter striker, a station nearer to the middle of the bar, or a longer record",
        )
    return turned or pairs, tuple(refused) if not turned else ()


def groups_of(pairs: Sequence[PassagePair]) -> list[list[PassagePair]]:
    """Pairs over the same way, whose spectra may be averaged."""
    groups: dict[Passages, list[PassagePair]] = {}
    for pair in pairs:
        groups.setdefault(pair.passages, []).append(pair)
    return list(groups.values())
