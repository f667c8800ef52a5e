"""A short seeded share of the fuzzing, and the faults that the long runs found."""

from __future__ import annotations

import io
import json
import os
import zipfile
from pathlib import Path

import h5py
import numpy as np
import pytest

from shpb.errors import InputError, Mistake, StoreError
from shpb.record.read import is_complete, read_record
from shpb.store.merge_input import stored_curve
from shpb.watch.journal import FILE_NAME, open_journal
from tests.faults import fuzz, seeds
from tests.faults.mutants import mutant

TIME_S = 1e-6 * np.arange(60)


def test_a_mutant_is_made_again_from_its_number() -> None:
    whole = seeds.text()
    made = [mutant(whole, number, 5, binary=False)[1] for number in range(50)]
    assert made == [mutant(whole, number, 5, binary=False)[1] for number in range(50)]
    assert len(set(made)) == 50
    assert sum(content not in whole for content in made) > 40


@pytest.mark.parametrize(
    "name", ["text", "npy", "npz", "tdms", "rig", "sheet", "list", "session", "calibration"]
)
def test_mutants_give_a_whole_result_or_an_error_of_the_package(name: str, tmp_path: Path) -> None:
    # HDF5 and MATLAB files only in children: they can crash their libraries, and with them the tests.
    if name == "tdms":
        pytest.importorskip("nptdms")
    kind = fuzz.KINDS[name]
    whole, path = kind.seeds(), tmp_path / f"m{kind.ending}"
    outcomes = set()
    for number in range(60):
        path.write_bytes(mutant(whole, number, 11, binary=kind.binary)[1])
        outcome, details = fuzz.outcome_of(kind, path)
        assert not details, f"mutant {number}: {details}"
        outcomes.add(outcome)
    assert {"read", "refused"} <= outcomes


@pytest.mark.slow
@pytest.mark.parametrize("name", ["hdf5", "matlab-7.3", "matlab-5"])
def test_formats_that_crash_their_libraries_in_a_child(name: str) -> None:
    tally = fuzz.run(name, 100, 11)
    assert tally.faults == {}
    assert sum(tally.counts.values()) == 100  # a child that was lost was followed by another


@pytest.mark.slow
def test_a_child_that_crashes_or_hangs_is_counted_and_followed_by_another() -> None:
    # Mutant 109 of seed 2 crashes the reader of MATLAB 5 files of scipy 1.17; with others it may be read.
    tally = fuzz.run("matlab-5", 3, 2, first=108)
    assert sum(tally.counts.values()) == 3
    assert tally.faults == {}
    assert set(tally.lost) <= {109}


# --- what was found -------------------------------------------------------------------------------------


def test_an_archive_with_a_member_that_is_no_array(tmp_path: Path) -> None:
    out = io.BytesIO()
    np.savez(out, time_s=TIME_S, a=np.sin(TIME_S * 1e5))
    with zipfile.ZipFile(out, "a") as archive:
        archive.writestr("b.npy", b"\x93NUMPX not an array")
    path = tmp_path / "a.npz"
    path.write_bytes(out.getvalue())
    assert read_record(path).channels == ("a",)


def test_text_of_what_is_no_character(tmp_path: Path) -> None:
    units = np.array(["us", "V"])
    units.view(np.uint32)[0] = 0x7FFFFFFF
    np.savez(tmp_path / "a.npz", time_s=TIME_S, a=np.sin(TIME_S * 1e5), time_unit=units)
    assert read_record(tmp_path / "a.npz").samples == 60


@pytest.mark.filterwarnings("error")
def test_a_damaged_header_raises_no_warning(tmp_path: Path) -> None:
    out = io.BytesIO()
    np.save(out, np.zeros((60, 2)))
    path = tmp_path / "a.npy"
    path.write_bytes(out.getvalue().replace(b"'fortran_order'", b"'fort\\en_order'"))
    assert not is_complete(path).complete


@pytest.mark.filterwarnings("error")
def test_signalling_nans_are_refused_without_a_warning(tmp_path: Path) -> None:
    table = np.zeros((60, 2), dtype="f4")
    table[:, 0], table[:, 1] = TIME_S, np.sin(TIME_S * 1e5)
    table.view("u4")[30, 1] = 0x7FA00000
    np.save(tmp_path / "a.npy", table)
    with pytest.raises(InputError, match="holds NaN, no number, in 1 of 60 samples"):
        read_record(tmp_path / "a.npy")


@pytest.mark.parametrize("ending", ["npy", "h5"])
def test_a_column_of_text_in_a_table(tmp_path: Path, ending: str) -> None:
    table = np.zeros(60, dtype=[("time_s", "f8"), ("flag", "S4"), ("in", "f8")])
    table["time_s"], table["flag"], table["in"] = TIME_S, b"ok", np.sin(TIME_S * 1e5)
    path = tmp_path / f"a.{ending}"
    if ending == "npy":
        np.save(path, table)
    else:
        with h5py.File(path, "w") as file:
            file["table"] = table
    record = read_record(path)
    assert record.channels == ("in",)
    np.testing.assert_array_equal(record.voltage_v[0], table["in"])


def test_a_time_unit_that_is_none(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    rows = "".join(f"{np.sin(i):.6f}\n" for i in range(60))
    path.write_text(f"Sample Interval,2e-7\nHorizontal Units,V\nCH1\n{rows}")
    assert read_record(path).sample_interval_s == 2e-7


def test_a_time_column_in_volts(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    rows = "".join(f"{2e-7 * i:.9e},{np.sin(i):.6f}\n" for i in range(60))
    path.write_text(f"Sample Interval,2e-7\nTime (V),CH1 (V)\n{rows}")
    record = read_record(path)
    assert (record.channels, record.sample_interval_s) == (("CH1",), 2e-7)


def test_codes_times_a_number_without_end(tmp_path: Path) -> None:
    codes = np.arange(60, dtype=np.int16)
    np.savez(tmp_path / "a.npz", dt=1e-6, a=codes, volts_per_code=1e307)
    with pytest.raises(InputError, match="too large to be numbers"):
        read_record(tmp_path / "a.npz")


@pytest.mark.parametrize("value", ["1e999", "Infinity", '"x"', "null", "[]"])
def test_a_journal_with_a_number_that_is_none_is_set_aside(tmp_path: Path, value: str) -> None:
    text = seeds.journal()[0].decode().replace('"revision": 1', f'"revision": {value}', 1)
    json.loads(text)
    (tmp_path / FILE_NAME).write_text(text)
    journal, said = open_journal(tmp_path)
    assert journal.entries == {}
    assert "is set aside as watch_journal_damaged_1.json" in said


def test_a_name_of_thousands_of_letters_does_not_bury_the_message() -> None:
    error = InputError("there is no channel " + "x" * 10_000, where="y" * 10_000, mend="Name another")
    assert len(str(error)) < 3000
    assert str(error).endswith("Name another")
    assert len(str(Mistake("rig.toml", "k" * 10_000, "f" * 10_000, "a number"))) < 1000


def test_a_stored_shot_that_has_lost_a_group(tmp_path: Path) -> None:
    path = tmp_path / "a.h5"
    path.write_bytes(seeds.stored_shot()[0])
    with h5py.File(path, "r+") as file:
        file.move("response", "responsf")
    with pytest.raises(StoreError, match="holds no group response: it is damaged"):
        stored_curve(path)


@pytest.mark.skipif(os.name == "nt", reason="file names are text there")
@pytest.mark.parametrize("name", [b"W-\xff\xfe.npz", "W\N{RIGHT-TO-LEFT OVERRIDE}zpn.npz".encode()])
@pytest.mark.parametrize("channel", ["a\0b", "a\x1b[31mb", "=cmd()"])
def test_names_that_no_sheet_would_let_through_are_stored(tmp_path: Path, name: bytes, channel: str) -> None:
    from shpb.reduction import reduce
    from shpb.store.shot_file import load, save_shot
    from tests.synthetic import copper, gauge, record_of, rig, sheet, uniform_plastic_shot

    lab = rig(incident_gauge=gauge(1, 1.0), transmitted_gauge=gauge(2, 0.6))  # type: ignore[arg-type]
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=1e-6)
    made = record_of(faces, rig(), noise_v=0.002)
    path = Path(os.fsdecode(os.fsencode(tmp_path) + b"/" + name))
    facts = {"dt": made.sample_interval_s, "t0": made.start_s, "voltage_unit": "V"}
    with path.open("wb") as file:
        np.savez(file, V=made.voltage_v, channels=np.array([f"{channel}1", f"{channel}2"]), **facts)
    record = read_record(path)
    stored = load(save_shot(reduce(record, lab, sheet(copper())), tmp_path / "r.h5"))
    assert stored.record.channels == record.channels
    assert "\0" not in "".join(record.channels)
    assert stored.record.sources[0].name.encode()
