"""Files that hold arrays under names (HDF5, NPZ, MAT, TDMS): which of them are the record.

No layout is assumed. The channels are the arrays of numbers of one common length; a time column is
found by its name or unit, as in a text file; scalars and attributes beside or above them state the
interval and the like. Where more than one choice is possible, the error lists what there is, and
the channel names in the rig file or sheet decide (the name of an array, or its whole path).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from shpb.errors import InputError
from shpb.record.raw import RawColumn, RawTable
from shpb.record.stated import Stated, facts_from, merged
from shpb.record.time_column import is_time_name, may_be_time
from shpb.record.units import SECONDS, plain_unit, split_unit, words
from shpb.rig.rig import RecordHints

_MIN_LENGTH = 16
_MOST_COLUMNS = 64
_NAME_KEYS = words("names name channels channel_names columns column_names labels channel_labels")


@dataclass(frozen=True, slots=True, kw_only=True)
class NamedArray:
    """One array in a file, read only if it is chosen.

    Attributes
    ----------
    path : str
        "/" between the groups; the last part is the array's name.
    shape : tuple of int
    load : callable
        Return the array of numbers; rows are samples or columns are, whichever are more.
    facts : mapping
        Attributes of the array itself: unit, interval, volts per code.
    fields : tuple of str
        Names of the columns, if the array has named ones.
    """

    path: str
    shape: tuple[int, ...]
    load: Callable[[], NDArray[Any]]
    facts: Mapping[str, object] = field(default_factory=dict)
    fields: tuple[str, ...] = ()

    @property
    def name(self) -> str:
        """Last part of the path."""
        return self.path.rsplit("/", 1)[-1]

    @property
    def folder(self) -> str:
        """Path without its last part."""
        return self.path.rpartition("/")[0]

    @property
    def length(self) -> int:
        """Samples, if this is a record."""
        return max(self.shape, default=0)

    @property
    def columns(self) -> int:
        """Columns, if this is a record."""
        return len(self.fields) or int(np.prod(self.shape)) // max(self.length, 1)

    def is_series(self) -> bool:
        """Whether the shape is one of a record: one long dimension, at most one short one."""
        long = [n for n in self.shape if n > 1]
        return self.length >= _MIN_LENGTH and len(long) <= 2 and self.columns <= _MOST_COLUMNS

    def is_time(self) -> bool:
        """Whether name or unit say that this is a time column."""
        if self.columns != 1:
            return False
        own = facts_of(self)
        units = (*own.voltage_units, own.time_unit, split_unit(self.name)[1])
        if is_time_name(self.name) or any(plain_unit(unit) in SECONDS for unit in units):
            return True
        return may_be_time(self.name, self.load().reshape(-1))


def facts_of(array: NamedArray) -> Stated:
    """Return what the attributes of an array state."""
    return merged((facts_from(key, _values(value)) for key, value in array.facts.items()), where=array.path)


def table_of(
    arrays: Sequence[NamedArray],
    scalars: Mapping[str, object],
    hints: RecordHints,
    *,
    where: str,
) -> RawTable:
    """Choose the record among named arrays.

    Parameters
    ----------
    arrays : sequence of NamedArray
        Every array of numbers in the file, of whatever shape.
    scalars : mapping
        Single values and short texts by path: attributes of groups, scalar arrays.
    hints : RecordHints
        ``channel_names`` choose among several candidates.
    where : str
        File name, for messages.

    Raises
    ------
    InputError
        If there is no series of samples, or more than one choice; the message lists what there is.
    """
    series = [array for array in arrays if array.is_series()]
    times = [array for array in series if array.is_time()]
    channels = [array for array in series if array not in times]
    labels = hints.channel_names or ()
    chosen = _named_in_hints(channels, labels)
    if not chosen:
        labels = ()
        chosen = _on_the_only_clock(channels, times)
    if not chosen:
        raise InputError(
            f"there is no series of samples; the file holds {_listed(arrays)}", where=where, mend=_MEND
        )
    _require_one_choice(chosen, series, named_one_each=len(chosen) == len(labels), where=where)
    times = _times_for(chosen, times)
    stated = _stated(chosen, scalars, where)
    names = None if len(chosen) > 1 else _column_names(chosen[0], scalars)
    columns = [column for time in times for column in _columns(time, "", None)]
    for array in chosen:
        label = next((label for label in labels if label.strip("/") in (array.path, array.name)), "")
        columns += _columns(array, label, names)
    left = [array.path for array in channels if array not in chosen]
    remarks = (f"arrays left out: {', '.join(left)}",) if left else ()
    return RawTable(columns=tuple(columns), stated=stated, remarks=remarks)


_MEND = (
    "Name the channels (name or path of the array) in the rig file or the sheet, or export only the record"
)


def _listed(arrays: Sequence[NamedArray]) -> str:
    shown = [f"{array.path} {'x'.join(map(str, array.shape)) or 'scalar'}" for array in arrays[:20]]
    more = f" and {len(arrays) - 20} more" if len(arrays) > 20 else ""
    return (", ".join(shown) or "no arrays of numbers") + more


def _named_in_hints(channels: Sequence[NamedArray], names: tuple[str, ...]) -> list[NamedArray]:
    found: list[NamedArray] = []
    for name in names:
        matches = [a for a in channels if a.path == name.strip("/")] or [
            a for a in channels if a.name == name
        ]
        found += [array for array in matches if array not in found]
    return found


def _on_the_only_clock(channels: list[NamedArray], times: Sequence[NamedArray]) -> list[NamedArray]:
    """Return the channels as long as the time column, if there is a time column of one length only."""
    lengths = {time.length for time in times} & {channel.length for channel in channels}
    return [channel for channel in channels if channel.length in lengths] if len(lengths) == 1 else channels


def _require_one_choice(
    chosen: Sequence[NamedArray], series: Sequence[NamedArray], *, named_one_each: bool, where: str
) -> None:
    lengths = {array.length for array in chosen}
    repeated = [name for name, count in Counter(array.name for array in chosen).items() if count > 1]
    tables = [array for array in chosen if array.columns > 1]
    if len(lengths) > 1:
        what = f"there are series of {len(lengths)} lengths"
    elif repeated and not named_one_each:
        what = f"there are several arrays called {repeated[0]!r}"
    elif tables and len(chosen) > 1:
        what = "there are several tables of columns"
    else:
        return
    raise InputError(
        f"{what}, and it is not clear which is the record: {_listed(series)}", where=where, mend=_MEND
    )


def _times_for(chosen: Sequence[NamedArray], times: Sequence[NamedArray]) -> list[NamedArray]:
    """Return the time columns of the chosen length: those beside the channels, else those elsewhere."""
    fitting = [array for array in times if array.length == chosen[0].length]
    beside = [array for array in fitting if array.folder in {channel.folder for channel in chosen}]
    return beside or fitting


def _stated(chosen: Sequence[NamedArray], scalars: Mapping[str, object], where: str) -> Stated:
    """Facts beside or above the channels; those elsewhere count only for what is still missing."""
    folders = {array.folder for array in chosen}
    near: list[Stated] = []
    far: list[Stated] = []
    for path, value in scalars.items():
        folder, _, key = path.rpartition("/")
        above = any(folder in ("", own) or own.startswith(folder + "/") for own in folders)
        (near if above else far).append(facts_from(key, _values(value)))
    for array in chosen:
        own = facts_of(array)
        # What each channel has for itself stays with it.
        near.append(
            replace(own, voltage_units=(), volts_per_code=(), code_zero=(), offset_v=(), full_scale_v=())
        )
    stated = merged(near, where=where)
    if stated.interval is None and far:
        return merged([stated, *far], where=where)
    return stated


def _values(value: object) -> list[object]:
    if isinstance(value, np.ndarray):
        return list(value.ravel()[:_MOST_COLUMNS]) if value.dtype.kind in "biufSU" else []
    return list(value) if isinstance(value, list | tuple) else [value]


def _column_names(array: NamedArray, scalars: Mapping[str, object]) -> list[str] | None:
    """Names of the columns of one table, from a text array or attribute that lists as many."""
    entries = [*array.facts.items(), *((path.rsplit("/", 1)[-1], value) for path, value in scalars.items())]
    for key, value in entries:
        if key.casefold() in _NAME_KEYS:
            names = [str(name).strip() for name in _values(value)]
            if len(names) == array.columns and all(names) and len(set(names)) == len(names):
                return names
    return None


def _columns(array: NamedArray, label: str, names: list[str] | None) -> list[RawColumn]:
    own = facts_of(array)
    values = array.load()
    if array.fields:
        # A table may have a column of text beside the numbers.
        names = [name for name in array.fields if values.dtype[name].kind in "iufb"]
        parts = [values[name].reshape(-1) for name in names]
    elif array.columns == 1:
        parts, names = [values.reshape(-1)], names or [array.name]
    else:
        table = values.squeeze()
        table = table if table.shape[0] == array.length else table.T
        parts = [table[:, i] for i in range(table.shape[1])]
    units = own.voltage_units
    result = []
    for i, part in enumerate(parts):
        name, unit = split_unit(names[i]) if names else ("", "")
        if label and len(parts) == 1:
            name = label  # a path, where the name alone is not enough
        if len(units) in (1, len(parts)):
            unit = units[min(i, len(units) - 1)]
        result.append(
            RawColumn(values=part, name=name, unit=unit or own.time_unit, stated=_of_column(own, i))
        )
    return result


def _of_column(own: Stated, i: int) -> Stated:
    def pick(values: tuple[Any, ...]) -> tuple[Any, ...]:
        return (values[i],) if i < len(values) and len(values) > 1 else values[:1]

    return Stated(
        volts_per_code=pick(own.volts_per_code),
        code_zero=pick(own.code_zero),
        offset_v=pick(own.offset_v),
        full_scale_v=pick(own.full_scale_v),
    )
