"""Numbers of a shot with their uncertainty: what was read off, the ranked budget, the corrections."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from shpb.response.equilibrium import R_DEFINITION
from shpb.trust.budget import ALL_OUTPUTS, Contribution
from shpb.trust.finding import Verdict
from shpb.view.digits import to_uncertainty
from shpb.view.report.html import Column, Markup, element, pairs, section, table, together, typeset
from shpb.view.report.stored import ReportedShot
from shpb.view.text import NOT_KNOWN, rounded

_LEAST_SHARE = 0.0005  # of the variance, below which a line of the budget is only named


def numbers_section(shot: ReportedShot) -> Markup:
    """Rate, equilibrium, uncertainty, balances, and the table of flow stresses."""
    warned = Markup("")
    if shot.verdict is Verdict.REJECT:
        warned = element(
            "p", "This shot does not count: its numbers help to find the fault, not to describe the material."
        )
    return section(
        "Numbers",
        warned,
        _flow_table(shot),
        pairs("Read off the curve and the pulses", _numbers(shot)),
        element("p", f"{R_DEFINITION}; the floor is the least R that these gauges can see.", class_="note"),
        identity="numbers",
    )


def _flow_table(shot: ReportedShot) -> Markup:
    k, flow = shot.coverage_factor, shot.flow()
    kind = "true plastic strain" if shot.plastic else "total true strain"
    if not flow:
        return element("p", "No flow stress was asked for.")
    columns = [
        Column(kind.capitalize(), True),
        Column("True stress (MPa)", True),
        Column(f"U, k = {k:g} (MPa)", True),
        Column("True rate (1/s)", True),
    ]
    drawn = any(one.drawn_pa for one in flow)
    if drawn:
        columns.append(Column("95 % by the draws (MPa)", True))
    rows = []
    for one in flow:
        cells = [f"{one.at_strain:g}", "not in what counts", "", ""]
        if one.stress_pa is not None and one.u_pa is not None:
            wide = 1e-6 * k * one.u_pa
            stress = to_uncertainty(1e-6 * one.stress_pa, wide)
            cells = [f"{one.at_strain:g}", stress, rounded(wide, 2), rounded(one.rate_per_s)]
        if drawn:
            ends = one.drawn_pa
            cells.append(
                "" if ends is None else f"{rounded(1e-6 * ends[0], 4)} to {rounded(1e-6 * ends[1], 4)}"
            )
        rows.append(cells)
    return table(f"Flow stress, {shot.analysis.value}", columns, rows)


def _numbers(shot: ReportedShot) -> Iterator[tuple[str, object]]:
    def fact(name: str) -> float | None:
        value = shot.fact("response", name)
        return None if value is None else float(value)

    over = "over what counts" if shot.span else "over the whole loading"
    yield (
        "Strain rate",
        f"mean {rounded(fact('mean_strain_rate'))} /s engineering, {rounded(fact('mean_true_strain_rate'))} /s true, "
        f"{over}; range {rounded(fact('least_strain_rate'))} to {rounded(fact('greatest_strain_rate'))} /s, variation "
        f"{100 * (fact('strain_rate_variation') or 0.0):.0f} %",
    )
    found = shot.finding("force equilibrium")
    transits = fact("reverberations")
    yield (
        "Force equilibrium",
        (typeset(found.measured) if found else shot.equilibrium_words())
        + f"; {100 * (fact('equilibrium_share_within') or 0.0):.0f} % of samples within the limit of "
        f"{100 * (fact('equilibrium_limit') or 0.0):g} %"
        + (f"; after {rounded(transits)} elastic transits of the specimen" if transits is not None else ""),
    )
    yield "Uncertainty at mid-span", _at_middle(shot)
    yield "Back-extrapolated yield", _in(fact("yield_back_extrapolated"), 1e-6, "MPa true", "not given")
    yield "First slope", _in(fact("apparent_slope"), 1e-9, "GPa, apparent: not a modulus", "not given")
    yield (
        "Work",
        f"{rounded(fact('incident_work'))} J in the incident pulse, {rounded(fact('reflected_work'))} J reflected, "
        f"{rounded(fact('transmitted_work'))} J transmitted, {rounded(fact('specimen_work'))} J in the specimen",
    )
    for name, check in (("Final length", "final length"), ("Striker", "incident against striker")):
        one = shot.finding(check)
        if one is not None:
            yield name, typeset(one.measured)
    yield "Forward run against record", _closure(shot)


def _in(value: float | None, factor: float, unit: str, without: str) -> str:
    return without if value is None else f"{rounded(factor * value)} {unit}"


def _at_middle(shot: ReportedShot) -> str:
    middle, wave, said = shot.middle, shot.wave, []
    for word, name in (("stress", "stress"), ("strain", "strain"), ("rate", "strain_rate")):
        value = abs(float(shot[f"response/{name}_{wave}"][middle]))
        u = float(shot[f"trust/u_{name}_{wave}"][middle])
        own = np.sqrt(max(u**2 - float(shot[f"trust/u_shared_{name}_{wave}"][middle]) ** 2, 0.0))
        said.append(f"{word} {_share(u, value)} (the shot's own part {_share(float(own), value)})")
    return (
        f"standard, engineering, {shot.analysis.value}: {', '.join(said)}; times {shot.coverage_factor:g} for about "
        "95 %"
    )


def _share(u: float, value: float) -> str:
    return f"{100 * u / value:.2g} %" if value > 0 else NOT_KNOWN


def _closure(shot: ReportedShot) -> str:
    group = shot.stored.attributes.get("trust/closure")
    if not group:
        return "none: no forward run holds for this shot"
    return "; ".join(
        f"{pulse} {100 * group[f'{pulse}_rms']:.1f} % of its peak (budget {100 * group[f'{pulse}_expected']:.1f} %), "
        f"{1e6 * group[f'{pulse}_delay']:+.2f} µs (u {1e6 * group[f'{pulse}_u_delay']:.2f} µs)"
        for pulse in ("reflected", "transmitted")
    )


# --- where the uncertainty comes from ------------------------------------------------------------------


def budget_section(shot: ReportedShot) -> Markup:
    """Every source, ranked by its greatest share of the variance at mid-span, and whose it is."""
    if not shot.budget:
        return section("Uncertainty budget", element("p", "The file holds no budget."), identity="budget")
    names = (f"stress_{shot.wave}", f"strain_{shot.wave}", f"strain_rate_{shot.wave}", "force_difference")
    places = [ALL_OUTPUTS.index(name) for name in names]

    def greatest(line: Contribution) -> float:
        return max(abs(line.share[place]) for place in places)

    columns = [
        Column("Source of uncertainty"),
        Column("Whose", short=True),
        Column("Value", short=True),
        *(Column(f"{word} (%)", True) for word in ("Stress", "Strain", "Rate", "R")),
        Column("Remark"),
    ]
    ranked = sorted(shot.budget, key=lambda line: -greatest(line))
    rows = [
        (
            line.source,
            "rig's" if line.shared else "shot's",
            "assumed" if line.assumed else "stated",
            *(_percent(line.share[place]) for place in places),
            line.note,
        )
        for line in ranked
        if greatest(line) >= _LEAST_SHARE
    ]
    small = [line.source for line in ranked if greatest(line) < _LEAST_SHARE]
    less = f"Less than {100 * _LEAST_SHARE:g} % each: {', '.join(small)}." if small else ""
    return section(
        "Uncertainty budget",
        table("Shares of the variance at mid-span in %, greatest first", columns, rows),
        element("p", "rig's: shared by all shots of the rig; shot's: this shot's own.", class_="note"),
        element("p", less, class_="note"),
        identity="budget",
    )


def _percent(share: float) -> str:
    return "0" if abs(share) < _LEAST_SHARE else f"{100 * share:.1f}"


def corrections_section(shot: ReportedShot) -> Markup:
    """Every correction with its state, size, range and source."""
    parent = "response/corrections/"
    rows = []
    for path, facts in sorted(shot.stored.attributes.items()):
        if not path.startswith(parent):
            continue
        state = "applied" if facts["applied"] else "refused" if facts["switched_on"] else "not applied"
        why = f"; does not apply here: {facts['refused']}" if facts["refused"] else ""
        name = path.removeprefix(parent).replace("_", " ")
        source = together([facts["holds_for"], element("span", facts["source"], class_="why")])
        rows.append((name, state, typeset(f"{facts['size']}{why}"), source))
    rows.sort(key=lambda one: ("applied", "refused", "not applied").index(one[1]))
    if not rows:
        return section("Corrections", element("p", "The file holds none."), identity="corrections")
    columns = [
        Column("Correction"),
        Column("State", short=True),
        Column("Size"),
        Column("Holds for, and source"),
    ]
    caption = "What was taken off the curves, and what would have been"
    return section("Corrections", table(caption, columns, rows), identity="corrections")
