"""Checks of the pulses at the gauges: overlap, feet, incident pulse against striker, bar yield, drift."""

from __future__ import annotations

import numpy as np

from shpb.pulse.zero_line import PLAUSIBLE_DRIFT_PER_S
from shpb.settings import Alignment
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Finding, Weight
from shpb.trust.judge import check


@check
def overlap(evidence: Evidence) -> Finding | None:
    """The incident pulse must have died away before the reflected one begins."""
    tail = abs(evidence.pulses.tail_at_reflection)
    limit = evidence.settings.overlap_limit
    weight = Weight.FINE if tail <= limit else Weight.REJECT if tail > 2.5 * limit else Weight.NOTE
    return Finding(
        check="overlap",
        weight=weight,
        measured=f"tail of the incident pulse {100 * tail:.1f} % of its peak where the reflected one begins",
        limit=f"{100 * limit:.1f} %, reject beyond {250 * limit:.1f} %",
        source="settings overlap_limit; common practice",
        action="Use a shorter striker or a thinner pulse shaper, or move the incident gauge away from the "
        "specimen.",
    )


@check
def other_waves(evidence: Evidence) -> Finding | None:
    """Second loading and end reflections that the windows keep out."""
    remarks = [text for text in evidence.pulses.remarks if "kept out" in text]
    if not remarks:
        return None
    return Finding(
        check="other waves",
        weight=Weight.FINE,
        measured="; ".join(remarks),
        limit="kept out of the windows",
        source="travel times from the rig file",
    )


@check
def zero_line(evidence: Evidence) -> Finding | None:
    """The zero before the reflected pulse against that before the incident one: a loose gauge shows here."""
    incident, reflected = evidence.pulses.incident, evidence.pulses.reflected
    peak = float(np.abs(incident.strain).max())
    shift = abs(reflected.zero.level - incident.zero.level) / peak
    elapsed = (reflected.zero.centre - incident.zero.centre) * evidence.pulses.sample_interval_s
    # 1 %, and three times the drift that is plausible over the time between the two windows.
    limit = 0.01 + 3 * PLAUSIBLE_DRIFT_PER_S * elapsed
    return Finding(
        check="zero line",
        weight=Weight.REJECT if shift > limit else Weight.FINE,
        measured=f"zero of the incident gauge moved by {100 * shift:.1f} % of the peak across the incident pulse",
        limit=f"{100 * limit:.1f} %",
        source="common practice",
        action="Look for a loose gauge, a broken solder joint or a charged cable; do not use this shot.",
    )


@check
def quiet_before_pulse(evidence: Evidence) -> Finding | None:
    """The window that gives a pulse its zero must hold no wave: noise there must be white."""
    worst, share = "", -1.0
    # The gap before the reflected pulse is short and was searched for trends when it was chosen.
    for pulse in (evidence.pulses.incident, evidence.pulses.transmitted):
        unrest = pulse.zero.unrest / max(float(np.abs(pulse.strain).max()), 1e-12)
        if unrest > share:
            worst, share = pulse.name, unrest
    limit = 0.02
    return Finding(
        check="quiet before pulse",
        weight=Weight.REJECT if share > limit else Weight.FINE,
        measured=f"the trace before the {worst} pulse moves by {100 * share:.2f} % of its peak beyond white noise",
        limit=f"{100 * limit:.0f} %",
        source="common practice",
        action="A wave stands where there should be none: check gauge distances and wave speeds in the rig file, and "
        "the cable for interference.",
    )


@check
def zero_after_shot(evidence: Evidence) -> Finding | None:
    """A trace that does not come back to zero after its pulse: loose gauge, or a bar bent or yielded."""
    worst, shift = "", 0.0
    for pulse in (evidence.pulses.transmitted, evidence.pulses.reflected):
        # The last tenth before the taper, where the loading has long died away.
        size = pulse.strain.size
        tail = pulse.strain[int(0.85 * size) : int(0.93 * size)]
        peak = float(np.abs(pulse.strain).max())
        if tail.size and peak and abs(float(tail.mean())) / peak > shift:
            worst, shift = pulse.name, abs(float(tail.mean())) / peak
    limit = 0.10
    return Finding(
        check="zero after shot",
        weight=Weight.NOTE if shift > limit else Weight.FINE,
        measured=f"the {worst} trace ends {100 * shift:.1f} % of its peak away from zero",
        limit=f"{100 * limit:.0f} %",
        source="common practice",
        action="Look for a loose gauge or a cable that moved; see whether the pulse simply lasts longer than "
        "the record.",
    )


@check
def feet(evidence: Evidence) -> Finding | None:
    """Feet of reflected and transmitted pulse against where distances and wave speeds put them."""
    faces = evidence.faces
    off = {
        "reflected": faces.reflected_misalignment_s,
        "transmitted": faces.transmitted_misalignment_s,
    }
    known = {name: value for name, value in off.items() if value is not None}
    if not known:
        return None
    worst = max(known, key=lambda name: abs(known[name]))
    # Tangent feet of pulses of different shape differ by a part of the rise even when all is well: a specimen
    # holds back the reflected front until it yields, and lets the transmitted one rise the sooner.
    rise = evidence.pulses.incident.foot.rise_s if evidence.pulses.incident.foot else 0.0
    limit = evidence.settings.misalignment_limit_s + 0.25 * rise
    if worst == "transmitted":
        # Without a known transit the foot may lag by what the specimen needs.
        limit += 0.0 if evidence.sheet.specimen.transit_time_s is not None else 2e-6
    size = abs(known[worst])
    weight = Weight.FINE if size <= limit else Weight.REJECT if size > 3 * limit else Weight.NOTE
    return Finding(
        check="feet",
        weight=weight,
        measured=f"{worst} foot {known[worst] * 1e6:+.2f} us from where travel times put it "
        f"(picker {faces.u_misalignment_s * 1e6:.2f} us)",
        limit=f"{limit * 1e6:.1f} us, reject beyond {3 * limit * 1e6:.1f} us",
        source="settings misalignment_limit_s and a quarter of the incident rise; common practice",
        action="Measure gauge distances and wave speed again; look for a gap between specimen and bars.",
    )


@check
def tuned_shift(evidence: Evidence) -> Finding | None:
    """Feet laid on each other: allowed only by what physics leaves open (tuning on equilibrium is circular)."""
    faces, sheet = evidence.faces, evidence.sheet
    if evidence.settings.alignment is not Alignment.FEET:
        return None
    transit = sheet.specimen.transit_time_s or 0.0
    # The transmitted foot may be moved by the specimen's transit besides what the picker cannot tell.
    open_s = transit + faces.interval_s + 2 * faces.u_misalignment_s
    moved = max(abs(faces.reflected_shift_s), abs(faces.transmitted_shift_s))
    untuned = evidence.response.untuned_equilibrium
    beside = "" if untuned is None else f"; R {100 * untuned.mean_ratio:.1f} % without it"
    return Finding(
        check="tuned shift",
        weight=Weight.FINE if moved <= open_s else Weight.REJECT if moved > 2 * open_s else Weight.NOTE,
        measured=f"feet moved by up to {1e6 * moved:.2f} us{beside}",
        limit=f"{1e6 * open_s:.2f} us: transit, one sample and the picker's scatter; reject beyond twice that",
        source="physical uncertainty of the travel times; common practice",
        action="Use travel times (alignment physical); measure gauge distances and wave speed instead of tuning.",
    )


@check
def window_start(evidence: Evidence) -> Finding | None:
    """A pulse that runs already where its window begins came sooner than distances and wave speeds say."""
    worst = max(evidence.pulses, key=lambda pulse: abs(pulse.level_at_start))
    level = abs(worst.level_at_start)
    limit = 0.05 + 4 * worst.u_level_at_start
    return Finding(
        check="window start",
        weight=Weight.FINE if level <= limit else Weight.REJECT,
        measured=f"the {worst.name} trace stands at {100 * level:.1f} % of its peak where its window begins",
        limit=f"{100 * limit:.1f} %",
        source="common practice",
        action="Check gauge distances and wave speeds in the rig file; see overlap; a window set by hand may "
        "begin too late.",
    )


@check
def incident_against_striker(evidence: Evidence) -> Finding | None:
    """Impulse of the incident pulse against the striker's momentum: catches a wrong gauge factor or gain."""
    balance = evidence.response.balance
    momentum = balance.striker_momentum_n_s
    striker = evidence.rig.striker
    if momentum is None or striker is None:
        return None
    ratio = balance.incident_impulse_n_s / momentum
    limit = evidence.settings.striker_limit
    # A shaper makes the striker bounce back: the bar then gets more than the momentum it had.
    above = limit + (0.10 if striker.shaper else 0.0)
    heavier = striker.impedance_n_s_m > 1.02 * evidence.rig.incident_bar.impedance_n_s_m
    off = ratio > 1 + above or (ratio < 1 - limit and not heavier)
    far = ratio > 1 + above + 2 * limit or (ratio < 1 - 3 * limit and not heavier)
    return Finding(
        check="incident against striker",
        weight=Weight.FINE if not off else Weight.REJECT if far else Weight.NOTE,
        measured=f"impulse of the incident pulse is {ratio:.3f} of the striker's momentum",
        limit=f"{1 - limit:.2f} to {1 + above:.2f}",
        source="momentum identity, integral of force = mass times speed; settings striker_limit",
        action="Check gauge factor, bridge arrangement, excitation and gain in the rig file, the striker's "
        "mass and the speed reading.",
    )


@check
def bar_yield(evidence: Evidence) -> Finding | None:
    """The bars must stay elastic."""
    worst, share = "", -1.0
    for name, bar, pulses in (
        ("incident", evidence.rig.incident_bar, (evidence.pulses.incident, evidence.pulses.reflected)),
        ("transmitted", evidence.rig.transmitted_bar, (evidence.pulses.transmitted,)),
    ):
        if bar.yield_strength_pa is None:
            continue
        strain = max(float(np.abs(pulse.strain).max()) for pulse in pulses)
        used = bar.young_modulus_pa * strain / bar.yield_strength_pa
        if used > share:
            worst, share = name, used
    if share < 0:
        return None
    limit = evidence.settings.bar_yield_limit
    return Finding(
        check="bar yield",
        weight=Weight.FINE if share <= limit else Weight.REJECT,
        measured=f"the {worst} bar was loaded to {100 * share:.0f} % of its yield strength",
        limit=f"{100 * limit:.0f} %",
        source="settings bar_yield_limit; one-dimensional elastic wave theory",
        action="Lower the striker speed. Check the bar for straightness before the next shot: it may be bent "
        "or mushroomed.",
    )


@check
def bending(evidence: Evidence) -> Finding | None:
    """Bending by axial strain, where each side of a bar is recorded on its own channel."""
    worst, ratio = "", -1.0
    for name, station, pulse in (
        ("incident", evidence.strain.incident, evidence.pulses.incident),
        ("transmitted", evidence.strain.transmitted, evidence.pulses.transmitted),
    ):
        if station.bending is None:
            continue
        start, stop = (evidence.strain.index(time) for time in pulse.window_s)
        loud = np.abs(pulse.strain) > 0.5 * np.abs(pulse.strain).max()
        level = float(np.abs(station.bending[start : start + loud.size][loud]).mean())
        share = level / float(np.abs(pulse.strain[loud]).mean())
        if share > ratio:
            worst, ratio = name, share
        del stop
    if ratio < 0:
        return None
    limit = 0.10
    return Finding(
        check="bending",
        weight=Weight.NOTE if ratio > limit else Weight.FINE,
        measured=f"bending is {100 * ratio:.1f} % of the axial strain in the {worst} bar",
        limit=f"{100 * limit:.0f} %",
        source="common practice",
        action="Align barrel, striker and bars; check the bar supports.",
    )
