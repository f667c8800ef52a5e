"""Checks of gauges, amplifiers and bars: their scale, bandwidth, bending, yield, temperature."""

from __future__ import annotations

import numpy as np

from shpb.rig.bar import Striker
from shpb.rig.rig import Rig
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Weight, graded, percent
from shpb.trust.judge import check
from shpb.wave.recording_chain import chain_gain

_ROOM_K = 293.15


@check(
    "striker", "striker_rebound", source="momentum identity: integral of force = mass x speed",
    gravest=Weight.REJECT,
)  # fmt: skip
def incident_against_striker(evidence: Evidence) -> Answer | None:
    """Impulse of the incident pulse against the striker's momentum: catches a wrong gauge factor or gain."""
    balance, striker, limits = evidence.response.balance, evidence.rig.striker, evidence.settings.limits
    momentum = balance.striker_momentum_n_s
    if momentum is None or striker is None:
        return None
    ratio, limit = balance.incident_impulse_n_s / momentum, limits.striker
    # A shaper makes the striker bounce back: the bar then gets more than the momentum it had.
    above = 1 + limit + (limits.striker_rebound if striker.shaper else 0.0)
    below = _momentum_share(evidence, striker) - limit
    off = ratio > above or ratio < below
    far = ratio > above + limit or ratio < below - limit
    return Answer(
        weight=Weight.FINE if not off else Weight.REJECT if far else Weight.NOTE,
        measured=f"impulse of the incident pulse is {ratio:.3f} of the striker's momentum",
        limit=f"{below:.3g} to {above:.3g}, reject beyond {below - limit:.3g} to {above + limit:.3g}",
        action="Check gauge factor, bridge arrangement, excitation and gain in the rig file, the diameters of bar and "
        "striker, the striker's mass and the speed reading.",
    )


def _momentum_share(evidence: Evidence, striker: Striker) -> float:
    """Share of the striker's momentum that has gone over within the incident window.

    A striker of higher impedance pushes in steps that fall by (Z_s - Z)/(Z_s + Z) every 2 L/c (one-dimensional wave
    theory); one of lower impedance, or the bar's own, gives all it has at once.
    """
    z, bar = striker.impedance_n_s_m, evidence.rig.incident_bar.impedance_n_s_m
    if z <= 1.02 * bar:
        return 1.0
    start, stop = evidence.pulses.incident.window_s
    if evidence.pulses.separated_bar("incident") is not None:
        stop = min(stop, evidence.pulses.arrivals.second_loading_s)
    steps = max(int((stop - start) / striker.pulse_duration_s), 1)
    return 1.0 - float((z - bar) / (z + bar)) ** steps


@check(
    "momentum", source="momentum of the specimen, rho A L (v_in + v_out)/2; twice the floor of R is added",
    gravest=Weight.REJECT,
)  # fmt: skip
def momentum_balance(evidence: Evidence) -> Answer | None:
    """Impulse of F_in - F_out over the loading against the specimen's own momentum: a gauge that reads wrong shows."""
    response, specimen = evidence.response, evidence.sheet.specimen
    part, last = slice(*response.loading), response.loading[1] - 1
    impulse_in, impulse_out = (
        float(force[part].sum()) * evidence.faces.interval_s
        for force in (response.motion.force_in_n, response.motion.force_out_n)
    )
    own, known = 0.0, specimen.density_kg_m3 is not None
    if specimen.density_kg_m3 is not None:
        mass = specimen.density_kg_m3 * specimen.area_m2 * specimen.length_m
        velocities = response.motion.velocity_in_m_s[last], response.motion.velocity_out_m_s[last]
        own = mass * float(sum(velocities)) / 2
    off = 1.0 if impulse_in <= 0 else abs(impulse_in - impulse_out - own) / impulse_in
    limit, floor = evidence.settings.limits.momentum, 2 * response.equilibrium.typical_floor
    return graded(
        off,
        limit + floor,
        3 * limit + floor,
        measured=f"impulse of F_in {impulse_in:.3g} N s, of F_out {impulse_out:.3g} N s, momentum of the specimen "
        f"{f'{own:.2g} N s' if known else 'not known (no density)'}: {100 * off:.1f} % of F_in's is not accounted for",
        action="Check gauge factors, bridge arrangements, excitations and gains of the two stations against each "
        "other (bars together), and the bars' density, wave speed and diameter.",
    )


@check(source="common practice", gravest=Weight.NOTE)
def absolute_calibration(evidence: Evidence) -> Answer | None:
    """Something outside the bridges must confirm their scale: the striker's momentum or the specimen's final length."""
    sheet = evidence.sheet
    by_striker = sheet.striker_speed_m_s is not None and evidence.rig.striker is not None
    by_length = sheet.specimen.length_after_m is not None
    known = [
        name for name, there in (("striker speed", by_striker), ("length after the shot", by_length)) if there
    ]
    return Answer(
        weight=Weight.FINE if known else Weight.NOTE,
        measured=f"scale confirmed by {' and '.join(known)}"
        if known
        else "nothing confirms the scale of the gauges",
        limit="striker speed or length after the shot",
        action="State the striker speed and the striker, or measure the specimen after the shot: a wrong gauge factor "
        "or gain scales every curve and shows nowhere else.",
    )


@check(
    "bandwidth_loss", source="averaging over the gauge, sin(x)/x; second-order amplifier, 1/sqrt(1 + (f/f3)^4)",
    gravest=Weight.NOTE,
)  # fmt: skip
def bandwidth(evidence: Evidence) -> Answer | None:
    """What gauge length and amplifier take from a wave at the cut-off of the low-pass."""
    cutoff = evidence.faces.low_pass.cutoff_hz
    losses = {name: 1 - gain for name, gain in _gains(evidence.rig, cutoff).items()}
    worst = max(losses, key=lambda name: losses[name])
    stated = [gauge.bandwidth_hz for gauge in (evidence.rig.incident_gauge, evidence.rig.transmitted_gauge)]
    beside = "; amplifier bandwidth not stated" if None in stated else ""
    return graded(
        losses[worst],
        evidence.settings.limits.bandwidth_loss,
        measured=f"the {worst} station loses {percent(losses[worst])} at {cutoff / 1e3:.0f} kHz{beside}",
        action="Use an amplifier of wider band or shorter gauges, lower the cut-off, or switch on the gauge-rise "
        "correction.",
    )


def _gains(rig: Rig, frequency_hz: float) -> dict[str, float]:
    stations = (
        ("incident", rig.incident_gauge, rig.incident_bar),
        ("transmitted", rig.transmitted_gauge, rig.transmitted_bar),
    )
    at = np.array([frequency_hz])
    return {name: float(chain_gain(at, gauge, bar)[0]) for name, gauge, bar in stations}


@check("bar_yield", source="one-dimensional elastic wave theory", gravest=Weight.REJECT)
def bar_yield(evidence: Evidence) -> Answer | None:
    """The bars must stay elastic."""
    used: dict[str, float] = {}
    for name, bar, pulses in (
        ("incident", evidence.rig.incident_bar, (evidence.pulses.incident, evidence.pulses.reflected)),
        ("transmitted", evidence.rig.transmitted_bar, (evidence.pulses.transmitted,)),
    ):
        if bar.yield_strength_pa is not None:
            strain = max(float(np.abs(pulse.strain).max()) for pulse in pulses)
            used[name] = bar.young_modulus_pa * strain / bar.yield_strength_pa
    if not used:
        return None
    worst = max(used, key=lambda name: used[name])
    return graded(
        used[worst],
        evidence.settings.limits.bar_yield,
        beyond=Weight.REJECT,
        measured=f"the {worst} bar was loaded to {100 * used[worst]:.0f} % of its yield strength",
        action="Lower the striker speed. Check the bar for straightness before the next shot: it may be bent "
        "or mushroomed.",
    )


@check("bending", gravest=Weight.NOTE)
def bending(evidence: Evidence) -> Answer | None:
    """Bending by axial strain of each pulse, where each side of a bar is recorded on its own channel."""
    stations = {
        "incident": evidence.strain.incident,
        "reflected": evidence.strain.incident,
        "transmitted": evidence.strain.transmitted,
    }
    shares: dict[str, float] = {}
    for pulse in evidence.pulses:
        bent = stations[pulse.name].bending
        # Of a wave told apart by several stations the bending is not its own.
        if bent is None or evidence.pulses.waves(pulse.name) is not None:
            continue
        start = evidence.strain.index(pulse.window_s[0])
        quiet = float(bent[slice(*pulse.zero.quiet[0])].mean())
        loud = np.abs(pulse.strain) > 0.5 * np.abs(pulse.strain).max()
        level = float(np.abs(bent[start : start + loud.size][loud] - quiet).mean())
        shares[pulse.name] = level / float(np.abs(pulse.strain[loud]).mean())
    if not shares:
        return None
    worst = max(shares, key=lambda name: shares[name])
    each = ", ".join(f"{name} {100 * share:.1f} %" for name, share in shares.items())
    return graded(
        shares[worst],
        evidence.settings.limits.bending,
        measured=f"bending is {100 * shares[worst]:.1f} % of the axial strain in the {worst} pulse ({each})",
        action="Align barrel, striker and bars; check the bar supports.",
    )


@check(
    "bar_temperature_k", source="Chiddister & Malvern 1963 for what a hot bar end does", gravest=Weight.NOTE
)
def bar_temperature(evidence: Evidence) -> Answer | None:
    """A hot or cold specimen changes the bars' ends: their faces' temperature should be known."""
    sheet = evidence.sheet
    apart = abs(sheet.temperature_k - _ROOM_K)
    faces = (sheet.incident_face_temperature_k, sheet.transmitted_face_temperature_k)
    known = all(face is not None for face in faces)
    limit = evidence.settings.limits.bar_temperature_k
    said = (
        "both bar faces' temperatures are stated" if known else "not both bar faces' temperatures are stated"
    )
    return Answer(
        weight=Weight.NOTE if apart > limit and not known else Weight.FINE,
        measured=f"specimen {apart:.0f} K from 20 C; {said}",
        limit=f"up to {limit:.0f} K, or both stated",
        action="Measure or estimate the temperature of both bar faces at impact and the heated length, and state them "
        "in the shot sheet: modulus and wave speed of the bars change there.",
    )
