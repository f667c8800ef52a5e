"""All that the checks of one shot may look at."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from shpb.pulse.pulse import Pulses
from shpb.pulse.strain import GaugeStrain
from shpb.record.record import Record
from shpb.response.response import Response
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings
from shpb.wave.faces import FacePulses

if TYPE_CHECKING:
    from shpb.trust.budget import Budget
    from shpb.trust.closure import Closure


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
    budget: Budget | None = None  # there once it has been worked out
    closure: Closure | None = None  # the same; None too where the forward run does not hold
