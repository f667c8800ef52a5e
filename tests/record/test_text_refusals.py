"""What a text file must not hold: each refusal names the line and the mend."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from shpb.errors import IncompleteRecordError, InputError
from shpb.record.read import is_complete, read_record
from shpb.rig.rig import RecordHints
from tests.record.writing import rows, truth, write

TRUE = truth(samples=3000)
TEXT = "Time (s),CH1 (V),CH2 (V)\n" + rows(TRUE.time_s, TRUE.voltage_v)
LINES = TEXT.splitlines()


def with_line(number: int, line: str) -> str:
    """The file with one line, counted from 1, replaced."""
    lines = [*LINES]
    lines[number - 1] = line
    return "\n".join(lines) + "\n"


def cells(number: int) -> list[str]:
    return LINES[number - 1].split(",")


REFUSED = {
    "a word": ("trigger", "a.csv, line 2500: the row has 1 cells where the others have 3: 'trigger'"),
    "a comment": ("# trigger", "a.csv, line 2500: the row has 1 cells"),
    "a second header": (
        "Time (s),CH1 (V),CH2 (V)",
        "a.csv, line 2500: channel 'Time' holds 'Time (s)', no number",
    ),
    "one cell too many": ("1,2,3,4", "a.csv, line 2500: the row has 4 cells where the others have 3"),
    "one cell too few": ("1,2", "a.csv, line 2500: the row has 2 cells where the others have 3"),
    "an empty cell": ("4.798e-4,,1", "a.csv, line 2500: channel 'CH1' is empty"),
    "NaN": ("4.798e-4,1,NaN", "a.csv, line 2500: channel 'CH2' holds NaN, no number, in 1 of 3000 samples"),
    "1.#QNAN": ("4.798e-4,1,-1.#QNAN", "a.csv, line 2500: channel 'CH2' holds '-1.#QNAN', no number"),
    "two points": ("4.798e-4,1.2.3,1", "a.csv, line 2500: channel 'CH1' holds '1.2.3', no number"),
    "half an exponent": ("4.798e-4,1e,1", "a.csv, line 2500: channel 'CH1' holds '1e', no number"),
    "a blank line": ("", "a.csv, line 2500: a blank line parts the samples in two blocks"),
    "a zero byte": ("4.798e-4,1,\0", "a.csv, line 2500: channel 'CH2' holds"),
}


@pytest.mark.parametrize(("line", "message"), REFUSED.values(), ids=REFUSED.keys())
def test_a_bad_row_is_named(tmp_path: Path, line: str, message: str) -> None:
    # Line 2500 lies beyond the first 64 KiB, where nothing is taken for a header any more.
    assert sum(map(len, LINES[:2499])) > 65536
    with pytest.raises(InputError, match=re.escape(message)):
        read_record(write(tmp_path / "a.csv", with_line(2500, line)))


@pytest.mark.parametrize("line", [10, 1000, 3001])
def test_the_line_number_is_right_wherever_the_row_is(tmp_path: Path, line: int) -> None:
    stamp = cells(line)[0]
    with pytest.raises(InputError, match=f"line {line}: channel 'CH1' holds 'x'"):
        read_record(write(tmp_path / "a.csv", with_line(line, f"{stamp},x,1.000000000e+00")))


def test_utf16_errors_name_the_line_too(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="line 2500: channel 'CH2' holds NaN"):
        read_record(write(tmp_path / "a.csv", with_line(2500, "4.798e-4,1,NaN"), "utf-16"))


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("hello\nworld\n", "no rows of numbers in the first 64 KiB; the first line is 'hello'"),
        ("x" * 70_000 + "\n1,2\n", "no rows of numbers in the first 64 KiB"),
        (bytes(range(256)), "no reader recognises the file"),
        (b"\x1f\x8b\x08" + bytes(range(40)), "no reader recognises the file"),
        ("CH1,CH2\n" + "".join(f"0,{i:03d},1,{i:03d}\n" for i in range(40)), "commas seem to stand both"),
        ("Time (s),CH1 (V)\n1e-6,1\n2e-6,2\n", "there are 2 samples. A record needs at least 16 samples"),
        ("Time (s),F (kN)\n" + "".join(f"{i}e-6,1\n" for i in range(40)), "there is no voltage channel"),
        ("dt,1e-6\nsample rate,2 MHz\n" + "0.5\n" * 40, "the file states interval twice: 1e-06 and 5e-07"),
        ("Record Length,16\ndt,-1\n" + "0.5\n" * 40, "the file states a sample interval of -1"),
    ],
)
def test_files_that_are_no_record(tmp_path: Path, content: str | bytes, message: str) -> None:
    with pytest.raises(InputError, match=re.escape(message)):
        read_record(write(tmp_path / "a.csv", content))


def test_an_interval_without_unit_that_is_no_seconds(tmp_path: Path) -> None:
    text = "Sample Interval,0.2\n" + rows(None, TRUE.voltage_v)
    with pytest.raises(InputError, match=re.escape("a sample interval of 0.2 without a unit")):
        read_record(write(tmp_path / "a.csv", text))
    record = read_record(tmp_path / "a.csv", RecordHints(time_unit="us"))
    assert record.sample_interval_s == pytest.approx(2e-7, rel=1e-12)


# --- cut short --------------------------------------------------------------------------------------


def test_a_file_cut_at_any_byte_of_its_last_rows(tmp_path: Path) -> None:
    """Cut between two rows it is a shorter record; cut elsewhere it is incomplete, never a wrong value."""
    short = truth(samples=40)
    text = "Time (s),CH1 (V),CH2 (V)\n" + rows(short.time_s, short.voltage_v)
    ends = {i for i, character in enumerate(text) if character == "\n"}
    for cut in range(len(text) - 150, len(text)):
        path = write(tmp_path / "a.csv", text[:cut])
        if cut in ends or cut - 1 in ends:
            record = read_record(path)
            kept = record.samples
            assert abs(record.voltage_v - short.voltage_v[:, :kept]).max() < 5e-10
            assert is_complete(path).complete
        else:
            with pytest.raises(IncompleteRecordError):
                read_record(path)
            assert not is_complete(path).complete


@pytest.mark.parametrize("encoding", ["utf-8", "utf-16"])
def test_fewer_rows_than_the_header_says(tmp_path: Path, encoding: str) -> None:
    text = "Record Length,3001\n" + TEXT
    path = write(tmp_path / "a.csv", text, encoding)
    with pytest.raises(IncompleteRecordError, match="the file holds 3000 rows, its header says 3001"):
        read_record(path)
    assert is_complete(path).reason == "the file holds 3000 rows, its header says 3001"
    record = read_record(write(tmp_path / "a.csv", "Record Length,2999\n" + TEXT))
    assert record.remarks == ("the file holds 3000 rows though its header says 2999",)


def test_space_reserved_but_not_written(tmp_path: Path) -> None:
    path = write(tmp_path / "a.csv", TEXT.encode() + bytes(5000))
    with pytest.raises(IncompleteRecordError, match="the file ends in zero bytes"):
        read_record(path)


def test_an_empty_file(tmp_path: Path) -> None:
    path = write(tmp_path / "a.csv", "")
    with pytest.raises(IncompleteRecordError, match="the file is empty"):
        read_record(path)
    assert not is_complete(path).complete


def test_only_the_header_so_far(tmp_path: Path) -> None:
    path = write(tmp_path / "a.csv", "Sample Interval,2e-7\nTime (s),CH1 (V)\n")
    assert not is_complete(path).complete


def test_last_row_without_line_break_but_whole(tmp_path: Path) -> None:
    path = write(tmp_path / "a.csv", TEXT[:-1])
    assert is_complete(path).complete
    assert read_record(path).samples == 3000


def test_numbers_of_changing_width_need_the_last_line_break(tmp_path: Path) -> None:
    text = "Time (s),CH1 (V)\n" + rows(TRUE.time_s, TRUE.voltage_v[:1], value_format="{:.6g}".format)
    assert is_complete(write(tmp_path / "a.csv", text)).complete
    assert not is_complete(write(tmp_path / "a.csv", text[:-4])).complete


def test_a_file_that_grows_while_it_is_read(tmp_path: Path) -> None:
    from shpb.record import text as text_reader

    path = write(tmp_path / "a.csv", TEXT)
    real = text_reader.read

    def read_and_grow(path: Path, hints: RecordHints) -> object:
        table = real(path, hints)
        with path.open("a") as file:
            file.write(LINES[-1] + "\n")
        return table

    import dataclasses

    from shpb.record import registry

    growing = dataclasses.replace(text_reader.READER, read=read_and_grow)  # type: ignore[arg-type]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(registry.text, "READER", growing)
        with pytest.raises(IncompleteRecordError, match="the file changed while it was read"):
            read_record(path)
