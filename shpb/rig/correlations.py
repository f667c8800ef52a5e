"""Table ``[correlations]`` of the rig file: values that one calibration gave together share its errors."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Set
from dataclasses import dataclass
from typing import Any

from shpb.rig.mistakes import Collector, nearest, shown

TABLE = "correlations"
_GAUGE = ("gauge factor", "excitation", "gain", "gauge distance")
_BAR = ("density", "diameter", "wave speed", "modulus", "Poisson's ratio")
# As in the uncertainty budget; "bars" where both are of one stock.
NAMES = (
    *(f"{side} {what}" for side in ("incident", "transmitted") for what in _GAUGE),
    *(f"{bar}: {what}" for bar in ("bars", "incident bar", "transmitted bar") for what in _BAR),
    *(
        f"{side} gauge {number} {what}"
        for side in ("incident", "transmitted")
        for number in (2, 3, 4)
        for what in ("factor", "distance")
    ),
)


@dataclass(frozen=True, slots=True)
class Correlation:
    """Correlation coefficient of two values of the rig, by their names in the uncertainty budget."""

    first: str
    second: str
    coefficient: float

    @property
    def of_further_station(self) -> bool:
        """Whether it is about station 2, 3 or 4 of a bar."""
        return any(f" gauge {n}" in name for name in (self.first, self.second) for n in (2, 3, 4))


def correlations_after(
    stated: Iterable[Correlation],
    calibrated: Iterable[Correlation],
    measured: Set[str],
    shared: Iterable[str] = (),
) -> tuple[Correlation, ...]:
    """Correlations of a rig once a calibration has measured some of its values.

    Parameters
    ----------
    stated : iterable of Correlation
        Of the rig file. What it says of a value that was measured since no longer holds.
    calibrated : iterable of Correlation
        Of the measured values.
    measured : set of str
        Their names.
    shared : iterable of str
        What both bars had from one stock ("density") before the calibration told them apart: what was not measured
        of either bar is still one and the same value.

    Returns
    -------
    tuple of Correlation
        Those that hold, by names of the uncertainty budget.
    """
    shared = tuple(shared)
    kept = [one for pair in stated for one in (_of_each_bar(pair) if shared else (pair,))]
    kept += [Correlation(f"incident bar: {what}", f"transmitted bar: {what}", 1.0) for what in shared]
    kept = [one for one in kept if one.first not in measured and one.second not in measured]
    return (*dict.fromkeys(kept), *calibrated)


def _of_each_bar(pair: Correlation) -> Iterator[Correlation]:
    """A correlation with values of both bars at once, said of each bar by itself."""
    bars = ("incident bar", "transmitted bar")
    firsts, seconds = (
        [name.replace("bars:", f"{bar}:", 1) for bar in bars] if name.startswith("bars:") else [name]
        for name in (pair.first, pair.second)
    )
    for first in firsts:
        for second in seconds:
            yield Correlation(first, second, pair.coefficient)


def correlations_in(document: Mapping[str, Any], seen: Collector) -> tuple[Correlation, ...]:
    """Read ``[correlations]``: each key names two values with ``|`` between them, each value is from -1 to 1.

    Examples
    --------
    >>> seen = Collector("rig.toml")
    >>> correlations_in({"correlations": {"incident gain | transmitted gain": 0.7}}, seen)
    (Correlation(first='incident gain', second='transmitted gain', coefficient=0.7),)
    """
    table = document.get(TABLE)
    if table is None:
        return ()
    if not isinstance(table, Mapping):
        seen.add(TABLE, shown(table), "a table", f"Write [{TABLE}] and its keys below it")
        return ()
    found: list[Correlation] = []
    for key, raw in table.items():
        mistake = _mistake(key, raw, found)
        if mistake is not None:
            seen.add(f'{TABLE}."{key}"', *mistake)
        else:
            first, second = _names(key)
            found.append(Correlation(first, second, float(raw)))
    return tuple(found)


def _names(key: str) -> list[str]:
    return [name.strip() for name in key.split("|")]


def _mistake(key: str, raw: object, found: list[Correlation]) -> tuple[str, str, str] | None:
    """What was found, what was expected, and the mend; None for a good entry."""
    names = _names(key)
    if len(names) != 2 or names[0] == names[1]:
        example = f'For example "{NAMES[0]} | {NAMES[4]}" = 0.5'
        return key, "two different names with | between them", example
    unknown = [name for name in names if name not in NAMES]
    if unknown:
        guess = nearest(unknown[0], NAMES)
        mend = f"Did you mean {guess}?" if guess else f"Known are {', '.join(NAMES)}"
        return f"unknown name {unknown[0]!r}", "names of the uncertainty budget", mend
    if isinstance(raw, bool) or not isinstance(raw, int | float) or not -1 <= raw <= 1:
        return shown(raw), "a number from -1 to 1", "Give the correlation coefficient"
    if any({one.first, one.second} == set(names) for one in found):
        return "the same pair again", "each pair once", "Keep one of them"
    return None
