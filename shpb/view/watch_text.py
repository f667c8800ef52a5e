"""A shot as it is shown at the bench: one screen, the verdict large, then what to look at and what to do next."""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import Any, NamedTuple

from shpb.trust.finding import Finding, Weight
from shpb.view.repeats import agreement_words
from shpb.view.summary import head, json_text
from shpb.view.text import fitted, padded, printable, rounded, wrapped
from shpb.view.wording import short_limit, strain_text, telling
from shpb.watch.compare import Compared, Comparison, SpeedStep
from shpb.watch.events import ShotRefused, ShotShown
from shpb.watch.tasks import Shown

_LINES_A_FINDING = 2
_BOLD, _PLAIN = "\x1b[1;7m", "\x1b[0m"
_LABEL = 14
_NARROWEST = 74


class _Room(NamedTuple):
    """How much of each part is shown."""

    findings: int
    stresses: int
    steps: int
    gap: tuple[str, ...]  # between two parts


_ROOMS = (_Room(4, 3, 3, ("",)), _Room(3, 1, 2, ("",)), _Room(2, 1, 1, ("",)), _Room(2, 1, 1, ()))


def bench_text(
    event: ShotShown, *, width: int = 80, height: int | None = None, stressed: bool = False
) -> str:
    """Return a shot as one screen of text, no line beyond ``width``.

    Parameters
    ----------
    event : ShotShown
    width : int
        Columns, at least 74: the comparison is a table.
    height : int or None
        Lines of the screen: what matters least is left out until the rest fits. None leaves nothing out.
    stressed : bool
        Whether the verdict stands in reverse video; words carry the meaning without it.
    """
    width = max(width, _NARROWEST)
    for room in _ROOMS:
        lines = _bench_lines(event, width, room, stressed=stressed)
        if height is None or len(lines) <= height:
            break
    return "\n".join(line.rstrip() for line in lines)


def _bench_lines(event: ShotShown, width: int, room: _Room, *, stressed: bool) -> list[str]:
    shown, gap = event.shown, room.gap
    lines = _banner(f"{shown.verdict.upper()}   {printable(shown.shot_id)}", width, stressed=stressed)
    lines += wrapped(shown.sentence, width)
    names = ", ".join(printable(name) for name in event.names)
    lines += wrapped(f"{shown.line}; record {names}", width)
    if event.why_again:
        lines += wrapped(_again(event), width)
    lines += [*gap, *_look_at(shown.findings, width, room.findings), *gap, *_numbers(shown, width)]
    lines += [*gap, *_beside(event.comparison, width, room.stresses), *gap, *_next(event, width, room.steps)]
    return lines


def refused_text(event: ShotRefused, *, width: int = 80, stressed: bool = False) -> str:
    """Return what is said of a shot that could not be reduced."""
    width = max(width, _NARROWEST)
    word = "REJECT" if event.unusable else "NOT REDUCED"
    lines = _banner(f"{word}   {printable(event.shot_id)}", width, stressed=stressed)
    for line in event.text.splitlines():
        lines += wrapped(printable(line), width)
    names = ", ".join(printable(name) for name in event.names)
    again = "It is tried again when record, sheet or rig file change."
    lines += wrapped(f"Record {names}; nothing is stored. {again}", width)
    return "\n".join(line.rstrip() for line in lines)


def _banner(text: str, width: int, *, stressed: bool) -> list[str]:
    rule = "=" * width
    line = padded(f"  {fitted(text, width - 4)}", width)
    if stressed:
        return [
            f"{_BOLD}{padded('', width)}{_PLAIN}",
            f"{_BOLD}{line}{_PLAIN}",
            f"{_BOLD}{padded('', width)}{_PLAIN}",
        ]
    return [rule, line, rule]


def _again(event: ShotShown) -> str:
    aside = event.shown.set_aside
    kept = f" The earlier result is kept as {', '.join(map(printable, aside))}." if aside else ""
    revision = f" This is revision {event.revision}." if event.revision > 1 else ""
    return f"REDUCED AGAIN: {event.why_again}.{revision}{kept}"


def _look_at(findings: tuple[Finding, ...], width: int, most: int) -> list[str]:
    said = telling(findings)
    if not said:
        return wrapped("No check speaks against this shot.", width)
    # A note does not matter beside what restricts or rejects: its name is enough there.
    grave = tuple(f for f in said if f.weight is not Weight.NOTE) or said
    lines = [line for finding in grave[:most] for line in _finding_lines(finding, width)]
    rest = [finding for finding in said if finding not in grave[:most]]
    if rest:
        names = ", ".join(printable(finding.check) for finding in rest)
        lines += wrapped(f"and {names}", width, " " * 10)
    return lines


def _finding_lines(finding: Finding, width: int) -> list[str]:
    """What a check says on two lines: with its limit where there is room."""
    head = f"{finding.weight.value.upper():<10}"
    text = f"{printable(finding.check)}: {printable(finding.measured)}"
    for said in (f"{text} (limit: {short_limit(finding)})", text):
        lines = wrapped(said, width, head)
        if len(lines) <= _LINES_A_FINDING:
            return lines
    cut = " ".join([lines[_LINES_A_FINDING - 1], lines[_LINES_A_FINDING].strip()])
    return [*lines[: _LINES_A_FINDING - 1], fitted(cut, width)]


def _numbers(shown: Shown, width: int) -> list[str]:
    lines = wrapped(
        f"mean {rounded(shown.rate_per_s)} /s engineering, {rounded(shown.true_rate_per_s)} /s true",
        width,
        "Strain rate".ljust(_LABEL),
    )
    lines += wrapped(shown.equilibrium, width, "Equilibrium".ljust(_LABEL))
    if shown.flow:
        kind = "plastic" if shown.flow[0][1] else "total"
        values = [f"{rounded(stress / 1e6)} at {strain:g}" for strain, _, stress, _ in shown.flow]
        lines += wrapped(
            f"{', '.join(values)} (MPa true, at true {kind} strain)", width, "Flow stress".ljust(_LABEL)
        )
    return lines


def _beside(comparison: Comparison | None, width: int, stresses: int) -> list[str]:
    if comparison is None:
        return wrapped("Not held against earlier shots: it does not count.", width)
    if not comparison.shot_ids:
        return wrapped("No earlier shot at this condition to hold it against.", width)
    names = ", ".join(map(printable, comparison.shot_ids[-6:]))
    more = len(comparison.shot_ids) - 6
    if more > 0:
        names += f" and {more} more"
    count = len(comparison.shot_ids)
    lines = wrapped(
        f"Against {count} earlier shot{'' if count == 1 else 's'} at this condition: {names}", width
    )
    lines.append(f"  {'':<35}{'this':>9}{'mean':>9}{'scatter':>9}{'off':>9}")
    lines += [_compared(one) for one in _chosen(comparison.numbers, stresses)]
    if comparison.repeats is not None:
        words = agreement_words(comparison.repeats)
        lines += wrapped(f"They {words}." if words == "agree" else f"{words}.", width, "  ")
    return lines


def _chosen(numbers: Sequence[Compared], stresses: int) -> list[Compared]:
    """Rate and strain, and of the flow stresses the first, the middle and the last, or the middle one alone."""
    flow = [one for one in numbers if one.unit == "MPa"]
    places = {0, len(flow) // 2, len(flow) - 1} if stresses > 1 else {len(flow) // 2}
    kept = [flow[place] for place in sorted(places)] if flow else []
    return [one for one in numbers if one.unit != "MPa" or one in kept]


def _compared(one: Compared) -> str:
    digits = rounded if one.unit else strain_text
    scatter = "-" if one.scatter is None else rounded(one.scatter, 2)
    name = f"{one.what}, {one.unit}" if one.unit else one.what
    return f"  {name:<35}{digits(one.value):>9}{digits(one.mean):>9}{scatter:>9}{100 * one.share:>+7.1f} %"


def _next(event: ShotShown, width: int, most: int) -> list[str]:
    lines = []
    for step in event.steps[:most]:
        lines += wrapped(printable(step), width, "  - ", "    ")
    if event.speed is not None:
        lines += wrapped(_speed_words(event.speed), width, "  - ", "    ")
    if not lines:
        return wrapped("Next shot: nothing to change.", width)
    return ["Next shot", *lines]


def _speed_words(step: SpeedStep) -> str:
    wanted = f"For {rounded(step.wanted_per_s)} /s (this one {rounded(step.got_per_s)} /s)"
    if not step.counts:
        return f"{wanted}: no striker speed is proposed from a shot that does not count."
    if step.speed_m_s is None:
        return f"{wanted}: state striker_speed_m_s in the sheet, then a striker speed can be proposed."
    said = f"{wanted}: striker about {rounded(step.speed_m_s)} m/s, a first estimate in simple proportion."
    if step.too_fast and step.share_of_yield is not None:
        share = f"{100 * step.share_of_yield:.0f} %"
        said += f" NOT ADVISED: it would load the incident bar to {share} of its yield strength."
    return said


# --- for other programs --------------------------------------------------------------------------------


def shot_record(event: ShotShown) -> dict[str, Any]:
    """The summary of a shot with what watching adds to it."""
    return {
        **event.shown.json,
        "record_files": list(event.names),
        "files": list(event.shown.files),
        "revision": event.revision,
        "reduced_again_because": event.why_again or None,
        "earlier_result_kept_as": list(event.shown.set_aside),
        "compared": None if event.comparison is None else _comparison_record(event.comparison),
        "next_shot": {
            "to_do": list(event.steps),
            "striker_speed_m_s": None if event.speed is None else event.speed.speed_m_s,
            "for_rate_per_s": None if event.speed is None else event.speed.wanted_per_s,
            "share_of_bar_yield": None if event.speed is None else event.speed.share_of_yield,
        },
    }


def _comparison_record(comparison: Comparison) -> dict[str, Any]:
    return {
        "shot_ids": list(comparison.shot_ids),
        "agree": None if comparison.repeats is None else not comparison.repeats.disagreements,
        "numbers": [
            {
                "what": one.what,
                "unit": one.unit,
                "this": one.value,
                "mean": one.mean,
                "standard_deviation": one.scatter,
                "shots": one.count,
            }
            for one in comparison.numbers
        ],
    }


def refused_record(event: ShotRefused) -> dict[str, Any]:
    """A shot that could not be reduced, as an error object."""
    said = event.json or {
        **head("shpb error"),
        "error": {"kind": "WorkerError", "message": event.text},
    }
    verdict = "reject" if event.unusable else "failed"
    return {**said, "shot_id": event.shot_id, "verdict": verdict, "record_files": list(event.names)}


def json_line(content: dict[str, Any]) -> str:
    """One JSON object on one line, strict and in ASCII."""
    return json.dumps(json.loads(json_text(content)), allow_nan=False, separators=(", ", ": "))


def notice_text(about: str, text: str, *, width: int = 80) -> list[str]:
    """A remark on a record or a paper, wrapped below itself."""
    lines = []
    for number, line in enumerate(text.splitlines() or [""]):
        lead = f"{printable(about)}: " if about and not number else ""
        lines += wrapped(lead + printable(line), max(width, 60), "" if not number else "  ", "  ")
    return lines
