"""What is said of a shot, in words that the terminal, the figure and the summary share. ASCII throughout."""

from __future__ import annotations

from shpb.limits import USUAL, key_of, limit_in_words, set_by_lab
from shpb.reduction import ShotResult
from shpb.response.equilibrium import R_DEFINITION
from shpb.settings import Alignment, Analysis, Dispersion
from shpb.trust.finding import Finding, Verdict, Weight
from shpb.view.by_hand_words import by_hand_words
from shpb.view.text import fitted, printable, rounded

_DISPERSION = {
    Dispersion.NONE: "no dispersion correction, shift at c0",
    Dispersion.PHASE: "dispersion by the phase of the Pochhammer-Chree first mode",
    Dispersion.FULL: "dispersion by phase and amplitude of the Pochhammer-Chree first mode",
}


_SHOWN_LIMITS = 4


def verdict_sentence(result: ShotResult) -> str:
    """The verdict in one sentence: where the shot counts, or what speaks against it."""
    outcome = result.response.equilibrium.outcome.value
    return verdict_in_words(result.verdict, result.findings, result.response.strain_span, outcome)


def verdict_in_words(
    verdict: Verdict, findings: tuple[Finding, ...], span: tuple[float, float] | None, outcome: str
) -> str:
    """The same of a reduced or a stored shot: its true strain span that counts, its outcome of equilibrium."""
    if verdict is Verdict.REJECT:
        against = [_against(f, outcome) for f in findings if f.weight is Weight.REJECT]
        return f"The shot does not count. Against it: {', '.join(against)}."
    if span is None:
        return "The shot counts, but no span of strain in equilibrium is known."
    only = "only " if verdict is Verdict.RESTRICT else ""
    return f"The shot counts {only}from true strain {strain_text(span[0])} to {strain_text(span[1])}."


def strain_text(strain: float) -> str:
    """A strain to three decimals, to four where it is small."""
    return f"{strain:.3f}" if abs(strain) >= 0.01 else f"{strain:.4f}"


def _against(finding: Finding, outcome: str) -> str:
    return printable(finding.check) + (f" {outcome}" if finding.check == "force equilibrium" else "")


def telling(findings: tuple[Finding, ...]) -> tuple[Finding, ...]:
    """Findings that say something, gravest first: all but those within their limits."""
    order = (Weight.REJECT, Weight.RESTRICT, Weight.NOTE)
    return tuple(f for weight in order for f in findings if f.weight is weight)


def short_limit(finding: Finding) -> str:
    """The limit without the definition of R, which is printed once beside its value."""
    return printable(finding.limit.removesuffix(R_DEFINITION).rstrip("; "))


def shot_line(result: ShotResult, longest_name: int = 60) -> str:
    """Which shot it was: name, material, kind of test, temperature."""
    sheet = result.sheet
    name = fitted(printable(sheet.shot_id), longest_name)
    material = fitted(printable(sheet.specimen.material), longest_name)
    kelvin = float(sheet.temperature_k)
    return f"{name}, {material}, {sheet.kind.value}, {kelvin:.0f} K ({kelvin - 273.15:.0f} C)"


def cutoff_fa_c0(result: ShotResult) -> float:
    """Cut-off of the low-pass as f a/c0 of the bar with the lower c0/a."""
    bars = (result.rig.incident_bar, result.rig.transmitted_bar)
    return result.faces.low_pass.cutoff_hz * max(bar.radius_time_s for bar in bars)


def low_pass_words(result: ShotResult) -> str:
    """The low-pass as it must stand on every figure and text."""
    return (
        f"low-pass {result.faces.low_pass.cutoff_hz / 1e3:.1f} kHz (half height, f a/c0 = "
        f"{cutoff_fa_c0(result):.3f}), zero phase, the same for all pulses"
    )


def calibration_words(result: ShotResult) -> str:
    """The calibration that the values of the rig come from; empty where the rig file names none."""
    calibration = result.rig.calibration
    if calibration is None:
        return ""
    return f"{printable(calibration.name)} of {printable(calibration.date)}"


def alignment_words(result: ShotResult) -> str:
    """How the pulses were laid on one clock, with what was tuned or what is left over."""
    faces = result.faces
    if result.settings.alignment is Alignment.FEET:
        return (
            f"feet laid on the incident foot (reflected moved {faces.reflected_shift_s * 1e6:+.2f} us, "
            f"transmitted {faces.transmitted_shift_s * 1e6:+.2f} us)"
        )
    return "aligned by travel times alone"


def misalignment_words(result: ShotResult) -> str:
    """How far the feet lie from where travel times put them, before any tuning."""
    faces = result.faces

    def off(value: float | None) -> str:
        return "no foot" if value is None else f"{value * 1e6:+.2f} us"

    return (
        f"reflected {off(faces.reflected_misalignment_s)}, transmitted "
        f"{off(faces.transmitted_misalignment_s)} (u {faces.u_misalignment_s * 1e6:.2f} us)"
    )


def formulas(result: ShotResult) -> str:
    """Name and formulas of the analysis put forward; e_I, e_R, e_T are the strains at the faces."""
    if result.response.analysis is Analysis.THREE_WAVE:
        return "three-wave: stress = (F_in + F_out)/(2 A_s), rate = (v_in - v_out)/L"
    if result.faces.returning is not None:
        return "one-wave: stress = F_out/A_s, rate = (-2 c_i e_R + F_out/Z_i - v_out)/L"
    mismatch = result.rig.incident_bar.impedance_n_s_m != result.rig.transmitted_bar.impedance_n_s_m
    general = " + F_out (1/Z_i - 1/Z_t)" if mismatch else ""
    rate = f"(-2 c_i e_R{general})/L" if mismatch else "-2 c_i e_R/L"
    return f"one-wave: stress = F_out/A_s, rate = {rate}"


def processing_words(result: ShotResult) -> str:
    """Everything between volts and curve that a reader must know, in one sentence."""
    return "; ".join(
        (
            *([apart] if (apart := stations_words(result)) else []),
            _DISPERSION[result.settings.dispersion],
            low_pass_words(result),
            alignment_words(result),
            f"put forward {formulas(result)}",
            *([corrected] if (corrected := corrected_words(result)) else []),
            *([own] if (own := lab_limits_words(result)) else []),
        )
    )


def stations_words(result: ShotResult) -> str:
    """By how many stations the waves of which bar were told apart; empty where windows did it."""
    counts = [f"{bar.side} bar's by {len(bar.stations)}" for bar in result.pulses.separated]
    return f"waves told apart by stations ({', '.join(counts)})" if counts else ""


def corrected_words(result: ShotResult) -> str:
    """Corrections that change the curves; empty where there are none."""
    names = [one.correction.value for one in result.response.corrections if one.applied and one.brief]
    return f"corrected for {', '.join(names)}" if names else ""


def rate_words(result: ShotResult) -> str:
    """Mean rate, engineering and true, and what it is a mean over."""
    rate = result.response.rate
    over = "over what counts" if result.response.span else "over the whole loading"
    return f"mean {rounded(rate.mean_per_s)} /s engineering, {rounded(rate.mean_true_per_s)} /s true, {over}"


def strain_kind(result: ShotResult) -> str:
    """Which strain the flow stresses are given at."""
    plastic = any(flow.plastic for flow in result.response.flow)
    return "true plastic strain" if plastic else "total true strain"


def finding_named(result: ShotResult, check: str) -> Finding | None:
    """The finding of one check, None where the check had nothing to look at."""
    return next((f for f in result.findings if f.check == check), None)


def lab_limits_words(result: ShotResult) -> str:
    """The limits that this lab sets in place of the usual ones, the first few with both; empty where there are none."""
    limits, names = result.settings.limits, set_by_lab(result.settings.limits)
    parts = [
        f"{key_of(name)} {limit_in_words(name, getattr(limits, name))} "
        f"(usual {limit_in_words(name, getattr(USUAL, name))})"
        for name in names[:_SHOWN_LIMITS]
    ]
    more = len(names) - len(parts)
    parts += [f"and {more} more"] if more else []
    return f"limits set by this lab: {', '.join(parts)}" if parts else ""


def remarks_of(result: ShotResult) -> tuple[str, ...]:
    """What a reader of the numbers should know besides: what was set by hand, what was noticed on the way."""
    said = [*by_hand_words(result), *result.record.remarks, *result.pulses.remarks]
    if result.sheet.remarks:
        said.append(f"shot sheet: {result.sheet.remarks}")
    return tuple(map(printable, said))
