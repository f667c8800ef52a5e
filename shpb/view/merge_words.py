"""What is said of a merge, in words that text and figures may share. ASCII throughout."""

from __future__ import annotations

import re
from collections import Counter

from shpb.fitting.weighted_line import Estimate
from shpb.merge.campaign import Merged, MergedMaterial, NotFitted
from shpb.merge.material_curve import RateRange
from shpb.merge.repeats import Repeats
from shpb.merge.temperature import Extreme, Place
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.text import printable

_USUAL_STRAIN = 0.10  # shown where several strains have as many conditions
_POWER = re.compile(r"\d(?:\.\d+)?e\+0\d(?!\d)")  # 1.64e+03
_ACROSS = ", or say across_peak=True to fit all the same"  # a choice that the command line does not offer
_CALL = re.compile(r"State it, e\.g\. with_facts\((\w+)=\.\.\.\)")

# Units of facts and parameters for people: SI unit to (unit, factor from SI).
_FOR_PEOPLE = {"Pa": ("MPa", 1e-6), "1": ("", 1.0)}


def for_people(unit: str, size: float) -> tuple[str, float]:
    """Unit in which a number of this SI unit is shown, and the factor to it."""
    if unit == "m" and 0 < size < 1e-6:
        return "nm", 1e9
    if unit == "Pa" and size >= 1e10:
        return "GPa", 1e-9
    return _FOR_PEOPLE.get(unit, (unit, 1.0))


def rate_text(rate_per_s: float) -> str:
    """A rate without unit: three digits, whole numbers from 100 on, no exponent between 0.0001 and 10 million."""
    return f"{rate_per_s:.0f}" if 100 <= rate_per_s < 1e7 else f"{rate_per_s:.3g}"


def kelvin_text(temperature_k: float) -> str:
    """A temperature in kelvin, with the degrees Celsius that labs speak of."""
    return f"{temperature_k:.0f} K ({temperature_k - 273.15:.0f} C)"


def counted(count: int, what: str) -> str:
    """``1 test``, ``2 tests``."""
    return f"{count} {what}{'' if count == 1 else 's'}"


def headline(merged: Merged) -> str:
    """What was merged, in one sentence."""
    ranges = Counter(curve.range for curve in merged.curves)
    names = ", ".join(printable(name) for name in dict.fromkeys(m.material for m in merged.materials))
    return (
        f"{names}: {counted(ranges[RateRange.BAR], 'bar shot')} and "
        f"{counted(ranges[RateRange.QUASI_STATIC], 'quasi-static test')} merged, "
        f"{counted(len(merged.left_out), 'file')} left out."
    )


def choices_sentence(merged: Merged) -> str:
    """How it was merged: what a reader of any number of it must know."""
    settings = merged.settings
    strains = ", ".join(f"{strain:g}" for strain in settings.strains)
    faces = (
        "the bar faces' indentation taken out of the strain of the bars"
        if settings.indentation_out
        else "the bar faces' indentation left in the strain of the bars (quasi-static curves have none)"
    )
    return (
        f"{faces}; true stress at true plastic strain {strains}; shots enter only inside the span that counts; rate "
        f"coefficients C at the reference rate {settings.reference_rate_per_s:g} /s"
    )


def title(material: MergedMaterial) -> str:
    """Name and kind of test of one merged material."""
    return f"{printable(material.material)}, {material.kind.value}"


def chosen_strain(material: MergedMaterial) -> float | None:
    """The plastic strain at which most conditions have a stress, of several the one nearest to 0.1."""
    counts = Counter(row.plastic_strain for row in material.rows)
    if not counts:
        return None
    return max(counts, key=lambda strain: (counts[strain], -abs(strain - _USUAL_STRAIN)))


def span_text(condition: Repeats) -> str:
    """Plastic strains that a condition covers; where its repeats end at different strains, those all of them cover."""
    grid, common = condition.plastic_strain, condition.common_span
    whole = f"{grid[0]:.3f}-{grid[-1]:.3f}"
    if bool(condition.common.all()) or len(condition.curves) == 1:
        return whole
    if common is None:
        return f"{whole}, none in common"
    return f"{whole}, all {common[0]:.3f}-{common[1]:.3f}"


def interval_text(estimate: Estimate, factor: float = 1.0) -> str:
    """Both ends of the 95 % interval, rounded as the estimate is; an open end is said."""
    low, high = (
        to_uncertainty(end * factor, estimate.u * factor) if abs(end) < float("inf") else "no end"
        for end in estimate.interval
    )
    return f"{low} to {high}"


def extreme_words(name: str, extreme: Extreme) -> str:
    """Where a minimum or a peak lies."""
    if extreme.place is not Place.INSIDE or extreme.temperature_k is None or extreme.interval_k is None:
        return f"{name} {extreme.place.value}"
    low, high = (to_uncertainty(end, extreme.u_temperature_k) for end in extreme.interval_k)
    stress = None if extreme.stress_pa is None else extreme.stress_pa / 1e6
    u_stress = None if extreme.u_stress_pa is None else extreme.u_stress_pa / 1e6
    return (
        f"{name} at {to_uncertainty(extreme.temperature_k, extreme.u_temperature_k)} K (u "
        f"{uncertainty(extreme.u_temperature_k)} K, 95 % {low} to {high} K), {to_uncertainty(stress, u_stress)} MPa (u "
        f"{uncertainty(u_stress)} MPa)"
    )


def plain(text: str) -> str:
    """A sentence from the merge, fit for a terminal: no control characters, no powers of ten that can be written out.

    >>> plain("only the rate 1.64e+03 /s")
    'only the rate 1640 /s'
    """
    return _POWER.sub(lambda found: f"{float(found[0]):.0f}", printable(text)).replace("\u2026", "...")


def why_not_fitted(one: NotFitted) -> str:
    """Why a law was not fitted, with the mend as it is typed."""
    return why_in_words(one.model.key, one.why)


def why_in_words(key: str, why: str) -> str:
    """The same, by the key of the law and the reason as it is stored."""
    why = why.removeprefix("points: ").removeprefix(f"{key}: ").replace(_ACROSS, "")
    return _CALL.sub(lambda call: f"State it: --fact {_typed(call[1])}", why)


def reasons_not_fitted(material: MergedMaterial) -> list[tuple[list[str], str]]:
    """Laws that were not fitted by their keys, those with one reason together, and the reason."""
    found: dict[str, list[str]] = {}
    for one in material.not_fitted:
        why = plain(why_not_fitted(one).replace(one.model.name, "the law"))
        found.setdefault(why, []).append(one.model.key)
    return [(keys, why) for why, keys in found.items()]


def _typed(fact: str) -> str:
    """A fact of a law as it stands on the command line, with a value of the right size."""
    for end, unit, example in (("_k", "_C", "1083"), ("_pa", "_GPa", "45"), ("_m", "_nm", "0.256")):
        if fact.endswith(end):
            return f"{fact.removesuffix(end)}{unit}={example}"
    return f"{fact}=..."
