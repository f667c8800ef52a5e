"""What a reader hands over, and what a reader is.

A reader turns one file into a :class:`RawTable`: columns as they stand in the file, with the names,
units and facts that the file states, and nothing guessed. Time base, units, codes, over-range
samples and hints from the rig file are common work and are done once, in :mod:`shpb.record.clock`
and :mod:`shpb.record.channels`.

How to add a reader
-------------------
1. Write a module with three functions::

       def recognises(head: bytes, path: Path) -> bool: ...   # first 64 KiB; decide by content
       def read(path: Path, hints: RecordHints) -> RawTable: ...
       def is_complete(path: Path) -> Completeness: ...

       READER = Reader("my-format", "what it reads, in a few words", recognises, read, is_complete)

2. Declare it in the ``pyproject.toml`` of your own package::

       [project.entry-points."shpb.readers"]
       my-format = "my_package.my_module:READER"

The built-in readers are asked first; yours is asked about every file that none of them recognises,
or when it is named (``read_record(path, reader="my-format")``). Raise
:class:`~shpb.errors.InputError` for a file that cannot be used and
:class:`~shpb.errors.IncompleteRecordError` for one that is cut short. Columns may have any integer or
float type; +inf and -inf mark samples over the range of the digitiser; NaN is refused later, with
the sample and channel named. Import heavy libraries inside the functions.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from numpy.typing import NDArray

from shpb.record.stated import Stated
from shpb.rig.rig import RecordHints

HEAD_BYTES = 65536  # what a reader sees of a file to recognise it, and where a header must end


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RawColumn:
    """One column of a file, as written.

    Attributes
    ----------
    values : array, shape (samples,)
        Integers or floats; +inf and -inf where the digitiser was over range.
    name, unit : str
        As the file writes them; empty where it says nothing.
    stated : Stated
        What the file states about this column alone (volts per code, full scale).
    """

    values: NDArray[Any]
    name: str = ""
    unit: str = ""
    stated: Stated = field(default_factory=Stated)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RawTable:
    """The content of one file.

    Attributes
    ----------
    columns : tuple of RawColumn
        All columns, a time column among them if there is one.
    stated : Stated
        What the file states about the whole record.
    first_line : int or None
        Line of the first sample in a text file, counted from 1, for messages.
    remarks : tuple of str
        What the user should know, in plain words.
    """

    columns: tuple[RawColumn, ...]
    stated: Stated = field(default_factory=Stated)
    first_line: int | None = None
    remarks: tuple[str, ...] = ()

    def place(self, sample: int) -> str:
        """Say where ``sample`` (counted from 0) stands: the line in a text file, else its number."""
        return f"sample {sample + 1}" if self.first_line is None else f"line {self.first_line + sample}"


@dataclass(frozen=True, slots=True)
class Completeness:
    """Whether a file is whole, and how that was seen."""

    complete: bool
    reason: str


@dataclass(frozen=True, slots=True)
class Reader:
    """One file format.

    Attributes
    ----------
    name : str
        Stored with every record that this reader read.
    description : str
        A few words for a list of readers.
    recognises : callable
        Whether a file is of this format, from its first 64 KiB.
    read : callable
        Read a file. Raises InputError, or IncompleteRecordError if it is cut short.
    is_complete : callable
        Whether a file is whole; never raises for a file that is still being written.
    """

    name: str
    description: str
    recognises: Callable[[bytes, Path], bool]
    read: Callable[[Path, RecordHints], RawTable]
    is_complete: Callable[[Path], Completeness]
