"""One watch at a time for one results folder; the lock goes with the process, however it ends."""

from __future__ import annotations

from pathlib import Path
from typing import IO

from shpb.errors import InputError

FILE_NAME = ".watch.lock"


def hold(results: Path) -> IO[bytes] | None:
    """Take the lock of a results folder; keep what is returned open for as long as it is needed.

    None where the file system knows no locks.

    Raises
    ------
    InputError
        If another watch holds it.
    """
    try:
        file = (results / FILE_NAME).open("ab")
    except OSError:
        return None
    try:
        _lock(file)
    except BlockingIOError:
        file.close()
        raise InputError(
            "another `shpb watch` is at work with these results",
            where=str(results),
            mend="End that one first, or choose another folder with --results",
        ) from None
    except OSError:
        file.close()
        return None
    return file


def _lock(file: IO[bytes]) -> None:
    try:
        import fcntl
    except ImportError:
        _lock_on_windows(file)
        return
    fcntl.flock(file.fileno(), fcntl.LOCK_EX | fcntl.LOCK_NB)


def _lock_on_windows(file: IO[bytes]) -> None:
    import importlib

    msvcrt = importlib.import_module("msvcrt")
    try:
        msvcrt.locking(file.fileno(), msvcrt.LK_NBLCK, 1)
    except OSError as error:
        raise BlockingIOError from error
