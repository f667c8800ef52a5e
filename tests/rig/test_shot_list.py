"""Shot lists: what spreadsheets write, equivalence with sheets, and every refusal by line and column."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from shpb.errors import FileMistakes, InputError
from shpb.rig.columns import COLUMNS, Column, cell_value
from shpb.rig.gauge import TestKind
from shpb.rig.key import Kind
from shpb.rig.keys import SHEET_FILE
from shpb.rig.setting_keys import setting_key
from shpb.rig.sheet_file import sheet_from_text
from shpb.rig.shot_list import read_shot_list, shot_list_from_text
from shpb.rig.values import Unreadable

FULL_SHEET = """\
[shot]
id = "S-1"
kind = "compression"
record = ["a.csv", "b.csv"]
rig = "rig.toml"
date = "2024-05-17"
striker_speed_m_s = 12.5
temperature_C = { value = 21.0, u = 0.5, origin = "thermocouple" }
remarks = "dry; 5\\" bar"

[specimen]
material = "copper"
diameter_mm = { value = 10.02, u = 0.005 }
length_m = 0.00601
length_after_mm = 4.9

[record]
volts_per_code = [0.001, 0.002]
channel_names = ["CH 1", "CH 2"]

[settings]
incident_window_us = [-10.5, 150.0]
cutoff_kHz = "automatic"
flow_strains = [0.02, 0.05]
"""
FULL_LIST = (
    "shot_id;kind;record;record_2;rig;date;striker_speed_m_s;temperature_C;u_temperature_C;origin_temperature_C;"
    "remarks;material;diameter_mm;u_diameter_mm;length_m;length_after_mm;volts_per_code;channel_names;"
    "incident_window_start_us;incident_window_end_us;cutoff_kHz;flow_strains;note_pressure_bar;\n"
    'S-1;compression;a.csv;b.csv;rig.toml;2024-05-17;12,5;21;0,5;thermocouple;"dry; 5"" bar";copper;10,02;0,005;'
    "0,00601;4.9;0,001 | 0,002;CH 1|CH 2;-10,5;150;automatic;0,02|0.05;3,5\n"
)


def _bare(sheet):
    """Everything but the text and where it came from."""
    return re.sub(r", text=.*", "", repr(sheet), flags=re.DOTALL)


def test_a_row_is_a_sheet(list_text):
    (sheet,) = shot_list_from_text(FULL_LIST, "shots.csv", "lab")
    assert _bare(sheet) == _bare(sheet_from_text(FULL_SHEET, "shot.toml", "lab"))
    assert sheet.source == "shots.csv, line 2"


def test_a_row_can_be_read_again_from_the_text_that_is_stored():
    (sheet,) = shot_list_from_text(FULL_LIST, "shots.csv", "lab")
    again = sheet_from_text(sheet.text, "stored", "lab")
    assert _bare(again) == _bare(sheet)
    assert sheet.text.startswith(
        "# From shots.csv, line 2; the row as it stood there:\n# shot_id;kind;record;"
    )
    assert FULL_LIST.splitlines()[1] in sheet.text  # word for word, the lab's own note included


def test_every_key_of_a_sheet_has_a_column():
    stems = {(column.table.name, column.key.stem) for column in COLUMNS.values()}
    assert stems == {(table.name, key.stem) for table in SHEET_FILE for key in table.keys}
    # ... of its own: no two keys share one. Three kinds of key have several columns in a unit.
    several = {Kind.QUANTITY: 3, Kind.SPAN: 2, Kind.FILES: 4}
    assert len(COLUMNS) == sum(
        several.get(key.kind, 1) * len(key.units) for table in SHEET_FILE for key in table.keys
    )
    assert {"incident_window_start_us", "incident_window_end_us", "u_diameter_mm", "shot_id"} <= set(COLUMNS)


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize(
    ("separator", "point"), [(",", "."), (";", "."), (";", ","), ("\t", "."), ("\t", ",")]
)
@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "latin-1", "utf-16"])
def test_whatever_the_spreadsheet_writes(tmp_path, separator, point, encoding, end):
    rows = [
        ["# a remark", "with more cells"],
        ["shot_id", "kind", "record", "material", "diameter_mm", "length_mm", "temperature_C"],
        [],
        ["S-1", "compression", "größe.csv", "laiton écroui", f"10{point}5", f"6{point}25", ""],
        ["", "", "", "", "", "", ""],
        ["#S-9", "skipped"],
        ["S-2", "tension", "S-2.csv", "copper", "10", "6"],
    ]
    text = end.join(separator.join(row) for row in rows) + end
    (tmp_path / "shots.csv").write_bytes(text.encode(encoding))
    one, two = read_shot_list(tmp_path / "shots.csv")
    assert one.specimen.material == "laiton écroui"
    assert one.record_files == (tmp_path / "größe.csv",)
    assert (one.specimen.diameter_m, one.specimen.length_m) == pytest.approx((0.0105, 0.00625))
    assert one.temperature_k == pytest.approx(293.15)
    assert two.kind is TestKind.TENSION
    path = tmp_path / "shots.csv"
    assert (one.source, two.source) == (f"{path}, line 4", f"{path}, line 7")
    assert one.text.startswith("# From shots.csv, line 4;")


def test_a_quoted_cell_may_hold_line_breaks_and_hashes():
    text = (
        "shot_id,kind,record,material,diameter_mm,length_mm,remarks\n"
        'S-1,compression,S-1.csv,copper,10,6,"first line\n# not a remark\n\nlast, line"\n'
        "S-2,compression,S-2.csv,copper,10,6,\n"
    )
    one, two = shot_list_from_text(text, "shots.csv", ".")
    assert one.remarks == "first line\n# not a remark\n\nlast, line"
    assert two.source == "shots.csv, line 6"
    assert _bare(sheet_from_text(one.text, "s", ".")) == _bare(one)


HEAD = "shot_id,kind,record,material,diameter_mm,length_mm"
REFUSALS = [
    pytest.param(f"{HEAD}\nS-1,compression,a.csv,copper,10,6\nS-1,compression,b.csv,copper,10,6",
                 "line 3, column shot_id", r'found "S-1", as in line 2', id="a shot twice"),
    pytest.param(f"{HEAD}\ns-1,compression,a.csv,copper,10,6\n\nS-1,compression,b.csv,copper,10,6",
                 "line 4, column shot_id", r"as in line 2", id="a shot twice but for capitals"),
    pytest.param(f"{HEAD}\nS-1,compression,a.csv,copper,10,6\nS-2,compression,x/../a.csv,copper,10,6",
                 "line 3, column record", r'found "x/../a.csv", as in line 2, expected a record of its own',
                 id="a record twice"),
    pytest.param(f"{HEAD}\nS-1,compression,a.csv,copper,10000,6", "line 2, column diameter_mm",
                 r"found 10000 mm, expected a number in mm, 0.1 to 200 mm", id="range"),
    pytest.param(f'{HEAD}\nS-1,compression,a.csv,copper,"10,5",6', "line 2, column diameter_mm",
                 r'found "10,5", .* Write a decimal point, or separate the columns with semicolons', id="comma"),
    pytest.param(f"{HEAD}\nS-1,compression,a.csv,copper,10 mm,6", "line 2, column diameter_mm",
                 r"the unit stands in the column's name", id="unit in the cell"),
    pytest.param(f"{HEAD}\nS-1,compression,a.csv,copper,nan,6", "line 2, column diameter_mm", r'found "nan"', id="nan"),
    pytest.param(f"{HEAD}\nS-1,compression,a.csv,copper,1_0,6", "line 2, column diameter_mm", r'found "1_0"', id="1_0"),
    pytest.param(f"{HEAD}\nS-1,compression,a.csv,copper,,6", "line 2, column diameter_mm",
                 r"found an empty cell, .* Fill it in", id="empty required cell"),
    pytest.param(f"{HEAD}\nS-1,compression,,copper,10,6", "line 2, column record", r"found an empty cell", id="record"),
    pytest.param(f"{HEAD}\n,compression,a.csv,copper,10,6", "line 2, column shot_id", r"found an empty cell", id="id"),
    pytest.param(f"{HEAD}\nS-1,pressing,a.csv,copper,10,6", "line 2, column kind",
                 r'found "pressing", expected one of "compression", "tension"', id="kind"),
    pytest.param(f"{HEAD},length_after_mm\nS-1,compression,a.csv,copper,10,6,7", "line 2, column length_after_mm",
                 r"longer after compression", id="longer after"),
    pytest.param(f"{HEAD},u_diameter_mm\nS-1,compression,a.csv,copper,10,6,-1", "line 2, column u_diameter_mm",
                 r"found -1", id="negative u"),
    pytest.param(f"{HEAD},u_length_after_mm\nS-1,compression,a.csv,copper,10,6,0.1",
                 "line 2, column u_length_after_mm",
                 r"expected a value in column length_after_mm too", id="u without value"),
    pytest.param(f"{HEAD},incident_window_start_us,incident_window_end_us\nS-1,compression,a.csv,copper,10,6,5,",
                 "line 2, column incident_window_end_us", r"both ends of the window or none", id="half a window"),
    pytest.param(f"{HEAD},incident_window_start_us,incident_window_end_us\nS-1,compression,a.csv,copper,10,6,5,4",
                 "line 2, column incident_window_start_us", r"Give the lower number first", id="window reversed"),
    pytest.param(f"{HEAD}\nS-1,compression,a.csv,copper,10,6,extra", "line 2, column 7",
                 r'found "extra" beyond the last column', id="surplus cell"),
    pytest.param(f"{HEAD},\nS-1,compression,a.csv,copper,10,6,extra", "line 1, column 7",
                 r'found no name above "extra" in line 2', id="column without name"),
    pytest.param(f"{HEAD},lenght_after_mm\nS-1,compression,a.csv,copper,10,6,5", "line 1, column lenght_after_mm",
                 r"an unknown column, .* Did you mean length_after_mm\?", id="misspelt column"),
    pytest.param(f"{HEAD},zzz\nS-1,compression,a.csv,copper,10,6,5", "line 1, column zzz",
                 r"Call it note_… to keep it as a note of your own", id="own column"),
    pytest.param(f"{HEAD},material\nS-1,compression,a.csv,copper,10,6,iron", "line 1, column material",
                 r"the column twice", id="column twice"),
    pytest.param("shot_id,kind,record,material,diameter_mm\nS-1,compression,a.csv,copper,10",
                 "line 1, column length_mm", r"no such column", id="missing column"),
    pytest.param(f"{HEAD},length_m\nS-1,compression,a.csv,copper,10,6,0.006", "line 2, column length_m",
                 r"length_mm too", id="two units"),
    pytest.param(f"{HEAD}\nS 1?,compression,a.csv,copper,10,6", "line 2, column shot_id", r"part of a file name",
                 id="bad id"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "where", "says"), REFUSALS)
def test_refusals(list_mistakes, text, where, says):
    mistakes = list_mistakes(text)
    assert len(mistakes) == 1, [str(m) for m in mistakes]
    assert mistakes[0].key == where
    assert re.search(says, str(mistakes[0])), str(mistakes[0])
    assert mistakes[0].file == "shots.csv"


def test_mistakes_of_all_rows_are_told_at_once(list_mistakes):
    found = list_mistakes(
        f"{HEAD}\nS-1,compression,a.csv,copper,ten,6\nS-2,tensile,b.csv,copper,10,\nS-3,tension,a.csv,,10,6"
    )
    assert [m.key for m in found] == [
        "line 2, column diameter_mm", "line 3, column kind", "line 3, column length_mm", "line 4, column record",
        "line 4, column material",
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("# only remarks\n\n", r"there is no row with column names"),
        (f"{HEAD}\n", r"there is no shot below the column names"),
        (f'{HEAD}\nS-1,compression,a.csv,"copper,10,6\nS-2', r"shots.csv, line 2: the row cannot be split"),
    ],
)
def test_a_list_that_cannot_be_split(text, says):
    with pytest.raises(InputError, match=says):
        shot_list_from_text(text, "shots.csv", ".")


def test_a_misspelt_required_column_is_told_once(list_mistakes, list_text):
    found = list_mistakes(list_text(("diameter_mm", "diametre_mm")))
    assert [m.key for m in found] == ["line 1, column diametre_mm"]


def test_a_missing_list_names_the_file(tmp_path):
    with pytest.raises(InputError, match=r"nothing.csv: there is no such shot list"):
        read_shot_list(tmp_path / "nothing.csv")
    with pytest.raises(FileMistakes):
        shot_list_from_text("a,b\n1,2\n", "shots.csv", Path())


def test_a_switch_in_a_cell():
    key = setting_key("padded", bool, True)
    column = Column("padded", SHEET_FILE[-1], key, key.units[0])
    cells = {"true": True, "Yes": True, "FALSE": False, "no": False}
    assert {cell: cell_value(cell, column, decimal_comma=False) for cell in cells} == cells
    with pytest.raises(Unreadable, match="true or false"):
        cell_value("1", column, decimal_comma=False)
