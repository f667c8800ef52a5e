"""Repeats of one test as text and JSON: which shots are repeats, and which of them disagrees."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from shpb.trust.repeats import Disagreement, Repeats, RepeatShot, find_repeats
from shpb.view.text import printable, rounded, wrapped


def repeat_lines(shots: Iterable[RepeatShot], width: int) -> list[str]:
    """Lines on every group of repeats, none where there are no repeats."""
    lines: list[str] = []
    for group in find_repeats(shots):
        lines += wrapped(f"{_condition(group)}: {agreement_words(group)}.", width, "repeats: ", " " * 9)
    return lines


def _condition(group: Repeats) -> str:
    first, count = group.shots[0], len(group.shots)
    kelvin = sum(shot.temperature_k for shot in group.shots) / count
    rate = sum(shot.rate_per_s for shot in group.shots) / count
    names = ", ".join(printable(shot.shot_id) for shot in group.shots)
    return f"{names} ({printable(first.material)}, {first.kind}, {kelvin:.0f} K, {rounded(rate)} /s)"


def agreement_words(group: Repeats) -> str:
    """Whether the shots of a group agree, and which of them does not."""
    if not group.compared:
        return "no flow stress at a common strain"
    if not group.disagreements:
        return "agree"
    return "; ".join(_disagrees(one) for one in group.disagreements)


def _disagrees(one: Disagreement) -> str:
    strain = f"{'plastic' if one.plastic else 'total'} strain {one.strain:g}"
    beside = (
        f"{rounded(one.stress_pa / 1e6)} MPa against {rounded(one.others_pa / 1e6)} MPa at {strain} "
        f"({100 * one.share:+.1f} %, {100 * one.allowed_pa / one.others_pa:.1f} % allowed)"
    )
    if len(one.shot_ids) > 1:
        return f"{' and '.join(map(printable, one.shot_ids))} disagree, {beside}; either may be wrong"
    return f"{printable(one.shot_ids[0])} DISAGREES with the others, {beside}; look at it before merging"


def repeats_json(shots: Iterable[RepeatShot]) -> list[dict[str, Any]]:
    """Every group of repeats with its disagreements, fit for strict JSON."""
    return [
        {
            "shot_ids": [shot.shot_id for shot in group.shots],
            "material": group.shots[0].material,
            "kind": group.shots[0].kind,
            "compared": group.compared,
            "disagreements": [
                {
                    "shot_ids": list(one.shot_ids),
                    "at_strain": one.strain,
                    "strain_kind": "true plastic" if one.plastic else "total true",
                    "true_stress_pa": one.stress_pa,
                    "others_true_stress_pa": one.others_pa,
                    "allowed_difference_pa": one.allowed_pa,
                }
                for one in group.disagreements
            ],
        }
        for group in find_repeats(shots)
    ]
