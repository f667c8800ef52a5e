"""Reading a calibration session: which shots were fired on one day, how, and where their records lie."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from shpb.calibrate.session import BarEnd, CalibrationShot, Session, ShotKind
from shpb.errors import FileMistakes, Mistake
from shpb.rig.bar import Striker
from shpb.rig.calibration_file import check_day
from shpb.rig.mistakes import Collector, nearest, shown
from shpb.rig.overrides import hints_in
from shpb.rig.rig import Rig
from shpb.rig.session_keys import SESSION_FILE, SHOT
from shpb.rig.tables import Values, read_tables
from shpb.rig.text_file import read_text, toml_tables

_STRIKER = ("length", "diameter", "density", "wave_speed")
# What only one kind of shot has, and the words for it.
_OF_SHUNT = ("station", "shunt")
_OF_STRUCK = ("striker_speed", *(f"striker_{what}" for what in _STRIKER))


def read_session(path: str | Path) -> Session:
    """Read and check a calibration session.

    Parameters
    ----------
    path : str or Path
        The TOML file; ``calibration/README.md`` lists its keys. Records and rig file are taken as seen from its
        folder.

    Returns
    -------
    Session
        In SI; ``text`` holds the file word for word.

    Raises
    ------
    FileMistakes
        With all mistakes of the file at once.
    InputError
        If the file cannot be read or is no TOML.
    """
    path = Path(path)
    return session_from_text(read_text(path, "calibration session"), str(path), path.parent)


def session_from_text(text: str, name: str, folder: str | Path) -> Session:
    """Return the session that a text describes.

    Parameters
    ----------
    text : str
        The TOML text.
    name : str
        What messages call it.
    folder : str or Path
        Where its records and its rig file are looked for.

    Raises
    ------
    FileMistakes, InputError
        As :func:`read_session`.
    """
    seen = Collector(name)
    session = _session(toml_tables(text, name), text, Path(folder), seen)
    seen.finish()
    assert session is not None  # None always comes with a mistake
    return session


def session_on_rig(session: Session, rig: Rig) -> Session:
    """The session with the rig's striker in every shot that names no other.

    Raises
    ------
    FileMistakes
        If a shunt names a station that the rig has not.
    """
    found = [
        Mistake(
            session.source or "calibration session",
            f"shot {shot.shot_id}: station",
            shown(shot.station),
            "one of " + ", ".join(rig.gauges),
            f"Did you mean {guess}?" if (guess := nearest(shot.station, rig.gauges)) else "",
        )
        for shot in session.shots
        if shot.kind is ShotKind.SHUNT and shot.station not in rig.gauges
    ]
    if found:
        raise FileMistakes(found)
    shots = tuple(
        shot
        if shot.striker is not None or shot.kind is ShotKind.SHUNT
        else dataclasses.replace(shot, striker=rig.striker)
        for shot in session.shots
    )
    return dataclasses.replace(session, shots=shots)


def _session(document: Mapping[str, Any], text: str, folder: Path, seen: Collector) -> Session | None:
    items = _items(document, seen)
    plain = {name: content for name, content in document.items() if not _is_shots(name, content)}
    tables = read_tables(plain, SESSION_FILE[:-1], seen)
    head = tables["calibration"]
    check_day(head, "date", seen)
    read = [_read_shot(item, number, seen) for number, item in enumerate(items, 1)]
    _check_doubles(read, seen)
    shots = [_shot(values, folder) for values in read if not seen.mistakes]
    if seen.mistakes:
        return None
    return Session(
        date=head.text("date"),
        rig_file=folder / head.text("rig"),
        shots=tuple(shots),
        name=head.text("name"),
        holds_days=head.given.get("holds_days", 365),
        temperature_k=head.quantity("temperature"),
        propagation_of=head.given.get("propagation", ()),
        operator=head.text("operator"),
        remarks=head.text("remarks"),
        hints=hints_in(tables["record"]),
        text=text,
        source=seen.file,
    )


def _is_shots(name: str, content: object) -> bool:
    """Whether something is the list of shots, be its name misspelt."""
    return name == SHOT.name or (isinstance(content, list) and any(isinstance(one, dict) for one in content))


def _items(document: Mapping[str, Any], seen: Collector) -> list[object]:
    """What stands under [[shot]]."""
    for name, content in document.items():
        if name != SHOT.name and _is_shots(name, content):
            seen.add(f"[[{name}]]", "an unknown table", "[[shot]]", f"Write [[{SHOT.name}]] for each shot")
            return []
    content = document.get(SHOT.name)
    if isinstance(content, list) and content:
        return content
    if isinstance(content, Mapping):
        sheet = "specimen" in document
        mend = "This is a shot sheet: reduce it" if sheet else "Double the brackets, once for each shot"
        seen.add(f"[{SHOT.name}]", "a single table", f"[[{SHOT.name}]]", mend)
    else:
        found = "nothing" if not content else shown(content)
        seen.add(f"[[{SHOT.name}]]", found, "at least one shot", f"Add [[{SHOT.name}]] with id, kind, record")
    return []


def _read_shot(item: object, number: int, seen: Collector) -> Values:
    """One shot, with what its kind needs and must not have."""
    table = dataclasses.replace(SHOT, name=f"shot {number}")
    values = read_tables({table.name: item}, (table,), seen)[table.name]
    if not values.has("kind"):
        return values
    kind = ShotKind(values.given["kind"])
    if kind is ShotKind.SHUNT:
        _need(values, ("station", "shunt"), f"a {kind} needs it", seen)
        _refuse(values, _OF_STRUCK, f"a {kind} has none: nothing is fired", seen)
        _agree(values, "bar", values.text("station").split("_")[0], "that of the station", seen)
    else:
        _refuse(values, _OF_SHUNT, f"{kind} has none", seen)
    if kind is ShotKind.BARS_TOGETHER:
        why = "with bars together the striker hits the incident bar at its far end"
        _agree(values, "bar", "incident", why, seen)
        _agree(values, "struck_end", "far", why, seen)
    striker = [f"striker_{what}" for what in _STRIKER]
    if kind is not ShotKind.SHUNT and values.touched & set(striker):
        _need(values, striker, "of another striker than the rig file's, all four must stand", seen)
    return values


def _need(values: Values, stems: tuple[str, ...] | list[str], why: str, seen: Collector) -> None:
    for key in SHOT.keys:
        if key.stem in stems and key.stem not in values.touched:
            example = f"Add it, for example {key.name} = {key.example}"
            seen.add(f"{values.path}.{key.name}", "nothing", f"{key.expected(key.units[0])}; {why}", example)


def _refuse(values: Values, stems: tuple[str, ...], why: str, seen: Collector) -> None:
    for stem in stems:
        if stem in values.given:
            seen.add(values.key(stem), "a value", f"none: {why}", "Remove it, or correct the kind")


def _agree(values: Values, stem: str, meant: str, why: str, seen: Collector) -> None:
    """What need not be said must not be said wrong."""
    if stem in values.given and values.text(stem) != meant and meant:
        mend = "Remove it, or correct the kind or the station"
        seen.add(values.key(stem), shown(values.text(stem)), f"{shown(meant)}: {why}", mend)


def _check_doubles(read: list[Values], seen: Collector) -> None:
    """Two shots share neither an id nor a record."""
    ids: dict[str, str] = {}
    files: dict[str, str] = {}
    for values in read:
        name = values.text("id")
        if name and ids.setdefault(name.casefold(), values.path) != values.path:
            first = ids[name.casefold()]
            seen.add(
                values.key("id"), f"{shown(name)}, as {first}", "ids that differ", "Rename one of the two"
            )
        for file in values.given.get("record", ()):
            place = str(Path(file))
            if files.setdefault(place, values.path) != values.path:
                seen.add(
                    values.key("record"),
                    f"{shown(file)}, the record of {files[place]} too",
                    "a record of its own",
                    "Name each record once: used twice it would count as two shots",
                )


def _shot(values: Values, folder: Path) -> CalibrationShot:
    given = values.given
    kind = ShotKind(given["kind"])
    return CalibrationShot(
        shot_id=given["id"],
        kind=kind,
        record_files=tuple(folder / file for file in given["record"]),
        bar=given.get("bar", "incident"),
        struck_end=BarEnd(given.get("struck_end", "far")),
        striker_speed_m_s=given.get("striker_speed"),
        striker=_striker(values),
        station=values.text("station"),
        shunt_ohm=given.get("shunt"),
        remarks=values.text("remarks"),
    )


def _striker(values: Values) -> Striker | None:
    length, diameter, density, speed = (values.quantity(f"striker_{what}") for what in _STRIKER)
    if length is None or diameter is None or density is None or speed is None:
        return None
    return Striker(length_m=length, diameter_m=diameter, density_kg_m3=density, wave_speed_m_s=speed)
