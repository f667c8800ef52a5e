"""What an HDF5 file is, without reading it: a shot, a merge, something else, or damaged."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import NamedTuple

from shpb.store import layout, merge_layout


class Holds(StrEnum):
    """What stands in an HDF5 file."""

    SHOT = "shot"
    MERGE = "merge"
    OTHER = "other"
    DAMAGED = "damaged"


class Peek(NamedTuple):
    """What a file holds, and for a shot the hashes of the records that it was reduced from."""

    holds: Holds
    records: tuple[str, ...] = ()


def peek(path: Path) -> Peek:
    """Look at the attributes of an HDF5 file."""
    import h5py

    try:
        with h5py.File(path, "r", locking="best-effort") as file:
            written = file.attrs.get("format")
            if written == merge_layout.FORMAT:
                return Peek(Holds.MERGE)
            if written != layout.FORMAT:
                return Peek(Holds.OTHER)
            return Peek(Holds.SHOT, tuple(str(one) for one in file["record"].attrs["sha256"]))
    except (OSError, KeyError, RuntimeError, ValueError, TypeError):
        return Peek(Holds.DAMAGED)
