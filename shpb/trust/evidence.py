"""All that the checks of one shot may look at."""

from __future__ import annotations

from dataclasses import dataclass

from shpb.pulse.pulse import Pulses
from shpb.pulse.strain import GaugeStrain
from shpb.record.record import Record
from shpb.response.response import Response
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings
from shpb.wave.faces import FacePulses


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Evidence:
    """Every stage of one shot, for the checks to look at."""

    record: Record
    rig: Rig
    sheet: ShotSheet
    settings: Settings
    strain: GaugeStrain
    pulses: Pulses
    faces: FacePulses
    response: Response
