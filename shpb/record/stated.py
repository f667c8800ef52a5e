"""Facts that a file states about its record: interval, start, length, units, volts per code.

Preambles of text files, attributes of HDF5 files and properties of channels say the same few
things in many wordings. The wordings understood are listed here, once, and compared as whole
phrases: a key that merely contains "interval" is left alone.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass, fields, replace

from shpb.errors import InputError
from shpb.record.units import HERTZ, SECONDS, is_foreign, plain_unit, split_unit


@dataclass(frozen=True, slots=True, kw_only=True)
class Stated:
    """What a file states; None or empty where it says nothing.

    Attributes
    ----------
    interval, start : float or None
        Sample interval, and time of the first sample on the record's clock, in ``interval_unit``
        and ``start_unit`` ("s", or empty if the file gives none).
    pretrigger_samples : float or None
        Samples before time zero, where the file counts them.
    samples : int or None
        Record length, in samples.
    time_unit : str
        Unit of the time column.
    voltage_units : tuple of str
        One for all channels, or one each.
    volts_per_code, code_zero, offset_v : tuple of float
        Voltage = (code - code_zero) volts_per_code + offset_v; one for all channels, or one each.
    full_scale_v : tuple of (float, float)
        Lowest and highest voltage that the digitiser can give; one for all channels, or one each.
    """

    interval: float | None = None
    interval_unit: str = ""
    start: float | None = None
    start_unit: str = ""
    pretrigger_samples: float | None = None
    samples: int | None = None
    time_unit: str = ""
    voltage_units: tuple[str, ...] = ()
    volts_per_code: tuple[float, ...] = ()
    code_zero: tuple[float, ...] = ()
    offset_v: tuple[float, ...] = ()
    full_scale_v: tuple[tuple[float, float], ...] = ()


def _phrases(text: str) -> frozenset[str]:
    return frozenset(phrase.strip() for phrase in text.split("|"))


_INTERVAL = _phrases(
    "sample interval|sampling interval|sample period|sampling period|time step|timestep|time increment|"
    "interval|dt|delta t|delta time|x increment|xincrement|x incr|xincr|x inc|xinc|horizontal interval|"
    "horizontal increment|increment|wf increment|time per sample|time per point|seconds per sample|"
    "seconds per point|sample spacing|clock period|sampleinterval|samplinginterval|time interval"
)
_RATE = _phrases(
    "sample rate|sampling rate|sample frequency|sampling frequency|samples per second|fs|samplerate|"
    "samplingrate|sampling freq|sample freq|clock rate|samples s|acquisition rate|scan rate"
)
_START = _phrases(
    "trigger offset|start time|time start|first sample|first sample time|time of first sample|t0|t start|"
    "start|x zero|xzero|x origin|xorigin|x offset|xoffset|horizontal offset|time offset|record start|"
    "wf start offset|start offset|time of first point|trigger offset time"
)
_PRETRIGGER = _phrases(
    "pretrigger|pre trigger|pretrigger time|pre trigger time|time before trigger|pretrigger samples|"
    "pre trigger samples|pretrigger points|pre trigger points|trigger point|trigger sample|trigger index|"
    "samples before trigger|points before trigger"
)
_SAMPLES = _phrases(
    "record length|samples|sample count|number of samples|number of points|no of samples|no of points|"
    "points|npoints|n points|nsamples|n samples|npts|num points|num samples|points per channel|"
    "samples per channel|memory length|data points|data length|waveform points|record size|rows|"
    "number of rows|samples per record|recordlength"
)
_TIME_UNIT = _phrases(
    "horizontal units|horizontal unit|x units|x unit|time unit|time units|x axis unit|x axis units|"
    "horizontal axis unit|horizontal axis units"
)
_VOLTAGE_UNIT = _phrases(
    "vertical units|vertical unit|y units|y unit|voltage unit|voltage units|unit|units|channel unit|"
    "channel units|amplitude unit|amplitude units|signal unit|signal units|unit string|y axis unit|"
    "y axis units"
)
_VOLTS_PER_CODE = _phrases(
    "volts per code|volt per code|v per code|v code|volts per count|volt per count|v per count|v count|"
    "volts per bit|v per bit|v bit|volts per lsb|v per lsb|v lsb|lsb|y multiplier|y mult|ymult|y increment|"
    "yincrement|vertical increment|code size|volts per digit|bit weight|volts per step|volts code|volts count"
)
_CODE_ZERO = _phrases(
    "code at zero volts|code at 0 v|zero code|code zero|code offset|offset code|y reference|yreference|"
    "y offset codes|code at zero|zero volts code"
)
_OFFSET = _phrases("y zero|yzero|volts at code zero|voltage at code zero|volts at zero code|y origin|yorigin")
_FULL_SCALE = _phrases("full scale|full scale range|input range|vertical range|voltage range|range")

_NUMBER = re.compile(r"[-+]?(?:\d+(?:[.,]\d*)?|[.,]\d+)(?:[eE][-+]?\d+)?")
_AFTER_NUMBER = re.compile(r"$|\s*[^\W\d_]|\s*[(\[\"']|\s+[-+.\d]")
# A key written as one word with its unit: dt_us, sample_rate_hz.
_UNIT_WORDS = {"s": "s", "ms": "ms", "us": "us", "ns": "ns", "hz": "Hz", "khz": "kHz", "mhz": "MHz", "v": "V"}


def _phrase_and_unit(key: str) -> tuple[str, str]:
    """Return ``key`` as a plain phrase in lower case, and the unit that stands in it."""
    key = key.strip().strip("#%;\"'* \t")
    phrase = _phrase(key)
    if phrase in _ALL:
        return phrase, ""
    name, unit = split_unit(key)
    phrase = _phrase(name)
    words = phrase.rsplit(" ", 1)
    if phrase not in _ALL and len(words) == 2 and words[1] in _UNIT_WORDS:
        return words[0], unit or _UNIT_WORDS[words[1]]
    return phrase, unit


def _phrase(key: str) -> str:
    if key.isidentifier():  # sampleInterval
        key = re.sub(r"(?<=[a-z])(?=[A-Z])", " ", key)
    return " ".join(re.sub(r"[\W_]", " ", key.casefold()).split())


_ALL = (
    _INTERVAL | _RATE | _START | _PRETRIGGER | _SAMPLES | _TIME_UNIT | _VOLTAGE_UNIT | _VOLTS_PER_CODE
    | _CODE_ZERO | _OFFSET | _FULL_SCALE
)  # fmt: skip


def is_known_key(key: str) -> bool:
    """Whether ``key`` is one of the wordings understood here."""
    return _phrase_and_unit(key)[0] in _ALL


def _number_and_unit(values: list[str]) -> tuple[float | None, str]:
    """Return the first number among ``values`` and the word behind it."""
    text = " ".join(values)
    match = _NUMBER.search(text)
    # A name with a digit in it (CH1) is no number, nor are a date, a time of day and a percentage.
    if match is None or text[: match.start()].strip(" \"'=:") or not _AFTER_NUMBER.match(text, match.end()):
        return None, ""
    rest = text[match.end() :].split()
    return float(match[0].replace(",", ".")), (rest[0].strip("()[]\"'") if rest else "")


def _numbers(values: list[str], scale: float = 1.0) -> tuple[float, ...]:
    found = (_number_and_unit([value])[0] for value in values)
    return tuple(number * scale for number in found if number is not None)


def _limits(values: list[str]) -> tuple[tuple[float, float], ...]:
    """Return the two ends of each range that is stated with both ends: "-5 V to 5 V", "±5 V"."""
    found = []
    for value in values:
        numbers = [float(match.replace(",", ".")) for match in re.findall(_NUMBER, value)]
        scale = 1e-3 if "mV" in value else 1.0
        if len(numbers) == 1 and re.match(r"\s*(±|\+\s*/\s*-)", value):
            found.append((-abs(numbers[0]) * scale, abs(numbers[0]) * scale))
        elif len(numbers) == 2 and numbers[0] < 0 < numbers[1]:
            found.append((numbers[0] * scale, numbers[1] * scale))
    return tuple(found)


def facts_from(key: str, values: Iterable[object]) -> Stated:
    """Read one key with its values; an empty Stated if the key is none that is understood here.

    >>> facts_from("Sampling rate", ["5 MS/s"]).interval
    2e-07
    """
    phrase, key_unit = _phrase_and_unit(key)
    if phrase not in _ALL:
        return Stated()
    texts = [text for text in (str(value).strip().strip("\"'") for value in values) if text]
    number, unit = _number_and_unit(texts)
    unit = plain_unit(unit) or plain_unit(key_unit)
    if phrase in _TIME_UNIT:
        return Stated(time_unit=next((plain_unit(text) for text in texts if plain_unit(text)), ""))
    if phrase in _VOLTAGE_UNIT:
        return Stated(voltage_units=_voltage_units(texts))
    if phrase in _FULL_SCALE:
        return Stated(full_scale_v=_limits(texts))
    if number is None:
        return Stated()
    if phrase in _INTERVAL:
        return Stated(interval=_in_seconds(number, unit), interval_unit="s" if unit in SECONDS else "")
    if phrase in _RATE:
        return _interval_from_rate(number, unit)
    if phrase in _START:
        return Stated(start=_in_seconds(number, unit), start_unit="s" if unit in SECONDS else "")
    if phrase in _PRETRIGGER:
        return _start_from_pretrigger(number, unit, counted=phrase.split()[-1] not in {"time", "pretrigger"})
    if phrase in _SAMPLES:
        whole = number.is_integer() and number >= 2 and unit == ""
        return Stated(samples=int(number)) if whole else Stated()
    scale = 1e-3 if "mV" in (unit, plain_unit(key_unit)) else 1.0
    if phrase in _VOLTS_PER_CODE:
        return Stated(volts_per_code=_numbers(texts, scale))
    if phrase in _CODE_ZERO:
        return Stated(code_zero=_numbers(texts))
    return Stated(offset_v=_numbers(texts, scale))


def _in_seconds(number: float, unit: str) -> float:
    return number * SECONDS.get(unit, 1.0)


def _voltage_units(texts: list[str]) -> tuple[str, ...]:
    found = tuple(plain_unit(text) or text for text in texts)
    return found if all(plain_unit(text) or is_foreign(text) for text in texts) else ()


def _interval_from_rate(rate: float, unit: str) -> Stated:
    if rate <= 0:
        return Stated()
    return Stated(interval=1.0 / (rate * HERTZ.get(unit, 1.0)), interval_unit="s")


def _start_from_pretrigger(number: float, unit: str, *, counted: bool) -> Stated:
    if unit in SECONDS:
        return Stated(start=-abs(_in_seconds(number, unit)), start_unit="s")
    # Without a unit: a whole number of one or more counts samples; "trigger time" does not.
    if number.is_integer() and (counted or abs(number) >= 1):
        return Stated(pretrigger_samples=abs(number))
    return Stated(start=-abs(number))


def merged(parts: Iterable[Stated], *, where: str) -> Stated:
    """Put facts together; the same fact stated twice must be the same.

    Raises
    ------
    InputError
        If two statements differ (numbers: by more than 0.1 %); both are printed.
    """
    result = Stated()
    for part in parts:
        changes: dict[str, object] = {}
        for field in fields(Stated):
            new, old = getattr(part, field.name), getattr(result, field.name)
            if new in _NOTHING or (field.name.endswith("_unit") and field.name != "time_unit"):
                continue  # the unit of a number goes with its number
            unit = f"{field.name}_unit"
            if old in _NOTHING:
                changes[field.name] = new
                if field.name in ("interval", "start"):
                    changes[unit] = getattr(part, unit)
            elif not _same(
                old, new, either_unitless=not (getattr(part, unit, "s") and getattr(result, unit, "s"))
            ):
                raise InputError(
                    f"the file states {field.name.replace('_', ' ')} twice: {old} and {new}",
                    where=where,
                    mend="Correct the file, or export the record again",
                )
            elif getattr(part, unit, "") and not getattr(result, unit, ""):
                changes |= {field.name: new, unit: getattr(part, unit)}
        result = replace(result, **changes)  # type: ignore[arg-type]
    return result


_NOTHING: tuple[object, ...] = (None, "", ())


def _same(old: object, new: object, *, either_unitless: bool) -> bool:
    if isinstance(old, int | float) and isinstance(new, int | float):
        scales = (
            (1.0, *SECONDS.values(), *(1 / scale for scale in SECONDS.values()))
            if either_unitless
            else (1.0,)
        )
        return any(abs(old - new * scale) <= 1e-3 * max(abs(old), abs(new * scale)) for scale in scales)
    return old == new
