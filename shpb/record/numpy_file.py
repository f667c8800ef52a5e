"""NumPy files: one array (.npy), or several under names (.npz)."""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from shpb.errors import IncompleteRecordError, InputError
from shpb.record.named_arrays import NamedArray, table_of
from shpb.record.raw import Completeness, RawTable, Reader
from shpb.rig.rig import RecordHints

_ONE_ARRAY = b"\x93NUMPY"
_ZIP = b"PK\x03\x04"
_LAST_CHARACTER = 0x10FFFF  # of Unicode


def recognises(head: bytes, path: Path) -> bool:  # noqa: ARG001
    """Whether the file is a NumPy array, or a ZIP archive whose first member is one."""
    if head.startswith(_ONE_ARRAY):
        return True
    # A local file header: the name's length at byte 26, the name from byte 30 (ZIP specification, 4.3.7).
    name = head[30 : 30 + int.from_bytes(head[26:28], "little")]
    return head.startswith(_ZIP) and name.endswith(b".npy")


def read(path: Path, hints: RecordHints) -> RawTable:
    """Read all arrays and choose the record among them (:mod:`shpb.record.named_arrays`).

    Raises
    ------
    IncompleteRecordError
        If the file is cut short.
    InputError
        If it holds Python objects, or no series of samples, or more than one.
    """
    whole = is_complete(path)
    if not whole.complete:
        raise IncompleteRecordError(
            whole.reason, where=path.name, mend="Wait until it is written, or copy it again"
        )
    arrays, scalars = [], {}
    for name, array in _load(path).items():
        if array.dtype.kind in "SU" or array.size == 1:
            scalars[name] = array if array.size != 1 else array.reshape(-1)[0]
        elif array.dtype.kind in "iufb" or array.dtype.names:
            arrays.append(
                NamedArray(
                    path=name,
                    shape=array.shape,
                    load=lambda array=array: array,  # type: ignore[misc]
                    fields=tuple(array.dtype.names or ()),
                )
            )
    return table_of(arrays, scalars, hints, where=path.name)


def _load(path: Path) -> dict[str, NDArray[Any]]:
    try:
        with _quiet():
            loaded = np.load(path, allow_pickle=False)
        if isinstance(loaded, np.ndarray):
            return {"": loaded}
        with loaded, _quiet():
            members = {name: loaded[name] for name in loaded.files}
        # What is no array in the archive comes as its bytes.
        return {
            n: one for n, one in members.items() if isinstance(one, np.ndarray) and _is_text_or_numbers(one)
        }
    except Exception as error:  # a damaged file makes numpy and zipfile raise almost any exception
        raise InputError(
            f"the file cannot be read: {error}",
            where=path.name,
            mend="Save plain arrays of numbers (no Python objects) again",
        ) from None


@contextmanager
def _quiet() -> Iterator[None]:
    """No warnings of the parser about a damaged header: they become our error."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        yield


def _is_text_or_numbers(array: NDArray[Any]) -> bool:
    """False for text that holds what is no character: making a str of it raises, or worse."""
    if array.dtype.kind != "U" or not array.size or not array.dtype.itemsize:
        return True
    codes = np.ascontiguousarray(array).view(np.dtype("u4").newbyteorder(array.dtype.byteorder))
    return not bool(np.any((codes > _LAST_CHARACTER) | ((codes >= 0xD800) & (codes <= 0xDFFF))))


def is_complete(path: Path) -> Completeness:
    """Whether the archive's directory is there, or the array is as long as its header says."""
    import zipfile

    with path.open("rb") as file:
        if file.read(len(_ONE_ARRAY)) == _ONE_ARRAY:
            file.seek(0)
            return _array_is_complete(file, path.stat().st_size)
    try:
        with zipfile.ZipFile(path) as archive:
            return Completeness(True, f"its directory lists {len(archive.namelist())} arrays")
    except (zipfile.BadZipFile, OSError, ValueError, NotImplementedError) as error:
        return Completeness(False, f"its directory cannot be read: {error}")


def _array_is_complete(file: Any, size: int) -> Completeness:
    try:
        with _quiet():
            return _as_long_as_it_says(file, size)
    except Exception as error:  # a damaged header makes numpy's parser raise almost any exception
        return Completeness(False, f"its header cannot be read: {error}")


def _as_long_as_it_says(file: Any, size: int) -> Completeness:
    version = np.lib.format.read_magic(file)
    header = {
        (1, 0): np.lib.format.read_array_header_1_0,
        (2, 0): np.lib.format.read_array_header_2_0,
    }.get(version, np.lib.format.read_array_header_2_0)
    shape, _, dtype = header(file)
    needed = file.tell() + dtype.itemsize * int(np.prod(shape, dtype=object))
    if size < needed:
        return Completeness(False, f"the file has {size} bytes, its header says {needed}")
    return Completeness(True, f"an array of {'x'.join(map(str, shape))}, as its header says")


READER = Reader("numpy", "NumPy arrays (.npy, .npz)", recognises, read, is_complete)
