"""A demo shot's record as files, each in a format that scopes, DAQ cards or scripts write.

Every writer is deterministic: no clock and no name of a machine enters a file.
"""

from __future__ import annotations

import io
from collections.abc import Callable, Iterable
from typing import Protocol

import numpy as np

from shpb.arrays import FloatArray
from shpb.demo.scenario import Format
from shpb.demo.scope import ScopeRecord
from shpb.forward.recording import Digitised

Files = dict[str, bytes]


class Recorded(Protocol):
    """What a record's files say of the shot, and how they are written."""

    @property
    def shot_id(self) -> str:
        """Name of the shot, and of its files."""
        ...

    @property
    def date(self) -> str:
        """Day of the shot."""
        ...

    @property
    def format(self) -> Format:
        """How the record is written."""
        ...


def record_files(shot: Recorded, record: ScopeRecord) -> Files:
    """Return the files of one record, by name."""
    return _WRITERS[shot.format](shot, record)


def _comma(shot: Recorded, record: ScopeRecord) -> Files:
    head = [
        f"Shot,{shot.shot_id}",
        f"Date,{shot.date}",
        f"Sample Interval,{record.interval_s:.6e},s",
        f"Trigger Offset,{record.start_s:.6e},s",
        f"Record Length,{record.samples}",
        ",".join(("Time", *record.names)),
        ",".join(("s", *("V" for _ in record.names))),
    ]
    rows = _rows(",", (f"{t:.8e}" for t in record.time_s), record.channels)
    return {f"{shot.shot_id}.csv": _text(head, rows)}


def _semicolon(shot: Recorded, record: ScopeRecord) -> Files:
    head = [";".join(("t [µs]", *(f"{name} [V]" for name in record.names)))]
    rows = _rows(";", (f"{t * 1e6:.2f}" for t in record.time_s), record.channels)
    text = _text(head, (row.replace(".", ",") for row in rows), newline="\r\n", encoding="latin-1")
    return {f"{shot.shot_id}.csv": text}


def _tab(shot: Recorded, record: ScopeRecord) -> Files:
    head = ["\t".join(("time (ms)", *(f"{name} (mV)" for name in record.names)))]
    times = (f"{t * 1e3:.5f}" for t in record.time_s)
    return {f"{shot.shot_id}.txt": _text(head, _rows("\t", times, record.channels, scale=1e3))}


def _per_channel(shot: Recorded, record: ScopeRecord) -> Files:
    files = {}
    for name, channel in zip(record.names, record.channels, strict=True):
        rows = _rows(",", (f"{t:.8e}" for t in record.time_s), (channel,))
        files[f"{shot.shot_id}_{name}.csv"] = _text([f"time_s,{name} (V)"], rows)
    return files


def _codes(shot: Recorded, record: ScopeRecord) -> Files:
    head = [
        f"# shot: {shot.shot_id}",
        f"# sample interval: {record.interval_s * 1e6:g} us",
        f"# trigger offset: {record.start_s * 1e6:g} us",
        "# volts per code: " + ", ".join(f"{channel.volts_per_code:.12g}" for channel in record.channels),
        ",".join(record.names),
    ]
    columns = [channel.codes.tolist() for channel in record.channels]
    return {
        f"{shot.shot_id}.csv": _text(head, (",".join(map(str, row)) for row in zip(*columns, strict=True)))
    }


def _npz(shot: Recorded, record: ScopeRecord) -> Files:
    out = io.BytesIO()
    arrays = {name: ch.voltage_v for name, ch in zip(record.names, record.channels, strict=True)}
    facts = {
        "sample_interval_s": np.array(record.interval_s),
        "trigger_offset_s": np.array(record.start_s),
        "voltage_unit": np.array("V"),
    }
    np.savez(out, **arrays, **facts)  # type: ignore[arg-type]
    return {f"{shot.shot_id}.npz": out.getvalue()}


def _hdf5(shot: Recorded, record: ScopeRecord) -> Files:
    import h5py

    out = io.BytesIO()
    with h5py.File(out, "w") as file:
        scope = file.create_group("scope")
        scope.attrs["sample_interval_s"] = record.interval_s
        scope.attrs["trigger_offset_s"] = record.start_s
        for name, channel in zip(record.names, record.channels, strict=True):
            stored = scope.create_dataset(name, data=channel.voltage_v, compression="gzip", shuffle=True)
            stored.attrs["unit"] = "V"
    return {f"{shot.shot_id}.h5": out.getvalue()}


_MAT_TEXT_BYTES = 116  # descriptive text at the head of a MAT file, level 5


def _matlab(shot: Recorded, record: ScopeRecord) -> Files:
    from scipy.io import savemat

    columns: dict[str, FloatArray | str] = {"time_s": record.time_s, "voltage_unit": "V"}
    columns.update({name: ch.voltage_v for name, ch in zip(record.names, record.channels, strict=True)})
    out = io.BytesIO()
    savemat(out, columns, oned_as="column")
    # The library puts the day into the head; the head's text is free but for its first words.
    head = b"MATLAB 5.0 MAT-file".ljust(_MAT_TEXT_BYTES)
    return {f"{shot.shot_id}.mat": head + out.getvalue()[_MAT_TEXT_BYTES:]}


_WRITERS: dict[Format, Callable[[Recorded, ScopeRecord], Files]] = {
    Format.COMMA: _comma,
    Format.SEMICOLON: _semicolon,
    Format.TAB: _tab,
    Format.PER_CHANNEL: _per_channel,
    Format.CODES: _codes,
    Format.NPZ: _npz,
    Format.HDF5: _hdf5,
    Format.MATLAB: _matlab,
}


def _rows(
    separator: str, times: Iterable[str], channels: Iterable[Digitised], scale: float = 1.0
) -> Iterable[str]:
    """Rows of time and volts (times ``scale``); each digitiser code is turned into text once."""
    columns = []
    for channel in channels:
        codes = channel.codes.tolist()
        volts = {code: f"{code * channel.volts_per_code * scale:.6f}" for code in set(codes)}
        columns.append([volts[code] for code in codes])
    return (separator.join(row) for row in zip(times, *columns, strict=True))


def _text(head: Iterable[str], rows: Iterable[str], newline: str = "\n", encoding: str = "utf-8") -> bytes:
    return (newline.join((*head, *rows)) + newline).encode(encoding)
