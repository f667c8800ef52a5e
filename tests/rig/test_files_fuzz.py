"""Whatever stands in a file, only the package's own errors come out, and their messages can be printed."""

from __future__ import annotations

import copy
import datetime
import re
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from shpb.errors import ShpbError
from shpb.rig.columns import COLUMNS
from shpb.rig.keys import RIG_FILE, SHEET_FILE
from shpb.rig.mistakes import Collector
from shpb.rig.rig_file import rig_from_document, rig_from_text
from shpb.rig.sheet_file import check_sheet_fits_rig, sheet_from_document, sheet_from_text
from shpb.rig.shot_list import shot_list_from_text
from shpb.rig.templates import list_template, rig_template, sheet_template
from shpb.rig.text_file import toml_tables
from shpb.rig.toml_text import toml_comment, toml_document

FIXED = settings(
    derandomize=True, deadline=None, max_examples=100, suppress_health_check=[HealthCheck.too_slow]
)

scalars = st.one_of(
    st.booleans(),
    st.integers(),
    st.sampled_from([0, -1, 10**400, 2**63]),
    st.floats(),
    st.text(max_size=8),
    st.dates(),
    st.times(),
    st.just(datetime.datetime(2024, 5, 17, 12, 0)),
)
values = st.recursive(
    scalars,
    lambda inner: st.one_of(
        st.lists(inner, max_size=3),
        st.dictionaries(st.sampled_from(["value", "u", "u_percent", "origin", "x"]), inner, max_size=4),
    ),
    max_leaves=6,
)


def _documents(tables):
    """Valid documents of which some keys hold anything at all."""
    names = {table.name: sorted(table.lookup()) for table in tables}
    broken = st.dictionaries(
        st.sampled_from(sorted(names)).flatmap(
            lambda table: st.tuples(st.just(table), st.sampled_from([*names[table], "speling"]))
        ),
        values,
        min_size=1,
        max_size=4,
    )
    whole = st.dictionaries(st.sampled_from([*sorted(names), "other"]), values, max_size=2)
    return st.tuples(broken, st.one_of(st.just({}), whole))


RIG_DOCUMENT, SHEET_DOCUMENT = (toml_tables(text, "template") for text in (rig_template(), sheet_template()))
RIG = rig_from_text(rig_template(), "rig.toml")


def _broken(template: dict[str, object], changes) -> dict[str, object]:
    keys, tables = changes
    document = copy.deepcopy(template)
    for (table, name), value in keys.items():
        document.setdefault(table, {})[name] = value
    return document | tables


def _printable(error: ShpbError) -> None:
    message = str(error)
    assert message
    assert all(c.isprintable() or c == "\n" for c in message), message


@FIXED
@given(_documents(RIG_FILE))
def test_any_value_in_a_rig_file(changes):
    try:
        rig = rig_from_document(_broken(RIG_DOCUMENT, changes), "", "rig.toml")
    except ShpbError as error:
        _printable(error)
    else:
        assert rig.incident_gauge.to_specimen_m < rig.incident_bar.length_m


@FIXED
@given(_documents(SHEET_FILE))
def test_any_value_in_a_shot_sheet(changes):
    seen = Collector("shot.toml")
    sheet = sheet_from_document(_broken(SHEET_DOCUMENT, changes), "", Path(), seen)
    assert (sheet is None) == bool(seen.mistakes)
    try:
        seen.finish()
        check_sheet_fits_rig(sheet, RIG)
    except ShpbError as error:
        _printable(error)


@FIXED
@given(
    st.dictionaries(st.sampled_from(sorted(COLUMNS)), st.text(max_size=10), max_size=5),
    st.sampled_from([",", ";", "\t"]),
)
def test_any_cell_in_a_shot_list(cells, separator):
    base = {
        "shot_id": "1",
        "kind": "tension",
        "record": "r",
        "material": "m",
        "diameter_mm": "9",
        "length_mm": "5",
    }
    row = base | cells
    text = separator.join(row) + "\n" + separator.join('"' + c.replace('"', '""') + '"' for c in row.values())
    try:
        sheets = shot_list_from_text(text, "shots.csv", "lab")
    except ShpbError as error:
        _printable(error)
        return
    for sheet in sheets:  # whatever was accepted can be stored and read again
        again = sheet_from_text(sheet.text, "stored", "lab")
        assert repr(again.specimen) == repr(sheet.specimen)
        assert (again.remarks, again.record, again.overrides) == (
            sheet.remarks,
            sheet.record,
            sheet.overrides,
        )


TEMPLATES = {
    rig_from_text: rig_template(),
    lambda text, name: sheet_from_text(text, name, "."): sheet_template(),
    lambda text, name: shot_list_from_text(text, name, "."): list_template(),
}


@pytest.mark.parametrize(("read", "template"), TEMPLATES.items(), ids=["rig", "sheet", "list"])
@FIXED
@given(data=st.data())
def test_any_damage_to_the_text(read, template, data):
    text = template
    for _ in range(data.draw(st.integers(1, 4))):
        at = data.draw(st.integers(0, len(text)))
        cut = data.draw(st.integers(0, 20))
        text = text[:at] + data.draw(st.text(max_size=5)) + text[at + cut :]
    try:
        read(text, "damaged")
    except ShpbError as error:
        _printable(error)


@FIXED
@given(
    st.dictionaries(
        st.from_regex(r"[a-z_]{1,8}", fullmatch=True),
        st.dictionaries(
            st.from_regex(r"[a-zA-Z_0-9]{1,8}", fullmatch=True),
            st.recursive(
                st.one_of(
                    st.text(), st.floats(allow_nan=False, allow_infinity=False), st.booleans(), st.integers()
                ),
                lambda inner: st.lists(inner, max_size=3),
                max_leaves=4,
            ),
            min_size=1,
            max_size=3,
        ),
        max_size=3,
    ),
    st.text(),
)
def test_written_toml_reads_back(tables, remark):
    # The standard library's parser is the judge.
    assert toml_tables(toml_comment(remark) + toml_document(tables), "written") == tables


def test_comments_of_a_written_sheet_hold_the_row():
    assert toml_comment("a;b\r\nc\x00d") == "# a;b\n# c?d\n"
    assert re.fullmatch(r"(# .*\n)+", toml_comment("x\u2028y\x85z"))
