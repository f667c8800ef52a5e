"""The structure of MATLAB files is walked before scipy reads them: sound ones pass, damage is named with its byte."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.io import savemat

import shpb
from shpb.errors import InputError
from shpb.record.matlab_structure import DamagedError, require_sound


def written(path: Path, *, compressed: bool) -> Path:
    contents = {
        "data": np.arange(60.0).reshape(20, 3),
        "z": np.array([1 + 2j, 3.0]),
        "names": np.array(["time_s", "in", "out"], dtype=object),
        "text": "a shot",
        "empty": np.zeros((0, 3)),
        "inside": {"volts": np.arange(8, dtype=np.int16), "deeper": {"x": 1.5}},
        "flags": np.array([True, False]),
    }
    savemat(path, contents, do_compression=compressed)
    return path


@pytest.mark.parametrize("compressed", [False, True])
def test_what_scipy_writes_is_sound(tmp_path: Path, compressed: bool) -> None:
    require_sound(written(tmp_path / "a.mat", compressed=compressed))


def test_sparse_matrices_beside_the_record_do_no_harm(tmp_path: Path) -> None:
    from scipy.sparse import csc_array

    path = tmp_path / "a.mat"
    savemat(path, {"t": np.arange(9.0), "s": csc_array(np.eye(4))})
    require_sound(path)


def at(path: Path, place: int, bytes_: bytes) -> None:
    data = bytearray(path.read_bytes())
    data[place : place + len(bytes_)] = bytes_
    path.write_bytes(data)


# Places of the first variable in such a file: tag at 128, flags at 136, dimensions at 152, name at 168, numbers at 176.
@pytest.mark.parametrize(
    ("place", "bytes_", "words"),
    [
        (176, b"\x00\x00\x00\x00", "unknown kind 0"),
        (145, b"\x08", "as many numbers as its dimensions say"),  # said to be complex, with no imaginary part
        (160, b"\x3d\x00\x00\x00", "as many numbers as its dimensions say"),
        (160, b"\xff\xff\xff\xff", "dimensions of an array cannot be"),
        (136, b"\x05\x00\x00\x00", "has no flags"),
        (152, b"\x09\x00\x00\x00", "no dimensions or no name"),
        (180, b"\xff\xff\xff\x7f", "longer than what holds it"),
        (128, b"\x09\x00\x00\x00", "stands no variable"),
    ],
)
def test_damage_is_named_and_never_reaches_the_library(
    tmp_path: Path, place: int, bytes_: bytes, words: str
) -> None:
    path = tmp_path / "a.mat"
    savemat(path, {"data": np.arange(60.0).reshape(20, 3)})
    at(path, place, bytes_)
    with pytest.raises(DamagedError, match=words):
        require_sound(path)
    with pytest.raises(InputError, match=words) as caught:
        shpb.read_record(path)
    assert "a.mat" in str(caught.value)


def test_a_compressed_variable_that_cannot_be_unpacked_is_named(tmp_path: Path) -> None:
    path = written(tmp_path / "a.mat", compressed=True)
    at(path, 150, b"\xff\x00\xff")
    with pytest.raises(DamagedError, match="compressed variable"):
        require_sound(path)
