"""Topics about how a shot is worked out and judged: checks, corrections, methods, merging."""

from __future__ import annotations

from shpb.limits import LIMIT_FACTS, USUAL, key_of, limit_in_words
from shpb.merge.models.registry import all_models
from shpb.response.corrections.facts import FACTS
from shpb.response.equilibrium import R_DEFINITION
from shpb.trust.judge import all_checks
from shpb.view.help.key_topics import see_also
from shpb.view.help.page import HelpPage


def checks() -> str:
    """All checks."""
    page = HelpPage("checks", "The checks: what is looked at on every shot, and what its verdict comes from.")
    page.paragraph(
        "Each check says fine, NOTE, RESTRICT or REJECT, what it measured, its limit, where the limit "
        "comes from, and what to do at the bench. A shot is rejected if any check rejects it, and "
        "restricted to a range of strain if any restricts it. `shpb reduce --full` prints every check. A "
        "verdict is about data, never about safety."
    )
    page.paragraph(
        "A lab sets a limit by its key in [limits] of the rig file, or of a shot sheet for that shot "
        "alone; every report then says so."
    )
    page.heading("CHECKS, CAUSES BEFORE WHAT FOLLOWS FROM THEM")
    for check in all_checks():
        limits = [f"{key_of(name)} = {limit_in_words(name, getattr(USUAL, name))}" for name in check.limits]
        sources = dict.fromkeys([check.source, *(LIMIT_FACTS[name].source for name in check.limits)])
        said = f"usual limit: {', '.join(limits)}; " if limits else ""
        said += f"gravest: {check.gravest.value}; source: {'; '.join(filter(None, sources))}"
        page.item(check.name, check.what, said)
    see_also(page, ("rig-file", "corrections", "methods"))
    return page.text


def corrections() -> str:
    """All corrections."""
    page = HelpPage(
        "corrections", "The corrections: worked out for every shot, applied where the settings say so."
    )
    page.paragraph(
        "Each is shown with its size, whether it was applied, and why it does not hold where it does not. "
        "Which are applied stands in `corrections` of [settings], in the rig file or a shot sheet. They "
        "stand in the order in which they act."
    )
    page.heading("CORRECTIONS")
    for which, fact in FACTS.items():
        page.item(
            which.value,
            f"{fact.what}.",
            f"holds for: {fact.holds_for}; needs: {fact.needs}; source: {fact.source}",
        )
    see_also(page, ("rig-file", "checks", "methods"))
    return page.text


_STEPS = (
    ("bridge", "Voltage to strain at the gauge, with gain, excitation, arms, bridge non-linearity and lead wires.",
     "K. Hoffmann, An Introduction to Measurements using Strain Gages, 1989 (from memory)"),
    ("zero lines", "One zero line for each pulse: level from the quiet window before it, slope from all quiet windows.",
     "least squares with a prior"),
    ("feet", "Where the front of a pulse begins: tangent method, with an uncertainty from the noise.",
     "common practice; JCGM 100:2008, 5.1 and F.2.4"),
    ("dispersion",
     "All three pulses are carried to the specimen faces by the first longitudinal mode of a round bar, with one "
     "low-pass of zero phase for all (half height at f a/c0 = 0.234).",
     "Pochhammer 1876; Chree 1889; Bancroft 1941; section factors Davies 1948, Tyas & Watson 2001"),
    ("bar analysis", "Forces and velocities of both faces; one-, two- and three-wave stress, strain and strain rate.",
     "Kolsky 1949; Lindholm 1964; Gray 2000 (ASM Handbook 8); Chen & Song 2011"),
    ("equilibrium",
     f"{R_DEFINITION}, printed with the least R that the gauges can see. Reached, reached late, "
     "not reached, or cannot be decided.",
     "Ravichandran & Subhash 1994 (R up to 5 %); Davies & Hunter 1963 (transits)"),
    ("uncertainty",
     "First-order budget of every curve with its correlations; what shots of a rig share is kept apart. With "
     "--draws the whole shot by Monte Carlo, with an adaptive stop.",
     "JCGM 100:2008, 5.1.2, 5.2.2, 6.2.1; JCGM 101:2008"),
    ("closure",
     "The reduced curve is run forwards with the measured incident pulse, and both gauges are held against what they "
     "should have seen.", "one-dimensional elastic wave theory; JCGM 100:2008, 6.2"),
)  # fmt: skip


def methods() -> str:
    """The methods, step by step."""
    page = HelpPage(
        "methods", "The methods: from voltages to true stress and strain, step by step, with their sources."
    )
    page.paragraph(
        "SI inside. Loading is positive in compression and in tension. Time zero is when the loading front "
        "reaches the incident face. Stress before equilibrium is drawn grey and enters no number; the "
        "first slope is no modulus."
    )
    page.heading("STEPS")
    for name, words, source in _STEPS:
        page.item(name, words, f"source: {source}")
    see_also(page, ("corrections", "checks", "merge", "calibration"))
    return page.text


def merge() -> str:
    """Merging a campaign, with all laws."""
    page = HelpPage(
        "merge", "Merging: shots and quasi-static tests to curves over strain rate and temperature."
    )
    page.paragraph(
        "`shpb merge FOLDER` takes the shots that count from FOLDER and FOLDER/results and quasi-static "
        "tables from FOLDER/quasistatic. Rejected shots stay out, restricted ones enter inside their span; "
        "every file that stays out is named with the reason. Repeats of one condition are averaged; one "
        "that stands out is named, not dropped."
    )
    page.paragraph(
        "For each material: conditions, flow stress at chosen plastic strains, rate sensitivity with "
        "intervals, a test for an upturn at high rates, stress over temperature, and laws. The result is "
        "merged.h5 with figures; --csv writes tables, `shpb export` flow-curve tables for a solver. "
        "Constants from a merge are no design allowables."
    )
    page.heading("LAWS, BY THE NAME FOR --laws AND --law")
    for model in all_models():
        facts = ", ".join(
            f"{fact.name} [{fact.unit}]"
            + ("" if fact.default is None else f" ({fact.default:g} unless stated)")
            for fact in model.facts
        )
        page.item(
            model.key,
            f"{model.name}: {model.formula}",
            f"constants: {', '.join(model.names)}" + (f"; taken as known (--fact): {facts}" if facts else ""),
            f"cannot say: {'; '.join(model.cannot)}" if model.cannot else "",
            f"source: {model.source}",
        )
    see_also(page, ("quasi-static", "files", "methods"))
    return page.text
