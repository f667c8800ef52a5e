"""Every passage of the pulse that a calibration shot shows, and the window that holds it alone.

Passages of bars apart are told apart by geometry alone (:mod:`~.ways`), from the first front on and with a
wave speed that the record itself shows. With bars together the tension behind the pulse parts the bars; so the window
ends with the pulse, and what comes later is only kept out of it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.bars.ways import Passage, Way, bar_of, lengths_of, ways_of
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.calibrate.struck import refuse, strain_of, struck_station
from shpb.errors import InputError
from shpb.pulse.front import Front, first_front, moving_mean
from shpb.pulse.zero_line import quiet_before_front
from shpb.rig.bar import Bar
from shpb.rig.rig import SIDES, Rig

MARGIN_RADII = 10.0  # soft ends of a window, and what stays flat before and behind the pulse, in a/c0
_SMOOTHING_RADII = 1.0
_LEVEL_RADII = 6.0  # a mean over so much is deaf to the ringing of the first mode
_PASSED = 0.08  # share of the peak below which a pulse has gone by
_STANDING = 0.25  # share of the peak at which it surely has not
_LEAST_QUIET = 16  # samples before the first window, for noise and zero
_LEAST_NOISE = 3e-4  # of the peak: records without any noise
_SPEEDS = np.linspace(0.85, 1.18, 1321)  # by the stated one: between these the wave speed is looked for
_ALIKE = 0.4  # mean correlation of the passages with the first one that there must be at least


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ShotPassages:
    """The passages of one shot that can be told apart.

    Attributes
    ----------
    fired : FiredShot
    reference : str
        The station that the pulse passes first.
    passages : tuple of Passage
        Those whose windows hold nothing else.
    traces : mapping of str to float array, shape (samples,)
        Strain of the stations, level before the shot removed.
    noise : mapping of str to float
        Standard deviation of one sample.
    peak : float
        Largest strain of the first passage.
    origin_s : float
        When the pulse began where ways are counted from, from the first sample on [s]; only windows hang on it.
    duration_s : float
        Of the pulse, or of that part of it for which both bars are pressed together [s].
    whole : bool
        Whether the window holds all of the pulse and its soft end lies behind it.
    """

    fired: FiredShot
    reference: str
    passages: tuple[Passage, ...]
    traces: Mapping[str, FloatArray]
    noise: Mapping[str, float]
    peak: float
    origin_s: float
    duration_s: float
    whole: bool

    @property
    def shot_id(self) -> str:
        """Name of the shot."""
        return self.fired.shot_id

    @property
    def interval_s(self) -> float:
        """Sample spacing [s]."""
        return self.fired.record.sample_interval_s


# --- passages of a shot -----------------------------------------------------------------------------------------


def passages_of(fired: FiredShot, rig: Rig) -> tuple[ShotPassages, float]:
    """Find the passages of one shot; the wave speed by the stated one, roughly, comes with them.

    Raises
    ------
    InputError
        If a channel is missing or dead, if the record begins with the pulse, if nothing comes back as it should, or if
        no two passages can be told apart: then with the lengths that would do.
    """
    traces, fronts, noise = _traces(fired, rig)
    reference = struck_station(fired.shot, rig)
    if reference not in traces:
        reference = min(traces, key=lambda name: fronts[name].at)
    interval, bar = fired.record.sample_interval_s, rig.bar_of(reference)
    front_s = fronts[reference].at * interval
    factor = _speed_factor(fired, rig, traces, reference, fronts[reference])
    lengths = lengths_of(rig)
    speeds = {side: float(bar_of(rig, side).wave_speed_m_s) * factor for side in SIDES}
    arrivals = _arrivals(fired, traces, lengths, speeds)
    origin_s = front_s - arrivals[reference][0][0]
    margin = 2 * MARGIN_RADII * bar.radius_time_s
    duration = _duration_s(fired, traces, fronts, arrivals, origin_s, bar)
    end_s = (fired.record.samples - 1) * interval - origin_s
    apart = fired.shot.kind is ShotKind.BARS_APART
    found = []
    for station, coming in arrivals.items():
        times = sorted(time for time, _, _ in coming)
        for time, way, usable in coming:
            at = times.index(time)
            before = time - times[at - 1] if at else np.inf
            after = times[at + 1] - time if at + 1 < len(times) else np.inf
            whole = time + duration + margin <= end_s
            if usable and whole and min(before, after) >= duration + margin:
                found.append(Passage(station=station, way=way))
    if len(found) < 2:
        raise _overlapping(fired, rig, arrivals, duration + margin, end_s, speeds)
    shot = ShotPassages(
        fired=fired, reference=reference, passages=tuple(found), traces=traces, noise=noise,
        peak=fronts[reference].peak, origin_s=origin_s,
        duration_s=duration if apart else _pressed_s(fired, traces, fronts, arrivals, origin_s, bar), whole=apart,
    )  # fmt: skip
    return shot, factor


def _traces(fired: FiredShot, rig: Rig) -> tuple[dict[str, FloatArray], dict[str, Front], dict[str, float]]:
    """Strain, first front and noise of every station that the pulse comes to and that was recorded."""
    interval = fired.record.sample_interval_s
    together = fired.shot.kind is ShotKind.BARS_TOGETHER
    own = [name for name in rig.gauges if together or name.startswith(fired.shot.bar)]
    known = set(fired.record.channels) | set(range(1, len(fired.record.channels) + 1))
    recorded = [name for name in own if set(rig.gauges[name].channels) <= known]
    if not recorded:
        strain_of(fired, rig, own[0])  # says which channel is missing
    traces, fronts, noise = {}, {}, {}
    for name in recorded:
        axial, bar = strain_of(fired, rig, name).axial, rig.bar_of(name)
        front = first_front(axial, interval, _SMOOTHING_RADII * bar.radius_time_s)
        what = name.replace("_", " ")
        if front is None:
            raise refuse(
                fired, f"no pulse stands clear of the noise at the {what}", "Check gauge, cable and channel"
            )
        start = front.at - int(2 * MARGIN_RADII * bar.radius_time_s / interval)
        quiet = quiet_before_front(axial, start, interval) if start >= _LEAST_QUIET else None
        if quiet is None:
            raise refuse(
                fired,
                f"the pulse comes to the {what} {front.at * interval * 1e6:.0f} us after the start of the record",
                "Record from at least 100 us before the pulse on, so that zero and noise are seen",
            )
        traces[name] = frozen(axial - quiet.level)
        fronts[name], noise[name] = front, max(quiet.noise, _LEAST_NOISE * front.peak)
    return traces, fronts, noise


def _arrivals(
    fired: FiredShot,
    traces: Mapping[str, FloatArray],
    lengths: Mapping[str, float],
    speeds: Mapping[str, float],
) -> dict[str, list[tuple[float, Way, bool]]]:
    """All ways to the recorded stations with their times from the impact on, in order of time."""
    return {
        station: sorted(
            ((way.time_s(lengths, speeds), way, usable) for way, usable in ways_of(fired.shot, station)),
            key=lambda one: one[0],
        )
        for station in traces
    }


def _speed_factor(
    fired: FiredShot, rig: Rig, traces: Mapping[str, FloatArray], reference: str, front: Front
) -> float:
    """Wave speed by the stated one at which the record is most like its first passage, again and again."""
    interval, lengths = fired.record.sample_interval_s, lengths_of(rig)
    speeds = {side: float(bar_of(rig, side).wave_speed_m_s) for side in SIDES}
    arrivals = _arrivals(fired, traces, lengths, speeds)
    first_s = arrivals[reference][0][0]
    lead = int(MARGIN_RADII * rig.bar_of(reference).radius_time_s / interval)
    gap = arrivals[reference][1][0] - first_s if len(arrivals[reference]) > 1 else np.inf
    start = max(front.at - lead, 0)
    piece = traces[reference][start : front.at + int(0.8 * min(gap, 1.0) / interval)]
    total, count = np.zeros(_SPEEDS.size), np.zeros(_SPEEDS.size)
    for station, coming in arrivals.items():
        alike = _correlation(traces[station], piece)
        for time, way, usable in coming:
            lag = (time - first_s) / _SPEEDS / interval
            # A passage that the record does not hold whole says nothing.
            at = np.round(start + lag).astype(int)
            inside = (at + piece.size // 2 < traces[station].size) & (at >= 0)
            if usable and abs(time - first_s) > 0 and inside.any():
                where = np.clip(at, 0, alike.size - 1)
                total += np.where(inside, way.sign * alike[where], 0.0)
                count += inside
    if not count.any():
        raise refuse(
            fired, "the record ends before the pulse passes a second time", "Lengthen the record at the scope"
        )
    mean = total / np.maximum(count, 1.0)
    # Speeds at which the record shows as many passages as at any other, less one: fewer are no better proof.
    mean[count < count.max() - 1] = -np.inf
    best = int(np.argmax(mean))
    if mean[best] < _ALIKE:
        if np.abs(piece[-max(piece.size // 10, 1) :].mean()) > _STANDING * front.peak:
            raise refuse(
                fired,
                f"the pulse still stands at the {reference.replace('_', ' ')} when it comes back from the end, "
                f"{gap * 1e6:.0f} us after it first passed: no two passages can be told apart",
                "Put the station farther from both ends, on a bar longer than the pulse, or use a shorter striker",
            )
        raise refuse(
            fired,
            f"what comes back is not the pulse turned at a free end (likeness {mean[best]:.2f} of 1)",
            "Check kind of shot, bar, struck end and channels: bars-apart needs a bar free at its other end",
        )
    return float(_SPEEDS[best])


def _correlation(trace: FloatArray, piece: FloatArray) -> FloatArray:
    """Normalised correlation of a piece with what begins at each sample of a trace, shape (samples,)."""
    size = 1 << int(np.ceil(np.log2(trace.size + piece.size)))
    product = np.fft.rfft(trace, size) * np.conj(np.fft.rfft(piece, size))
    sums = np.fft.irfft(product, size)[: trace.size]
    energy = np.concatenate([[0.0], np.cumsum(trace**2)])
    stop = np.minimum(np.arange(trace.size) + piece.size, trace.size)
    own = energy[stop] - energy[: trace.size]
    whole = float((piece**2).sum())
    alike: FloatArray = sums / np.sqrt(np.maximum(own, 0.1 * whole) * whole)
    return alike


def _duration_s(
    fired: FiredShot,
    traces: Mapping[str, FloatArray],
    fronts: Mapping[str, Front],
    arrivals: Mapping[str, list[tuple[float, Way, bool]]],
    origin_s: float,
    bar: Bar,
) -> float:
    """How long the pulse lasts, at the station where most time passes before the next wave; infinite where not seen."""
    interval = fired.record.sample_interval_s
    gaps = {name: coming[1][0] - coming[0][0] for name, coming in arrivals.items()}
    station = max(gaps, key=lambda name: gaps[name])
    first = origin_s + arrivals[station][0][0]
    start = int(first / interval)
    level = moving_mean(traces[station], round(_LEVEL_RADII * bar.radius_time_s / interval))
    room = level[start : start + int((gaps[station] - MARGIN_RADII * bar.radius_time_s) / interval)]
    standing = np.flatnonzero(np.abs(room) > _PASSED * fronts[station].peak)
    if not standing.size or standing[-1] >= room.size - 1:
        return float(room.size * interval)
    return float((standing[-1] + 1) * interval)


def _pressed_s(
    fired: FiredShot,
    traces: Mapping[str, FloatArray],
    fronts: Mapping[str, Front],
    arrivals: Mapping[str, list[tuple[float, Way, bool]]],
    origin_s: float,
    bar: Bar,
) -> float:
    """How long the pulse stands above half its peak at the first station of the transmitted bar: bars are pressed."""
    interval = fired.record.sample_interval_s
    station = next((name for name in traces if name.startswith("transmitted")), next(iter(traces)))
    start = int((origin_s + arrivals[station][0][0]) / interval)
    stop = start + int((arrivals[station][1][0] - arrivals[station][0][0]) / interval)
    level = moving_mean(traces[station][start:stop], round(_LEVEL_RADII * bar.radius_time_s / interval))
    standing = np.flatnonzero(level > 0.5 * fronts[station].peak)
    return float(standing[-1] * interval) if standing.size else 0.0


def _overlapping(
    fired: FiredShot,
    rig: Rig,
    arrivals: Mapping[str, list[tuple[float, Way, bool]]],
    needed_s: float,
    end_s: float,
    speeds: Mapping[str, float],
) -> InputError:
    """Why no two passages can be told apart, and what would do."""
    side = fired.shot.bar
    bar, half = bar_of(rig, side), needed_s * speeds[side] / 2
    apart = any(coming[1][0] - coming[0][0] >= needed_s and coming[0][2] for coming in arrivals.values())
    if apart:
        return refuse(
            fired,
            f"only one passage of the pulse is in the record, which ends {end_s * 1e6:.0f} us after the impact",
            "Lengthen the record at the scope; four passages are good",
        )
    return refuse(
        fired,
        f"the pulse needs {needed_s * 1e6:.0f} us to go by, and before that the next one comes: on the {side} bar of "
        f"{float(bar.length_m):.4g} m no two passages can be told apart",
        f"Put the station at least {half:.2f} m from both ends, on a bar of at least {2 * half:.2f} m, or "
        "use a striker that gives a shorter pulse",
    )
