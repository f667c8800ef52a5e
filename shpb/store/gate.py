"""Whether an HDF5 file is one of this program's, and of a version that it reads."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from shpb.errors import StoreError

if TYPE_CHECKING:
    import h5py


def require_format(file: h5py.File, path: Path, *, name: str, version: int, what: str, verb: str) -> None:
    """Refuse a file that is not ``what`` of this program, or was written by a later version of its format.

    Parameters
    ----------
    file : h5py.File
    path : Path
        For messages.
    name, version : str, int
        Of the format.
    what, verb : str
        "a shot" as ``shpb reduce`` writes it, for messages.

    Raises
    ------
    StoreError
    """
    if file.attrs.get("format") != name:
        raise StoreError(
            f"is an HDF5 file, but not {what} of this program",
            where=str(path),
            mend=f"Give a file that `shpb {verb}` wrote",
        )
    found = int(file.attrs["format_version"])
    if found > version:
        raise StoreError(
            f"has format version {found}; this program reads up to {version}",
            where=str(path),
            mend="Update the program",
        )
