"""The key tables of ``calibration/README.md``, written from the keys themselves; :mod:`shpb.docs` puts them there."""

from __future__ import annotations

from shpb.rig.columns import COLUMNS
from shpb.rig.key import Key, Kind, OneOf, Table
from shpb.rig.keys import RIG_FILE, SHEET_FILE
from shpb.rig.session_keys import SESSION_FILE

_HEAD = "| key | value | range | needed | meaning | example |\n|---|---|---|---|---|---|\n"


def needed_text(key: Key, group: OneOf | None) -> str:
    """Whether a key may be left out, and what holds then."""
    if key.required:
        return "required"
    if group is not None:
        others = " or ".join(stem for stem in group.stems if stem != key.stem)
        return f"exactly one: this or {others}" if group.exactly else f"this or {others}"
    return f"optional ({key.default})" if key.default else "optional"


def range_text(key: Key) -> str:
    """The range in the documented unit, or the choices."""
    if key.kind in {Kind.CHOICE, Kind.CHOICES}:
        return ", ".join(f"`{choice}`" for choice in key.choices)
    return key.range_text(key.units[0])


def key_table(table: Table) -> str:
    """The keys of one table in Markdown."""
    return _HEAD + "".join(_key_row(key, table) for key in table.keys)


def _key_row(key: Key, table: Table) -> str:
    names = " or ".join(f"`{name}`" for name, _ in key.names())
    value = f'{key.kind}, or "automatic"' if key.automatic else str(key.kind)
    cells = (
        names,
        value,
        range_text(key),
        needed_text(key, table.group_of(key)),
        key.meaning,
        f"`{key.example}`",
    )
    return "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |\n"


def column_table() -> str:
    """The columns of the shot list in Markdown: where each comes from in the shot sheet."""
    rows = ["| column | as in the shot sheet | needed |\n|---|---|---|\n"]
    for column in COLUMNS.values():
        if column.part in {"u", "origin"} or column.unit != column.key.units[0]:
            continue  # the text around the table tells of these
        key = column.key
        names = [f"`{name}`" for name in _names_in_all_units(column.name, key, column.part)]
        place = f"`[{column.table.name}]` `{column.key_name}`" + (f", {column.part}" if column.part else "")
        needed = "required" if key.required or column.name == "record" else "optional"
        rows.append(f"| {' or '.join(names)} | {place} | {needed} |\n")
    return "".join(rows)


def _names_in_all_units(name: str, key: Key, part: str) -> list[str]:
    if key.kind is Kind.FILES:
        return [name]
    position = 1 if part == "end" else 0
    return [key.columns(unit)[position] for unit in key.units]


def key_blocks() -> dict[str, str]:
    """Every table of keys by its name in the README."""
    rig = {table.name: key_table(table) for table in RIG_FILE}
    sheet = {table.name: key_table(table) for table in SHEET_FILE}
    session = {table.name: key_table(table) for table in SESSION_FILE}
    # Both bars have the same keys; so have both gauges but for the example of the channel.
    return {
        "rig": rig["rig"],
        "bar": rig["incident_bar"],
        "gauge": rig["incident_gauge"],
        "striker": rig["striker"],
        "record": rig["record"],
        "settings": rig["settings"],
        "limits": rig["limits"],
        "shot": sheet["shot"],
        "specimen": sheet["specimen"],
        "columns": column_table(),
        "session": session["calibration"],
        "session-shot": session["shot"],
    }
