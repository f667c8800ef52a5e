"""The nine places of a shot that can be moved by hand: start, end and foot of each pulse."""

from __future__ import annotations

from typing import NamedTuple

from shpb.pulse.by_hand import PULSES, setting_of
from shpb.pulse.pulse import Pulse, Pulses
from shpb.settings import Settings

START, END, FOOT = "start", "end", "foot"
LEAST_SAMPLES = 17  # of a window: one more than fewer of which cannot be cut


class Mark(NamedTuple):
    """One place: incident, reflected or transmitted; start, end or foot."""

    pulse: str
    part: str

    @property
    def words(self) -> str:
        """What it is called."""
        return f"{self.pulse} foot" if self.part == FOOT else f"{self.pulse} window, {self.part}"


MARKS = tuple(Mark(pulse, part) for pulse in PULSES for part in (START, FOOT, END))


def pulse_of(pulses: Pulses, name: str) -> Pulse:
    """The pulse of a name."""
    return next(pulse for pulse in pulses if pulse.name == name)


def time_of(mark: Mark, pulses: Pulses) -> float | None:
    """Where a mark stands on the record's clock [s]; None for a foot that was not found."""
    pulse = pulse_of(pulses, mark.pulse)
    if mark.part == FOOT:
        return None if pulse.foot is None else pulse.foot.time_s
    return pulse.window_s[0 if mark.part == START else 1]


def by_hand(mark: Mark, settings: Settings) -> bool:
    """Whether a hand, and not the program, has put a mark where it stands."""
    part = "foot" if mark.part == FOOT else "window"
    return getattr(settings, setting_of(mark.pulse, part)) is not None


def reach(
    mark: Mark, pulses: Pulses, settings: Settings, record_s: tuple[float, float]
) -> tuple[float, float]:
    """Between which times a mark can be put [s]: inside the record, start before end, the foot inside its window."""
    pulse = pulse_of(pulses, mark.pulse)
    start, end = pulse.window_s
    if mark.part == FOOT:
        return start, end
    least = LEAST_SAMPLES * pulses.sample_interval_s
    foot = getattr(settings, setting_of(mark.pulse, "foot"))
    if mark.part == START:
        return record_s[0], min(end - least, end if foot is None else foot)
    return max(start + least, start if foot is None else foot), record_s[1]


def placed(mark: Mark, time_s: float, pulses: Pulses, settings: Settings) -> Settings:
    """The settings with one mark at a time; the other end of its window stays where it stands."""
    if mark.part == FOOT:
        return settings.replaced(**{setting_of(mark.pulse, "foot"): time_s})
    start, end = pulse_of(pulses, mark.pulse).window_s
    window = (time_s, end) if mark.part == START else (start, time_s)
    return settings.replaced(**{setting_of(mark.pulse, "window"): window})
