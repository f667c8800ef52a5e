"""The pulses of a calibration shot: where each station sees the pulse pass, cut out, carried to a common place."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.sensitivity.pulse_order import first_front_s, require_order, require_order_behind
from shpb.calibrate.session import FiredShot
from shpb.calibrate.struck import early_s, passages_s, refuse, strain_of, struck_station
from shpb.pulse.incident_front import LEAD_RADII
from shpb.pulse.pulses import TAPER_RADII, soft_ends
from shpb.pulse.zero_line import QuietWindow, ZeroLine, quiet_before_front, quiet_gap, zero_line
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig
from shpb.settings import Dispersion
from shpb.wave.propagation import CarriedPulse, Grid, LowPass, carry_pulse

# A pulse that still stands at this share of its peak where the next one comes has not passed.
_NOT_PASSED = 0.25

_LEAST_SAMPLES = 32


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CutPulse:
    """One passage of the pulse at one station, zero line removed, ends tapered to zero.

    Attributes
    ----------
    station : str
        As in :attr:`shpb.rig.rig.Rig.gauges`.
    passage : int
        0 for the first time that the pulse comes by.
    strain : float array, shape (samples of the window,)
        Positive in compression [1].
    start_s, interval_s : float
        Time of the first sample on the record's clock, and spacing [s].
    arrival_s : float
        Where geometry puts the pulse at c0 [s].
    zero : ZeroLine
        What was removed.
    noise : float
        Standard deviation of one sample of strain.
    tail : float
        Level at the end of the window, share of the peak.
    """

    station: str
    passage: int
    strain: FloatArray
    start_s: float
    interval_s: float
    arrival_s: float
    zero: ZeroLine
    noise: float
    tail: float

    @property
    def peak(self) -> float:
        """Greatest magnitude [1]."""
        return float(np.abs(self.strain).max())

    def u_level(self) -> float:
        """Standard uncertainty of the zero line in the middle of the window [1]."""
        # The line's centre lies in the quiet windows; the pulse is that many samples away from it.
        start = self.zero.quiet[0][1]
        away = start + 0.5 * self.strain.size - self.zero.centre
        return float(np.hypot(self.zero.u_level, self.zero.u_slope * away))

    def carried(
        self, bar: Bar, grid: Grid, distance_m: float, low_pass: LowPass, shift_s: float = 0.0
    ) -> CarriedPulse:
        """At another place of its bar; ``distance_m`` along its travel, negative to where it was."""
        return carry_pulse(
            self.strain, self.start_s, grid, distance_m, bar, low_pass, Dispersion.FULL, shift_s
        )


def cut_pulses(
    fired: FiredShot, rig: Rig, stations: Sequence[str], passages: int = 1
) -> dict[str, tuple[CutPulse, ...]]:
    """Cut the first passages of the pulse at each station; later ones than the first only while the record holds them.

    Raises
    ------
    InputError
        If a channel is missing, dead, inverted or swapped with another, or the record begins on the pulse or ends in
        it; the message names the shot.
    """
    strains = {name: strain_of(fired, rig, name) for name in stations}
    first = struck_station(fired.shot, rig)
    if first not in strains:
        strains[first] = strain_of(fired, rig, first)
    travel = passages_s(fired.shot, rig, first)[0]
    impact = first_front_s(fired, rig, first, strains[first].axial) - travel
    impact += early_s(rig.bar_of(first), travel)
    # First the order in all of them: swapped channels explain every later complaint.
    for name in stations:
        require_order(fired, rig, name, strains[name].axial, impact)
    require_order_behind(fired, rig, stations, impact)
    cut = {}
    for name in stations:
        cutter = _Cutter(fired, rig, name, strains[name].axial, impact)
        held = [number for number in range(passages) if number == 0 or cutter.holds(number)]
        cut[name] = tuple(cutter(number) for number in held)
    return cut


@dataclass(frozen=True, slots=True, eq=False)
class _Cutter:
    """Cuts the passages at one station."""

    fired: FiredShot
    rig: Rig
    station: str
    axial: FloatArray
    impact_s: float

    @property
    def travels(self) -> tuple[float, ...]:
        """Travel times to the passages at c0 [s]."""
        return passages_s(self.fired.shot, self.rig, self.station)

    @property
    def fronts(self) -> list[float]:
        """Where geometry puts the fronts, on the record's clock [s]."""
        bar = self.rig.bar_of(self.station)
        return [self.impact_s + travel - early_s(bar, travel) for travel in self.travels]

    @property
    def lead_s(self) -> float:
        """Time before a front that holds nothing of it [s]."""
        return LEAD_RADII * self.rig.bar_of(self.station).radius_time_s

    @property
    def end_s(self) -> float:
        """End of the record [s]."""
        return self.fired.record.start_s + self.fired.record.samples * self.fired.record.sample_interval_s

    def holds(self, number: int) -> bool:
        """Whether a later passage is in the record whole: it lasts as long as the first."""
        fronts = self.fronts
        front, _, loud = self._first(fronts)
        lasts = (loud - front) * self.fired.record.sample_interval_s
        whole = min(fronts[number + 1] - self.lead_s, fronts[number] + lasts + 2 * self.lead_s)
        return self.end_s >= whole

    def __call__(self, number: int) -> CutPulse:
        record, bar = self.fired.record, self.rig.bar_of(self.station)
        interval, lead, fronts = record.sample_interval_s, self.lead_s, self.fronts
        front, following = fronts[number], fronts[number + 1]
        start = self._index(front - (2 * lead if number == 0 else lead))
        stop = self._index(following - lead)
        if stop - start < _LEAST_SAMPLES or self.end_s < front + 6 * lead:
            raise refuse(
                self.fired,
                f"the record ends before passage {number + 1} of the pulse at the "
                f"{self.station.replace('_', ' ')}, {front * 1e6:.0f} us, is in",
                "Lengthen the record at the scope; check gauge distances and wave speeds in the rig file",
            )
        zero, noise = self._zero(number, fronts)
        values = self.axial[start:stop] - zero.at(start, stop)
        peak = float(np.abs(values).max())
        end = values[-max(int(lead / interval), 4) :]
        tail = abs(float(end.mean())) / max(peak, 1e-12)
        self._require_passed(tail, front, following, peak, noise)
        values *= soft_ends(values.size, int(TAPER_RADII * bar.radius_time_s / interval))
        return CutPulse(
            station=self.station,
            passage=number,
            strain=frozen(values),
            start_s=record.start_s + start * interval,
            interval_s=interval,
            arrival_s=self.impact_s + self.travels[number],
            zero=zero,
            noise=noise,
            tail=tail,
        )

    def _index(self, time_s: float) -> int:
        record = self.fired.record
        return int(np.clip(np.ceil((time_s - record.start_s) / record.sample_interval_s), 0, record.samples))

    def _first(self, fronts: list[float]) -> tuple[int, float, int]:
        """Of the first passage: sample before its front, peak, last sample above a tenth of it."""
        front, stop = self._index(fronts[0] - self.lead_s), self._index(fronts[1] - self.lead_s)
        level = self.axial[:front].mean() if front else 0.0
        size = np.abs(self.axial[front:stop] - level)
        peak = float(size.max(initial=1e-12))
        loud = np.flatnonzero(size > 0.1 * peak)
        return front, peak, front + (int(loud[-1]) if loud.size else 0)

    def _zero(self, number: int, fronts: list[float]) -> tuple[ZeroLine, float]:
        """Zero line of a passage: from the quiet before the first, and from a quiet gap before a later one."""
        interval = self.fired.record.sample_interval_s
        front, peak, end = self._first(fronts)
        before = quiet_before_front(self.axial, front, interval)
        if before is None:
            raise refuse(
                self.fired,
                f"there is no quiet time before the pulse at the {self.station.replace('_', ' ')}",
                "Set the scope to keep at least 100 us before the trigger and fire again",
            )
        gap: QuietWindow | None = quiet_gap(self.axial, peak, end, self._index(fronts[1] - self.lead_s))
        if gap is None:
            return zero_line(before, (), peak, interval), before.noise
        lines = (gap, (before,)) if number else (before, (gap,))
        return zero_line(*lines, peak, interval), before.noise

    def _require_passed(
        self, tail: float, arrival: float, following: float, peak: float, noise: float
    ) -> None:
        if tail < _NOT_PASSED or peak < 10 * noise:
            return
        if self.end_s < following - self.lead_s:
            raise refuse(
                self.fired,
                f"the record ends while the pulse passes the {self.station.replace('_', ' ')}: it still stands at "
                f"{100 * tail:.0f} % of its peak",
                "Lengthen the record at the scope",
            )
        raise refuse(
            self.fired,
            f"the pulse has not passed the {self.station.replace('_', ' ')} when the next one comes "
            f"{(following - arrival) * 1e6:.0f} us later: it still stands at {100 * tail:.0f} % of its peak",
            "Take a shorter striker, or a station farther from that end of the bar; is the bar shorter than stated?",
        )
