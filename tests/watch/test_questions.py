"""The few numbers that a record without a sheet lacks: checked as they are typed, and what they become."""

from __future__ import annotations

import shutil
import tomllib
from pathlib import Path

import pytest

from shpb.demo import DemoCampaign
from shpb.errors import FileMistakes, InputError
from shpb.rig.sheet_file import read_sheet
from shpb.watch.questions import Interview, free_sheet_path, last_of
from shpb.watch.shelf import Named, Shelf, stamp_of

ANSWERS = ["", "c", "Wrenmoor 3", "12.00 mm", "4,50", "", "11.58 m/s", ""]


@pytest.fixture(autouse=True)
def rig_file(campaign: DemoCampaign, tmp_path: Path) -> Path:
    return Path(shutil.copyfile(campaign.folder / "calibration" / "bench_1.toml", tmp_path / "rig.toml"))


@pytest.fixture
def interview(tmp_path: Path, rig_file: Path) -> Interview:
    return Interview((tmp_path / "W-77.csv",), "W-77", {}, rig_file, today="2031-02-17")


def answered(interview: Interview, answers: list[str]) -> str:
    for answer in answers:
        interview.answer(answer)
    assert interview.question is None
    return interview.sheet_text(Shelf())


def test_the_answers_become_a_sheet(interview: Interview, tmp_path: Path) -> None:
    text = answered(interview, ANSWERS)
    (tmp_path / "W-77.toml").write_text(text, "utf-8")
    sheet = read_sheet(tmp_path / "W-77.toml")
    assert (sheet.shot_id, sheet.kind.value, sheet.specimen.material) == ("W-77", "compression", "Wrenmoor 3")
    assert float(sheet.specimen.diameter_m) == pytest.approx(0.012, rel=1e-12)
    assert float(sheet.specimen.length_m) == pytest.approx(0.0045, rel=1e-12)
    assert float(sheet.temperature_k) == pytest.approx(293.15)
    assert sheet.striker_speed_m_s == pytest.approx(11.58)
    assert sheet.date == "2031-02-17"
    assert [path.name for path in sheet.record_files] == ["W-77.csv"]
    assert tomllib.loads(text)["shot"]["rig"] == "rig.toml"
    assert "Written by shpb watch from answers" in text


def test_several_files_are_listed(tmp_path: Path) -> None:
    files = (tmp_path / "W-77_CH1.csv", tmp_path / "W-77_CH2.csv")
    text = answered(Interview(files, "W-77", {}, rig_file=tmp_path / "rig.toml"), ANSWERS)
    assert tomllib.loads(text)["shot"]["record"] == ["W-77_CH1.csv", "W-77_CH2.csv"]


def test_the_last_answers_are_proposed_but_for_id_and_speed(tmp_path: Path) -> None:
    last = {"id": "W-76", "material": "Wrenmoor 3", "diameter": "12", "length": "4.5", "striker_speed": "9"}
    interview = Interview((tmp_path / "W-77.csv",), "W-77", last, rig_file=tmp_path / "rig.toml")
    proposed = {question.stem: interview.proposed(question) for question in interview.questions}
    assert proposed == {
        "id": "W-77", "kind": "compression", "material": "Wrenmoor 3", "diameter": "12", "length": "4.5",
        "temperature": "20", "striker_speed": "-", "date": "-",
    }  # fmt: skip


@pytest.mark.parametrize(
    ("before", "answer", "words"),
    [
        (2, "", "needed: "),
        (2, "-", "this one is needed"),
        (3, "twelve", 'found "twelve", expected a number in mm'),
        (3, "-12", "found -12"),
        (3, "0", "found 0"),
        (3, "nan", "found nan"),
        (3, "1e9", "found 1000000000 mm, expected a number in mm"),
        (5, "-400", "found -400"),
        (1, "push", "expected"),
        (7, "yesterday", 'found "yesterday", expected year-month-day'),
    ],
)
def test_an_answer_that_cannot_be_is_refused_and_the_question_stays(
    interview: Interview, before: int, answer: str, words: str
) -> None:
    for given in ANSWERS[:before]:
        interview.answer(given)
    question = interview.question
    with pytest.raises(InputError, match=words):
        interview.answer(answer)
    assert interview.question is question


def test_hostile_answers_stay_text(interview: Interview) -> None:
    nasty = """x" ]]\\ '=cmd()' <script> # """
    text = answered(interview, ["", "", nasty, "12", "4.5", "", "", ""])
    assert tomllib.loads(text)["specimen"]["material"] == nasty.strip()
    assert set(tomllib.loads(text)) == {"shot", "specimen"}


def test_control_characters_are_refused(interview: Interview) -> None:
    for answer in ("", ""):
        interview.answer(answer)
    with pytest.raises(InputError, match="without control characters"):
        interview.answer("x\x1b[31m")


def test_a_rig_file_that_went_meanwhile_costs_no_answers(interview: Interview, tmp_path: Path) -> None:
    (tmp_path / "rig.toml").unlink()
    assert 'material = "Wrenmoor 3"' in answered(interview, ANSWERS)


def test_without_a_rig_file_it_is_asked_for_and_read(tmp_path: Path) -> None:
    interview = Interview((tmp_path / "W-77.csv",), "W-77", {})
    for answer in ANSWERS:
        interview.answer(answer)
    assert interview.question is not None
    assert interview.question.stem == "rig"
    with pytest.raises((InputError, FileMistakes)):
        interview.answer("nowhere.toml")
    assert interview.question is not None


def test_answers_that_do_not_fit_together_are_asked_again(interview: Interview) -> None:
    for answer in ["", "", "Wrenmoor 3", "12", "4.5", "", "", ""]:
        interview.answer(answer)
    interview._values["diameter"] = -1.0  # as of a check that only the whole sheet can make
    with pytest.raises(FileMistakes):
        interview.sheet_text(Shelf())
    assert interview.question is not None
    assert interview.question.stem == "diameter"


def test_what_an_earlier_sheet_says_of_the_material_is_taken_along(tmp_path: Path) -> None:
    (tmp_path / "W-01.toml").write_text(
        '[shot]\nid = "W-01"\nkind = "compression"\nrecord = "W-01.csv"\n[specimen]\nmaterial = "wrenmoor 3"\n'
        "diameter_mm = 12\nlength_mm = 4.5\n"
        'young_modulus_GPa = { value = 118, u = 2, origin = "pulse echo" }\ndensity_kg_m3 = 8900\n',
        "utf-8",
    )
    shelf = Shelf()
    path = tmp_path / "W-01.toml"
    stamp = stamp_of(path)
    assert stamp is not None
    assert shelf.read([(path, stamp)]) == []
    interview = Interview((tmp_path / "W-77.csv",), "W-77", {}, rig_file=tmp_path / "rig.toml")
    for answer in ANSWERS:
        interview.answer(answer)
    specimen = tomllib.loads(interview.sheet_text(shelf))["specimen"]
    assert specimen["young_modulus_GPa"] == {"value": 118, "u": 2, "origin": "pulse echo"}
    assert specimen["density_kg_m3"] == 8900


def test_proposals_from_the_sheet_spoken_of_last(tmp_path: Path) -> None:
    text = (
        '[shot]\nid = "W-01"\nkind = "compression"\nrecord = "W-01.csv"\ntemperature_C = 200\n'
        '[specimen]\nmaterial = "Wrenmoor 3"\ndiameter_mm = 12\nlength_mm = 4.5\n'
    )
    (tmp_path / "W-01.toml").write_text(text, "utf-8")
    sheet = read_sheet(tmp_path / "W-01.toml")
    assert last_of([Named(sheet, tmp_path / "W-01.toml")], tmp_path) == {
        "kind": "compression", "material": "Wrenmoor 3", "diameter": "12", "length": "4.5", "temperature": "200",
    }  # fmt: skip


def test_a_sheet_is_never_written_over(tmp_path: Path) -> None:
    assert free_sheet_path(tmp_path, "W-77").name == "W-77.toml"
    (tmp_path / "W-77.toml").touch()
    (tmp_path / "W-77_2.toml").symlink_to(tmp_path / "nowhere")
    assert free_sheet_path(tmp_path, "W-77").name == "W-77_3.toml"
