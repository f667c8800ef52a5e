"""The page of one shot: the verdict first, then what to do, the curves, the numbers, and all that they came from."""

from __future__ import annotations

from pathlib import Path

from shpb.trust.finding import Finding, Weight
from shpb.version import VERSION
from shpb.view.report.html import (
    CAUTION,
    Column,
    Markup,
    element,
    page,
    section,
    table,
    together,
    typeset,
)
from shpb.view.report.shot_figures import shot_figures
from shpb.view.report.shot_inputs import (
    calibration_section,
    files_section,
    processing_section,
    rig_section,
    settings_section,
)
from shpb.view.report.shot_numbers import budget_section, corrections_section, numbers_section
from shpb.view.report.stored import ReportedShot
from shpb.view.text import rounded
from shpb.view.wording import short_limit, telling

LAYOUT = 1  # grows when a page made before should be made anew
KIND, SHOT, MADE_FROM, CAMPAIGN = "shpb-report", "shpb-shot", "shpb-made-from", "shpb-campaign"


def shot_page(shot: ReportedShot, *, campaign: str = "") -> str:
    """Return the report of one stored shot as HTML, the same bytes for the same file.

    Parameters
    ----------
    shot : ReportedShot
    campaign : str
        Address of the campaign's page, relative to this one; empty where there is none.
    """
    sheet, word = shot.stored.sheet, shot.verdict.value
    kelvin = float(sheet.temperature_k)
    what = f"{sheet.specimen.material}, {sheet.kind.value}, {kelvin:.0f} K ({kelvin - 273.15:.0f} °C)"
    rate = rounded(float(shot.fact("response", "mean_strain_rate")))
    marks = {KIND: "shot", SHOT: shot.shot_id, MADE_FROM: made_from(shot.sha256)}
    if campaign:
        marks[CAMPAIGN] = campaign
    return page(
        f"Shot {shot.shot_id}: {word}",
        marks,
        element(
            "header",
            element("h1", f"Shot {shot.shot_id}"),
            element("p", what + (f", fired {sheet.date}" if sheet.date else ""), class_="what"),
            element(
                "p",
                element("strong", word.upper()),
                f"{shot.verdict_sentence()} Mean rate {rate} /s.",
                class_=f"verdict is-{word}",
            ),
            element("p", CAUTION, class_="caution"),
            element("p", element("a", "All shots of the campaign", href=campaign), class_="note screen")
            if campaign
            else Markup(""),
        ),
        _what_to_do(shot),
        section("Curves", element("div", *shot_figures(shot), class_="figures"), identity="curves"),
        numbers_section(shot),
        budget_section(shot),
        corrections_section(shot),
        processing_section(shot),
        calibration_section(shot),
        rig_section(shot),
        _all_checks(shot),
        settings_section(shot),
        files_section(shot),
        element("footer", f"Made by shpb {VERSION} from {Path(shot.stored.path).name}."),
    )


def made_from(sha256: str) -> str:
    """What tells whether a page must be made anew."""
    return f"{sha256} shpb {VERSION} layout {LAYOUT}"


def _what_to_do(shot: ReportedShot) -> Markup:
    """Findings that say something, gravest first."""
    said = telling(shot.stored.findings)
    if not said:
        return section("What the checks say", element("p", "No check speaks against this shot."))
    return section("What the checks say, and what to do", *map(_finding, said), identity="findings")


def _finding(finding: Finding) -> Markup:
    word = finding.weight.value
    head = together(
        [
            element("span", word, class_="weight"),
            typeset(f" {finding.check}: {finding.measured} (limit: {short_limit(finding)})."),
        ]
    )
    parts = [element("p", head)]
    if finding.action:
        parts.append(element("p", element("strong", "To do: "), typeset(finding.action)))
    return element("div", *parts, class_=f"finding is-{word}")


def _all_checks(shot: ReportedShot) -> Markup:
    """Every check, gravest first, in the order in which causes come before what follows from them."""
    ordered = sorted(shot.stored.findings, key=lambda one: -one.weight.gravity)
    columns = [
        Column("Check"),
        Column("Says", short=True),
        Column("Measured"),
        Column("Limit, and where it is from"),
    ]
    quiet = sum(one.weight is Weight.FINE for one in ordered)
    rows = [(one.check, one.weight.value, typeset(one.measured), _limit(one)) for one in ordered]
    caption = f"{len(ordered)} checks, {quiet} of them within their limits"
    return section("Every check", table(caption, columns, rows), identity="checks")


def _limit(finding: Finding) -> Markup:
    return together([typeset(short_limit(finding)), element("span", typeset(finding.source), class_="why")])


__all__ = ["CAMPAIGN", "KIND", "MADE_FROM", "SHOT", "made_from", "shot_page"]
