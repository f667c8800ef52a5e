"""The readers there are, and which of them understands a file.

Built-in readers are asked first, by content. Readers of other packages, declared under the
entry-point group ``shpb.readers`` (how: :mod:`shpb.record.raw`), are looked up only when no built-in
reader recognises a file, or when a reader is named or listed: the look-up costs time.
"""

from __future__ import annotations

import logging
from pathlib import Path

from shpb.errors import IncompleteRecordError, InputError
from shpb.record import text
from shpb.record.raw import Reader
from shpb.record.text_layout import encoding_of, layout_of, read_head

ENTRY_POINT_GROUP = "shpb.readers"

_log = logging.getLogger(__name__)


def built_in_readers() -> tuple[Reader, ...]:
    """Return the readers of this package, in the order in which they are asked.

    Binary formats come first: they announce themselves in their first bytes, while text is whatever has
    rows of numbers.
    """
    from shpb.record import hdf5, matlab, numpy_file, tdms

    return hdf5.READER, matlab.READER_73, matlab.READER_5, tdms.READER, numpy_file.READER, text.READER


def available_readers() -> tuple[Reader, ...]:
    """Return all readers, the built-in ones first; one that cannot be loaded is logged and left out."""
    return built_in_readers() + _declared_elsewhere()


def _declared_elsewhere() -> tuple[Reader, ...]:
    from importlib.metadata import entry_points

    readers = []
    for entry in entry_points(group=ENTRY_POINT_GROUP):
        try:
            reader = entry.load()
        except Exception as error:  # whatever another package does on import must not stop ours
            _log.warning("the reader %s (%s) cannot be loaded: %s", entry.name, entry.value, error)
            continue
        if isinstance(reader, Reader):
            readers.append(reader)
        else:
            _log.warning("the reader %s (%s) is no shpb.record.raw.Reader", entry.name, entry.value)
    return tuple(readers)


def reader_for(path: Path, name: str | None = None) -> Reader:
    """Return the reader for a file: the one that is named, else the first that recognises its content.

    Raises
    ------
    IncompleteRecordError
        If the file is empty.
    InputError
        If the file cannot be opened, if no reader recognises it, or if there is none of that name;
        the message lists those that there are.
    """
    try:
        head = read_head(path)
    except OSError as error:
        raise InputError(
            f"the file cannot be read: {error.strerror or error}",
            where=str(path),
            mend="Check the name, the permissions, and that the disk or share is there",
        ) from None
    if name is not None:
        return _by_name(name, path)
    if not head:
        raise IncompleteRecordError("the file is empty", where=path.name, mend="Wait until it is written")
    # Most records are text, and no binary format does without zero bytes: spare the others' start-up.
    if b"\0" not in head and text.READER.recognises(head, path):
        return text.READER
    for readers in (built_in_readers, _declared_elsewhere):
        for reader in readers():
            if reader.recognises(head, path):
                return reader
    if encoding_of(head):
        layout_of(path)  # says what is wrong with it as text
    kinds = "; ".join(reader.description for reader in built_in_readers())
    raise InputError(
        f"no reader recognises the file (it begins with {head[:8]!r})",
        where=path.name,
        mend=f"Export it as one of these: {kinds}",
    )


def _by_name(name: str, path: Path) -> Reader:
    readers = {reader.name: reader for reader in built_in_readers()}
    if name not in readers:  # the look-up among installed packages costs time
        readers = {reader.name: reader for reader in available_readers()}
    if name not in readers:
        raise InputError(
            f"there is no reader {name!r}", where=path.name, mend=f"Name one of {', '.join(readers)}"
        )
    return readers[name]
