"""How a shot compares with earlier ones at its condition, and what to change for the next."""

from __future__ import annotations

import statistics
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from shpb.trust.finding import Finding, Verdict, Weight
from shpb.trust.repeats import Repeats, RepeatShot, find_repeats
from shpb.watch.tasks import PastShot, Shown

_MOST_STEPS = 3
_SAFE_SHARE_OF_YIELD = 0.5  # common practice: bars stay below half their yield strength


@dataclass(frozen=True, slots=True, kw_only=True)
class Compared:
    """One number of this shot against its repeats.

    ``scatter`` is their sample standard deviation, None where there is one alone.
    """

    what: str
    unit: str
    value: float
    mean: float
    scatter: float | None
    count: int

    @property
    def share(self) -> float:
        """By what share this shot differs from the mean."""
        return self.value / self.mean - 1 if self.mean else 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    """A shot against the earlier ones at its condition."""

    shot_ids: tuple[str, ...]
    numbers: tuple[Compared, ...]
    repeats: Repeats | None  # with what disagrees beyond what uncertainty and scatter leave open


def compared(shot: PastShot, earlier: Iterable[PastShot]) -> Comparison | None:
    """Hold a shot against those of its material, kind, temperature and rate that count.

    Returns
    -------
    Comparison or None
        None where the shot itself does not count. Without earlier shots ``shot_ids`` is empty.
    """
    mine = shot.repeat
    if mine is None:
        return None
    others = [
        (past, past.repeat)
        for past in earlier
        if past.repeat is not None
        and past.shot_id.casefold() != shot.shot_id.casefold()
        and past.repeat.is_repeat_of(mine)
    ]
    numbers = [_against("mean rate", "/s", mine.rate_per_s, [one.rate_per_s for _, one in others])]
    numbers += _flow_numbers(mine, [one for _, one in others])
    if shot.end_strain is not None:
        ends = [past.end_strain for past, _ in others if past.end_strain is not None]
        numbers.append(_against("true strain reached", "", shot.end_strain, ends))
    groups = find_repeats([mine, *(one for _, one in others)])
    return Comparison(
        shot_ids=tuple(past.shot_id for past, _ in others),
        numbers=tuple(one for one in numbers if one is not None),
        repeats=next((group for group in groups if mine in group.shots), None),
    )


def _flow_numbers(mine: RepeatShot, others: Sequence[RepeatShot]) -> list[Compared | None]:
    numbers = []
    for point in mine.flow:
        there = [
            match.stress_pa / 1e6
            for other in others
            for match in other.flow
            if (match.strain, match.plastic) == (point.strain, point.plastic)
        ]
        kind = "plastic strain" if point.plastic else "total strain"
        numbers.append(_against(f"stress at {kind} {point.strain:g}", "MPa", point.stress_pa / 1e6, there))
    return numbers


def _against(what: str, unit: str, value: float, others: Sequence[float]) -> Compared | None:
    if not others:
        return None
    return Compared(
        what=what,
        unit=unit,
        value=value,
        mean=statistics.fmean(others),
        scatter=statistics.stdev(others) if len(others) > 1 else None,
        count=len(others),
    )


# --- the next shot -------------------------------------------------------------------------------------


def next_steps(findings: Sequence[Finding]) -> list[str]:
    """What the findings ask for at the bench, gravest first, each once."""
    telling = sorted((f for f in findings if f.weight is not Weight.FINE), key=lambda f: -f.weight.gravity)
    # Beside what restricts or rejects, a note is not what the next shot hangs on.
    grave = [finding for finding in telling if finding.weight is not Weight.NOTE] or telling
    return list(dict.fromkeys(f.action for f in grave if f.action))[:_MOST_STEPS]


# --- striker speed -------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class SpeedStep:
    """Striker speed for a wanted rate, in simple proportion.

    Attributes
    ----------
    counts : bool
        Whether this shot counts; nothing is concluded from one that does not.
    speed_m_s : float or None
        None where the speed of this shot is not stated, or it does not count.
    share_of_yield : float or None
        Stress in the incident bar at that speed as a share of its yield strength.
    """

    wanted_per_s: float
    got_per_s: float
    counts: bool
    speed_m_s: float | None
    share_of_yield: float | None

    @property
    def too_fast(self) -> bool:
        """Whether the bar would be loaded beyond half its yield strength."""
        return self.share_of_yield is not None and self.share_of_yield > _SAFE_SHARE_OF_YIELD


def speed_step(shown: Shown, wanted_per_s: float | None) -> SpeedStep | None:
    """The striker speed V' = V wanted/got: a first estimate, since the specimen takes its own share of the pulse.

    None where no rate is wanted, or this shot has none to start from.
    """
    if wanted_per_s is None or not shown.rate_per_s > 0:
        return None
    speed = share = None
    counts = shown.verdict != Verdict.REJECT.value
    if counts and shown.striker_speed_m_s is not None:
        speed = shown.striker_speed_m_s * wanted_per_s / shown.rate_per_s
        if shown.stress_per_speed is not None and shown.bar_yield_pa is not None:
            share = speed * shown.stress_per_speed / shown.bar_yield_pa
    return SpeedStep(
        wanted_per_s=wanted_per_s,
        got_per_s=shown.rate_per_s,
        counts=counts,
        speed_m_s=speed,
        share_of_yield=share,
    )
