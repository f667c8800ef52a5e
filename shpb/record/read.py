"""A shot's record from its file or files: the door of the package."""

from __future__ import annotations

import hashlib
import threading
from collections import Counter
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from shpb.errors import IncompleteRecordError, InputError
from shpb.record.channels import Channel, channels_of, in_volts, named_as_hinted, storable
from shpb.record.clock import Clock, read_clock
from shpb.record.raw import Completeness
from shpb.record.record import Record, Source
from shpb.record.registry import reader_for
from shpb.rig.rig import RecordHints

_BLOCK = 1 << 18
NO_HINTS = RecordHints()


def read_record(
    paths: str | Path | Sequence[str | Path],
    hints: RecordHints = NO_HINTS,
    *,
    reader: str | None = None,
) -> Record:
    """Read the voltage record of one shot.

    Parameters
    ----------
    paths : path or sequence of paths
        One file, or one file for each channel (or group of channels); then all must be on one clock.
    hints : RecordHints
        What the files lack. Where a file says it too, both must agree.
    reader : str or None
        Name of the reader to use; None chooses by content.

    Returns
    -------
    Record
        Voltages [V], shape (channels, samples), on one even clock. Channels are called as the file
        calls them, without the unit in brackets; unnamed ones CH1, CH2, ...; of several files with one
        unnamed channel each, after the file. Samples over range stand at the rail and a remark counts
        them (:mod:`shpb.record.channels`).

    Raises
    ------
    IncompleteRecordError
        If a file is still being written or was cut short.
    InputError
        If a file cannot be understood, or its samples are not on one even clock, or hold a NaN; the
        message names file, line and channel, and the mend.

    Examples
    --------
    >>> import tempfile
    >>> lines = ["Time (us),incident (mV)", *(f"{0.2 * i - 4:.1f},{i % 7}.5" for i in range(100))]
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder, "shot-017.csv")
    ...     _ = path.write_text(chr(10).join([*lines, ""]))
    ...     record = read_record(path, RecordHints(trigger_offset_s=-4e-6))
    >>> record.channels, record.voltage_v.shape, round(record.sample_interval_s, 12)
    (('incident',), (1, 100), 2e-07)
    >>> float(record.voltage_v[0, 1])
    0.0015
    """
    files = [Path(paths)] if isinstance(paths, str | Path) else [Path(path) for path in paths]
    if not files:
        raise InputError("no file is given", where="record", mend="Give one file, or one for each channel")
    # The numbers of a damaged file may be anything; what came of them is checked, so nothing need be said here.
    with np.errstate(all="ignore"):
        return _read_files(files, hints, reader)


def _read_files(files: Sequence[Path], hints: RecordHints, reader: str | None) -> Record:
    sources, clocks, channels, remarks = [], [], [], []
    for path in files:
        source, clock, own, said = _read_one(path, hints, reader)
        sources.append(source)
        clocks.append(clock)
        channels.append(own)
        remarks += said if len(files) == 1 else [f"{path.name}: {remark}" for remark in said]
    _require_one_clock(clocks, sources)
    joined = channels[0] if len(files) == 1 else _named_after_files(channels, files)
    chosen, naming = named_as_hinted(joined, hints)
    voltage, scaling = in_volts(chosen, hints)
    return Record(
        voltage_v=voltage,
        sample_interval_s=clocks[0].interval_s,
        start_s=clocks[0].start_s,
        channels=tuple(channel.name for channel in chosen),
        sources=tuple(sources),
        remarks=(*remarks, *naming, *scaling),
    )


def is_complete(path: str | Path, *, reader: str | None = None) -> Completeness:
    """Whether a record file is whole, as far as its own format tells.

    A file that no reader recognises counts as incomplete: its beginning may not be written yet.
    """
    path = Path(path)
    try:
        return reader_for(path, reader).is_complete(path)
    except InputError as error:
        return Completeness(False, error.what)
    except OSError as error:
        return Completeness(False, f"the file cannot be read: {error.strerror or error}")


def _read_one(
    path: Path, hints: RecordHints, reader_name: str | None
) -> tuple[Source, Clock, list[Channel], list[str]]:
    reader = reader_for(path, reader_name)
    try:
        before = path.stat()
        # The hash is made beside the parsing: hashlib lets other threads run.
        hashing = _Hashing(path)
        hashing.start()
        try:
            table = reader.read(path, hints)
        finally:
            hashing.join()
        digest = hashing.hexdigest()
        after = path.stat()
    except OSError as error:
        raise InputError(
            f"the file cannot be read: {error.strerror or error}",
            where=str(path),
            mend="Check the name, the permissions, and that the disk or share is there",
        ) from error
    if (before.st_size, before.st_mtime_ns) != (after.st_size, after.st_mtime_ns):
        raise IncompleteRecordError(
            "the file changed while it was read", where=path.name, mend="Wait until it is written"
        )
    clock, columns, clock_remarks = read_clock(table, hints, where=path.name)
    channels, channel_remarks = channels_of(table, columns, path.name)
    source = Source(name=storable(path.name), sha256=digest, size_bytes=after.st_size, reader=reader.name)
    return source, clock, channels, [*table.remarks, *clock_remarks, *channel_remarks]


class _Hashing(threading.Thread):
    """SHA-256 of a file, made in a thread."""

    def __init__(self, path: Path) -> None:
        super().__init__(name=f"sha256 of {path.name}")
        self._path = path
        self._digest = hashlib.sha256()
        self._error: OSError | None = None

    def run(self) -> None:
        try:
            with self._path.open("rb", buffering=0) as file:
                buffer = memoryview(bytearray(_BLOCK))
                while size := file.readinto(buffer):
                    self._digest.update(buffer[:size])
        except OSError as error:
            self._error = error

    def hexdigest(self) -> str:
        """Return the hash, or raise the error that kept the file from being read."""
        if self._error is not None:
            raise self._error
        return self._digest.hexdigest()


def _require_one_clock(clocks: Sequence[Clock], sources: Sequence[Source]) -> None:
    """Refuse files whose samples drift apart by more than a tenth of a sample anywhere."""
    first = clocks[0]
    for clock, source in zip(clocks[1:], sources[1:], strict=True):
        drift_s = abs(clock.interval_s - first.interval_s) * first.samples + abs(
            clock.start_s - first.start_s
        )
        if clock.samples != first.samples or drift_s > 0.1 * first.interval_s:
            raise InputError(
                f"the files have different clocks: {sources[0].name} has {first}; {source.name} has {clock}",
                where="record",
                mend="Export all channels of the shot from one recording, with the same span",
            )


def _named_after_files(channels: Sequence[Sequence[Channel]], files: Sequence[Path]) -> list[Channel]:
    """Keep names that are given once over all files; others are made from the file's name."""
    count = Counter(channel.name for own in channels for channel in own)
    joined = []
    for own, path in zip(channels, files, strict=True):
        for channel in own:
            if channel.named and count[channel.name] == 1:
                joined.append(channel)
            else:
                stem = storable(path.stem)
                name = stem if len(own) == 1 else f"{stem} {channel.name}"
                joined.append(channel._replace(name=name, named=False))
    return joined
