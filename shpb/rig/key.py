"""What a key of a rig file, a shot sheet or a shot list is: unit, range, meaning, example.

Reading, checking, the suggestions for misspelt keys, the commented templates and the tables of
``calibration/README.md`` all follow from the :class:`Key` and :class:`Table` values that
:mod:`shpb.rig.keys` and :mod:`shpb.rig.setting_keys` declare.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from enum import StrEnum


class Kind(StrEnum):
    """What may stand behind the equals sign; the words are those of the documentation."""

    QUANTITY = "number or { value, u, origin }"
    NUMBER = "number"
    INTEGER = "whole number"
    SWITCH = "true or false"
    TEXT = "text"
    IDENTIFIER = "short text"  # becomes part of a file name
    DATE = "date"
    CHOICE = "choice"
    CHOICES = "list of choices"
    FILE = "file name"
    FILES = "file name or list of file names"
    SPAN = "[start, end]"
    NUMBERS = "list of numbers"
    NUMBER_OR_NUMBERS = "number or list of numbers"
    TEXTS = "list of texts"
    CHANNELS = "channel name or position, or a list of two"
    LIMITS = "number or [low, high]"


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit of people's files: ``SI = value * factor + offset``."""

    suffix: str  # as it ends the key: "mm"; empty for a dimensionless key
    symbol: str  # as it stands in a sentence: "mm", "kg/m³"
    factor: float = 1.0
    offset: float = 0.0

    def to_si(self, value: float) -> float:
        """Return ``value`` of this unit in SI."""
        return value * self.factor + self.offset

    def from_si(self, value: float) -> float:
        """Return the SI ``value`` in this unit."""
        return (value - self.offset) / self.factor


PLAIN = Unit("", "")


@dataclass(frozen=True, slots=True, kw_only=True)
class Key:
    """One key, in every unit that it may be written in.

    ``low`` and ``high`` stand in the first of ``units``. ``slips`` are units that are never
    accepted, but recognised when a number only makes sense in one of them.
    """

    stem: str
    kind: Kind
    meaning: str
    example: str  # as it would be typed in a TOML file
    units: tuple[Unit, ...] = (PLAIN,)
    low: float = -math.inf
    high: float = math.inf
    required: bool = False
    choices: tuple[str, ...] = ()
    aliases: tuple[tuple[str, str], ...] = ()  # accepted spellings of a choice: (written, meant)
    slips: tuple[Unit, ...] = ()
    default: str = ""  # in words, what holds when the key is left out
    automatic: bool = False  # the text "automatic" sets it back to the program's own choice
    mend: str = ""
    field: str = ""  # of the dataclass it fills, where a rule derives it
    column: str = ""  # in a shot list, where the name of the key alone would be too short

    @property
    def name(self) -> str:
        """The key as documented, in its first unit."""
        return self.written(self.units[0])

    def written(self, unit: Unit) -> str:
        """The key as written in ``unit``."""
        return f"{self.stem}_{unit.suffix}" if unit.suffix else self.stem

    def names(self) -> Iterator[tuple[str, Unit]]:
        """Every accepted name of the key with its unit."""
        return ((self.written(unit), unit) for unit in self.units)

    def columns(self, unit: Unit) -> tuple[str, ...]:
        """Column names of a shot list in ``unit``: two for a span, one otherwise."""
        stem = self.column or self.stem
        ends = ("start", "end") if self.kind is Kind.SPAN else ("",)
        return tuple("_".join(part for part in (stem, end, unit.suffix) if part) for end in ends)

    def bounds(self, unit: Unit) -> tuple[float, float]:
        """Lowest and highest value in ``unit``."""
        first = self.units[0]
        if unit == first:
            return self.low, self.high
        return (
            _tidy(unit.from_si(first.to_si(self.low))),
            _tidy(unit.from_si(first.to_si(self.high))),
        )

    def range_text(self, unit: Unit) -> str:
        """The range in words, empty where there is none: ``0.5 to 200 mm``."""
        low, high = self.bounds(unit)
        ends = [f"{'at least ' if math.isinf(high) else ''}{low:.12g}" if math.isfinite(low) else ""]
        ends.append(f"{'up to ' if math.isinf(low) else ''}{high:.12g}" if math.isfinite(high) else "")
        text = " to ".join(end for end in ends if end)
        return f"{text} {unit.symbol}".strip() if text else ""

    def expected(self, unit: Unit) -> str:
        """What is expected, in words with unit and range."""
        if self.kind is Kind.CHOICE:
            return "one of " + ", ".join(f'"{choice}"' for choice in self.choices)
        if self.kind is Kind.CHOICES:
            return "a list of any of " + ", ".join(f'"{choice}"' for choice in self.choices)
        words = _EXPECTED[self.kind]
        if unit.symbol:
            words += f" in {unit.symbol}"
        limits = self.range_text(unit)
        words = f"{words}, {limits}" if limits else words
        return f'{words}, or "automatic"' if self.automatic else words


@dataclass(frozen=True, slots=True, kw_only=True)
class OneOf:
    """Keys of which at least one, or exactly one, must stand."""

    stems: tuple[str, ...]
    exactly: bool
    mend: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """One [table] of a file."""

    name: str
    meaning: str
    keys: tuple[Key, ...]
    required: bool = True
    one_of: tuple[OneOf, ...] = ()
    in_forms: bool = True  # False for what only few need: the documentation has it alone
    repeated: bool = False  # written [[name]], once for each of several

    def lookup(self) -> dict[str, tuple[Key, Unit]]:
        """Every accepted key name with its key and unit."""
        return {name: (key, unit) for key in self.keys for name, unit in key.names()}

    def group_of(self, key: Key) -> OneOf | None:
        """The one-of group that ``key`` belongs to, if any."""
        return next((group for group in self.one_of if key.stem in group.stems), None)


_EXPECTED = {
    Kind.QUANTITY: "a number",
    Kind.NUMBER: "a number",
    Kind.INTEGER: "a whole number",
    Kind.SWITCH: "true or false",
    Kind.TEXT: "text",
    Kind.IDENTIFIER: 'text of 1 to 100 characters without / \\ : * ? " < > |',
    Kind.DATE: "a date such as 2024-05-17",
    Kind.CHOICE: "",
    Kind.CHOICES: "",
    Kind.FILE: "a file name",
    Kind.FILES: "a file name, or a list of file names",
    Kind.SPAN: "a list [start, end] of two rising numbers",
    Kind.NUMBERS: "a list of numbers",
    Kind.NUMBER_OR_NUMBERS: "a number, or a list with one number a channel",
    Kind.TEXTS: "a list of texts",
    Kind.CHANNELS: "a channel name, its position from 1, or a list of two of these",
    Kind.LIMITS: "a number, or a rising list [low, high],",
}


def _tidy(value: float) -> float:
    # 0.5 mm in metres is 0.0005, not 0.0005000000000000001.
    return float(f"{value:.9g}")
