"""Templates read back without a mistake, and so does every key in them that is a remark at first."""

from __future__ import annotations

import re

import pytest

from shpb.calibrate.session_file import read_session, session_from_text
from shpb.errors import InputError
from shpb.rig.columns import COLUMNS
from shpb.rig.keys import RIG_FILE, SHEET_FILE
from shpb.rig.rig_file import read_rig, rig_from_text
from shpb.rig.session_keys import SESSION_FILE
from shpb.rig.sheet_file import read_sheet, sheet_from_text
from shpb.rig.shot_list import read_shot_list, shot_list_from_text
from shpb.rig.templates import list_template, rig_template, session_template, sheet_template, write_templates


def _all_keys(text: str) -> str:
    """Every key put to use, but for the second of two that exclude each other."""
    return re.sub(r"^#(?=[a-z]\w* = )(?!voltage_under_tension)", "", text, flags=re.MULTILINE)


def test_the_templates_read_back(tmp_path):
    rig_path, sheet_path, list_path, session_path = write_templates(tmp_path / "new" / "lab")
    rig, sheet = read_rig(rig_path), read_sheet(sheet_path)
    first, second = read_shot_list(list_path)
    assert rig.name == "Bar bench 2, 19 mm"
    assert rig.incident_bar.diameter_m.u is None
    assert sheet.specimen.length_m.u == pytest.approx(5e-6)
    assert (first.shot_id, second.shot_id) == ("CU-017", "CU-018")
    assert first.rig_file == rig_path
    session = read_session(session_path)
    assert session.rig_file == rig_path
    assert [shot.shot_id for shot in session.shots] == ["BT-1"]
    # The sheet and the first row are the same shot, as far as both tell it.
    assert first.specimen.diameter_m == sheet.specimen.diameter_m


def test_every_key_of_the_templates_reads_back():
    rig = rig_from_text(_all_keys(rig_template()), "rig.toml", as_stated=True)
    assert rig.incident_gauge.scope_bits == 12
    assert rig.record.channel_names == ("CH1", "CH2")
    assert rig.settings["cutoff_hz"] == 120e3
    sheet = sheet_from_text(_all_keys(sheet_template()), "shot.toml", ".")
    assert sheet.overrides["incident_window_s"] == pytest.approx((-20e-6, 160e-6))
    assert sheet.temperature_k == pytest.approx(294.15)


def test_every_key_and_every_example_of_the_session_template_reads_back():
    text = _all_keys(session_template())
    # The keys of one kind of shot are refused with another: here the first is a shunt, then bars together.
    of_shunt = r"^(station|shunt_ohm) = .*\n"
    head, *examples = re.sub(r"^#(?=\[)", "", text, flags=re.M).partition("# Other kinds")
    session = session_from_text(re.sub(of_shunt, "", head, flags=re.M) + "".join(examples), "c.toml", ".")
    assert [shot.kind.value for shot in session.shots] == ["bars-together", "bars-apart", "shunt"]
    assert session.shots[0].striker.diameter_m == pytest.approx(0.019)
    assert session.shots[0].striker_speed_m_s.u == pytest.approx(0.02)
    assert session.shots[1].struck_end.value == "specimen"
    assert session.shots[2].shunt_ohm == 174650
    assert session.name == "rig_2024-03-11"


def test_every_key_stands_in_the_templates_with_its_example():
    for text, tables in (
        (rig_template(), RIG_FILE),
        (sheet_template(), SHEET_FILE),
        (session_template().partition("# Other kinds")[0], SESSION_FILE),
    ):
        parts = dict(
            zip(
                re.findall(r"^\[+(\w+)\]+$", text, re.M),
                re.split(r"^\[+\w+\]+$", text, flags=re.M)[1:],
                strict=True,
            )
        )
        for table in (table for table in tables if table.in_forms):
            for key in table.keys:
                assert re.search(rf"^#?{key.name} = {re.escape(key.example)}$", parts[table.name], re.M), (
                    key.name
                )
                assert key.meaning.split(",")[0].split()[0] in parts[table.name]
            assert table.required != (
                "This table may be left out" in re.sub(r"\s+#? *", " ", parts[table.name])
            )


def test_every_column_is_described_in_the_list_template():
    text = list_template()
    for name, column in COLUMNS.items():
        if column.unit == column.key.units[0] and column.part not in {"u", "origin"}:
            assert re.search(rf"^#.*\b{name}\b", text, re.M), name


def test_the_examples_of_all_columns_read_back():
    examples = dict(
        re.findall(r"#   (\w+): [^#]*?; example ([^#;\n]+)\n", re.sub(r"\n#     ", " ", list_template()))
    )
    assert {"young_modulus_GPa", "cutoff_kHz", "flow_strains", "channel_names"} <= set(examples)
    base = {
        "shot_id": "1",
        "kind": "tension",
        "record": "r",
        "material": "m",
        "diameter_mm": "9",
        "length_mm": "5",
    }
    row = base | {name: cell for name, cell in examples.items() if name in COLUMNS}
    (sheet,) = shot_list_from_text("\t".join(row) + "\n" + "\t".join(row.values()) + "\n", "l", ".")
    assert sheet.record.channel_names == ("CH1", "CH2")
    assert sheet.overrides["flow_strains"] == (0.02, 0.05, 0.10, 0.15, 0.20)
    assert sheet.overrides["incident_window_s"] == pytest.approx((-20e-6, 160e-6))


def test_nothing_is_overwritten_unless_asked(tmp_path):
    (tmp_path / "shot.toml").write_text("mine")
    with pytest.raises(
        InputError, match=r"shot.toml stands there already. Choose another folder; nothing was written"
    ):
        write_templates(tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["shot.toml"]
    write_templates(tmp_path, overwrite=True)
    assert read_sheet(tmp_path / "shot.toml").shot_id == "CU-017"


def test_a_folder_that_cannot_be_made(tmp_path):
    (tmp_path / "file").write_text("x")
    with pytest.raises(InputError, match="the templates cannot be written"):
        write_templates(tmp_path / "file" / "lab")
