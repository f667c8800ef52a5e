"""The three pulses of a shot at their gauges, as values."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

from shpb.arrays import FloatArray
from shpb.pulse.arrivals import Arrivals
from shpb.pulse.foot import Foot
from shpb.pulse.zero_line import ZeroLine
from shpb.settings import Span


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Pulse:
    """One pulse in its window, zero line removed, ends tapered to zero.

    Attributes
    ----------
    name : str
        incident, reflected or transmitted.
    strain : float array, shape (samples of the window,)
        Strain at the gauge [1], positive under the loading pulse.
    start_s : float
        Time of the first sample on the record's clock [s].
    window_s : (float, float)
        The window used [s].
    automatic_window_s : (float, float)
        The window the program would have set [s].
    foot : Foot or None
        The onset, None where no pulse stands clear of the noise.
    automatic_foot : Foot or None
        The onset the program picked, where the sheet overrides it.
    zero : ZeroLine
        The line that was removed.
    noise : float
        Standard deviation of one sample of strain.
    level_at_start, u_level_at_start : float
        Level where the window begins, share of the pulse's peak: not zero if the pulse came sooner.
    """

    name: str
    strain: FloatArray
    start_s: float
    window_s: Span
    automatic_window_s: Span
    foot: Foot | None
    automatic_foot: Foot | None
    zero: ZeroLine
    noise: float
    level_at_start: float = 0.0
    u_level_at_start: float = 0.0

    @property
    def foot_by_hand(self) -> bool:
        """Whether the sheet set the foot."""
        return self.foot is not None and self.foot is not self.automatic_foot

    @property
    def set_by_hand(self) -> bool:
        """Whether the sheet set the window or the foot."""
        return self.window_s != self.automatic_window_s or self.foot_by_hand


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Pulses:
    """The three pulses of a shot at their gauges, and what was seen on the way."""

    incident: Pulse
    reflected: Pulse
    transmitted: Pulse
    arrivals: Arrivals
    sample_interval_s: float
    # Level of the incident pulse's tail where the reflected pulse begins, share of its peak.
    tail_at_reflection: float
    remarks: tuple[str, ...] = field(default=())

    def __iter__(self) -> Iterator[Pulse]:
        """Incident, reflected, transmitted."""
        yield from (self.incident, self.reflected, self.transmitted)
