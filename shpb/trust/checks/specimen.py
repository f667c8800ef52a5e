"""Checks of the specimen: mass, size, growth, friction, final length, first slope, what the bar faces add."""

from __future__ import annotations

import numpy as np

from shpb.response.corrections.friction import DRY, LUBRICATED, friction_factor
from shpb.rig.gauge import TestKind
from shpb.rig.sheet import Specimen
from shpb.settings import Correction
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Weight, graded, percent
from shpb.trust.judge import check


@check("specimen_mass", gravest=Weight.REJECT)
def specimen_mass(evidence: Evidence) -> Answer | None:
    """Mass against density times volume: a slip in diameter or length shows here."""
    specimen, limit = evidence.sheet.specimen, evidence.settings.limits.specimen_mass
    if specimen.mass_kg is None or specimen.density_kg_m3 is None:
        return None
    expected = specimen.density_kg_m3 * specimen.area_m2 * specimen.length_m
    off = specimen.mass_kg / expected - 1
    return graded(
        abs(off),
        limit,
        3 * limit,
        measured=f"{1e3 * specimen.mass_kg:.4g} g weighed, {1e3 * expected:.4g} g from density and size "
        f"({100 * off:+.1f} %)",
        action="Measure diameter and length again, weigh again, and check the density.",
    )


@check("least_slenderness", "greatest_slenderness", gravest=Weight.NOTE)
def slenderness(evidence: Evidence) -> Answer | None:
    """Length by diameter of the specimen."""
    specimen, limits = evidence.sheet.specimen, evidence.settings.limits
    if evidence.sheet.kind is TestKind.TENSION:
        return None
    ratio = specimen.length_m / specimen.diameter_m
    inside = limits.least_slenderness <= ratio <= limits.greatest_slenderness
    return Answer(
        weight=Weight.FINE if inside else Weight.NOTE,
        measured=f"length by diameter {ratio:.2f}",
        limit=f"{limits.least_slenderness:g} to {limits.greatest_slenderness:g}",
        action="Machine the next specimens nearer to half as long as wide: in thin ones friction and inertia add to "
        "the stress, long ones reach equilibrium late and may buckle.",
    )


@check("barrelling", gravest=Weight.REJECT)
def barrelling_room(evidence: Evidence) -> Answer | None:
    """The specimen must not grow over the bar's face."""
    specimen, response = evidence.sheet.specimen, evidence.response
    if evidence.sheet.kind is TestKind.TENSION:
        return None
    bar = min(evidence.rig.incident_bar.diameter_m, evidence.rig.transmitted_bar.diameter_m)
    if specimen.diameter_m > bar:
        return Answer(
            weight=Weight.REJECT,
            measured=f"specimen of {1e3 * specimen.diameter_m:.4g} mm on a bar of {1e3 * bar:.4g} mm",
            limit="at most the bar's diameter before the shot",
            action="Check the diameters of specimen and bar, and their units; use a specimen that stands on the bar.",
        )
    strain = float(response.three_wave.true_strain[response.loading[1] - 1])
    share = _grown_m(specimen, strain) / bar
    return graded(
        share,
        evidence.settings.limits.barrelling,
        beyond=Weight.RESTRICT if share > 1 else Weight.NOTE,
        measured=f"specimen grew to {100 * share:.0f} % of the bar's diameter",
        action="What counts ends where the specimen reaches the bar's edge. Use a smaller specimen or stop the strain "
        "earlier (shorter striker, stop ring).",
    )


def _grown_m(specimen: Specimen, true_strain: float) -> float:
    """Diameter at a true strain, constant volume [m]."""
    return specimen.diameter_m * float(np.exp(0.5 * min(true_strain, 3.0)))


@check("friction", source="Rand 1967; Siebel for thin discs", gravest=Weight.NOTE)
def friction(evidence: Evidence) -> Answer | None:
    """Share of the stress that friction at the faces is, at the end of what counts."""
    specimen, response = evidence.sheet.specimen, evidence.response
    if evidence.sheet.kind is TestKind.TENSION:
        return None
    if specimen.friction_coefficient is not None:
        coefficient, origin = float(specimen.friction_coefficient), "stated"
    elif specimen.lubricant:
        coefficient, origin = LUBRICATED, "assumed with a lubricant, common practice"
    else:
        coefficient, origin = DRY, "assumed dry: no lubricant stated, common practice"
    end = (response.span or response.loading)[1] - 1
    strain = min(float(response.three_wave.true_strain[end]), 3.0)
    slenderness = float(specimen.length_m / specimen.diameter_m * np.exp(-1.5 * strain))
    share = 1 - 1 / float(friction_factor(np.array(min(coefficient / slenderness, 20.0))))
    taken_off = response.correction(Correction.FRICTION).applied
    return graded(
        0.0 if taken_off else share,
        evidence.settings.limits.friction,
        measured=f"{100 * share:.1f} % of the stress at length by diameter {slenderness:.2f}, friction coefficient "
        f"{coefficient:g} ({origin}){'; taken off' if taken_off else ''}",
        action="Use a better lubricant on flat, polished faces, a longer specimen, or stop at a smaller strain; state "
        "lubricant or friction_coefficient in the shot sheet.",
    )


@check("final_length", gravest=Weight.REJECT)
def final_length(evidence: Evidence) -> Answer | None:
    """Integrated strain against the micrometer: the cheapest end-to-end test of the whole chain."""
    specimen, response = evidence.sheet.specimen, evidence.response
    if specimen.length_after_m is None:
        return None
    measured = abs(1 - specimen.length_after_m / specimen.length_m)
    last = response.loading[1] - 1
    # What springs back: specimen and bar faces, both elastic.
    peak = int(np.argmax(response.curve.strain))
    after = max(_permanent(evidence, last), _permanent(evidence, peak))
    limit = evidence.settings.limits.final_length
    return graded(
        abs(after - measured),
        limit,
        3 * limit,
        show=lambda strain: f"{strain:.3f}",
        measured=f"strain {after:.4f} from the bars, {measured:.4f} from the micrometer",
        action="Check specimen length, wave speed, gauge factors; a second loading also shortens the specimen.",
    )


def _permanent(evidence: Evidence, sample: int) -> float:
    """Engineering strain less what springs back from ``sample`` on: specimen and bar faces."""
    response, modulus = evidence.response, evidence.sheet.specimen.young_modulus_pa
    strain = float(response.curve.strain[sample]) - float(response.elastic_faces_strain[sample])
    if modulus is not None:
        strain -= float(response.curve.stress_pa[sample]) / modulus
    return strain


@check("least_first_slope", "greatest_first_slope", gravest=Weight.REJECT)
def first_slope(evidence: Evidence) -> Answer | None:
    """The apparent slope is below the modulus as a rule; above it, or far below, a size or a scale is wrong."""
    modulus, slope = evidence.sheet.specimen.young_modulus_pa, evidence.response.apparent_slope_pa
    if modulus is None or slope is None:
        return None
    share, limits = slope / modulus, evidence.settings.limits
    most = 1.3 * limits.greatest_first_slope
    inside = limits.least_first_slope <= share <= limits.greatest_first_slope
    return Answer(
        weight=Weight.FINE if inside else Weight.REJECT if share > most else Weight.NOTE,
        measured=f"first slope {100 * share:.0f} % of the stated modulus",
        limit=f"{percent(limits.least_first_slope)} to {percent(limits.greatest_first_slope)}, reject beyond "
        f"{percent(most)}",
        action="Check the specimen's diameter and length, its stated modulus, the gauges' scale, and gaps between "
        "specimen and bars.",
    )
