"""Units of time and voltage as files write them."""

from __future__ import annotations

import re

from shpb.errors import InputError

# Scale to SI by the unit's usual spelling; the spellings below are all that is understood.
SECONDS = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "ns": 1e-9, "ps": 1e-12}
VOLTS = {"V": 1.0, "mV": 1e-3, "uV": 1e-6, "kV": 1e3}
HERTZ = {"Hz": 1.0, "kHz": 1e3, "MHz": 1e6, "GHz": 1e9}


def words(text: str) -> frozenset[str]:
    """Return the words of ``text`` as a set."""
    return frozenset(text.split())


_SPELLINGS = {
    **dict.fromkeys(("s", "sec", "secs", "second", "seconds"), "s"),
    **dict.fromkeys(("ms", "msec", "millisecond", "milliseconds"), "ms"),
    **dict.fromkeys(("us", "usec", "microsec", "microsecond", "microseconds"), "us"),
    **dict.fromkeys(("ns", "nsec", "nanosec", "nanosecond", "nanoseconds"), "ns"),
    **dict.fromkeys(("ps", "picosecond", "picoseconds"), "ps"),
    **dict.fromkeys(("v", "volt", "volts"), "V"),
    **dict.fromkeys(("mv", "millivolt", "millivolts"), "mV"),
    **dict.fromkeys(("uv", "microvolt", "microvolts"), "uV"),
    **dict.fromkeys(("kv", "kilovolt", "kilovolts"), "kV"),
    **dict.fromkeys(("hz", "s/s", "sa/s", "1/s", "hertz", "samples/s", "sps"), "Hz"),
    **dict.fromkeys(("khz", "ks/s", "ksa/s", "ksps"), "kHz"),
    **dict.fromkeys(("mhz", "ms/s", "msa/s", "msps"), "MHz"),
    **dict.fromkeys(("ghz", "gs/s", "gsa/s", "gsps"), "GHz"),
}
# Units of quantities that are no voltage: such a column is left out, and said so.
_FOREIGN = words(
    "n kn mn pa kpa mpa gpa a ma ua g kg m mm um m/s m/s2 mm/s °c degc celsius °f k % strain ue ustrain "
    "microstrain um/m hz khz ohm w db"
)
_IN_BRACKETS = re.compile(r"^(?P<name>.*?)\s*[(\[{]\s*(?P<unit>[^()\[\]{}]*?)\s*[)\]}]\s*$")
_WITHIN_NAME = re.compile(r"^(?P<name>.+?)[_ ](?P<unit>[^\W\d_]+)$")  # incident_V
_AFTER_NAME = re.compile(r"^(?P<name>.+?)(?:\s*/\s*|\s+in\s+|,\s*)(?P<unit>[^\W\d_]+)$")  # t / s, CH1 in mV


def plain_unit(text: str) -> str:
    """Return the usual spelling of a unit of time, voltage or frequency, or "" if it is none of them.

    >>> plain_unit(" µs "), plain_unit("Volts"), plain_unit("MS/s"), plain_unit("kN")
    ('us', 'V', 'MHz', '')
    """
    word = text.strip().strip("()[]{}\"'").strip().replace("µ", "u").replace("μ", "u")
    return _SPELLINGS.get(word.casefold(), "")


def is_foreign(text: str) -> bool:
    """Whether ``text`` is a unit of something other than time or voltage."""
    return text.strip().replace("µ", "u").replace("μ", "u").casefold() in _FOREIGN


def is_unit(text: str) -> bool:
    """Whether ``text`` is a unit that this module knows, of whatever quantity."""
    bare = text.strip().strip("()[]{}\"'").strip()
    return bool(plain_unit(bare)) or is_foreign(bare)


def split_unit(label: str) -> tuple[str, str]:
    """Split a column label into the channel's name and its unit.

    A unit in brackets is taken off; one that is part of the name (``incident_V``) is read, and the
    name stays whole, because people call the channel by it.

    >>> split_unit("CH1 (V)"), split_unit("incident_V"), split_unit("bridge A")
    (('CH1', 'V'), ('incident_V', 'V'), ('bridge A', ''))
    """
    label = label.strip().strip("\"'").strip()
    bracket = _IN_BRACKETS.match(label)
    if bracket and is_unit(bracket["unit"]):
        unit = plain_unit(bracket["unit"]) or bracket["unit"]
        return (bracket["name"] or label), unit
    after = _AFTER_NAME.match(label)
    if after and plain_unit(after["unit"]):
        return after["name"], plain_unit(after["unit"])
    within = _WITHIN_NAME.match(label)
    if within and plain_unit(within["unit"]):
        return label, plain_unit(within["unit"])
    return label, ""


def scale_of(unit: str, table: dict[str, float], *, where: str) -> float:
    """Return the factor from ``unit`` to SI, or raise InputError naming the units that are known."""
    known = table.get(plain_unit(unit))
    if known is None:
        raise InputError(
            f"the unit {unit!r} is not one of {', '.join(table)}",
            where=where,
            mend="Correct the unit, or export the record in one of these",
        )
    return known
