"""A calibration shot as geometry: which end was struck, where the pulse comes by when, and errors that name the shot.

The struck bar of *bars apart* is free at both ends once the striker has let go. A station at the distance y from the
struck end of a bar of length L sees the pulse after the ways y, 2 L - y (turned at the far end), 2 L + y, ...; with
*bars together* the incident station sees it after L - x, what comes back from the contact after L + x, and a station of
the transmitted bar after L in the one and x in the other bar, and again after 2 L_t - x.
"""

from __future__ import annotations

from collections.abc import Sequence

from shpb.calibrate.session import BarEnd, CalibrationShot, FiredShot, ShotKind
from shpb.errors import InputError
from shpb.pulse.strain import StationStrain
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig


def struck_station(shot: CalibrationShot, rig: Rig) -> str:
    """The station that the pulse passes first."""
    own = [name for name in rig.gauges if name.startswith(shot.bar)]
    return min(own, key=lambda name: from_struck_end_m(shot, rig, name))


def from_struck_end_m(shot: CalibrationShot, rig: Rig, station: str) -> float:
    """Distance of a station of the struck bar from the end that was struck [m]."""
    to_specimen = float(rig.gauges[station].to_specimen_m)
    if shot.struck_end is BarEnd.SPECIMEN:
        return to_specimen
    return float(rig.bar_of(station).length_m) - to_specimen


def passages_s(shot: CalibrationShot, rig: Rig, station: str) -> tuple[float, ...]:
    """Travel times from the struck end to the first passages at a station, in their order [s].

    Empty for a station of a bar that the pulse does not come to.
    """
    bar = rig.bar_of(station)
    c, length = float(bar.wave_speed_m_s), float(bar.length_m)
    if shot.kind is ShotKind.BARS_TOGETHER and station.startswith("transmitted"):
        into = float(rig.incident_bar.length_m / rig.incident_bar.wave_speed_m_s)
        x = float(rig.gauges[station].to_specimen_m)
        return tuple(sorted((into + x / c, into + (2 * length - x) / c, 3 * into + x / c)))
    if not station.startswith(shot.bar):
        return ()
    y = from_struck_end_m(shot, rig, station)
    return tuple(way / c for way in (y, 2 * length - y, 2 * length + y, 4 * length - y))


def early_s(bar: Bar, travel_s: float) -> float:
    """Time by which the front of a pulse comes before its slow waves after a travel at c0 [s].

    Zero in an elastic bar, where c0 is the fastest; in one that creeps the high frequencies of its table lead.
    """
    if bar.propagation is None:
        return 0.0
    return travel_s * max(0.0, 1.0 - float(bar.wave_speed_m_s) / max(bar.propagation.phase_speed_m_s))


def strain_of(fired: FiredShot, rig: Rig, station: str) -> StationStrain:
    """Strain at a station; errors name the shot."""
    try:
        return fired.strain(rig, station)
    except InputError as error:
        where = f"shot {fired.shot_id}, {station.replace('_', ' ')}"
        raise InputError(
            f"{error.where}: {error.what}" if error.where else error.what,
            where=where,
            mend=f"{error.mend}; is it a record of this rig?",
        ) from error


def require_own_records(fired: Sequence[FiredShot]) -> None:
    """Refuse a session in which two shots share a record: used twice it would count as two.

    Raises
    ------
    InputError
        Naming both shots.
    """
    owner: dict[str, str] = {}
    for one in fired:
        for source in one.record.sources:
            if owner.setdefault(source.sha256, one.shot_id) != one.shot_id:
                raise InputError(
                    f"its record {source.name} is that of shot {owner[source.sha256]}, byte for byte",
                    where=f"shot {one.shot_id}",
                    mend="Give each shot its own record, or leave one of the two out",
                )


def refuse(fired: FiredShot, what: str, mend: str) -> InputError:
    """An error about one shot."""
    return InputError(what, where=f"shot {fired.shot_id} ({fired.shot.kind})", mend=mend)
