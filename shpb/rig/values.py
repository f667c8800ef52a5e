"""One value of a file: from what stands there to the SI value that the program computes with."""

from __future__ import annotations

import datetime
import math
from collections.abc import Callable, Mapping
from typing import Any

from shpb.quantity import Quantity
from shpb.rig.key import Key, Kind, Unit
from shpb.rig.mistakes import nearest, shown

_IN_QUANTITY = ("value", "u", "u_percent", "origin")
_FORBIDDEN_IN_NAMES = '/\\:*?"<>|'


class Unreadable(Exception):  # noqa: N818  -- told as a Mistake, never seen by users
    """A value that cannot be used: what was found, what was expected, the mend."""

    def __init__(self, found: str, expected: str, mend: str = "", sub: str = "") -> None:
        super().__init__(found, expected, mend, sub)
        self.found, self.expected, self.mend, self.sub = found, expected, mend, sub


def value_in_si(value: object, key: Key, unit: Unit) -> Any:
    """Return the checked value of ``key`` in SI: a Quantity, a float, a text, a tuple ...

    Raises
    ------
    Unreadable
        If the value has the wrong type or lies outside the key's range.
    """
    if key.automatic and isinstance(value, str) and value.strip().casefold() == "automatic":
        return None
    return _READERS[key.kind](value, key, unit)


def _number(value: object, key: Key, unit: Unit) -> float:
    """A finite number, in the unit of the key, inside its range."""
    expected = key.expected(unit)
    if isinstance(value, bool) or not isinstance(value, int | float):
        mend = ""
        if isinstance(value, str):
            mend = "Write the number without quotes, with a decimal point; the unit is the end of the key"
        raise Unreadable(shown(value), expected, mend)
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise Unreadable(shown(value), expected, key.mend)
    low, high = key.bounds(unit)
    if not low <= number <= high:
        raise Unreadable(f"{shown(value)} {unit.symbol}".strip(), expected, _unit_mend(number, key, unit))
    return number


def _unit_mend(number: float, key: Key, unit: Unit) -> str:
    """Name the unit in which the number would make sense, or else the key's own mend."""
    first = key.units[0]
    low, high = key.bounds(first)
    for slip in (*key.units, *key.slips):
        if slip.symbol == unit.symbol or slip.offset != unit.offset:
            continue
        meant = first.from_si(slip.to_si(number))
        if meant != 0 and low <= meant <= high:
            return f"If it is {number:.6g} {slip.symbol}, write {key.name} = {meant:.6g}"
    return key.mend


def _plain(value: object, key: Key, unit: Unit) -> float:
    return unit.to_si(_number(value, key, unit))


def _quantity(value: object, key: Key, unit: Unit) -> Quantity:
    if not isinstance(value, Mapping):
        return Quantity(_number(value, key, unit)).scaled(unit.factor, unit.offset)
    for name in value:
        if name not in _IN_QUANTITY:
            guess = nearest(name, _IN_QUANTITY)
            mend = f"Did you mean {guess}?" if guess else ""
            raise Unreadable("an unknown key", "value, u, u_percent or origin", mend, sub=name)
    if "value" not in value:
        raise Unreadable("no value", "{ value = ..., u = ..., origin = ... }", "Add the value", sub="value")
    number = _number(value["value"], key, unit)
    origin = value.get("origin", "")
    if not isinstance(origin, str) or not _printable(origin):
        raise Unreadable(shown(origin), "text: where the number comes from", sub="origin")
    u = _uncertainty(value, number, key, unit)
    return Quantity(number, u, origin.strip()).scaled(unit.factor, unit.offset)


def _uncertainty(value: Mapping[str, object], number: float, key: Key, unit: Unit) -> float | None:
    if "u" in value and "u_percent" in value:
        raise Unreadable("both u and u_percent", "one of them", "Keep the one you trust", sub="u")
    name = next((name for name in ("u", "u_percent") if name in value), "")
    if not name:
        return None
    if name == "u_percent" and unit.offset:
        raise Unreadable(
            "a percentage of a temperature", f"u in {unit.symbol}", "Write u in place of it", sub=name
        )
    symbol = "%" if name == "u_percent" else unit.symbol
    expected = f"a number in {symbol} from 0" if symbol else "a number from 0"
    given = value[name]
    # 10**400 is a whole number to TOML, and too large to become a float.
    if isinstance(given, bool) or not isinstance(given, int | float) or not 0 <= given < 1e300:
        raise Unreadable(shown(given), expected, "Give the standard uncertainty as a plain number", sub=name)
    u = abs(number) * given / 100 if name == "u_percent" else float(given)
    if key.low > 0 and not unit.offset and u > abs(number) / 2:
        raise Unreadable(
            f"{u:.6g} {unit.symbol}".strip() + f" on a value of {number:.6g}",
            "a standard uncertainty below half the value",
            "State u in the unit of the key, or u_percent",
            sub=name,
        )
    return u


def _integer(value: object, key: Key, unit: Unit) -> int:
    number = _number(value, key, unit)
    if not number.is_integer():
        raise Unreadable(shown(value), key.expected(unit))
    return int(number)


def _switch(value: object, key: Key, unit: Unit) -> bool:
    if not isinstance(value, bool):
        raise Unreadable(shown(value), key.expected(unit), "Write true or false without quotes")
    return value


def _printable(text: str) -> bool:
    return all(c.isprintable() or c in "\n\t" for c in text)


def _text(value: object, key: Key, unit: Unit) -> str:
    if not isinstance(value, str):
        raise Unreadable(shown(value), key.expected(unit), 'Put it in "quotes"')
    if not _printable(value):
        raise Unreadable(shown(value), "text without control characters", "Type the text again")
    if key.required and not value.strip():
        raise Unreadable("empty text", key.expected(unit), f"Write for example {key.name} = {key.example}")
    return value.strip()


def _identifier(value: object, key: Key, unit: Unit) -> str:
    # A spreadsheet user numbers shots 1, 2, 3 and so writes id = 17.
    if isinstance(value, int) and not isinstance(value, bool) and 0 <= value < 10**12:
        value = str(value)
    text = _text(value, key, unit)
    bad = any(c in _FORBIDDEN_IN_NAMES or not c.isprintable() for c in text)
    if bad or len(text) > 100 or text.startswith(".") or text.endswith("."):
        raise Unreadable(
            shown(text), key.expected(unit), "It becomes part of a file name; use letters and digits"
        )
    return text


def _date(value: object, key: Key, unit: Unit) -> str:
    if isinstance(value, datetime.date):  # a datetime is one too
        return value.isoformat()
    if isinstance(value, str) and value.strip():
        return _text(value, key, unit)
    raise Unreadable(shown(value), key.expected(unit), "Write it as year-month-day, 2024-05-17")


def _choice(value: object, key: Key, unit: Unit) -> str:
    if isinstance(value, str):
        meant = dict(key.aliases).get(value, value)
        for choice in key.choices:  # the choice itself: a member of an enumeration stays one
            if choice == meant:
                return choice
    guess = nearest(value, key.choices) if isinstance(value, str) else ""
    mend = f'Did you mean "{guess}"?' if guess else ""
    raise Unreadable(shown(value), key.expected(unit), mend)


def _choices(value: object, key: Key, unit: Unit) -> tuple[str, ...]:
    """Some of the choices, each at most once; a text holds them with commas between, "none" is the empty list."""
    if isinstance(value, str):
        value = [] if value.strip() in {"", "none"} else [part.strip() for part in value.split(",")]
    if not isinstance(value, list | tuple):
        mend = f"Write for example {key.name} = {key.example}; [] for none"
        raise Unreadable(shown(value), key.expected(unit), mend)
    chosen = tuple(_choice(item, key, unit) for item in value)
    for choice in chosen:
        if chosen.count(choice) > 1:
            raise Unreadable(f"{shown(str(choice))} twice", "each at most once", "Remove one of the two")
    return chosen


def _file(value: object, key: Key, unit: Unit) -> str:
    text = _text(value, key, unit)
    if not text or "\n" in text or "\t" in text:
        raise Unreadable(shown(value), key.expected(unit), f"Write for example {key.name} = {key.example}")
    # Whoever copies a path on one system reads it on another.
    return text.replace("\\", "/")


def _listed(value: object, key: Key, unit: Unit, mend: str = "") -> list[object]:
    if not isinstance(value, list | tuple) or not value:
        found = "an empty list" if isinstance(value, list | tuple) else shown(value)
        raise Unreadable(found, key.expected(unit), mend or f"Write for example {key.name} = {key.example}")
    return list(value)


def _files(value: object, key: Key, unit: Unit) -> tuple[str, ...]:
    items = [value] if isinstance(value, str) else _listed(value, key, unit)
    files = tuple(_file(item, key, unit) for item in items)
    if len(set(files)) < len(files):
        raise Unreadable("the same file twice", "each file once", "Name the file of each channel")
    return files


def _texts(value: object, key: Key, unit: Unit) -> tuple[str, ...]:
    texts = tuple(_text(item, key, unit) for item in _listed(value, key, unit))
    if len(set(texts)) < len(texts) or not all(texts):
        raise Unreadable(
            "an empty name or the same name twice", "names that differ", "Give each its own name"
        )
    return texts


def _numbers(value: object, key: Key, unit: Unit) -> tuple[float, ...]:
    return tuple(_plain(item, key, unit) for item in _listed(value, key, unit))


def _number_or_numbers(value: object, key: Key, unit: Unit) -> tuple[float, ...]:
    return _numbers(value if isinstance(value, list | tuple) else [value], key, unit)


def _rising(value: object, key: Key, unit: Unit) -> tuple[float, float]:
    items = _listed(value, key, unit)
    if len(items) != 2:
        raise Unreadable(shown(items), key.expected(unit), "Give two numbers, the lower first")
    low, high = (_plain(item, key, unit) for item in items)
    if not low < high:
        # The numbers as they stand in the file, not in SI.
        found = f"[{shown(items[0])}, {shown(items[1])}]"
        raise Unreadable(found, key.expected(unit), "Give the lower number first")
    return low, high


def _limits(value: object, key: Key, unit: Unit) -> tuple[float, float]:
    if isinstance(value, list | tuple):
        return _rising(value, key, unit)
    half = _plain(value, key, unit)
    if half <= 0:
        raise Unreadable(
            f"{shown(value)} {unit.symbol}",
            key.expected(unit),
            f"Write {key.name} = 5.0 for a range from -5 to +5, or [low, high]",
        )
    return -half, half


def _channels(value: object, key: Key, unit: Unit) -> tuple[str | int, ...]:
    items = list(value) if isinstance(value, list | tuple) else [value]
    if not 1 <= len(items) <= 2:
        raise Unreadable(
            shown(value), key.expected(unit), "Give one channel, or two: one for each side of the bar"
        )
    channels: list[str | int] = []
    for item in items:
        if isinstance(item, str) and item.strip() and _printable(item):
            channels.append(item.strip())
        elif isinstance(item, int) and not isinstance(item, bool) and 1 <= item <= 1000:
            channels.append(item)
        else:
            raise Unreadable(shown(item), key.expected(unit), 'Write for example "CH1", or 1 for the first')
    if len(channels) == 2 and channels[0] == channels[1]:
        raise Unreadable(
            f"{shown(channels[0])} twice", "two different channels", "Name the other side's channel"
        )
    return tuple(channels)


_READERS: dict[Kind, Callable[[Any, Key, Unit], Any]] = {
    Kind.QUANTITY: _quantity,
    Kind.NUMBER: _plain,
    Kind.INTEGER: _integer,
    Kind.SWITCH: _switch,
    Kind.TEXT: _text,
    Kind.IDENTIFIER: _identifier,
    Kind.DATE: _date,
    Kind.CHOICE: _choice,
    Kind.CHOICES: _choices,
    Kind.FILE: _file,
    Kind.FILES: _files,
    Kind.SPAN: _rising,
    Kind.NUMBERS: _numbers,
    Kind.NUMBER_OR_NUMBERS: _number_or_numbers,
    Kind.TEXTS: _texts,
    Kind.CHANNELS: _channels,
    Kind.LIMITS: _limits,
}
