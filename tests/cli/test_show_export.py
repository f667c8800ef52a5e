"""``shpb show`` and ``shpb export`` as their users meet them; and that every verb speaks JSON of one schema version."""

from __future__ import annotations

import csv
import json
import re
import shutil
from pathlib import Path

import h5py
import numpy as np
import pytest

from shpb.cli.main import main, verb_parsers
from shpb.demo.campaign import write_demo
from shpb.store.shot_file import load
from shpb.view.compare_page import MOST_SHOTS, compare_figure
from shpb.view.report.stored import ReportedShot
from shpb.view.show_compare import compared
from shpb.view.summary import SCHEMA_VERSION

SHOTS = ("W-01", "W-02", "W-04", "W-05")  # the last is rejected: no equilibrium


def run(*arguments: str | Path) -> int:
    return main([str(argument) for argument in arguments])


@pytest.fixture(scope="module", name="campaign")
def _campaign(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A few shots of the demo, merged with one alloy's quasi-static curves."""
    folder: Path = tmp_path_factory.mktemp("show") / "lab"
    write_demo(folder)
    sheets = [folder / "records" / f"{name}.toml" for name in SHOTS]
    run("reduce", *sheets, "--figure", "none", "--workers", "1", "--results", folder / "results")
    for path in (folder / "quasistatic").glob("H_*"):
        path.unlink()
    run(
        "merge",
        folder,
        "--figure",
        "none",
        "--laws",
        "johnson-cook,ludwik",
        "--fact",
        "melting_temperature_C=1083",
    )
    return folder


@pytest.fixture(name="lab")
def _lab(campaign: Path, tmp_path: Path) -> Path:
    """A copy that a test may spoil."""
    return Path(shutil.copytree(campaign, tmp_path / "lab"))


@pytest.fixture(autouse=True)
def _fresh(capsys: pytest.CaptureFixture[str]) -> None:
    capsys.readouterr()


def read(folder: Path, *names: str) -> list[ReportedShot]:
    return [ReportedShot(stored=load(folder / "results" / f"{n}.h5"), budget=(), sha256="") for n in names]


# --- one shot ------------------------------------------------------------------------------------------


def test_one_shot_is_shown_as_it_was_reduced(
    campaign: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    sheet = campaign / "records" / "W-02.toml"
    assert run("reduce", sheet, "--figure", "none", "--results", tmp_path, "--full") == 0
    reduced = capsys.readouterr().out.rsplit("written:", 1)[0].rstrip()
    assert run("show", tmp_path / "W-02.h5", "--full") == 0
    out, err = capsys.readouterr()
    assert out.rstrip() == reduced
    assert err == ""


def test_one_shot_as_a_figure_and_never_over_another(
    campaign: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    page = tmp_path / "page.svg"
    assert run("show", campaign / "results" / "W-05.h5", "--figure", page) == 0
    assert "REJECT" in page.read_text(encoding="utf-8")
    before = page.read_bytes()
    assert run("show", campaign / "results" / "W-02.h5", "--figure", page) == 2
    assert "--replace" in capsys.readouterr().err
    assert page.read_bytes() == before
    assert run("show", campaign / "results" / "W-02.h5", "--figure", page, "--replace") == 0
    assert page.read_bytes() != before


def test_a_shot_that_this_version_finds_otherwise_is_said_to(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = lab / "results" / "W-02.h5"
    with h5py.File(path, "r+") as file:
        file["response/true_stress"][...] *= 1.01
        file.attrs["program_version"] = "0.0.1"
    assert run("show", path) == 0
    err = capsys.readouterr().err
    assert "stored by shpb 0.0.1, and this version finds otherwise" in err
    assert re.search(r"changed by up to 0\.99? %", err)


# --- several -------------------------------------------------------------------------------------------


def test_several_are_listed_and_compared(campaign: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("show", campaign / "results") == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert max(map(len, out.splitlines())) <= 80
    assert "4 shots: 3 accept, 1 reject." in out
    assert "true stress at equal true plastic strain" in out
    table = out[out.index("true stress at equal") :]
    assert "W-05" not in table  # it does not count


def test_differences_are_those_of_the_stored_stresses(campaign: Path) -> None:
    shots = read(campaign, *SHOTS)
    (group,) = compared(shots)
    held = {shot.shot_id: {line.at_strain: line for line in shot.flow()} for shot in shots}
    base = held[group.reference]
    assert group.reference == "W-02"  # has a stress at every strain of the table
    for shot_id, rate, _, cells in group.shots:
        assert 500 < rate < 2000
        for strain, at in zip(group.strains, cells, strict=True):
            if at is None:
                continue
            assert at.stress_pa == held[shot_id][strain].stress_pa
            if shot_id != group.reference:
                assert at.difference == pytest.approx(at.stress_pa / base[strain].stress_pa - 1, abs=1e-12)
                # One rig: less than both whole uncertainties together, more than none.
                whole = np.hypot(at.u_pa / at.stress_pa, base[strain].u_pa / base[strain].stress_pa)
                assert 0 < at.u_difference < whole


def test_repeats_agree_within_the_stated_interval(campaign: Path) -> None:
    (group,) = compared(read(campaign, "W-02", "W-04"))
    found = [
        at for _, _, _, cells in group.shots for at in cells if at is not None and at.difference is not None
    ]
    assert found
    assert all(abs(at.difference) < 2 * at.u_difference for at in found)


def test_the_page_shows_every_counting_curve_where_it_counts(campaign: Path) -> None:
    shots = read(campaign, *SHOTS)
    figure = compare_figure(shots)
    curves = figure.axes[0]
    lines = {line.get_label(): line for line in curves.get_lines() if line.get_label() != "_marks"}
    assert set(lines) == {"W-01", "W-02", "W-04"}
    for shot in shots[:3]:
        x, y = lines[shot.shot_id].get_data()
        assert x[0] == pytest.approx(shot.strain_span[0], rel=1e-6)
        assert x[-1] == pytest.approx(shot.strain_span[1], rel=1e-6)
        assert max(y) == pytest.approx(1e-6 * shot["response/true_stress"][shot.span].max(), rel=1e-9)
    # Told apart without colour: dashes differ, and each curve carries its number.
    assert len({str(line._unscaled_dash_pattern) for line in lines.values()}) == 3
    assert {text.get_text() for text in curves.texts} == {"1", "2", "3"}
    said = {text.get_text() for text in figure.texts}
    assert {"ACCEPT", "REJECT", "W-05"} <= said


def test_a_page_of_shots_that_do_not_count_says_so(campaign: Path) -> None:
    figure = compare_figure(read(campaign, "W-05", "W-05"))
    assert any("No part of any of these shots counts" in text.get_text() for text in figure.texts)


def test_more_shots_than_a_page_can_hold_are_refused(
    campaign: Path, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    names = [tmp_path / f"{number}.h5" for number in range(MOST_SHOTS + 1)]
    for name in names:
        shutil.copy(campaign / "results" / "W-02.h5", name)
    assert run("show", *names, "--figure", tmp_path / "x.png") == 2
    assert f"{MOST_SHOTS + 1} shots" in capsys.readouterr().err
    assert not (tmp_path / "x.png").exists()


def test_a_damaged_file_is_named_and_the_others_are_shown(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (lab / "results" / "W-02.h5").write_bytes(b"not HDF5 at all")
    assert run("show", lab / "results") == 2
    out, err = capsys.readouterr()
    assert "W-02.h5" in err
    assert "W-01" in out
    assert "W-04" in out


def test_hostile_names_are_harmless(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    with h5py.File(lab / "results" / "W-02.h5", "r+") as file:
        text = file["rig/sheet_as_used"][()].decode()
        assert '"W-02"' in text
        del file["rig/sheet_as_used"]
        file["rig/sheet_as_used"] = text.replace('"W-02"', '"\\u001b[31m=cmd[/x]$\\\\frac"')
    page = lab / "page.svg"
    assert run("show", lab / "results" / "W-01.h5", lab / "results" / "W-02.h5", "--figure", page) == 0
    assert "\x1b" not in capsys.readouterr().out
    assert "\x1b" not in page.read_text(encoding="utf-8")


# --- merges --------------------------------------------------------------------------------------------


def test_a_merge_is_shown_from_its_file(campaign: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("show", campaign / "merged" / "merged.h5", "--full") == 0
    out = capsys.readouterr().out
    assert max(map(len, out.splitlines())) <= 80
    with h5py.File(campaign / "merged" / "merged.h5") as file:
        stress = file["materials/1/table/stress"][0] / 1e6
        a = file["materials/1/laws/johnson-cook/parameters/value"][0] / 1e6
    assert f"{stress:.1f}+-" in out
    assert re.search(rf"A\s+{int(a)}[\d.]* MPa", out)
    assert "W-05.h5: rejected: force equilibrium" in out


def test_a_figure_of_a_merge_is_refused_with_the_way_to_it(
    campaign: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run("show", campaign / "merged" / "merged.h5", "--figure", "x.png") == 2
    assert "shpb merge" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("nothing.h5", "no such file"),
        ("README.txt", "not a result of this program"),
        ("records", "no shot file"),
    ],
)
def test_what_is_no_result_is_refused(
    name: str, words: str, campaign: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    for verb in (("show",), ("export", "--into", "x")):
        assert run(*verb, campaign / name) == 2
        assert words in capsys.readouterr().err


# --- export --------------------------------------------------------------------------------------------


@pytest.mark.slow
def test_a_campaign_is_exported_and_nothing_is_written_twice(
    campaign: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    into = tmp_path / "tables"
    assert run("export", campaign, "--into", into, "--law", "johnson-cook") == 0
    names = sorted(path.name for path in into.iterdir())
    assert names == [
        "W-01.csv", "W-02.csv", "W-04.csv", "W-05.csv",
        "Wrenmoor_3_johnson-cook_long.csv", "Wrenmoor_3_johnson-cook_wide.csv", "merged.csv",
    ]  # fmt: skip
    before = {path.name: path.stat().st_mtime_ns for path in into.iterdir()}
    assert run("export", campaign, "--into", into, "--law", "johnson-cook") == 0
    assert capsys.readouterr().out.count("up to date") == 7
    assert {path.name: path.stat().st_mtime_ns for path in into.iterdir()} == before
    assert run("export", campaign, "--into", into, "--law", "johnson-cook", "--units", "SI") == 1
    assert "--replace" in capsys.readouterr().err
    assert run("export", campaign, "--into", into, "--law", "johnson-cook", "--units", "SI", "--replace") == 0
    with (into / "W-02.csv").open() as file:
        assert "true_stress_Pa" in next(csv.reader(file))


def test_a_foreign_file_stands(campaign: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "W-02.csv").write_text("mine")
    assert run("export", campaign / "results", "--into", tmp_path, "--replace") == 1
    assert "did not export" in capsys.readouterr().err
    assert (tmp_path / "W-02.csv").read_text() == "mine"
    assert (tmp_path / "W-04.csv").exists()


def test_two_results_of_one_name_do_not_become_one_file(
    lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    other = lab / "other"
    other.mkdir()
    shutil.copy(lab / "results" / "W-02.h5", other / "W-02.h5")
    assert (
        run("export", lab / "results" / "W-02.h5", other / "W-02.h5", "--into", tmp_path / "x", "--json") == 2
    )
    assert (
        "would be written over the export of"
        in json.loads(capsys.readouterr().out)["not_exported"][0]["error"]["what"]
    )


@pytest.mark.parametrize(
    ("options", "where"),
    [
        (("--rates", "1,zero"), "--rates"),
        (("--rates", "1,1"), "--rates"),
        (("--temperatures", "-300"), "--temperatures"),
        (("--strain-step", "0"), "--strain-step"),
        (("--strain-end", "nan"), "--strain-end"),
        (("--law", "jonson-cook"), "--law"),
    ],
)
def test_choices_that_cannot_be_are_named(
    options: tuple[str, ...], where: str, campaign: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run("export", campaign / "merged" / "merged.h5", "--into", tmp_path, *options) == 2
    assert capsys.readouterr().err.startswith(f"shpb: {where}")


def test_options_of_tables_need_a_merge(
    campaign: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run("export", campaign / "results", "--into", tmp_path, "--law", "swift") == 2
    assert "merged.h5" in capsys.readouterr().err


# --- JSON of every verb --------------------------------------------------------------------------------


def every_verb(lab: Path, out: Path) -> dict[str, list[str]]:
    shot, record = str(lab / "results" / "W-02.h5"), str(lab / "records" / "W-02.csv")
    return {
        "reduce": [str(lab / "records" / "W-02.toml"), "--figure", "none", "--results", str(out / "r")],
        "adjust": [shot, "--reset", "--by", "A. Nyone", "--why", "test"],
        "watch": [
            str(lab / "records"),
            "--once",
            "--no-questions",
            "--figure",
            "none",
            "--results",
            str(out / "w"),
        ],
        "show": [shot, str(lab / "results" / "W-01.h5")],
        "merge": [str(lab), "--figure", "none", "--laws", "none", "--results", str(out / "m")],
        "report": [shot, "--into", str(out / "p")],
        "export": [shot, "--into", str(out / "e")],
        "calibrate": ["--trend", str(lab)],
        "recalibrate": [shot, "--calibration", str(lab / "no-such.toml")],
        "record": [record],
        "forms": [str(out / "f")],
        "demo": [str(out / "d"), "--write-only"],
        "help": ["checks"],
        "completion": ["fish"],
    }


def test_every_verb_is_tried() -> None:
    assert set(every_verb(Path(), Path())) == set(verb_parsers())


@pytest.mark.parametrize("verb", sorted(every_verb(Path(), Path())))
def test_json_of_every_verb(verb: str, lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    if verb == "watch":
        for path in (lab / "records").iterdir():
            if not path.name.startswith("W-01"):
                path.unlink()
    status = run(verb, *every_verb(lab, tmp_path)[verb], "--json")
    out = capsys.readouterr().out
    documents = [json.loads(line) for line in out.splitlines()] if verb == "watch" else [json.loads(out)]
    assert documents
    for said in documents:
        assert said["schema_version"] == SCHEMA_VERSION
        assert said["schema"].startswith("shpb ")
        assert ("error" in said) == (status in (1, 2)) or verb == "watch"


def test_every_json_names_the_program_version(
    lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    run("show", lab / "results", "--json")
    said = json.loads(capsys.readouterr().out)
    assert said["program_version"]
    assert [shot["shot_id"] for shot in said["shots"]] == list(SHOTS)
    assert said["compared"][0]["reference"] == "W-02"
