"""The merged part of a campaign's page: figures, table, sensitivities and laws with intervals and warnings."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

import numpy as np

from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.merge_words import for_people, plain, rate_text, why_in_words
from shpb.view.report.html import Column, Markup, element, pairs, paragraphs, section, table
from shpb.view.report.merge_figures import material_figures
from shpb.view.report.merge_stored import Material, Merge, materials_of
from shpb.view.report.shot_inputs import quantity_words
from shpb.view.text import NOT_KNOWN, rounded

_TESTS = {"quasi_static": "quasi-static", "bar": "bars", "all": "all"}


def merge_section(merge: Merge, changed: Sequence[str]) -> Markup:
    """Everything that was merged, material by material."""
    root, settings = merge.attributes["/"], merge.settings
    said = [
        f"{len(merge.used)} files merged, {len(merge.left_out)} left out; made {root.get('created_utc', NOT_KNOWN)} "
        f"by shpb {root.get('program_version', NOT_KNOWN)}",
        "the bar faces' indentation is "
        + (
            "taken out of the strain of the bars"
            if settings.indentation_out
            else "left in the strain of the bars"
        ),
        f"rate coefficients C at the reference rate {settings.reference_rate_per_s:g} /s",
    ]
    parts: list[Markup] = [paragraphs(said)]
    if changed:
        warning = element("strong", "Not up to date: merge again. ")
        parts.append(element("p", warning, f"{'; '.join(changed)}.", class_="finding is-restrict"))
    if merge.left_out:
        rows = [(one.origin, plain(one.why)) for one in merge.left_out]
        parts.append(table("Left out of the merge", [Column("File"), Column("Why")], rows))
    for material in materials_of(merge):
        parts += _material(material)
    files = [(one.name, one.place, element("span", one.sha256, class_="hash")) for one in merge.used]
    parts.append(element("h3", "Files that were merged"))
    parts.append(table("With their hashes", [Column("File"), Column("Place"), Column("sha256")], files))
    return section("Merged", *parts, identity="merged")


def _material(material: Material) -> Iterator[Markup]:
    yield element("h3", f"{material.name}, {material.kind}")
    yield element("div", *material_figures(material), class_="figures")
    yield _conditions(material)
    yield _stresses(material)
    strain = material.strain
    if strain is not None:
        yield _sensitivities(material, strain)
        yield _upturns(material, strain)
        yield _courses(material, strain)
    yield from _laws(material)


def _conditions(material: Material) -> Markup:
    columns = [
        Column("No", True), Column("Rate (1/s)", True), Column("T (K)", True), Column("Tests", True),
        Column("By", short=True), Column("Files"), Column("Disagrees"),
    ]  # fmt: skip
    rows = [
        (
            number,
            rate_text(float(one["mean_rate"])),
            f"{float(one['temperature']):.0f}",
            len(one["files"]),
            one["range"],
            ", ".join(map(str, one["files"])),
            plain("; ".join(map(str, one["outlying"]))),
        )
        for number, one in enumerate(material.conditions, 1)
    ]
    return table("Conditions: mean true rate, temperature at the start", columns, rows)


def _stresses(material: Material) -> Markup:
    strains = sorted(set(material.column("table/plastic_strain").tolist()))
    if not strains:
        return element("p", "No condition is valid at any of the chosen plastic strains.")
    cells: dict[tuple[int, float], str] = {}
    for condition, strain, stress, u in zip(
        *(
            material[f"table/{name}"].tolist()
            for name in ("condition", "plastic_strain", "stress", "u_stress")
        ),
        strict=True,
    ):
        wide = 2e-6 * u
        cells[int(condition), strain] = f"{to_uncertainty(1e-6 * stress, wide)} ± {uncertainty(wide)}"
    columns = [Column("No", True), Column("Rate (1/s)", True), Column("T (K)", True)]
    columns += [Column(f"{strain:g}", True) for strain in strains]
    rows = [
        (
            number + 1,
            rate_text(float(one["mean_rate"])),
            f"{float(one['temperature']):.0f}",
            *(cells.get((number, strain), "") for strain in strains),
        )
        for number, one in enumerate(material.conditions)
    ]
    return table(
        "True stress (MPa) at true plastic strain, ± U with k = 2 (own and shared parts)", columns, rows
    )


def _estimate(material: Material, group: str, name: str, place: int, factor: float = 1.0) -> tuple[str, str]:
    """A value with its 95 % interval, and its standard uncertainty; an open end is said."""
    value, u, low, high = (
        factor * float(material[f"{group}/{start}{name}"][place]) for start in ("", "u_", "low_", "high_")
    )
    ends = [to_uncertainty(end, u) if math.isfinite(end) else "no end" for end in (low, high)]
    return f"{to_uncertainty(value, u)} ({ends[0]} to {ends[1]})", uncertainty(u)


def _sensitivities(material: Material, strain: float) -> Markup:
    group = "rate_sensitivity"
    here = np.flatnonzero(material.column(f"{group}/plastic_strain") == strain)
    if not here.size:
        return element("p", "Rate sensitivity: no temperature has tests at two rates.")
    rows = []
    for place in here.tolist():
        kelvin = f"{material[f'{group}/temperature'][place]:.0f}"
        which = material.words(f"{group}/tests")[place]
        why = material.words(f"{group}/why_not")[place]
        head = (kelvin, _TESTS.get(which, which))
        if why or not np.isfinite(material[f"{group}/m"][place]):
            rows.append((*head, "not known", "", "", "", plain(why)))
            continue
        m, u_m = _estimate(material, group, "m", place)
        decade, u_decade = _estimate(material, group, "stress_per_decade", place, 1e-6)
        ends = [rate_text(float(material[f"{group}/{end}_rate"][place])) for end in ("least", "greatest")]
        rows.append((*head, m, u_m, decade, u_decade, f"{ends[0]} to {ends[1]} /s"))
    columns = [
        Column("T (K)", True), Column("Tests", short=True), Column("m (95 %)", True), Column("u", True),
        Column("MPa a decade (95 %)", True), Column("u", True), Column("Over"),
    ]  # fmt: skip
    return table(f"Rate sensitivity m = d ln(stress)/d ln(rate) at plastic strain {strain:g}", columns, rows)


def _upturns(material: Material, strain: float) -> Markup:
    here = np.flatnonzero(material.column("upturn/plastic_strain") == strain).tolist()
    rows = [
        (
            f"{material['upturn/temperature'][place]:.0f}",
            material.words("upturn/outcome")[place],
            plain(material.words("upturn/reason")[place]),
        )
        for place in here
    ]
    if not rows:
        return Markup("")
    columns = [Column("T (K)", True), Column("Upturn"), Column("Because")]
    return table(f"Upturn at high rates, at plastic strain {strain:g}", columns, rows)


def _courses(material: Material, strain: float) -> Markup:
    rows = []
    for number in material.below("temperature_courses"):
        one = material.facts(f"temperature_courses/{number}")
        if float(one.get("plastic_strain", math.nan)) != strain:
            continue
        said = plain(str(one.get("reason") or one.get("why_not") or ""))
        peak = str(one.get("peak", ""))
        if one.get("rises") and "peak_temperature" in one:
            low, high = one["peak_interval"]
            peak = (
                f"at {to_uncertainty(one['peak_temperature'], one['u_peak_temperature'])} K "
                f"(95 % {to_uncertainty(low, one['u_peak_temperature'])} to "
                f"{to_uncertainty(high, one['u_peak_temperature'])} K), "
                f"{to_uncertainty(1e-6 * one['peak_stress'], 1e-6 * one['u_peak_stress'])} MPa"
            )
        rows.append((rate_text(float(one["rate"])), said, peak if one.get("rises") else ""))
    if not rows:
        return element("p", "Stress over temperature: no rate has tests at three temperatures.")
    columns = [Column("Rate (1/s)", True), Column("Course"), Column("Peak")]
    return table(f"Stress over temperature at plastic strain {strain:g}", columns, rows)


# --- laws ----------------------------------------------------------------------------------------------


def _laws(material: Material) -> Iterator[Markup]:
    keys = material.laws
    if keys:
        columns = [
            Column("Law"), Column("Points", True), Column("AICc", True), Column("Left out (%)", True),
            Column("Scatter", True), Column("Warnings", True),
        ]  # fmt: skip
        rows = []
        for key in keys:
            facts = material.facts(f"laws/{key}")
            left = facts.get("left_out_rms")
            rows.append(
                (
                    facts["name"],
                    material[f"laws/{key}/points/stress"].size,
                    f"{facts['aicc']:.1f}" if "aicc" in facts else "",
                    "" if left is None else rounded(100 * left, 2),
                    f"{facts['scatter_factor']:.1f}",
                    len(facts["warnings"]),
                )
            )
        yield table(
            "Laws. AICc compares those fitted to the same points, the lowest is best; left out: error of predicting "
            "each condition from the others; scatter: about the law, in stated uncertainties",
            columns,
            rows,
        )
    for key in keys:
        yield from _law(material, key)
    reasons = zip(material.words("laws_not_fitted/key"), material.words("laws_not_fitted/why"), strict=True)
    others = [(key, plain(why_in_words(key, why))) for key, why in reasons]
    if others:
        yield table("Laws that were not fitted", [Column("Law"), Column("Why")], others)


def _law(material: Material, key: str) -> Iterator[Markup]:
    facts, base = material.facts(f"laws/{key}"), f"laws/{key}"
    yield element("h4", str(facts["name"]))
    known = material.facts(f"{base}/facts")
    rows: list[tuple[str, object]] = [
        ("Formula", facts["formula"]),
        ("Fitted to", _scope(material, base)),
        *((name.replace("_", " "), quantity_words(name, value)) for name, value in known.items()),
        ("Source", facts["source"]),
    ]
    yield pairs("The law, and what it takes as known", rows)
    columns = [
        Column("Parameter"), Column("Value", True), Column("Unit", short=True), Column("u", True),
        Column("95 % interval", short=True), Column("Meaning"), Column("Remark"),
    ]  # fmt: skip
    yield table(f"Parameters of {facts['name']}", columns, list(_parameters(material, f"{base}/parameters")))
    warnings = [plain(str(one)) for one in facts["warnings"]]
    if not facts["converged"]:
        warnings.insert(0, "the search did not come to its end: do not use these numbers")
    if warnings:
        yield element(
            "div", element("p", element("strong", "Warnings")), paragraphs(warnings), class_="finding"
        )


def _scope(material: Material, base: str) -> str:
    rate, kelvin = (material[f"{base}/points/{name}"] for name in ("rate", "start_temperature"))
    count = len(set(material[f"{base}/points/condition"].tolist()))
    ends = " to ".join(dict.fromkeys(rate_text(float(end)) for end in (rate.min(), rate.max())))
    kelvins = " to ".join(dict.fromkeys(f"{end:.0f}" for end in (kelvin.min(), kelvin.max())))
    return f"{rate.size} points of {count} condition{'s' * (count != 1)}; {ends} /s, {kelvins} K"


def _parameters(material: Material, base: str) -> Iterator[tuple[object, ...]]:
    names, units = material.words(f"{base}/name"), material.words(f"{base}/unit")
    for place, (name, si) in enumerate(zip(names, units, strict=True)):
        unit, factor = for_people(si, 1.0)
        value, u, low, high = (
            factor * float(material[f"{base}/{which}"][place]) for which in ("value", "u", "low", "high")
        )
        remark = plain(material.words(f"{base}/reason")[place])
        meaning = material.words(f"{base}/meaning")[place]
        if not math.isfinite(u):
            standing = material.words(f"{base}/standing")[place]
            held = rounded(value) if math.isfinite(value) else ""
            yield name, held, unit, "", "none", meaning, remark or standing
            continue
        ends = [to_uncertainty(end, u) if math.isfinite(end) else "no end" for end in (low, high)]
        yield name, to_uncertainty(value, u), unit, uncertainty(u), f"{ends[0]} to {ends[1]}", meaning, remark
