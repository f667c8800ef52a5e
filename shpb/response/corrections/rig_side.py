"""Corrections that act before the curves: recording chain and hot bar ends, unequal bars."""

from __future__ import annotations

import numpy as np

from shpb.response.corrections.correction import Loading, Report
from shpb.rig.rig import Rig
from shpb.settings import Correction
from shpb.wave.faces import FacePulses
from shpb.wave.hot_bar import HotEnd, hot_ends, why_no_hot_ends
from shpb.wave.recording_chain import (
    chain_delay_s,
    chain_loss,
    chain_rise_s,
    stations_of_pulses,
    why_no_chain,
)

_ALIKE = 1e-9


def bar_mismatch(shot: Loading) -> Report:
    """Bars of different impedance: the one- and two-wave rates then need a term with the transmitted force."""
    bar_i, bar_t = shot.rig.incident_bar, shot.rig.transmitted_bar
    ratio = bar_t.impedance_n_s_m / bar_i.impedance_n_s_m
    brief, size = "", "nothing: the bars are alike"
    if abs(ratio - 1) > _ALIKE:
        part = slice(*shot.loading)
        term = shot.motion.force_out_n[part] * (1 / bar_i.impedance_n_s_m - 1 / bar_t.impedance_n_s_m)
        rate = float(np.abs(term).max()) / shot.specimen.length_m
        brief = f"{rate:.0f} /s of strain rate"
        size = f"up to {rate:.0f} /s of strain rate; impedance of the transmitted bar {ratio:.3f} of the incident one's"
    return Report(
        correction=Correction.MISMATCH,
        brief=brief,
        size=size,
    )


def gauge_rise(rig: Rig, faces: FacePulses) -> Report:
    """Averaging over the gauge and roll-off of the amplifier, undone where each pulse stands above its noise."""
    cutoff = faces.low_pass.cutoff_hz
    (gauge_i, bar_i), _, (gauge_t, bar_t) = stations = stations_of_pulses(rig)
    taken = [
        f"{name} {100 * chain_loss(cutoff, gauge, bar):.1f} % at {cutoff / 1e3:.0f} kHz "
        f"(rise {1e6 * chain_rise_s(gauge, bar):.2f} us)"
        for name, gauge, bar in (("incident", gauge_i, bar_i), ("transmitted", gauge_t, bar_t))
    ]
    lag = chain_delay_s(gauge_t) - chain_delay_s(gauge_i)
    size = f"{', '.join(taken)}; transmitted channel {1e6 * lag:+.2f} us late"
    short = [
        f"{pulse} pulse known up to {hz / 1e3:.0f} kHz, faster changes limited by the rise time"
        for pulse, hz in zip(("incident", "reflected", "transmitted"), faces.undone_hz, strict=True)
        if hz < cutoff
    ]
    refused = why_no_chain(rig, faces.undone_hz)
    worst = max(chain_loss(cutoff, gauge, bar) for gauge, bar in stations)
    stated = any(gauge.length_m or gauge.bandwidth_hz is not None for gauge, _ in stations)
    return Report(
        correction=Correction.GAUGE_RISE,
        brief=f"{100 * worst:.1f} % at {cutoff / 1e3:.0f} kHz" if stated else "",
        size=size if refused or not short else f"{size}; {'; '.join(short)}",
        refused=refused,
    )


def bar_temperature(shot: Loading) -> Report:
    """Hot or cold bar ends: modulus and impedance change along them, and so do force, velocity and travel time."""
    refused = why_no_hot_ends(shot.rig, shot.sheet)
    ends = [] if refused else [end for end in hot_ends(shot.rig, shot.sheet) if end]
    furthest = max((abs(end.stiffness_ratio**0.25 - 1) for end in ends), default=0.0)
    return Report(
        correction=Correction.BAR_TEMPERATURE,
        brief=f"up to {100 * furthest:.1f} % of force" if ends else "",
        size="; ".join(_hot_size(end) for end in ends) or "not known",
        refused=refused,
    )


def _hot_size(end: HotEnd) -> str:
    flux = end.stiffness_ratio**0.25
    late = end.travel_s - end.length_m / end.bar.wave_speed_m_s
    return (
        f"face at {end.face_k - 273.15:.0f} C: force up to {100 * (flux - 1):+.1f} %, "
        f"velocity {100 * (1 / flux - 1):+.1f} %, {1e6 * late:+.2f} us"
    )
