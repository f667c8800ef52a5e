"""Sources of sensitivity that do not fit, in words: what each says, and what to check."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence

import numpy as np

from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.sensitivity.joint_fit import JointFit, Outlier

# Ratios that a wrong bridge arrangement or a slip of the pen makes of a sensitivity; told within 3 %.
_ALIKE = 0.02  # strains per volt this near each other are taken for the same
_SLIPS = {
    2.0: "a factor of two: the bridge arrangement or one of two gauges",
    4.0: "a factor of four: the bridge arrangement",
    1.3: "a factor of 1 + nu: transverse gauges that are stated or are not",
    2.6: "a factor of 2 (1 + nu): the bridge arrangement",
    10.0: "a factor of ten: a slip in a resistor or a gain",
    100.0: "a factor of a hundred: a slip in a resistor or a gain",
    1000.0: "a factor of a thousand: a unit",
}


def findings_of_outliers(outliers: Sequence[Outlier]) -> list[CalibrationFinding]:
    """Sources that were left out, what they say, what to check."""
    return [
        CalibrationFinding(
            check="odd one out",
            measured=f"{_what_it_says(one)}: {'it is' if len(one.sayings) == 1 else 'they are'} left out of the result",
            limit=f"{abs(one.away / one.residual) * 100:.2g} % (one standard uncertainty)",
            action=f"Check {one.sayings[0].doubt}.{_slip(one.away)}",
            grave=one.sayings[0].kind != "stated" or bool(_slip(one.away)),
        )
        for one in outliers
    ]


def findings_of_contradiction(
    fit: JointFit, possible: Sequence[Outlier], birge: float
) -> list[CalibrationFinding]:
    """Sources that contradict each other although all stay, who might be wrong, and how much u has grown."""
    if not fit.contradicted:
        return []
    said = "; or ".join(_what_it_says(one) for one in possible) or "no single source explains it"
    doubts = "; ".join(dict.fromkeys(one.sayings[0].doubt for one in possible)) or "all sources"
    slips = "".join(dict.fromkeys(_slip(one.away) for one in possible))
    return [
        CalibrationFinding(
            check="sources of sensitivity disagree",
            measured=f"chi2 is {fit.chi2:.1f} for {fit.freedom}: {said}",
            limit="what chance makes of their uncertainties (5 %)",
            action=f"All stay in the result, with every uncertainty {birge:.1f} times as large. Check {doubts}.{slips}",
            grave=birge > 2,
        )
    ]


def findings_of_exchange(stated: Mapping[str, float], found: Mapping[str, float]) -> list[CalibrationFinding]:
    """Stations whose stated values fit each other's measured ones: two gauges or two lines of the rig file exchanged.

    Both mappings are strain per volt by station. To be asked where the sources contradict each other.
    """
    findings = []
    for one, other in itertools.combinations(found, 2):
        crossed = max(abs(np.log(found[one] / stated[other])), abs(np.log(found[other] / stated[one])))
        straight = min(abs(np.log(found[one] / stated[one])), abs(np.log(found[other] / stated[other])))
        if crossed < _ALIKE and straight > 2 * _ALIKE:
            words, beside = one.replace("_", " "), other.replace("_", " ")
            findings.append(
                CalibrationFinding(
                    check="stations exchanged",
                    measured=f"the {words} is as sensitive as is stated of the {beside}, and the other way round",
                    limit=f"{100 * _ALIKE:g} % apart",
                    action="Look whether gauges, amplifiers or their lines in the rig file were exchanged.",
                    grave=True,
                )
            )
    return findings


def _what_it_says(one: Outlier) -> str:
    """In the direction of strain per volt: who says more would have the gauge see more strain."""
    away = np.expm1(one.sayings[0].toward_q * one.away)
    more = "more" if away > 0 else "less"
    size = f"{100 * abs(away):.2g} %" if abs(away) < 1 else f"{1 + away:.3g} times as much, {more},"
    names = " and ".join(saying.name for saying in one.sayings)
    says = "says" if len(one.sayings) == 1 else "say"
    return (
        f"the {names} {says} {size} {more if abs(away) < 1 else ''} strain per volt than all others".replace(
            "  ", " "
        )
    )


def _slip(away: float) -> str:
    size = float(np.exp(abs(away)))
    for factor, words in _SLIPS.items():
        if abs(size / factor - 1) < 0.03:
            return f" It looks like {words}."
    return ""
