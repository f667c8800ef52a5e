"""Rate sensitivity, upturn and the course over temperature of a merged material, as text."""

from __future__ import annotations

import math
from collections.abc import Sequence

from shpb.merge.campaign import CourseAtRate, MergedMaterial, RateStudy
from shpb.merge.peak_shift import PeakShift
from shpb.merge.sensitivity import RateSensitivity
from shpb.merge.temperature import TemperatureCourse
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.merge_words import chosen_strain, extreme_words, interval_text, kelvin_text, plain, rate_text
from shpb.view.text import wrapped

_TESTS = (("quasi_static", "quasi-static"), ("bar", "bars"), ("all", "all"))
_INDENT = "  "


def _strains(material: MergedMaterial, *, full: bool) -> list[float]:
    if full:
        return sorted({study.plastic_strain for study in material.rates})
    chosen = chosen_strain(material)
    return [] if chosen is None else [chosen]


def sensitivity_lines(material: MergedMaterial, width: int, *, full: bool) -> list[str]:
    """Exponent m = d ln(stress)/d ln(rate) by temperature, within each kind of test and over all."""
    lines: list[str] = []
    for strain in _strains(material, full=full):
        studies = [study for study in material.rates if study.plastic_strain == strain]
        if not studies:
            continue
        lines += wrapped(
            f"Rate sensitivity m = d ln(stress)/d ln(rate) at plastic strain {strain:g}, with 95 % interval, and "
            "stress per decade of rate",
            width,
        )
        lines.append(
            f"{'T K':>5}  {'tests':<12}  {'m':>9} {'u':>8}  {'interval':<20}  {'MPa/decade':>10} {'u':>5}"
        )
        for study in studies:
            lines += _study(study, width, full=full)
    return lines or wrapped("Rate sensitivity: no temperature has tests at two rates.", width)


def _study(study: RateStudy, width: int, *, full: bool) -> list[str]:
    lines: list[str] = []
    for number, (key, name) in enumerate(_TESTS):
        kelvin = f"{study.temperature_k:.0f}" if number == 0 else ""
        head = f"{kelvin:>5}  {name:<12}  "
        held: RateSensitivity | None = getattr(study.sensitivities, key)
        if held is None:
            why = study.sensitivities.reasons.get(key, "")
            lines += wrapped(f"not known: {plain(why)}", width, head)
            continue
        m, decade = held.exponent, held.per_decade_pa.scaled(1e-6)
        lines.append(
            f"{head}{to_uncertainty(m.value, m.u):>9} {uncertainty(m.u):>8}  {interval_text(m):<20}  "
            f"{to_uncertainty(decade.value, decade.u):>10} {uncertainty(decade.u):>5}"
        )
        if full:
            lines += wrapped(_more(held), width, " " * len(head))
    return lines


def _more(held: RateSensitivity) -> str:
    low, high = (rate_text(rate) for rate in held.rates_per_s)
    c = held.coefficient
    said = (
        f"{low} to {high} /s; C {to_uncertainty(c.value, c.u)} (u {uncertainty(c.u)}) at "
        f"{held.reference_rate_per_s:g} /s; chi2 {held.chi2:.1f} of {held.freedom}"
    )
    volume = held.activation_volume_m3
    if volume is None:
        return f"{said}; no activation volume, the stress does not rise with rate"
    volume = volume.scaled(1e27)
    end = "no upper end" if held.activation_volume_open else f"95 % {interval_text(volume)}"
    return f"{said}; activation volume {to_uncertainty(volume.value, volume.u)} nm3 (u {uncertainty(volume.u)}, {end})"


def upturn_lines(material: MergedMaterial, width: int, *, full: bool) -> list[str]:
    """Whether the stress turns up at high rates, by temperature."""
    lines: list[str] = []
    for strain in _strains(material, full=full):
        for study in material.rates:
            if study.plastic_strain != strain:
                continue
            found = study.upturn
            lines += wrapped(
                f"{found.outcome.value}; {plain(found.reason)}",
                width,
                f"{_INDENT}{study.temperature_k:.0f} K  ",
                _INDENT + " " * 8,
            )
        if lines and not lines[0].startswith("Upturn"):
            lines.insert(0, f"Upturn at high rates, at plastic strain {strain:g}")
    return lines or ["Upturn at high rates: no temperature has tests at two rates."]


def course_lines(material: MergedMaterial, width: int, *, full: bool) -> list[str]:
    """Stress against temperature by rate: rise, minimum, peak; and how the peak moves with rate."""
    strains = _strains(material, full=full)
    if full:
        strains = sorted({course.plastic_strain for course in material.courses})
    lines: list[str] = []
    for strain in strains:
        part = [course for course in material.courses if course.plastic_strain == strain]
        if not part:
            continue
        lines.append(f"Stress over temperature at plastic strain {strain:g}")
        for course in part:
            head = f"{_INDENT}{rate_text(course.rate_per_s)} /s".ljust(14)
            lines += wrapped(_course_words(course), width, head)
    lines = lines or wrapped("Stress over temperature: no rate has tests at two temperatures.", width)
    return lines + wrapped(_shift_words(material.shift, material.why_no_shift), width, "Peak shift".ljust(14))


def _course_words(one: CourseAtRate) -> str:
    course = one.course
    if course is None:
        return f"not known: {plain(one.why_not)}; it takes three"
    said = plain(course.reason)
    if not course.rises:
        return f"{said}; {_range_words(course)}"
    return f"{said}; {extreme_words('minimum', course.minimum)}; {extreme_words('peak', course.peak)}"


def _range_words(course: TemperatureCourse) -> str:
    first, last = (
        f"{to_uncertainty(course.stress_pa[i] / 1e6, course.u_pa[i] / 1e6)} MPa at "
        f"{kelvin_text(float(course.temperature_k[i]))}"
        for i in (0, -1)
    )
    return f"from {first} to {last}"


def _shift_words(shift: PeakShift | None, why_not: str) -> str:
    if shift is None:
        return f"not known: {plain(why_not)}"
    kelvin = shift.kelvin_per_decade
    said = (
        f"{to_uncertainty(kelvin.value, kelvin.u)} K for each decade of rate (u {uncertainty(kelvin.u)} K, 95 % "
        f"{interval_text(kelvin)} K), from the rates {_rates(shift.used)} /s"
    )
    energy = shift.activation_energy_j_per_mol
    if energy is not None:
        energy = energy.scaled(1e-3)
        low, high = energy.interval
        end = (
            f"at least {to_uncertainty(low, energy.u)}, no upper end"
            if shift.energy_open or not math.isfinite(high)
            else f"95 % {interval_text(energy)}"
        )
        value = to_uncertainty(energy.value, energy.u)
        said += f"; activation energy {value} kJ/mol (u {uncertainty(energy.u)}, {end})"
    if shift.left_out:
        said += f"; no bracketed peak at {_rates(shift.left_out)} /s"
    return said


def _rates(rates: Sequence[float]) -> str:
    return ", ".join(map(rate_text, rates))
