"""Files that hold arrays under names: NumPy, HDF5, MATLAB, TDMS."""

from __future__ import annotations

import re
import struct
import sys
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pytest
import scipy.io

from shpb.errors import IncompleteRecordError, InputError
from shpb.record.read import is_complete, read_record
from shpb.record.record import Record
from shpb.rig.rig import RecordHints
from tests.record.writing import INTERVAL_S, START_S, truth, write

TRUE = truth(samples=500)
A, B = TRUE.voltage_v
CLOCK = RecordHints(sample_interval_s=INTERVAL_S, trigger_offset_s=START_S)


def check(record: Record, channels: tuple[str, ...], reader: str) -> None:
    assert np.array_equal(record.voltage_v, TRUE.voltage_v)
    assert record.voltage_v.flags.c_contiguous
    assert record.channels == channels
    assert record.sources[0].reader == reader
    assert record.sample_interval_s == pytest.approx(INTERVAL_S, rel=1e-9)
    assert record.start_s == pytest.approx(START_S, rel=1e-9)


# --- NumPy ------------------------------------------------------------------------------------------


@pytest.mark.parametrize("save", [np.savez, np.savez_compressed])
@pytest.mark.parametrize(
    ("arrays", "channels"),
    [
        ({"time_s": TRUE.time_s, "in": A, "out": B}, ("in", "out")),
        ({"in": A, "out": B, "t": 1e6 * TRUE.time_s, "time_unit": "us"}, ("in", "out")),
        ({"in": A, "out": B, "dt": INTERVAL_S, "t0": START_S}, ("in", "out")),
        ({"V": TRUE.voltage_v, "fs": 5e6, "start": START_S}, ("CH1", "CH2")),
        ({"V": TRUE.voltage_v.T, "time": TRUE.time_s, "channels": np.array(["x", "y"])}, ("x", "y")),
        ({"x": 1e3 * TRUE.time_s, "a_V": A, "b_V": B, "Horizontal Units": "ms"}, ("a_V", "b_V")),
        ({"I": A, "T": B, "dt": INTERVAL_S, "t0": START_S, "record length": 500}, ("I", "T")),
    ],
)
def test_npz(
    tmp_path: Path, save: Callable[..., None], arrays: dict[str, object], channels: tuple[str, ...]
) -> None:
    path = tmp_path / "a.dat"
    with path.open("wb") as file:
        save(file, **arrays)
    check(read_record(path), channels, "numpy")
    assert is_complete(path).complete


@pytest.mark.parametrize(
    ("array", "hints"),
    [
        (np.column_stack([TRUE.time_s, A, B]), RecordHints()),
        (np.vstack([TRUE.time_s, A, B]), RecordHints()),
        (np.asfortranarray(TRUE.voltage_v), CLOCK),
        (TRUE.voltage_v.T[:, None, :], CLOCK),
    ],
)
def test_npy(tmp_path: Path, array: np.ndarray, hints: RecordHints) -> None:
    np.save(tmp_path / "a.npy", array)
    check(read_record(tmp_path / "a.npy", hints), ("CH1", "CH2"), "numpy")


def test_npy_with_named_fields(tmp_path: Path) -> None:
    array = np.zeros(500, dtype=[("time_us", "f8"), ("in", "f8"), ("out", "f8")])
    array["time_us"], array["in"], array["out"] = 1e6 * TRUE.time_s, A, B
    np.save(tmp_path / "a.npy", array)
    check(read_record(tmp_path / "a.npy"), ("in", "out"), "numpy")


def test_integer_arrays_are_codes(tmp_path: Path) -> None:
    codes = np.rint(A * 100).astype(np.int8)
    np.savez(tmp_path / "a.npz", dt=INTERVAL_S, a=codes)
    with pytest.raises(InputError, match="whole numbers of no stated unit, as digitiser codes are"):
        read_record(tmp_path / "a.npz")
    np.savez(tmp_path / "a.npz", dt=INTERVAL_S, a=codes, volts_per_code=0.01)
    np.testing.assert_allclose(read_record(tmp_path / "a.npz").voltage_v[0], codes * 0.01, rtol=1e-12)


def test_python_objects_are_refused(tmp_path: Path) -> None:
    np.savez(tmp_path / "a.npz", time_s=TRUE.time_s, a=np.array([{"x": 1}, None], dtype=object))
    with pytest.raises(InputError, match="Save plain arrays of numbers"):
        read_record(tmp_path / "a.npz")


def test_an_archive_of_something_else(tmp_path: Path) -> None:
    import zipfile

    with zipfile.ZipFile(tmp_path / "a.npz", "w") as archive:
        archive.writestr("sheet.xml", "<a/>")
    with pytest.raises(InputError, match="no reader recognises the file"):
        read_record(tmp_path / "a.npz")


def test_lengths_that_differ_and_no_time(tmp_path: Path) -> None:
    np.savez(tmp_path / "a.npz", a=A, b=B[:300], dt=INTERVAL_S)
    message = "there are series of 2 lengths, and it is not clear which is the record: a 500, b 300"
    with pytest.raises(InputError, match=re.escape(message)):
        read_record(tmp_path / "a.npz")
    assert read_record(tmp_path / "a.npz", RecordHints(channel_names=("b",))).samples == 300


def test_nothing_that_is_a_series(tmp_path: Path) -> None:
    np.savez(tmp_path / "a.npz", table=np.ones((3, 4)), dt=1e-6)
    with pytest.raises(InputError, match="there is no series of samples; the file holds table 3x4"):
        read_record(tmp_path / "a.npz")


# --- HDF5 -------------------------------------------------------------------------------------------


def flat(file: h5py.File) -> None:
    file["time"] = 1e6 * TRUE.time_s
    file["time"].attrs["units"] = "us"
    file["in"], file["out"] = A, B


def grouped(file: h5py.File) -> None:
    for name, values in (("in", 1e3 * A), ("out", B)):
        dataset = file.create_dataset(
            f"scope/waveforms/{name}", data=values, compression="gzip", shuffle=True
        )
        dataset.attrs["unit"] = "V"
        dataset.attrs["dt"] = INTERVAL_S
    del file["scope/waveforms/in"]
    file.create_dataset("scope/waveforms/in", data=A).attrs["units"] = np.bytes_("V")
    file["scope"].attrs["trigger_offset"] = START_S


def with_scalars(file: h5py.File) -> None:
    file["data/V"] = TRUE.voltage_v
    file["data"].attrs["channel_names"] = ["in", "out"]
    file["meta/sample_rate"] = "5 MS/s"
    file["data/t0"] = START_S
    file["results/strain"] = np.float64(0.2)


def compound(file: h5py.File) -> None:
    table = np.zeros(500, dtype=[("time_s", "f8"), ("in", "f8"), ("out", "f8")])
    table["time_s"], table["in"], table["out"] = TRUE.time_s, A, B
    file["table"] = table


def among_others(file: h5py.File) -> None:
    """A curve of another length beside the record: the time column says which is which."""
    flat(file)
    file["curve"] = np.linspace(0, 1, 64)
    file["picture"] = np.zeros((128, 128))


@pytest.mark.parametrize("layout", [flat, grouped, with_scalars, compound, among_others])
def test_hdf5_of_any_layout(tmp_path: Path, layout: Callable[[h5py.File], None]) -> None:
    with h5py.File(tmp_path / "a.dat", "w") as file:
        layout(file)
    record = read_record(tmp_path / "a.dat")
    check(record, ("in", "out"), "hdf5")
    assert is_complete(tmp_path / "a.dat").complete


def test_two_groups_of_the_same_names(tmp_path: Path) -> None:
    path = tmp_path / "a.h5"
    with h5py.File(path, "w") as file:
        for group in ("shot1", "shot2"):
            file[f"{group}/in"], file[f"{group}/out"] = (A, B) if group == "shot2" else (B, A)
            file[group].attrs.update({"dt": INTERVAL_S, "t0": START_S})
    message = "there are several arrays called 'in', and it is not clear which is the record: shot1/in 500"
    with pytest.raises(InputError, match=re.escape(message)):
        read_record(path)
    names = ("shot2/in", "shot2/out")
    record = read_record(path, RecordHints(channel_names=names))
    check(record, names, "hdf5")
    assert "arrays left out: shot1/in, shot1/out" in record.remarks


def test_two_intervals_in_one_record(tmp_path: Path) -> None:
    with h5py.File(tmp_path / "a.h5", "w") as file:
        file["in"], file["out"] = A, B
        file["in"].attrs["dt"], file["out"].attrs["dt"] = 1e-7, 2e-7
    with pytest.raises(InputError, match="the file states interval twice: 1e-07 and 2e-07"):
        read_record(tmp_path / "a.h5")


def test_volts_per_code_of_each_dataset(tmp_path: Path) -> None:
    codes = np.rint(TRUE.voltage_v * 1000).astype(np.int16)
    with h5py.File(tmp_path / "a.h5", "w") as file:
        for name, row, per_code in zip(("in", "out"), codes, (1e-3, 2e-3), strict=True):
            file[name] = row
            file[name].attrs["volts_per_code"] = per_code
        file.attrs["dt"] = INTERVAL_S
    voltage = read_record(tmp_path / "a.h5").voltage_v
    np.testing.assert_allclose(voltage, codes * np.array([[1e-3], [2e-3]]), rtol=1e-12)


# --- MATLAB -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("compress", [False, True])
@pytest.mark.parametrize(
    "variables",
    [
        {"t": 1e6 * TRUE.time_s, "time_unit": "us", "in": A, "out": B},
        {"shot": {"scope": {"in": A, "out": B, "dt": INTERVAL_S, "t0": START_S}, "operator": "none"}},
        {
            "data": np.column_stack([TRUE.time_s, A, B]),
            "names": np.array(["time_s", "in", "out"], dtype=object),
        },
    ],
)
def test_matlab_5(tmp_path: Path, variables: dict[str, object], compress: bool) -> None:
    path = tmp_path / "a.mat"
    scipy.io.savemat(path, variables, do_compression=compress)
    check(read_record(path), ("in", "out"), "matlab-5")
    assert is_complete(path).complete


def test_matlab_73_arrays_are_transposed(tmp_path: Path) -> None:
    path = tmp_path / "a.mat"
    with h5py.File(path, "w", userblock_size=512) as file:
        file["V"] = TRUE.voltage_v  # 500 x 2 to its writer
        file["Fs"] = np.array([[5e6]])
        file["t0"] = np.array([[START_S]])
        file["V"].attrs["MATLAB_class"] = np.bytes_("double")
        file["comment"] = np.frombuffer("shot".encode("utf-16-le"), dtype=np.uint16)[:, None]
        file["comment"].attrs["MATLAB_class"] = np.bytes_("char")
        file["#refs#/a"] = np.arange(100.0)
    content = bytearray(path.read_bytes())
    content[:128] = b"MATLAB 7.3 MAT-file, Platform: none".ljust(124) + b"\x00\x02IM"
    path.write_bytes(content)
    check(read_record(path), ("CH1", "CH2"), "matlab-7.3")


# --- TDMS -------------------------------------------------------------------------------------------

PROPERTIES = {"wf_increment": INTERVAL_S, "wf_start_offset": START_S, "unit_string": "V"}


def write_tdms(path: Path, properties: dict[str, object], segments: int = 2) -> Path:
    nptdms = pytest.importorskip("nptdms")
    with nptdms.TdmsWriter(path) as writer:
        for part in np.array_split(TRUE.voltage_v, segments, axis=1):
            writer.write_segment(
                [
                    nptdms.ChannelObject("scope", name, np.ascontiguousarray(row), properties)
                    for name, row in zip(("I", "T"), part, strict=True)
                ]
            )
    return path


def test_tdms(tmp_path: Path) -> None:
    path = write_tdms(tmp_path / "a.tdms", PROPERTIES)
    record = read_record(path)
    check(record, ("I", "T"), "tdms")
    assert record.remarks == ()
    assert is_complete(path).complete


def test_tdms_without_increment(tmp_path: Path) -> None:
    path = write_tdms(tmp_path / "a.tdms", {"unit_string": "V"})
    with pytest.raises(InputError, match="there is no time column and no sample interval"):
        read_record(path)
    check(read_record(path, CLOCK), ("I", "T"), "tdms")


def test_tdms_cut_short(tmp_path: Path) -> None:
    content = write_tdms(tmp_path / "a.tdms", PROPERTIES).read_bytes()
    path = write(tmp_path / "b.tdms", content[:-700])
    with pytest.raises(IncompleteRecordError, match="the last segment of the file is cut short"):
        read_record(path)
    assert not is_complete(path).complete


def test_tdms_without_the_extra(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = write(tmp_path / "a.tdms", b"TDSm" + bytes(100))
    monkeypatch.setitem(sys.modules, "nptdms", None)
    with pytest.raises(InputError, match=re.escape("pip install 'shpb[tdms]'")):
        read_record(path)
    assert "needs the package nptdms" in is_complete(path).reason


# --- cut short or damaged ---------------------------------------------------------------------------


def npz(path: Path) -> None:
    with path.open("wb") as file:
        np.savez(file, time_s=TRUE.time_s, a=A)


def npy(path: Path) -> None:
    with path.open("wb") as file:
        np.save(file, TRUE.voltage_v)


def hdf5(path: Path) -> None:
    with h5py.File(path, "w") as file:
        flat(file)


def matlab(path: Path) -> None:
    scipy.io.savemat(path, {"a": A, "b": B})


@pytest.mark.parametrize("make", [npz, npy, hdf5, matlab])
@pytest.mark.parametrize("part", [0.999, 0.9, 0.5])
def test_a_file_cut_short_is_incomplete(tmp_path: Path, make: Callable[[Path], None], part: float) -> None:
    path = tmp_path / "a.npz"
    make(path)
    content = path.read_bytes()
    path.write_bytes(content[: int(part * len(content))])
    with pytest.raises(IncompleteRecordError):
        read_record(path, CLOCK)
    state = is_complete(path)
    assert not state.complete
    assert state.reason


@pytest.mark.parametrize("make", [npz, npy])
def test_damaged_files_raise_nothing_but_our_errors(tmp_path: Path, make: Callable[[Path], None]) -> None:
    # HDF5 and MATLAB files are not damaged here: that can crash their libraries, and with them the tests.
    path = tmp_path / "a.bin"
    make(path)
    content = path.read_bytes()
    random = np.random.default_rng(11)
    refused = 0
    for _ in range(150):
        mutant = bytearray(content)
        # The first bytes hold headers, the last ones a directory: damage these most.
        place = int(random.choice([random.integers(12, 400), len(mutant) - random.integers(1, 200)]))
        mutant[place] = int(random.integers(256))
        path.write_bytes(mutant)
        try:
            record = read_record(path, CLOCK)
        except InputError:
            refused += 1
        else:
            assert np.isfinite(record.voltage_v).all()
    assert refused > 10


def test_a_header_that_promises_too_much(tmp_path: Path) -> None:
    header = b"{'descr': '<f8', 'fortran_order': False, 'shape': (99999999999, 3), }".ljust(117) + b"\n"
    content = b"\x93NUMPY\x01\x00" + struct.pack("<H", len(header)) + header + bytes(1000)
    with pytest.raises(IncompleteRecordError, match="the file has 1128 bytes, its header says 2400000000104"):
        read_record(write(tmp_path / "a.npy", content))
