"""Commented files for a new lab to fill in: rig file, shot sheet, shot list and calibration session."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from pathlib import Path

from shpb.errors import InputError, StoreError
from shpb.rig.columns import COLUMNS, RECORD_COLUMNS, Column
from shpb.rig.docs import needed_text
from shpb.rig.key import Key, Kind, OneOf, Table
from shpb.rig.keys import RIG_FILE, SHEET_FILE
from shpb.rig.session_keys import EXAMPLE_SHOTS, SESSION_FILE
from shpb.whole_file import whole_file

RIG_NAME, SHEET_NAME, LIST_NAME, SESSION_NAME = "rig.toml", "shot.toml", "shots.csv", "calibration.toml"
_WIDTH = 100
_HOW = (
    "All values here are examples: put in your own. A line that begins with # is a remark; remove the # "
    "in front of a key to use it. The end of a key is its unit. A number may stand alone or with its "
    'standard uncertainty and its origin, as in { value = 20.0, u = 0.005, origin = "micrometer" }; '
    "u_percent may stand in place of u. The table of all keys is in calibration/README.md."
)
_LIST_HOW = (
    "Shot list: one row a shot, in place of shot sheets. All values here are examples. Columns may "
    "stand in any order, and only the required ones must stand. An empty cell means: not stated. "
    "Separate the columns with commas, semicolons or tabs; with semicolons or tabs a decimal comma is "
    "understood. Rows that begin with # are skipped. In front of the name of a number's column, u_ "
    "makes a column for its standard uncertainty in the same unit, and origin_ one for where it comes "
    "from. In a cell that holds a list, put | between the items. A column of your own begins with "
    "note_."
)

# The columns of the example rows; the others are only described above them.
_SHOWN_COLUMNS = (
    "shot_id", "kind", "record", "rig", "date", "operator", "material", "diameter_mm", "u_diameter_mm",
    "length_mm", "u_length_mm", "length_after_mm", "temperature_C", "striker_speed_m_s", "remarks",
)  # fmt: skip
_EXAMPLE_ROWS = (
    ("CU-017", "compression", "CU-017.csv", "rig.toml", "2024-05-17", "first shift", "copper C1", "10.02",
     "0.005", "6.01", "0.005", "4.93", "21", "14.2", ""),
    ("CU-018", "compression", "CU-018.csv", "rig.toml", "2024-05-17", "first shift", "copper C1", "10.01",
     "0.005", "6.02", "0.005", "", "21", "14.3", "new pulse shaper"),
)  # fmt: skip


def rig_template() -> str:
    """Text of a commented rig file."""
    return _toml_template("Rig file: what stands in the lab and stays from shot to shot.", RIG_FILE)


def sheet_template() -> str:
    """Text of a commented shot sheet."""
    return _toml_template("Shot sheet: one shot. It lies beside its record.", SHEET_FILE)


def list_template() -> str:
    """Text of a commented shot list."""
    facts = [_comment(_column_facts(column), "#   ") for column in COLUMNS.values() if _described(column)]
    rows = (_SHOWN_COLUMNS, *_EXAMPLE_ROWS)
    return _comment(_LIST_HOW) + "#\n" + "".join(facts) + "".join(",".join(row) + "\n" for row in rows)


def session_template() -> str:
    """Text of a commented calibration session."""
    title = "Calibration session: the shots of one day that calibrate a rig. It lies beside their records."
    return _toml_template(title, SESSION_FILE) + "\n" + _comment(EXAMPLE_SHOTS[0]) + EXAMPLE_SHOTS[1]


def write_templates(folder: str | Path, *, overwrite: bool = False) -> tuple[Path, ...]:
    """Write a commented rig file, shot sheet, shot list and calibration session into ``folder``.

    Parameters
    ----------
    folder : str or Path
        Made if it is not there.
    overwrite : bool
        Whether files of these names are replaced.

    Returns
    -------
    tuple of Path
        The four files: ``rig.toml``, ``shot.toml``, ``shots.csv`` and ``calibration.toml``.

    Raises
    ------
    InputError
        If one of the files is there already (then none is written) or the folder cannot be written to.
    """
    folder = Path(folder)
    texts = {
        RIG_NAME: rig_template(),
        SHEET_NAME: sheet_template(),
        LIST_NAME: list_template(),
        SESSION_NAME: session_template(),
    }
    present = [name for name in texts if (folder / name).exists()]
    if present and not overwrite:
        raise InputError(
            f"{', '.join(present)} {'stand' if len(present) > 1 else 'stands'} there already",
            where=str(folder),
            mend="Choose another folder; nothing was written",
        )
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for name, text in texts.items():
            # One byte for one byte on every system: the sheets are stored and compared as text.
            with whole_file(folder / name) as part:
                part.write_text(text, encoding="utf-8", newline="\n")
    except (OSError, StoreError) as error:
        cause = error.__cause__ if isinstance(error, StoreError) else error
        raise InputError(
            f"the templates cannot be written: {getattr(cause, 'strerror', None) or error}",
            where=str(folder),
            mend="Choose a folder that you may write to",
        ) from None
    return tuple(folder / name for name in texts)


def _toml_template(title: str, tables: Sequence[Table]) -> str:
    return (
        _comment(title)
        + _comment(_HOW)
        + "".join(_table_template(table) for table in tables if table.in_forms)
    )


def _table_template(table: Table) -> str:
    needed = "" if table.required else " This table may be left out."
    heading = f"[[{table.name}]]" if table.repeated else f"[{table.name}]"
    lines = [f"\n{heading}\n", _comment(f"{table.meaning}.{needed}")]
    chosen: set[str] = set()  # one-of groups of which a key already stands
    for key in table.keys:
        group = table.group_of(key)
        stands = key.required or (group is not None and group.stems[0] not in chosen)
        if group is not None:
            chosen.add(group.stems[0])
        lines.append("\n" + _comment(_key_facts(key, group)))
        lines.append(f"{'' if stands else '#'}{key.name} = {key.example}\n")
    return "".join(lines)


def _key_facts(key: Key, group: OneOf | None) -> str:
    """Meaning, range and whether it may be left out, in one paragraph."""
    facts = [key.meaning.rstrip(".") + "."]
    limits = _limits(key)
    others = [name for name, _ in key.names()][1:]
    words = needed_text(key, group)
    facts.append(f"{words[0].upper()}{words[1:]}.")
    if limits:
        facts.append(limits + ".")
    if others:
        facts.append(f"Or {' or '.join(others)}.")
    return " ".join(facts)


def _limits(key: Key) -> str:
    if key.kind is Kind.CHOICE:
        return "One of " + ", ".join(f'"{choice}"' for choice in key.choices)
    if key.kind is Kind.CHOICES:
        return "Any of " + ", ".join(f'"{choice}"' for choice in key.choices)
    limits = key.range_text(key.units[0])
    return limits[0].upper() + limits[1:] if limits else ""


def _described(column: Column) -> bool:
    """Whether the column has a line of its own: not its uncertainty or origin, nor another unit."""
    return (
        column.unit == column.key.units[0]
        and column.part not in {"u", "origin"}
        and not (column.key.kind is Kind.FILES and column.name != RECORD_COLUMNS[0])
    )


def _column_facts(column: Column) -> str:
    key = column.key
    name = column.name
    if key.kind is Kind.FILES:
        name += f" (further files in {', '.join(RECORD_COLUMNS[1:])})"
    needed = "required" if key.required or column.name == RECORD_COLUMNS[0] else "optional"
    facts = [f"{name}: {key.meaning}{f' ({column.part})' if column.part else ''}", needed, _limits(key)]
    if column.name not in _SHOWN_COLUMNS:
        facts.append(f"example {_cell_example(column)}")
    return "; ".join(fact for fact in facts if fact)


def _cell_example(column: Column) -> str:
    """The key's example as a cell would hold it."""
    items = [item.strip(' "') for item in column.key.example.strip("[]").split(",")]
    if column.part:
        return items[1] if column.part == "end" else items[0]
    return " | ".join(items)


def _comment(text: str, indent: str = "# ") -> str:
    hanging = indent if indent == "# " else indent + "  "
    return (
        textwrap.fill(
            text,
            _WIDTH,
            initial_indent=indent,
            subsequent_indent=hanging,
            break_long_words=False,
            break_on_hyphens=False,
        )
        + "\n"
    )
