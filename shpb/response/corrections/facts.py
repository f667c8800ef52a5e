"""What each correction is about, where it is published, for what it holds, and what it needs to be stated."""

from __future__ import annotations

from dataclasses import dataclass

from shpb.settings import Correction


@dataclass(frozen=True, slots=True)
class Fact:
    """One correction in words, for reports and documentation."""

    what: str
    source: str
    holds_for: str
    needs: str


MOST_INERTIA = 0.20  # share of the flow stress beyond which a first estimate is not good enough
MOST_FRICTION = 1.0  # of coefficient x diameter / length: beyond it the faces may stick
MOST_RADIUS = 0.9  # of the bar's: beyond it the specimen leaves no rim that could hold the face back
LEAST_RATE_PER_S = 100.0  # common practice: adiabatic above 10 to 100 /s

# In the order in which they act.
FACTS: dict[Correction, Fact] = {
    Correction.GAUGE_RISE: Fact(
        "Averaging over the gauge length and roll-off of the amplifier: undone in the spectrum of all three pulses",
        "averaging over the gauge length; second-order Butterworth amplifier",
        "what passes the low-pass, as far as each pulse stands above its noise and gauge and amplifier show half of "
        "it; beyond that their rise time is the limit",
        "gauge_length or bandwidth of both gauges",
    ),
    Correction.BAR_TEMPERATURE: Fact(
        "Hot or cold bar ends: force, velocity and travel time through a sliced temperature gradient, all "
        "reflections kept",
        "Chiddister & Malvern 1963; Walley 2020 (review)",
        "straight temperature profiles that end before the gauge; face modulus 0.3 to 1.5 of the cold one",
        "face temperatures and heated_length of the shot, modulus_temperature_coefficient of the bars",
    ),
    Correction.MISMATCH: Fact(
        "Two bars of different impedance: the one- and two-wave rates get the term with the transmitted force "
        "(each force always has its own bar's E, A and c)",
        "one-dimensional elastic wave theory",
        "any two elastic bars; one- and two-wave rates in force equilibrium",
        "nothing more",
    ),
    Correction.INDENTATION: Fact(
        "The bar faces give way under the specimen: strain less their share, with the specimen's current radius",
        "finite bar, static elasticity (uniform pressure); Safa & Gary 2010 for the dynamic case",
        f"compression; specimens up to {MOST_RADIUS:g} of the bar's radius; pulses long against the bar's radius",
        "nothing more",
    ),
    Correction.INERTIA: Fact(
        "Radial and axial inertia of the specimen: stress less what accelerates it, for the face that the analysis "
        "looks at",
        "Davies & Hunter 1963; rate-square terms Samanta 1971, Gorham 1989",
        f"solid discs of constant volume, uniform strain; up to {100 * MOST_INERTIA:g} % of the flow stress",
        "the specimen's density",
    ),
    Correction.FRICTION: Fact(
        "Friction at the faces: mean pressure divided by 2 (exp C - C - 1)/C^2, C = coefficient x diameter / length, "
        "as they grow",
        "Rand 1967; Siebel for thin discs",
        f"discs that slide everywhere: C up to {MOST_FRICTION:g}, friction below the shear yield",
        "the specimen's friction_coefficient",
    ),
    Correction.HEATING: Fact(
        "Adiabatic heating: the curves become isothermal; the temperature along the curve is always worked out",
        "Taylor & Quinney 1934; thermal factor of Johnson & Cook 1983 or a stated slope",
        f"rates above {LEAST_RATE_PER_S:g} /s, uniform deformation, less than half of the stress",
        "density, heat_capacity, and stress_slope or melting_temperature with softening_exponent",
    ),
}
