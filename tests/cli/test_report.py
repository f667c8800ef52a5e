"""``shpb report`` as its users meet it: what is written where, what is left alone, bad files in plain words."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from pathlib import Path
from urllib.parse import unquote

import h5py
import numpy as np
import pytest

from shpb.cli.main import main
from shpb.demo.campaign import write_demo
from shpb.view.summary import SCHEMA_VERSION
from tests.strict_html import Strict, require_sound

SHOTS = ("W-01", "W-02", "W-03", "W-04", "W-05")  # the last is rejected: no equilibrium


def run(*arguments: str | Path) -> int:
    return main([str(argument) for argument in arguments])


@pytest.fixture(scope="module", name="campaign")
def _campaign(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A few shots of the demo, merged with one alloy's quasi-static curves, and reported."""
    folder: Path = tmp_path_factory.mktemp("report") / "first lab"
    write_demo(folder)
    sheets = [folder / "records" / f"{name}.toml" for name in SHOTS]
    run("reduce", *sheets, "--figure", "none", "--workers", "1", "--results", folder / "results")
    for path in (folder / "quasistatic").glob("H_*"):
        path.unlink()
    laws = ("--laws", "johnson-cook,ludwik,mechanical-threshold", "--fact", "melting_temperature_C=1083")
    run("merge", folder, "--figure", "none", *laws)
    assert run("report", folder, "--workers", "1") == 0
    return folder


@pytest.fixture(name="lab")
def _lab(campaign: Path, tmp_path: Path) -> Path:
    """A copy that a test may spoil."""
    return Path(shutil.copytree(campaign, tmp_path / "first lab"))


def test_every_shot_and_the_campaign_get_a_page(campaign: Path) -> None:
    assert sorted(path.name for path in (campaign / "results").glob("*.html")) == [f"{n}.html" for n in SHOTS]
    for path in (campaign / "results").glob("*.html"):
        page = require_sound(path.read_text(encoding="utf-8"))
        # The way back to the campaign.
        back = [one["href"] for one in page.of("a")]
        assert back == ["../campaign.html"]
        assert path.stat().st_size < 600_000
    page = require_sound((campaign / "campaign.html").read_text(encoding="utf-8"))
    assert "Campaign first lab" in page.text
    assert "5 shots: 4 accept, 1 reject" in page.text
    for link in page.of("a"):
        assert (campaign / unquote(link["href"])).is_file(), link


def test_the_repeats_of_the_campaign_are_held_against_each_other(campaign: Path) -> None:
    text = Strict((campaign / "campaign.html").read_text(encoding="utf-8")).text
    assert "W-02, W-04 (Wrenmoor 3, compression, 293 K" in text


def test_merged_numbers_are_those_of_the_merged_file(campaign: Path) -> None:
    page = Strict((campaign / "campaign.html").read_text(encoding="utf-8"))
    with h5py.File(campaign / "merged" / "merged.h5") as file:
        material = file["materials/1"]
        law = material["laws/johnson-cook"]
        rows = {one[0]: one for one in page.table("Parameters of Johnson-Cook")[1:]}
        for place, raw in enumerate(law["parameters/name"][()]):
            name = raw.decode()
            factor = 1e-6 if law["parameters/unit"][place] == b"Pa" else 1.0
            value, u, low, high = (
                factor * law[f"parameters/{which}"][place] for which in ("value", "u", "low", "high")
            )
            cells = rows[name]
            assert float(cells[1]) == pytest.approx(value, abs=0.06 * u)
            assert float(cells[3]) == pytest.approx(u, rel=0.05)
            ends = [float(end) for end in cells[4].split(" to ")]
            assert ends == [pytest.approx(low, abs=0.06 * u), pytest.approx(high, abs=0.06 * u)]
        table = material["table"]
        stresses = page.table("True stress (MPa) at")
        strains = [float(head) for head in stresses[0][3:]]
        found = 0
        for condition, strain, stress, u in zip(
            *(table[name][()] for name in ("condition", "plastic_strain", "stress", "u_stress")), strict=True
        ):
            cell = stresses[1 + int(condition)][3 + strains.index(strain)]
            value, wide = (float(part) for part in cell.split(" ± "))
            assert value == pytest.approx(1e-6 * stress, abs=0.06 * wide)
            assert wide == pytest.approx(2e-6 * u, rel=0.05)
            found += 1
        assert found == sum(bool(cell) for line in stresses[1:] for cell in line[3:])
        one = next(line for line in page.table("Rate sensitivity m")[1:] if line[1] == "all")
        group = material["rate_sensitivity"]
        strain = float(next(c for c in page.tables if c.startswith("Rate sensitivity")).rsplit(" ", 1)[1])
        here = [
            i
            for i in range(group["m"].size)
            if group["plastic_strain"][i] == strain and group["tests"][i] == b"all"
        ]
        assert float(one[2].split(" ")[0]) == pytest.approx(group["m"][here[0]], abs=0.06 * float(one[3]))
    left_out = page.table("Left out of the merge")
    assert left_out[1:] == [["W-05.h5", "rejected: force equilibrium"]]
    why = dict(page.table("Laws that were not fitted")[1:])
    assert "--fact burgers_vector_nm=" in why["mechanical-threshold"]


def test_a_second_run_leaves_everything_as_it_is(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    before = {path: (path.read_bytes(), path.stat().st_mtime_ns) for path in lab.rglob("*.html")}
    assert run("report", lab, "--workers", "1") == 0
    assert {path: (path.read_bytes(), path.stat().st_mtime_ns) for path in lab.rglob("*.html")} == before
    assert capsys.readouterr().out.splitlines() == [
        *(f"up to date: {lab / 'results' / name}.html" for name in SHOTS),
        f"up to date: {lab / 'campaign.html'}",
    ]


def test_a_report_is_made_anew_when_its_shot_was_reduced_anew(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    sheet = lab / "records" / "W-02.toml"
    run("reduce", sheet, "--figure", "none", "--analysis", "three-wave", "--results", lab / "results")
    capsys.readouterr()
    assert run("report", lab / "results" / "W-01.h5", lab / "results" / "W-02.h5") == 0
    assert capsys.readouterr().out.splitlines() == [
        f"up to date: {lab / 'results' / 'W-01.html'}",
        f"written: {lab / 'results' / 'W-02.html'}",
    ]
    page = Strict((lab / "results" / "W-02.html").read_text(encoding="utf-8"))
    assert page.table("Flow stress, three-wave")
    # Named alone, it keeps its way back to the campaign that it was reported with.
    assert [one["href"] for one in page.of("a")] == ["../campaign.html"]


@pytest.mark.slow
def test_a_merge_older_than_its_shots_says_so(lab: Path) -> None:
    with h5py.File(lab / "results" / "W-02.h5", "a") as file:
        file.attrs["touched"] = 1
    assert run("report", lab, "--workers", "1") == 0
    text = Strict((lab / "campaign.html").read_text(encoding="utf-8")).text
    assert "Not up to date: merge again. results/W-02.h5 has changed since the last merge." in text


@pytest.mark.slow
def test_reports_go_into_a_folder_and_find_each_other_there(lab: Path, tmp_path: Path) -> None:
    into = tmp_path / "hand over #1"
    assert run("report", lab, "--into", into, "--workers", "1") == 0
    assert sorted(path.name for path in into.iterdir()) == [*(f"{n}.html" for n in SHOTS), "campaign.html"]
    page = require_sound((into / "campaign.html").read_text(encoding="utf-8"))
    for link in page.of("a"):
        assert (into / unquote(link["href"])).is_file()
    shot = require_sound((into / "W-01.html").read_text(encoding="utf-8"))
    assert [one["href"] for one in shot.of("a")] == ["campaign.html"]


@pytest.mark.slow
def test_a_merge_alone_finds_its_shots(lab: Path, tmp_path: Path) -> None:
    assert run("report", lab / "merged" / "merged.h5", "--into", tmp_path / "o", "--workers", "1") == 0
    text = Strict((tmp_path / "o" / "campaign.html").read_text(encoding="utf-8")).text
    assert "Campaign first lab" in text
    assert "4 shots: 4 accept" in text  # those that were merged


def test_json_says_what_became_of_each(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (lab / "results" / "W-03.h5").write_bytes(b"not HDF5 at all")
    assert run("report", lab, "--json", "--workers", "1") == 2
    out, err = capsys.readouterr()
    said = json.loads(out)
    assert (said["schema"], said["schema_version"]) == ("shpb report", SCHEMA_VERSION)
    states = {Path(one["file"]).stem: (one["state"], one["verdict"]) for one in said["shots"]}
    assert states["W-05"] == ("unchanged", "reject")
    assert states["W-03"] == ("failed", None)
    assert said["campaigns"][0]["state"] == "written"
    assert said["campaigns"][0]["shots"] == 4
    assert "W-03.h5: cannot be read as a shot file" in err
    page = Strict((lab / "campaign.html").read_text(encoding="utf-8"))
    assert page.table("Not in this report")[1][0] == "W-03.h5"


def test_files_of_others_are_named_and_do_not_stop_the_rest(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (lab / "results" / "W-01.html").unlink()
    foreign, damaged = lab / "foreign.h5", lab / "damaged.h5"
    with h5py.File(foreign, "w") as file:
        file["x"] = np.arange(3)
    damaged.write_bytes((lab / "results" / "W-02.h5").read_bytes()[:5000])
    assert run("report", foreign, damaged, lab / "results" / "W-01.h5") == 2
    out, err = capsys.readouterr()
    assert "foreign.h5: is not a result of this program" in err
    assert "damaged.h5: cannot be read as HDF5" in err
    assert "Traceback" not in err
    assert (lab / "results" / "W-01.html").is_file()
    assert f"written: {lab / 'results' / 'W-01.html'}" in out


def test_a_shot_file_that_lacks_something_is_refused_in_plain_words(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = lab / "results" / "W-01.h5"
    with h5py.File(path, "a") as file:
        del file["trust/equilibrium_floor"]
    assert run("report", path) == 2
    err = capsys.readouterr().err
    assert "something in it is missing or wrong" in err
    assert "equilibrium_floor" in err
    assert "Traceback" not in err


def test_half_a_curve_does_not_pass_for_a_whole_one(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = lab / "results" / "W-01.h5"
    with h5py.File(path, "a") as file:
        half = file["response/force_in"][:400]
        del file["response/force_in"]
        file["response/force_in"] = half
    assert run("report", path) == 2
    assert "response/force_in has 400 values for" in capsys.readouterr().err


def test_a_record_that_cannot_be_is_said(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = lab / "results" / "W-01.h5"
    with h5py.File(path, "a") as file:
        one = file["record/voltage"][:1]
        del file["record/voltage"]
        file["record/voltage"] = one
    assert run("report", path) == 2
    assert "2 channel names" in capsys.readouterr().err


@pytest.mark.parametrize("name", ["W-01.html", "campaign.html"])
def test_a_page_of_others_is_never_written_over(
    lab: Path, name: str, capsys: pytest.CaptureFixture[str]
) -> None:
    page = lab / ("results" if name != "campaign.html" else "") / name
    page.write_text("<!DOCTYPE html><title>my notes</title>", encoding="utf-8")
    assert run("report", lab, "--workers", "1") == 1
    assert page.read_text(encoding="utf-8") == "<!DOCTYPE html><title>my notes</title>"
    assert "it is not such a report of this program" in capsys.readouterr().err


def test_the_report_of_another_shot_is_never_written_over(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    page = lab / "results" / "W-01.html"
    shutil.copy(lab / "results" / "W-02.html", page)
    before = page.read_bytes()
    assert run("report", lab / "results" / "W-01.h5") == 1
    assert page.read_bytes() == before
    assert "the report of shot W-02 stands there" in capsys.readouterr().err


def test_two_reports_that_would_be_one_file_are_refused(
    lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    other = tmp_path / "other"
    other.mkdir()
    shutil.copy(lab / "results" / "W-01.h5", other / "w-01.h5")
    assert run("report", lab / "results" / "W-01.h5", other / "w-01.h5", "--into", tmp_path / "o") == 2
    assert "would be one file" in capsys.readouterr().err
    assert not (tmp_path / "o").exists()


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["nowhere.h5"], "there is no such file or folder"),
        (["{empty}"], "there is no shot file and no merged.h5 in it"),
        (["{shot}", "--into", "{shot}"], "this is a file"),
        (["{shot}", "--workers", "0"], "Give 1 or more"),
    ],
)
def test_bad_use_is_said(
    campaign: Path, tmp_path: Path, arguments: list[str], said: str, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "empty").mkdir()
    places = {"empty": str(tmp_path / "empty"), "shot": str(campaign / "results" / "W-01.h5")}
    assert run("report", *(one.format(**places) for one in arguments)) == 2
    assert said in capsys.readouterr().err


def test_a_disk_that_refuses_leaves_the_earlier_page_whole(
    lab: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    page = lab / "results" / "W-01.html"
    text = page.read_text(encoding="utf-8").replace("layout", "layout 0.")
    page.write_text(text, encoding="utf-8")

    def full(descriptor: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    assert run("report", lab / "results" / "W-01.h5") == 1
    assert page.read_text(encoding="utf-8") == text
    assert "No space left on device" in capsys.readouterr().err
    assert not list((lab / "results").glob(".*"))


def test_through_a_pipe_it_is_plain_and_loads_no_more_than_it_needs(campaign: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "shpb", "report", "results/W-01.h5"],
        cwd=campaign,
        capture_output=True,
        text=True,
        check=True,
        env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])},
    )
    assert done.stdout == f"up to date: {Path('results') / 'W-01.html'}\n"
    assert done.stderr == ""


def test_who_moved_a_window_and_why_stands_in_the_page(lab: Path) -> None:
    shot = lab / "results" / "W-02.h5"
    moved = (
        "--reflected-window",
        "370,520",
        "--by",
        "A. <b>Bird",
        "--why",
        "the tail of the pulse & a wobble",
    )
    assert run("adjust", shot, *moved, "--figure", "none") in (0, 3)
    assert run("report", shot) == 0
    text = require_sound(shot.with_suffix(".html").read_text(encoding="utf-8")).text
    assert "Moved by A. <b>Bird" in text
    assert "reflected window starts" in text
    assert "Why: the tail of the pulse & a wobble" in text
