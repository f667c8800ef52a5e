"""Checks of the record as the scope wrote it."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.pulse import Pulse
from shpb.rig.gauge import Gauge
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Finding, Weight
from shpb.trust.judge import check

_AT_RAIL = 3  # consecutive samples at one extreme value


def _stations(evidence: Evidence) -> tuple[tuple[str, Gauge, FloatArray], ...]:
    strain = evidence.strain
    return (
        ("incident", evidence.rig.incident_gauge, strain.incident.voltage_v),
        ("transmitted", evidence.rig.transmitted_gauge, strain.transmitted.voltage_v),
    )


def _longest_run(mask: FloatArray) -> int:
    """Longest run of True."""
    edges = np.flatnonzero(np.diff(np.concatenate(([0], mask.astype(np.int8), [0]))))
    return int((edges[1::2] - edges[::2]).max()) if edges.size else 0


def samples_at_rail(voltage_v: FloatArray, gauge: Gauge) -> int:
    """Longest run of samples at the scope's rail, or flat at the trace's own extreme, for one channel."""
    longest = 0
    for extreme, side in ((float(voltage_v.max()), 1), (float(voltage_v.min()), 0)):
        at_extreme = voltage_v == extreme
        run = _longest_run(at_extreme) if np.count_nonzero(at_extreme) >= _AT_RAIL else 0
        if gauge.scope_range_v is not None:
            rail = gauge.scope_range_v[side]
            step = (gauge.scope_range_v[1] - gauge.scope_range_v[0]) / 2 ** (gauge.scope_bits or 12)
            reached = extreme >= rail - 1.5 * step if side else extreme <= rail + 1.5 * step
            if not reached:
                continue  # flat but inside the range: coarse digitising of a plateau, not clipping
        longest = max(longest, run)
    return longest


@check
def clipping(evidence: Evidence) -> Finding | None:
    """A trace that sits at the rail of its range has lost what lay beyond."""
    runs = {
        name: max(samples_at_rail(voltage, gauge) for voltage in voltages)
        for name, gauge, voltages in _stations(evidence)
    }
    worst = max(runs, key=lambda name: runs[name])
    # Without a stated range a flat top of a plateau is common at few codes: ask for a longer run.
    known = all(gauge.scope_range_v is not None for _, gauge, _ in _stations(evidence))
    least = _AT_RAIL if known else 8
    clipped = runs[worst] >= least
    return Finding(
        check="clipping",
        weight=Weight.REJECT if clipped else Weight.FINE,
        measured=f"{runs[worst]} consecutive samples at the rail of the {worst} channel"
        if clipped
        else "no channel at its rail",
        limit=f"fewer than {least} consecutive samples",
        source="common practice",
        action="Widen the scope range of that channel or lower the gain, and fire again.",
    )


@check
def digitiser_steps(evidence: Evidence) -> Finding | None:
    """A pulse that spans few digitiser steps is a staircase."""
    gauges = {
        "incident": evidence.rig.incident_gauge,
        "reflected": evidence.rig.incident_gauge,
        "transmitted": evidence.rig.transmitted_gauge,
    }
    counts = {pulse.name: _steps(evidence, pulse, gauges[pulse.name]) for pulse in evidence.pulses}
    worst = min(counts, key=lambda name: counts[name])
    least = evidence.settings.least_codes
    few = counts[worst] < least
    return Finding(
        check="digitiser steps",
        weight=Weight.NOTE if few else Weight.FINE,
        measured=f"the {worst} pulse spans {counts[worst]} steps",
        limit=f"at least {least} steps",
        source="settings least_codes; common practice",
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


@check
def noise(evidence: Evidence) -> Finding | None:
    """Noise that is left in each pulse after the low-pass, against its peak."""
    faces = evidence.faces
    share = faces.low_pass.noise_share(faces.interval_s)
    levels = {
        pulse.name: pulse.noise * share / max(float(np.abs(pulse.strain).max()), 1e-12)
        for pulse in evidence.pulses
    }
    worst = max(levels, key=lambda name: levels[name])
    limit = evidence.settings.noise_limit
    return Finding(
        check="noise",
        weight=Weight.NOTE if levels[worst] > limit else Weight.FINE,
        measured=f"{100 * levels[worst]:.2f} % of the {worst} pulse's peak after the low-pass",
        limit=f"{100 * limit:.1f} %",
        source="settings noise_limit; common practice",
        action="Check shielding and grounding, use the full scope range, or a gauge of higher sensitivity.",
    )


@check
def sampling_rate(evidence: Evidence) -> Finding | None:
    """The sampling rate must carry the whole pass band with room to spare."""
    rate = 1 / evidence.faces.interval_s
    needed = 5 * evidence.faces.low_pass.cutoff_hz
    gravest = Weight.REJECT if rate < 2 * evidence.faces.low_pass.stop_hz else Weight.NOTE
    return Finding(
        check="sampling rate",
        weight=gravest if rate < needed else Weight.FINE,
        measured=f"{rate / 1e6:.3g} MS/s",
        limit=f"at least {needed / 1e6:.3g} MS/s, five times the cut-off of the low-pass",
        source="common practice",
        action="Sample faster: 1 MS/s or more for bars of 12 to 25 mm.",
    )


@check
def record_end(evidence: Evidence) -> Finding | None:
    """The record must hold the whole loading and some tail."""
    response, faces = evidence.response, evidence.faces
    cut = response.loading[1] >= faces.whole
    end = 1e6 * float(response.time_s[response.loading[1] - 1])
    return Finding(
        check="record end",
        weight=Weight.NOTE if cut else Weight.FINE,
        measured=f"the loading is cut off after {end:.0f} us, where a window or the record ends"
        if cut
        else f"the loading ends after {end:.0f} us, inside the windows",
        limit="loading inside the windows",
        source="common practice",
        action="Lengthen the record, or shorten the striker, so that the pulses die away in it.",
    )


@check
def over_range(evidence: Evidence) -> Finding | None:
    """Samples that the scope itself marked as beyond its range."""
    said = [remark for remark in evidence.record.remarks if "over range" in remark.lower()]
    if not said:
        return None
    return Finding(
        check="over range",
        weight=Weight.REJECT,
        measured="; ".join(said),
        limit="none",
        source="the record's own marks",
        action="Widen the scope range of that channel or lower the gain, and fire again.",
    )
