"""What must be true of the stations of a bar before its waves can be told apart."""

from __future__ import annotations

import itertools

from shpb.errors import InputError
from shpb.pulse.front import UnusableShotError, first_front
from shpb.pulse.strain import GaugeStrain
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.settings import Settings

# A front found roughly may be off by half the way between two stations and this many a/c0: what is beyond is no noise.
_ROUGH_SHARE, _ROUGH_RADII = 0.5, 10.0


def stations_on_side(rig: Rig, side: str) -> dict[str, Gauge]:
    """The stations of the "incident" or the "transmitted" bar by name, the first one first."""
    return {name: gauge for name, gauge in rig.gauges.items() if name.startswith(side)}


def require_stations(strain: GaugeStrain, rig: Rig, settings: Settings) -> None:
    """Refuse what cannot be told apart: one station, two at one place, other clocks, windows set by hand.

    Raises
    ------
    InputError
        That names rig file or setting and the mend.
    """
    where = "settings.waves = stations"
    if len(stations_on_side(rig, "incident")) < 2:
        raise InputError(
            "the incident bar has one gauge station only",
            where=where,
            mend="Describe a second station in the rig file, [incident_gauge_2], or set waves to windows",
        )
    for side in ("incident", "transmitted"):
        places = sorted(
            (float(gauge.to_specimen_m), name) for name, gauge in stations_on_side(rig, side).items()
        )
        for (near, first), (far, second) in itertools.pairwise(places):
            if far - near < max(gauge.length_m for gauge in stations_on_side(rig, side).values()) + 1e-6:
                raise InputError(
                    f"{first} and {second} stand at one place, {1e3 * near:g} and {1e3 * far:g} mm from the specimen",
                    where=where,
                    mend="Stations at one place see the same sum of both waves: check to_specimen in the rig file, or "
                    "leave one of them out",
                )
    missing = [name for name in rig.gauges if name not in strain.stations]
    if missing:
        raise InputError(
            f"there is no strain of {', '.join(missing)}",
            where=where,
            mend="Convert every station of the rig",
        )
    samples = {name: station.axial.size for name, station in strain.stations.items()}
    if len(set(samples.values())) > 1:
        listed = ", ".join(f"{name} {count}" for name, count in samples.items())
        raise InputError(
            f"the stations have different numbers of samples: {listed}",
            where=where,
            mend="Record all stations of a bar on one clock, with one trigger",
        )
    by_hand = [
        name
        for name in ("incident", "reflected", "transmitted")
        if getattr(settings, f"{name}_window_s") is not None
    ]
    if by_hand:
        raise InputError(
            f"the {by_hand[0]} window is set by hand, while stations tell the waves apart",
            where=where,
            mend="Leave the window out, or set waves to windows",
        )


def require_rest(strain: GaugeStrain, fronts_s: dict[str, float], lead_s: float) -> None:
    """Refuse a record that begins when the front has reached a station; ``fronts_s`` by geometry, ``lead_s`` before.

    Raises
    ------
    UnusableShotError
        That names the station.
    """
    for name, front_s in fronts_s.items():
        if front_s - 2 * lead_s < strain.start_s:
            raise UnusableShotError(
                f"the front passes {name} at {front_s * 1e6:.0f} us, and the record begins at "
                f"{strain.start_s * 1e6:.0f} us: the bar is not seen at rest",
                where=name.replace("_", " "),
                mend="Set the scope to keep at least 100 us before the front at the station next to the impact end",
                check="pre-trigger",
            )


def require_fronts(strain: GaugeStrain, rig: Rig, side: str) -> None:
    """Refuse a bar one of whose stations is dead, inverted or swapped with another.

    Raises
    ------
    UnusableShotError
        By the first pulse: it passes every station of a bar, and before anything comes back.
    """
    bar, gauges = rig.bar_of(side), stations_on_side(rig, side)
    toward = -1.0 if side == "incident" else 1.0
    first = next(iter(gauges))
    seen_first_s = 0.0
    for name, gauge in gauges.items():
        front = first_front(strain.stations[name].axial, strain.sample_interval_s, bar.radius_time_s)
        where = name.replace("_", " ")
        if front is None:
            raise UnusableShotError(
                "there is no pulse above the noise",
                where=where,
                mend="Check that the gauge is connected, the bridge excited and the right channel named",
                check="dead channel",
            )
        if front.sign < 0:
            raise UnusableShotError(
                "its first pulse comes out negative: the polarity is inverted",
                where=where,
                mend="Turn voltage_under_compression (or _tension) of this station round in the rig file, or check the "
                "wiring",
                check="polarity",
            )
        seen_s = strain.time(front.at)
        if name == first:
            seen_first_s = seen_s
        expected_s = toward * float(gauge.to_specimen_m - gauges[first].to_specimen_m) / bar.wave_speed_m_s
        off_s = seen_s - seen_first_s - expected_s
        if abs(off_s) > _ROUGH_SHARE * abs(expected_s) + _ROUGH_RADII * bar.radius_time_s:
            raise UnusableShotError(
                f"the pulse is there at {1e6 * seen_s:.0f} us, {1e6 * abs(off_s):.0f} us "
                f"{'later' if off_s > 0 else 'sooner'} than its distance from {first.replace('_', ' ')} says",
                where=where,
                mend="Exchange the channels of the two stations in the rig file if they are swapped, or put its "
                "to_specimen right",
                check="channel order",
            )
