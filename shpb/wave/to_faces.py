"""From a gauge to the specimen face, all three pulses alike: dispersion, low-pass, recording chain, hot bar ends."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.pulse import Pulse, Pulses
from shpb.rig.gauge import Gauge
from shpb.rig.propagation_table import PropagationTable
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Correction, Settings
from shpb.wave.hot_bar import HotEnd, hot_ends, through_hot_end, whole_slices, why_no_hot_ends
from shpb.wave.propagation import (
    BarTransfer,
    CarriedPulse,
    Grid,
    LowPass,
    bar_transfer,
    fast_length,
    padded_length,
)
from shpb.wave.recording_chain import (
    chain_delay_s,
    chain_left,
    stations_of_pulses,
    undone_to_hz,
    why_no_chain,
    why_not_known,
)


class AtFaces(NamedTuple):
    """The three pulses at the faces, the impedance of the incident bar's face by that of the cold bar, and the wave
    that comes back in the transmitted bar where that is known.
    """

    incident: CarriedPulse
    reflected: CarriedPulse
    transmitted: CarriedPulse
    impedance_ratio: float
    returning: CarriedPulse | None = None


_Bar = tuple[float, float, float, PropagationTable | None]


@dataclass(slots=True, eq=False)
class Solved:
    """What one shot that is carried again and again, with other windows, need not work out anew.

    Rig, sheet and all settings but windows and feet must be the same every time.
    """

    bars: dict[tuple[int, _Bar], BarTransfer] = field(default_factory=dict)  # by FFT length and bar
    carried: dict[str, tuple[Pulse, tuple[object, ...], Grid, CarriedPulse]] = field(default_factory=dict)
    undone_hz: dict[str, tuple[Pulse, float]] = field(default_factory=dict)


class ToFaces:
    """Carries the pulses of one shot to the faces; the bars are solved once, whatever is shifted afterwards."""

    def __init__(
        self,
        pulses: Pulses,
        rig: Rig,
        sheet: ShotSheet,
        settings: Settings,
        grid: Grid,
        low_pass: LowPass,
        solved: Solved | None = None,
    ) -> None:
        x_i, x_t = rig.incident_gauge.to_specimen_m, rig.transmitted_gauge.to_specimen_m
        self._pulses, self._grid = pulses, grid
        self._distances = {"incident": x_i, "reflected": -x_i, "transmitted": -x_t, "returning": x_t}
        self._solved = Solved() if solved is None else solved
        bars = self._solved.bars
        self._transfers = _transfers(pulses, self._distances, rig, grid, low_pass, settings, bars)
        self.undone_hz = _undone_hz(pulses, rig, low_pass, self._solved.undone_hz)
        self._gauges = _undone_chains(rig, self.undone_hz, settings)
        hot = settings.switched_on(Correction.BAR_TEMPERATURE) and not why_no_hot_ends(rig, sheet)
        self._ends = hot_ends(rig, sheet) if hot else (None, None)

    def __call__(self, reflected_shift_s: float = 0.0, transmitted_shift_s: float = 0.0) -> AtFaces:
        """Carry all three, reflected and transmitted pulse with a further rigid delay [s]."""
        pulses = self._pulses
        end_i, end_t = self._ends
        if end_i is None:
            incident = self._carried(pulses.incident, self._grid)
            reflected = self._carried(pulses.reflected, self._grid, reflected_shift_s)
        else:
            incident, reflected = self._incident_through(end_i, reflected_shift_s)
        if end_t is None:
            transmitted = self._carried(pulses.transmitted, self._grid, transmitted_shift_s)
        else:
            transmitted = self._transmitted_through(end_t, transmitted_shift_s)
        # A hot end of the transmitted bar and a returning wave do not go together: see the stations.
        back = (
            None
            if pulses.returning is None
            else self._carried(pulses.returning, self._grid, transmitted_shift_s)
        )
        return AtFaces(
            incident, reflected, transmitted, 1.0 if end_i is None else end_i.impedance_ratio, back
        )

    def _carried(self, pulse: Pulse, grid: Grid, shift_s: float = 0.0) -> CarriedPulse:
        transfer, chain = self._transfers[pulse.name], None
        if self._gauges:
            gauge = self._gauges[pulse.name]
            chain = chain_left(transfer.frequency_hz, gauge, transfer.bar, self._undone_to_hz(pulse))
            # Only the difference between the channels matters: the incident pulse ties the clock.
            shift_s += chain_delay_s(self._gauges["incident"]) - chain_delay_s(gauge)
        distance = self._distances[pulse.name]
        # A pulse that is the very one of before is at the faces already, on a grid as long as this or longer.
        place = (transfer.length, grid.start_s, grid.interval_s, shift_s, self._undone_to_hz(pulse))
        kept = self._solved.carried.get(pulse.name)
        if kept is not None and kept[0] is pulse and kept[1] == place and kept[2].samples >= grid.samples:
            return _first_samples(kept[3], grid.samples)
        carried = transfer.carry(pulse.strain, pulse.start_s, grid, distance, shift_s, chain)
        self._solved.carried[pulse.name] = (pulse, place, grid, carried)
        return carried

    def _undone_to_hz(self, pulse: Pulse) -> float:
        """Up to where the chain is undone; a wave that comes back is what the transmitted pulse has become."""
        names = [one.name for one in self._pulses]
        return self.undone_hz[names.index(pulse.name) if pulse.name in names else -1]

    def _to_cold_end(self, pulse: Pulse, end: HotEnd, shift_s: float = 0.0) -> CarriedPulse:
        """To where the heated length begins, on the faces' clock widened by its travel time on both sides.

        The dispersion of the whole way is taken at once; only the rigid part stops short of the heated length.
        """
        grid = self._grid
        slices = whole_slices(end, grid.interval_s)
        wide = Grid(grid.start_s - slices * grid.interval_s, grid.interval_s, grid.samples + 2 * slices)
        rest = end.travel_s - slices * grid.interval_s  # what whole slices leave out of the travel time
        short = rest - end.length_m / end.bar.wave_speed_m_s
        return self._carried(pulse, wide, shift_s + (short if self._distances[pulse.name] > 0 else -short))

    def _incident_through(self, end: HotEnd, shift_s: float) -> tuple[CarriedPulse, CarriedPulse]:
        toward = self._to_cold_end(self._pulses.incident, end)
        away = self._to_cold_end(self._pulses.reflected, end, shift_s)
        surface_in, surface_re = self._through(toward.strain, away.strain, end)
        force_in, force_re = self._through(toward.force_strain, away.force_strain, end)
        speed_in, speed_re = self._through(toward.velocity_strain, away.velocity_strain, end)
        ratio = end.impedance_ratio
        return (
            CarriedPulse(surface_in, force_in, speed_in / ratio),
            CarriedPulse(surface_re, force_re, speed_re / ratio),
        )

    def _transmitted_through(self, end: HotEnd, shift_s: float) -> CarriedPulse:
        """Inside the heated length waves run to and fro, so force and velocity at the face are no longer one wave."""
        away = self._to_cold_end(self._pulses.transmitted, end, shift_s)
        still = np.zeros_like(away.strain)
        _, surface = self._through(still, away.strain, end)
        force_back, force = self._through(still, away.force_strain, end)
        speed_back, speed = self._through(still, away.velocity_strain, end)
        return CarriedPulse(surface, force + force_back, (speed - speed_back) / end.impedance_ratio)

    def _through(self, toward: FloatArray, away: FloatArray, end: HotEnd) -> tuple[FloatArray, FloatArray]:
        slices = whole_slices(end, self._grid.interval_s)
        at_face = through_hot_end(toward, away, end, self._grid.interval_s)
        inner = slice(slices, slices + self._grid.samples)
        return at_face[0][inner], at_face[1][inner]


def _first_samples(carried: CarriedPulse, samples: int) -> CarriedPulse:
    """The same on a shorter grid; what was one array stays one."""
    if carried.strain.size == samples:
        return carried
    surface = carried.strain[:samples]
    force, velocity = (
        surface if one is carried.strain else one[:samples]
        for one in (carried.force_strain, carried.velocity_strain)
    )
    return CarriedPulse(surface, force, velocity)


def _undone_hz(
    pulses: Pulses, rig: Rig, low_pass: LowPass, known: dict[str, tuple[Pulse, float]]
) -> tuple[float, ...]:
    """Up to where the recording chain of each pulse can be undone [Hz]; zero where nothing is stated of it."""
    if why_not_known(rig):
        return (0.0, 0.0, 0.0)
    for pulse, (gauge, bar) in zip(pulses, stations_of_pulses(rig), strict=True):
        held = known.get(pulse.name)
        if held is None or held[0] is not pulse:
            found = undone_to_hz(pulse, pulses.sample_interval_s, gauge, bar, low_pass.stop_hz)
            known[pulse.name] = (pulse, found)
    return tuple(known[pulse.name][1] for pulse in pulses)


def _undone_chains(rig: Rig, undone_hz: tuple[float, ...], settings: Settings) -> dict[str, Gauge]:
    """Gauge of each pulse whose recording chain is undone; empty where that is not asked for or does not hold."""
    if not settings.switched_on(Correction.GAUGE_RISE) or why_no_chain(rig, undone_hz):
        return {}
    return {
        "incident": rig.incident_gauge,
        "reflected": rig.incident_gauge,
        "transmitted": rig.transmitted_gauge,
        "returning": rig.transmitted_gauge,
    }


def _transfers(
    pulses: Pulses,
    distances: dict[str, float],
    rig: Rig,
    grid: Grid,
    low_pass: LowPass,
    settings: Settings,
    solved: dict[tuple[int, _Bar], BarTransfer],
) -> dict[str, BarTransfer]:
    """What the bars do to each pulse; one FFT length for all, so that equal bars are solved once."""
    bars = {"incident": rig.incident_bar, "reflected": rig.incident_bar, "transmitted": rig.transmitted_bar}
    if pulses.returning is not None:
        bars["returning"] = rig.transmitted_bar
    interval = pulses.sample_interval_s
    every = round(grid.interval_s / interval)
    length = max(
        padded_length(pulse.strain.size, distances[pulse.name], bars[pulse.name], low_pass, interval)
        for pulse in (*pulses, *(() if pulses.returning is None else (pulses.returning,)))
    )
    length = every * fast_length(-(-length // every))
    transfers = {}
    for name, bar in bars.items():
        form = (float(bar.radius_m), float(bar.wave_speed_m_s), float(bar.poisson_ratio), bar.propagation)
        kind = (length, form)
        if kind not in solved:
            solved[kind] = bar_transfer(bar, interval, length, low_pass, settings.dispersion)
        transfers[name] = solved[kind]
    return transfers
