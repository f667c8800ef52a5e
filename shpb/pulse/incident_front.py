"""The incident front, and what must be true of a record for it to be a shot at all."""

from __future__ import annotations

import numpy as np

from shpb.pulse.arrivals import Arrivals
from shpb.pulse.foot import pick_foot
from shpb.pulse.front import Front, UnusableShotError, first_front
from shpb.pulse.strain import GaugeStrain, StationStrain
from shpb.rig.rig import Rig
from shpb.settings import Settings

# A dispersed front begins a few a/c0 before its tangent foot: this much room is left before each foot.
LEAD_RADII = 5.0
SMOOTHING_RADII = 0.2  # running mean of the pickers, in a/c0


def incident_front_s(strain: GaugeStrain, rig: Rig, settings: Settings) -> float:
    """Foot of the incident pulse at its gauge, on the record's clock [s].

    Raises
    ------
    UnusableShotError
        If a channel is dead, swapped or inverted, or the record begins on the pulse.
    """
    interval = strain.sample_interval_s
    smoothing = rig.incident_bar.radius_time_s
    incident = _front_or_refuse(strain.incident, interval, smoothing, "incident")
    transmitted = _front_or_refuse(strain.transmitted, interval, smoothing, "transmitted")
    _refuse_swapped(strain, incident, transmitted, rig)
    if incident.at * interval < 2 * rig.incident_bar.radius_time_s:
        raise UnusableShotError(
            "the record begins on the incident pulse: there is no quiet time before it",
            where="incident gauge",
            mend="Set the scope to keep at least 100 us before the trigger and fire again",
            check="pre-trigger",
        )
    for name, front in (("incident", incident), ("transmitted", transmitted)):
        if front.sign < 0:
            raise UnusableShotError(
                f"the {name} pulse comes out negative: the polarity is inverted",
                where=f"{name} gauge",
                mend="Check kind in the shot sheet; else turn voltage_under_compression (or _tension) round in the rig "
                "file, or check the wiring; a record that begins on the pulse looks the same",
                check="polarity",
            )
    if settings.incident_foot_s is not None:
        return settings.incident_foot_s
    lead = int(4 * LEAD_RADII * rig.incident_bar.radius_time_s / interval)
    start = max(incident.at - lead, 0)
    level = float(np.median(strain.incident.axial[start : max(incident.at - lead // 4, start + 8)]))
    segment = strain.incident.axial[start : incident.at + 6 * lead] - level
    foot = pick_foot(
        segment, strain.time(start), interval, incident.noise, SMOOTHING_RADII * smoothing, sign=1
    )
    return strain.time(incident.at) if foot is None else foot.time_s


def _front_or_refuse(station: StationStrain, interval: float, smoothing: float, name: str) -> Front:
    front = first_front(station.axial, interval, smoothing)
    if front is None:
        raise UnusableShotError(
            "there is no pulse above the noise",
            where=f"{name} gauge",
            mend="Check that the gauge is connected, the bridge excited and the right channel named",
            check="dead channel",
        )
    return front


def _refuse_swapped(strain: GaugeStrain, incident: Front, transmitted: Front, rig: Rig) -> None:
    interval = strain.sample_interval_s
    expected = (
        rig.incident_gauge.to_specimen_m / rig.incident_bar.front_speed_m_s
        + rig.transmitted_gauge.to_specimen_m / rig.transmitted_bar.front_speed_m_s
    )
    lag = (transmitted.at - incident.at) * interval
    clear = transmitted.peak > 20 * transmitted.noise
    if clear and lag < -0.5 * expected:
        raise UnusableShotError(
            f"the transmitted channel sees a pulse {-lag * 1e6:.0f} us before the incident one: the "
            f"channels are swapped",
            where="record",
            mend="Exchange the two channel names in the rig file, or the cables at the scope",
            check="channel order",
        )


def require_long_enough(strain: GaugeStrain, arrivals: Arrivals, rig: Rig) -> None:
    """Refuse a record that ends before the reflected and the transmitted pulse are in."""
    end = strain.time(strain.samples)
    for name, arrival, bar in (
        ("reflected", arrivals.reflected_s, rig.incident_bar),
        ("transmitted", arrivals.transmitted_through_specimen_s, rig.transmitted_bar),
    ):
        if end < arrival + 2 * LEAD_RADII * bar.radius_time_s:
            raise UnusableShotError(
                f"the record ends at {end * 1e6:.0f} us, but the {name} pulse only arrives at "
                f"{arrival * 1e6:.0f} us",
                where="record",
                mend="Lengthen the record at the scope; check gauge distances and wave speeds in the rig file",
                check="record length",
            )
