"""Reading and writing a calibration file: dated values with their uncertainties, for people and for the program.

Every number goes out with all its digits and comes back bit for bit. A file is written once and never over another:
the history of a rig is the folder of its calibrations.
"""

from __future__ import annotations

import dataclasses
import datetime
import hashlib
import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from shpb.errors import InputError, StoreError
from shpb.quantity import Quantity
from shpb.rig.calibration import BarCalibration, Calibration, CalibrationRecord, GaugeCalibration
from shpb.rig.calibration_keys import (
    AS_STATED,
    BARS,
    CALIBRATION_FILE,
    COLUMN_KEYS,
    FORMAT,
    FORMAT_VERSION,
    GAUGES,
    PROPAGATION,
    RECORD_TABLE,
)
from shpb.rig.calibration_text import calibration_text
from shpb.rig.correlations import TABLE as CORRELATIONS
from shpb.rig.correlations import correlations_in
from shpb.rig.mistakes import Collector, shown
from shpb.rig.propagation_table import COLUMNS, PropagationTable
from shpb.rig.tables import Values, read_tables
from shpb.rig.text_file import read_text, toml_tables
from shpb.whole_file import whole_file

METHODS, RECORDS = "methods", "record"


def read_calibration(path: str | Path) -> Calibration:
    """Read and check a calibration file.

    Parameters
    ----------
    path : str or Path
        The TOML file that ``shpb calibrate`` wrote.

    Returns
    -------
    Calibration
        In SI; ``text`` holds the file word for word, ``sha256`` its hash, ``source`` its name.

    Raises
    ------
    FileMistakes
        With all mistakes of the file at once.
    InputError
        If the file cannot be read, is no TOML, no calibration, or of a later version of the format.
    """
    path = Path(path)
    text = read_text(path, "calibration file")
    return calibration_from_text(text, str(path), hashlib.sha256(path.read_bytes()).hexdigest())


def calibration_from_text(text: str, name: str, sha256: str = "") -> Calibration:
    """Return the calibration that the text of its file describes; ``name`` stands in messages.

    Raises
    ------
    FileMistakes, InputError
        As :func:`read_calibration`.
    """
    document = toml_tables(text, name)
    _require_calibration(document, name)
    seen = Collector(name)
    correlations = correlations_in(document, seen)
    methods = _methods(document.get(METHODS), seen)
    records = _records(document.get(RECORDS), seen)
    tables = read_tables(_flat(document), CALIBRATION_FILE, seen)
    head = tables["calibration"]
    check_day(head, "date", seen)
    bars = {side: _bar(side, tables, seen) for side in BARS if tables[side].stands}
    gauges = {station: _gauge(station, tables) for station in GAUGES if tables[station].stands}
    seen.finish()
    return Calibration(
        name=head.text("name"),
        rig=head.text("rig"),
        date=head.text("date"),
        holds_days=head.given["holds_days"],
        bars=bars,
        gauges=gauges,
        correlations=correlations,
        records=records,
        methods=methods,
        findings=head.given.get("findings", ()),
        temperature_k=head.quantity("temperature"),
        remarks=head.text("remarks"),
        program_version=head.text("program_version"),
        text=text,
        source=name,
        sha256=sha256 or hashlib.sha256(text.encode()).hexdigest(),
    )


def is_calibration(path: Path) -> bool:
    """Whether a TOML file says that it is a calibration; False for what cannot be read."""
    try:
        head = path.read_bytes()[:4096]
    except OSError:
        return False
    return re.search(rb'(?m)^\s*format\s*=\s*"' + FORMAT.encode() + rb'"', head) is not None


def write_calibration(calibration: Calibration, path: str | Path) -> Path:
    """Write a calibration to a file of its own, whole or not at all.

    Raises
    ------
    StoreError
        If a file of this name stands there already, if what would be written does not read back bit for bit, or if
        the disk refuses.
    """
    path = Path(path)
    if path.exists():
        raise StoreError(
            "a file of this name stands there; a calibration is never written over",
            where=str(path),
            mend=f"Take {free_name(path.parent, path.stem).name}",
        )
    findings = dict.fromkeys(text for finding in calibration.findings if (text := finding.strip()))
    calibration = dataclasses.replace(
        calibration, findings=tuple(findings), remarks=calibration.remarks.strip()
    )
    text = calibration_text(calibration)
    _require_same(calibration, text, path)
    with whole_file(path) as part:
        part.write_bytes(text.encode("utf-8"))
    return path


def free_name(folder: str | Path, stem: str) -> Path:
    """The first of ``stem.toml``, ``stem_2.toml``, ... that is not taken in a folder."""
    folder, number = Path(folder), 1
    while (path := folder / f"{stem}{'' if number == 1 else f'_{number}'}.toml").exists():
        number += 1
    return path


def check_day(values: Values, stem: str, seen: Collector) -> None:
    """Note a day that does not begin as year-month-day, or that no calendar has."""
    text = values.text(stem)
    if not text:
        return
    try:
        datetime.date.fromisoformat(text[:10])
    except ValueError:
        seen.add(
            values.key(stem),
            shown(text),
            "a date such as 2024-05-17",
            "Write year-month-day; the days for which the calibration holds are counted from it",
        )


def _require_calibration(document: Mapping[str, Any], name: str) -> None:
    head = document.get("calibration")
    head = head if isinstance(head, Mapping) else {}
    if head.get("format") != FORMAT:
        what = "this is not a calibration file"
        if "incident_bar" in document and "rig" in document:
            what = "this is a rig file, not a calibration file"
        elif "shot" in document:
            what = "this says what was fired; it is not yet a calibration file"
        raise InputError(
            what,
            where=name,
            mend="Name a file that shpb calibrate wrote",
        )
    version = head.get("format_version")
    if isinstance(version, int) and version > FORMAT_VERSION:
        raise InputError(
            f"the calibration file has format version {version}; this program reads up to {FORMAT_VERSION}",
            where=name,
            mend="Update the program",
        )


def _flat(document: Mapping[str, Any]) -> dict[str, Any]:
    """The tables within the tables of bars and gauges beside them, by their dotted names."""
    flat: dict[str, Any] = {}
    for name, content in document.items():
        if name in (CORRELATIONS, METHODS, RECORDS):
            continue
        parts = (PROPAGATION, AS_STATED) if name in BARS else (AS_STATED,) if name in GAUGES else ()
        if isinstance(content, Mapping):
            flat[name] = {key: value for key, value in content.items() if key not in parts}
            flat |= {f"{name}.{part}": content[part] for part in parts if part in content}
        else:
            flat[name] = content
    return flat


def _bar(side: str, tables: Mapping[str, Values], seen: Collector) -> BarCalibration:
    return BarCalibration(
        wave_speed_m_s=tables[side].quantity("wave_speed"),
        poisson_ratio=tables[side].quantity("poisson_ratio"),
        propagation=_propagation(tables[f"{side}.{PROPAGATION}"], seen),
        as_stated=_as_stated(tables[f"{side}.{AS_STATED}"]),
    )


def _gauge(station: str, tables: Mapping[str, Values]) -> GaugeCalibration:
    values = tables[station]
    return GaugeCalibration(
        gauge_factor=values.quantity("gauge_factor"),
        strain_per_volt=values.quantity("strain_per_volt"),
        to_specimen_m=values.quantity("to_specimen"),
        as_stated=_as_stated(tables[f"{station}.{AS_STATED}"]),
    )


def _as_stated(values: Values) -> dict[str, str | float]:
    """By the keys as written, which are those of ``stated_of``."""
    return {values.written[stem]: value for stem, value in values.given.items()}


def _propagation(values: Values, seen: Collector) -> PropagationTable | None:
    if not values.stands or not values.has(*(key.stem for key in COLUMN_KEYS)):
        return None
    columns = {field: values.given[key.stem] for field, key in zip(COLUMNS, COLUMN_KEYS, strict=True)}
    try:
        return PropagationTable(**columns)
    except InputError as error:
        seen.add(f"[{values.path}]", error.what, "a table over frequency", error.mend)
        return None


def _methods(content: object, seen: Collector) -> dict[str, str]:
    """What was measured, and how, in words."""
    if content is None:
        return {}
    if not isinstance(content, Mapping):
        seen.add(METHODS, shown(content), "a table", f"Write [{METHODS}] and its keys below it")
        return {}
    for key, value in content.items():
        if not isinstance(value, str):
            seen.add(f'{METHODS}."{key}"', shown(value), "text", 'Put it in "quotes"')
    return {key: value for key, value in content.items() if isinstance(value, str)}


def _records(content: object, seen: Collector) -> tuple[CalibrationRecord, ...]:
    if content is None:
        return ()
    if not isinstance(content, list):
        seen.add(RECORDS, shown(content), f"[[{RECORDS}]], once a record", "Double the brackets")
        return ()
    records: list[CalibrationRecord] = []
    for number, item in enumerate(content, 1):
        table = dataclasses.replace(RECORD_TABLE, name=f"{RECORDS} {number}")
        values = read_tables({table.name: item}, (table,), seen)[table.name]
        if values.has("shot", "kind", "file", "sha256"):
            shot, kind, file, sha256 = (values.text(key.stem) for key in table.keys)
            if not re.fullmatch("[0-9a-f]{64}", sha256):
                seen.add(values.key("sha256"), shown(sha256), "64 digits 0 to 9 and a to f")
            records.append(CalibrationRecord(shot_id=shot, kind=kind, file=file, sha256=sha256))
    return tuple(records)


def _require_same(calibration: Calibration, text: str, path: Path) -> None:
    """Refuse to write what would not come back bit for bit."""
    try:
        back = calibration_from_text(text, str(path))
    except InputError as error:
        raise StoreError(
            f"the calibration could not be read back: {error}", where=str(path), mend="Nothing was written"
        ) from error
    names = [
        field.name
        for field in dataclasses.fields(Calibration)
        if field.name not in {"text", "source", "sha256"}
        and _exact(getattr(back, field.name)) != _exact(getattr(calibration, field.name))
    ]
    if names:
        raise StoreError(
            f"{', '.join(names)} would not come back as given",
            where=str(path),
            mend="Nothing was written. Texts must be free of control characters and outer spaces",
        )


def _exact(value: object) -> object:
    """Everything that a value remembers, for comparison: a Quantity alone compares as a number."""
    if isinstance(value, Quantity):
        return float(value).hex(), None if value.u is None else value.u.hex(), value.origin
    if isinstance(value, Mapping):
        return {key: _exact(item) for key, item in value.items()}
    if isinstance(value, tuple):
        return tuple(_exact(item) for item in value)
    if dataclasses.is_dataclass(value):
        return {field.name: _exact(getattr(value, field.name)) for field in dataclasses.fields(value)}
    return value
