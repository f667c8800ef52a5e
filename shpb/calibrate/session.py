"""A calibration session: the shots fired on one day to calibrate one rig, and their records."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from enum import StrEnum
from pathlib import Path

from shpb.pulse.strain import StationStrain, station_strain
from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.rig.bar import Striker
from shpb.rig.gauge import TestKind
from shpb.rig.rig import RecordHints, Rig


class ShotKind(StrEnum):
    """What was done."""

    BARS_APART = "bars-apart"  # one bar alone, free at its other end: the pulse runs to and fro in it
    BARS_TOGETHER = "bars-together"  # no specimen: the pulse goes from one bar into the other
    SHUNT = "shunt"  # a resistor across an arm of a bridge; nothing is fired


class BarEnd(StrEnum):
    """The end of a bar that was struck."""

    FAR = "far"  # the end away from the specimen: of the incident bar the impact end
    SPECIMEN = "specimen"


@dataclass(frozen=True, slots=True, kw_only=True)
class CalibrationShot:
    """One shot of a session; what its kind does not need is at its default."""

    shot_id: str
    kind: ShotKind
    record_files: tuple[Path, ...]
    bar: str = "incident"  # the bar that was struck, or "transmitted"
    struck_end: BarEnd = BarEnd.FAR
    striker_speed_m_s: Quantity | None = None
    striker: Striker | None = None  # the one used; None where the rig file knows none
    station: str = ""  # of a shunt: the table of the rig file, "incident_gauge"
    shunt_ohm: Quantity | None = None
    remarks: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Session:
    """All shots of one calibration."""

    date: str
    rig_file: Path
    shots: tuple[CalibrationShot, ...]
    name: str = ""  # of the calibration file, without its ending; empty for rig file and date
    holds_days: int = 365
    temperature_k: Quantity | None = None
    propagation_of: tuple[str, ...] = ()  # bars whose complex propagation is asked for
    operator: str = ""
    remarks: str = ""
    hints: RecordHints = field(default_factory=RecordHints)
    text: str = ""
    source: str = ""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FiredShot:
    """A calibration shot and its record."""

    shot: CalibrationShot
    record: Record

    @property
    def shot_id(self) -> str:
        """Name of the shot."""
        return self.shot.shot_id

    def strain(self, rig: Rig, station: str) -> StationStrain:
        """Strain at a station of the rig (``"incident_gauge_2"``), positive in compression.

        Raises
        ------
        InputError
            As :func:`shpb.pulse.strain.station_strain`.
        """
        return station_strain(self.record, rig.gauges[station], rig.bar_of(station), TestKind.COMPRESSION)


def of_kind(fired: Sequence[FiredShot], kind: ShotKind) -> tuple[FiredShot, ...]:
    """The shots of one kind."""
    return tuple(one for one in fired if one.shot.kind is kind)
