"""From the tables of a TOML file to checked values: unknown, missing, doubled and unusable keys."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from shpb.quantity import Quantity
from shpb.rig.key import Key, Table, Unit
from shpb.rig.mistakes import Collector, nearest, shown
from shpb.rig.values import Unreadable, value_in_si


@dataclass(slots=True)
class Values:
    """The usable values of one table, by the stem of their key, and how each was written."""

    path: str
    given: dict[str, Any] = field(default_factory=dict)
    written: dict[str, str] = field(default_factory=dict)
    touched: set[str] = field(default_factory=set)  # stems that stand, be they misspelt or unusable
    stands: bool = True  # False where the file has no such table

    def key(self, stem: str) -> str:
        """Key path as written in the file."""
        return f"{self.path}.{self.written.get(stem, stem)}"

    def quantity(self, stem: str) -> Quantity | None:
        """The quantity, None where it is missing or unusable."""
        value = self.given.get(stem)
        return value if isinstance(value, Quantity) else None

    def text(self, stem: str) -> str:
        """The text, empty where it is missing or unusable."""
        return str(self.given.get(stem, ""))

    def has(self, *stems: str) -> bool:
        """Whether every one of the keys has a usable value."""
        return all(self.given.get(stem) is not None for stem in stems)


def read_tables(document: Mapping[str, Any], tables: Sequence[Table], seen: Collector) -> dict[str, Values]:
    """Read every table of a file and note every mistake in ``seen``; nothing is raised."""
    names = [table.name for table in tables]
    taken_for: set[str] = set()
    for name, content in document.items():
        if name in names:
            continue
        guess = nearest(name, names)
        if isinstance(content, dict):
            mend = f"Did you mean [{guess}]?" if guess else ""
            seen.add(f"[{name}]", "an unknown table", "one of " + ", ".join(f"[{n}]" for n in names), mend)
            taken_for.add(guess)
        else:
            home = _home(name, tables, "")
            seen.add(name, "a key outside any table", "every key inside its [table]", home)
    return {
        table.name: _read_table(
            document.get(table.name), table, tables, seen, excused=table.name in taken_for
        )
        for table in tables
    }


def _read_table(
    content: object, table: Table, tables: Sequence[Table], seen: Collector, *, excused: bool
) -> Values:
    values = Values(table.name, stands=content is not None)
    if content is None:
        if table.required and not excused:
            needed = ", ".join(key.name for key in table.keys if key.required)
            seen.add(f"[{table.name}]", "no such table", f"a table with {needed}", f"Add [{table.name}]")
        return values
    if not isinstance(content, Mapping):
        seen.add(table.name, shown(content), "a table", f"Write [{table.name}] and its keys below it")
        return values
    lookup = table.lookup()
    for name, raw in content.items():
        if name not in lookup:
            values.touched.add(_unknown_key(name, table, tables, seen))
            continue
        _read_key(raw, name, lookup[name], values, seen)
    _missing_keys(table, values.touched, seen)
    return values


def _read_key(raw: object, name: str, known: tuple[Key, Unit], values: Values, seen: Collector) -> None:
    key, unit = known
    path = f"{values.path}.{name}"
    if key.stem in values.written:
        seen.add(path, f"{values.written[key.stem]} too", "one of the two", "Keep the one you measured in")
        return
    values.touched.add(key.stem)
    values.written[key.stem] = name
    try:
        values.given[key.stem] = value_in_si(raw, key, unit)
    except Unreadable as bad:
        seen.add(f"{path}.{bad.sub}" if bad.sub else path, bad.found, bad.expected, bad.mend)


def _unknown_key(name: str, table: Table, tables: Sequence[Table], seen: Collector) -> str:
    """Note an unknown key; return the stem of the key it was probably meant to be."""
    lookup = table.lookup()
    home = _home(name, tables, table.name)
    guess = "" if home else nearest(name, lookup)
    mend = home or (
        f"Did you mean {guess}?" if guess else f"Known here: {', '.join(k.name for k in table.keys)}"
    )
    seen.add(f"{table.name}.{name}", "an unknown key", f"a key of [{table.name}]", mend)
    return lookup[guess][0].stem if guess else ""


def _home(name: str, tables: Sequence[Table], here: str) -> str:
    """Say in which tables a key of this very name belongs."""
    homes = [f"[{table.name}]" for table in tables if table.name != here and name in table.lookup()]
    return f"This key belongs in {' or '.join(homes)}" if homes else ""


def _missing_keys(table: Table, touched: set[str], seen: Collector) -> None:
    for key in table.keys:
        if key.required and key.stem not in touched:
            seen.add(
                f"{table.name}.{key.name}",
                "nothing",
                key.expected(key.units[0]),
                f"Add it, for example {key.name} = {key.example}",
            )
    for group in table.one_of:
        standing = [stem for stem in group.stems if stem in touched]
        names = [key.name for key in table.keys if key.stem in group.stems]
        if not standing:
            seen.add(f"{table.name}.{names[0]}", "nothing", " or ".join(names), group.mend)
        elif group.exactly and len(standing) > 1:
            seen.add(f"{table.name}.{names[0]}", " and ".join(names), "exactly one of the two", "Remove one")
