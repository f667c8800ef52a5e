"""How a shot is reduced: every choice in one frozen value, stored with the result."""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass
from enum import StrEnum

from shpb.errors import InputError
from shpb.limits import USUAL, Limits


class Dispersion(StrEnum):
    """What is done about dispersion between gauge and specimen."""

    NONE = "none"  # rigid time shift at c0
    PHASE = "phase"  # Pochhammer-Chree first mode, phase only
    FULL = "full"  # phase, and surface strain to mean force and velocity


class Alignment(StrEnum):
    """Where the pulses start on the common clock."""

    PHYSICAL = "physical"  # travel times from distances and wave speed alone
    FEET = "feet"  # reflected and transmitted feet laid on the incident foot


class Waves(StrEnum):
    """How the waves of a bar are told apart."""

    WINDOWS = "windows"  # in time: each passes the gauge alone
    STATIONS = "stations"  # by two or more gauge stations, though they lie on each other


class Analysis(StrEnum):
    """Which curve is put forward as the result; the others stand beside it."""

    ONE_WAVE = "one-wave"
    THREE_WAVE = "three-wave"


class Correction(StrEnum):
    """What is known to disturb a curve, and can be taken out of it."""

    INDENTATION = "indentation"  # bar faces give way under the specimen
    INERTIA = "inertia"  # radial and axial inertia of the specimen
    FRICTION = "friction"  # between specimen and bar faces
    GAUGE_RISE = "gauge-rise"  # gauge length and amplifier round the fronts
    BAR_TEMPERATURE = "bar-temperature"  # a hot or cold specimen changes the bars' ends
    MISMATCH = "bar-mismatch"  # two bars of different impedance
    HEATING = "heating"  # plastic work heats the specimen


Span = tuple[float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """Choices of the reduction; the defaults serve a metal specimen on metal bars.

    Times of windows and feet are on the record's own clock [s]; None leaves them to the program.

    Examples
    --------
    >>> import shpb
    >>> settings = shpb.Settings(cutoff_hz=100e3)
    >>> settings.replaced(alignment=Alignment.FEET).cutoff_hz
    100000.0
    """

    waves: Waves = Waves.WINDOWS
    dispersion: Dispersion = Dispersion.PHASE
    alignment: Alignment = Alignment.PHYSICAL
    # Cut-off of the one low-pass for all pulses, as f a/c0 of the thicker bar. Beyond 0.25 the
    # first mode's surface strain fades and changes sign (Davies 1948), so nothing there is force.
    cutoff_fa_c0: float = 0.234
    cutoff_hz: float | None = None  # overrides cutoff_fa_c0
    incident_window_s: Span | None = None
    reflected_window_s: Span | None = None
    transmitted_window_s: Span | None = None
    incident_foot_s: float | None = None
    reflected_foot_s: float | None = None
    transmitted_foot_s: float | None = None
    analysis: Analysis = Analysis.ONE_WAVE  # the curve put forward; all are stored
    # All are computed and reported; these are applied too.
    corrections: tuple[Correction, ...] = ()
    # The formulas for equal bars whatever the bars are: without the term that two different ones need.
    equal_bars: bool = False
    # Relative error that each pulse has on its own (gauge linearity, bending, rest of dispersion): what
    # keeps F_in, a difference of two large pulses, from being better known. Common practice: 0.5 %.
    pulse_error: float = 0.005
    flow_strains: tuple[float, ...] = (0.02, 0.05, 0.10, 0.15, 0.20)
    limits: Limits = USUAL  # of the checks

    def __post_init__(self) -> None:
        object.__setattr__(self, "corrections", _corrections(self.corrections))
        if not isinstance(self.limits, Limits):
            raise InputError(
                f"found {self.limits!r}", where="settings.limits", mend="Give a Limits value or leave it out"
            )
        self.limits.require_order()
        kinds = {"waves": Waves, "dispersion": Dispersion, "alignment": Alignment, "analysis": Analysis}
        for name, kind in kinds.items():
            try:
                object.__setattr__(self, name, kind(getattr(self, name)))
            except ValueError:
                raise InputError(
                    f"found {getattr(self, name)!r}",
                    where=f"settings.{name}",
                    mend=f"Give one of {', '.join(kind)}",
                ) from None
        for field in dataclasses.fields(self):
            value = getattr(self, field.name)
            numbers = value if isinstance(value, tuple) else (value,)
            for number in numbers:
                _require_usable(field.name, number)
        if not 0.02 <= self.cutoff_fa_c0 <= 1.0:
            raise InputError(
                f"cut-off f a/c0 is {self.cutoff_fa_c0:g}",
                where="settings.cutoff_fa_c0",
                mend="Give 0.02 to 1.0; 0.23 is usual",
            )
        for name in ("incident_window_s", "reflected_window_s", "transmitted_window_s"):
            span = getattr(self, name)
            if span is not None and not span[0] < span[1]:
                raise InputError(
                    f"window is {span[0]:g} to {span[1]:g} s",
                    where=f"settings.{name}",
                    mend="Give the start before the end",
                )

    def switched_on(self, correction: Correction) -> bool:
        """Whether a correction is asked for; that for unequal bars is, unless ``equal_bars`` says otherwise."""
        if correction is Correction.MISMATCH:
            return not self.equal_bars
        return correction in self.corrections

    def replaced(self, **changes: object) -> Settings:
        """Return a copy with the given fields changed."""
        return dataclasses.replace(self, **changes)  # type: ignore[arg-type]


def _corrections(words: object) -> tuple[Correction, ...]:
    """The corrections as members of their enumeration, each once."""
    try:
        chosen = tuple(Correction(word) for word in words)  # type: ignore[attr-defined]
    except (TypeError, ValueError):
        chosen = None
    if chosen is None or isinstance(words, str) or len(set(chosen)) < len(chosen):
        raise InputError(
            f"found {words!r}",
            where="settings.corrections",
            mend=f"Give each at most once, in a list: {', '.join(Correction)}",
        )
    return chosen


def _require_usable(name: str, number: object) -> None:
    """Refuse NaN and infinity everywhere, and zero or less where only a positive number means anything."""
    if not isinstance(number, int | float) or isinstance(number, bool):
        return
    on_the_clock = name.endswith(("_window_s", "_foot_s"))
    if not math.isfinite(number) or (number <= 0 and not on_the_clock):
        mend = "Give a time on the record's clock" if on_the_clock else "Give a positive number"
        raise InputError(f"found {number}", where=f"settings.{name}", mend=mend)


DEFAULT = Settings()
