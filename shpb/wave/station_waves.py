"""The pulses of a shot whose waves lie on each other at the gauges: told apart by two or more stations on a bar.

The incident bar's two waves at its first station take the place of the incident and the reflected pulse, over the whole
record. The transmitted bar's wave to the right takes that of the transmitted pulse where it has two stations, and the
wave that comes back from its far end is then known too; with one station the transmitted pulse ends where that comes.
"""

from __future__ import annotations

from dataclasses import replace
from typing import NamedTuple

import numpy as np

from shpb.arrays import ComplexArray, FloatArray, frozen
from shpb.pulse.arrivals import Arrivals, geometric_arrivals
from shpb.pulse.incident_front import LEAD_RADII, incident_front_s, require_long_enough
from shpb.pulse.pulse import Pulse, Pulses
from shpb.pulse.pulses import Cutter, Trace
from shpb.pulse.separated import SeparatedBar
from shpb.pulse.shot_zeros import peak_above, quiet_or_refuse
from shpb.pulse.strain import GaugeStrain, StationStrain
from shpb.pulse.zero_line import ZeroLine, zero_line
from shpb.rig.bar import Bar
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.rig.sheet import Specimen
from shpb.settings import Correction, Settings
from shpb.wave.faces import low_pass_of
from shpb.wave.laplace import LaplaceGrid, laplace_grid, propagation_at
from shpb.wave.recording_chain import LEAST_GAIN, chain_delay_s, chain_gain
from shpb.wave.separation import Separated, separate
from shpb.wave.station_inputs import require_fronts, require_rest, require_stations, stations_on_side

# The waves are worked out until this many ways to and fro in the incident bar after the front: no test lasts longer.
_WAYS = 4
# Noise that is not there (a record from a computation) counts as this share of the peak.
_LEAST_NOISE = 1e-6
_LEAST_SHOWN = 1e-6  # of a component by a gauge and its amplifier: less is a division by nothing
_NO_LINE = ZeroLine(0.0, 0.0, 0.0, 0.0, 0.0, ())


def station_pulses(strain: GaugeStrain, rig: Rig, specimen: Specimen, settings: Settings) -> Pulses:
    """Find the pulses of a shot by its stations; ``strain`` holds further stations too.

    Raises
    ------
    InputError
        If the incident bar has one station only, two stand at one place, or windows are set by hand.
    UnusableShotError
        As :func:`shpb.pulse.pulses.find_pulses`, or if a station is not at rest before the front.
    """
    require_stations(strain, rig, settings)
    arrivals = geometric_arrivals(incident_front_s(strain, rig, settings), rig, specimen)
    require_long_enough(strain, arrivals, rig)
    stop_hz = low_pass_of(rig, settings).stop_hz
    until = arrivals.incident_s + _WAYS * (arrivals.second_loading_s - arrivals.incident_s)
    shot = _Shot(strain, rig, settings, arrivals, stop_hz, strain.index(until))
    incident_bar = _separated_bar(shot, "incident")
    incident, reflected = _cut_waves(shot, incident_bar)
    bars, remarks = [incident_bar], [incident_bar.in_words()]
    if len(stations_on_side(rig, "transmitted")) > 1 and not settings.switched_on(Correction.BAR_TEMPERATURE):
        transmitted_bar = _separated_bar(shot, "transmitted")
        bars.append(transmitted_bar)
        remarks.append(transmitted_bar.in_words())
        transmitted, returning = _cut_waves(shot, transmitted_bar)
    else:
        transmitted, returning = _cut_transmitted(shot), None
        if arrivals.end_reflection_s < strain.time(strain.samples):
            remarks.append(
                f"end reflection of the transmitted bar from {arrivals.end_reflection_s * 1e6:.0f} us on is kept out"
            )
    return Pulses(
        incident=incident,
        reflected=reflected,
        transmitted=transmitted,
        arrivals=arrivals,
        sample_interval_s=strain.sample_interval_s,
        tail_at_reflection=0.0,
        remarks=tuple(remarks),
        returning=returning,
        separated=tuple(bars),
    )


class _Shot(NamedTuple):
    strain: GaugeStrain
    rig: Rig
    settings: Settings
    arrivals: Arrivals
    stop_hz: float
    stop: int  # sample of the record


def _separated_bar(shot: _Shot, side: str) -> SeparatedBar:
    """Zero lines, start from rest, separation."""
    strain, rig = shot.strain, shot.rig
    gauges, bar = stations_on_side(rig, side), rig.bar_of(side)
    names = tuple(gauges)
    toward = -1.0 if side == "incident" else 1.0
    positions = tuple(toward * float(gauge.to_specimen_m) for gauge in gauges.values())
    first_front = getattr(shot.arrivals, f"{side}_s")
    fronts = [first_front + (x - positions[0]) / bar.wave_speed_m_s for x in positions]
    traces = [strain.stations[name].axial for name in names]
    lead = LEAD_RADII * bar.radius_time_s
    require_rest(strain, dict(zip(names, fronts, strict=True)), lead)
    require_fronts(strain, rig, side)
    zeros, noise = zip(
        *(_zero(shot, *each, lead) for each in zip(names, traces, fronts, strict=True)), strict=True
    )
    starts = [strain.index(front - 2 * lead) for front in fronts]
    begin = min(starts)
    rows = np.zeros((len(names), shot.stop - begin))
    peak = 0.0
    for row, trace, start, zero in zip(rows, traces, starts, zeros, strict=True):
        row[start - begin :] = trace[start : shot.stop] - zero.at(start, shot.stop)
        peak = max(peak, float(np.abs(row).max()))
    noise = tuple(max(level, _LEAST_NOISE * peak, 1e-15) for level in noise)
    grid = laplace_grid(rows.shape[1], strain.sample_interval_s, shot.stop_hz)
    rows = like_the_first(rows, list(gauges.values()), bar, grid)
    xi = propagation_at(bar, grid.p_per_s, shot.settings.dispersion)
    found = separate(rows, positions, xi, noise, grid, place_m=positions[0])
    worst, worst_hz = _worst(found, grid)
    return SeparatedBar(
        side=side, stations=names, positions_m=positions, begin=begin, begin_s=strain.time(begin), strain=frozen(rows),
        starts=tuple(start - begin for start in starts), zeros=zeros, noise=noise,
        right=found.contributions.right, left=found.contributions.left,
        right_gain=frozen(found.gain.by_time.right / grid.noise_share),
        left_gain=frozen(found.gain.by_time.left / grid.noise_share),
        worst_gain=worst, worst_gain_hz=worst_hz, singular_hz=found.singular_hz, stop_hz=shot.stop_hz,
        whole=found.whole,
    )  # fmt: skip


def _zero(shot: _Shot, name: str, trace: FloatArray, front_s: float, lead_s: float) -> tuple[ZeroLine, float]:
    """Zero line and noise of one station, from the quiet stretch before its front."""
    strain = shot.strain
    stop = strain.index(front_s - lead_s)
    before = quiet_or_refuse(
        trace, stop, strain.sample_interval_s, name.replace("_gauge", "").replace("_", " ")
    )
    peak = peak_above(trace, before, before.stop, shot.stop)
    return zero_line(before, (), peak, strain.sample_interval_s), before.noise


def like_the_first(rows: FloatArray, gauges: list[Gauge], bar: Bar, grid: LaplaceGrid) -> FloatArray:
    """Strains as the first station's gauge and amplifier would show them, where those of another differ."""
    first = _gain_on_line(gauges[0], bar, grid)
    out = rows.copy()
    for k, gauge in enumerate(gauges[1:], 1):
        gain = _gain_on_line(gauge, bar, grid)
        late = chain_delay_s(gauge) - chain_delay_s(gauges[0])
        if np.array_equal(gain, first) and late == 0.0:
            continue
        # Beyond what its chain still shows, nothing is lifted out of the noise.
        ratio = first / gain * np.minimum(1.0, np.abs(gain / first) / LEAST_GAIN)
        out[k] = grid.back(grid.transform(rows[k]) * ratio * np.exp(grid.p_per_s * late) * grid.fade)
    return out


def _gain_on_line(gauge: Gauge, bar: Bar, grid: LaplaceGrid) -> ComplexArray:
    """:func:`chain_gain` continued to f = p/(2 pi i); where nothing is left of it, its phase is not looked at."""
    gain = np.asarray(chain_gain(grid.p_per_s / (2j * np.pi), gauge, bar), dtype=np.complex128)  # type: ignore[arg-type]
    return np.where(np.abs(gain) < _LEAST_SHOWN, _LEAST_SHOWN, gain)


def _worst(found: Separated, grid: LaplaceGrid) -> tuple[float, float]:
    """Greatest noise gain within the band, and its frequency."""
    band = grid.fade >= 1.0
    either = np.maximum(*found.gain.by_frequency)[band]
    at = int(np.argmax(either))
    return float(either[at]), float(grid.frequency_hz[band][at])


# --- waves as pulses ---------------------------------------------------------------------------------


def _cut_waves(shot: _Shot, bar: SeparatedBar) -> tuple[Pulse, Pulse]:
    """Both waves of a bar as pulses: from the front of each to the end of the record."""
    strain, arrivals = shot.strain, shot.arrivals
    material = shot.rig.bar_of(bar.side)
    lead = LEAD_RADII * material.radius_time_s
    end = strain.time(bar.begin + bar.whole)
    if bar.side == "incident":
        waves = {"incident": arrivals.incident_s, "reflected": arrivals.reflected_s}
        begins = (arrivals.incident_s - 2 * lead, arrivals.reflected_s - lead)
        feet = tuple(waves.values())
    else:
        waves = {"transmitted": arrivals.transmitted_s, "returning": arrivals.end_reflection_s}
        begins = (arrivals.transmitted_s - 2 * lead, arrivals.end_reflection_s - lead)
        feet = (arrivals.transmitted_through_specimen_s, arrivals.end_reflection_s)
    station = strain.stations[bar.stations[0]]
    found = []
    for name, side, begin_s, foot_s in zip(waves, ("right", "left"), begins, feet, strict=True):
        whole = np.zeros(strain.samples)
        whole[bar.begin : bar.begin + bar.strain.shape[1]] = getattr(bar, side).sum(axis=0)
        trace = Trace(
            StationStrain(whole, None, station.voltage_v), material, bar.noise_at(strain.index(foot_s), side)
        )
        # A wave that has not come by the end of the record is silence.
        window = (min(begin_s, end - 4 * lead), end)
        pulse = Cutter(strain, shot.settings)(name, trace, _NO_LINE, window, foot_s)
        found.append(replace(pulse, zero=bar.zeros[0]))
    return found[0], found[1]


def _cut_transmitted(shot: _Shot) -> Pulse:
    """The transmitted pulse of a bar with one station, up to where the end reflection comes."""
    strain, arrivals, bar = shot.strain, shot.arrivals, shot.rig.transmitted_bar
    lead = LEAD_RADII * bar.radius_time_s
    window = (arrivals.transmitted_s - 2 * lead, arrivals.end_reflection_s - lead)
    trace = strain.transmitted.axial
    before = quiet_or_refuse(
        trace, strain.index(arrivals.transmitted_s - lead), strain.sample_interval_s, "transmitted"
    )
    peak = peak_above(trace, before, before.stop, strain.index(window[1]))
    line = zero_line(before, (), peak, strain.sample_interval_s)
    return Cutter(strain, shot.settings)(
        "transmitted",
        Trace(strain.transmitted, bar, before.noise),
        line,
        window,
        arrivals.transmitted_through_specimen_s,
    )
