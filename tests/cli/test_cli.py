"""The command line as its users meet it: verdict first, plain errors, exit statuses, pipes."""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

import shpb
from shpb.cli.main import main
from shpb.cli.reduce import file_stem
from shpb.demo.campaign import DemoCampaign, write_demo


@pytest.fixture(scope="module")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("cli") / "demo")


@pytest.fixture
def lab(campaign: DemoCampaign, tmp_path: Path) -> Path:
    """A copy that a test may spoil."""
    return Path(shutil.copytree(campaign.folder, tmp_path / "lab"))


def run(*arguments: str | Path) -> int:
    return main([str(argument) for argument in arguments])


def test_one_shot(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet = lab / "records" / "W-02.toml"
    assert run("reduce", sheet, "--csv", "--results", lab / "out") == 0
    out, err = capsys.readouterr()
    assert out.startswith("ACCEPT")
    assert err == ""
    assert max(map(len, out.splitlines())) <= 80 or "written:" in out
    assert sorted(p.name for p in (lab / "out").iterdir()) == ["W-02.csv", "W-02.h5", "W-02.png"]
    assert shpb.load(lab / "out" / "W-02.h5").verdict == "accept"


def test_results_go_beside_the_sheet_unless_told(lab: Path) -> None:
    assert run("reduce", lab / "records" / "W-02.toml", "--figure", "none") == 0
    assert (lab / "records" / "results" / "W-02.h5").exists()


def test_a_rejected_shot_is_done_with_status_3(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("reduce", lab / "records" / "W-08.toml", "--figure", "none") == 3
    assert capsys.readouterr().out.startswith("REJECT")


def test_a_list_with_an_unusable_shot_goes_on(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("reduce", lab / "shot_list.csv", "--figure", "none", "--workers", "2") == 3
    out, err = capsys.readouterr()
    lines = [line for line in out.splitlines() if line.startswith("H-")]
    assert len(lines) == 9
    assert max(map(len, out.splitlines()[:-1])) <= 80
    assert "H-07 REJECT" in " ".join(lines[6].split())
    assert "the channels are swapped" in err
    stored = sorted(p.name for p in (lab / "results").iterdir())
    assert stored == [f"H-0{i}.h5" for i in (1, 2, 3, 4, 5, 6, 8, 9)]


def test_workers_and_one_process_give_the_same_bits(lab: Path) -> None:
    for workers in ("1", "2"):
        run(
            "reduce",
            lab / "shot_list.csv",
            "--figure",
            "none",
            "--workers",
            workers,
            "--results",
            lab / workers,
        )
    for name in ("H-01.h5", "H-09.h5"):
        one, two = shpb.load(lab / "1" / name), shpb.load(lab / "2" / name)
        assert set(one.arrays) == set(two.arrays)
        assert all((one[key] == two[key]).all() for key in one.arrays if key != "response/flow_stress")


def test_every_demo_shot_comes_out_as_planned(campaign: DemoCampaign, tmp_path: Path) -> None:
    from shpb.demo.scenario import Expected

    out = tmp_path / "out"
    sheets = [shot.sheet for shot in campaign.shots if shot.sheet is not None]
    run("reduce", *sheets, campaign.shot_list, "--figure", "none", "--results", out)
    for shot in campaign.shots:
        path = out / f"{shot.shot.shot_id}.h5"
        if shot.shot.expected is Expected.SWAPPED:
            assert not path.exists()
            continue
        stored = shpb.load(path)
        rejected = {f.check for f in stored.findings if f.weight.value == "reject"}
        outcome = stored.attributes["response"]["equilibrium_outcome"]
        match shot.shot.expected:
            case Expected.GOOD:
                assert stored.verdict == "accept", shot.shot.shot_id
            case Expected.NOT_IN_EQUILIBRIUM:
                assert outcome == "not reached"
            case Expected.UNDECIDABLE:
                assert outcome == "cannot be decided"
            case Expected.CLIPPED:
                assert "clipping" in rejected
            case Expected.OVERLAPPING:
                assert "overlap" in rejected
            case Expected.LOOSE_GAUGE:
                assert "zero line" in rejected
            case Expected.BAR_YIELDED:
                assert "bar yield" in rejected


def test_json(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("reduce", lab / "shot_list.csv", "--figure", "none", "--json", "--workers", "1") == 3
    out, err = capsys.readouterr()
    data = json.loads(out)
    assert err == ""
    assert data["schema_version"] == 1
    assert len(data["shots"]) == 9
    first, swapped = data["shots"][0], data["shots"][6]
    assert first["verdict"] == "accept"
    assert first["files"] == [str(lab / "results" / "H-01.h5")]
    assert "swapped" in json.dumps(swapped["error"])
    assert data["repeats"] == []  # no two shots of this list are the same test


def test_choices_reach_the_reduction(lab: Path) -> None:
    sheet = lab / "records" / "W-02.toml"
    run(
        "reduce", sheet, "--figure", "none", "--dispersion", "full", "--alignment", "feet", "--analysis", "three-wave",
        "--cutoff-khz", "90", "--corrections", "indentation,bar-mismatch",
    )  # fmt: skip
    settings = shpb.load(lab / "records" / "results" / "W-02.h5").settings
    assert (settings.dispersion.value, settings.alignment.value, settings.analysis.value, settings.cutoff_hz) == (
        "full", "feet", "three-wave", 90e3,
    )  # fmt: skip
    assert [correction.value for correction in settings.corrections] == ["indentation", "bar-mismatch"]


def test_repeats_are_compared_below_the_list(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheets = [lab / "records" / f"{name}.toml" for name in ("W-01", "W-02", "W-04", "W-09")]
    assert run("reduce", *sheets, "--figure", "none", "--workers", "1") == 0
    said = re.sub(r"\s+", " ", capsys.readouterr().out)
    assert re.search(r"repeats: W-02, W-04, W-09 \([^)]*compression, 293 K, 15\d\d /s\): agree\.", said)
    # The diameter of one misread by 0.7 of 12 mm: 12 % of area and stress, and the others name it.
    text = sheets[2].read_text()
    size = re.search(r"diameter_mm = \{ value = ([\d.]+)", text)
    assert size is not None
    sheets[2].write_text(text.replace(size[0], size[0].replace(size[1], f"{float(size[1]) - 0.7:.3f}")))
    run("reduce", *sheets[1:], "--figure", "none", "--json", "--workers", "1")
    (group,) = json.loads(capsys.readouterr().out)["repeats"]
    assert group["shot_ids"] == ["W-02", "W-04", "W-09"]
    assert [one["shot_ids"] for one in group["disagreements"]] == [["W-04"]]


def test_settings_in_rig_file_and_sheet(lab: Path) -> None:
    sheet, rig = lab / "records" / "W-02.toml", lab / "calibration" / "bench_1.toml"
    assert rig.read_text().rstrip().splitlines()[-2] == "[settings]"  # the demo rig ends with its settings
    rig.write_text(rig.read_text() + "cutoff_kHz = 100.0\n[limits]\nequilibrium = 0.06\n")
    sheet.write_text(sheet.read_text() + "\n[settings]\ncutoff_kHz = 80.0\n")
    run("reduce", sheet, "--figure", "none")
    settings = shpb.load(lab / "records" / "results" / "W-02.h5").settings
    assert (settings.cutoff_hz, settings.limits.equilibrium) == (80e3, 0.06)


# --- bad input ---------------------------------------------------------------------------------


def test_mistakes_of_all_files_at_once(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet, other = lab / "records" / "W-02.toml", lab / "records" / "W-03.toml"
    sheet.write_text(sheet.read_text().replace("length_mm", "lenght_mm"))
    other.write_text(other.read_text().replace('kind = "compression"', 'kind = "compresion"'))
    assert run("reduce", sheet, other) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert "lenght_mm" in err
    assert "length_mm" in err
    assert "compresion" in err
    assert "Traceback" not in err


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (["reduce", "no-such.toml"], "no-such.toml"),
        (["reduce", "no-such.csv"], "no-such.csv"),
        (["record", "no-such.csv"], "no-such.csv"),
    ],
)
def test_missing_files(arguments: list[str], says: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(arguments) == 2
    err = capsys.readouterr().err
    assert err.startswith("shpb: ")
    assert says in err


def test_a_missing_record_names_the_file(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (lab / "records" / "W-02.csv").unlink()
    assert run("reduce", lab / "records" / "W-02.toml") == 2
    assert "W-02.csv" in capsys.readouterr().err


def test_a_result_of_another_shot_is_not_written_over(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet = lab / "records" / "W-02.toml"
    run("reduce", sheet, "--figure", "none")
    before = (lab / "records" / "results" / "W-02.h5").read_bytes()
    other = lab / "records" / "other.toml"
    other.write_text(sheet.read_text().replace("W-02.csv", "W-01.csv"))
    capsys.readouterr()
    assert run("reduce", other, "--figure", "none") == 1
    assert "from another record; shot W-02 is not written over it" in capsys.readouterr().err
    assert (lab / "records" / "results" / "W-02.h5").read_bytes() == before


def test_one_id_twice(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet = lab / "records" / "W-02.toml"
    copy = lab / "records" / "copy.toml"
    copy.write_text(sheet.read_text())
    assert run("reduce", sheet, copy) == 2
    assert "shot id W-02 is used twice, first in W-02.toml" in capsys.readouterr().err


def test_a_shot_without_a_rig(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet = lab / "records" / "W-02.toml"
    lines = [line for line in sheet.read_text().splitlines() if not line.startswith("rig")]
    sheet.write_text("\n".join(lines) + "\n")
    assert run("reduce", sheet) == 2
    assert "names no rig file" in capsys.readouterr().err
    assert run("reduce", sheet, "--rig", lab / "calibration" / "bench_1.toml", "--figure", "none") == 0


@pytest.mark.parametrize(
    "shot_id", ["../../etc/x", "a/b", "..", "[/red]", "=1+1", "<b>&", "x" * 200, "C:\\x", "\x1b[31m"]
)
def test_hostile_ids_make_harmless_files(shot_id: str) -> None:
    stem = file_stem(shot_id)
    assert Path(stem).name == stem
    assert not stem.startswith(".")
    assert stem.replace("_", "").replace("-", "").replace(".", "").isalnum()
    assert len(stem) <= 100
    assert file_stem(shot_id + "!") != stem


def test_a_hostile_name_is_only_text(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    source = lab / "records" / "W-02.toml"
    text = source.read_text().replace('id = "W-02"', 'id = "[red] $x^2$ &amp;"')
    sheet = lab / "records" / "[nope].toml"
    sheet.write_text(text + "\n")
    assert run("reduce", sheet) == 0
    assert "[red] $x^2$ &amp;" in capsys.readouterr().out


def test_one_bad_sheet_does_not_stop_the_others(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    bad = lab / "records" / "W-03.toml"
    bad.write_text(bad.read_text().replace("length_mm", "lenght_mm"))
    assert run("reduce", lab / "records" / "W-02.toml", bad, "--figure", "none") == 2
    out, err = capsys.readouterr()
    assert out.startswith("ACCEPT")
    assert "lenght_mm" in err
    assert (lab / "records" / "results" / "W-02.h5").exists()


def test_one_bad_row_does_not_stop_the_others(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    listed = lab / "shot_list.csv"
    lines = listed.read_text().splitlines()
    row = next(i for i, line in enumerate(lines) if "H-02" in line)
    lines[row] = lines[row].replace("compression", "compresion")
    listed.write_text("\n".join(lines) + "\n")
    assert run("reduce", listed, "--figure", "none") == 2
    out, err = capsys.readouterr()
    assert "H-01 ACCEPT" in " ".join(out.split())
    assert "compresion" in err
    assert not (lab / "results" / "H-02.h5").exists()


def test_a_folder_with_its_rig_file_in_it(tmp_path: Path, lab: Path) -> None:
    work = tmp_path / "work"
    work.mkdir()
    for name in ("W-02.csv", "W-02.toml"):
        shutil.copy(lab / "records" / name, work / name)
    shutil.copy(lab / "calibration" / "bench_1.toml", work / "rig.toml")
    sheet = work / "W-02.toml"
    sheet.write_text(sheet.read_text().replace("../calibration/bench_1.toml", "rig.toml"))
    assert run("reduce", work, "--figure", "none") == 0


def test_a_rig_file_for_a_sheet(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("reduce", lab / "calibration" / "bench_1.toml") == 2
    assert "this is a rig file, not a shot sheet" in capsys.readouterr().err


def test_two_sheets_of_one_record(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet = lab / "records" / "W-02.toml"
    other = lab / "records" / "other.toml"
    other.write_text(sheet.read_text().replace('id = "W-02"', 'id = "W-99"'))
    assert run("reduce", sheet, other, "--figure", "none") == 2
    assert "shot W-99 names the record of shot W-02" in capsys.readouterr().err


def test_the_raw_record_is_never_written_over(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    record = lab / "records" / "W-02.csv"
    before = record.read_bytes()
    status = run(
        "reduce", lab / "records" / "W-02.toml", "--results", lab / "records", "--csv", "--figure", "none"
    )
    assert status == 1
    assert record.read_bytes() == before
    assert "written over what it was made from" in capsys.readouterr().err
    assert not (lab / "records" / "W-02.h5").exists()


def test_a_stranger_beside_the_results_is_left_alone(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = lab / "out"
    out.mkdir()
    (out / "W-02.png").write_text("holiday")
    assert run("reduce", lab / "records" / "W-02.toml", "--results", out) == 1
    assert (out / "W-02.png").read_text() == "holiday"
    assert "was not written with a result" in capsys.readouterr().err
    (out / "W-02.png").unlink()
    assert run("reduce", lab / "records" / "W-02.toml", "--results", out) == 0
    assert run("reduce", lab / "records" / "W-02.toml", "--results", out) == 0


def test_odd_arguments(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet = lab / "records" / "W-02.toml"
    assert run("reduce", sheet, "--workers", "0") == 2
    assert run("reduce", sheet, "--results", lab / "README.txt") == 2
    assert "this is a file" in capsys.readouterr().err
    for arguments in (["--dispersion", "foo"], ["--cutoff-khz", "-1"], ["--cutoff-khz", "nan"]):
        assert run("reduce", sheet, "--figure", "none", *arguments) == 2


# --- other verbs -------------------------------------------------------------------------------


def test_forms_are_written_once(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("forms", tmp_path / "lab") == 0
    assert sorted(p.name for p in (tmp_path / "lab").iterdir()) == [
        "calibration.toml",
        "rig.toml",
        "shot.toml",
        "shots.csv",
    ]
    assert run("forms", tmp_path / "lab") == 2
    assert "there already" in capsys.readouterr().err


def test_record_tells_what_a_file_holds(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = lab / "records" / "W-02.csv"
    assert run("record", path) == 0
    out = capsys.readouterr().out
    assert "0.4000 us" in out
    assert max(map(len, out.splitlines())) <= 80
    assert run("record", path, "--json") == 0
    data = json.loads(capsys.readouterr().out)
    assert data["sample_interval_s"] == pytest.approx(4e-7)


def test_demo_writes_only(tmp_path: Path) -> None:
    assert run("demo", tmp_path / "d", "--write-only") == 0
    assert (tmp_path / "d" / "shot_list.csv").exists()
    assert not (tmp_path / "d" / "results").exists()


def test_demo_refuses_a_folder_with_other_files(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "thesis.txt").write_text("precious")
    assert run("demo", tmp_path) == 2
    assert "no demo campaign" in capsys.readouterr().err
    assert [p.name for p in tmp_path.iterdir()] == ["thesis.txt"]


@pytest.mark.parametrize("verb", ["reduce", "record", "forms", "demo"])
def test_every_verb_has_help_with_an_example(verb: str, capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as left:
        main([verb, "--help"])
    assert left.value.code == 0
    out = capsys.readouterr().out
    assert f"shpb {verb} " in out
    assert "example" in out
    assert max(map(len, out.splitlines())) <= 80


def test_usage_errors_are_status_2(capsys: pytest.CaptureFixture[str]) -> None:
    for arguments in ([], ["nothing"], ["reduce"], ["reduce", "x.toml", "--figure", "gif"]):
        with pytest.raises(SystemExit) as left:
            main(arguments)
        assert left.value.code == 2
    assert "usage" in capsys.readouterr().err


def process(*arguments: str | Path, **more: object) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "shpb", *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, check=False, **more)  # type: ignore[call-overload,no-any-return]


def test_through_a_pipe_that_closes(lab: Path) -> None:
    sheet = lab / "records" / "W-02.toml"
    command = f"{sys.executable} -m shpb reduce {sheet} --full --figure none | head -n 1"
    done = subprocess.run(command, shell=True, capture_output=True, text=True, check=False)
    assert done.stdout.startswith("ACCEPT")
    assert "Traceback" not in done.stderr
    assert "BrokenPipe" not in done.stderr


def test_on_a_console_of_few_characters(lab: Path) -> None:
    sheet = lab / "records" / "W-02.toml"
    sheet.write_text(
        sheet.read_text(encoding="utf-8").replace('id = "W-02"', 'id = "Müll ✓ 鋼"'), encoding="utf-8"
    )
    done = process(
        "reduce", sheet, "--figure", "none", env={**os.environ, "PYTHONIOENCODING": "ascii", "LC_ALL": "C"}
    )
    assert done.returncode == 0
    assert "Traceback" not in done.stderr


def test_version() -> None:
    assert process("--version").stdout.strip() == f"shpb {shpb.__version__}"
