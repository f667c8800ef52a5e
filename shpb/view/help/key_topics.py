"""Topics about the files that people write: every key from the one table of keys."""

from __future__ import annotations

from collections.abc import Iterable

from shpb.merge.quasistatic_keys import FACT_TABLE
from shpb.rig.columns import COLUMNS
from shpb.rig.docs import needed_text
from shpb.rig.key import Key, Kind, OneOf, Table
from shpb.rig.keys import RIG_FILE, SHEET_FILE
from shpb.rig.session_keys import SESSION_FILE
from shpb.view.help.page import HelpPage

# Tables that hold the keys of another one.
_TWINS = {"transmitted_bar": "incident_bar", "transmitted_gauge": "incident_gauge"}


def rig_file() -> str:
    """The rig file."""
    page = HelpPage(
        "rig-file", "The rig file says what stands in the lab: bars, gauges, striker, choices and limits."
    )
    page.paragraph(
        "A text file in TOML, one for each rig. `shpb forms FOLDER` writes one to fill in, with "
        "every key, its unit and "
        'an example. A shot sheet names it (rig = "..."), or --rig does.'
    )
    _how_written(page)
    for table in RIG_FILE:
        if table.name in _TWINS:
            _head(page, table)
            page.paragraph(f"The same keys as [{_TWINS[table.name]}].")
        elif not table.name[-1].isdecimal():
            _table(page, table)
    page.heading("[incident_gauge_2] to [incident_gauge_4], [transmitted_gauge_2] to [.._4]")
    page.paragraph(
        "Further stations on either bar, with the keys of [incident_gauge]: for calibration, and for "
        "pulses that overlap at every station."
    )
    page.heading("[correlations] (may be left out)")
    page.paragraph(
        "Correlation coefficients between lines of the uncertainty budget, whose names `--full` prints, "
        "with | between two of them:"
    )
    page.lines('"incident gauge factor | transmitted gauge factor" = 0.8')
    _see(page, "calibration", "shot-sheet", "checks")
    return page.text


def shot_sheet() -> str:
    """The shot sheet."""
    page = HelpPage("shot-sheet", "The shot sheet says what was tested: record, striker speed, specimen.")
    page.paragraph(
        "A text file in TOML, one for each shot; for many shots a shot list says the same in one "
        "table. `shpb forms "
        "FOLDER` writes one to fill in; `shpb watch` writes one from the answers at the terminal."
    )
    _how_written(page)
    for table in SHEET_FILE[:2]:
        _table(page, table)
    page.heading("[record], [settings] and [limits] (may be left out)")
    page.paragraph("The keys of the rig file, for this shot alone; they rule over those of the rig file.")
    _see(page, "rig-file", "shot-list", "checks")
    return page.text


def shot_list() -> str:
    """The shot list."""
    page = HelpPage("shot-list", "The shot list says what was tested in one table: a row for each shot.")
    page.paragraph(
        "A CSV file with a line of column names; separated by commas, semicolons or tabs, with decimal "
        "points, or decimal commas between semicolons. The columns are the keys of the shot sheet; empty "
        "cells are not stated. A column whose name begins with note_ is the lab's own and is kept with the "
        "shot. u_ before a column is its standard uncertainty, origin_ where it comes from."
    )
    page.heading("COLUMNS")
    for column in COLUMNS.values():
        if column.part in {"u", "origin"} or column.unit != column.key.units[0]:
            continue
        key = column.key
        units = [key.columns(unit)[1 if column.part == "end" else 0] for unit in key.units]
        names = [column.name] if key.kind is Kind.FILES else units
        needed = "required" if key.required or column.name == "record" else "may be left out"
        page.item(" or ".join(names), f"{needed}; [{column.table.name}] {column.key_name}: {key.meaning}")
    _see(page, "shot-sheet")
    return page.text


def calibration() -> str:
    """Calibration sessions and files."""
    page = HelpPage("calibration", "Calibration: from the shots of one day to dated values of the rig.")
    page.paragraph(
        "Fire one bar alone and free at its other end (bars-apart), both bars together without specimen "
        "(bars-together), with the striker's speed measured, and put shunt resistors on the bridges "
        "(shunt). List them in a session file and run `shpb calibrate SESSION`. The result is a new dated "
        "file beside the rig file, with uncertainties, correlations and the hashes of the records; nothing "
        "is written over."
    )
    page.paragraph("The rig file puts it in force:")
    page.lines('[rig]\ncalibration = "small-bench_2031-02-03.toml"')
    page.paragraph(
        "Measured values then stand in place of those in the rig file. Every shot names the calibration; a "
        "shot outside its dates gets a note, and one with a gauge or bar that is no longer the same is "
        "rejected until the rig is calibrated anew. `shpb calibrate --trend FOLDER` shows every value over "
        "time; `shpb recalibrate RESULTS --calibration FILE` reduces stored shots again, beside the "
        "earlier results."
    )
    page.heading("THE SESSION FILE")
    page.paragraph("A text file in TOML; `shpb forms FOLDER` writes one to fill in.")
    for table in SESSION_FILE:
        if table.name == "record":
            _head(page, table)
            page.paragraph("The keys of the rig file: what the record files leave unsaid.")
        else:
            _table(page, table)
    page.heading("WHAT NO CALIBRATION CAN SEE")
    page.paragraph(
        "The spacing of the light gates and the length of the bars are in every result of the day alike. "
        "Density and diameter turn strain into force, and no strain gauge sees them: weigh and measure. A "
        "resistor that is not what it states, bending on a station of one channel, and bars at another "
        "temperature remain too."
    )
    _see(page, "rig-file", "methods")
    return page.text


def quasi_static() -> str:
    """Tables of quasi-static tests."""
    page = HelpPage("quasi-static", "Quasi-static tables: slow tests of the same material, for `shpb merge`.")
    page.paragraph(
        "A text table (.csv, .txt, .tsv, .dat, .asc) of strain or displacement against stress or "
        "force, with lines "
        "`# key: value` above the numbers, or a TOML file of the same name beside it with the same keys."
    )
    page.heading("FACTS ABOVE THE NUMBERS")
    _keys(page, FACT_TABLE)
    _see(page, "merge")
    return page.text


# --- pieces --------------------------------------------------------------------------------------------


def _how_written(page: HelpPage) -> None:
    page.heading("HOW IT IS WRITTEN")
    page.paragraph(
        "The end of a key is its unit: diameter_mm = 20.0 is 20 millimetres. Where two keys are "
        "named for one thing, take the "
        'one you measured in, never both. Text stands in "quotes"; a # begins a remark. A key that is left out is not '
        "stated, and nothing is guessed in its place but what stands here. File names are seen from "
        "the folder of the file."
    )
    page.paragraph(
        "Where it says { value, u, origin } a number may carry its standard uncertainty and where "
        "it comes from:"
    )
    page.lines(
        'diameter_mm  = 20.0\ndiameter_mm  = { value = 20.0, u = 0.005, origin = "micrometer" }\n'
        'gauge_factor = { value = 2.08, u_percent = 0.5, origin = "packet" }'
    )
    page.paragraph(
        'u is one standard deviation (JCGM 100:2008): a certificate\'s "+- a" gives u = a/1.73, U with k = 2 gives U/2.'
    )


def _head(page: HelpPage, table: Table) -> None:
    name = f"[[{table.name}]]" if table.repeated else f"[{table.name}]"
    page.heading(name + ("" if table.required else " (may be left out)"))


def _table(page: HelpPage, table: Table) -> None:
    _head(page, table)
    page.paragraph(f"{table.meaning}.")
    _keys(page, table)


def _keys(page: HelpPage, table: Table) -> None:
    page.paragraph("Keys:")
    for key in table.keys:
        names = " or ".join(name for name, _ in key.names())
        page.item(names, f"{key.meaning}.", _facts(key, table.group_of(key)))


def _facts(key: Key, group: OneOf | None) -> str:
    """Kind, range, whether it is needed, and an example."""
    kind = f'{key.kind}, or "automatic"' if key.automatic else str(key.kind)
    if key.kind in {Kind.CHOICE, Kind.CHOICES}:
        kind = f"{key.kind}: {', '.join(key.choices)}"
    parts = [kind, key.range_text(key.units[0]), needed_text(key, group)]
    return "; ".join([*filter(None, parts), f"such as {key.example}"])


def _see(page: HelpPage, *topics: str) -> None:
    see_also(page, topics)


def see_also(page: HelpPage, topics: Iterable[str]) -> None:
    """Name other topics at the end of a page."""
    page.heading("SEE ALSO")
    page.paragraph(", ".join(f"shpb help {topic}" for topic in topics))
