"""Two passages of one pulse, cut out of the record of a bars-apart shot: there and back at one station, or at two.

The struck bar is free at its other end. A station at the distance d from that end sees the pulse, and then the same
pulse turned in sign after the way 2 d. Both are cut with windows of one length that begin equally long before the
front, so that what the soft ends take off is nearly the same share of both.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, dot
from shpb.calibrate.session import BarEnd, FiredShot
from shpb.errors import InputError
from shpb.pulse.front import first_front, moving_mean
from shpb.pulse.zero_line import QuietWindow, quiet_before_front, quiet_gap, zero_line
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig
from shpb.trust.sources import relative_u

_LEAD_RADII = 12.0  # a window begins so long before the tenth of the peak, in a/c0: precursor and foot
_LEAST_QUIET = 16  # samples before that, for the zero line
_SOFT_SHARE = 0.15  # of a window that its soft end takes
_STILL_THERE = 0.10  # share of the peak that a pulse may have left where its window ends
_SMOOTHING_RADII = 1.0
_SPEEDS = (0.75, 1.3)  # by the stated one: between these the second passage is looked for
_LEAST_SAMPLES = 64
ASSUMED_U_M = 0.5e-3  # of a distance whose uncertainty nobody has stated (common practice)


class Passages(NamedTuple):
    """Which two passages, alike for all shots that may be averaged."""

    stations: tuple[str, ...]  # one: there and back; two: first passages
    struck_end: BarEnd
    path_m: float
    u_path_m: float
    turned: bool  # the second has the other sign
    u_gain: float  # relative, of the second station's sensitivity by the first one's; zero for one station
    interval_s: float

    @property
    def words(self) -> str:
        """For reports."""
        names = [name.replace("_", " ") for name in self.stations]
        how = f"there and back at the {names[0]}" if self.turned else f"from the {names[0]} to the {names[1]}"
        return f"{how}, {self.path_m:.4g} m"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PassagePair:
    """Two passages in one shot; windows of ``samples`` begin at ``starts``."""

    shot_id: str
    passages: Passages
    traces: tuple[FloatArray, FloatArray]  # whole traces, zero line removed
    starts: tuple[int, int]
    samples: int  # the longest window that holds nothing else
    noise: tuple[float, float]  # standard deviation of one sample
    u_slope: tuple[float, float]  # of the zero line, per sample
    peak: float

    @property
    def delay_s(self) -> float:
        """From the start of the first window to that of the second [s]."""
        return (self.starts[1] - self.starts[0]) * self.passages.interval_s

    def cut(self, samples: int) -> tuple[FloatArray, FloatArray]:
        """Both passages, the second with the sign of the first, their ends soft, shape (samples,) each."""
        window = soft_end(samples)
        first, second = (
            trace[start : start + samples] * window
            for trace, start in zip(self.traces, self.starts, strict=True)
        )
        return first, -second if self.passages.turned else second


def soft_end(samples: int) -> FloatArray:
    """One, with a raised-cosine end; the start lies before the front and needs none, shape (samples,)."""
    left = (np.arange(float(samples))[::-1] + 0.5) / (_SOFT_SHARE * samples)
    window: FloatArray = 0.5 * (1 - np.cos(np.pi * np.clip(left, 0.0, 1.0)))
    return window


class _Station(NamedTuple):
    """One station in one shot."""

    name: str
    trace: FloatArray
    from_struck_m: float
    front: int  # where its first window begins
    at: int  # where the front has reached a tenth of the peak
    before: QuietWindow
    peak: float
    sign: int


def passage_pairs(fired: FiredShot, rig: Rig) -> tuple[tuple[PassagePair, ...], tuple[str, ...]]:
    """Every pair of passages in a bars-apart shot that can be told apart, and why others cannot.

    Pairs there and back come first. Lengths are those of the rig.

    Raises
    ------
    InputError
        If the record has no channel of the struck bar, holds no pulse, or begins with it.
    """
    bar = rig.incident_bar if fired.shot.bar == "incident" else rig.transmitted_bar
    stations = [_station(fired, rig, bar, name) for name in _recorded(fired, rig)]
    pairs: list[PassagePair] = []
    refused: list[str] = []
    for station in stations:
        found = _there_and_back(fired, rig, bar, station)
        (refused if isinstance(found, str) else pairs).append(found)  # type: ignore[arg-type]
    for near, far in _two_by_two(stations):
        found = _from_one_to_other(fired, rig, bar, near, far)
        (refused if isinstance(found, str) else pairs).append(found)  # type: ignore[arg-type]
    return tuple(pairs), tuple(f"shot {fired.shot_id}: {why}" for why in refused)


def _two_by_two(stations: list[_Station]) -> Iterator[tuple[_Station, _Station]]:
    along = sorted(stations, key=lambda one: one.from_struck_m)
    for n, near in enumerate(along):
        for far in along[n + 1 :]:
            yield near, far


def _recorded(fired: FiredShot, rig: Rig) -> list[str]:
    """Stations of the struck bar whose channels are in the record."""
    names = [name for name in rig.gauges if name.startswith(fired.shot.bar)]
    known = set(fired.record.channels) | set(range(1, len(fired.record.channels) + 1))
    there = [name for name in names if set(rig.gauges[name].channels) <= known]
    if not there:
        raise InputError(
            f"the record has channels {', '.join(map(repr, fired.record.channels))}, the stations of the "
            f"{fired.shot.bar} bar have {', '.join(repr(c) for name in names for c in rig.gauges[name].channels)}",
            where=f"shot {fired.shot_id}",
            mend="Name the rig that it was fired on, or the record's channels in the rig file",
        )
    return there


def _station(fired: FiredShot, rig: Rig, bar: Bar, name: str) -> _Station:
    interval = fired.record.sample_interval_s
    trace = fired.strain(rig, name).axial
    front = first_front(trace, interval, _SMOOTHING_RADII * bar.radius_time_s)
    where = f"shot {fired.shot_id}, {name.replace('_', ' ')}"
    if front is None:
        raise InputError("no pulse stands clear of the noise", where=where, mend="Check gauge and wiring")
    start = front.at - int(_LEAD_RADII * bar.radius_time_s / interval)
    before = quiet_before_front(trace, start, interval) if start >= _LEAST_QUIET else None
    if before is None:
        raise InputError(
            f"the pulse comes {front.at * interval * 1e6:.0f} us after the start of the record",
            where=where,
            mend="Record from at least 100 us before the pulse on, so that the zero line is seen",
        )
    x = float(rig.gauges[name].to_specimen_m)
    y = x if fired.shot.struck_end is BarEnd.SPECIMEN else float(bar.length_m) - x
    return _Station(name, trace, y, start, front.at, before, front.peak, front.sign)


def _there_and_back(fired: FiredShot, rig: Rig, bar: Bar, station: _Station) -> PassagePair | str:
    """The first two passages at one station, or why they cannot be told apart."""
    interval = fired.record.sample_interval_s
    gauge = rig.gauges[station.name]
    to_free = float(bar.length_m) - station.from_struck_m
    u_free = _u_m(gauge.to_specimen_m)
    if fired.shot.struck_end is BarEnd.SPECIMEN:
        u_free = float(np.hypot(u_free, _u_m(bar.length_m)))
    passages = Passages((station.name,), fired.shot.struck_end, 2 * to_free, 2 * u_free, True, 0.0, interval)
    lag = _lag(station, station.trace, station.front, passages.path_m, -1.0, bar, interval)
    if isinstance(lag, str):
        return f"{passages.words}: {lag}"
    second = station.front + lag
    # The third passage comes after the whole bar's length, twice; the lead before it is part of the window before.
    third = station.front + int(2 * bar.length_m / _speed(passages.path_m, lag, interval) / interval)
    samples = min(lag, third - second)
    return _pair(fired, passages, (station, station), (station.front, second), samples, bar)


def _from_one_to_other(
    fired: FiredShot, rig: Rig, bar: Bar, near: _Station, far: _Station
) -> PassagePair | str:
    """First passages at two stations, or why they cannot be told from what comes back."""
    interval = fired.record.sample_interval_s
    gauges = rig.gauges[near.name], rig.gauges[far.name]
    u_path = float(np.hypot(_u_m(gauges[0].to_specimen_m), _u_m(gauges[1].to_specimen_m)))
    u_gain = float(np.sqrt(sum(relative_u(gauge.gauge_factor, "gauge factor") ** 2 for gauge in gauges)))
    path = far.from_struck_m - near.from_struck_m
    passages = Passages((near.name, far.name), fired.shot.struck_end, path, u_path, False, u_gain, interval)
    lag = _lag(near, far.trace, near.front, path, 1.0, bar, interval)
    if isinstance(lag, str):
        return f"{passages.words}: {lag}"
    back = int(2 * (bar.length_m - far.from_struck_m) / _speed(path, lag, interval) / interval)
    samples = back
    return _pair(fired, passages, (near, far), (near.front, near.front + lag), samples, bar)


def _speed(path_m: float, lag: int, interval_s: float) -> float:
    return path_m / (lag * interval_s)


def _lag(
    first: _Station, trace: FloatArray, start: int, path_m: float, sign: float, bar: Bar, interval_s: float
) -> int | str:
    """Samples from the first passage to the second, by correlation; only windows hang on it, no result."""
    stated = path_m / bar.wave_speed_m_s / interval_s
    least, most = int(stated * _SPEEDS[0]), int(stated * _SPEEDS[1])
    most = min(most, trace.size - start - _LEAST_SAMPLES)
    if most <= least or least < _LEAST_SAMPLES:
        return "the record ends before the second passage, or the way is too short"
    piece = first.trace[start : start + least]
    found = [
        dot(piece[: trace.size - start - k], trace[start + k : start + k + piece.size])
        for k in _every(least, most)
    ]
    best = int(np.argmax(sign * np.asarray(found)))
    return _every(least, most)[best]


def _every(least: int, most: int) -> range:
    return range(least, most + 1, max((most - least) // 400, 1))


def _pair(
    fired: FiredShot,
    passages: Passages,
    stations: tuple[_Station, _Station],
    starts: tuple[int, int],
    samples: int,
    bar: Bar,
) -> PassagePair | str:
    """Take the zero lines off and look whether both passages have died away where their windows end."""
    room, recorded = samples, stations[1].trace.size - starts[1]
    samples = min(room, recorded)
    if samples < _LEAST_SAMPLES:
        return f"{passages.words}: the record ends before the second passage has gone by"
    width = max(round(_SMOOTHING_RADII * bar.radius_time_s / passages.interval_s), 1)
    traces, slopes, noise = [], [], []
    for n, (station, start) in enumerate(zip(stations, starts, strict=True)):
        gap = None
        if n == 1 and passages.turned:
            gap = quiet_gap(station.trace, station.peak, starts[0] + samples // 2, start)
        line = zero_line(
            gap or station.before, (station.before,) if gap else (), station.peak, passages.interval_s
        )
        traces.append(station.trace - line.at(0, station.trace.size))
        slopes.append(line.u_slope)
        noise.append(station.before.noise)
        # The first passage may be looked at over all the room there is, wherever the record ends.
        for window in (room, samples) if n == 0 else (samples,):
            left = _left_at_end(traces[n][start : start + window], width)
            if left > _STILL_THERE:
                which = "pulse" if n == 0 else "second passage"
                why = _still_there(which, left, window * passages.interval_s, window < room)
                return f"{passages.words}: {why}"
    return PassagePair(
        shot_id=fired.shot_id,
        passages=passages,
        traces=(traces[0], traces[1]),
        starts=starts,
        samples=samples,
        noise=(noise[0], noise[1]),
        u_slope=(slopes[0], slopes[1]),
        peak=stations[0].peak,
    )


def _still_there(which: str, left: float, window_s: float, ends_early: bool) -> str:
    if ends_early:
        return f"the record ends before the {which} has gone by"
    return (
        f"the {which} is still at {100 * left:.0f} % of its peak where the next wave comes, {window_s * 1e6:.0f} us "
        "after it began: the bar is too short for this pulse, or the station too near to an end"
    )


def _left_at_end(passage: FloatArray, width: int) -> float:
    """Mean level over the soft end of a window, share of the peak."""
    smooth = np.abs(moving_mean(passage, width))
    return float(abs(passage[-int(_SOFT_SHARE * passage.size) :].mean()) / smooth.max())


def _u_m(value: float) -> float:
    u = getattr(value, "u", None)
    return ASSUMED_U_M if u is None else float(u)
