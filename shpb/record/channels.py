"""Columns of numbers to named channels in volts: names, units, digitiser codes, samples over range.

Over-range samples: the true voltage is unknown, only that it lay beyond the rail. Such a sample is set
to the rail on its side (the full scale if the file states it, else the largest finite voltage of that
sign in the channel) and a remark counts them. So a pulse that left the range shows the flat top that
the check for clipping looks for, and no invented value passes for a measured one.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise
from typing import Any, NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.record.raw import RawColumn, RawTable
from shpb.record.units import SECONDS, VOLTS, is_foreign, plain_unit, scale_of, split_unit
from shpb.rig.rig import RecordHints

# Whole numbers over a wider span than this, of no stated unit, are digitiser codes, not volts.
_CODE_SPAN = 20
_AGREEMENT = 1e-3
_BLOCK = 1 << 20


class Channel(NamedTuple):
    """One channel before it becomes volts."""

    name: str
    named: bool  # by the file, and not after the file or by position
    column: RawColumn
    table: RawTable
    where: str  # file name


def channels_of(table: RawTable, columns: Sequence[RawColumn], where: str) -> tuple[list[Channel], list[str]]:
    """Return the voltage channels of one file, and remarks about columns that are none.

    Raises
    ------
    InputError
        If there are none, or if the columns are the smallest and largest values of spans of time.
    """
    remarks = []
    columns = _with_stated_facts(table, columns, where)
    voltages = []
    for column in columns:
        if is_foreign(column.unit):
            remarks.append(f"column {column.name!r} is in {column.unit}, no voltage, and was left out")
        else:
            voltages.append(column)
    if not voltages:
        raise InputError(
            "there is no voltage channel", where=where, mend="Export at least one channel in volts"
        )
    _refuse_min_max_names([column.name for column in voltages], where)
    channels = [
        Channel(
            name=storable(column.name) or f"CH{i}",
            named=bool(column.name),
            column=column,
            table=table,
            where=where,
        )
        for i, column in enumerate(voltages, 1)
    ]
    return channels, remarks


def storable(name: str) -> str:
    """Return a name from outside as a file can hold it: no zero byte, no half of a character.

    Damaged files bring such names, and folders whose names were written under another system's code.
    """
    return name.replace("\0", "\N{REPLACEMENT CHARACTER}").encode("utf-8", "replace").decode("utf-8")


def _with_stated_facts(table: RawTable, columns: Sequence[RawColumn], where: str) -> list[RawColumn]:
    """Hand facts that the header states once, or once a channel, down to the columns."""
    before = len(table.columns) - len(columns)  # the time column

    def own(values: tuple[Any, ...], i: int, fact: str) -> Any:
        if len(values) in (1, len(columns)):
            return values[min(i, len(values) - 1)]
        if before and len(values) == len(columns) + before:
            return values[i + before]
        raise InputError(
            f"the header states {len(values)} {fact.replace('_', ' ')} for {len(columns)} channels",
            where=where,
            mend="Correct the header: one value for all channels, or one each",
        )

    result = []
    for i, column in enumerate(columns):
        facts = column.stated
        for fact in ("volts_per_code", "code_zero", "offset_v", "full_scale_v"):
            values = getattr(table.stated, fact)
            if values and not getattr(facts, fact):
                facts = replace(facts, **{fact: (own(values, i, fact),)})  # type: ignore[arg-type]
        unit = column.unit
        for units in (column.stated.voltage_units, table.stated.voltage_units):
            unit = unit or (own(units, i, "voltage_units") if units else "")
        # "Unit,s" speaks of the time column.
        result.append(replace(column, unit="" if plain_unit(unit) in SECONDS else unit, stated=facts))
    return result


def _refuse_min_max_names(names: Sequence[str], where: str) -> None:
    bases = Counter(
        re.sub(r"[\W_]*(min|max)(imum)?[\W_]*", " ", name.casefold())
        for name in names
        if re.search(r"(?<![a-z])(min|max)(imum)?(?![a-z])", name.casefold())
    )
    if any(count > 1 for count in bases.values()):
        raise InputError(
            f"the columns {', '.join(names)} are smallest and largest values of spans of time, no samples",
            where=where,
            mend="Export every sample",
        )


# --- names ----------------------------------------------------------------------------------------


def named_as_hinted(channels: Sequence[Channel], hints: RecordHints) -> tuple[list[Channel], list[str]]:
    """Name and choose channels as the rig file or sheet says; without a word from it, keep the file's names.

    Raises
    ------
    InputError
        If the file names its channels and the hint names others, or if the counts differ; both are printed.
    """
    wanted = hints.channel_names
    if wanted is None:
        return _without_duplicates(channels)
    names = [channel.name for channel in channels]
    where = ", ".join(dict.fromkeys(channel.where for channel in channels))
    # "CH1 (V)" is the channel that the file's header calls so, and this record CH1.
    keys = [name if name in names else split_unit(name)[0] for name in wanted]
    if len(set(keys)) == len(keys) and all(names.count(key) == 1 for key in keys):
        chosen = [
            channels[names.index(key)]._replace(name=name) for key, name in zip(keys, wanted, strict=True)
        ]
        left = [name for name in names if name not in keys]
        remarks = [f"left out, because the rig file or sheet does not name them: {', '.join(left)}"]
        return chosen, remarks if left else []
    if len(set(wanted)) == len(wanted) == len(names) and not any(channel.named for channel in channels):
        return [c._replace(name=name) for c, name in zip(channels, wanted, strict=True)], []
    raise InputError(
        f"the record's channels are {', '.join(names)}; the rig file or sheet names {', '.join(wanted)}",
        where=where,
        mend="Give the names as the record has them, one each",
    )


def _without_duplicates(channels: Sequence[Channel]) -> tuple[list[Channel], list[str]]:
    seen: Counter[str] = Counter()
    taken = {channel.name for channel in channels}
    result, remarks = [], []
    for channel in channels:
        seen[channel.name] += 1
        name, number = channel.name, seen[channel.name]
        while number > 1 and name in taken:
            name, number = f"{channel.name} #{number}", number + 1
        if name != channel.name:
            remarks.append(f"there are several channels {channel.name!r}; one is called {name!r} here")
            taken.add(name)
        result.append(channel._replace(name=name))
    return result, remarks


# --- volts ----------------------------------------------------------------------------------------


def in_volts(channels: Sequence[Channel], hints: RecordHints) -> tuple[FloatArray, list[str]]:
    """Return voltages [V], shape (channels, samples), and remarks.

    Raises
    ------
    InputError
        If a channel holds a NaN or no finite sample; if it holds digitiser codes and nobody states
        the volts per code; if the file and the hints state different units or volts per code.
    """
    per_code = hints.volts_per_code
    if per_code is not None and len(per_code) not in (1, len(channels)):
        raise InputError(
            f"the rig file or sheet states {len(per_code)} volts per code for {len(channels)} channels "
            f"({', '.join(channel.name for channel in channels)})",
            where=channels[0].where,
            mend="State one for all channels, or one each",
        )
    voltage = np.empty((len(channels), channels[0].column.values.shape[0]))
    remarks: list[str] = []
    unstated = []
    for i, channel in enumerate(channels):
        row = voltage[i]
        row[:] = channel.column.values
        finite = _is_finite(row)
        if not finite:
            _refuse_nan(row, channel)
        hinted = per_code[min(i, len(per_code) - 1)] if per_code else None
        scale, zero, offset, remark = _scale(channel, row, hinted, hints)
        if remark is None:
            unstated.append(channel.name)
        else:
            remarks += remark
        if (scale, zero, offset) != (1.0, 0.0, 0.0):
            row -= zero
            row *= scale
            row += offset
            if finite and not _is_finite(row):
                raise InputError(
                    f"the samples times {scale:g} V are too large to be numbers",
                    where=f"{channel.where}, channel {channel.name!r}",
                    mend="Correct the volts per code, the offset or the unit",
                )
        if not finite:
            remarks += _set_to_rails(row, channel)
    if unstated:
        remarks.append(f"the unit of {', '.join(unstated)} is not stated; taken as V")
    return voltage, remarks


def _is_finite(row: FloatArray) -> bool:
    # One sum finds any NaN or infinity at memory speed.
    with np.errstate(invalid="ignore", over="ignore"):
        return bool(np.isfinite(row.sum()))


def _refuse_nan(row: FloatArray, channel: Channel) -> None:
    bad = np.flatnonzero(np.isnan(row))
    if bad.size:
        raise InputError(
            f"channel {channel.name!r} holds NaN, no number, in {bad.size} of {row.size} samples",
            where=f"{channel.where}, {channel.table.place(int(bad[0]))}",
            mend="Export the record again, or cut it before that sample",
        )


def _scale(
    channel: Channel, row: FloatArray, hinted: float | None, hints: RecordHints
) -> tuple[float, float, float, list[str] | None]:
    """Return scale, zero and offset, V = (value - zero) scale + offset, and remarks.

    No remarks but None if nobody states the unit.
    """
    facts = channel.column.stated
    stated = facts.volts_per_code[0] if facts.volts_per_code else None
    where = f"{channel.where}, channel {channel.name!r}"
    if hinted is not None and stated is not None and abs(hinted - stated) > _AGREEMENT * abs(stated):
        raise InputError(
            f"the file states {stated:g} V per code, the rig file or sheet {hinted:g}",
            where=where,
            mend="Correct the one that is wrong",
        )
    per_code = hinted if hinted is not None else stated
    unit = _unit(channel, hints, where)
    whole = (per_code is not None or not unit) and _all_whole(channel.column, row)
    if per_code is not None and whole:
        zero = facts.code_zero[0] if facts.code_zero else 0.0
        offset = facts.offset_v[0] if facts.offset_v else 0.0
        return per_code, zero, offset, [f"channel {channel.name!r}: digitiser codes times {per_code:g} V"]
    if hinted is not None:
        raise InputError(
            "the samples hold fractions, so they are no digitiser codes, though volts per code are stated",
            where=where,
            mend="Take the volts per code out of the rig file or sheet, or give the record as codes",
        )
    if unit:
        return VOLTS[unit], 0.0, 0.0, []
    if whole:
        finite = row[np.isfinite(row)]
        if channel.column.values.dtype.kind in "iu" or (finite.size and np.ptp(finite) > _CODE_SPAN):
            raise InputError(
                "the samples are whole numbers of no stated unit, as digitiser codes are",
                where=where,
                mend="State the volts per code, or the voltage unit, in the rig file or the shot sheet",
            )
    return 1.0, 0.0, 0.0, None


def _unit(channel: Channel, hints: RecordHints, where: str) -> str:
    """Return the usual spelling of the channel's unit, "" if nobody states one."""
    stated, hinted = channel.column.unit, hints.voltage_unit or ""
    if stated:
        scale_of(stated, VOLTS, where=where)
    if hinted:
        scale_of(hinted, VOLTS, where="rig file or shot sheet, voltage unit")
    if stated and hinted and plain_unit(stated) != plain_unit(hinted):
        raise InputError(
            f"the file states {stated}, the rig file or sheet {hinted}",
            where=where,
            mend="Correct the one that is wrong",
        )
    return plain_unit(stated or hinted)


def _all_whole(column: RawColumn, row: FloatArray) -> bool:
    if column.values.dtype.kind in "iu":
        return True
    # By blocks, the first one short: most records are settled there, and a long one needs no second beside it.
    edges = [0, 256, *range(_BLOCK, row.size, _BLOCK), row.size]
    return all(bool(np.all(row[a:b] == np.rint(row[a:b]))) for a, b in pairwise(edges))


def _set_to_rails(row: FloatArray, channel: Channel) -> list[str]:
    """Set samples over range to the rail on their side, in place, and say how many there are."""
    finite = np.isfinite(row)
    over = np.flatnonzero(~finite)
    if not over.size:
        return []
    if over.size == row.size:
        raise InputError(
            "every sample is over range",
            where=f"{channel.where}, channel {channel.name!r}",
            mend="Widen the range of the scope and fire again",
        )
    low, high = float(row[finite].min()), float(row[finite].max())
    largest = max(abs(low), abs(high))
    # A side without a finite sample of its sign has the magnitude of the other side.
    rails = (low if low < 0 else -largest, high if high > 0 else largest)
    if channel.column.stated.full_scale_v:
        full = channel.column.stated.full_scale_v[0]
        rails = (min(rails[0], full[0]), max(rails[1], full[1]))
    remarks = []
    for side, rail in zip((-np.inf, np.inf), rails, strict=True):
        hit = np.flatnonzero(row == side)
        if hit.size:
            row[hit] = rail
            remarks.append(
                f"channel {channel.name!r}: {hit.size} sample{'s' * (hit.size > 1)} over range, the first at "
                f"{channel.table.place(int(hit[0]))}, set to the rail of {rail:.6g} V"
            )
    return remarks
