"""One even clock, or a plain sentence that says why not."""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.record.read import read_record
from shpb.record.record import Record
from shpb.rig.rig import RecordHints
from tests.record.writing import rows, truth, write

N = 5000
TRUE = truth(samples=N)


def read(
    folder: Path,
    stamps: Sequence[float] | np.ndarray,
    *,
    head: str = "Time (us),CH1 (V),CH2 (V)\n",
    digits: str = "{:.4f}",
    hints: RecordHints | None = None,
    voltage: np.ndarray = TRUE.voltage_v,
) -> Record:
    text = head + rows(stamps, voltage[:, : len(stamps)], time_format=digits.format)
    return read_record(write(folder / "a.csv", text), hints or RecordHints())


@pytest.mark.parametrize("interval_us", [0.1, 0.2, 0.123, 1.0, 0.01])
def test_interval_and_start_of_exact_stamps(tmp_path: Path, interval_us: float) -> None:
    record = read(tmp_path, -40.0 + interval_us * np.arange(N))
    # Four decimals: first and last are each off by half a unit of the fourth at most.
    assert record.sample_interval_s == pytest.approx(interval_us * 1e-6, abs=1e-10 / (N - 1))
    assert record.start_s == pytest.approx(-40e-6, abs=1e-12)
    assert record.time_s[-1] == pytest.approx((-40.0 + interval_us * (N - 1)) * 1e-6, abs=1e-10)


@pytest.mark.parametrize("shorten", [np.floor, np.rint], ids=["cut", "rounded"])
@pytest.mark.parametrize(
    "interval", [0.07, 0.1, 0.2, 0.32, 0.5001, 0.95, 0.999, 1.0, 1.02, 1.3, 1.5, 1.7, 2.5]
)
def test_stamps_with_few_digits(
    tmp_path: Path, interval: float, shorten: Callable[[np.ndarray], np.ndarray]
) -> None:
    """Whole microseconds, whatever the interval: the interval is found, never from the commonest step."""
    stamps = shorten(interval * np.arange(N) + 0.3)
    record = read(tmp_path, stamps, digits="{:.0f}")
    # The last stamp is off by 1 at most: 1 / (0.95 x 5000) = 2e-4 of an interval near 1; where
    # stamps repeat more than twice, all of them are used.
    assert record.sample_interval_s == pytest.approx(interval * 1e-6, rel=5e-4)
    repeats = int(np.count_nonzero(np.diff(stamps) == 0))
    assert any(f"{repeats} repeated stamps" in remark for remark in record.remarks) == (repeats > 0)


def test_the_remark_about_repeated_stamps(tmp_path: Path) -> None:
    record = read(tmp_path, np.floor(0.95 * np.arange(N)), digits="{:.0f}")
    assert record.remarks == (
        "time column has 250 repeated stamps (few digits: steps of 1 us, at worst 0.95 us off the even "
        "clock); interval taken from first and last",
    )


def test_significant_digits_instead_of_decimals(tmp_path: Path) -> None:
    # Four significant digits: the step of rounding grows from decade to decade.
    record = read(tmp_path, 0.2 * np.arange(N), digits="{:.3e}")
    assert record.sample_interval_s == pytest.approx(2e-7, rel=1e-3)


def test_too_few_digits_for_an_interval(tmp_path: Path) -> None:
    stamps = np.floor(0.2 * np.arange(100) / 5) * 5
    message = "the time stamps have too few digits: steps of 5e-06 s give the sample interval"
    with pytest.raises(InputError, match=re.escape(message)):
        read(tmp_path, stamps)
    assert read(tmp_path, stamps, hints=RecordHints(sample_interval_s=2e-7)).sample_interval_s == 2e-7
    head = "Sample Interval,2e-7,s\nTime (us),CH1 (V),CH2 (V)\n"
    assert read(tmp_path, stamps, head=head).sample_interval_s == 2e-7


def test_header_interval_comes_first(tmp_path: Path) -> None:
    head = "Sample Interval,2.0001e-7,s\nTime (us),CH1 (V),CH2 (V)\n"
    assert read(tmp_path, 0.2 * np.arange(N), head=head).sample_interval_s == 2.0001e-7


def test_header_and_column_must_agree(tmp_path: Path) -> None:
    head = "Sample Interval,2.005e-7,s\nTime (us),CH1 (V),CH2 (V)\n"
    message = "the header states a sample interval of 2.005e-07 s, the time column 2e-07 s"
    with pytest.raises(InputError, match=re.escape(message)):
        read(tmp_path, 0.2 * np.arange(N), head=head)


def test_header_start_that_is_not_the_first_stamp(tmp_path: Path) -> None:
    head = "Trigger Offset,5e-6,s\nTime (us),CH1 (V),CH2 (V)\n"
    record = read(tmp_path, 0.2 * np.arange(N), head=head)
    assert record.start_s == 0.0
    assert (
        "the header states a start of 5e-06 s, the time column begins at 0 s, which was used"
        in record.remarks
    )


@pytest.mark.parametrize(
    ("hints", "message"),
    [
        (
            RecordHints(sample_interval_s=2.01e-7),
            "the record's sample interval is 2e-07 s, the rig file or sheet states 2.01e-07 s",
        ),
        (
            RecordHints(trigger_offset_s=1e-6),
            "the record begins at 0 s, the rig file or sheet states 1e-06 s",
        ),
        (RecordHints(time_unit="ms"), "the time unit is us in its column, ms in the rig file or sheet"),
    ],
)
def test_hints_must_agree_with_the_record(tmp_path: Path, hints: RecordHints, message: str) -> None:
    with pytest.raises(InputError, match=re.escape(message)):
        read(tmp_path, 0.2 * np.arange(N), hints=hints)


def test_hints_that_agree(tmp_path: Path) -> None:
    hints = RecordHints(sample_interval_s=2.0001e-7, trigger_offset_s=1e-7, time_unit="us")
    assert read(tmp_path, 0.2 * np.arange(N), hints=hints).sample_interval_s == pytest.approx(2e-7, rel=1e-9)


def test_no_interval_anywhere(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="there is no time column and no sample interval"):
        read_record(write(tmp_path / "a.csv", rows(None, TRUE.voltage_v)))


def test_time_without_unit(tmp_path: Path) -> None:
    head, stamps = "Time,CH1 (V),CH2 (V)\n", 0.2 * np.arange(N)
    with pytest.raises(InputError, match=re.escape("the time column has no unit, in steps of 0.2")):
        read(tmp_path, stamps, head=head)
    for hints in (RecordHints(time_unit="us"), RecordHints(sample_interval_s=2e-7)):
        record = read(tmp_path, stamps, head=head, hints=hints)
        assert record.sample_interval_s == pytest.approx(2e-7, rel=1e-9)
    # The header's interval settles the unit as well.
    record = read(tmp_path, stamps, head="dt = 2e-7 s\n" + head)
    assert record.time_s[-1] == pytest.approx(2e-7 * (N - 1), rel=1e-9)
    # In steps this short only seconds make sense, which is said.
    record = read(tmp_path, 2e-7 * np.arange(N), head=head, digits="{:.9e}")
    assert record.remarks == ("the unit of time is not stated; taken as s, samples 2e-07 s apart",)


def test_sample_numbers_without_an_interval(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="the first column counts samples, in steps of 1"):
        read(tmp_path, np.arange(N), head="", digits="{:.0f}")


# --- no even clock ----------------------------------------------------------------------------------

EVEN = 0.2 * np.arange(N)


def gap(at: int, lost: int) -> np.ndarray:
    return EVEN + 0.2 * lost * (np.arange(N) >= at)


def swapped() -> np.ndarray:
    stamps = EVEN.copy()
    stamps[[700, 701]] = stamps[[701, 700]]
    return stamps


def kept_on_change() -> np.ndarray:
    kept = np.random.default_rng(3).random(2 * N) < 0.7
    return 0.2 * np.flatnonzero(kept)[:N]


REFUSED = {
    "one lost sample": (
        gap(1000, 1),
        "line 1002: samples are missing: time jumps by 0.4 us where the step is 0.2",
    ),
    "a lost block": (gap(4000, 512), "line 4002: samples are missing: time jumps by 102.6 us"),
    "two lost blocks": (gap(4000, 9) + gap(100, 9) - EVEN, "line 102: samples are missing"),
    "two records joined": (
        np.concatenate([EVEN[:3000], EVEN[:2000]]),
        "line 3002: time falls from 599.8 to 0 us",
    ),
    "two rows swapped": (swapped(), "line 703: time falls from 140.2 to 140 us: the rows are unsorted"),
    "backwards": (-EVEN, "time runs backwards"),
    "standing still": (0 * EVEN, "the time column stands still"),
    "pairs": (np.repeat(EVEN[: N // 2], 2), "every time stamp stands exactly twice, 0.2 us apart"),
    "changes only": (kept_on_change(), "this is an export of changes only"),
    "a drifting clock": (EVEN * (1 + EVEN / 3e3), "the samples are not evenly spaced"),
}


@pytest.mark.parametrize(("stamps", "message"), REFUSED.values(), ids=REFUSED.keys())
def test_stamps_that_are_refused(tmp_path: Path, stamps: np.ndarray, message: str) -> None:
    with pytest.raises(InputError, match=re.escape(message)):
        read(tmp_path, stamps)


def test_gap_in_whole_microseconds(tmp_path: Path) -> None:
    # A step of 1 us is also what rounding to whole microseconds leaves; one long step is a gap all the same.
    with pytest.raises(InputError, match="samples are missing: time jumps by 2 us where the step is 1 us"):
        read(tmp_path, np.arange(N) + (np.arange(N) > 77), digits="{:.0f}")


def test_gap_among_repeated_stamps(tmp_path: Path) -> None:
    stamps = np.floor(0.2 * np.arange(N)) + 40 * (np.arange(N) > 2500)
    with pytest.raises(InputError, match="samples are missing"):
        read(tmp_path, stamps, digits="{:.0f}")


def test_uneven_steps_with_repeated_rows_are_not_called_changes_only(tmp_path: Path) -> None:
    voltage = TRUE.voltage_v.copy()
    voltage[:, 1::7] = voltage[:, 0:-1:7]
    with pytest.raises(InputError, match="the samples are not evenly spaced"):
        read(tmp_path, kept_on_change(), voltage=voltage)


def test_pairs_that_the_header_explains(tmp_path: Path) -> None:
    stamps = np.repeat(EVEN[: N // 2], 2)
    record = read(tmp_path, stamps, head="dt,1e-7\nTime (us),CH1 (V),CH2 (V)\n")
    assert record.sample_interval_s == 1e-7
    with pytest.raises(InputError, match="every time stamp stands exactly twice"):
        read(tmp_path, stamps, head="dt,2e-7\nTime (us),CH1 (V),CH2 (V)\n")


@pytest.mark.parametrize("names", ["CH1 min,CH1 max", "Min (V),Max (V)", "CH1_minimum,CH1_maximum"])
def test_columns_of_smallest_and_largest_values(tmp_path: Path, names: str) -> None:
    with pytest.raises(InputError, match="are smallest and largest values of spans of time, no samples"):
        read(tmp_path, EVEN, head=f"Time (us),{names}\n")


def test_an_infinite_stamp(tmp_path: Path) -> None:
    stamps = EVEN.copy()
    stamps[20] = np.inf
    with pytest.raises(InputError, match="line 22: a time stamp is no finite number"):
        read(tmp_path, stamps)


def test_two_clocks_in_one_file(tmp_path: Path) -> None:
    text = "Time (us),CH1 (V),Time 2 (us),CH2 (V)\n" + rows(
        EVEN, [TRUE.voltage_v[0], EVEN + 0.1, TRUE.voltage_v[1]], time_format="{:.4f}".format
    )
    with pytest.raises(InputError, match="'Time' and 'Time 2' are two different clocks"):
        read_record(write(tmp_path / "a.csv", text))


def test_single_precision_stamps(tmp_path: Path) -> None:
    stamps = (2e-7 * np.arange(N)).astype(np.float32)
    path = tmp_path / "a.npz"
    np.savez(path, time_s=stamps, a=TRUE.voltage_v[0])
    assert read_record(path).sample_interval_s == pytest.approx(2e-7, rel=1e-6)
