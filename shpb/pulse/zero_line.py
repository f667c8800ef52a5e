"""The zero line under each pulse: from a quiet window before it, with the drift across it.

Hum of 50 or 60 Hz and amplifier drift are straight lines over the fraction of a millisecond that
matters: hum of 1 % of the signal bends by less than 0.005 % of it within 300 microseconds. So each
pulse gets a level from the quiet window next before it and one slope from all quiet windows of
its channel. The slope is held back by what drift is plausible (a normal prior), so that a short
or noisy quiet window cannot tilt a pulse.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, dot
from shpb.pulse.front import white_noise

# Plausible drift of a zero line [share of the peak per second]: 2 % a millisecond, one standard deviation.
PLAUSIBLE_DRIFT_PER_S = 20.0
_LONGEST_QUIET_S = 400e-6  # further back, hum is no longer a straight line
_TREND_SHARE = 0.002  # a quiet window holds no trend above this share of the peak


class QuietWindow(NamedTuple):
    """A stretch of one trace that holds no wave."""

    start: int
    stop: int
    centre: float  # sample
    level: float
    slope: float  # per sample
    noise: float  # standard deviation of one sample about the line
    white: float  # the part of it that is white

    @property
    def unrest(self) -> float:
        """Standard deviation about the line beyond white noise: zero where the window is quiet indeed."""
        return float(np.sqrt(max(self.noise**2 - self.white**2, 0.0)))

    @property
    def samples(self) -> int:
        """Number of samples."""
        return self.stop - self.start

    @property
    def u_level(self) -> float:
        """Standard uncertainty of the level."""
        return float(self.noise / np.sqrt(self.samples))


@dataclass(frozen=True, slots=True)
class ZeroLine:
    """A straight zero line, ``level + slope (sample - centre)``."""

    level: float
    slope: float  # per sample
    centre: float
    u_level: float
    u_slope: float
    quiet: tuple[tuple[int, int], ...]  # windows it was taken from, sample ranges
    unrest: float = 0.0  # standard deviation beyond white noise in the window next before the pulse

    def at(self, start: int, stop: int) -> FloatArray:
        """The line at samples ``start`` to ``stop``."""
        line: FloatArray = self.level + self.slope * (np.arange(float(start), float(stop)) - self.centre)
        return line


def quiet_window(trace: FloatArray, start: int, stop: int) -> QuietWindow | None:
    """Fit a line to a stretch of trace; None where it is too short to say anything."""
    samples = stop - start
    if samples < 8:
        return None
    values = trace[start:stop]
    centre = 0.5 * (start + stop - 1)
    offset: FloatArray = np.arange(float(start), float(stop)) - centre
    level = float(values.mean())
    slope = dot(offset, values - level) / dot(offset, offset)
    residual = values - level - slope * offset
    noise = float(np.sqrt(dot(residual, residual) / (samples - 2)))
    return QuietWindow(start, stop, centre, level, slope, noise, white_noise(values))


def quiet_before_front(trace: FloatArray, front: int, interval_s: float) -> QuietWindow | None:
    """The quiet stretch that ends at ``front``, at most 400 microseconds long."""
    return quiet_window(trace, max(front - int(_LONGEST_QUIET_S / interval_s), 0), front)


def quiet_gap(trace: FloatArray, peak: float, pulse_end: int, front: int) -> QuietWindow | None:
    """The longest stretch before ``front``, after a pulse that ends about ``pulse_end``, without its tail.

    A tail that still decays tilts the stretch; one that shows a trend beyond its own noise and
    0.2 % of the peak is refused, because its level would be taken for zero.
    """
    room = front - pulse_end
    for share in (1.0, 0.8, 0.65, 0.5, 0.4, 0.3, 0.2):
        window = quiet_window(trace, front - int(share * room), front)
        if window is None:
            return None
        rise = abs(window.slope) * window.samples
        u_rise = window.noise * np.sqrt(12.0 / window.samples)
        halves = [quiet_window(trace, window.start, (window.start + front) // 2)]
        halves.append(quiet_window(trace, (window.start + front) // 2, front))
        if any(half is None for half in halves):
            return None
        step = abs(halves[0].level - halves[1].level)  # type: ignore[union-attr]
        allowed = max(_TREND_SHARE * peak, 3.0 * u_rise)
        if rise <= allowed and step <= allowed:
            return window
    return None


def zero_line(
    before: QuietWindow, others: tuple[QuietWindow, ...], peak: float, interval_s: float
) -> ZeroLine:
    """Zero line of the pulse after ``before``, its slope from all quiet windows of the channel.

    The slope is the least-squares slope of one line through all windows, shrunk towards zero by
    the prior on drift: slope = S_xy/(S_xx + noise^2/prior^2).
    """
    # A window that only a jump can explain (a gauge come loose) must not tilt the line.
    steepest = 3 * PLAUSIBLE_DRIFT_PER_S * peak * interval_s
    windows = [before]
    for other in others:
        allowed = steepest * abs(other.centre - before.centre) + 4 * np.hypot(other.u_level, before.u_level)
        if abs(other.level - before.level) <= allowed:
            windows.append(other)
    count = sum(w.samples for w in windows)
    centre = sum(w.samples * w.centre for w in windows) / count
    level = sum(w.samples * w.level for w in windows) / count
    s_xx = s_xy = 0.0
    for w in windows:
        inner = w.samples * (w.samples**2 - 1) / 12
        s_xx += inner + w.samples * (w.centre - centre) ** 2
        s_xy += inner * w.slope + w.samples * (w.centre - centre) * (w.level - level)
    prior = PLAUSIBLE_DRIFT_PER_S * peak * interval_s
    damped = s_xx + (before.noise / prior) ** 2 if prior > 0 else s_xx
    return ZeroLine(
        level=before.level,
        slope=s_xy / damped,
        centre=before.centre,
        u_level=before.u_level,
        u_slope=before.noise / np.sqrt(damped),
        quiet=tuple((w.start, w.stop) for w in windows),
        unrest=before.unrest,
    )
