"""The time base of a record: one even clock, or a refusal that says why not."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from shpb.arrays import BoolArray
from shpb.errors import IncompleteRecordError, InputError
from shpb.record.evenness import FINE, examine_stamps
from shpb.record.raw import RawColumn, RawTable
from shpb.record.time_column import TimeColumn, part_time
from shpb.record.units import SECONDS, plain_unit, scale_of
from shpb.rig.rig import RecordHints

MIN_SAMPLES = 16
AGREEMENT = 1e-3  # two statements of one interval may differ by this part of it
# The coarsest interval that is read as seconds when nobody says the unit: as milliseconds it would be
# 2.5 ns, faster than records of bar shots are taken.
_SURELY_SECONDS = 2.5e-6
_PLAUSIBLE_S = (1e-10, 1e-4)  # sample intervals of bar shots, with room on both sides


class Clock(NamedTuple):
    """Even sampling: interval [s], time of the first sample [s], number of samples."""

    interval_s: float
    start_s: float
    samples: int

    def __str__(self) -> str:
        return f"{self.samples} samples, {self.interval_s:.7g} s apart, from {self.start_s:.7g} s"


def read_clock(
    table: RawTable, hints: RecordHints, *, where: str
) -> tuple[Clock, tuple[RawColumn, ...], tuple[str, ...]]:
    """Find the time base of a table.

    The interval is the one that the file states, else the one of its time column (last - first) / (n - 1)
    (:func:`shpb.record.evenness.examine_stamps` says what is done where the digits are few), else the
    hint's. Whatever else states it must agree within 0.1 %.

    Returns
    -------
    clock : Clock
    columns : tuple of RawColumn
        The columns that are not time.
    remarks : tuple of str

    Raises
    ------
    IncompleteRecordError
        If the file holds fewer samples than it states.
    InputError
        If there are fewer than 16 samples, if the interval cannot be known, if two statements of it
        differ, or if the samples are not on one even clock.
    """
    samples = _sample_count(table, where)
    time, columns, remarks = part_time(table.columns, where)
    stated_s = _stated_interval_s(table, time, hints, where)
    if time is None:
        clock = Clock(_interval_without_column(stated_s, hints, where), 0.0, samples)
        clock = Clock(clock.interval_s, _start_without_column(table, hints, clock.interval_s, where), samples)
    else:
        clock, more = _clock_of_column(table, time, columns, stated_s=stated_s, hints=hints, where=where)
        remarks += more
    _check_hints(clock, hints, where)
    return clock, columns, tuple(remarks)


def _sample_count(table: RawTable, where: str) -> int:
    counts = {column.values.shape[0] for column in table.columns}
    samples = min(counts, default=0)
    if len(counts) > 1 or samples < MIN_SAMPLES:
        what = (
            f"the columns have {sorted(counts)} samples"
            if len(counts) > 1
            else f"there are {samples} samples"
        )
        raise InputError(
            what, where=where, mend=f"A record needs at least {MIN_SAMPLES} samples, as many in each column"
        )
    stated = table.stated.samples
    if stated is not None and samples < stated:
        raise IncompleteRecordError(
            f"the file holds {samples} samples and states {stated}",
            where=where,
            mend="Wait until it is written, or export it again",
        )
    return samples


# --- the interval ---------------------------------------------------------------------------------


def _stated_interval_s(
    table: RawTable, time: TimeColumn | None, hints: RecordHints, where: str
) -> float | None:
    """Return the interval that the file states [s], its unit settled."""
    stated = table.stated.interval
    if stated is None:
        return None
    if not (np.isfinite(stated) and stated > 0):
        raise InputError(
            f"the file states a sample interval of {stated:g}",
            where=where,
            mend="Correct it in the file, or export the record again",
        )
    if table.stated.interval_unit:
        return stated * scale_of(table.stated.interval_unit, SECONDS, where=where)
    named = (table.stated.time_unit, time.unit if time else "", hints.time_unit or "")
    units = [unit for unit in named if plain_unit(unit) in SECONDS]
    guesses = [stated * SECONDS[plain_unit(unit)] for unit in ("s", *units)]
    checks = [hints.sample_interval_s] if hints.sample_interval_s else []
    if time is not None and time.unit in SECONDS:
        span = float(time.values[-1] - time.values[0]) * SECONDS[time.unit]
        checks.insert(0, span / (time.values.size - 1))
    for check in checks:
        for guess in guesses:
            if abs(guess - check) <= AGREEMENT * check:
                return guess
    if not checks and not units and stated > _PLAUSIBLE_S[1]:
        raise InputError(
            f"the file states a sample interval of {stated:g} without a unit, too long to be seconds",
            where=where,
            mend="State the time unit (s, ms, us or ns) in the rig file or the shot sheet",
        )
    # The unit said for time holds for the interval too, unless the number can only be seconds.
    plausible = [guess for guess in guesses[1:] if _PLAUSIBLE_S[0] <= guess <= _PLAUSIBLE_S[1]]
    return plausible[0] if plausible else guesses[0]


def _interval_without_column(stated_s: float | None, hints: RecordHints, where: str) -> float:
    interval_s = stated_s if stated_s is not None else hints.sample_interval_s
    if interval_s is None:
        raise InputError(
            "there is no time column and no sample interval",
            where=where,
            mend="State the sample interval in the rig file or the shot sheet",
        )
    return interval_s


def _start_without_column(table: RawTable, hints: RecordHints, interval_s: float, where: str) -> float:
    stated = table.stated
    if stated.start is not None:
        unit = stated.start_unit or stated.time_unit or "s"
        return stated.start * scale_of(unit, SECONDS, where=where)
    if stated.pretrigger_samples is not None:
        return -stated.pretrigger_samples * interval_s
    return hints.trigger_offset_s or 0.0


def _clock_of_column(
    table: RawTable,
    time: TimeColumn,
    columns: tuple[RawColumn, ...],
    *,
    stated_s: float | None,
    hints: RecordHints,
    where: str,
) -> tuple[Clock, list[str]]:
    n = time.values.size
    known_s = stated_s if stated_s is not None else hints.sample_interval_s
    if time.counts_samples and known_s is not None:
        start_s = _start_without_column(table, hints, known_s, where)
        return Clock(known_s, start_s, n), ["the first column counts samples"]
    stamps = np.asarray(time.values, dtype=np.float64)
    raw_interval = float(stamps[-1] - stamps[0]) / (n - 1)
    unit, remarks = _time_unit(table, time, raw_interval, known_s=known_s, hints=hints, where=where)
    scale = SECONDS[unit]
    facts = examine_stamps(
        stamps,
        interval=known_s / scale if known_s is not None else None,
        unit=unit,
        all_change=lambda: _every_row_changes(columns),
        place=lambda i: f"{where}, {table.place(i)}",
    )
    column_s = facts.interval * scale
    if stated_s is not None and abs(stated_s - column_s) > (AGREEMENT + facts.doubt) * column_s:
        raise InputError(
            f"the header states a sample interval of {stated_s:.6g} s, the time column {column_s:.6g} s",
            where=where,
            mend="Correct the one that is wrong, or export the record again",
        )
    if known_s is None and facts.doubt > AGREEMENT:
        raise InputError(
            f"the time stamps have too few digits: steps of {facts.quantum * scale:.3g} s give the sample "
            f"interval no better than {facts.doubt:.1%}",
            where=where,
            mend="State the sample interval in the rig file or the shot sheet, or export more digits",
        )
    interval_s = column_s
    if known_s is not None:
        fits = abs(known_s - column_s) <= (AGREEMENT + facts.doubt) * column_s
        # A hint is better than stamps of few digits; one that does not fit is refused by the caller.
        interval_s = known_s if stated_s is not None or (fits and facts.doubt > FINE) else column_s
    start_s = float(stamps[0]) * scale
    remarks += facts.remarks
    remarks += _start_remarks(table, start_s, interval_s, where)
    return Clock(interval_s, start_s, n), remarks


def _time_unit(
    table: RawTable,
    time: TimeColumn,
    raw_interval: float,
    *,
    known_s: float | None,
    hints: RecordHints,
    where: str,
) -> tuple[str, list[str]]:
    """Return the unit of the time column, from whoever states it or from the interval."""
    said = {
        "its column": time.unit,
        "its header": plain_unit(table.stated.time_unit),
        "the rig file or sheet": plain_unit(hints.time_unit or ""),
    }
    stated = {who: unit for who, unit in said.items() if unit in SECONDS}
    if len(set(stated.values())) > 1:
        listed = ", ".join(f"{unit} in {who}" for who, unit in stated.items())
        raise InputError(f"the time unit is {listed}", where=where, mend="Correct the one that is wrong")
    if stated:
        return next(iter(stated.values())), []
    if known_s is not None and raw_interval > 0:
        for unit, scale in SECONDS.items():
            if abs(raw_interval * scale - known_s) <= 2 * AGREEMENT * known_s:
                return unit, [f"the unit of time is not stated; {unit} fits the sample interval"]
    if raw_interval <= _SURELY_SECONDS and not time.counts_samples:
        return "s", [f"the unit of time is not stated; taken as s, samples {raw_interval:.4g} s apart"]
    what = "the first column counts samples" if time.counts_samples else "the time column has no unit"
    raise InputError(
        f"{what}, in steps of {raw_interval:.6g}",
        where=where,
        mend="State the time unit (s, ms, us or ns) or the sample interval in the rig file or the shot sheet",
    )


def _every_row_changes(columns: Sequence[RawColumn]) -> bool:
    """Whether no row repeats the row before it: what an export of changes only looks like."""
    changes: BoolArray | None = None
    for column in columns:
        differs: BoolArray = np.asarray(column.values[1:] != column.values[:-1])
        changes = differs if changes is None else changes | differs
    return changes is not None and bool(changes.all())


def _start_remarks(table: RawTable, start_s: float, interval_s: float, where: str) -> list[str]:
    """Compare the first stamp with what the header says; wordings of a trigger offset differ in sign."""
    if table.stated.start is None:
        return []
    unit = table.stated.start_unit or table.stated.time_unit or "s"
    header_s = table.stated.start * scale_of(unit, SECONDS, where=where)
    if abs(abs(header_s) - abs(start_s)) <= 1.5 * interval_s:
        return []
    return [
        f"the header states a start of {header_s:.6g} s, the time column begins at {start_s:.6g} s, "
        "which was used"
    ]


def _check_hints(clock: Clock, hints: RecordHints, where: str) -> None:
    """Refuse where the rig file or sheet and the record say different things."""
    hinted = hints.sample_interval_s
    if hinted is not None and abs(hinted - clock.interval_s) > AGREEMENT * clock.interval_s:
        raise InputError(
            f"the record's sample interval is {clock.interval_s:.6g} s, the rig file or sheet states "
            f"{hinted:.6g} s",
            where=where,
            mend="Correct the one that is wrong",
        )
    offset = hints.trigger_offset_s
    if offset is not None and abs(offset - clock.start_s) > 1.5 * clock.interval_s:
        raise InputError(
            f"the record begins at {clock.start_s:.6g} s, the rig file or sheet states {offset:.6g} s",
            where=where,
            mend="Correct the one that is wrong",
        )
