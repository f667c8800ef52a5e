"""Several stored shots held against each other: their listing, and their stresses at equal strain."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np

from shpb.response.flow import plastic_strain
from shpb.trust.finding import Verdict, Weight
from shpb.trust.repeats import RepeatShot
from shpb.view.listing import ListRow
from shpb.view.report.stored import ReportedShot
from shpb.view.text import columns_of, padded, printable, rounded, wrapped
from shpb.view.wording import telling

_MOST_STRAINS = 4  # that 80 columns hold
_WIDEST_NAME = 16
_CELL = 13
COVERAGE = 2.0  # standard uncertainties in what stands behind +-: about 95 %


class At(NamedTuple):
    """Stress of a shot at one strain, and how far it is from that of the shot that is compared with.

    ``difference`` is a share of the other stress, ``u_difference`` its standard uncertainty: what both shots have from
    one rig does not count. Both are None for the shot that is compared with.
    """

    strain: float
    stress_pa: float
    u_pa: float
    difference: float | None
    u_difference: float | None


class Group(NamedTuple):
    """Shots of one material and kind of test: which one the others are held against, and where.

    ``shots`` holds shot id, mean engineering rate [1/s], temperature [K] and one entry a strain.
    """

    material: str
    kind: str
    plastic: bool  # whether the strains are plastic ones
    strains: tuple[float, ...]
    reference: str
    shots: tuple[tuple[str, float, float, tuple[At | None, ...]], ...]


def stored_list_row(shot: ReportedShot, repeat: RepeatShot | None) -> ListRow:
    """The line of one stored shot."""
    said = telling(shot.stored.findings)
    grave = tuple(one for one in said if one.weight is not Weight.NOTE) or said
    return ListRow(
        shot_id=shot.shot_id,
        verdict=shot.verdict.value,
        rate_per_s=float(shot.fact("response", "mean_strain_rate")),
        strain_span=shot.strain_span,
        flow=tuple(
            (one.at_strain, shot.plastic, one.stress_pa) for one in shot.flow() if one.stress_pa is not None
        ),
        reasons=", ".join(one.check for one in grave),
        repeat=repeat,
    )


def counts(shot: ReportedShot) -> bool:
    """Whether a part of a shot counts."""
    return shot.verdict is not Verdict.REJECT and shot.span is not None


def compared(shots: Sequence[ReportedShot]) -> list[Group]:
    """Stresses at equal strain of all shots that count, by material and kind.

    The others are held against the shot that has a stress at most of the strains, of several such the first. A
    group of one shot has nothing to be held against and is left out.
    """
    groups: dict[tuple[str, str, bool], list[ReportedShot]] = {}
    for shot in filter(counts, shots):
        sheet = shot.stored.sheet
        groups.setdefault((sheet.specimen.material, sheet.kind.value, shot.plastic), []).append(shot)
    return [_group(*about, held) for about, held in groups.items() if len(held) > 1]


def _group(material: str, kind: str, plastic: bool, shots: Sequence[ReportedShot]) -> Group:
    known = Counter(line.at_strain for shot in shots for line in shot.flow() if line.stress_pa is not None)
    often = sorted((strain for strain, many in known.items() if many > 1), key=lambda e: (-known[e], e))
    strains = tuple(sorted(often[:_MOST_STRAINS]))
    first = max(shots, key=lambda shot: sum(_stress_at(shot, strain) is not None for strain in strains))
    against = [_stress_at(first, strain) for strain in strains]
    lines = []
    for shot in shots:
        same_rig = _rig_of(shot) == _rig_of(first)
        found = [_stress_at(shot, strain) for strain in strains]
        cells = tuple(
            None if one is None else _difference(strain, one, None if shot is first else other, same_rig)
            for strain, one, other in zip(strains, found, against, strict=True)
        )
        rate, kelvin = (
            float(shot.fact("response", "mean_strain_rate")),
            float(shot.stored.sheet.temperature_k),
        )
        lines.append((shot.shot_id, rate, kelvin, cells))
    return Group(material, kind, plastic, strains, first.shot_id, tuple(lines))


def _rig_of(shot: ReportedShot) -> tuple[str, str]:
    rig = shot.stored.rig
    return rig.name, "" if rig.calibration is None else rig.calibration.sha256


class _Stress(NamedTuple):
    stress_pa: float
    u_pa: float
    u_shared_pa: float


def _stress_at(shot: ReportedShot, strain: float) -> _Stress | None:
    """True stress at a strain as the shot file has it, with u and the part of it that its rig shares."""
    line = next((one for one in shot.flow() if one.at_strain == strain), None)
    part = shot.span
    if line is None or line.stress_pa is None or part is None:
        return None
    modulus = shot.stored.sheet.specimen.young_modulus_pa
    axis = np.maximum.accumulate(
        plastic_strain(shot["response/true_strain"][part], shot["response/true_stress"][part], modulus)
    )
    whole, shared = (
        float(np.interp(strain, axis, shot[f"trust/{name}_true_stress_at_strain"][part]))
        for name in ("u", "u_shared")
    )
    return _Stress(line.stress_pa, whole, min(shared, whole))


def _difference(strain: float, one: _Stress, other: _Stress | None, same_rig: bool) -> At:
    if other is None or other.stress_pa == 0:
        return At(strain, one.stress_pa, one.u_pa, None, None)
    ratio = one.stress_pa / other.stress_pa
    off = [stress.u_shared_pa if same_rig else 0.0 for stress in (one, other)]
    parts = [
        (stress.u_pa**2 - shared**2) / stress.stress_pa**2
        for stress, shared in zip((one, other), off, strict=True)
    ]
    return At(strain, one.stress_pa, one.u_pa, ratio - 1, abs(ratio) * float(np.sqrt(max(sum(parts), 0.0))))


# --- words ---------------------------------------------------------------------------------------------


def compared_text(groups: Sequence[Group], *, width: int = 80) -> str:
    """Tables of the differences at equal strain; empty where there is nothing to compare."""
    width = max(width, 60)
    return "\n\n".join("\n".join(_table(one, width)) for one in groups)


def _table(group: Group, width: int) -> list[str]:
    kind = "true plastic strain" if group.plastic else "total true strain"
    title = f"{printable(group.material)}, {group.kind}: true stress at equal {kind}"
    lines = wrapped(title, width)
    if not group.strains:
        return [*lines, *wrapped("No two of these shots have a stress at one strain.", width)]
    name = min(max(4, *(columns_of(printable(one[0])) for one in group.shots)), _WIDEST_NAME)
    lines.append(
        f"{'shot':<{name}}{'1/s':>6}{'C':>6}"
        + "".join(f"{f'at {strain:g}':>{_CELL}}" for strain in group.strains)
    )
    for shot_id, rate, kelvin, cells in group.shots:
        head = f"{padded(printable(shot_id), name)}{rounded(rate):>6}{kelvin - 273.15:>6.0f}"
        lines.append((head + "".join(f"{cell_words(cell):>{_CELL}}" for cell in cells)).rstrip())
    return lines + wrapped(legend_words(group), width)


def legend_words(group: Group) -> str:
    """How the entries are to be read."""
    return (
        f"Per cent above (+) or below (-) {printable(group.reference)}, +- with k = 2, about 95 %, without what both "
        f"have from one rig. MPa: {printable(group.reference)} itself, and where it has no stress."
    )


def cell_words(cell: At | None) -> str:
    """One entry: MPa of the shot that is compared with, else the difference in per cent."""
    if cell is None:
        return "-"
    if cell.difference is None or cell.u_difference is None:
        return f"{rounded(cell.stress_pa / 1e6)} MPa"
    return f"{round(100 * cell.difference, 1) + 0.0:+.1f} +-{100 * COVERAGE * cell.u_difference:.1f}"


def compared_json(groups: Sequence[Group]) -> list[dict[str, Any]]:
    """The same for other programs."""
    return [
        {
            "material": one.material,
            "kind": one.kind,
            "strain_kind": "true plastic" if one.plastic else "total true",
            "reference": one.reference,
            "shots": [
                {
                    "shot_id": shot_id,
                    "mean_strain_rate_per_s": rate,
                    "temperature_k": kelvin,
                    "at": [
                        {
                            "strain": cell.strain,
                            "true_stress_pa": cell.stress_pa,
                            "u_true_stress_pa": cell.u_pa,
                            "difference": cell.difference,
                            "u_difference": cell.u_difference,
                        }
                        for cell in cells
                        if cell is not None
                    ],
                }
                for shot_id, rate, kelvin, cells in one.shots
            ],
        }
        for one in groups
    ]


def shot_brief_json(shot: ReportedShot, file: str) -> dict[str, Any]:
    """One stored shot of several, for other programs."""
    sheet = shot.stored.sheet
    span = shot.strain_span
    return {
        "file": file,
        "shot_id": shot.shot_id,
        "verdict": shot.verdict.value,
        "verdict_in_words": shot.verdict_sentence(),
        "material": sheet.specimen.material,
        "kind": sheet.kind.value,
        "temperature_k": float(sheet.temperature_k),
        "mean_strain_rate_per_s": float(shot.fact("response", "mean_strain_rate")),
        "true_strain_counts": None if span is None else list(span),
        "equilibrium": {
            "outcome": str(shot.fact("response", "equilibrium_outcome")),
            "mean_ratio": float(shot.fact("response", "equilibrium_mean_ratio")),
        },
        "flow": [
            {
                "at_strain": line.at_strain,
                "strain_kind": "true plastic" if shot.plastic else "total true",
                "true_stress_pa": line.stress_pa,
                "u_true_stress_pa": line.u_pa,
                "true_strain_rate_per_s": line.rate_per_s,
            }
            for line in shot.flow()
        ],
        "findings": [
            {"check": one.check, "weight": one.weight.value, "measured": one.measured, "action": one.action}
            for one in telling(shot.stored.findings)
        ],
    }
