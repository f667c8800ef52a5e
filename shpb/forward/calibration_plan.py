"""What is fired in a calibration: which bar is struck where, how fast, by what, and what the bar loses on the way."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.forward.bars import ComplexModulus
from shpb.forward.striker import Shaper, impact_force, limited_by_yield, shaped_impact_force
from shpb.rig.bar import Bar, Striker
from shpb.rig.rig import Rig

# Below this share of the first force the striker no longer pushes.
_LET_GO = 1e-3


@dataclass(frozen=True, slots=True, kw_only=True)
class Losses:
    """What a real bar loses besides dispersion: in its supports and at its ends, alike at every frequency."""

    per_metre: float = 0.0  # of the amplitude [1/m]
    per_reflection: float = 0.0  # share of the amplitude

    def kept(self, way_m: float, reflections: int) -> float:
        """Share of the amplitude that is left."""
        return math.exp(-self.per_metre * way_m) * (1.0 - self.per_reflection) ** reflections


NO_LOSSES = Losses()


@dataclass(frozen=True, slots=True, kw_only=True)
class CalibrationPlan:
    """All that the forward model must know of a fired calibration shot.

    ``bar`` and ``at_specimen_end`` say which bar is struck where; for bars together it is the far end of the incident
    bar. ``solid`` is the material of bars that are not elastic (bars apart only).
    """

    rig: Rig
    striker_speed_m_s: float
    striker: Striker | None = None  # another than the rig's
    bar: str = "incident"
    at_specimen_end: bool = False
    rise_s: float = 10e-6  # of the striker's impact on the bare end
    shaper: Shaper | None = None
    losses: Losses = field(default=NO_LOSSES)
    solid: ComplexModulus | None = None
    dispersive: bool = True

    @property
    def struck(self) -> Bar:
        """The bar that is struck."""
        if self.bar not in ("incident", "transmitted"):
            raise InputError(
                f"there is no {self.bar!r} bar", where="calibration plan", mend="Say incident or transmitted"
            )
        return self.rig.incident_bar if self.bar == "incident" else self.rig.transmitted_bar

    @property
    def striker_used(self) -> Striker:
        """The plan's own striker, else the rig's."""
        striker = self.striker or self.rig.striker
        if striker is None:
            raise InputError(
                "there is no striker",
                where="calibration plan",
                mend="Describe one in the rig file or the plan",
            )
        return striker

    def from_struck_end_m(self, station: str) -> float:
        """Distance of a station of the struck bar from the end that is struck [m]."""
        to_specimen = float(self.rig.gauges[station].to_specimen_m)
        return to_specimen if self.at_specimen_end else float(self.struck.length_m) - to_specimen

    def impact_n(self, time_s: FloatArray) -> FloatArray:
        """Force of the striker at the struck end [N], shape of ``time_s`` (zero at first contact).

        Raises
        ------
        InputError
            If the grid begins after the impact, or the striker still pushes when its pulse comes back to it.
        """
        if time_s[0] > 0:
            raise InputError(
                f"the time grid begins {time_s[0] * 1e6:g} us after the impact",
                where="calibration plan",
                mend="Begin at or before time zero, when the striker touches the bar",
            )
        bar, striker = self.struck, self.striker_used
        if self.shaper is not None:
            force = shaped_impact_force(striker, bar, self.striker_speed_m_s, time_s, shaper=self.shaper)
        else:
            force = impact_force(striker, bar, self.striker_speed_m_s, time_s, rise_s=self.rise_s)
        pushing = np.flatnonzero(force > _LET_GO * force.max(initial=0.0))
        if pushing.size and time_s[pushing[-1]] > 2 * bar.length_m / bar.wave_speed_m_s:
            raise InputError(
                "the striker still pushes when its pulse comes back to it",
                where="calibration plan",
                mend="Take a longer bar, a shorter or a lighter striker",
            )
        return limited_by_yield(force, bar)
