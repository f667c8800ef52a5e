"""Wave speed from arrivals: foot to foot, and by cross-correlation. Reported beside the phase, never used.

Dispersion rounds every front on its way and strews its high frequencies behind it. Edges so arrive late, and what
cross-correlation calls the travel time is too long: its wave speed is 0.1 to 0.6 % low, the more so the harder the
front. The foot of the tangent comes the earlier the flatter the front has grown, and may err as much to the other side.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.calibrate.bars.passages import MARGIN_RADII, ShotPassages, passages_of
from shpb.calibrate.bars.ways import Passage, bar_of, lengths_of
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.calibrate.struck import refuse
from shpb.pulse.foot import pick_foot
from shpb.rig.rig import Rig


@dataclass(frozen=True, slots=True, kw_only=True)
class ArrivalSpeed:
    """Wave speeds of one shot by arrivals, between its first passage and the last one; None where no foot was found."""

    shot_id: str
    path_m: float
    by_correlation_m_s: float
    by_foot_m_s: float | None


def arrival_wave_speed(fired: FiredShot, rig: Rig) -> ArrivalSpeed:
    """Find the wave speed of a bars-apart shot by arrivals, lengths as stated.

    Parameters
    ----------
    fired : FiredShot
    rig : Rig

    Raises
    ------
    InputError
        As :func:`shpb.calibrate.bars.passages.passages_of`; if the shot is not of bars apart.
    """
    if fired.shot.kind is not ShotKind.BARS_APART:
        raise refuse(fired, "it is not a shot of bars apart", "Give a shot of one bar, free at its other end")
    shot, factor = passages_of(fired, rig)
    lengths, side = lengths_of(rig), fired.shot.bar
    order = sorted(shot.passages, key=lambda one: one.way.length_m(side, lengths))
    first, last = order[0], order[-1]
    path = last.way.length_m(side, lengths) - first.way.length_m(side, lengths)
    about = float(bar_of(rig, side).wave_speed_m_s) * factor
    pieces = [_cut(shot, rig, one, about) for one in (first, last)]
    apart = (pieces[1][1] - pieces[0][1]) * shot.interval_s
    lag = _lag(pieces[0][0], pieces[1][0]) * shot.interval_s
    feet = [
        pick_foot(piece, start * shot.interval_s, shot.interval_s, shot.noise[one.station],
                  0.5 * bar_of(rig, side).radius_time_s, 1)
        for (piece, start), one in zip(pieces, (first, last), strict=True)
    ]  # fmt: skip
    by_foot = None
    if feet[0] is not None and feet[1] is not None:
        by_foot = path / (feet[1].time_s - feet[0].time_s)
    return ArrivalSpeed(
        shot_id=shot.shot_id, path_m=path, by_correlation_m_s=path / (apart + lag), by_foot_m_s=by_foot
    )


def _cut(shot: ShotPassages, rig: Rig, one: Passage, speed_m_s: float) -> tuple[FloatArray, int]:
    """One passage with the sign of the pulse, and the sample that it begins at."""
    side = shot.fired.shot.bar
    margin = 2 * MARGIN_RADII * float(bar_of(rig, side).radius_time_s)
    arrival = shot.origin_s + one.way.length_m(side, lengths_of(rig)) / speed_m_s
    start = max(int((arrival - margin) / shot.interval_s), 0)
    count = int((shot.duration_s + 2 * margin) / shot.interval_s)
    return one.way.sign * shot.traces[one.station][start : start + count], start


def _lag(first: FloatArray, second: FloatArray) -> float:
    """By how many samples the second piece comes later, by a parabola through the top of the correlation."""
    size = 1 << int(np.ceil(np.log2(first.size + second.size)))
    product = np.fft.rfft(second, size) * np.conj(np.fft.rfft(first, size))
    sums = np.roll(np.fft.irfft(product, size), size // 2)
    top = int(np.argmax(sums))
    left, middle, right = sums[top - 1 : top + 2]
    return float(top - size // 2 + 0.5 * (left - right) / (left - 2 * middle + right))
