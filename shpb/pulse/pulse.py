"""The three pulses of a shot at their gauges, as values."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

from shpb.arrays import FloatArray
from shpb.pulse.arrivals import Arrivals
from shpb.pulse.foot import Foot
from shpb.pulse.separated import SeparatedBar
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
        Standard deviation of one sample of strain; of a wave told apart by stations, where it begins.
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
    """The three pulses of a shot at their gauges, and what was seen on the way.

    Where stations tell the waves of a bar apart (``separated``), the pulses are whole waves at the bar's first station
    and may lie on each other in time; ``returning`` is then the wave that comes back in the transmitted bar.
    """

    incident: Pulse
    reflected: Pulse
    transmitted: Pulse
    arrivals: Arrivals
    sample_interval_s: float
    # Level of the incident pulse's tail where the reflected pulse begins, share of its peak.
    tail_at_reflection: float
    remarks: tuple[str, ...] = field(default=())
    returning: Pulse | None = None
    separated: tuple[SeparatedBar, ...] = ()

    def __iter__(self) -> Iterator[Pulse]:
        """Incident, reflected, transmitted."""
        yield from (self.incident, self.reflected, self.transmitted)

    def noise_at(self, pulse: Pulse, time_s: float) -> float:
        """Noise of a pulse at a time on the record's clock [1]: it grows in a wave that stations have told apart."""
        bar = self.waves(pulse.name)
        if bar is None:
            return pulse.noise
        at = bar.begin + round((time_s - bar.begin_s) / self.sample_interval_s)
        return bar.noise_at(at, "right" if pulse.name in ("incident", "transmitted") else "left")

    def separated_bar(self, side: str) -> SeparatedBar | None:
        """The separated waves of the "incident" or the "transmitted" bar; None where windows told them apart."""
        return next((bar for bar in self.separated if bar.side == side), None)

    def waves(self, name: str) -> SeparatedBar | None:
        """The separated bar that a pulse of this name comes from; None where a window cut it out."""
        return self.separated_bar("incident" if name in ("incident", "reflected") else "transmitted")
