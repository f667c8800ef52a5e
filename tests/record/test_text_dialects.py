"""Every dialect of delimited text gives the record that was written."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from shpb.record.read import read_record
from shpb.record.record import Record
from shpb.rig.rig import RecordHints
from tests.record.writing import INTERVAL_S, START_S, Truth, rows, truth, write

TRUE = truth()
NAMES = ("CH1", "CH2")


def check(record: Record, true: Truth = TRUE, names: tuple[str, ...] = NAMES, *, start: bool = True) -> None:
    # Ten digits were written: an absolute half unit of the tenth digit of values below 10 V.
    np.testing.assert_allclose(record.voltage_v, true.voltage_v, rtol=0, atol=5e-10)
    assert record.voltage_v.flags.c_contiguous
    assert record.voltage_v.dtype == np.float64
    assert record.channels == names
    assert record.sample_interval_s == pytest.approx(true.interval_s, rel=1e-7)
    if start:
        assert record.start_s == pytest.approx(true.start_s, rel=1e-9)


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize(("sep", "decimal"), [(",", "."), (";", "."), (";", ","), ("\t", "."), ("\t", ",")])
@pytest.mark.parametrize(
    ("unit", "scale"), [("s", 1.0), ("ms", 1e3), ("us", 1e6), ("µs", 1e6), ("μs", 1e6), ("ns", 1e9)]
)
def test_delimiters_decimal_marks_line_ends_and_time_units(
    tmp_path: Path, *, sep: str, decimal: str, end: str, unit: str, scale: float
) -> None:
    head = sep.join([f"Time ({unit})", "CH1 (V)", "CH2 (V)"]) + end
    text = head + rows(TRUE.time_s * scale, TRUE.voltage_v, sep=sep, decimal=decimal, end=end)
    record = read_record(write(tmp_path / "a.csv", text))
    check(record)
    assert record.remarks == ()


@pytest.mark.parametrize("encoding", ["utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "latin-1", "cp1252"])
@pytest.mark.parametrize("header", [True, False])
def test_encodings(tmp_path: Path, encoding: str, header: bool) -> None:
    text = rows(TRUE.time_s, TRUE.voltage_v, end="\r\n")
    text = ("Zeit µ,x\r\nTime (s),CH1 (V),CH2 (V)\r\n" if header else "") + text
    check(read_record(write(tmp_path / "a.csv", text, encoding)))


@pytest.mark.parametrize("sep", ["  ", " ", "\t ", "     "])
@pytest.mark.parametrize("decimal", [".", ","])
def test_blanks_between_columns(tmp_path: Path, sep: str, decimal: str) -> None:
    text = "# Time (us)   CH1 (V)   CH2 (V)\n" + rows(
        TRUE.time_s * 1e6, TRUE.voltage_v, sep=sep, decimal=decimal, value_format="{: .9e}".format
    )
    check(read_record(write(tmp_path / "a.txt", text)))


@pytest.mark.parametrize("tail", [",", ",,,"])
def test_trailing_empty_columns(tmp_path: Path, tail: str) -> None:
    text = f"Time (s),CH1 (V),CH2 (V){tail}\n" + rows(TRUE.time_s, TRUE.voltage_v, tail=tail)
    check(read_record(write(tmp_path / "a.csv", text)))


@pytest.mark.parametrize("decimal", [".", ","])
def test_numbers_in_quotation_marks(tmp_path: Path, decimal: str) -> None:
    text = rows(TRUE.time_s, TRUE.voltage_v, sep='","', decimal=decimal)
    body = "".join(f'"{line}"\n' for line in text.splitlines())
    check(read_record(write(tmp_path / "a.csv", '"Time (s)","CH1 (V)","CH2 (V)"\n' + body)))


def test_units_in_a_row_of_their_own(tmp_path: Path) -> None:
    text = "Time;CH1;CH2\n(ms);(mV);(V)\n\n" + rows(
        TRUE.time_s * 1e3, [TRUE.voltage_v[0] * 1e3, TRUE.voltage_v[1]], sep=";", decimal=","
    )
    check(read_record(write(tmp_path / "a.csv", text)))


def test_units_above_the_names(tmp_path: Path) -> None:
    text = "us,V,mV\ntime,CH1,CH2\n" + rows(TRUE.time_s * 1e6, [TRUE.voltage_v[0], TRUE.voltage_v[1] * 1e3])
    check(read_record(write(tmp_path / "a.csv", text)))


@pytest.mark.parametrize(
    "label",
    ["CH1 (V)", "CH1 [V]", "CH1 / V", "CH1 in V", "CH1 (Volts)", '"CH1, V"', " CH1  ( V ) "],
)
def test_unit_is_taken_off_the_name(tmp_path: Path, label: str) -> None:
    text = f"t / s;{label}\n" + rows(TRUE.time_s, TRUE.voltage_v[:1], sep=";")
    check(read_record(write(tmp_path / "a.csv", text)), Truth(TRUE.voltage_v[:1]), ("CH1",))


def test_unit_within_a_name_is_read_and_stays(tmp_path: Path) -> None:
    text = "time_us,incident_mV,transmitted_V\n" + rows(
        TRUE.time_s * 1e6, [TRUE.voltage_v[0] * 1e3, TRUE.voltage_v[1]]
    )
    check(read_record(write(tmp_path / "a.csv", text)), names=("incident_mV", "transmitted_V"))


PREAMBLES = {
    "pairs": (
        "Model,A-12\nFirmware,1.2\nDate,2031-02-03\nRecord Length,400\nSample Interval,2.0e-7,s\n"
        "Trigger Offset,-2.0e-5,s\nVertical Units,V,V\n\nCH1,CH2\n"
    ),
    "equals signs": "# dt = 2e-7 s\n# t0 = -20 us\n# CH1, CH2\n",
    "colons and a rate": "Sampling rate: 5 MS/s\nStart time: -0.02 ms\nPoints: 400\nCH1,CH2\n",
    "samples before the trigger": "Sample Rate (MHz),5\nPre-trigger samples,100\nCH1,CH2\n",
    "units in keys": "sample_interval_us,0.2\nstart_us,-20\nCH1,CH2\n",
    "key and number": "Record length     400\nSample interval   2e-7 s\nTime offset   -2e-5\nCH1,CH2\n",
    "horizontal units": "Sample Interval,0.2\nTrigger Offset,-20\nHorizontal Units,µs\nUnits,V,V\nCH1,CH2\n",
    "other separator": "Sample Interval;2e-7\nTrigger Offset;-2e-5\nCH1,CH2\n",
    "said twice": "Sample interval,2e-7\nSampling frequency,5 MHz\nTrigger offset,-2e-5\nCH1,CH2\n",
}


@pytest.mark.parametrize("preamble", PREAMBLES.values(), ids=PREAMBLES.keys())
@pytest.mark.parametrize("with_time", [False, True])
def test_preambles(tmp_path: Path, preamble: str, with_time: bool) -> None:
    if with_time:
        preamble = preamble.replace("CH1,", "Time,CH1,")
        preamble = preamble.replace("Units,V,V", "Units,s,V,V") if "Horizontal" not in preamble else preamble
    scale = 1e6 if "Horizontal" in preamble else 1.0
    text = preamble + rows(TRUE.time_s * scale if with_time else None, TRUE.voltage_v)
    check(read_record(write(tmp_path / "a.csv", text)))


def test_preamble_beside_the_numbers(tmp_path: Path) -> None:
    beside = ["Record Length,400,", "Sample Interval,2e-07,s", "Trigger Offset,-2e-5,s", "Vertical Units,V,"]
    lines = rows(TRUE.time_s, TRUE.voltage_v).splitlines()
    text = "".join(f"{beside[i] if i < len(beside) else ',,'},{line},\n" for i, line in enumerate(lines))
    check(read_record(write(tmp_path / "a.csv", text)))


def test_preamble_in_decimal_commas(tmp_path: Path) -> None:
    text = "Abtastung;x\nSample Interval;0,2 us\nTrigger Offset;-20,0 us\nCH1;CH2\n" + rows(
        None, TRUE.voltage_v, sep=";", decimal=","
    )
    check(read_record(write(tmp_path / "a.csv", text)))


def test_decimal_comma_that_shows_late(tmp_path: Path) -> None:
    # 64 KiB of zeros before the trigger: the head alone cannot tell the decimal mark.
    quiet = "0;0\n" * 20_000
    text = "dt;2e-7\nCH1;CH2\n" + quiet + rows(None, TRUE.voltage_v, sep=";", decimal=",")
    record = read_record(write(tmp_path / "a.csv", text))
    np.testing.assert_allclose(record.voltage_v[:, 20_000:], TRUE.voltage_v, rtol=0, atol=5e-10)


def test_one_column_of_decimal_commas(tmp_path: Path) -> None:
    text = rows(None, TRUE.voltage_v[:1], decimal=",", value_format="{:.9f}".format)
    record = read_record(
        write(tmp_path / "a.csv", text), RecordHints(sample_interval_s=INTERVAL_S, trigger_offset_s=START_S)
    )
    check(record, Truth(TRUE.voltage_v[:1]), ("CH1",))


def test_no_header_at_all(tmp_path: Path) -> None:
    record = read_record(write(tmp_path / "a.csv", rows(TRUE.time_s, TRUE.voltage_v)))
    check(record)
    assert "the unit of CH1, CH2 is not stated; taken as V" in record.remarks


def test_no_time_column_and_hints(tmp_path: Path) -> None:
    hints = RecordHints(sample_interval_s=INTERVAL_S, trigger_offset_s=START_S, channel_names=("in", "out"))
    record = read_record(write(tmp_path / "a.csv", rows(None, TRUE.voltage_v)), hints)
    check(record, names=("in", "out"))


def test_sample_numbers_are_no_channel(tmp_path: Path) -> None:
    text = "Sample,CH1,CH2\n" + rows(range(400), TRUE.voltage_v, time_format="{:.0f}".format)
    record = read_record(write(tmp_path / "a.csv", text), RecordHints(sample_interval_s=INTERVAL_S))
    check(record, start=False)
    assert record.start_s == 0.0


def test_sample_numbers_beside_time(tmp_path: Path) -> None:
    lines = rows(TRUE.time_s, TRUE.voltage_v).splitlines()
    text = "Index,Time (s),CH1 (V),CH2 (V)\n" + "".join(f"{i},{line}\n" for i, line in enumerate(lines))
    check(read_record(write(tmp_path / "a.csv", text)))


def test_time_column_before_each_channel(tmp_path: Path) -> None:
    text = "Time (s),CH1 (V),Time (s),CH2 (V)\n" + rows(
        TRUE.time_s, [TRUE.voltage_v[0], TRUE.time_s, TRUE.voltage_v[1]]
    )
    check(read_record(write(tmp_path / "a.csv", text)))


def test_a_channel_called_t_is_no_time(tmp_path: Path) -> None:
    text = "Time (s),I (V),T (V)\n" + rows(TRUE.time_s, TRUE.voltage_v)
    check(read_record(write(tmp_path / "a.csv", text)), names=("I", "T"))
    hints = RecordHints(sample_interval_s=INTERVAL_S, trigger_offset_s=START_S)
    check(
        read_record(write(tmp_path / "b.csv", "I,T\n" + rows(None, TRUE.voltage_v)), hints), names=("I", "T")
    )


def test_extra_channels_stay_and_other_quantities_go(tmp_path: Path) -> None:
    true = truth(channels=4)
    text = "Time (s),CH1 (V),CH2 (V),aux (V),Force (kN)\n" + rows(true.time_s, true.voltage_v)
    record = read_record(write(tmp_path / "a.csv", text))
    check(record, Truth(true.voltage_v[:3]), ("CH1", "CH2", "aux"))
    assert record.remarks == ("column 'Force' is in kN, no voltage, and was left out",)


def test_a_column_of_nothing_but_nan_is_left_out(tmp_path: Path) -> None:
    text = "Time (s),CH1 (V),CH2 (V),CH3 (V)\n" + rows(TRUE.time_s, TRUE.voltage_v, tail=",NaN")
    record = read_record(write(tmp_path / "a.csv", text))
    check(record)
    assert record.remarks == ("column 'CH3' holds no numbers and was left out",)


def test_blank_lines_at_the_end_and_every_other_line(tmp_path: Path) -> None:
    body = "Time (s),CH1 (V),CH2 (V)\n" + rows(TRUE.time_s, TRUE.voltage_v)
    check(read_record(write(tmp_path / "a.csv", body + "\n\n \n")))
    # CR CR LF, as text written twice through a line-end translation has it.
    check(read_record(write(tmp_path / "b.csv", body.replace("\n", "\r\r\n"))))


def test_a_name_that_promises_another_content(tmp_path: Path) -> None:
    text = "Time (s),CH1 (V),CH2 (V)\n" + rows(TRUE.time_s, TRUE.voltage_v)
    for name in ("shot.npz", "shot.h5", "shot.gz", "shot", "shot #1 [a].csv"):
        record = read_record(write(tmp_path / name, text))
        check(record)
        assert record.sources[0].reader == "text"
        assert record.sources[0].name == name


def test_every_digit_is_kept(tmp_path: Path) -> None:
    text = "time_s,a_V\n" + rows(TRUE.time_s, TRUE.voltage_v[:1], time_format=repr, value_format=repr)
    record = read_record(write(tmp_path / "a.csv", text))
    assert np.array_equal(record.voltage_v[0], TRUE.voltage_v[0])
