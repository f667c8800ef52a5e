"""Corrections and closure of a shot in words, in lines for a terminal and for other programs."""

from __future__ import annotations

from typing import Any

from shpb.reduction import ShotResult
from shpb.settings import Correction
from shpb.trust.closure import Misfit
from shpb.view.text import printable, wrapped


def correction_lines(result: ShotResult, width: int, label: int) -> list[str]:
    """What was applied and what was refused, in full; what the others would have changed, briefly."""
    applied, refused, left = [], [], []
    for report in result.response.corrections:
        if report.applied and report.brief:
            applied.append(f"applied: {report.correction.value}, {report.size}")
        elif report.switched_on and report.refused:
            refused.append(f"refused: {report.correction.value}, {report.refused}")
        elif report.brief:
            left.append(f"{report.correction.value} {report.brief}")
    said = applied + refused
    if left:
        said.append(f"left in: {', '.join(left)}")
    lines: list[str] = []
    for text in said:
        lines += wrapped(printable(text), width, ("" if lines else "Corrections").ljust(label))
    return lines


def correction_table(result: ShotResult, width: int) -> list[str]:
    """Every correction with its state, size, range and source."""
    name, state = 17, 13
    lines = [f"{'Correction':<{name}}{'state':<{state}}size, range, source"]
    for report in result.response.corrections:
        word = "applied" if report.applied else "refused" if report.switched_on else "not applied"
        indent = " " * (name + 2)
        lines += wrapped(
            printable(report.size), width, f"{report.correction.value:<{name}}{word:<{state}}", indent
        )
        if report.refused:
            lines += wrapped(f"does not apply here: {printable(report.refused)}", width, indent)
        lines += wrapped(f"holds for: {report.fact.holds_for}", width, indent)
        lines += wrapped(f"source: {report.fact.source}", width, indent)
    return lines


def closure_lines(result: ShotResult, width: int, label: int) -> list[str]:
    """The forward run beside the record, pulse by pulse."""
    if result.closure is None:
        hot = result.response.correction(Correction.BAR_TEMPERATURE).applied
        bars = (result.rig.incident_bar, result.rig.transmitted_bar)
        why = "hot bar ends are corrected for" if hot else "no plastic curve is left to run"
        if any(bar.propagation is not None for bar in bars):
            why = "the impedance of bars with a measured propagation is not one number"
        return wrapped(f"no forward run: {why}", width, "Closure".ljust(label))
    both = (_pulse_words(one) for one in (result.closure.reflected, result.closure.transmitted))
    return wrapped(f"forward run against record: {'; '.join(both)}", width, "Closure".ljust(label))


def _pulse_words(misfit: Misfit) -> str:
    return (
        f"{misfit.pulse} {100 * misfit.rms:.1f} % of its peak (budget {100 * misfit.expected:.1f} %), "
        f"{1e6 * misfit.delay_s:+.2f} us (u {1e6 * misfit.u_delay_s:.2f} us)"
    )


def corrections_json(result: ShotResult) -> list[dict[str, Any]]:
    """Every correction for other programs; greatest changes are over the loading."""
    part = slice(*result.response.loading)

    def greatest(change: Any) -> float:
        return 0.0 if isinstance(change, float) else float(abs(change[part]).max())

    return [
        {
            "correction": report.correction.value,
            "applied": report.applied,
            "switched_on": report.switched_on,
            "refused": report.refused,
            "size": report.size,
            "greatest_strain_off": greatest(report.off.strain),
            "greatest_stress_1w_off_pa": greatest(report.off.stress_1w_pa),
            "greatest_stress_3w_off_pa": greatest(report.off.stress_3w_pa),
            "holds_for": report.fact.holds_for,
            "source": report.fact.source,
        }
        for report in result.response.corrections
    ]


def closure_json(result: ShotResult) -> dict[str, Any] | None:
    """The misfit of both pulses for other programs, as shares of their peaks; None where no forward run holds."""
    if result.closure is None:
        return None
    return {
        misfit.pulse: {
            "misfit": misfit.rms,
            "expected_misfit": misfit.expected,
            "delay_s": misfit.delay_s,
            "u_delay_s": misfit.u_delay_s,
            "scale": misfit.scale,
            "excess_standard_uncertainties": misfit.excess,
        }
        for misfit in (result.closure.reflected, result.closure.transmitted)
    }
