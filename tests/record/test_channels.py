"""Names, units, digitiser codes and samples over range."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.record.read import read_record
from shpb.rig.rig import RecordHints
from tests.record.writing import INTERVAL_S, rows, truth, write

TRUE = truth(samples=3000)
NO_TIME = RecordHints(sample_interval_s=INTERVAL_S)


def with_cells(marks: dict[tuple[int, int], str], head: str = "Time (s),CH1 (V),CH2 (V)\n") -> str:
    """The record as text with some cells, by row and column counted from 0, replaced."""
    lines = [line.split(",") for line in rows(TRUE.time_s, TRUE.voltage_v).splitlines()]
    for (row, column), mark in marks.items():
        lines[row][column] = mark
    return head + "\n".join(map(",".join, lines)) + "\n"


# --- over range -------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("mark", "side"),
    [
        ("inf", 1), ("+inf", 1), ("-inf", -1), ("Infinity", 1), ("1.#INF", 1), ("-1.#INF", -1), ("∞", 1),
        ("+OL", 1), ("-OL", -1), ("+OVER", 1), ("-over-range", -1), ("+Overflow", 1), ("UNDER", -1),
        ("1.#INF00", 1), ("+CLIP", 1),
    ],
)  # fmt: skip
@pytest.mark.parametrize("row", [3, 2900])  # within and beyond the first 64 KiB
def test_marked_samples_stand_at_the_rail_and_are_counted(
    tmp_path: Path, mark: str, side: int, row: int
) -> None:
    text = with_cells({(row, 2): mark, (row + 1, 2): mark})
    record = read_record(write(tmp_path / "a.csv", text))
    others = np.delete(TRUE.voltage_v[1], [row, row + 1])
    rail = others.max() if side > 0 else others.min()
    np.testing.assert_allclose(record.voltage_v[1, row : row + 2], rail, atol=5e-10)
    np.testing.assert_allclose(np.delete(record.voltage_v[1], [row, row + 1]), others, atol=5e-10)
    np.testing.assert_allclose(record.voltage_v[0], TRUE.voltage_v[0], atol=5e-10)
    assert len(record.remarks) == 1
    assert record.remarks[0].startswith(
        f"channel 'CH2': 2 samples over range, the first at line {row + 2}, set to"
    )


@pytest.mark.parametrize("mark", ["****", "OVER", "OL", "overload", "####"])
def test_a_mark_without_side_takes_the_side_of_the_samples_before_it(tmp_path: Path, mark: str) -> None:
    up = int(np.argmax(TRUE.voltage_v[0])) + 1
    down = int(np.argmin(TRUE.voltage_v[0])) + 1
    record = read_record(write(tmp_path / "a.csv", with_cells({(up, 1): mark, (down, 1): mark})))
    assert record.voltage_v[0, up] == pytest.approx(TRUE.voltage_v[0].max(), abs=5e-10)
    assert record.voltage_v[0, down] == pytest.approx(TRUE.voltage_v[0].min(), abs=5e-10)
    assert sum("1 sample over range" in remark for remark in record.remarks) == 2


def test_a_clipped_pulse_is_flat_and_reaches_the_full_scale(tmp_path: Path) -> None:
    marks = {(row, 1): "+OL" for row in range(100, 150)}
    text = with_cells(marks, head="Full scale,±5 V\nTime (s),CH1 (V),CH2 (V)\n")
    record = read_record(write(tmp_path / "a.csv", text))
    assert np.all(record.voltage_v[0, 100:150] == 5.0)
    assert record.remarks == (
        "channel 'CH1': 50 samples over range, the first at line 103, set to the rail of 5 V",
    )


def test_marks_and_decimal_commas(tmp_path: Path) -> None:
    text = with_cells({(7, 1): "-OL"}).replace(",", ";").replace(".", ",")
    record = read_record(write(tmp_path / "a.csv", text))
    assert record.voltage_v[0, 7] == pytest.approx(np.delete(TRUE.voltage_v[0], 7).min(), abs=5e-10)


def test_rail_of_a_side_that_no_sample_reaches(tmp_path: Path) -> None:
    positive = np.abs(TRUE.voltage_v)
    text = "Time (s),CH1 (V),CH2 (V)\n" + rows(TRUE.time_s, positive)
    lines = text.splitlines()
    stamp, _, other = lines[50].split(",")
    lines[50] = f"{stamp},-inf,{other}"
    record = read_record(write(tmp_path / "a.csv", "\n".join(lines) + "\n"))
    assert record.voltage_v[0, 49] == pytest.approx(-np.delete(positive[0], 49).max(), abs=5e-10)


def test_nothing_but_over_range(tmp_path: Path) -> None:
    text = "Time (s),CH1 (V),CH2 (V)\n" + rows(TRUE.time_s, TRUE.voltage_v[:1], tail=",inf")
    with pytest.raises(InputError, match="channel 'CH2': every sample is over range"):
        read_record(write(tmp_path / "a.csv", text))


def test_nan_in_an_array_file(tmp_path: Path) -> None:
    voltage = TRUE.voltage_v.copy()
    voltage[1, 41] = np.nan
    np.savez(tmp_path / "a.npz", time_s=TRUE.time_s, a=voltage[0], b=voltage[1])
    with pytest.raises(InputError, match="sample 42: channel 'b' holds NaN, no number, in 1 of 3000 samples"):
        read_record(tmp_path / "a.npz")


def test_nan_is_not_hidden_by_infinities(tmp_path: Path) -> None:
    text = with_cells({(5, 1): "inf", (6, 1): "-inf", (7, 1): "nan"})
    with pytest.raises(InputError, match="line 9: channel 'CH1' holds NaN"):
        read_record(write(tmp_path / "a.csv", text))


# --- units ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("unit", "scale"), [("V", 1.0), ("mV", 1e3), ("uV", 1e6), ("µV", 1e6), ("kV", 1e-3)])
def test_units_of_voltage_in_file_or_hint(tmp_path: Path, unit: str, scale: float) -> None:
    text = f"Time (s),CH1 ({unit}),CH2 ({unit})\n" + rows(TRUE.time_s, TRUE.voltage_v * scale)
    record = read_record(write(tmp_path / "a.csv", text))
    np.testing.assert_allclose(record.voltage_v, TRUE.voltage_v, rtol=0, atol=5e-9)
    hint = RecordHints(voltage_unit=unit)
    record = read_record(write(tmp_path / "a.csv", text.replace(f" ({unit})", "")), hint)
    np.testing.assert_allclose(record.voltage_v, TRUE.voltage_v, rtol=0, atol=5e-9)


def test_file_and_hint_must_agree_on_the_unit(tmp_path: Path) -> None:
    path = write(tmp_path / "a.csv", with_cells({}))
    with pytest.raises(InputError, match="channel 'CH1': the file states V, the rig file or sheet mV"):
        read_record(path, RecordHints(voltage_unit="mV"))
    with pytest.raises(InputError, match="voltage unit: the unit 'volts/s' is not one of V, mV, uV, kV"):
        read_record(path, RecordHints(voltage_unit="volts/s"))


def test_units_stated_once_a_channel(tmp_path: Path) -> None:
    text = "Vertical Units,V,mV\nTime (s),CH1,CH2\n" + rows(
        TRUE.time_s, [TRUE.voltage_v[0], 1e3 * TRUE.voltage_v[1]]
    )
    record = read_record(write(tmp_path / "a.csv", text))
    np.testing.assert_allclose(record.voltage_v, TRUE.voltage_v, rtol=0, atol=5e-9)
    with pytest.raises(InputError, match="the header states 4 voltage units for 2 channels"):
        read_record(write(tmp_path / "a.csv", text.replace("V,mV\n", "V,V,V,mV\n")))


# --- digitiser codes --------------------------------------------------------------------------------

CODES = np.rint(TRUE.voltage_v * 1000).astype(int)
CODE_TEXT = "CH1,CH2\n" + rows(None, CODES, value_format="{:.0f}".format)


def test_codes_need_volts_per_code(tmp_path: Path) -> None:
    path = write(tmp_path / "a.csv", CODE_TEXT)
    message = "channel 'CH1': the samples are whole numbers of no stated unit, as digitiser codes are"
    with pytest.raises(InputError, match=re.escape(message)):
        read_record(path, NO_TIME)


@pytest.mark.parametrize("per_code", [(2e-3,), (2e-3, 5e-4)])
def test_codes_with_a_hint(tmp_path: Path, per_code: tuple[float, ...]) -> None:
    hints = RecordHints(sample_interval_s=INTERVAL_S, volts_per_code=per_code)
    record = read_record(write(tmp_path / "a.csv", CODE_TEXT), hints)
    np.testing.assert_allclose(record.voltage_v[0], CODES[0] * 2e-3, rtol=1e-12)
    np.testing.assert_allclose(record.voltage_v[1], CODES[1] * per_code[-1], rtol=1e-12)
    assert f"channel 'CH2': digitiser codes times {per_code[-1]:g} V" in record.remarks


def test_codes_with_zero_and_offset_in_the_header(tmp_path: Path) -> None:
    head = "dt,2e-7\nVolts per code (mV),2,0.5\nCode at zero volts,128\nVoltage at code zero,0.25\nUnits,V\n"
    record = read_record(write(tmp_path / "a.csv", head + CODE_TEXT))
    np.testing.assert_allclose(record.voltage_v[0], (CODES[0] - 128) * 2e-3 + 0.25, atol=1e-12)
    np.testing.assert_allclose(record.voltage_v[1], (CODES[1] - 128) * 5e-4 + 0.25, atol=1e-12)


def test_over_range_among_codes(tmp_path: Path) -> None:
    lines = CODE_TEXT.splitlines()
    lines[31] = f"+OL,{CODES[1, 30]}"
    hints = RecordHints(sample_interval_s=INTERVAL_S, volts_per_code=(1e-3,))
    record = read_record(write(tmp_path / "a.csv", "\n".join(lines) + "\n"), hints)
    assert record.voltage_v[0, 30] == pytest.approx(np.delete(CODES[0], 30).max() * 1e-3, rel=1e-12)


def test_stated_volts_per_code_do_not_scale_volts(tmp_path: Path) -> None:
    # A header may describe the digitiser though the samples are volts already.
    text = "Volts per code,0.001\n" + with_cells({})
    record = read_record(write(tmp_path / "a.csv", text))
    np.testing.assert_allclose(record.voltage_v, TRUE.voltage_v, atol=5e-10)


@pytest.mark.parametrize(
    ("head", "hints", "message"),
    [
        ("Volts per code,0.001\n", (0.002,), "the file states 0.001 V per code, the rig file or sheet 0.002"),
        ("", (1e-3, 1e-3, 1e-3), "the rig file or sheet states 3 volts per code for 2 channels (CH1, CH2)"),
    ],
)
def test_volts_per_code_that_disagree(
    tmp_path: Path, head: str, hints: tuple[float, ...], message: str
) -> None:
    with pytest.raises(InputError, match=re.escape(message)):
        read_record(
            write(tmp_path / "a.csv", head + CODE_TEXT),
            RecordHints(sample_interval_s=INTERVAL_S, volts_per_code=hints),
        )


def test_volts_per_code_for_samples_that_are_no_codes(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="the samples hold fractions, so they are no digitiser codes"):
        read_record(write(tmp_path / "a.csv", with_cells({})), RecordHints(volts_per_code=(1e-3,)))


# --- names ------------------------------------------------------------------------------------------


def test_hint_chooses_and_orders_channels(tmp_path: Path) -> None:
    path = write(tmp_path / "a.csv", with_cells({}))
    record = read_record(path, RecordHints(channel_names=("CH2",)))
    assert record.channels == ("CH2",)
    np.testing.assert_allclose(record.voltage_v[0], TRUE.voltage_v[1], atol=5e-10)
    assert record.remarks == ("left out, because the rig file or sheet does not name them: CH1",)
    record = read_record(path, RecordHints(channel_names=("CH2", "CH1 (V)")))
    assert record.channels == ("CH2", "CH1 (V)")
    np.testing.assert_allclose(record.channel("CH1 (V)"), TRUE.voltage_v[0], atol=5e-10)


@pytest.mark.parametrize("names", [("in", "out"), ("CH1", "out"), ("CH1", "CH1"), ("CH1", "CH2", "CH3")])
def test_hint_and_file_must_agree_on_names(tmp_path: Path, names: tuple[str, ...]) -> None:
    message = f"the record's channels are CH1, CH2; the rig file or sheet names {', '.join(names)}"
    with pytest.raises(InputError, match=re.escape(message)):
        read_record(write(tmp_path / "a.csv", with_cells({})), RecordHints(channel_names=names))


def test_hint_names_unnamed_channels_one_each(tmp_path: Path) -> None:
    path = write(tmp_path / "a.csv", rows(None, TRUE.voltage_v))
    hints = RecordHints(sample_interval_s=INTERVAL_S, channel_names=("in",))
    with pytest.raises(
        InputError, match="the record's channels are CH1, CH2; the rig file or sheet names in"
    ):
        read_record(path, hints)


def test_channels_of_one_name(tmp_path: Path) -> None:
    record = read_record(write(tmp_path / "a.csv", with_cells({}, head="Time (s),A (V),A (V)\n")))
    assert record.channels == ("A", "A #2")
    assert record.remarks == ("there are several channels 'A'; one is called 'A #2' here",)
