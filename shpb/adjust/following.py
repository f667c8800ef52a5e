"""The curves of one shot while its windows and feet are moved: only what a move touches is worked out again.

The record becomes strain once, zero lines and arrivals follow from the incident front alone, the bars are solved once
for each length of FFT, and a pulse that was not touched is at the faces already. What is left is short enough to
follow the hand; uncertainty, closure and checks come with the whole reduction when the hand lets go.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from shpb.errors import InputError, ShpbError
from shpb.pulse.by_hand import ByHand, Move, kept_now, moves_between, setting_of, without_hands
from shpb.pulse.pulse import Pulse, Pulses
from shpb.pulse.pulses import Cutter, Trace, find_pulses
from shpb.pulse.strain import gauge_strain
from shpb.record.record import Record
from shpb.reduction import ShotResult, reduce
from shpb.response.response import Response, specimen_response
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings, Waves
from shpb.wave.faces import carry_to_faces
from shpb.wave.to_faces import Solved


@dataclass(frozen=True, slots=True, eq=False)
class Live:
    """What stands while a hand moves something.

    Attributes
    ----------
    pulses : Pulses
    response : Response or None
        None where these windows give no curve.
    problem : str
        Why not, else empty.
    """

    pulses: Pulses
    response: Response | None
    problem: str = ""


class Following:
    """One shot whose windows and feet are moved.

    Parameters
    ----------
    record, rig, sheet : Record, Rig, ShotSheet
    settings : Settings
        With the windows and feet that stand at the start; all else in them stays.

    Raises
    ------
    InputError
        If the waves are told apart by stations: there are no windows to move.
    UnusableShotError
        If the record cannot be reduced at all.
    """

    def __init__(self, record: Record, rig: Rig, sheet: ShotSheet, settings: Settings) -> None:
        if settings.waves is Waves.STATIONS:
            raise InputError(
                "the waves of this shot are told apart by stations, so that there are no windows to move",
                where=sheet.shot_id,
                mend="Reduce it with --waves windows first, if its pulses pass the gauges one by one",
            )
        self.record, self.rig, self.sheet = record, rig, sheet
        self.strain = gauge_strain(record, rig, sheet.kind)
        self._solved = Solved()
        self._plain = without_hands(settings)
        self._bases: dict[float | None, Pulses] = {}
        self._cut: dict[str, tuple[object, Pulse]] = {}
        self.own = self._base(None)  # as the program chooses them

    @property
    def record_s(self) -> tuple[float, float]:
        """Where the record begins and ends [s]."""
        return self.strain.start_s, self.strain.time(self.strain.samples)

    def pulses(self, settings: Settings) -> Pulses:
        """The three pulses; those that are not touched are the very same ones as before.

        Raises
        ------
        ShpbError
            If a pulse cannot be cut with these windows and feet.
        """
        base = self._base(settings.incident_foot_s)
        arrivals = base.arrivals
        return replace(
            base,
            incident=self._pulse(base, "incident", arrivals.incident_s, settings),
            reflected=self._pulse(base, "reflected", arrivals.reflected_s, settings),
            transmitted=self._pulse(base, "transmitted", arrivals.transmitted_through_specimen_s, settings),
        )

    def live(self, settings: Settings, last: Pulses) -> Live:
        """Curves and equilibrium by these windows; ``last`` are shown where the pulses cannot even be cut."""
        pulses = last
        try:
            pulses = self.pulses(settings)
            faces = carry_to_faces(pulses, self.rig, self.sheet, settings, self._solved)
            return Live(pulses, specimen_response(faces, pulses, self.rig, self.sheet, settings))
        except ShpbError as error:
            return Live(pulses, None, str(error))

    def reduced(self, settings: Settings, by_hand: tuple[ByHand, ...] = ()) -> ShotResult:
        """The whole reduction, with uncertainty, closure and checks.

        Raises
        ------
        ShpbError
            If these windows give no curve.
        """
        return replace(reduce(self.record, self.rig, self.sheet, settings), by_hand=by_hand)

    def moves(self, before: Settings, after: Settings) -> tuple[Move, ...]:
        """What was moved between two choices of windows and feet.

        Raises
        ------
        ShpbError
            If the pulses cannot be cut with the later ones.
        """
        later = self.pulses(after)
        try:
            earlier = self.pulses(before)
        except ShpbError:
            earlier = self.own  # they gave no pulses at all
        return moves_between(self.own, earlier, later, before, after)

    def _base(self, incident_foot_s: float | None) -> Pulses:
        """Windows as the program sets them; they hang on the incident foot alone, of which the last is kept."""
        if incident_foot_s not in self._bases:
            settings = self._plain.replaced(incident_foot_s=incident_foot_s)
            if incident_foot_s is not None:
                # The foot may lie outside the window that follows from it; only that window matters here.
                self._bases = {None: self._bases[None]}
            self._bases[incident_foot_s] = find_pulses(self.strain, self.rig, self.sheet.specimen, settings)
        return self._bases[incident_foot_s]

    def _pulse(self, base: Pulses, name: str, sought_s: float, settings: Settings) -> Pulse:
        wanted = (
            id(base),
            getattr(settings, setting_of(name, "window")),
            getattr(settings, setting_of(name, "foot")),
        )
        held = self._cut.get(name)
        if held is not None and held[0] == wanted:
            return held[1]
        of: Pulse = getattr(base, name)
        incident = name != "transmitted"
        trace = Trace(
            self.strain.incident if incident else self.strain.transmitted,
            self.rig.incident_bar if incident else self.rig.transmitted_bar,
            of.noise,
        )
        pulse = Cutter(self.strain, settings)(name, trace, of.zero, of.automatic_window_s, sought_s)
        self._cut[name] = (wanted, pulse)
        return pulse


__all__ = ["ByHand", "Following", "Live", "Move", "kept_now"]
