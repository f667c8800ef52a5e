"""``shpb merge`` as its users meet it: from a folder to table, files and exit status; bad input in plain words."""

from __future__ import annotations

import csv
import json
import shutil
from pathlib import Path

import h5py
import pytest

from shpb.cli.main import main
from shpb.cli.merge_facts import facts_from
from shpb.demo.campaign import write_demo
from shpb.errors import InputError
from shpb.merge.campaign import Merged
from shpb.store.merge_file import load_merge
from tests.merge.curves import FACTS, write_table

SHOTS = ("W-01", "W-03", "W-04", "W-05")  # the last is rejected: no equilibrium
QUICK = ("--figure", "none", "--laws", "none")


@pytest.fixture(scope="session")
def reduced(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A demo campaign with a few of its shots reduced, and one alloy's quasi-static curves."""
    folder: Path = tmp_path_factory.mktemp("merge") / "lab"
    write_demo(folder)
    sheets = [str(folder / "records" / f"{name}.toml") for name in SHOTS]
    main(["reduce", *sheets, "--figure", "none", "--workers", "1", "--results", str(folder / "results")])
    for path in (folder / "quasistatic").glob("H_*"):
        path.unlink()
    return folder


@pytest.fixture
def lab(reduced: Path, tmp_path: Path) -> Path:
    """A copy that a test may spoil."""
    return Path(shutil.copytree(reduced, tmp_path / "lab"))


def run(*arguments: str | Path) -> int:
    return main([str(argument) for argument in arguments])


def plain(text: str) -> str:
    return " ".join(text.split())


def test_a_folder_becomes_a_table_and_files(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    arguments = (
        "--fact",
        "melting_temperature_C=1083",
        "--laws",
        "johnson-cook",
        "--figure",
        "none",
        "--csv",
    )
    assert run("merge", lab, *arguments) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert plain(out).startswith(
        "MERGED Wrenmoor 3: 3 bar shots and 9 quasi-static tests merged, 1 file left out."
    )
    assert "W-05.h5  rejected: force equilibrium" in out
    assert "reference rate 1 /s" in plain(out)
    assert "melting temperature 1356.15 K" in plain(out)
    assert max(len(line) for line in out.splitlines() if not line.startswith("written:")) <= 80
    assert sorted(p.name for p in (lab / "merged").iterdir()) == [
        "flow_curves.csv",
        "merged.csv",
        "merged.h5",
    ]
    stored = load_merge(lab / "merged" / "merged.h5")
    assert {one.place for one in stored.used} == {
        *(f"results/{name}.h5" for name in SHOTS[:3]),
        *(f"quasistatic/{p.name}" for p in (lab / "quasistatic").iterdir()),
    }
    with (lab / "merged" / "merged.csv").open(encoding="utf-8") as file:
        assert sum(1 for _ in csv.DictReader(file)) == stored["materials/1/table/stress"].size


def test_records_lists_and_earlier_merges_are_not_taken_for_tests(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run("merge", lab, *QUICK, "--csv") == 0
    first = capsys.readouterr().out
    assert run("merge", lab, *QUICK, "--csv", "--results", lab / "again") == 0
    out, err = capsys.readouterr()
    assert err == ""  # nothing in records/, calibration/, merged/ or the shot list is a file at fault
    assert out.split("written:")[0] == first.split("written:")[0]


def test_files_can_be_named_one_by_one(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("merge", lab / "results" / "W-04.h5", lab / "quasistatic", *QUICK) == 0
    assert "1 bar shot and 9 quasi-static tests merged, 0 files left out" in plain(capsys.readouterr().out)
    assert (lab / "merged" / "merged.h5").exists()


def test_json_is_strict_and_says_what_was_written(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("merge", lab, *QUICK, "--json") == 0
    out, err = capsys.readouterr()
    assert err == ""

    def refuse(constant: str) -> object:
        raise AssertionError(constant)

    said = json.loads(out, parse_constant=refuse)
    assert said["schema"] == "shpb merge"
    assert said["files_written"] == [str(lab / "merged" / "merged.h5")]
    assert said["changed_since_last_merge"] == []
    assert [one["name"] for one in said["left_out"]] == ["W-05.h5"]


def test_what_has_changed_since_the_last_merge_is_said_first(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run("merge", lab, *QUICK) == 0
    capsys.readouterr()
    assert run("merge", lab, *QUICK) == 0
    assert capsys.readouterr().out.startswith("MERGED")
    table = lab / "quasistatic" / "W_20C_1e-3.csv"
    table.write_text(table.read_text() + "\n")
    (lab / "results" / "W-01.h5").unlink()
    assert run("merge", lab, *QUICK) == 0
    assert capsys.readouterr().out.startswith(
        "results/W-01.h5 is gone since the last merge\n"
        "quasistatic/W_20C_1e-3.csv has changed since the last merge\n\nMERGED"
    )
    assert run("merge", lab, *QUICK, "--json") == 0
    assert json.loads(capsys.readouterr().out)["changed_since_last_merge"] == []


def test_indentation_is_a_stated_choice_that_changes_the_bars_alone(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    found = {}
    for choice in ("out", "in"):
        assert run("merge", lab, *QUICK, "--indentation", choice) == 0
        out = plain(capsys.readouterr().out)
        assert ("left in the strain" in out) == (choice == "in")
        stored = load_merge(lab / "merged" / "merged.h5")
        fast = [r == "bar" for r in stored.texts["materials/1/table/range"]]
        stress = stored["materials/1/table/stress"]
        slow = [value for value, is_fast in zip(stress, fast, strict=True) if not is_fast]
        strain = stored["materials/1/table/plastic_strain"]
        # The stress at one plastic strain is lower where that strain holds the faces' share: the curve hardens.
        fast_at = {
            (stored["materials/1/table/condition"][i], strain[i]): stress[i]
            for i, is_fast in enumerate(fast)
            if is_fast
        }
        found[choice] = slow, fast_at
    assert found["out"][0] == found["in"][0]
    both = found["out"][1].keys() & found["in"][1].keys()
    assert both
    assert sum(found["out"][1][one] > found["in"][1][one] for one in both) > 0.8 * len(both)


# --- files at fault ------------------------------------------------------------------------------------


def test_a_damaged_file_is_named_and_left_out(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    shot = lab / "results" / "W-03.h5"
    shot.write_bytes(shot.read_bytes()[:50_000])
    (lab / "quasistatic" / "bad.csv").write_text(
        "# material: Wrenmoor 3\neng_strain,eng_stress_MPa\n0,1\nx,2\n"
    )
    assert run("merge", lab, *QUICK) == 0
    out, err = capsys.readouterr()
    assert "W-03.h5: cannot be read as a shot file" in err
    assert "bad.csv" in err
    assert "Traceback" not in err
    said = plain(out)
    assert "2 bar shots and 9 quasi-static tests merged, 3 files left out" in said
    assert "more mistakes)" in said
    assert max(len(line) for line in out.splitlines() if not line.startswith("written:")) <= 80


def test_the_same_shot_counts_once(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    shutil.copy(lab / "results" / "W-04.h5", lab / "copied.h5")
    assert run("reduce", lab / "records" / "W-01.toml", "--figure", "none", "--results", lab / "later") == 0
    capsys.readouterr()
    assert run("merge", lab, *QUICK) == 0
    said = plain(capsys.readouterr().out)
    assert "3 bar shots" in said
    assert "W-04.h5 a copy of copied.h5" in said
    assert "later/W-01.h5 the same record as results/W-01.h5, reduced twice" in said


def test_the_curve_of_a_machine_is_no_failed_test(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "quasistatic"
    folder.mkdir()
    (folder / "frame_2.csv").write_text(
        "force_kN,displacement_mm\n" + "".join(f"{f},{0.02 * f}\n" for f in range(9))
    )
    force = [0.05 * i for i in range(101)]
    # 28.27 mm2, 6 mm: elastic to 4 kN, then 20 kN/mm of hardening, plus 0.02 mm/kN of the machine.
    rows = [
        (f, 6 * f / (28.27 * 118) + max(0.0, f - 4.0) / 2.0 + 0.02 * f) for f in force
    ]  # fmt: skip
    facts = {**FACTS, "area_mm2": "28.27", "gauge_length_mm": "6", "compliance_curve": "frame_2.csv"}
    write_table(folder / "a.csv", "force_kN,displacement_mm", rows, facts)
    assert run("merge", tmp_path, *QUICK) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert "1 quasi-static test merged, 0 files left out" in plain(out)
    (folder / "frame_2.csv").write_text((folder / "frame_2.csv").read_text() + "9,0.19\n")
    assert run("merge", tmp_path, *QUICK) == 0
    assert capsys.readouterr().out.startswith("quasistatic/frame_2.csv has changed since the last merge")


def test_nothing_to_merge_is_bad_input(lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    empty = tmp_path / "empty"
    empty.mkdir()
    for source, message in (
        (empty, "no shot file and no quasi-static table"),
        (lab / "records", "no shot file and no quasi-static table"),
        (tmp_path / "nowhere", "no such file or folder"),
        (lab / "records" / "W-01.toml", "neither a shot file nor a quasi-static table"),
        (lab / "results" / "W-05.h5", "none of 1 shots and 0 quasi-static tests can be merged"),
        (lab / "shot_list.csv", "no file can be merged"),
    ):
        assert run("merge", source, *QUICK) == 2, source
        out, err = capsys.readouterr()
        assert message in err
        assert out == ""
        assert not (source / "merged").exists()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("--strains", "2,5"), "0.05 is 5 %"),
        (("--strains", "0.1,x"), "found 'x'"),
        (("--strains", "0.1,nan"), "found 'nan'"),
        (("--laws", "jonson-cook"), "Did you mean johnson-cook?"),
        (("--laws", ","), "Give laws"),
        (("--fact", "melting_temp_C=1083"), "Did you mean melting_temperature_C?"),
        (("--fact", "melting_temperature=1083"), "Did you mean melting_temperature_C?"),
        (("--fact", "melting_temperature_C"), "Write name=value"),
        (("--fact", "melting_temperature_C=hot"), "Give a number alone"),
        (("--fact", "melting_temperature_C=-300"), "absolute zero"),
        (("--fact", "p=1", "--fact", "p=2"), "stated twice"),
        (("--fact", "melting_temperature_C=1", "--fact", "melting_temperature_K=2"), "stated twice"),
        (("--fact", "reference_rate_per_s=1"), "Give --reference-rate"),
        (("--fact", "colour=1"), "There are"),
        (("--reference-rate", "0"), "Give a rate in 1/s"),
        (("--reference-rate", "inf"), "Give a rate in 1/s"),
    ],
)
def test_bad_choices_are_refused_in_plain_words(
    reduced: Path,
    tmp_path: Path,
    arguments: tuple[str, ...],
    message: str,
    capsys: pytest.CaptureFixture[str],
) -> None:
    assert run("merge", reduced, "--figure", "none", "--results", tmp_path / "out", *arguments) == 2
    out, err = capsys.readouterr()
    assert message in err
    assert out == ""
    assert not (tmp_path / "out").exists()


def test_facts_are_converted_to_si() -> None:
    given = ["melting_temperature_C=1083", "burgers_vector_nm=0.256", "shear_modulus_GPa=42.3", "p=0.5"]
    found = facts_from(given)
    assert found == pytest.approx(
        {
            "melting_temperature_k": 1356.15,
            "burgers_vector_m": 2.56e-10,
            "shear_modulus_pa": 42.3e9,
            "p": 0.5,
        },
        rel=1e-12,
    )
    assert facts_from(["reference_temperature_K=300"]) == {"reference_temperature_k": 300.0}
    with pytest.raises(InputError, match="no fact"):
        facts_from(["reference_temperature_k=300"])


def test_the_reference_rate_scales_a_and_b_of_johnson_cook(
    lab: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    arguments = (
        "--fact",
        "melting_temperature_C=1083",
        "--laws",
        "johnson-cook",
        "--figure",
        "none",
        "--json",
    )
    found = {}
    for rate in ("1", "0.001"):
        assert run("merge", lab, *arguments, "--reference-rate", rate) == 0
        (material,) = json.loads(capsys.readouterr().out)["materials"]
        (law,) = material["laws"]
        assert law["taken_as_known"]["reference_rate_per_s"] == float(rate)
        found[rate] = {one["name"]: one["value"] for one in law["parameters"]}
    # A (1 + C ln(r/r0)) is one curve: A' = A (1 + C ln r0'), C' = C/(1 + C ln r0'), with ln 0.001 = -6.907755.
    shrink = 1 - 6.907755 * found["1"]["C"]
    assert found["0.001"]["A"] == pytest.approx(found["1"]["A"] * shrink, rel=2e-3)
    assert found["0.001"]["B"] == pytest.approx(found["1"]["B"] * shrink, rel=2e-3)
    assert found["0.001"]["C"] == pytest.approx(found["1"]["C"] / shrink, rel=2e-3)


# --- what is never overwritten -------------------------------------------------------------------------


def test_foreign_files_are_never_overwritten(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = lab / "out"
    out.mkdir()
    (out / "merged.h5").write_text("notes")
    assert run("merge", lab, *QUICK, "--results", out) == 1
    assert "not written over it" in capsys.readouterr().err
    assert (out / "merged.h5").read_text() == "notes"
    (out / "merged.h5").unlink()
    with h5py.File(out / "merged.h5", "w") as file:
        file["mine"] = [1.0]
    assert run("merge", lab, *QUICK, "--results", out) == 1
    (out / "merged.h5").unlink()
    (out / "merged.csv").write_text("mine")
    assert run("merge", lab, *QUICK, "--csv", "--results", out) == 1
    assert (out / "merged.csv").read_text() == "mine"
    assert not (out / "merged.h5").exists()
    (out / "Wrenmoor_3-notes.png").write_text("mine")
    assert run("merge", lab, *QUICK, "--results", out / "merged.csv") == 2
    assert "this is a file" in capsys.readouterr().err


def test_nothing_is_written_over_what_went_in(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    table = lab / "quasistatic" / "W_20C_1e-3.csv"
    shutil.move(table, lab / "merged.csv")
    before = (lab / "merged.csv").read_text()
    assert run("merge", lab, *QUICK, "--results", lab) == 0  # no CSV asked for
    assert "9 quasi-static tests" in plain(capsys.readouterr().out)
    assert run("merge", lab, *QUICK, "--results", lab, "--csv") == 1
    assert "what it was made from" in capsys.readouterr().err
    assert (lab / "merged.csv").read_text() == before


def test_figures_are_drawn_of_the_kind_asked_for_beside_the_file(
    lab: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    asked: list[tuple[Path, str]] = []

    def draw(merged: Merged, folder: Path, kind: str) -> list[Path]:
        assert merged.materials[0].material == "Wrenmoor 3"
        asked.append((folder, kind))
        return [folder / f"Wrenmoor_3.{kind}"]

    monkeypatch.setattr("shpb.view.merge_figures.save_merge_figures", draw)
    assert run("merge", lab, "--laws", "none", "--figure", "svg", "--results", lab / "out") == 0
    assert asked == [(lab / "out", "svg")]
    assert f"written: {lab / 'out' / 'Wrenmoor_3.svg'}" in capsys.readouterr().out
    # A figure of somebody else, where no merge stands, is not written over.
    (lab / "mine").mkdir()
    (lab / "mine" / "Wrenmoor_3_laws.png").write_text("mine")
    assert run("merge", lab, "--laws", "none", "--results", lab / "mine") == 1
    assert (lab / "mine" / "Wrenmoor_3_laws.png").read_text() == "mine"
    assert not (lab / "mine" / "merged.h5").exists()


@pytest.mark.parametrize(
    ("option", "said"),
    [
        (("--curve", "500"), "a rate in 1/s and a temperature in C"),
        (("--curve", "a,20"), "a rate in 1/s"),
        (("--curve", "500,9999"), "9999 C"),
        (("--offset", "2"), "0.002 is 0.2 %"),
    ],
)
def test_curves_and_offset_asked_for_badly(
    option: tuple[str, str], said: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["merge", str(tmp_path), *option]) == 2
    assert said in capsys.readouterr().err
