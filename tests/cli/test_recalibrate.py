"""``shpb recalibrate``: a whole campaign by another calibration, the earlier results kept beside."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest

import shpb
from shpb.cli.main import main
from shpb.demo.campaign import write_demo
from shpb.quantity import Quantity
from shpb.rig.calibration import Calibration, GaugeCalibration, stated_of
from shpb.rig.calibration_file import read_calibration, write_calibration
from shpb.rig.rig_file import read_rig


def run(*arguments: str | Path) -> int:
    return main([str(argument) for argument in arguments])


@pytest.fixture(scope="module", name="demo")
def _demo(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Four shots: two accepted and one rejected of bench 1, one of bench 2."""
    folder = tmp_path_factory.mktemp("recalibrate") / "demo"
    write_demo(folder)
    sheets = [folder / "records" / f"W-0{n}.toml" for n in (1, 2, 5, 9)]
    run("reduce", *sheets, "--figure", "none", "--workers", "1", "--results", folder / "results")
    return folder


@pytest.fixture(name="lab")
def _lab(demo: Path, tmp_path: Path) -> Path:
    """A copy that a test may spoil, with a calibration: the transmitted chain reads 1 % low."""
    lab = Path(shutil.copytree(demo, tmp_path / "lab"))
    rig = read_rig(lab / "calibration" / "bench_1.toml")
    for name, share in (("summer", 1.01), ("autumn", 1.02)):
        factor = Quantity(rig.transmitted_gauge.gauge_factor / share, 0.005, "striker line")
        gauge = GaugeCalibration(gauge_factor=factor, as_stated=stated_of(rig.transmitted_gauge))
        made = Calibration(
            name=name, rig=rig.name, date="2031-02-10", holds_days=365, gauges={"transmitted_gauge": gauge}
        )
        write_calibration(made, lab / "calibration" / f"{name}.toml")
    return lab


def stored(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in sorted(folder.iterdir())}


def test_a_campaign_by_another_calibration(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    before = stored(lab / "results")
    capsys.readouterr()
    status = run(
        "recalibrate", lab / "results", "--calibration", lab / "calibration" / "summer.toml",
        "--figure", "none", "--workers", "1",
    )  # fmt: skip
    out, err = capsys.readouterr()
    assert status == 3  # W-05 is rejected by either
    assert err == ""
    assert max(map(len, out.splitlines()[:-1])) <= 80
    row = next(line.split() for line in out.splitlines() if line.startswith("W-02"))
    assert row[:3] == ["W-02", "ACCEPT", "ACCEPT"]
    assert float(row[3]) == pytest.approx(1.0, abs=0.05)  # stress
    assert abs(float(row[4])) < 0.1  # strain: from the reflected pulse
    assert "W-09: left alone, fired on the rig Fennick Hollow bench 2" in out
    assert "3 shots reduced again by the calibration summer of 2031-02-10." in out
    assert "Before: the values of the rig file of 2031-02-03." in out
    assert stored(lab / "results") == before
    new = lab / "results-summer"
    assert list(stored(new)) == ["W-01.h5", "W-02.h5", "W-05.h5"]
    calibration = shpb.load(new / "W-02.h5").rig.calibration
    assert calibration == read_calibration(lab / "calibration" / "summer.toml")


def test_figures_and_curves_come_along(lab: Path) -> None:
    shot, by = lab / "results" / "W-02.h5", lab / "calibration" / "summer.toml"
    assert run("recalibrate", shot, "--calibration", by, "--into", lab / "new", "--csv") == 0
    assert list(stored(lab / "new")) == ["W-02.csv", "W-02.h5", "W-02.png"]


def test_one_bad_file_never_stops_the_rest(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (lab / "results" / "W-01.h5").write_bytes((lab / "results" / "W-01.h5").read_bytes()[:2000])
    (lab / "results" / "notes.h5").write_bytes(b"no HDF5 at all")
    arguments = ("--calibration", lab / "calibration" / "summer.toml", "--figure", "none", "--workers", "1")
    capsys.readouterr()
    assert run("recalibrate", lab / "results", *arguments) == 1
    out, err = capsys.readouterr()
    assert "Not reduced: W-01, notes." in out
    assert err.count("cannot be read as a shot file") == 2
    assert "Traceback" not in err
    assert list(stored(lab / "results-summer")) == ["W-02.h5", "W-05.h5"]


def test_nothing_is_written_over_another(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    def by(name: str, *more: str | Path) -> int:
        calibration = lab / "calibration" / f"{name}.toml"
        shot = lab / "results" / "W-02.h5"
        return run("recalibrate", shot, "--calibration", calibration, "--figure", "none", *more)

    assert by("summer", "--into", lab / "new") == 0
    before = stored(lab / "new")
    assert by("summer", "--into", lab / "new") == 0  # the same again
    assert by("autumn", "--into", lab / "new") == 1
    assert "a result by the calibration summer stands there" in capsys.readouterr().err
    assert shpb.load(lab / "new" / "W-02.h5").rig.calibration.name == "summer"
    assert list(stored(lab / "new")) == list(before)
    assert by("summer", "--into", lab / "results") == 2
    assert "the earlier results are in this folder" in capsys.readouterr().err
    (lab / "foreign").mkdir()
    (lab / "foreign" / "W-02.png").write_text("mine")
    assert by("summer", "--into", lab / "foreign", "--figure", "png") == 1
    assert stored(lab / "foreign") == {"W-02.png": b"mine"}


def test_from_one_calibration_to_the_next(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    calibration = lab / "calibration"
    run("recalibrate", lab / "results" / "W-02.h5", "--calibration", calibration / "summer.toml",
        "--into", lab / "first", "--figure", "none")  # fmt: skip
    capsys.readouterr()
    run("recalibrate", lab / "first", "--calibration", calibration / "autumn.toml", "--into", lab / "second",
        "--figure", "none", "--json")  # fmt: skip
    said = json.loads(capsys.readouterr().out)
    assert said["calibration"]["name"] == "autumn"
    (shot,) = said["shots"]
    assert shot["before"]["calibration"] == "summer"
    # From 1 % to 2 %, not 3 %: the first calibration is taken out, then the second put in.
    assert shot["flow_stress_change"] == pytest.approx(1.02 / 1.01 - 1, abs=2e-4)
    direct = shpb.load(lab / "second" / "W-02.h5")["response/stress_1w"]
    assert direct.max() / shpb.load(lab / "results" / "W-02.h5")["response/stress_1w"].max() == pytest.approx(
        1.02
    )


def test_json_of_shots_that_cannot_be_used(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (lab / "results" / "W-01.h5").write_bytes(b"")
    capsys.readouterr()
    run("recalibrate", lab / "results", "--calibration", lab / "calibration" / "summer.toml", "--json",
        "--figure", "none", "--workers", "2")  # fmt: skip
    shots = json.loads(capsys.readouterr().out)["shots"]
    assert [Path(shot["earlier_file"]).stem for shot in shots] == ["W-01", "W-02", "W-05", "W-09"]
    assert shots[0]["error"]["kind"] == "StoreError"
    assert "bench 2" in shots[3]["left_alone"]


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (("none", "--calibration", "calibration/summer.toml"), "no such file or folder"),
        (("records", "--calibration", "calibration/summer.toml"), "there is no shot file"),
        (("results", "--calibration", "calibration/bench_1.toml"), "this is a rig file, not a calibration"),
        (("results", "--calibration", "calibration/none.toml"), "no such calibration file"),
        (("results", "--calibration", "calibration/summer.toml", "--workers", "0"), "Give 1 or more"),
        (
            ("results", "--calibration", "calibration/summer.toml", "--into", "shot_list.csv"),
            "this is a file",
        ),
        (("results/W-09.h5", "--calibration", "calibration/summer.toml"), "left alone"),
    ],
)
def test_bad_input(
    lab: Path,
    arguments: tuple[str, ...],
    says: str,
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.chdir(lab)
    capsys.readouterr()
    assert run("recalibrate", *arguments) == 2
    out, err = capsys.readouterr()
    assert says in out + err


def test_results_seen_from_within_their_folder(lab: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(lab / "results")
    assert (
        run("recalibrate", "W-02.h5", "--calibration", "../calibration/summer.toml", "--figure", "none") == 0
    )
    assert (lab / "results-summer" / "W-02.h5").exists()
