"""HDF5 files of any layout (MATLAB 7.3 files among them: :mod:`shpb.record.matlab`)."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from shpb.errors import IncompleteRecordError, InputError
from shpb.record.named_arrays import NamedArray, table_of
from shpb.record.raw import Completeness, RawTable, Reader
from shpb.rig.rig import RecordHints

if TYPE_CHECKING:
    import h5py

_SIGNATURE = b"\x89HDF\r\n\x1a\n"
_MATLAB = b"MATLAB 7.3"


def has_signature(head: bytes) -> bool:
    """Whether the HDF5 signature stands at byte 0, 512, 1024, 2048, ... (HDF5 file format, II.A)."""
    places = [0, *(512 << i for i in range(7))]
    return any(head[place : place + len(_SIGNATURE)] == _SIGNATURE for place in places)


def recognises(head: bytes, path: Path) -> bool:  # noqa: ARG001
    """Whether the file is HDF5, and not written by MATLAB."""
    return has_signature(head) and not head.startswith(_MATLAB)


def read(path: Path, hints: RecordHints) -> RawTable:
    """Read the record out of an HDF5 file (:mod:`shpb.record.named_arrays` says how it is chosen).

    A damaged file can crash or hang the HDF5 library itself: whoever reads foreign files unattended
    does so in a process of its own.

    Raises
    ------
    IncompleteRecordError
        If the file is cut short or still open for writing.
    InputError
        If it holds no series of samples, or more than one.
    """
    import h5py

    whole = is_complete(path)
    if not whole.complete:
        raise IncompleteRecordError(
            whole.reason, where=path.name, mend="Wait until it is written, or copy it again"
        )
    try:
        with h5py.File(path, "r", locking="best-effort") as file:
            arrays, scalars = _contents(file)
            return table_of(arrays, scalars, hints, where=path.name)
    except (OSError, RuntimeError, KeyError, TypeError, ValueError, MemoryError) as error:
        raise InputError(
            f"the file cannot be read: {error}", where=path.name, mend="Export the record again"
        ) from None


def _contents(file: h5py.File) -> tuple[list[NamedArray], dict[str, object]]:
    """Return the arrays of numbers and the scalars of a file by path. Links are not followed."""
    import h5py

    arrays: list[NamedArray] = []
    scalars: dict[str, object] = {
        key: value for key, value in file.attrs.items() if not key.startswith("MATLAB")
    }

    def visit(path: str, item: object) -> None:
        if path.startswith("#"):  # MATLAB's store of referenced objects
            return
        attributes = {key: _text(value) for key, value in item.attrs.items()}  # type: ignore[attr-defined]
        if isinstance(item, h5py.Group):
            scalars.update({f"{path}/{key}": value for key, value in attributes.items()})
            return
        if not isinstance(item, h5py.Dataset) or item.shape is None:
            return
        if attributes.get("MATLAB_class") == "char":
            scalars[path] = "".join(map(chr, item[()].T.ravel())) if item.size < 256 else ""
        elif (item.dtype.kind in "iufb" and item.size > 1) or item.dtype.names:
            arrays.append(
                NamedArray(
                    path=path,
                    shape=item.shape,
                    load=lambda item=item: np.asarray(item[()]),  # type: ignore[misc]
                    facts={key: value for key, value in attributes.items() if not key.startswith("MATLAB")},
                    fields=tuple(item.dtype.names or ()),
                )
            )
        elif item.size <= 64 and item.dtype.kind in "iufbSO":
            scalars[path] = _text(item[()])

    file.visititems(visit)
    return arrays, scalars


def _text(value: Any) -> Any:
    """Return bytes as text, also within arrays, and one-element arrays as their element."""
    if isinstance(value, bytes):
        return value.decode("utf-8", "replace")
    if isinstance(value, np.ndarray):
        values: NDArray[Any] = value
        if values.size == 1:
            return _text(values.reshape(-1)[0])
        if values.dtype.kind in "SO":
            return [_text(element) for element in values.ravel()]
    return value


def is_complete(path: Path) -> Completeness:
    """Whether the file opens: HDF5 keeps its length in its first block, and a writer's mark."""
    import h5py

    try:
        with h5py.File(path, "r", locking="best-effort") as file:
            return Completeness(True, f"it opens, with {len(file)} entries at its top")
    except (OSError, RuntimeError) as error:
        return Completeness(False, f"it does not open: {error}")


READER = Reader("hdf5", "HDF5 of any layout", recognises, read, is_complete)
