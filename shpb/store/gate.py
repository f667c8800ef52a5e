"""Whether an HDF5 file is one of this program's, and of a version that it reads."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from shpb.errors import StoreError

if TYPE_CHECKING:
    import h5py


@contextmanager
def opened(
    path: Path, *, name: str, version: int, what: str, read_as: str, verb: str, again: str
) -> Iterator[h5py.File]:
    """Open a file of this program to read from it; whatever goes wrong while it is read is said of the file.

    Parameters
    ----------
    path : Path
    name, version, what, verb : str, int
        As :func:`require_format`.
    read_as, again : str
        "a shot file", and what to do if it is damaged, for messages.

    Raises
    ------
    StoreError
        If it is not there, is something else, is damaged, or was written by a later version of the format.
    """
    import h5py

    try:
        with h5py.File(path, "r", locking="best-effort") as file:
            require_format(file, path, name=name, version=version, what=what, verb=verb)
            yield file
    except FileNotFoundError:
        raise StoreError("there is no such file", where=str(path), mend="Check the name") from None
    except (OSError, KeyError, ValueError, TypeError, RuntimeError) as error:
        raise StoreError(
            f"cannot be read as {read_as} ({error})", where=str(path), mend=f"It may be damaged: {again}"
        ) from error


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
