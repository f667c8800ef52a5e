"""Whatever dialect a record is written in, it comes back; from a damaged file only our errors escape."""

from __future__ import annotations

import tempfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from shpb.errors import ShpbError
from shpb.record.read import is_complete, read_record
from shpb.record.stated import facts_from
from shpb.record.units import plain_unit, split_unit
from shpb.rig.rig import RecordHints
from tests.record.writing import Truth, rows, truth, write

SCALES = {"s": 1.0, "ms": 1e3, "us": 1e6, "µs": 1e6, "ns": 1e9}
SETTINGS = settings(derandomize=True, deadline=None, max_examples=150)


@SETTINGS
@given(
    samples=st.integers(16, 120),
    channels=st.integers(1, 5),
    seed=st.integers(0, 2**31),
    interval_s=st.sampled_from([1e-8, 1e-7, 2e-7, 4e-7, 1e-6, 2.5e-6, 1.7e-7]),
    start=st.integers(-5000, 5000),
    marks=st.sampled_from(
        [(",", "."), (";", "."), (";", ","), ("\t", "."), ("\t", ","), (" ", "."), (" ", ",")]
    ),
    end=st.sampled_from(["\n", "\r\n", "\r"]),
    encoding=st.sampled_from(["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "latin-1"]),
    time_unit=st.sampled_from(list(SCALES)),
    voltage=st.sampled_from([("V", 1.0), ("mV", 1e3), ("uV", 1e6)]),
    brackets=st.sampled_from(["{} ({})", "{} [{}]", "{}_{}"]),
    header=st.sampled_from(["names", "units below", "no time column"]),
)
def test_every_dialect_round_trips(
    *,
    samples: int,
    channels: int,
    seed: int,
    interval_s: float,
    start: int,
    marks: tuple[str, str],
    end: str,
    encoding: str,
    time_unit: str,
    voltage: tuple[str, float],
    brackets: str,
    header: str,
) -> None:
    true = Truth(truth(samples, channels, seed).voltage_v, interval_s, start * interval_s)
    (sep, decimal), (unit, scale) = marks, voltage
    names = [f"gauge{i}" for i in range(channels)]
    timed = header != "no time column"
    columns = ["time", *names] if timed else names
    units = [time_unit, *[unit] * channels] if timed else [unit] * channels
    if header == "names":
        lines = [sep.join(brackets.format(name, u) for name, u in zip(columns, units, strict=True))]
    elif header == "units below":
        lines = [sep.join(columns), sep.join(units)]
    else:
        shown = f"{interval_s:.9e}", f"{true.start_s:.9e}", unit
        facts = (
            f"Sample Interval = {shown[0]} s",
            f"Start time = {shown[1]} s",
            f"Vertical Units = {shown[2]}",
        )
        lines = [*(line.replace(".", decimal) for line in facts), sep.join(columns)]
    if sep == " ":
        lines = [line.replace(" (", "(").replace(" [", "[") for line in lines[:-1]] + [lines[-1]]
    body = rows(
        true.time_s * SCALES[time_unit] if timed else None,
        true.voltage_v * scale,
        sep=sep,
        decimal=decimal,
        end=end,
        time_format="{:.12e}".format,
        value_format="{:.12e}".format,
    )
    with tempfile.TemporaryDirectory() as folder:
        path = write(Path(folder) / "a.txt", end.join([*lines, body]), encoding)
        assert is_complete(path).complete
        record = read_record(path)
    expected = (
        tuple(brackets.format(n, unit) for n in names) if header == "names" and "_" in brackets else names
    )
    assert record.channels == tuple(expected)
    # Thirteen digits of values below 3 V.
    np.testing.assert_allclose(record.voltage_v, true.voltage_v, rtol=1e-12, atol=1e-12)
    assert record.sample_interval_s == pytest.approx(interval_s, rel=1e-8)
    assert record.start_s == pytest.approx(true.start_s, rel=1e-9, abs=1e-18)


@SETTINGS
@given(
    name=st.from_regex(r"[A-Za-z][A-Za-z0-9]{0,8}( [0-9])?", fullmatch=True),
    unit=st.sampled_from(["V", "mV", "s", "us", "kN"]),
)
def test_names_and_units_part_and_join(name: str, unit: str) -> None:
    assert split_unit(f"{name} ({unit})") == (name, unit)
    assert split_unit(f'"{name}[{unit}]"') == (name, unit)


@SETTINGS
@given(text=st.text(max_size=40), value=st.text(max_size=40))
def test_any_text_is_no_trouble_as_key_or_unit(text: str, value: str) -> None:
    plain_unit(text)
    split_unit(text)
    facts_from(text, [value])
    facts_from("Sample Interval", [text])


# --- mutants ----------------------------------------------------------------------------------------

SEEDS = {
    "comma": "Record Length,40\nTime (s),CH1 (V),CH2 (V)\n{}",
    "preamble": "Sample Interval,2e-7,s\nVertical Units,V,V\nTrigger Offset,-2e-5\nTime,CH1,CH2\n{}",
    "semicolon": "Zeit (µs);CH1 (V);CH2 (mV)\n{}",
    "no header": "{}",
}
PIECES = [
    *(b",", b";", b"\n", b"\r", b"\t", b"\0", b'"', b"#", b"-", b".", b"e", b"9", b"nan", b"inf", b"+OL"),
    *(b"****", b"1e999", b"0x1p3", b"1_0", b"\xff", b"\xef\xbb\xbf", b"\xc2\xb5", b" ", b"(V)", b"dt,0\n"),
]  # fmt: skip


def mutant(content: bytes, random: np.random.Generator) -> bytes:
    data = bytearray(content)
    for _ in range(int(random.integers(1, 3))):
        place = int(random.integers(len(data) + 1))
        kind = int(random.integers(8))
        if kind >= 6:  # another digit in a number, which a reader cannot see unless it is a stamp
            digits = [i for i, byte in enumerate(data) if 48 <= byte <= 57]
            data[digits[place % len(digits)] if digits else 0] = int(random.integers(48, 58))
        elif kind == 0 and place < len(data):
            data[place] = int(random.integers(256))
        elif kind == 1:
            data[place:place] = PIECES[int(random.integers(len(PIECES)))]
        elif kind == 2:
            del data[place : place + int(random.integers(1, 40))]
        elif kind == 3:
            del data[place:]
        elif kind == 4:
            data[place:place] = data[place // 2 : place // 2 + int(random.integers(1, 90))]
        elif kind == 5:
            piece = PIECES[int(random.integers(len(PIECES)))]
            data[place : place + len(piece)] = piece
        data = data or bytearray(b"x")
    return bytes(data)


@pytest.mark.parametrize("seed", SEEDS.values(), ids=SEEDS.keys())
@pytest.mark.parametrize("encoding", ["utf-8", "utf-16"])
def test_mutants_raise_nothing_but_our_errors(tmp_path: Path, seed: str, encoding: str) -> None:
    """Nothing else escapes, and what is read is whole: finite voltages on a real clock."""
    true = truth(samples=40)
    sep, decimal, scale = (";", ",", 1e6) if "µs" in seed else (",", ".", 1.0)
    content = seed.format(rows(true.time_s * scale, true.voltage_v, sep=sep, decimal=decimal)).encode(
        encoding
    )
    random = np.random.default_rng(2024)
    path = tmp_path / "a.csv"
    outcomes = {"read": 0, "refused": 0}
    messages: set[str] = set()
    for _ in range(250):
        path.write_bytes(mutant(content, random))
        try:
            record = read_record(path, RecordHints())
        except ShpbError as error:
            outcomes["refused"] += 1
            messages.add(str(error))
        else:
            outcomes["read"] += 1
            assert np.isfinite(record.voltage_v).all()
            assert record.voltage_v.shape == (len(record.channels), record.samples)
            assert 0 < record.sample_interval_s < np.inf
            assert np.isfinite(record.start_s)
        is_complete(path)
    assert all(message.startswith("a.csv") for message in messages)
    # Both happen: the mutants are neither all harmless nor all hopeless.
    assert min(outcomes.values()) > 10
