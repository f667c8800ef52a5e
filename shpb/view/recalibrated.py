"""A campaign by another calibration, as plain text and for other programs: what changed in each shot and in all."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import asdict

from shpb.rig.calibration import Calibration
from shpb.trust.compared import Compared, Numbers
from shpb.view.summary import Json, calibration_json, head
from shpb.view.text import padded, printable, wrapped

_WIDEST_NAME, _LEAST_WIDTH = 16, 76
_CHANGES = (("flow_stress_change", "flow stress"), ("strain_change", "strain"), ("rate_change", "rate"))


def recalibrated_text(
    compared: Sequence[Compared],
    calibration: Calibration,
    *,
    other_rigs: Sequence[tuple[str, str]] = (),
    failed: Sequence[tuple[str, str]] = (),
    width: int = 80,
) -> str:
    """Return what another calibration changed, one line a shot and a summary below.

    Parameters
    ----------
    compared : sequence of Compared
        Every shot that was reduced again.
    calibration : Calibration
        The one it was reduced with.
    other_rigs, failed : sequence of (name, why)
        Shots of other rigs, which were left alone, and those that could not be reduced.
    width : int
        Columns that no line passes, at least 76: the table needs them.
    """
    width = max(width, _LEAST_WIDTH)
    lines: list[str] = []
    if compared:
        name = min(max(4, *(len(printable(one.shot_id)) for one in compared)), _WIDEST_NAME)
        lines += [
            f"{'':<{name}} verdict            change in %",
            f"{'shot':<{name}} before   now        stress  strain    rate  against it now",
            *(_line(one, name, width) for one in compared),
            "",
        ]
    lines += _summary(compared, calibration, width)
    for shot, why in other_rigs:
        lines += wrapped(f"{printable(shot)}: left alone, {printable(why)}.", width)
    if failed:
        lines += wrapped(f"Not reduced: {', '.join(printable(shot) for shot, _ in failed)}.", width)
    return "\n".join(line.rstrip() for line in lines)


def _line(one: Compared, name: int, width: int) -> str:
    changes = "".join(f"{_percent(getattr(one, field)):>8}" for field, _ in _CHANGES)
    head = (
        f"{padded(printable(one.shot_id), name)} {one.before.verdict.upper():<8} "
        f"{one.after.verdict.upper():<8} {changes}  "
    )
    reasons = printable(", ".join(one.after.reasons))
    return head + padded(reasons, width - len(head)) if len(head) < width else head[:width]


def _percent(share: float | None) -> str:
    return "-" if share is None else f"{100 * share:+.2f}"


def _summary(compared: Sequence[Compared], calibration: Calibration, width: int) -> list[str]:
    by = f"by the calibration {printable(calibration.name)} of {printable(calibration.date)}"
    count = len(compared)
    lines = wrapped(f"{count} shot{'' if count == 1 else 's'} reduced again {by}.", width)
    if not compared:
        return lines
    before = dict.fromkeys(_stands_on(one.before) for one in compared)
    lines += wrapped(f"Before: {'; '.join(before)}. Those results stand as they were.", width)
    lines += wrapped(f"Change on average: {'; '.join(_mean_changes(compared))}.", width)
    turned = [one for one in compared if one.before.verdict != one.after.verdict]
    if turned:
        words = ", ".join(
            f"{printable(one.shot_id)} from {one.before.verdict} to {one.after.verdict}" for one in turned
        )
        lines += wrapped(f"Verdicts that changed: {words}.", width)
    else:
        lines += ["No verdict changed."]
    lines += wrapped(
        "stress: mean over the true flow stresses that both know; strain: true, at the end of the loading; rate: "
        "mean engineering strain rate over what counted before.",
        width,
    )
    return lines


def _mean_changes(compared: Sequence[Compared]) -> Iterator[str]:
    """Mean change and range of each, in words."""
    for field, words in _CHANGES:
        changes = [100 * value for one in compared if (value := getattr(one, field)) is not None]
        if not changes:
            yield f"{words} not known in both"
            continue
        mean, least, greatest = sum(changes) / len(changes), min(changes), max(changes)
        spread = f" ({least:+.2f} to {greatest:+.2f} %)" if len(changes) > 1 else ""
        yield f"{words} {mean:+.2f} %{spread}"


def _stands_on(numbers: Numbers) -> str:
    day = f" of {printable(numbers.date)}" if numbers.date else ""
    if not numbers.calibration:
        return f"the values of the rig file{day}"
    return f"the calibration {printable(numbers.calibration)}{day}"


def compared_json(one: Compared) -> Json:
    """One shot for other programs; changes are shares."""
    return {
        "shot_id": one.shot_id,
        "before": _numbers_json(one.before),
        "after": _numbers_json(one.after),
        "flow_stress_changes": [
            {"at_strain": at, "change": change} for at, change in one.flow_stress_changes.items()
        ],
        **{field: getattr(one, field) for field, _ in _CHANGES},
    }


def _numbers_json(numbers: Numbers) -> Json:
    flow = [{"at_strain": at, "stress_pa": stress} for at, stress in numbers.flow_stress_pa.items()]
    return {**asdict(numbers), "flow_stress_pa": flow}


def recalibrated_json(shots: Sequence[Json], calibration: Calibration) -> Json:
    """All shots for other programs, with the calibration that was used."""
    return {
        **head("shpb recalibrated"),
        "calibration": calibration_json(calibration),
        "shots": list(shots),
    }


__all__ = ["Compared", "compared_json", "recalibrated_json", "recalibrated_text"]
