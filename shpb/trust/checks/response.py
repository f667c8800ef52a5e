"""Checks of the response: equilibrium, rate, work, what the bar faces add."""

from __future__ import annotations

from shpb.response.equilibrium import R_DEFINITION, Outcome
from shpb.rig.gauge import TestKind
from shpb.settings import Correction
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Weight, graded
from shpb.trust.judge import check


@check("equilibrium", "late_strain", gravest=Weight.REJECT)
def force_equilibrium(evidence: Evidence) -> Answer | None:
    """R(t) over the loading: equilibrium reached, reached late, not reached, or not to be decided."""
    eq = evidence.response.equilibrium
    spread = f"mean R {100 * eq.mean_ratio:.1f} %, floor {100 * eq.typical_floor:.1f} %"
    match eq.outcome:
        case Outcome.REACHED:
            weight, action = Weight.FINE, ""
            measured = f"reached at strain {eq.strain_at_start:.4f}; {spread}"
        case Outcome.REACHED_LATE:
            weight = Weight.RESTRICT
            measured = f"reached late, at strain {eq.strain_at_start:.4f}; {spread}"
            action = (
                "Only the curve beyond that strain counts. Use a pulse shaper, a shorter specimen or a lower "
                "rate to reach equilibrium earlier."
            )
        case Outcome.NOT_REACHED:
            weight = Weight.REJECT
            measured = f"not reached; {spread}"
            action = "Use a pulse shaper for a slower rise, a shorter specimen or a lower striker speed."
        case Outcome.CANNOT_BE_DECIDED:
            weight = Weight.REJECT
            measured = f"cannot be decided: {spread}, the floor is above the limit"
            action = (
                "The front force is a small difference of two large pulses here. Use bars of lower impedance, a "
                "larger specimen or a more sensitive gauge; after a bars-together calibration state a smaller "
                "pulse_error in the settings."
            )
    return Answer(
        weight=weight,
        measured=measured,
        limit=f"R <= {100 * eq.limit:.3g} % for 90 % of the rest of the loading; {R_DEFINITION}",
        action=action,
    )


@check("reverberations", gravest=Weight.NOTE)
def reverberations(evidence: Evidence) -> Answer | None:
    """Elastic transits of the specimen before the curve counts, against pi of Davies & Hunter."""
    passed, least = evidence.response.equilibrium.reverberations, evidence.settings.limits.reverberations
    if passed is None:
        return None
    return Answer(
        weight=Weight.NOTE if passed < least else Weight.FINE,
        measured=f"{passed:.1f} elastic transits of the specimen before equilibrium",
        limit=f"at least {least:.3g}",
        action="R(t) fell within its limit sooner than waves can even out; read the first strains with care.",
    )


@check("analyses", source="both follow from the same three pulses", gravest=Weight.REJECT)
def analyses_agree(evidence: Evidence) -> Answer | None:
    """Strain by one-wave and by three-wave analysis at the end of the loading: equal in equilibrium."""
    response = evidence.response
    last = response.loading[1] - 1
    one, three = float(response.one_wave.strain[last]), float(response.three_wave.strain[last])
    return graded(
        abs(one / three - 1) if three > 0 else 1.0,
        evidence.settings.limits.analyses,
        4 * evidence.settings.limits.analyses,
        measured=f"strain {one:.4f} by one wave, {three:.4f} by three",
        action="Are the two bars unlike? Then switch equal_bars off in [settings]. If not: check force equilibrium, "
        "both gauge factors, and the zero lines.",
    )


@check("rate_variation", gravest=Weight.NOTE)
def rate_constancy(evidence: Evidence) -> Answer | None:
    """Variation of the strain rate over the part that counts."""
    rate = evidence.response.rate
    return graded(
        rate.variation,
        evidence.settings.limits.rate_variation,
        measured=f"rate {rate.least_per_s:.0f} to {rate.greatest_per_s:.0f} /s, mean {rate.mean_per_s:.0f} /s, "
        f"variation {100 * rate.variation:.0f} %",
        action="Shape the incident pulse to rise as the specimen hardens, or state the range with the mean.",
    )


@check("work", source="energy identity", gravest=Weight.NOTE)
def work_balance(evidence: Evidence) -> Answer | None:
    """Work of the face forces against the work that deforms the specimen: equal in equilibrium."""
    balance = evidence.response.balance
    off = 1.0 if balance.work_j <= 0 else abs(balance.specimen_work_j / balance.work_j - 1)
    return graded(
        off,
        evidence.settings.limits.work,
        show=lambda share: f"{100 * share:.3g} % apart",
        measured=f"{balance.work_j:.3g} J at the faces, {balance.specimen_work_j:.3g} J in the specimen",
        action="The forces at the faces do not fit: check force equilibrium, both gauge factors and the bar values.",
    )


@check(source="finite bar, static elasticity; Safa & Gary 2010 for the dynamic case", gravest=Weight.FINE)
def indentation(evidence: Evidence) -> Answer | None:
    """Strain that the bar faces add, shown for every shot."""
    response = evidence.response
    if evidence.sheet.kind is TestKind.TENSION:
        return None
    added = float(response.indentation_strain[slice(*(response.span or response.loading))].max())
    taken = "taken off" if response.correction(Correction.INDENTATION).applied else "not taken off"
    return Answer(
        weight=Weight.FINE,
        measured=f"bar faces add up to {added:.4f} of strain (estimate, {taken})",
        limit="shown for every shot",
    )
