"""The keys of [settings] and [limits], derived from the fields of ``Settings`` and ``Limits``.

A new field of :class:`shpb.settings.Settings` becomes a key by itself: its type and the unit at the end
of its name decide how people write it (``incident_window_s`` becomes ``incident_window_us``, a pair). Only
its meaning, an example and its range are stated here; a test holds the two together. A field of
:class:`shpb.limits.Limits` states these itself.
"""

from __future__ import annotations

import dataclasses
import enum
import math
import types
import typing
from dataclasses import dataclass

from shpb.limits import LIMIT_FACTS, Limits
from shpb.rig.key import PLAIN, Key, Kind, Unit
from shpb.settings import Settings


@dataclass(frozen=True, slots=True)
class Fact:
    """What the name and type of a field cannot tell."""

    meaning: str
    example: str = ""  # in people's units; empty: the default stands as example
    low: float = -math.inf  # in the first unit
    high: float = math.inf
    column: str = ""  # in a shot list, where the name alone would be too short


_WINDOW = "Window of the {} pulse on the record's clock, in place of the program's own"
_FOOT = "Foot of the {} pulse on the record's clock, in place of the program's own"

FACTS: dict[str, Fact] = {
    "waves": Fact(
        "How the waves of a bar are told apart: each in its window, or by two or more gauge stations on the bar, "
        "for pulses longer than the gauge's place allows"
    ),
    "dispersion": Fact(
        "What is done about dispersion between gauge and specimen face: a rigid shift, the phase of the "
        "first mode, or phase and amplitude"
    ),
    "alignment": Fact(
        "Where the pulses start: by distances and wave speed alone, or with their feet laid on each other"
    ),
    "cutoff_fa_c0": Fact(
        "Cut-off of the one low-pass for all pulses, as frequency x radius / wave speed of the thicker bar",
        low=0.02,
        high=1.0,
    ),
    "cutoff_hz": Fact("The same cut-off as a frequency; rules over cutoff_fa_c0", "120", 1, 5000),
    "incident_window_s": Fact(_WINDOW.format("incident"), "[-20.0, 160.0]"),
    "reflected_window_s": Fact(_WINDOW.format("reflected"), "[345.0, 525.0]"),
    "transmitted_window_s": Fact(_WINDOW.format("transmitted"), "[285.0, 465.0]"),
    "incident_foot_s": Fact(_FOOT.format("incident"), "0.4"),
    "reflected_foot_s": Fact(_FOOT.format("reflected"), "367.4"),
    "transmitted_foot_s": Fact(_FOOT.format("transmitted"), "307.1"),
    "analysis": Fact("Which curve is put forward as the result; all are stored"),
    "corrections": Fact(
        "Corrections that are applied; all are computed and reported. That for unequal bars is in anyway: see "
        "equal_bars"
    ),
    "equal_bars": Fact(
        "Take the one- and two-wave formulas for equal bars whatever the bars are, without the term that two "
        "different ones need"
    ),
    "pulse_error": Fact(
        "Relative error that each pulse has on its own; sets the floor below which R(t) says nothing",
        low=1e-6,
        high=0.5,
    ),
    "flow_strains": Fact("Plastic strains at which the flow stress is reported", low=1e-5, high=5),
}

_KHZ, _HZ = Unit("kHz", "kHz", 1e3), Unit("Hz", "Hz")
# Longest suffix first: a speed ends in _m_s and is no time. The first unit of each is the documented one.
_SUFFIXES: tuple[tuple[str, tuple[Unit, ...]], ...] = (
    ("_per_s", (Unit("per_s", "1/s"),)),
    ("_m_s", (Unit("m_s", "m/s"),)),
    ("_kg_m3", (Unit("kg_m3", "kg/m³"),)),
    ("_pa", (Unit("MPa", "MPa", 1e6), Unit("GPa", "GPa", 1e9))),
    ("_hz", (_KHZ, _HZ)),
    ("_s", (Unit("us", "µs", 1e-6), Unit("s", "s"))),
    ("_m", (Unit("mm", "mm", 1e-3), Unit("m", "m"))),
    ("_k", (Unit("K", "K"),)),
    ("_v", (Unit("V", "V"), Unit("mV", "mV", 1e-3))),
)


def setting_key(name: str, hint: object, default: object, fact: Fact | None = None) -> Key:
    """Return the key by which people set the field ``name`` of type ``hint`` and value ``default``.

    ``fact`` tells its meaning and range; without it they are looked up in ``FACTS``.

    Raises
    ------
    TypeError
        If no rule covers the field's type; the rule then has to be added here.
    """
    kind, choices, automatic = _kind(name, hint)
    fact = fact or FACTS.get(name, Fact(name.replace("_", " ").capitalize()))
    stem, units = _unit(name, default, kind)
    return Key(
        stem=stem,
        kind=kind,
        meaning=fact.meaning,
        example=fact.example or _example(default, kind, units[0]),
        units=units,
        low=fact.low,
        high=fact.high,
        choices=choices,
        default="the program's own choice" if default is None else _words(default, units[0]),
        automatic=automatic,
        field=name,
        column=fact.column and f"{fact.column}{stem}",
    )


def _kind(name: str, hint: object) -> tuple[Kind, tuple[str, ...], bool]:
    """Kind, choices, and whether None stands for the program's own choice."""
    parts = typing.get_args(hint) if isinstance(hint, types.UnionType) else (hint,)
    plain = [part for part in parts if part is not type(None)]
    optional = len(plain) < len(parts)
    if len(plain) == 1:
        (one,) = plain
        simple = {float: Kind.NUMBER, int: Kind.INTEGER, bool: Kind.SWITCH, str: Kind.TEXT}
        if isinstance(one, type) and issubclass(one, enum.StrEnum):
            return Kind.CHOICE, tuple(one), optional
        if isinstance(one, type) and one in simple:
            return simple[one], (), optional
        items = typing.get_args(one) if typing.get_origin(one) is tuple else ()
        if items[1:] == (...,) and isinstance(items[0], type) and issubclass(items[0], enum.StrEnum):
            return Kind.CHOICES, tuple(items[0]), optional
        lists = {
            (float, float): Kind.SPAN,
            (float, ...): Kind.NUMBERS,
            (str, ...): Kind.TEXTS,
        }
        if typing.get_origin(one) is tuple and typing.get_args(one) in lists:
            return lists[typing.get_args(one)], (), optional
    raise TypeError(f"Settings.{name}: no rule turns {hint} into a key of a file")


def _unit(name: str, default: object, kind: Kind) -> tuple[str, tuple[Unit, ...]]:
    if kind in {Kind.SWITCH, Kind.CHOICE, Kind.CHOICES, Kind.TEXT, Kind.TEXTS, Kind.INTEGER}:
        return name, (PLAIN,)
    for suffix, units in _SUFFIXES:
        if name.endswith(suffix):
            # The mains is stated in Hz, a cut-off in kHz: the default tells which reads better.
            small = suffix == "_hz" and isinstance(default, float) and default < 1000
            return name.removesuffix(suffix), (_HZ,) if small else units
    return name, (PLAIN,)


def _words(default: object, unit: Unit) -> str:
    if isinstance(default, bool):
        return str(default).lower()
    if isinstance(default, int | float):
        return f"{unit.from_si(default):.6g} {unit.symbol}".strip()
    if isinstance(default, tuple):
        return "none" if not default else ", ".join(_words(item, unit) for item in default)
    return str(default)


def _example(default: object, kind: Kind, unit: Unit) -> str:
    """The default as it would be typed, or something of the right shape where it is None."""
    if kind is Kind.SPAN and default is None:
        return "[100.0, 250.0]"
    if default is None:
        return {Kind.TEXT: '"text"', Kind.TEXTS: '["text"]', Kind.NUMBERS: "[1.0]"}.get(kind, "1")
    if isinstance(default, tuple):
        return "[" + ", ".join(_example(item, kind, unit) for item in default) + "]"
    return f'"{default}"' if isinstance(default, str) else _words(default, Unit(unit.suffix, "", unit.factor))


def _setting_keys() -> tuple[Key, ...]:
    hints, defaults = typing.get_type_hints(Settings), Settings()
    names = [field.name for field in dataclasses.fields(Settings) if field.name != "limits"]
    return tuple(setting_key(name, hints[name], getattr(defaults, name)) for name in names)


def _limit_keys() -> tuple[Key, ...]:
    hints, usual = typing.get_type_hints(Limits), Limits()
    return tuple(_limit_key(name, hints[name], getattr(usual, name)) for name in LIMIT_FACTS)


def _limit_key(name: str, hint: object, usual: float) -> Key:
    """The key of a limit; its range is stated in SI, a key's in the unit that people write."""
    stated = LIMIT_FACTS[name]
    unit = setting_key(name, hint, usual).units[0]
    low, high = (float(f"{unit.from_si(end):.9g}") for end in (stated.low, stated.high))
    meaning = f"{stated.meaning} ({stated.source})"
    return setting_key(name, hint, usual, Fact(meaning, low=low, high=high, column="limit_"))


SETTING_KEYS = _setting_keys()
LIMIT_KEYS = _limit_keys()
