"""Checks of the specimen's response: equilibrium, rate, balances, final length, size, indentation."""

from __future__ import annotations

import numpy as np

from shpb.response.equilibrium import R_DEFINITION, Outcome
from shpb.rig.gauge import TestKind
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Finding, Weight
from shpb.trust.judge import check

_EQUILIBRIUM_SOURCE = "settings equilibrium_limit; Ravichandran & Subhash 1994 (5 %)"


@check
def force_equilibrium(evidence: Evidence) -> Finding | None:
    """One of four outcomes."""
    eq = evidence.response.equilibrium
    limit = f"R <= {100 * eq.limit:.3g} % for 90 % of the rest of the loading"
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
    return Finding(
        check="force equilibrium",
        weight=weight,
        measured=measured,
        limit=f"{limit}; {R_DEFINITION}",
        source=_EQUILIBRIUM_SOURCE,
        action=action,
    )


@check
def reverberations(evidence: Evidence) -> Finding | None:
    """Transits of the specimen before the curve counts, against pi of Davies & Hunter."""
    passed = evidence.response.equilibrium.reverberations
    if passed is None:
        return None
    few = passed < np.pi
    return Finding(
        check="reverberations",
        weight=Weight.NOTE if few else Weight.FINE,
        measured=f"{passed:.1f} elastic transits of the specimen before equilibrium",
        limit="at least pi",
        source="Davies & Hunter 1963",
        action="R(t) fell within its limit sooner than waves can even out; read the first strains with care.",
    )


@check
def rate_constancy(evidence: Evidence) -> Finding | None:
    """Variation of the strain rate over the part that counts."""
    rate, limit = evidence.response.rate, evidence.settings.rate_variation_limit
    return Finding(
        check="rate constancy",
        weight=Weight.NOTE if rate.variation > limit else Weight.FINE,
        measured=f"rate {rate.least_per_s:.0f} to {rate.greatest_per_s:.0f} /s, mean {rate.mean_per_s:.0f} /s, "
        f"variation {100 * rate.variation:.0f} %",
        limit=f"{100 * limit:.0f} %",
        source="settings rate_variation_limit; common practice",
        action="Shape the incident pulse to rise as the specimen hardens, or state the range with the mean.",
    )


@check
def work_balance(evidence: Evidence) -> Finding | None:
    """Work of the face forces against the work that deforms the specimen: equal in equilibrium."""
    balance = evidence.response.balance
    off = 1.0 if balance.work_j <= 0 else abs(balance.specimen_work_j / balance.work_j - 1)
    limit = evidence.settings.work_limit
    return Finding(
        check="work balance",
        weight=Weight.FINE if off <= limit else Weight.NOTE,
        measured=f"{balance.work_j:.3g} J at the faces, {balance.specimen_work_j:.3g} J in the specimen",
        limit=f"{100 * limit:.0f} % apart",
        source="energy identity; settings work_limit",
        action="Where they differ the face forces do: see force equilibrium, gauge factors and bar values.",
    )


@check
def impulse_ratio(evidence: Evidence) -> Finding | None:
    """Impulse of both face forces over the loading: a gauge that reads wrong shows here."""
    eq = evidence.response.equilibrium
    off = abs(eq.impulse_ratio - 1)
    limit = 0.05 + 2 * eq.typical_floor
    return Finding(
        check="impulse ratio",
        weight=Weight.FINE if off <= limit else Weight.NOTE,
        measured=f"impulse of F_out by that of F_in: {eq.impulse_ratio:.3f}",
        limit=f"1 +- {limit:.2f}",
        source="momentum of a light specimen; common practice",
        action="Check the two gauge factors, bridge arrangements and gains against each other (bars together).",
    )


@check
def final_length(evidence: Evidence) -> Finding | None:
    """Integrated strain against the micrometer: the cheapest end-to-end test of the whole chain."""
    specimen, response = evidence.sheet.specimen, evidence.response
    if specimen.length_after_m is None:
        return None
    measured = abs(1 - specimen.length_after_m / specimen.length_m)
    last = response.loading[1] - 1
    strain = float(response.three_wave.strain[last])
    # What springs back: specimen and bar faces, both elastic.
    elastic = float(response.indentation_strain[last])
    if specimen.young_modulus_pa is not None:
        elastic += float(response.three_wave.stress_pa[last]) / specimen.young_modulus_pa
    after = _permanent(evidence, strain - elastic)
    off = after - measured
    limit = evidence.settings.final_length_limit
    return Finding(
        check="final length",
        weight=Weight.FINE if abs(off) <= limit else Weight.REJECT if abs(off) > 3 * limit else Weight.NOTE,
        measured=f"strain {after:.4f} from the bars, {measured:.4f} from the micrometer",
        limit=f"{limit:.3f} apart, reject beyond {3 * limit:.3f}",
        source="settings final_length_limit; common practice",
        action="Check specimen length, wave speed, gauge factors; a second loading also shortens the specimen.",
    )


def _permanent(evidence: Evidence, at_end_of_loading: float) -> float:
    """Permanent strain: the greatest engineering strain less what springs back."""
    response = evidence.response
    peak = int(np.argmax(response.three_wave.strain))
    greatest = float(response.three_wave.strain[peak]) - float(response.indentation_strain[peak])
    modulus = evidence.sheet.specimen.young_modulus_pa
    if modulus is not None:
        greatest -= max(float(response.three_wave.stress_pa[peak]), 0.0) / modulus
    return max(greatest, at_end_of_loading)


@check
def indentation(evidence: Evidence) -> Finding | None:
    """Strain that the bar faces add, shown for every shot."""
    response = evidence.response
    if evidence.sheet.kind is TestKind.TENSION:
        return None
    span = slice(*(response.span or response.loading))
    added = float(response.indentation_strain[span].max())
    return Finding(
        check="indentation",
        weight=Weight.FINE,
        measured=f"bar faces add up to {added:.4f} of strain (estimate, not taken off)",
        limit="shown for every shot",
        source="finite bar, static elasticity; Safa & Gary 2010 for the dynamic case",
    )


@check
def slenderness(evidence: Evidence) -> Finding | None:
    """Length by diameter of the specimen."""
    specimen = evidence.sheet.specimen
    if evidence.sheet.kind is TestKind.TENSION:
        return None
    ratio = specimen.length_m / specimen.diameter_m
    odd = not 0.25 <= ratio <= 1.2
    return Finding(
        check="slenderness",
        weight=Weight.NOTE if odd else Weight.FINE,
        measured=f"length by diameter {ratio:.2f}",
        limit="0.25 to 1.2",
        source="common practice; Davies & Hunter 1963 for least inertia",
        action="Thin specimens suffer friction and inertia, long ones late equilibrium and buckling.",
    )


@check
def barrelling_room(evidence: Evidence) -> Finding | None:
    """The specimen must not grow over the bar's face."""
    specimen, response = evidence.sheet.specimen, evidence.response
    if evidence.sheet.kind is TestKind.TENSION:
        return None
    strain = float(response.three_wave.true_strain[response.loading[1] - 1])
    diameter = specimen.diameter_m * float(np.exp(0.5 * min(strain, 3.0)))
    bar = min(evidence.rig.incident_bar.diameter_m, evidence.rig.transmitted_bar.diameter_m)
    share = diameter / bar
    return Finding(
        check="barrelling room",
        weight=Weight.FINE if share <= 0.9 else Weight.RESTRICT if share > 1.0 else Weight.NOTE,
        measured=f"specimen grew to {100 * share:.0f} % of the bar's diameter",
        limit="90 %",
        source="common practice",
        action="What counts ends where the specimen reaches the bar's edge. Use a smaller specimen or stop the strain "
        "earlier (shorter striker, stop ring).",
    )


@check
def absolute_calibration(evidence: Evidence) -> Finding | None:
    """Something outside the bridges must confirm their scale: the striker's momentum or the specimen's final length."""
    sheet = evidence.sheet
    by_striker = sheet.striker_speed_m_s is not None and evidence.rig.striker is not None
    by_length = sheet.specimen.length_after_m is not None
    known = [
        name for name, there in (("striker speed", by_striker), ("length after the shot", by_length)) if there
    ]
    return Finding(
        check="absolute calibration",
        weight=Weight.FINE if known else Weight.NOTE,
        measured=f"scale confirmed by {' and '.join(known)}"
        if known
        else "nothing confirms the scale of the gauges",
        limit="striker speed or length after the shot",
        source="common practice",
        action="State the striker speed and the striker, or measure the specimen after the shot: a wrong gauge factor "
        "or gain scales every curve and shows nowhere else.",
    )


@check
def first_slope(evidence: Evidence) -> Finding | None:
    """The apparent slope is far below the modulus as a rule; above it, a size or a scale is wrong."""
    modulus, slope = evidence.sheet.specimen.young_modulus_pa, evidence.response.apparent_slope_pa
    if modulus is None or slope is None:
        return None
    share = slope / modulus
    return Finding(
        check="first slope",
        weight=Weight.REJECT if share > 1.3 else Weight.NOTE if share > 1.0 else Weight.FINE,
        measured=f"first slope {100 * share:.0f} % of the stated modulus",
        limit="100 %, reject beyond 130 %",
        source="common practice: 10 to 50 % on metals, bar faces give way",
        action="Check the specimen's diameter and length, its stated modulus, and the gauges' scale.",
    )
