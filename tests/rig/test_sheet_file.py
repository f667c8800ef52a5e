"""Shot sheets: what is read, and every refusal with its message."""

# ruff: noqa: E501  -- the table of refusals reads best with its texts unbroken

from __future__ import annotations

import pickle
import re
from pathlib import Path

import pytest

from shpb.errors import FileMistakes
from shpb.rig.gauge import TestKind
from shpb.rig.rig_file import rig_from_text
from shpb.rig.sheet_file import check_sheet_fits_rig, read_sheet, sheet_from_text


def test_a_sheet_becomes_si_quantities(sheet_text):
    text = sheet_text(
        ('record = "S-1.csv"', 'record = ["S-1_a.csv", "data/S-1_b.csv"]\nrig = "../rig.toml"\ndate = 2024-05-17\n'
         "operator = 'first shift'\nremarks = 'dry'\nstriker_speed_m_s = { value = 14.2, u_percent = 1 }\n"
         "temperature_C = { value = 21, u = 0.5 }"),
        ("length_mm = 6.0", "length_mm = 6.0\nlength_after_mm = 4.9\nyoung_modulus_GPa = 118\ndensity_g_cm3 = 8.94\n"
         "poisson_ratio = 0.34\nheat_capacity_J_kg_K = 385\nlubricant = 'grease'"),
    )  # fmt: skip
    sheet = sheet_from_text(text, "shot.toml", "lab")
    assert sheet.record_files == (Path("lab/S-1_a.csv"), Path("lab/data/S-1_b.csv"))
    assert sheet.rig_file == Path("lab/../rig.toml")
    assert (sheet.date, sheet.operator, sheet.remarks) == ("2024-05-17", "first shift", "dry")
    assert (sheet.temperature_k, sheet.temperature_k.u) == (294.15, 0.5)
    assert sheet.striker_speed_m_s.u == pytest.approx(0.142)
    specimen = sheet.specimen
    assert (specimen.diameter_m, specimen.length_m, specimen.length_after_m) == pytest.approx(
        (0.01, 0.006, 0.0049)
    )
    assert specimen.heat_capacity_j_kg_k == 385
    assert specimen.lubricant == "grease"
    # Copper: c = sqrt(118e9/8940) = 3633.1 m/s by hand.
    assert specimen.elastic_wave_speed_m_s == pytest.approx(3633.1, abs=0.05)
    assert sheet.text == text


def test_what_a_sheet_may_leave_out(sheet_text):
    sheet = sheet_from_text(sheet_text(('record = "S-1.csv"\n', "")), "shot.toml", "lab")
    assert sheet.record_files == ()
    assert sheet.rig_file is None
    assert sheet.temperature_k == pytest.approx(293.15)
    assert sheet.kind is TestKind.COMPRESSION
    assert sheet.striker_speed_m_s is None
    assert sheet.specimen.length_after_m is None


@pytest.mark.parametrize(
    ("written", "kelvin"), [("temperature_C = -196", 77.15), ("temperature_K = 77.15", 77.15), ("temperature_C = 600", 873.15)]
)  # fmt: skip
def test_temperature_in_degrees_or_kelvin(sheet_text, written, kelvin):
    sheet = sheet_from_text(sheet_text(("[specimen]", f"{written}\n[specimen]")), "s", ".")
    assert sheet.temperature_k == pytest.approx(kelvin, abs=1e-9)


def test_a_path_with_backslashes_is_understood(sheet_text):
    sheet = sheet_from_text(sheet_text(('"S-1.csv"', r"'day 1\S-1.csv'")), "s", "lab")
    assert sheet.record_files == (Path("lab/day 1/S-1.csv"),)


def test_a_sheet_file_looks_for_its_record_in_its_own_folder(tmp_path, sheet_text):
    (tmp_path / "shot.toml").write_text(sheet_text(), encoding="utf-8")
    sheet = read_sheet(tmp_path / "shot.toml")
    assert sheet.record_files == (tmp_path / "S-1.csv",)
    assert sheet.source == str(tmp_path / "shot.toml")
    assert repr(pickle.loads(pickle.dumps(sheet))) == repr(sheet)


def test_the_length_after_may_differ_by_the_reading(sheet_text):
    # An elastic shot: 6.004 against 6.000 mm, each read to 0.002 mm, is no growth.
    after = (
        "length_mm = 6.0",
        "length_mm = { value = 6.0, u = 0.002 }\nlength_after_mm = { value = 6.004, u = 0.002 }",
    )
    assert sheet_from_text(sheet_text(after), "s", ".").specimen.length_after_m == pytest.approx(6.004e-3)


REFUSALS = [
    pytest.param("length_mm = 6.0", "length_mm = 6.0\nlength_after_mm = 6.5", "specimen.length_after_mm",
                 r"found 6.5 mm after a length of 6 mm: longer after compression", id="longer after compression"),
    pytest.param('kind = "compression"\nrecord = "S-1.csv"\n\n[specimen]',
                 'kind = "tension"\n\n[specimen]\nlength_after_mm = 5.5', "specimen.length_after_mm",
                 r"shorter after tension", id="shorter after tension"),
    pytest.param("[specimen]", "temperature_K = -5\n[specimen]", "shot.temperature_K",
                 r"found -5 K, expected a number in K, 1 to 3773.15 K. Nothing is colder", id="below 0 K"),
    pytest.param("[specimen]", "temperature_C = -300\n[specimen]", "shot.temperature_C",
                 r"found -300 °C, .* -272.15 to 3500 °C", id="below -273 C"),
    pytest.param("[specimen]", "temperature_C = 20\ntemperature_K = 293\n[specimen]", "shot.temperature_K",
                 r"found temperature_C too, expected one of the two", id="two temperatures"),
    pytest.param("[specimen]", "temperature_C = { value = 20, u_percent = 1 }\n[specimen]",
                 "shot.temperature_C.u_percent", r"a percentage of a temperature", id="percent of a temperature"),
    pytest.param("[specimen]", "striker_speed_m_s = 14200\n[specimen]", "shot.striker_speed_m_s",
                 r"If it is 14200 mm/s, write striker_speed_m_s = 14.2", id="speed in mm/s"),
    pytest.param('id = "S-1"', 'id = "S/1"', "shot.id", r'found "S/1", .* part of a file name', id="slash in the id"),
    pytest.param('id = "S-1"', 'id = "a\\u0000b"', "shot.id", r"without control characters", id="NUL in the id"),
    pytest.param('id = "S-1"', "id = ''", "shot.id", r"found empty text", id="empty id"),
    pytest.param('id = "S-1"', "id = '..'", "shot.id", r'found ".."', id="dots as id"),
    pytest.param('id = "S-1"', f"id = '{'x' * 101}'", "shot.id", r"text of 1 to 100 characters", id="long id"),
    pytest.param('kind = "compression"', 'kind = "compresion"', "shot.kind", r'Did you mean "compression"\?', id="kind"),
    pytest.param('record = "S-1.csv"', 'record = ["a.csv", "a.csv"]', "shot.record", r"the same file twice",
                 id="file twice"),
    pytest.param('record = "S-1.csv"', "record = []", "shot.record", r"found an empty list", id="no files"),
    pytest.param('record = "S-1.csv"', "record = 7", "shot.record", r"found 7, expected a file name", id="record 7"),
    pytest.param("diameter_mm = 10.0", "diameter_mm = 0.01", "specimen.diameter_mm",
                 r"If it is 0.01 m, write diameter_mm = 10", id="specimen in m"),
    pytest.param("diameter_mm = 10.0", "diameter_mm = 10.0\nheat_capacity_J_kg_K = 0.385",
                 "specimen.heat_capacity_J_kg_K", r"If it is 0.385 J/\(g K\), write heat_capacity_J_kg_K = 385",
                 id="heat capacity per gram"),
    pytest.param("diameter_mm = 10.0\n", "", "specimen.diameter_mm", r"found nothing, expected a number in mm",
                 id="no diameter"),
    pytest.param("[specimen]", "[settings]\ncutoff_fa_c0 = 3\n[specimen]", "settings.cutoff_fa_c0",
                 r"found 3, expected a number, 0.02 to 1", id="setting out of range"),
    pytest.param("[specimen]", "[settings]\ndispersion = 'phases'\n[specimen]", "settings.dispersion",
                 r'Did you mean "phase"\?', id="setting misspelt"),
    pytest.param("[specimen]", "[settings]\nincident_window_us = 20\n[specimen]", "settings.incident_window_us",
                 r'found 20, expected a list \[start, end\] of two rising numbers in µs, or "automatic"', id="window"),
    pytest.param("[specimen]", "[record]\ntime_unit = 'hours'\n[specimen]", "record.time_unit",
                 r'found "hours", expected one of "s", "ms", "us", "ns"', id="time unit"),
    pytest.param("[specimen]", "[record]\nsample_interval_us = 0\n[specimen]", "record.sample_interval_us",
                 r"found 0 µs", id="no interval"),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "where", "says"), REFUSALS)
def test_refusals(sheet_mistakes, old, new, where, says):
    mistakes = sheet_mistakes((old, new))
    assert len(mistakes) == 1, [str(m) for m in mistakes]
    assert mistakes[0].key == where
    assert re.search(says, str(mistakes[0])), str(mistakes[0])


def test_all_mistakes_are_told_at_once(sheet_mistakes):
    found = sheet_mistakes(
        ('id = "S-1"', "id = 3.5"),
        ("diameter_mm = 10.0", "diametr_mm = 10"),
        ("[specimen]", "speed = 3\n[specimen]"),
    )
    assert [m.key for m in found] == ["shot.id", "shot.speed", "specimen.diametr_mm"]


def test_a_specimen_wider_than_the_bar_or_longer_is_refused(rig_text, sheet_text):
    rig = rig_from_text(rig_text(), "rig.toml")
    check_sheet_fits_rig(sheet_from_text(sheet_text(), "shot.toml", "."), rig)
    big = sheet_from_text(
        sheet_text(("diameter_mm = 10.0", "diameter_mm = 22"), ("length_mm = 6.0", "length_mm = 600")),
        "shot.toml",
        ".",
    )
    short = rig_from_text(
        rig_text(("length_mm = 1500", "length_mm = 500"), ("to_specimen_mm = 600", "to_specimen_mm = 250")),
        "r",
    )
    with pytest.raises(FileMistakes) as caught:
        check_sheet_fits_rig(big, short)
    says = [str(m) for m in caught.value.mistakes]
    assert [m.key for m in caught.value.mistakes] == [
        "specimen diameter",
        "specimen diameter",
        "specimen length",
    ]
    assert "found a specimen 22 mm wide, expected at most the 20 mm of the incident bar" in says[0]
    assert "found a specimen 600 mm long, expected at most the 500 mm of the transmitted bar" in says[2]
    assert all(m.file == "shot.toml" for m in caught.value.mistakes)


def test_a_sheet_is_the_same_from_its_stored_text(sheet_text):
    text = sheet_text(("[specimen]", "[settings]\ntransmitted_window_us = [310.5, 480.25]\n[specimen]"))
    one = sheet_from_text(text, "shot.toml", "lab")
    two = sheet_from_text(one.text, "shot.toml", "lab")
    assert repr(one) == repr(two)
    assert one.overrides["transmitted_window_s"] == pytest.approx((310.5e-6, 480.25e-6), rel=1e-14)


def test_hot_shots_weighed_specimens_and_friction(sheet_text):
    text = sheet_text(
        ('record = "S-1.csv"', 'record = "S-1.csv"\ntemperature_C = 400\nincident_face_temperature_C = { value = 110, u = 5 }\n'
         "transmitted_face_temperature_K = 373.15\nheated_length_mm = 80"),
        ("length_mm = 6.0", "length_mm = 6.0\nmass_g = 4.2\nfriction_coefficient = 0.05"),
    )  # fmt: skip
    sheet = sheet_from_text(text, "shot.toml", "lab")
    assert sheet.incident_face_temperature_k == pytest.approx(383.15)
    assert sheet.incident_face_temperature_k.u == 5
    assert sheet.transmitted_face_temperature_k == pytest.approx(373.15)
    assert sheet.heated_length_m == pytest.approx(0.08)
    assert sheet.specimen.mass_kg == pytest.approx(4.2e-3)
    assert sheet.specimen.friction_coefficient == 0.05
    plain = sheet_from_text(sheet_text(), "shot.toml", "lab")
    assert plain.incident_face_temperature_k is plain.heated_length_m is plain.specimen.mass_kg is None


def test_a_friction_coefficient_in_per_cent_is_refused(sheet_mistakes):
    (found,) = sheet_mistakes(("length_mm = 6.0", "length_mm = 6.0\nfriction_coefficient = 5"))
    assert str(found).startswith(
        "shot.toml: specimen.friction_coefficient: found 5, expected a number, 0 to 0.5"
    )
