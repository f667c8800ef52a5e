"""Where a calibration shot begins, and whether its stations see the pulse in the order that geometry gives."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from shpb.arrays import FloatArray
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.calibrate.struck import early_s, passages_s, refuse, strain_of
from shpb.errors import InputError
from shpb.pulse.foot import pick_foot
from shpb.pulse.front import Front, first_front
from shpb.pulse.incident_front import LEAD_RADII, SMOOTHING_RADII
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig

_EARLY_RADII = 20.0  # a pulse that comes this much before geometry lets it is another one


def _front_or_refuse(fired: FiredShot, station: str, axial: FloatArray, bar: Bar) -> Front:
    front = first_front(axial, fired.record.sample_interval_s, bar.radius_time_s)
    if front is None:
        raise refuse(
            fired,
            f"the {station.replace('_', ' ')} shows no pulse above its noise",
            "Check that the gauge is connected and the right channel named; was this bar struck?",
        )
    return front


def first_front_s(fired: FiredShot, rig: Rig, station: str, axial: FloatArray) -> float:
    """Foot of the first passage at a station, on the record's clock [s]."""
    record, bar = fired.record, rig.bar_of(station)
    interval, unit = record.sample_interval_s, bar.radius_time_s
    front = _front_or_refuse(fired, station, axial, bar)
    words = station.replace("_", " ")
    if front.at * interval < 2 * LEAD_RADII * unit:
        raise refuse(
            fired,
            f"the record begins on the pulse at the {words}",
            "Set the scope to keep at least 100 us before the trigger and fire again",
        )
    lead = int(4 * LEAD_RADII * unit / interval)
    start = max(front.at - lead, 0)
    level = float(np.median(axial[start : max(front.at - lead // 4, start + 8)]))
    begin = record.start_s + start * interval
    foot = pick_foot(
        axial[start : front.at + 6 * lead] - level,
        begin,
        interval,
        front.noise,
        SMOOTHING_RADII * unit,
        sign=1,
    )
    return float(record.start_s + front.at * interval if foot is None else foot.time_s)


def require_order(fired: FiredShot, rig: Rig, station: str, axial: FloatArray, impact_s: float) -> None:
    """The pulse must come to a station when geometry says so: otherwise two channels are swapped, or a bar is."""
    front = _front_or_refuse(fired, station, axial, rig.bar_of(station))
    _refuse_early(fired, rig, station, front, impact_s)
    if front.sign < 0:
        raise refuse(
            fired,
            f"the first pulse at the {station.replace('_', ' ')} is tension: the polarity is inverted",
            "Turn voltage_under_compression round in the rig file, or check the wiring",
        )


def require_order_behind(fired: FiredShot, rig: Rig, asked: Sequence[str], impact_s: float) -> None:
    """Bars together: the pulse comes later to the stations that nobody asked about, as far as they are recorded."""
    if fired.shot.kind is not ShotKind.BARS_TOGETHER:
        return
    for name in (one for one in rig.gauges if one not in asked):
        try:
            axial = strain_of(fired, rig, name).axial
        except InputError:
            continue
        front = first_front(axial, fired.record.sample_interval_s, rig.bar_of(name).radius_time_s)
        if front is not None:
            _refuse_early(fired, rig, name, front, impact_s)


def _refuse_early(fired: FiredShot, rig: Rig, station: str, front: Front, impact_s: float) -> None:
    record, travel = fired.record, passages_s(fired.shot, rig, station)[0]
    expected = impact_s + travel - early_s(rig.bar_of(station), travel)
    early = expected - (record.start_s + front.at * record.sample_interval_s)
    if front.peak > 20 * front.noise and early > _EARLY_RADII * rig.bar_of(station).radius_time_s:
        raise refuse(
            fired,
            f"the {station.replace('_', ' ')} sees a pulse {early * 1e6:.0f} us before it can have come there",
            "Are two channels swapped, the wrong bar or the wrong end named as struck, or a gauge distance wrong?",
        )
