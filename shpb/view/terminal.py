"""One shot as plain text for a terminal: the verdict first, in words, then why, then the numbers.

Words carry the meaning, not colour or glyphs; but for outside names all of it is ASCII, so that any console
shows it. The list of several shots and the summary for machines are offered here as well.
"""

from __future__ import annotations

from shpb.record.record import Record
from shpb.reduction import ShotResult
from shpb.response.equilibrium import R_DEFINITION, Equilibrium, Outcome
from shpb.settings import Alignment
from shpb.trust.budget import flow_stress_uncertainty_pa
from shpb.trust.finding import Finding, Weight
from shpb.view.forward_words import closure_lines, correction_lines, correction_table
from shpb.view.listing import ListRow, list_row, list_row_of_error, list_text
from shpb.view.summary import error_json, json_text, record_json, shot_json
from shpb.view.text import NOT_KNOWN, printable, rounded, wrapped
from shpb.view.uncertainty import budget_lines, budget_table, draw_lines
from shpb.view.wording import (
    calibration_words,
    finding_named,
    misalignment_words,
    processing_words,
    rate_words,
    remarks_of,
    short_limit,
    shot_line,
    strain_kind,
    telling,
    verdict_sentence,
)

__all__ = [
    "ListRow",
    "draws_text",
    "error_json",
    "json_text",
    "list_row",
    "list_row_of_error",
    "list_text",
    "printable",
    "record_json",
    "record_text",
    "shot_json",
    "shot_text",
]

_LABEL = 14  # columns of the labels of the numbers


def shot_text(result: ShotResult, *, width: int = 80, full: bool = False) -> str:
    """Return one shot as text, without a line end after the last line.

    Parameters
    ----------
    result : ShotResult
    width : int
        Columns that no line passes, at least 50.
    full : bool
        Whether to add the ranked uncertainty budget, and every check with what it measured, its limit and its source.
    """
    width = max(width, 50)
    lines = wrapped(verdict_sentence(result), width, f"{result.verdict.value.upper()}  ")
    lines += wrapped(shot_line(result), width, " " * (len(result.verdict.value) + 2))
    lines += ["", *_reasons(result, width)]
    lines += ["", *_numbers(result, width)]
    lines += ["", *wrapped(processing_words(result) + ".", width, "Processing".ljust(_LABEL))]
    if calibrated := calibration_words(result):
        lines += wrapped(
            f"{calibrated}, rig {printable(result.rig.name)}.", width, "Calibration".ljust(_LABEL)
        )
    for number, remark in enumerate(remarks_of(result)):
        lines += wrapped(remark + ".", width, ("" if number else "Remarks").ljust(_LABEL))
    if full:
        lines += ["", *budget_table(result, width), "", *correction_table(result, width)]
        lines += ["", *_checks(result.findings, width)]
    return "\n".join(line.rstrip() for line in lines)


def draws_text(result: ShotResult, *, width: int = 80) -> str:
    """Return what the draws of a shot say, as the lines of :func:`shot_text`; empty where there are none."""
    return "\n".join(draw_lines(result, max(width, 50), _LABEL))


def record_text(record: Record, *, width: int = 80) -> str:
    """Return what a record holds as text: files, clock, channels and their extremes, remarks."""
    width = max(width, 50)
    interval_us = record.sample_interval_s * 1e6
    end_us = record.start_s * 1e6 + interval_us * (record.samples - 1)
    count = len(record.channels)
    lines: list[str] = []

    def say(label: str, text: str) -> None:
        lines.extend(wrapped(text, width, label.ljust(_LABEL)))

    for source in record.sources:
        say(
            "File", f"{printable(source.name)}, {source.size_bytes} bytes, read as {printable(source.reader)}"
        )
    say("Samples", f"{record.samples} in each of {count} channel{'' if count == 1 else 's'}")
    say("Interval", f"{rounded(interval_us, 4)} us ({rounded(1 / interval_us, 4)} MS/s)")
    say("Clock", f"{record.start_s * 1e6:.2f} us to {end_us:.2f} us")
    for position, (name, voltage) in enumerate(zip(record.channels, record.voltage_v, strict=True), 1):
        least, greatest = float(voltage.min()), float(voltage.max())
        unit, factor = ("mV", 1e3) if max(abs(least), abs(greatest)) < 0.5 else ("V", 1.0)
        extremes = f"{rounded(least * factor)} {unit} to {rounded(greatest * factor)} {unit}"
        say(f"Channel {position}", f"{printable(name)}, {extremes}")
    for number, remark in enumerate(record.remarks):
        say("" if number else "Remarks", printable(remark))
    return "\n".join(line.rstrip() for line in lines)


def _reasons(result: ShotResult, width: int) -> list[str]:
    findings = telling(result.findings)
    if not findings:
        return wrapped("No check speaks against this shot.", width)
    lines = []
    for finding in findings:
        said = f"{printable(finding.check)}: {printable(finding.measured)} (limit: {short_limit(finding)})."
        lines += wrapped(said, width, f"{finding.weight.value.upper():<10}")
        if finding.action:
            lines += wrapped(printable(finding.action), width, f"{'':<10}To do: ", " " * 10)
    return lines


def _numbers(result: ShotResult, width: int) -> list[str]:
    lines: list[str] = []

    def say(label: str, text: str) -> None:
        lines.extend(wrapped(text, width, label.ljust(_LABEL)))

    rate = result.response.rate
    say("Strain rate", f"{rate_words(result)};")
    say("", f"range {rounded(rate.least_per_s)} to {rounded(rate.greatest_per_s)} /s, "
            f"variation {100 * rate.variation:.0f} %, change along it {100 * rate.slope:+.0f} %")  # fmt: skip
    say("Equilibrium", equilibrium_words(result.response.equilibrium))
    untuned = result.response.untuned_equilibrium
    if untuned is not None:
        say("", f"without the moved feet: {equilibrium_words(untuned)}")
    say("", R_DEFINITION + "; the floor is the least R that these gauges can see")
    lines += _flow_lines(result, width)
    lines += budget_lines(result, width, _LABEL)
    lines += draw_lines(result, width, _LABEL)
    modulus = result.sheet.specimen.young_modulus_pa
    yield_pa = result.response.yield_back_extrapolated_pa
    if yield_pa is not None and modulus is not None:
        stated = f"the stated modulus of {rounded(modulus / 1e9)} GPa"
        say("Yield", f"{rounded(yield_pa / 1e6)} MPa true, from 3 to 8 % of strain back to {stated}")
    else:
        say("Yield", "not given: " + _why_no_yield(result))
    slope = result.response.apparent_slope_pa
    if slope is not None:
        say("First slope", f"{rounded(slope / 1e9)} GPa, apparent: not a modulus")
    lines += _balance_lines(result, width)
    return lines


def equilibrium_words(equilibrium: Equilibrium) -> str:
    """Outcome, R with its limit and floor, and what else says how the face forces agree."""
    reached = equilibrium.outcome in (Outcome.REACHED, Outcome.REACHED_LATE)
    where = f" at true strain {equilibrium.strain_at_start:.4f}" if reached else ""
    over = "over what counts" if reached else "over the whole loading"
    return (
        f"{equilibrium.outcome.value}{where}; mean R {100 * equilibrium.mean_ratio:.1f} %, floor "
        f"{100 * equilibrium.typical_floor:.1f} %, limit {100 * equilibrium.limit:.0f} % "
        f"({100 * equilibrium.share_within:.0f} % of samples within it), {over}"
    )


def _why_no_yield(result: ShotResult) -> str:
    if result.sheet.specimen.young_modulus_pa is None:
        return "it needs the specimen's quasi-static Young's modulus in the shot sheet"
    if result.response.span is None:
        return "nothing counts"
    return "what counts does not hold 3 to 8 % of true strain"


def _flow_lines(result: ShotResult, width: int) -> list[str]:
    flow = result.response.flow
    if not flow:
        return []
    label = "Flow stress".ljust(_LABEL)
    if all(point.stress_pa is None for point in flow):
        strains = ", ".join(f"{point.at_strain:g}" for point in flow)
        return wrapped(f"none at {strains} of {strain_kind(result)}: not in what counts", width, label)
    lines = wrapped(f"{result.response.analysis.value}, true, at {strain_kind(result)}", width, label)
    modulus = result.sheet.specimen.young_modulus_pa
    uncertainties = flow_stress_uncertainty_pa(result.budget, result.response, modulus)
    for point, u in zip(flow, uncertainties, strict=True):
        value = "not in what counts"
        if point.stress_pa is not None and u is not None:
            value = (
                f"{rounded(point.stress_pa / 1e6):>6} MPa, u {rounded(u / 1e6, 2)} MPa, "
                f"at {rounded(point.rate_per_s):>5} /s true"
            )
        lines.append(f"{'':<{_LABEL}}{point.at_strain:<7g}{value}")
    return lines


def _balance_lines(result: ShotResult, width: int) -> list[str]:
    response, lines = result.response, []

    def say(label: str, text: str) -> None:
        lines.extend(wrapped(text, width, label.ljust(_LABEL)))

    lines += correction_lines(result, width, _LABEL)
    lines += closure_lines(result, width, _LABEL)
    work = response.balance
    say("Work", f"{rounded(work.work_j)} J at the faces, {rounded(work.specimen_work_j)} J in the specimen")
    length = finding_named(result, "final length")
    say("Final length", NOT_KNOWN if length is None else printable(length.measured))
    if work.striker_momentum_n_s is not None:
        say("Momentum", f"{rounded(work.incident_impulse_n_s)} N s in the incident pulse, "
                        f"{rounded(work.striker_momentum_n_s)} N s in the striker")  # fmt: skip
    feet = "moved" if result.settings.alignment is Alignment.FEET else "left as they are"
    say("Feet", f"off travel times: {misalignment_words(result)}; {feet}")
    return lines


def _checks(findings: tuple[Finding, ...], width: int) -> list[str]:
    """Every check, gravest first."""
    name, says = 25, 10
    lines = [f"{'Check':<{name}}{'says':<{says}}measured, limit, source"]
    for finding in findings:
        head = f"{printable(finding.check):<{name}}{finding.weight.value:<{says}}"
        indent = " " * (name + 2)
        lines += wrapped(printable(finding.measured), width, head, indent)
        lines += wrapped(f"limit: {printable(finding.limit)}", width, indent)
        lines += wrapped(f"source: {printable(finding.source)}", width, indent)
        if finding.action and finding.weight is not Weight.FINE:
            lines += wrapped(f"to do: {printable(finding.action)}", width, indent)
    return lines
