"""calibration/README.md says what the code does: tables, examples and names."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from shpb.calibrate.session_file import session_from_text, session_on_rig
from shpb.docs import blocks, refreshed
from shpb.errors import InputError
from shpb.limits import LIMIT_FACTS, key_of
from shpb.rig.rig_file import rig_from_text
from shpb.rig.sheet_file import check_sheet_fits_rig, sheet_from_text
from shpb.rig.shot_list import shot_list_from_text
from shpb.trust.judge import all_checks

README = (Path(__file__).parents[2] / "calibration" / "README.md").read_text(encoding="utf-8")


def _example(name: str) -> str:
    return re.search(rf"<!-- example: {name} -->\n```\w+\n(.*?)```", README, re.DOTALL)[1]


def test_the_key_tables_are_those_of_the_code():
    assert refreshed(README) == README, "run: python -m shpb.docs calibration/README.md"


def test_the_table_of_checks_holds_every_check_with_its_keys() -> None:
    rows = [line.split(" | ") for line in blocks()["checks"].splitlines()[2:]]
    assert [row[0].removeprefix("| ") for row in rows] == [check.name for check in all_checks()]
    overlap = next(row for row in rows if row[0] == "| overlap")
    assert overlap[1:] == [
        "The incident pulse must have died away before the reflected one begins",
        "`overlap` 2 %",
        "common practice",
        "reject |",
    ]
    text = " ".join(row[2] for row in rows)
    assert set(re.findall(r"`(\w+)`", text)) == {key_of(name) for name in LIMIT_FACTS} - {"repeat_scatter"}


def test_a_missing_table_is_noticed():
    with pytest.raises(InputError, match="Put each of these between its marks once: rig, bar, gauge"):
        refreshed(README.replace("<!-- keys: striker -->", ""))


def test_the_example_files_read_and_fit_together():
    rig = rig_from_text(_example("rig"), "rig")
    sheet = sheet_from_text(_example("sheet"), "sheet", "shots")
    (row,) = shot_list_from_text(_example("list"), "list", "shots")
    check_sheet_fits_rig(sheet, rig)
    for one, two in (
        (sheet.specimen.diameter_m, row.specimen.diameter_m),
        (sheet.specimen.length_after_m, row.specimen.length_after_m),
        (sheet.striker_speed_m_s, row.striker_speed_m_s),
    ):
        assert (float(one), one.u) == (float(two), two.u)
    assert sheet.record_files == row.record_files
    session = session_on_rig(session_from_text(_example("session"), "session", "shots"), rig)
    assert [shot.kind.value for shot in session.shots] == [
        "bars-apart",
        "bars-apart",
        "bars-together",
        "shunt",
    ]
    # The text below the example: 206 GPa and 7830 kg/m^3 are 5129 m/s, 1 % of modulus is 0.5 % of speed.
    speed = rig.transmitted_bar.wave_speed_m_s
    assert round(speed) == 5129
    assert speed.u / speed == pytest.approx(0.005, rel=0.05)


def test_quantities_in_the_text_are_valid():
    block = re.search(r"```\n(diameter_mm  = 20.0.*?)```", README, re.DOTALL)[1]
    plain, with_u, gauge = block.strip().splitlines()
    rig = _example("rig")
    for line, old in (
        (plain, "diameter_mm = 20.0"),
        (with_u, "diameter_mm = 20.0"),
        (gauge, "gauge_factor = 2.08"),
    ):
        rig_from_text(rig.replace(old, line, 1), "rig")
