"""Checks of the record as the scope wrote it: range, steps, noise, clock, zero."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.pulse import Pulse
from shpb.pulse.zero_line import PLAUSIBLE_DRIFT_PER_S
from shpb.rig.gauge import Gauge
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Weight, graded
from shpb.trust.judge import check

_WIDEN = "Widen the scope range of that channel or lower the gain, and fire again."


@check(source="the record's own marks", gravest=Weight.REJECT)
def over_range(evidence: Evidence) -> Answer | None:
    """Samples that the scope itself marked as beyond its range."""
    said = [remark for remark in evidence.record.remarks if "over range" in remark.lower()]
    if not said:
        return None
    return Answer(weight=Weight.REJECT, measured="; ".join(said), limit="none", action=_WIDEN)


@check("clipped_samples", "flat_samples", gravest=Weight.REJECT)
def clipping(evidence: Evidence) -> Answer | None:
    """A trace that sits at the rail of its range has lost what lay beyond."""
    limits = evidence.settings.limits
    runs = {
        name: max(samples_at_rail(voltage, gauge, limits.clipped_samples) for voltage in voltages)
        for name, gauge, voltages in _stations(evidence)
    }
    worst = max(runs, key=lambda name: runs[name])
    # Without a stated range a flat top of a plateau is common at few codes: ask for a longer run.
    known = all(gauge.scope_range_v is not None for _, gauge, _ in _stations(evidence))
    least = limits.clipped_samples if known else limits.flat_samples
    clipped = runs[worst] >= least
    return Answer(
        weight=Weight.REJECT if clipped else Weight.FINE,
        measured=f"{runs[worst]} consecutive samples at the rail of the {worst} channel"
        if clipped
        else "no channel at its rail",
        limit=f"fewer than {least} consecutive samples",
        action=_WIDEN,
    )


def _stations(evidence: Evidence) -> tuple[tuple[str, Gauge, FloatArray], ...]:
    gauges = evidence.rig.gauges
    return tuple(
        (name.removesuffix("_gauge").replace("_", " "), gauges[name], station.voltage_v)
        for name, station in evidence.strain.stations.items()
    )


def samples_at_rail(voltage_v: FloatArray, gauge: Gauge, least: int) -> int:
    """Longest run of samples at the scope's rail, or flat at the trace's own extreme, for one channel.

    Runs of fewer than ``least`` samples count as none.
    """
    longest = 0
    for extreme, side in ((float(voltage_v.max()), 1), (float(voltage_v.min()), 0)):
        at_extreme = voltage_v == extreme
        run = _longest_run(at_extreme) if np.count_nonzero(at_extreme) >= least else 0
        if gauge.scope_range_v is not None:
            rail = gauge.scope_range_v[side]
            step = (gauge.scope_range_v[1] - gauge.scope_range_v[0]) / 2 ** (gauge.scope_bits or 12)
            reached = extreme >= rail - 1.5 * step if side else extreme <= rail + 1.5 * step
            if not reached:
                continue  # flat but inside the range: coarse digitising of a plateau, not clipping
        longest = max(longest, run)
    return longest


def _longest_run(mask: FloatArray) -> int:
    """Longest run of True."""
    edges = np.flatnonzero(np.diff(np.concatenate(([0], mask.astype(np.int8), [0]))))
    return int((edges[1::2] - edges[::2]).max()) if edges.size else 0


@check("zero_line", gravest=Weight.REJECT)
def zero_line(evidence: Evidence) -> Answer | None:
    """The zero before the reflected pulse against that before the incident one: a loose gauge shows here."""
    if evidence.pulses.separated_bar("incident") is not None:
        return None  # one zero line a station, for both waves
    incident, reflected = evidence.pulses.incident, evidence.pulses.reflected
    shift = abs(reflected.zero.level - incident.zero.level) / _peak(incident)
    elapsed = (reflected.zero.centre - incident.zero.centre) * evidence.pulses.sample_interval_s
    return graded(
        shift,
        # Three times the drift that is plausible over the time between the two windows is granted.
        evidence.settings.limits.zero_line + 3 * PLAUSIBLE_DRIFT_PER_S * elapsed,
        beyond=Weight.REJECT,
        measured=f"zero of the incident gauge moved by {100 * shift:.1f} % of the peak across the incident pulse",
        action="Look for a loose gauge, a broken solder joint or a charged cable; do not use this shot.",
    )


@check("quiet", gravest=Weight.REJECT)
def quiet_before_pulse(evidence: Evidence) -> Answer | None:
    """The window that gives a pulse its zero must hold no wave: noise there must be white."""
    # The gap before the reflected pulse is short and was searched for trends when it was chosen.
    pulses = (evidence.pulses.incident, evidence.pulses.transmitted)
    unrest = {pulse.name: pulse.zero.unrest / _peak(pulse) for pulse in pulses}
    worst = max(unrest, key=lambda name: unrest[name])
    return graded(
        unrest[worst],
        evidence.settings.limits.quiet,
        beyond=Weight.REJECT,
        measured=f"the trace before the {worst} pulse moves by {100 * unrest[worst]:.2f} % of its peak beyond "
        "white noise",
        action="A wave stands where there should be none: check gauge distances and wave speeds in the rig file, and "
        "the cable for interference.",
    )


@check("zero_after", gravest=Weight.NOTE)
def zero_after_shot(evidence: Evidence) -> Answer | None:
    """A trace that does not come back to zero after its pulse: loose gauge, or a bar bent or yielded."""
    pulses = evidence.pulses
    # Waves that stations tell apart go on to and fro to the end of the record.
    cut = [pulse for pulse in (pulses.transmitted, pulses.reflected) if pulses.waves(pulse.name) is None]
    if not cut:
        return None
    shift = {pulse.name: _level_at_end(pulse) for pulse in cut}
    worst = max(shift, key=lambda name: shift[name])
    return graded(
        shift[worst],
        evidence.settings.limits.zero_after,
        measured=f"the {worst} trace ends {100 * shift[worst]:.1f} % of its peak away from zero",
        action="Look for a loose gauge or a cable that moved; see whether the pulse simply lasts longer than "
        "the record.",
    )


def _level_at_end(pulse: Pulse) -> float:
    """Level in the last tenth before the taper, where the loading has long died away, as a share of the peak."""
    size = pulse.strain.size
    tail = pulse.strain[int(0.85 * size) : int(0.93 * size)]
    return abs(float(tail.mean())) / _peak(pulse) if tail.size else 0.0


def _peak(pulse: Pulse) -> float:
    return max(float(np.abs(pulse.strain).max()), 1e-12)


@check("least_codes", gravest=Weight.NOTE)
def digitiser_steps(evidence: Evidence) -> Answer | None:
    """A pulse that spans few digitiser steps is a staircase."""
    rig = evidence.rig
    counts = {
        pulse.name: _steps(
            evidence, pulse, rig.transmitted_gauge if pulse.name == "transmitted" else rig.incident_gauge
        )
        for pulse in evidence.pulses
    }
    worst = min(counts, key=lambda name: counts[name])
    least = evidence.settings.limits.least_codes
    return Answer(
        weight=Weight.NOTE if counts[worst] < least else Weight.FINE,
        measured=f"the {worst} pulse spans {counts[worst]} steps",
        limit=f"at least {least} steps",
        action="Narrow the scope range or raise the gain so that the pulse fills half the range.",
    )


def _steps(evidence: Evidence, pulse: Pulse, gauge: Gauge) -> int:
    """Digitiser steps between the extremes of a pulse: from range and bits, else distinct values."""
    start, stop = (evidence.strain.index(time) for time in pulse.window_s)
    station = evidence.strain.transmitted if pulse.name == "transmitted" else evidence.strain.incident
    values = station.voltage_v[0, start:stop]
    if gauge.scope_range_v is not None and gauge.scope_bits is not None:
        step = (gauge.scope_range_v[1] - gauge.scope_range_v[0]) / 2**gauge.scope_bits
        return int((values.max() - values.min()) / step)
    return int(np.unique(values).size)


@check("noise", gravest=Weight.NOTE)
def noise(evidence: Evidence) -> Answer | None:
    """Noise that is left in each pulse after the low-pass, against its peak."""
    share = evidence.faces.low_pass.noise_share(evidence.pulses.sample_interval_s)
    end_s = evidence.faces.record_time_of_zero_s + evidence.response.time_s[evidence.response.loading[1] - 1]
    levels = {
        pulse.name: evidence.pulses.noise_at(pulse, end_s) * share / _peak(pulse) for pulse in evidence.pulses
    }
    worst = max(levels, key=lambda name: levels[name])
    return graded(
        levels[worst],
        evidence.settings.limits.noise,
        measured=f"{100 * levels[worst]:.2f} % of the {worst} pulse's peak after the low-pass",
        action="Check shielding and grounding, use the full scope range, or a gauge of higher sensitivity.",
    )


@check("oversampling", gravest=Weight.REJECT)
def sampling_rate(evidence: Evidence) -> Answer | None:
    """The sampling rate must carry the whole pass band with room to spare."""
    rate, low_pass = 1 / evidence.pulses.sample_interval_s, evidence.faces.low_pass
    wanted = evidence.settings.limits.oversampling
    gravest = Weight.REJECT if rate < 2 * low_pass.stop_hz else Weight.NOTE
    return Answer(
        weight=gravest if rate < wanted * low_pass.cutoff_hz else Weight.FINE,
        measured=f"{rate / 1e6:.3g} MS/s",
        limit=f"at least {wanted * low_pass.cutoff_hz / 1e6:.3g} MS/s, {wanted:g} times the cut-off of the low-pass; "
        f"reject below {2 * low_pass.stop_hz / 1e6:.3g} MS/s, twice where it ends",
        action="Sample faster: 1 MS/s or more for bars of 12 to 25 mm.",
    )


@check(source="common practice", gravest=Weight.NOTE)
def record_end(evidence: Evidence) -> Answer | None:
    """The record must hold the whole loading and some tail."""
    response, faces = evidence.response, evidence.faces
    cut = response.loading[1] >= faces.whole
    end = 1e6 * float(response.time_s[response.loading[1] - 1])
    return Answer(
        weight=Weight.NOTE if cut else Weight.FINE,
        measured=f"the loading is cut off after {end:.0f} us, where a window or the record ends"
        if cut
        else f"the loading ends after {end:.0f} us, inside the windows",
        limit="loading inside the windows",
        action="Lengthen the record, or shorten the striker, so that the pulses die away in it.",
    )
