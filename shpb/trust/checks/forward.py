"""Checks that need the whole shot: closure by a forward run, and corrections that could not be applied."""

from __future__ import annotations

from shpb.settings import Correction
from shpb.trust.closure import Misfit
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Weight, graded, percent
from shpb.trust.judge import check

_FAR = 3.0  # times the limit: beyond it the shot does not count


@check(
    "closure",
    source="forward run of the reduced curve with the measured incident pulse",
    gravest=Weight.REJECT,
)
def closure(evidence: Evidence) -> Answer | None:
    """Reflected and transmitted pulse against a forward run of the reduced curve with the measured incident pulse."""
    found = evidence.closure
    if found is None:
        return None
    limit = evidence.settings.limits.closure
    worst = found.worst
    return graded(
        worst.excess,
        limit,
        _FAR * limit,
        measured="; ".join(_in_words(one) for one in (found.reflected, found.transmitted)),
        action=_where_to_look(worst),
        show=lambda excess: f"{excess:.3g} standard uncertainties",
    )


def _in_words(misfit: Misfit) -> str:
    return (
        f"{misfit.pulse} misfit {percent(misfit.rms)} of its peak (budget {percent(misfit.expected)}), "
        f"{1e6 * misfit.delay_s:+.2f} us (u {1e6 * misfit.u_delay_s:.2f} us)"
    )


def _where_to_look(misfit: Misfit) -> str:
    """What usually makes such a misfit."""
    late = abs(misfit.delay_s) / misfit.u_delay_s
    if misfit.pulse == "transmitted":
        return (
            "Check the transmitted pulse's place (its gauge's distance, wave speeds, a delay between the channels), "
            "the specimen's diameter, length and stated modulus, and gauge factor, arrangement, excitation and gain of "
            "the two stations against each other."
        )
    if late > misfit.rms / misfit.expected and abs(misfit.scale) < 0.05:
        return (
            "The reflected pulse lies in the wrong place: check its window and foot, the gauges' distances to the "
            "specimen, the wave speeds, and a delay between the channels."
        )
    return (
        "Check gauge factor, arrangement, excitation and gain of the two stations against each other, the bars' "
        "diameters and wave speeds, and the gauge distances."
    )


@check("inertia", source="Davies & Hunter 1963", gravest=Weight.NOTE)
def inertia(evidence: Evidence) -> Answer | None:
    """Share of the flow stress that accelerates the specimen instead of deforming it."""
    response = evidence.response
    report = response.correction(Correction.INERTIA)
    span = slice(*(response.span or response.loading))
    stress, thinned = response.one_wave.stress_pa[span], report.thinned.stress_1w_pa
    if isinstance(thinned, float):
        return None
    share = float(abs(report.laid(thinned)[span]).max()) / max(float(stress.max()), 1.0)
    done = " (taken off)" if report.applied else ""
    return graded(
        0.0 if report.applied else share,
        evidence.settings.limits.inertia,
        measured=f"inertia makes up to {percent(share)} of the one-wave stress that counts{done}",
        action="Switch the correction for inertia on, or use a smaller specimen or a slower rise.",
    )


@check(source="range of each method; see the table of corrections", gravest=Weight.NOTE)
def corrections(evidence: Evidence) -> Answer | None:
    """Corrections that are switched on and do not hold for this shot: the curves are without them."""
    refused = [one for one in evidence.response.corrections if one.switched_on and one.refused]
    applied = [one.correction.value for one in evidence.response.corrections if one.applied]
    said = "; ".join(f"{one.correction.value} refused: {one.refused}" for one in refused)
    return Answer(
        weight=Weight.NOTE if refused else Weight.FINE,
        measured=said or f"applied: {', '.join(applied) or 'none'}",
        limit="each inside its range",
        action="State what is missing, or switch the correction off for this shot.",
    )
