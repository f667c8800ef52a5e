"""MATLAB files: version 5 to 7 through scipy, version 7.3 as the HDF5 that it is."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from shpb.errors import IncompleteRecordError, InputError
from shpb.record import hdf5
from shpb.record.matlab_structure import DamagedError, require_sound
from shpb.record.named_arrays import NamedArray, table_of
from shpb.record.raw import Completeness, RawTable, Reader
from shpb.rig.rig import RecordHints

_HEADER_BYTES = 128
_VERSION_5 = b"MATLAB 5.0 MAT-file"
_DEEPEST = 8


def recognises_73(head: bytes, path: Path) -> bool:  # noqa: ARG001
    """Whether the file is of version 7.3."""
    return head.startswith(b"MATLAB 7.3") and hdf5.has_signature(head)


def recognises_5(head: bytes, path: Path) -> bool:  # noqa: ARG001
    """Whether the file is of version 5 (also written by 6 and 7)."""
    return head.startswith(_VERSION_5) and head[126:128] in (b"IM", b"MI")


def read_5(path: Path, hints: RecordHints) -> RawTable:
    """Read the variables, those within structures too, and choose the record among them.

    A damaged file can crash scipy's reader, so its structure is walked first; whoever reads foreign files unattended
    does so in a process of its own all the same.

    Raises
    ------
    IncompleteRecordError
        If the file is cut short.
    InputError
        If it cannot be read, holds no series of samples, or more than one.
    """
    whole = is_complete_5(path)
    if not whole.complete:
        raise IncompleteRecordError(
            whole.reason, where=path.name, mend="Wait until it is written, or copy it again"
        )
    try:
        require_sound(path)
    except DamagedError as damage:
        raise InputError(
            f"the file is damaged: {damage}", where=path.name, mend="Save the record again"
        ) from None
    from scipy.io import loadmat

    try:
        variables = loadmat(path, simplify_cells=True)
    except Exception as error:  # a damaged file makes scipy raise almost any exception
        raise InputError(
            f"the file cannot be read: {error}", where=path.name, mend="Save the record again"
        ) from None
    arrays: list[NamedArray] = []
    scalars: dict[str, object] = {}
    _collect({k: v for k, v in variables.items() if not k.startswith("__")}, "", arrays, scalars)
    return table_of(arrays, scalars, hints, where=path.name)


def _collect(
    variables: Mapping[str, Any], above: str, arrays: list[NamedArray], scalars: dict[str, object]
) -> None:
    """Gather arrays of numbers and scalars from nested structures, by path."""
    for name, value in variables.items():
        path = f"{above}{name}"
        if isinstance(value, Mapping):
            if path.count("/") < _DEEPEST:
                _collect(value, path + "/", arrays, scalars)
        elif isinstance(value, np.ndarray) and value.dtype.kind in "iufb" and value.size > 1:
            arrays.append(NamedArray(path=path, shape=value.shape, load=lambda value=value: value))  # type: ignore[misc]
        elif isinstance(value, np.ndarray) and value.dtype.kind == "O":
            scalars[path] = [element for element in value.ravel() if isinstance(element, str)]
        else:
            scalars[path] = value


def is_complete_5(path: Path) -> Completeness:
    """Whether the last variable ends where the file ends (MAT-file format, level 5: tag, then bytes)."""
    size = path.stat().st_size
    count = 0
    with path.open("rb") as file:
        order: Any = "little" if file.read(_HEADER_BYTES)[126:128] == b"IM" else "big"
        place = _HEADER_BYTES
        while place + 8 <= size:
            file.seek(place)
            file.read(4)
            place += 8 + int.from_bytes(file.read(4), order)
            count += 1
    if place != size or not count:
        return Completeness(False, f"the file has {size} bytes, its last variable should end at byte {place}")
    return Completeness(True, f"{count} variables, the last one ends with the file")


READER_5 = Reader("matlab-5", "MATLAB up to version 7", recognises_5, read_5, is_complete_5)
READER_73 = Reader("matlab-7.3", "MATLAB 7.3", recognises_73, hdf5.read, hdf5.is_complete)
