"""Which column of a table is time."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from shpb.errors import InputError
from shpb.record.raw import RawColumn
from shpb.record.units import SECONDS, plain_unit, words

_TIME_NAMES = words("time times second seconds sec timestamp timestamps")
# "T" may be the transmitted bar and "x" a place, so these must rise as well.
_MAYBE_TIME_NAMES = words("t x")
_COUNT_NAMES = words("sample samples index n no nr # i point points row count")


class TimeColumn(NamedTuple):
    """A time column: its numbers, its unit ("" if unstated), whether it counts samples 0, 1, 2, ..."""

    values: NDArray[Any]
    unit: str
    counts_samples: bool


def part_time(
    columns: Sequence[RawColumn], where: str
) -> tuple[TimeColumn | None, tuple[RawColumn, ...], list[str]]:
    """Part the time column, and a column of sample numbers, from the rest.

    Time is a column with a unit or a name of time; without one, the first that rises evenly, as no gauge
    voltage does.

    Returns
    -------
    time : TimeColumn or None
    rest : tuple of RawColumn
    remarks : list of str

    Raises
    ------
    InputError
        If two time columns differ.
    """
    remarks: list[str] = []
    times = [c for c in columns if plain_unit(c.unit) in SECONDS or is_time_name(c.name)]
    if not times:
        times = [c for c in columns if may_be_time(c.name, c.values)]
    counts = [
        c for c in columns if c not in times and _plain(c.name) in _COUNT_NAMES and _counts_up(c.values)
    ]
    rest = tuple(c for c in columns if c not in times and c not in counts)
    if not times and not counts and len(rest) > 1:
        times = [c for c in rest if _looks_like_time(c.values)][:1]
        rest = tuple(c for c in rest if c not in times)
        remarks += [f"column {c.name!r} rises evenly and was taken as time" for c in times if c.name]
    if not times:
        return (TimeColumn(counts[0].values, "", True) if counts else None), rest, remarks
    first = times[0]
    for other in times[1:]:
        name = other.name or "a second time column"
        if not _looks_like_time(other.values):
            remarks.append(f"column {name!r} is no clock and was left out")
        elif not np.allclose(other.values, first.values, rtol=1e-6, atol=0):
            raise InputError(
                f"{first.name or 'the time column'!r} and {name!r} are two different clocks",
                where=where,
                mend="Export the channels on one time column, or one file a channel",
            )
    unit = plain_unit(first.unit)
    counting = not unit and not is_time_name(first.name) and _counts_up(first.values)
    return TimeColumn(first.values, unit, counting), rest, remarks


def _plain(name: str) -> str:
    word = " ".join(name.casefold().replace("-", " ").replace("_", " ").split())
    return word.removesuffix(" axis")


def is_time_name(name: str) -> bool:
    """Whether a column of this name is time, whatever it holds."""
    word = _plain(name)
    return word in _TIME_NAMES or word.startswith("time ") or word.endswith(" time")


def may_be_time(name: str, values: NDArray[Any]) -> bool:
    """Whether a column of a name that may mean time or something else rises as time does."""
    if _plain(name) not in _MAYBE_TIME_NAMES:
        return False
    # A small t is time even with rows out of order, which are refused later; a large T may be a voltage.
    return _mostly_rises(values) if name.islower() else _looks_like_time(values)


def _mostly_rises(values: NDArray[Any]) -> bool:
    return bool(values[-1] > values[0] and np.mean(np.diff(values) >= 0) > 0.9)


def _counts_up(values: NDArray[Any]) -> bool:
    return bool(
        values[0] in (0, 1) and values[-1] - values[0] == values.size - 1 and np.all(np.diff(values) == 1)
    )


def _looks_like_time(values: NDArray[Any]) -> bool:
    """Whether values never fall and stay near a straight line, as no gauge voltage does."""
    top = np.asarray(values[:64], dtype=np.float64)
    if not values[-1] > values[0] or np.any(np.diff(top) < 0) or not np.isfinite(top).all():
        return False
    whole = np.asarray(values, dtype=np.float64)
    if np.any(np.diff(whole) < 0):
        return False
    line = np.linspace(whole[0], whole[-1], whole.size)
    return bool(np.abs(whole - line).max() < 0.1 * (whole[-1] - whole[0]))
