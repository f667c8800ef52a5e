"""Whether time stamps lie on one even clock, and what is the matter if not.

Stamps written with few digits repeat, or step unevenly, though the clock was even; lost blocks,
joined records, min/max pairs and exports of changes only look alike at first sight and are no
record of an even clock at all. The step of rounding tells them apart: rounding never moves a stamp
by more than its step.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from shpb.arrays import FloatArray
from shpb.errors import InputError

_FLOAT_NOISE = 1e-3  # steps that differ by less than this part of the interval are equal
_AGREEMENT = 1e-3
FINE = 1e-4  # doubt about an interval that does not matter
_LONG = 1.6  # a step is long beyond this many typical ones; rounding alone makes 1.5


class StampFacts(NamedTuple):
    """What even time stamps say, in their own unit.

    Attributes
    ----------
    interval : float
        (last - first) / (n - 1); fitted to all stamps if their digits are too few for that.
    doubt : float
        Part of the interval by which rounding of the stamps may falsify it.
    quantum : float
        Step of the rounding; 0 if none shows.
    worst_residual : float
        Largest distance of a stamp from the even clock.
    remarks : tuple of str
    """

    interval: float
    doubt: float
    quantum: float
    worst_residual: float
    remarks: tuple[str, ...] = ()


def examine_stamps(
    stamps: FloatArray,
    *,
    interval: float | None,
    unit: str,
    all_change: Callable[[], bool],
    place: Callable[[int], str],
) -> StampFacts:
    """Judge time stamps.

    Parameters
    ----------
    stamps : float array, shape (n,)
        Time column as written.
    interval : float or None
        Sample interval as stated elsewhere, in the same unit.
    unit : str
        Unit of the stamps, for messages.
    all_change : callable
        Whether every row of voltages differs from the one before it.
    place : callable
        Where a sample stands in the file, for messages.

    Raises
    ------
    InputError
        If the stamps are not finite, do not rise, have a gap, stand in pairs, or are uneven.
    """
    n = stamps.size
    with np.errstate(invalid="ignore", over="ignore"):
        if not np.isfinite(stamps.sum()):
            bad = int(np.flatnonzero(~np.isfinite(stamps))[0]) if not np.isfinite(stamps).all() else 0
            raise _refusal("a time stamp is no finite number", place(bad))
    steps = np.diff(stamps)
    smallest, largest = float(steps.min()), float(steps.max())
    if smallest < 0 or largest == 0:
        raise _out_of_order(steps, stamps, place, unit)
    mean = float(stamps[-1] - stamps[0]) / (n - 1)
    if largest - smallest <= _FLOAT_NOISE * mean:
        return StampFacts(mean, (largest - smallest) / (mean * (n - 1)), largest - smallest, 0.0)
    repeats = n - 1 - int(np.count_nonzero(steps))
    _refuse_pairs(steps, repeats, mean, interval, unit=unit, place=place)
    worst, late = _worst_residual(stamps, mean)
    if repeats:
        # Rounded to few digits: no stamp is off by more than the largest step of rounding.
        others = float(np.max(steps, where=steps <= 0.75 * largest, initial=0.0))
        lonely = int(np.count_nonzero(steps > 0.75 * largest)) == 1 and largest > 2.5 * others > 0
        if lonely:
            raise _gap(steps, [int(steps.argmax())], others, unit=unit, place=place)
        if worst > 1.05 * largest:
            raise _uneven(worst, late, unit=unit, place=place)
        fitted, doubt, how = _interval_of_few_digits(stamps, mean, largest)
        remark = (
            f"time column has {repeats} repeated stamps (few digits: steps of {largest:.3g} {unit}, at worst "
            f"{worst:.2g} {unit} off the even clock); {how}"
        )
        return StampFacts(fitted, doubt, largest, worst, (remark,))
    typical = float(np.median(steps))
    jumps = np.flatnonzero(steps > _LONG * typical)
    if jumps.size and not _rounding_explains(jumps, typical, interval):
        raise _gap_or_changes(steps, typical, all_change, unit=unit, place=place)
    if worst > max(1.05 * (largest - smallest), 0.5 * mean):
        raise _uneven(worst, late, unit=unit, place=place)
    remarks = []
    if worst > 0.05 * mean:
        remarks.append(
            f"time stamps are rounded to steps of about {largest - smallest:.3g} {unit}; the worst is "
            f"{worst / mean:.2g} of a sample off the even clock"
        )
    quantum = largest - smallest
    return StampFacts(mean, quantum / (mean * (n - 1)), quantum, worst, tuple(remarks))


def _interval_of_few_digits(stamps: FloatArray, mean: float, quantum: float) -> tuple[float, float, str]:
    """Return the interval, its doubt, and where it was taken from.

    First and last stamp may each be off by the step of rounding q, so their mean step is in doubt by
    q / (last - first). Where that matters and each stamp stands several times, k = q / interval, the line of
    least squares through all stamps is better: the error of rounding is a sawtooth of k samples and turns
    the line by about (k / n)^2 of its slope.
    """
    n = stamps.size
    doubt = quantum / (mean * (n - 1))
    if doubt < FINE or quantum < 2 * mean:
        return mean, doubt, "interval taken from first and last"
    place = np.arange(n, dtype=np.float64)
    place -= 0.5 * (n - 1)
    slope = float(place @ stamps) / float(place @ place)
    return slope, 6 * (quantum / mean / n) ** 2, "interval fitted to all stamps"


def _refusal(what: str, where: str) -> InputError:
    return InputError(what, where=where, mend="Export every sample of one record, with more digits of time")


def _out_of_order(
    steps: FloatArray, stamps: FloatArray, place: Callable[[int], str], unit: str
) -> InputError:
    falls = np.flatnonzero(steps < 0)
    if not falls.size:
        return _refusal("the time column stands still", place(0))
    if falls.size == steps.size:
        return _refusal("time runs backwards", place(1))
    i = int(falls[0]) + 1
    return _refusal(
        f"time falls from {stamps[i - 1]:.7g} to {stamps[i]:.7g} {unit}: the rows are unsorted, or two "
        "records were joined",
        place(i),
    )


def _refuse_pairs(
    steps: FloatArray,
    repeats: int,
    mean: float,
    interval: float | None,
    *,
    unit: str,
    place: Callable[[int], str],
) -> None:
    """Refuse stamps that stand exactly twice each: the smallest and the largest value of a span of time."""
    if repeats != (steps.size + 1) // 2 or steps[0::2].any():
        return
    if interval is not None and abs(interval - mean) <= max(_AGREEMENT, 2 / steps.size) * mean:
        return  # stated elsewhere: the stamps merely have few digits
    raise _refusal(
        f"every time stamp stands exactly twice, {2 * mean:.3g} {unit} apart: this is an export of the "
        "smallest and largest values, or its stamps have too few digits",
        place(0),
    )


def _worst_residual(stamps: FloatArray, mean: float) -> tuple[float, int]:
    """Return the largest distance from the line through first and last stamp, and where it is."""
    residual = np.arange(stamps.size, dtype=np.float64)
    residual *= -mean
    residual += stamps
    residual -= stamps[0]
    np.abs(residual, out=residual)
    worst = int(residual.argmax())
    return float(residual[worst]), worst


def _rounding_explains(jumps: NDArray[np.intp], typical: float, interval: float | None) -> bool:
    """Whether long steps come from rounding: its step is just below the interval, and the jumps are even.

    An interval of 1.02 us written in whole microseconds jumps by two after every 50 samples, give or take
    one; lost samples do so at random places, or not three times.
    """
    between = np.diff(jumps)
    if between.size < 2 or between.max() - between.min() > 2:
        return False
    if interval is not None and abs(interval - typical) < 0.25 * typical * jumps.size / jumps[-1]:
        return False
    decade = np.log10(typical)
    return bool(abs(decade - round(decade)) <= 1e-3)


def _uneven(worst: float, sample: int, *, unit: str, place: Callable[[int], str]) -> InputError:
    return _refusal(
        f"the samples are not evenly spaced: a stamp is {worst:.3g} {unit} off the even clock", place(sample)
    )


def _gap(
    steps: FloatArray,
    jumps: Sequence[int] | NDArray[np.intp],
    typical: float,
    *,
    unit: str,
    place: Callable[[int], str],
) -> InputError:
    first = int(jumps[0])
    more = f", and {len(jumps) - 1} more times" if len(jumps) > 1 else ""
    return _refusal(
        f"samples are missing: time jumps by {steps[first]:.6g} {unit} where the step is {typical:.6g} {unit}"
        f"{more}",
        place(first + 1),
    )


def _gap_or_changes(
    steps: FloatArray,
    typical: float,
    all_change: Callable[[], bool],
    *,
    unit: str,
    place: Callable[[int], str],
) -> InputError:
    jumps = np.flatnonzero(steps > _LONG * typical)
    if jumps.size <= 0.01 * steps.size:
        return _gap(steps, jumps, typical, unit=unit, place=place)
    where = place(int(jumps[0]) + 1)
    times = steps[jumps] / typical
    whole_times = np.mean(np.abs(times - np.rint(times)) < 0.1) > 0.9
    if whole_times and all_change():
        return _refusal(
            f"{jumps.size} steps of time are longer than the others and every row differs from the one "
            "before: this is an export of changes only",
            where,
        )
    return _refusal(
        f"the samples are not evenly spaced: {jumps.size} of {steps.size} steps are longer than the others",
        where,
    )
