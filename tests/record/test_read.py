"""Several files, where they came from, what is imported, and readers of other packages."""

from __future__ import annotations

import hashlib
import logging
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import shpb
from shpb.errors import InputError
from shpb.record.read import is_complete, read_record
from shpb.record.registry import available_readers
from shpb.rig.rig import RecordHints
from tests.record.writing import INTERVAL_S, START_S, Truth, rows, truth, write

TRUE = truth(samples=600)


def one(
    path: Path, channel: int, label: str = "Volt (V)", true: Truth = TRUE, *, samples: int | None = None
) -> Path:
    head = f"Time (s),{label}\n"
    return write(path, head + rows(true.time_s[:samples], true.voltage_v[channel : channel + 1, :samples]))


def test_one_file_for_each_channel(tmp_path: Path) -> None:
    files = [one(tmp_path / "incident.csv", 0), one(tmp_path / "transmitted.csv", 1)]
    record = read_record(files)
    assert record.channels == ("incident", "transmitted")
    np.testing.assert_allclose(record.voltage_v, TRUE.voltage_v, rtol=0, atol=5e-10)
    assert [source.name for source in record.sources] == ["incident.csv", "transmitted.csv"]
    # Names that the files give, and give once, stay.
    files = [one(tmp_path / "a.csv", 0, "in (V)"), one(tmp_path / "b.csv", 1, "out (V)")]
    assert read_record([str(file) for file in files]).channels == ("in", "out")


def test_several_channels_in_each_of_several_files(tmp_path: Path) -> None:
    for name in ("a.csv", "b.csv"):
        write(tmp_path / name, "Time (s),CH1 (V),CH2 (V)\n" + rows(TRUE.time_s, TRUE.voltage_v))
    record = read_record([tmp_path / "a.csv", tmp_path / "b.csv"])
    assert record.channels == ("a CH1", "a CH2", "b CH1", "b CH2")


def test_hints_span_all_files(tmp_path: Path) -> None:
    codes = np.rint(TRUE.voltage_v * 1000)
    files = [
        write(tmp_path / f"{name}.csv", rows(None, codes[i : i + 1], value_format="{:.0f}".format))
        for i, name in enumerate(("a", "b"))
    ]
    hints = RecordHints(
        sample_interval_s=INTERVAL_S, volts_per_code=(1e-3, 2e-3), channel_names=("in", "out")
    )
    record = read_record(files, hints)
    assert record.channels == ("in", "out")
    np.testing.assert_allclose(record.voltage_v, codes * np.array([[1e-3], [2e-3]]), rtol=1e-12)


@pytest.mark.parametrize(
    ("other", "samples"),
    [
        (Truth(TRUE.voltage_v, interval_s=INTERVAL_S * 1.0005), None),
        (Truth(TRUE.voltage_v, start_s=START_S + INTERVAL_S), None),
        (TRUE, 599),
    ],
    ids=["interval", "start", "length"],
)
def test_files_on_different_clocks(tmp_path: Path, other: Truth, samples: int | None) -> None:
    files = [one(tmp_path / "a.csv", 0), one(tmp_path / "b.csv", 1, true=other, samples=samples)]
    clock = re.escape(f"{samples or 600} samples, {other.interval_s:.7g} s apart, from {other.start_s:.7g} s")
    first = re.escape("a.csv has 600 samples, 2e-07 s apart, from -2e-05 s")
    with pytest.raises(InputError, match=f"the files have different clocks: {first}; b.csv has {clock}"):
        read_record(files)


def test_remarks_name_their_file(tmp_path: Path) -> None:
    good = one(tmp_path / "a.csv", 0)
    head = "Time (s),Volt (V),F (N)\n"
    other = write(tmp_path / "b.csv", head + rows(TRUE.time_s, TRUE.voltage_v))
    record = read_record([good, other])
    assert "b.csv: column 'F' is in N, no voltage, and was left out" in record.remarks


def test_source_of_a_record(tmp_path: Path) -> None:
    path = one(tmp_path / "a.csv", 0)
    (source,) = read_record(path).sources
    assert source.name == "a.csv"
    assert source.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()
    assert source.size_bytes == path.stat().st_size
    assert source.reader == "text"


def test_the_record_is_read_only(tmp_path: Path) -> None:
    record = read_record(one(tmp_path / "a.csv", 0))
    with pytest.raises(ValueError, match="read-only"):
        record.voltage_v[0, 0] = 1.0


@pytest.mark.parametrize(
    ("paths", "reader", "message"),
    [
        ([], None, "no file is given"),
        ("missing.csv", None, "missing.csv: the file cannot be read: No such file or directory"),
        (".", None, "the file cannot be read"),
        (
            "a.csv",
            "nothing",
            "there is no reader 'nothing'. Name one of hdf5, matlab-7.3, matlab-5, tdms, numpy",
        ),
    ],
)
def test_calls_that_cannot_be_served(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, paths: str, reader: str | None, message: str
) -> None:
    one(tmp_path / "a.csv", 0)
    monkeypatch.chdir(tmp_path)
    with pytest.raises(InputError, match=re.escape(message)):
        read_record(paths, reader=reader)


def test_completeness_of_a_missing_file(tmp_path: Path) -> None:
    assert not is_complete(tmp_path / "missing.csv").complete


@pytest.mark.parametrize("samples", [5_000, 100_000])
def test_comma_separated_text_needs_numpy_and_the_standard_library_alone(
    tmp_path: Path, samples: int
) -> None:
    true = truth(samples=samples)
    path = write(tmp_path / "a.csv", "time_s,in_V,out_V\n" + rows(true.time_s, true.voltage_v))
    program = (
        "import sys; from shpb.record.read import read_record; r = read_record(sys.argv[1]);"
        "tops = {name.split('.')[0] for name in sys.modules};"
        "print(r.samples, *tops, 'importlib.metadata' in sys.modules)"
    )
    package = str(Path(shpb.__file__).parent.parent)
    done = subprocess.run(
        [sys.executable, "-c", program, str(path)], capture_output=True, text=True, check=True, cwd=package
    )
    count, *modules, metadata = done.stdout.split()
    assert int(count) == samples
    assert not {"h5py", "scipy", "nptdms", "matplotlib", "rich", "zipfile"} & set(modules)
    assert metadata == "False"


# --- readers of other packages ----------------------------------------------------------------------

READER_MODULE = """
import numpy as np
from shpb.record.raw import Completeness, RawColumn, RawTable, Reader
from shpb.record.stated import Stated

def recognises(head, path):
    return head.startswith(b"TENTHS:")

def read(path, hints):
    words = path.read_text().split()[1:]
    column = RawColumn(values=np.array(words, dtype=float) / 10, name="gauge", unit="V")
    return RawTable(columns=(column,), stated=Stated(interval=5e-7, interval_unit="s"), remarks=("tenths",))

def is_complete(path):
    return Completeness(path.read_text().endswith("."), "ends with a full stop")

READER = Reader("tenths", "whole tenths of a volt", recognises, read, is_complete)
"""


@pytest.fixture
def other_package(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A package as an installer would leave it: a module and its metadata."""
    site = tmp_path / "site"
    info = site / "tenths_reader-1.0.dist-info"
    info.mkdir(parents=True)
    (site / "tenths_reader.py").write_text(READER_MODULE)
    (info / "METADATA").write_text("Metadata-Version: 2.1\nName: tenths-reader\nVersion: 1.0\n")
    (info / "entry_points.txt").write_text(
        "[shpb.readers]\ntenths = tenths_reader:READER\nbroken = no_such_module:READER\n"
        "wrong = tenths_reader:np\n"
    )
    monkeypatch.syspath_prepend(str(site))
    return site


def test_a_reader_of_another_package(other_package: Path, tmp_path: Path) -> None:
    values = list(range(-20, 20))
    path = write(tmp_path / "a.tenths", "TENTHS: " + " ".join(map(str, values)))
    record = read_record(path)
    np.testing.assert_allclose(record.voltage_v[0], np.array(values) / 10, rtol=1e-12)
    assert record.channels == ("gauge",)
    assert record.sample_interval_s == 5e-7
    assert record.sources[0].reader == "tenths"
    assert record.remarks == ("tenths",)
    assert not is_complete(path).complete
    assert read_record(path, reader="tenths").samples == 40


def test_readers_that_cannot_be_loaded_are_logged(
    other_package: Path, caplog: pytest.LogCaptureFixture
) -> None:
    with caplog.at_level(logging.WARNING):
        names = [reader.name for reader in available_readers()]
    assert names == ["hdf5", "matlab-7.3", "matlab-5", "tdms", "numpy", "text", "tenths"]
    assert "the reader broken (no_such_module:READER) cannot be loaded" in caplog.text
    assert "the reader wrong (tenths_reader:np) is no shpb.record.raw.Reader" in caplog.text


def test_built_in_readers_are_described() -> None:
    for reader in available_readers():
        assert reader.description
