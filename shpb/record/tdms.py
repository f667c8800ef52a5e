"""TDMS files, through the optional package nptdms."""

from __future__ import annotations

import logging
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from shpb.errors import IncompleteRecordError, InputError
from shpb.record.named_arrays import NamedArray, table_of
from shpb.record.raw import Completeness, RawTable, Reader
from shpb.rig.rig import RecordHints


def recognises(head: bytes, path: Path) -> bool:  # noqa: ARG001
    """Whether the first segment begins with the format's mark."""
    return head.startswith(b"TDSm")


def read(path: Path, hints: RecordHints) -> RawTable:
    """Read the channels; interval and start are their properties, or a time channel, or the hints.

    Raises
    ------
    IncompleteRecordError
        If the last segment is cut short; the library alone would not say so.
    InputError
        If nptdms is not installed, or the file cannot be read.
    """
    file = _open(path, read_data=True)
    whole = _completeness(file)
    if not whole.complete:
        raise IncompleteRecordError(
            whole.reason, where=path.name, mend="Wait until it is written, or copy it again"
        )
    arrays = []
    scalars: dict[str, object] = dict(file.properties)
    for group in file.groups():
        scalars.update({f"{group.name}/{key}": value for key, value in group.properties.items()})
        for channel in group.channels():
            if len(channel) and getattr(channel.dtype, "kind", "O") in "iufb":
                arrays.append(
                    NamedArray(
                        path=f"{group.name}/{channel.name}",
                        shape=(len(channel),),
                        load=lambda channel=channel: channel[:],  # type: ignore[misc]
                        facts=dict(channel.properties),
                    )
                )
    return table_of(arrays, scalars, hints, where=path.name)


def _open(path: Path, *, read_data: bool) -> Any:
    try:
        from nptdms import TdmsFile
    except ImportError:
        raise InputError(
            "this is a TDMS file, which needs the package nptdms",
            where=path.name,
            mend="Install the extra: pip install 'shpb[tdms]'",
        ) from None
    try:
        with _silenced():
            return TdmsFile.read(path) if read_data else TdmsFile.read_metadata(path)
    except Exception as error:  # a damaged file makes the library raise almost any exception
        raise InputError(
            f"the file cannot be read: {error}", where=path.name, mend="Copy or export it again"
        ) from None


@contextmanager
def _silenced() -> Iterator[None]:
    """Keep the library's warnings about a cut segment off the screen: they become our error."""
    loggers = [logging.getLogger(f"nptdms.{name}") for name in ("reader", "tdms", "tdms_segment")]
    before = [logger.disabled for logger in loggers]
    for logger in loggers:
        logger.disabled = True
    try:
        yield
    finally:
        for logger, disabled in zip(loggers, before, strict=True):
            logger.disabled = disabled


def _completeness(file: Any) -> Completeness:
    if file.file_status.incomplete_final_segment:
        return Completeness(False, "the last segment of the file is cut short")
    return Completeness(True, "the last segment of the file is whole")


def is_complete(path: Path) -> Completeness:
    """Whether the last segment is whole."""
    return _completeness(_open(path, read_data=False))


READER = Reader("tdms", "TDMS (needs the extra shpb[tdms])", recognises, read, is_complete)
