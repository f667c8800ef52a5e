"""One HDF5 file a shot: written whole or not at all, read back, reduced again.

Layout and names: :mod:`shpb.store.layout`. Groups that hold curves carry the NeXus NXdata attributes
(``NX_class``, ``signal``, ``axes``, ``units``, ``long_name``), so any general HDF5 viewer plots them.
"""

from __future__ import annotations

import datetime
import io
import json
from collections.abc import Iterable, Mapping
from contextlib import AbstractContextManager
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import StoreError
from shpb.pulse.by_hand import ByHand
from shpb.record.record import Record, Source
from shpb.reduction import ShotResult, reduce
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings
from shpb.store import layout
from shpb.store.forward_run import write_closure, write_corrections
from shpb.store.gate import opened
from shpb.store.plain import from_plain, to_plain
from shpb.trust.finding import Finding
from shpb.version import VERSION
from shpb.whole_file import whole_file

if TYPE_CHECKING:
    import h5py

    from shpb.trust.draws import Draws

_COMPRESSED = {"compression": "gzip", "compression_opts": 1, "shuffle": True, "fletcher32": True}


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class StoredShot:
    """A shot as read back from its file.

    ``arrays`` maps a path such as ``"response/stress_3w"`` to its values, ``attributes`` a path such as
    ``"response"`` to the attributes of that group ("/" for the file).
    """

    path: Path
    record: Record
    rig: Rig
    sheet: ShotSheet
    settings: Settings
    findings: tuple[Finding, ...]
    arrays: Mapping[str, FloatArray]
    units: Mapping[str, str]
    attributes: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    by_hand: tuple[ByHand, ...] = ()  # what people moved, oldest first

    @property
    def verdict(self) -> str:
        """accept, restrict or reject, as it was stored."""
        return str(self.attributes["/"]["verdict"])

    def __getitem__(self, path: str) -> FloatArray:
        """Values at a path; the message of the error lists what there is."""
        try:
            return self.arrays[path]
        except KeyError:
            raise StoreError(
                f"there is no {path!r}",
                where=str(self.path),
                mend=f"There are {', '.join(sorted(self.arrays))}",
            ) from None

    def reduce_again(self, settings: Settings | None = None) -> ShotResult:
        """Reduce the stored record again, with the stored settings or others."""
        result = reduce(self.record, self.rig, self.sheet, settings or self.settings)
        return replace(result, by_hand=self.by_hand)


# --- out ---------------------------------------------------------------------------------------


def save_shot(result: ShotResult, path: Path | str, *, replace_other: bool = False) -> Path:
    """Write a shot to its HDF5 file, whole or not at all.

    Parameters
    ----------
    result : ShotResult
        The reduced shot.
    path : Path
        File to write. What stands there is replaced only if it holds the same shot.
    replace_other : bool
        Replace it whatever it holds.

    Raises
    ------
    StoreError
        If another shot or a foreign file stands there, or the disk refuses.

    Examples
    --------
    >>> import shpb
    >>> path = shpb.save_shot(result, folder / "W-02.h5")
    >>> path.name
    'W-02.h5'
    """
    import h5py

    target = Path(path)
    if target.exists() and not replace_other:
        _require_same_shot(target, result)
    # Built in memory and written as plain bytes: on a full disk the HDF5 library itself may bring the process down.
    # A buffer of Python's own, which is written as it stands: the library's would have to be copied out first.
    buffer = io.BytesIO()
    with h5py.File(buffer, "w", libver=("earliest", "v110")) as file:
        _write(file, result)
    with whole_file(target) as part:
        part.write_bytes(buffer.getbuffer())
    return target


def _require_same_shot(target: Path, result: ShotResult) -> None:
    """The same shot has the same id and came from the same record."""
    import h5py

    shot_id, hashes = result.sheet.shot_id, [source.sha256 for source in result.record.sources]
    what = "is not a shot file of this program"
    try:
        with h5py.File(target, "r", locking="best-effort") as file:
            if file.attrs.get("format") == layout.FORMAT:
                held, held_hashes = file.attrs.get("shot_id"), list(file["record"].attrs["sha256"])
                if held == shot_id and held_hashes == hashes:
                    return
                what = f"holds shot {held}" + (" from another record" if held == shot_id else "")
    except (OSError, KeyError, RuntimeError):
        what = "cannot be read as a shot file"
    raise StoreError(
        f"the file {what}; shot {shot_id} is not written over it",
        where=str(target),
        mend="Choose another folder for the results, or move that file away",
    )


def _write(file: h5py.File, result: ShotResult) -> None:
    file.attrs.update(
        {
            "format": layout.FORMAT,
            "format_version": layout.FORMAT_VERSION,
            "program_version": VERSION,
            "created_utc": datetime.datetime.now(datetime.UTC).isoformat(timespec="seconds"),
            "shot_id": result.sheet.shot_id,
            "verdict": result.verdict.value,
            "NX_class": "NXroot",
            "default": "response",
        }
    )
    _write_record(file, result.record)
    _write_inputs(file, result)
    _write_pulses(file, result)
    wave = _write_fields(
        file, "wave", (*layout.WAVE, *layout.spread_of_amplitude(result)), result, "incident"
    )
    _write_attributes(wave, layout.WAVE_ATTRIBUTES, result)
    response = _write_fields(
        file,
        "response",
        (*layout.RESPONSE, *layout.untuned_ratio(result)),
        result,
        "true_stress",
        axis="true_strain",
    )
    _write_attributes(response, layout.RESPONSE_ATTRIBUTES, result)
    table = response.create_dataset("flow_stress", data=layout.flow_table(result))
    table.attrs["columns"] = "strain, true stress [Pa], true strain rate [1/s]"
    write_corrections(response, result)
    trust = _write_fields(
        file, "trust", (*layout.TRUST, *layout.budget_fields(result)), result, "u_true_stress"
    )
    _write_attributes(trust, layout.TRUST_ATTRIBUTES, result)
    write_closure(trust, result)
    if result.draws is not None:
        _write_draws(file, result, result.draws)
    trust["budget"] = json.dumps([to_plain(line) for line in result.budget.contributions])
    trust["findings"] = json.dumps([to_plain(finding) for finding in result.findings])


def _write_draws(file: h5py.File, result: ShotResult, draws: Draws) -> None:
    group = _write_fields(file, "trust/draws", layout.draw_fields(draws), result, "mean_true_stress")
    _write_attributes(group, layout.DRAW_ATTRIBUTES, result)
    table = group.create_dataset("flow_stress", data=layout.draw_table(draws))
    table.attrs["columns"] = (
        "strain, mean, standard uncertainty, lower and upper end of the interval of true stress [Pa]"
    )


def _write_record(file: h5py.File, record: Record) -> None:
    group = file.create_group("record")
    chunk = (1, min(record.samples, 1 << 16))
    voltage = group.create_dataset("voltage", data=record.voltage_v, chunks=chunk, **_COMPRESSED)
    voltage.attrs.update({"units": "V", "long_name": "Voltage as acquired"})
    group.attrs.update(
        {
            "channels": list(record.channels),
            "sample_interval": record.sample_interval_s,
            "trigger_offset": record.start_s,
            "file_name": [source.name for source in record.sources],
            "sha256": [source.sha256 for source in record.sources],
        }
    )
    group["sources"] = json.dumps([to_plain(source) for source in record.sources])
    group["remarks"] = json.dumps(list(record.remarks))


def _write_inputs(file: h5py.File, result: ShotResult) -> None:
    group = file.create_group("rig")
    # The files word for word for people; the values as used, every bit of them, for the program.
    group["rig_file"] = result.rig.text
    group["shot_sheet"] = result.sheet.text
    for name, value in (("rig", result.rig), ("sheet", result.sheet), ("settings", result.settings)):
        group[f"{name}_as_used"] = json.dumps(to_plain(value))
    calibration = result.rig.calibration
    if calibration is not None:
        file = group.create_dataset("calibration_file", data=calibration.text)
        names = {"name": calibration.name, "date": calibration.date, "sha256": calibration.sha256}
        file.attrs.update(names)


def _write_pulses(file: h5py.File, result: ShotResult) -> None:
    parent = file.create_group("pulse")
    interval = result.pulses.sample_interval_s
    for pulse in result.pulses:
        group = parent.create_group(pulse.name)
        time = group.create_dataset("time", data=pulse.start_s + interval * np.arange(pulse.strain.size))
        time.attrs.update({"units": "s", "long_name": "Time on the record's clock"})
        strain = group.create_dataset("strain", data=pulse.strain)
        strain.attrs.update({"units": "", "long_name": f"{pulse.name.capitalize()} strain at the gauge"})
        group.attrs.update(_nxdata("strain", "time"))
        group.attrs.update(
            {
                "window": pulse.window_s,
                "automatic_window": pulse.automatic_window_s,
                "set_by_hand": pulse.set_by_hand,
                "noise": pulse.noise,
                "zero_level": pulse.zero.level,
                "zero_slope": pulse.zero.slope / interval,
                "zero_time": result.strain.start_s + interval * pulse.zero.centre,
            }
        )
        for name, foot in (("foot", pulse.foot), ("automatic_foot", pulse.automatic_foot)):
            if foot is not None:
                group.attrs.update({name: foot.time_s, f"u_{name}": foot.u_time_s})
    if result.by_hand:
        parent["by_hand"] = json.dumps([to_plain(kept) for kept in result.by_hand])
        parent["by_hand"].attrs["long_name"] = (
            "Windows and feet moved by hand, times [s] on the record's clock"
        )


def _write_fields(
    file: h5py.File,
    name: str,
    fields: Iterable[layout.Field],
    result: ShotResult,
    signal: str,
    axis: str = "time",
) -> h5py.Group:
    group = file.create_group(name)
    for entry in fields:
        dataset = group.create_dataset(entry.name, data=entry.of(result))
        dataset.attrs["units"] = entry.units
        dataset.attrs["long_name"] = entry.label
    group.attrs.update(_nxdata(signal, axis))
    return group


def _nxdata(signal: str, axis: str) -> dict[str, object]:
    return {"NX_class": "NXdata", "signal": signal, "axes": [axis]}


def _write_attributes(group: h5py.Group, attributes: Iterable[layout.Attribute], result: ShotResult) -> None:
    for name, of in attributes:
        value = of(result)
        if value is not None:
            group.attrs[name] = value


# --- in ----------------------------------------------------------------------------------------


def load(path: Path | str) -> StoredShot:
    """Read a shot back from its HDF5 file.

    Raises
    ------
    StoreError
        If it is no shot file, is damaged, or was written by a later version of the format.

    Examples
    --------
    >>> import shpb
    >>> stored = shpb.load(shpb.save_shot(result, folder / "W-02.h5"))
    >>> stored.verdict, stored["response/stress_3w"].size == stored["response/time"].size
    ('accept', True)
    >>> stored.units["response/stress_3w"]
    'Pa'
    >>> again = stored.reduce_again()  # the same arrays, bit for bit
    """
    source = Path(path)
    with open_shot(source) as file:
        return _read(file, source)


def open_shot(path: Path) -> AbstractContextManager[h5py.File]:
    """Open a stored shot to read from it; errors as :func:`load` has them."""
    return opened(
        path,
        name=layout.FORMAT,
        version=layout.FORMAT_VERSION,
        what="a shot",
        read_as="a shot file",
        verb="reduce",
        again="reduce the raw record again",
    )


def _read(file: h5py.File, path: Path) -> StoredShot:
    import h5py

    arrays: dict[str, FloatArray] = {}
    units: dict[str, str] = {}
    attributes: dict[str, dict[str, Any]] = {"/": _plain_attributes(file)}

    def visit(name: str, item: object) -> None:
        if isinstance(item, h5py.Group):
            attributes[name] = _plain_attributes(item)
        elif isinstance(item, h5py.Dataset) and item.dtype.kind == "f" and name != "record/voltage":
            arrays[name] = item[()]
            units[name] = str(item.attrs.get("units", ""))

    file.visititems(visit)
    inputs = {name: json.loads(_text(file[f"rig/{name}_as_used"])) for name in ("rig", "sheet", "settings")}
    return StoredShot(
        path=path,
        record=_read_record(file),
        rig=from_plain(Rig, inputs["rig"]),
        sheet=from_plain(ShotSheet, inputs["sheet"]),
        settings=from_plain(Settings, inputs["settings"]),
        findings=tuple(from_plain(Finding, item) for item in json.loads(_text(file["trust/findings"]))),
        arrays=arrays,
        units=units,
        attributes=attributes,
        by_hand=by_hand_in(file),
    )


def by_hand_in(file: h5py.File) -> tuple[ByHand, ...]:
    """What people moved in a shot, oldest first; nothing in files of before that was kept."""
    if "pulse/by_hand" not in file:
        return ()
    return tuple(from_plain(ByHand, item) for item in json.loads(_text(file["pulse/by_hand"])))


def _read_record(file: h5py.File) -> Record:
    group = file["record"]
    return Record(
        voltage_v=group["voltage"][()],
        sample_interval_s=float(group.attrs["sample_interval"]),
        start_s=float(group.attrs["trigger_offset"]),
        channels=tuple(str(name) for name in group.attrs["channels"]),
        sources=tuple(from_plain(Source, item) for item in json.loads(_text(group["sources"]))),
        remarks=tuple(json.loads(_text(group["remarks"]))),
    )


def _text(dataset: h5py.Dataset) -> str:
    value = dataset[()]
    return value.decode("utf-8") if isinstance(value, bytes) else str(value)


def _plain_attributes(item: h5py.Group) -> dict[str, Any]:
    return {
        name: value.tolist() if isinstance(value, np.ndarray | np.generic) else value
        for name, value in item.attrs.items()
    }
