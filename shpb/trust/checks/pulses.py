"""Checks of the pulses in their windows: overlap, other waves, feet, shifts by hand."""

from __future__ import annotations

from shpb.settings import Alignment, Correction
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Weight, graded
from shpb.trust.judge import check


@check("overlap", gravest=Weight.REJECT)
def overlap(evidence: Evidence) -> Answer | None:
    """The incident pulse must have died away before the reflected one begins."""
    if evidence.pulses.separated_bar("incident") is not None:
        return None  # they may lie on each other: stations tell them apart
    tail, limit = abs(evidence.pulses.tail_at_reflection), evidence.settings.limits.overlap
    return graded(
        tail,
        limit,
        2.5 * limit,
        measured=f"tail of the incident pulse {100 * tail:.1f} % of its peak where the reflected one begins",
        action="Use a shorter striker or a thinner pulse shaper, or move the incident gauge away from the "
        "specimen.",
    )


@check(source="travel times from the rig file", gravest=Weight.REJECT)
def other_waves(evidence: Evidence) -> Answer | None:
    """No window may run on into the next wave: reflected front, second loading, end reflection."""
    pulses, arrivals = evidence.pulses, evidence.pulses.arrivals
    every = (
        (pulses.incident, arrivals.reflected_s, "the reflected front"),
        (pulses.reflected, arrivals.second_loading_s, "the second loading"),
        (pulses.transmitted, arrivals.end_reflection_s, "the end reflection of the transmitted bar"),
    )
    # What stations tell apart has no window that another wave could run into.
    waves = tuple(wave for wave in every if pulses.waves(wave[0].name) is None)
    # One sample more is the end of a window set on the arrival itself.
    interval, end = pulses.sample_interval_s, evidence.strain.time(evidence.strain.samples)
    inside = [
        f"the {pulse.name} window runs to {1e6 * pulse.window_s[1]:.0f} us, past {wave} at {1e6 * arrival:.0f} us"
        for pulse, arrival, wave in waves
        if pulse.window_s[1] > arrival + interval
    ]
    kept_out = [
        f"{wave} at {1e6 * arrival:.0f} us is kept out"
        for pulse, arrival, wave in waves
        if arrival < end and pulse is not pulses.incident
    ]
    if not inside and not kept_out:
        return None
    return Answer(
        weight=Weight.REJECT if inside else Weight.FINE,
        measured="; ".join(inside or kept_out),
        limit="each window ends before the next wave",
        action="End that window earlier, or leave it to the program: what follows is no response to the first loading.",
    )


@check("window_start", gravest=Weight.REJECT)
def window_start(evidence: Evidence) -> Answer | None:
    """A pulse that runs already where its window begins came sooner than distances and wave speeds say."""
    if evidence.response.correction(Correction.BAR_TEMPERATURE).applied:
        return None  # a hot end sends a part of the pulse back before its face does
    worst = max(evidence.pulses, key=lambda pulse: abs(pulse.level_at_start))
    level = abs(worst.level_at_start)
    return graded(
        level,
        evidence.settings.limits.window_start + 4 * worst.u_level_at_start,
        beyond=Weight.REJECT,
        measured=f"the {worst.name} trace stands at {100 * level:.1f} % of its peak where its window begins",
        action="Check gauge distances and wave speeds in the rig file, and the check of overlap; a window set by hand "
        "may begin too late.",
    )


@check("misalignment_s", "misalignment_rise", "misalignment_transit_s", gravest=Weight.REJECT)
def feet(evidence: Evidence) -> Answer | None:
    """Feet of reflected and transmitted pulse against where distances and wave speeds put them."""
    faces, limits = evidence.faces, evidence.settings.limits
    off = {"reflected": faces.reflected_misalignment_s, "transmitted": faces.transmitted_misalignment_s}
    known = {name: value for name, value in off.items() if value is not None}
    if not known:
        return None
    worst = max(known, key=lambda name: abs(known[name]))
    # Tangent feet of pulses of different shape differ by a part of the rise even when all is well: a specimen
    # holds back the reflected front until it yields, and lets the transmitted one rise the sooner.
    rise = evidence.pulses.incident.foot.rise_s if evidence.pulses.incident.foot else 0.0
    limit = limits.misalignment_s + limits.misalignment_rise * rise
    if worst == "transmitted" and evidence.sheet.specimen.transit_time_s is None:
        limit += limits.misalignment_transit_s  # the foot may lag by what the specimen needs
    return graded(
        abs(known[worst]),
        limit,
        3 * limit,
        show=_microseconds,
        measured=f"{worst} foot {known[worst] * 1e6:+.2f} us from where travel times put it "
        f"(picker {faces.u_misalignment_s * 1e6:.2f} us)",
        action="Measure gauge distances and wave speed again; look for a gap between specimen and bars.",
    )


def _microseconds(time_s: float) -> str:
    return f"{1e6 * time_s:.2f} us"


@check(source="physical uncertainty of the travel times; common practice", gravest=Weight.REJECT)
def tuned_shift(evidence: Evidence) -> Answer | None:
    """Feet laid on each other: allowed only by what physics leaves open (tuning on equilibrium is circular)."""
    faces, sheet = evidence.faces, evidence.sheet
    if evidence.settings.alignment is not Alignment.FEET:
        return None
    transit = sheet.specimen.transit_time_s or 0.0
    # The transmitted foot may be moved by the specimen's transit besides what the picker cannot tell.
    open_s = transit + evidence.pulses.sample_interval_s + 2 * faces.u_misalignment_s
    moved = max(abs(faces.reflected_shift_s), abs(faces.transmitted_shift_s))
    untuned = evidence.response.untuned_equilibrium
    beside = "" if untuned is None else f"; R {100 * untuned.mean_ratio:.1f} % without it"
    return graded(
        moved,
        open_s,
        2 * open_s,
        show=_microseconds,
        measured=f"feet moved by up to {1e6 * moved:.2f} us{beside}; transit, one sample and the picker's scatter "
        f"leave {1e6 * open_s:.2f} us open",
        action="Use travel times (alignment physical); measure gauge distances and wave speed instead of tuning.",
    )
