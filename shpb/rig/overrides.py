"""What a rig file and a shot sheet change about the reduction: settings, limits and hints, merged in order."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence
from typing import Any

from shpb.errors import InputError
from shpb.limits import Limits
from shpb.rig.key import PLAIN, Key, Table
from shpb.rig.mistakes import Collector, nearest
from shpb.rig.rig import RecordHints, Rig
from shpb.rig.setting_keys import LIMIT_KEYS, SETTING_KEYS
from shpb.rig.sheet import ShotSheet
from shpb.rig.tables import Values
from shpb.rig.values import Unreadable, value_in_si
from shpb.settings import DEFAULT, Settings


def overrides_in(tables: Mapping[str, Values], seen: Collector) -> dict[str, object]:
    """Return the fields of Settings that [settings] and [limits] state, in SI, each one checked by itself.

    The limits that are stated stand as a mapping under ``limits``.
    """
    overrides = _stated(tables["settings"], SETTING_KEYS, DEFAULT, seen)
    limits = _stated(tables["limits"], LIMIT_KEYS, DEFAULT.limits, seen)
    return {**overrides, "limits": limits} if limits else overrides


def _stated(
    values: Values, keys: Sequence[Key], base: Settings | Limits, seen: Collector
) -> dict[str, object]:
    stated: dict[str, object] = {}
    for key in keys:
        if key.stem not in values.given:
            continue
        value = values.given[key.stem]
        try:
            base.replaced(**{key.field: value})
        except InputError as error:
            seen.add(values.key(key.stem), error.what.removeprefix("found "), error.mend or "another value")
        else:
            stated[key.field] = value
    return stated


def settings_from(overrides: Mapping[str, object], base: Settings = DEFAULT) -> Settings:
    """Return ``base`` with some fields changed.

    Parameters
    ----------
    overrides : mapping
        Either fields of Settings in SI, as :class:`Rig` and :class:`ShotSheet` hold them
        (``cutoff_hz``: 120e3), or keys of a [settings] table in its units (``cutoff_kHz``: 120).
        ``limits`` holds a mapping of the same two kinds, or a whole Limits value.
    base : Settings
        What holds for everything not named.

    Raises
    ------
    FileMistakes
        With every name that is unknown and every value that cannot be used.

    Examples
    --------
    >>> settings = settings_from({"cutoff_kHz": 120, "limits": {"misalignment_us": 4}})
    >>> settings.cutoff_hz, settings.limits.misalignment_s
    (120000.0, 4e-06)
    """
    seen = Collector("settings")
    own = {name: value for name, value in overrides.items() if name != "limits"}
    changes = _changes(own, SETTING_KEYS, "settings", seen)
    limits = overrides.get("limits")
    if isinstance(limits, Mapping):
        changed = _changes(limits, LIMIT_KEYS, "limits", seen)
        seen.finish()
        changes["limits"] = base.limits.replaced(**changed)
    elif limits is not None:
        changes["limits"] = limits
    seen.finish()
    return base.replaced(**changes)


def _changes(
    overrides: Mapping[str, object], known: tuple[Key, ...], table: str, seen: Collector
) -> dict[str, Any]:
    """The fields that ``overrides`` names by field or by key, in SI."""
    fields = {key.field: key for key in known}
    keys = Table(name=table, meaning="", keys=known, required=False).lookup()
    within = "" if table == "settings" else f"{table}."
    changes: dict[str, Any] = {}
    for name, value in overrides.items():
        if name not in fields and name not in keys:
            guess = nearest(name, [*keys, *fields])
            mend = f"Did you mean {guess}?" if guess else ""
            seen.add(f"{within}{name}", f"an unknown {table.removesuffix('s')}", "a known one", mend)
            continue
        # A field's name stands for the SI value; a key's name for people's unit.
        key, unit = (fields[name], PLAIN) if name in fields else keys[name]
        if name in fields and (value is None or key.units[0] != PLAIN):
            key = dataclasses.replace(key, units=(*key.units, PLAIN))
        if value is None and key.automatic:
            changes[key.field] = None
            continue
        try:
            changes[key.field] = value_in_si(value, key, unit)
        except Unreadable as bad:
            seen.add(f"{within}{name}", bad.found, bad.expected, bad.mend)
    return changes


def settings_for(rig: Rig, sheet: ShotSheet, base: Settings = DEFAULT) -> Settings:
    """Return the settings of one shot: ``base``, changed by the rig file, then by the shot sheet."""
    return settings_from(sheet.overrides, settings_from(rig.settings, base))


def hints_for(rig: Rig, sheet: ShotSheet) -> RecordHints:
    """Return what is known about the record: the rig file's hints, and the sheet's in their place.

    Examples
    --------
    >>> import shpb
    >>> sheet = shpb.read_sheet(folder / "records" / "W-02.toml")
    >>> hints = shpb.hints_for(shpb.read_rig(sheet.rig_file), sheet)
    >>> record = shpb.read_record(sheet.record_files, hints)
    """
    stated = {
        field.name: value
        for field in dataclasses.fields(RecordHints)
        if (value := getattr(sheet.record, field.name)) is not None
    }
    return dataclasses.replace(rig.record, **stated)


def hints_in(values: Values) -> RecordHints:
    """Return the hints that a [record] table states."""
    given = values.given
    return RecordHints(
        sample_interval_s=given.get("sample_interval"),
        trigger_offset_s=given.get("trigger_offset"),
        time_unit=given.get("time_unit"),
        voltage_unit=given.get("voltage_unit"),
        volts_per_code=given.get("volts_per_code"),
        channel_names=given.get("channel_names"),
    )
