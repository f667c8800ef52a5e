"""What several verbs ask of their options and of the folders that are named, in the same words."""

from __future__ import annotations

from pathlib import Path

from shpb.errors import InputError

RESULTS = (".h5", ".hdf5")  # endings of result files
FIGURES = ("png", "pdf", "svg", "none")
# What a file that says it is a shot, but lacks something, runs into.
LACKING = (KeyError, IndexError, ValueError, TypeError, AttributeError, OverflowError)


def require_workers(workers: int | None) -> None:
    """Refuse a number of processes below one; None leaves it to the verb.

    Raises
    ------
    InputError
        With what was asked for.
    """
    if workers is not None and workers < 1:
        raise InputError(f"found {workers}", where="--workers", mend="Give 1 or more")


def require_folder(folder: Path, option: str) -> None:
    """Refuse a place for results that is a file; one that is not there yet is fine.

    Raises
    ------
    InputError
        Naming the option.
    """
    if folder.exists() and not folder.is_dir():
        raise InputError("this is a file", where=str(folder), mend=f"Give a folder for {option}")


def entries_of(folder: Path) -> list[Path]:
    """What lies in a folder, by name.

    Raises
    ------
    InputError
        If the system refuses to list it.
    """
    try:
        return sorted(folder.iterdir())
    except OSError as error:
        raise InputError(
            f"the folder cannot be read: {error.strerror or error}",
            where=str(folder),
            mend="Check the permissions",
        ) from None


def result_files(folder: Path) -> list[Path]:
    """HDF5 files of a folder by name, hidden ones left out; none where there is no such folder.

    Raises
    ------
    InputError
        As :func:`entries_of`.
    """
    if not folder.is_dir():
        return []
    return [
        path
        for path in entries_of(folder)
        if path.suffix.lower() in RESULTS and not path.name.startswith(".") and path.is_file()
    ]
