"""Write a file so that it is whole or not there: temporary file beside it, fsync, rename."""

from __future__ import annotations

import contextlib
import os
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from shpb.errors import StoreError

PART_SUFFIX = ".part"  # of temporary files; never taken for a result
_WINDOWS_BUSY = {5, 32, 33}  # access denied, sharing violation, lock violation
_BACK_OFF_S = (0.05, 0.1, 0.2, 0.4, 0.8, 1.0)


@contextmanager
def whole_file(target: Path) -> Iterator[Path]:
    """Give a temporary path beside ``target``; on leaving without an error it becomes ``target``.

    Raises
    ------
    StoreError
        If the folder or the disk refuses; what stood at ``target`` before stands there still.
    """
    part = target.with_name(f".{target.name}.{os.getpid()}{PART_SUFFIX}")
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        yield part
        _sync(part)
        _replace(part, target)
        _sync_folder(target.parent)
    except OSError as error:
        _discard(part)
        raise StoreError(
            f"could not be written: {error.strerror or error}",
            where=str(target),
            mend="Check free space and permission of the folder; an earlier result is untouched",
        ) from error
    except BaseException:
        _discard(part)
        raise


def _discard(part: Path) -> None:
    with contextlib.suppress(OSError):
        part.unlink(missing_ok=True)


def _sync(path: Path) -> None:
    descriptor = os.open(path, os.O_RDWR)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _sync_folder(folder: Path) -> None:
    """Make the rename itself durable; folders cannot be opened on Windows, where it is not needed."""
    if os.name == "nt":
        return
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _replace(part: Path, target: Path) -> None:
    for pause in _BACK_OFF_S:
        try:
            os.replace(part, target)
        except PermissionError as error:
            # A virus scanner or viewer holds the file for a moment: only Windows does that.
            if getattr(error, "winerror", None) not in _WINDOWS_BUSY:
                raise
            time.sleep(pause)
        else:
            return
    os.replace(part, target)
