"""The page of a campaign: how many shots count, the list in the order that is wanted, repeats, and what was merged.

The list stands in the file once in every order, and a choice shows one of them: no script is needed, a table stays a
table for whoever has it read out, and what is printed is what was chosen.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Sequence

from shpb.trust.repeats import RepeatShot
from shpb.version import VERSION
from shpb.view.digits import to_uncertainty
from shpb.view.repeats import repeat_lines
from shpb.view.report.campaign_rows import (
    GRAVEST_FIRST,
    CampaignRow,
    common_strain,
    orders,
    stress_at,
)
from shpb.view.report.html import (
    CAUTION,
    Column,
    Markup,
    element,
    header_row,
    page,
    paragraphs,
    row,
    section,
    table,
    together,
)
from shpb.view.report.merge_section import merge_section
from shpb.view.report.merge_stored import Merge
from shpb.view.report.shot_page import KIND
from shpb.view.text import rounded
from shpb.view.wording import strain_text

_ANY_WIDTH = 1_000_000


def campaign_page(
    name: str,
    rows: Sequence[CampaignRow],
    *,
    repeats: Iterable[RepeatShot] = (),
    unreadable: Sequence[tuple[str, str]] = (),
    merge: Merge | None = None,
    changed: Sequence[str] = (),
) -> str:
    """Return the report of a campaign as HTML, the same bytes for the same files.

    Parameters
    ----------
    name : str
        Of the campaign's folder.
    rows : sequence of CampaignRow
        Its shots.
    repeats : iterable of RepeatShot
        What the repeats are held against.
    unreadable : sequence of (str, str)
        Files that could not be read, and why.
    merge : Merge or None
        What was merged.
    changed : sequence of str
        What has changed since it was merged, in words.
    """
    parts = [
        element(
            "header",
            element("h1", f"Campaign {name}"),
            element("p", _counted(rows), class_="what"),
            element("p", CAUTION, class_="caution"),
        ),
        _counts(rows),
        _list(rows),
        _repeats(repeats),
    ]
    if unreadable:
        columns = [Column("File"), Column("Why")]
        parts.append(
            section("Files that could not be read", table("Not in this report", columns, unreadable))
        )
    if merge is not None:
        parts.append(merge_section(merge, changed))
    parts.append(element("footer", f"Made by shpb {VERSION} from stored results."))
    keys = orders(rows, None)
    return page(f"Campaign {name}", {KIND: "campaign"}, *parts, style=_rules(keys))


def _rules(keys: Iterable[str]) -> str:
    """A choice shows its order and stands out among the others."""
    shown = ", ".join(f"#by-{key}:checked ~ .wide .by-{key}" for key in keys)
    chosen = ", ".join(f'#by-{key}:checked ~ .order [for="by-{key}"]' for key in keys)
    reached = ", ".join(f'#by-{key}:focus-visible ~ .order [for="by-{key}"]' for key in keys)
    return (
        f"{shown} {{ display: table-row-group; }}\n{chosen} {{ background: #1a1a1a; color: #fff; }}\n"
        f"{reached} {{ outline: 3px solid #3f95cc; outline-offset: 2px; }}\n"
    )


def _counted(rows: Sequence[CampaignRow]) -> str:
    counts = Counter(one.verdict for one in rows)
    said = ", ".join(f"{counts[word]} {word}" for word in reversed(GRAVEST_FIRST) if counts[word])
    return f"{len(rows)} shot{'' if len(rows) == 1 else 's'}" + (f": {said}" if said else "")


def _counts(rows: Sequence[CampaignRow]) -> Markup:
    """Verdicts by material, kind of test and temperature."""
    groups: dict[tuple[str, str, int], list[CampaignRow]] = {}
    for one in rows:
        groups.setdefault((one.material, one.kind, round(one.temperature_k)), []).append(one)
    if not groups:
        return Markup("")
    words = list(reversed(GRAVEST_FIRST))
    columns = [
        Column("Material"),
        Column("Test", short=True),
        Column("Temperature (K)", True),
        Column("Rates (1/s)", True),
        *(Column(word.capitalize(), True) for word in words),
    ]
    found = []
    for (material, kind, kelvin), members in sorted(groups.items()):
        counts = Counter(one.verdict for one in members)
        rates = [one.rate_per_s for one in members if one.verdict != "reject"]
        ends = (
            "none counts" if not rates else " to ".join(dict.fromkeys(map(rounded, (min(rates), max(rates)))))
        )
        found.append((material, kind, kelvin, ends, *(counts[word] for word in words)))
    caption = "Verdicts; rates are those of shots that count"
    return section("What was shot", table(caption, columns, found), identity="counts")


def _list(rows: Sequence[CampaignRow]) -> Markup:
    if not rows:
        return section("Shots", element("p", "There is no shot."))
    strain = common_strain(rows)
    k = rows[0].coverage_factor
    flow = "Flow stress" if strain is None else f"Flow stress at {strain:g} (MPa)"
    columns = [
        Column("Shot"),
        Column("Material"),
        Column("T (K)", True),
        Column("Rate (1/s)", True),
        Column("Verdict", short=True),
        Column("Counts", short=True),
        Column(flow, True),
        Column("Mean R (%)", True),
        Column("What the checks say"),
    ]
    made = [row(columns, _cells(one, strain)) for one in rows]
    choices, labels, bodies = [], [], []
    for key, (words, order) in orders(rows, strain).items():
        first = key == "shot"
        choices.append(
            element("input", class_="choice", type="radio", name="order", id=f"by-{key}", checked=first)
        )
        labels.append(element("label", words, for_=f"by-{key}"))
        # Where no style is known, one order alone is shown.
        body = [made[i] for i in order]
        bodies.append(element("tbody", *body, class_=f"sorted by-{key}", hidden=not first))
    caption = (
        "Rate: mean engineering strain rate. Counts: true strain that counts. Flow stress: true, with U "
        f"(k = {k:g}, about 95 %)" + _star(rows, strain) + ". R: force equilibrium."
    )
    whole = element("table", element("caption", caption), header_row(columns), *bodies)
    framed = element(
        "div", whole, class_="wide shots", tabindex="0", role="region", aria_label="List of shots"
    )
    bar = element("div", element("span", "Order by", class_="words"), *labels, class_="order")
    return section("Shots", *choices, bar, framed, identity="shots")


def _star(rows: Sequence[CampaignRow], strain: float | None) -> str:
    found = [stress_at(one, strain) for one in rows]
    if all(one is None or one[0] for one in found):
        return ", at true plastic strain"
    return ", at true plastic strain; * at total true strain: no Young's modulus is stated for the specimen"


def _cells(one: CampaignRow, strain: float | None) -> list[object]:
    links: list[object] = [element("a", one.shot_id, href=one.page) if one.page else one.shot_id]
    if one.file:
        links.append(element("a", "HDF5", href=one.file, class_="why"))
    found = stress_at(one, strain)
    stress = ""
    if found is not None:
        wide = 1e-6 * one.coverage_factor * found[2]
        stress = f"{to_uncertainty(1e-6 * found[1], wide)} ± {rounded(wide, 2)}" + ("" if found[0] else "*")
    span = "" if one.strain_span is None else " to ".join(map(strain_text, one.strain_span))
    return [
        together(links),
        one.material,
        f"{one.temperature_k:.0f}",
        rounded(one.rate_per_s),
        element("strong", one.verdict) if one.verdict == "reject" else one.verdict,
        span if one.verdict != "reject" else "",
        stress,
        f"{100 * one.mean_ratio:.1f}",
        one.reasons,
    ]


def _repeats(shots: Iterable[RepeatShot]) -> Markup:
    """Every group of repeats, and which of them disagrees."""
    said = [line.removeprefix("repeats: ").strip() for line in repeat_lines(shots, _ANY_WIDTH)]
    if not said:
        return section("Repeats", element("p", "No two shots that count are repeats of one test."))
    return section("Repeats", paragraphs(said), identity="repeats")
