"""The zero lines of one shot: quiet windows by geometry, and the tail of the incident pulse."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.arrivals import Arrivals
from shpb.pulse.front import UnusableShotError
from shpb.pulse.incident_front import LEAD_RADII
from shpb.pulse.strain import GaugeStrain
from shpb.pulse.zero_line import QuietWindow, ZeroLine, quiet_before_front, quiet_gap, zero_line
from shpb.rig.rig import Rig


@dataclass(frozen=True, slots=True, kw_only=True)
class ShotZeros:
    """Zero lines of the three pulses and what was seen in finding them."""

    incident: ZeroLine
    reflected: ZeroLine
    transmitted: ZeroLine
    incident_noise: float  # standard deviation of one sample of the incident trace
    transmitted_noise: float
    tail_at_reflection: float  # of the incident pulse, share of its peak
    has_gap: bool  # a quiet stretch lies between incident and reflected pulse


def shot_zeros(strain: GaugeStrain, arrivals: Arrivals, rig: Rig) -> ShotZeros:
    """Find the zero line of each pulse.

    Raises
    ------
    UnusableShotError
        If there is no quiet time before a pulse.
    """
    incident, transmitted = strain.incident.axial, strain.transmitted.axial
    lead_i, lead_t = (LEAD_RADII * bar.radius_time_s for bar in (rig.incident_bar, rig.transmitted_bar))
    index, interval = strain.index, strain.sample_interval_s
    front, split = index(arrivals.incident_s), index(arrivals.reflected_s - lead_i)

    before = quiet_or_refuse(incident, index(arrivals.incident_s - lead_i), interval, "incident")
    peak = peak_above(incident, before, front, split)
    settled = _level(incident, split, lead_i / interval)
    gap = None
    # A trace that stands at a quarter of the peak is the pulse itself, not a shifted zero.
    if abs(settled - before.level) < 0.25 * peak:
        end = _end_of_pulse(incident[front:split], settled, max(0.02 * peak, 4 * before.noise))
        gap = quiet_gap(incident, peak, front + end, split)
    zero_i = zero_line(before, () if gap is None else (gap,), peak, interval)
    zero_r = zero_i if gap is None else zero_line(gap, (before,), peak, interval)

    # The transmitted gauge is quiet until anything can have come through the bars.
    before_t = quiet_or_refuse(transmitted, index(arrivals.transmitted_s - lead_t), interval, "transmitted")
    peak_t = peak_above(transmitted, before_t, before_t.stop, index(arrivals.end_reflection_s - lead_t))
    return ShotZeros(
        incident=zero_i,
        reflected=zero_r,
        transmitted=zero_line(before_t, (), peak_t, interval),
        incident_noise=before.noise,
        transmitted_noise=before_t.noise,
        # Against the zero of the gap where there is one: a gauge come loose shifts zero, but leaves no tail.
        tail_at_reflection=(settled - float(zero_r.at(split, split + 1)[0])) / peak,
        has_gap=gap is not None,
    )


def quiet_or_refuse(trace: FloatArray, front: int, interval: float, name: str) -> QuietWindow:
    """The quiet stretch before sample ``front`` of the gauge ``name``.

    Raises
    ------
    UnusableShotError
        If there is none.
    """
    window = quiet_before_front(trace, front, interval)
    if window is None:
        # Little pre-trigger: the last resort is whatever stands before the front.
        window = quiet_before_front(trace, max(front, 16), interval)
    if window is None or window.stop > max(front, 16):
        raise UnusableShotError(
            "there is no quiet time before the pulse",
            where=f"{name} gauge",
            mend="Set the scope to keep at least 100 us before the trigger and fire again",
            check="pre-trigger",
        )
    return window


def peak_above(trace: FloatArray, quiet: QuietWindow, start: int, stop: int) -> float:
    """Greatest distance of a stretch from a quiet window's level, never zero."""
    values = trace[start : max(stop, start + 1)]
    return max(float(np.abs(values - quiet.level).max()), 1e-12)


def _end_of_pulse(pulse: FloatArray, settled: float, threshold: float) -> int:
    """Last sample of a stretch that stands clear of where it settles."""
    above = np.flatnonzero(np.abs(pulse - settled) > threshold)
    return int(above[-1]) if above.size else 0


def _level(trace: FloatArray, stop: int, samples: float) -> float:
    """Mean of the last samples before ``stop``."""
    return float(trace[max(stop - max(int(samples), 1), 0) : stop].mean())
