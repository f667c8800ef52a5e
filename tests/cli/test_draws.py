"""``shpb reduce`` with draws and a budget page, as its users meet it."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

import shpb
from shpb.cli.main import main
from shpb.demo.campaign import write_demo


@pytest.fixture(scope="module")
def lab(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_demo(tmp_path_factory.mktemp("draws") / "demo").folder


def run(*arguments: str | Path) -> int:
    return main([str(argument) for argument in arguments])


def test_draws_follow_the_verdict_and_are_stored(
    lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    shot = lab / "records" / "W-02.toml"
    assert run("reduce", shot, "--draws", "300", "--seed", "4", "--results", tmp_path / "a") == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert (
        out.index("ACCEPT")
        < out.index("Uncertainty")
        < out.index("300 draws from seed 4")
        < out.index("written:")
    )
    assert sorted(p.name for p in (tmp_path / "a").iterdir()) == ["W-02.h5", "W-02.png", "W-02_budget.png"]
    stored = shpb.load(tmp_path / "a" / "W-02.h5")
    assert stored.attributes["trust/draws"]["seed"] == 4
    # The same seed, the same numbers, without a figure and from JSON.
    assert (
        run(
            "reduce",
            shot,
            "--draws",
            "300",
            "--seed",
            "4",
            "--json",
            "--figure",
            "none",
            "--results",
            tmp_path / "b",
        )
        == 0
    )
    said = json.loads(capsys.readouterr().out)["shots"][0]
    assert said["uncertainty"]["draws"]["draws"] == 300
    assert sorted(p.name for p in (tmp_path / "b").iterdir()) == ["W-02.h5"]
    again = shpb.load(tmp_path / "b" / "W-02.h5")
    assert (again["trust/draws/u_true_stress"] == stored["trust/draws/u_true_stress"]).all()


def test_the_budget_page_comes_when_asked_for(
    lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    shots = [lab / "records" / f"{name}.toml" for name in ("W-02", "W-03")]
    run("reduce", *shots, "--budget", "--figure", "svg", "--workers", "2", "--results", tmp_path)
    assert {p.name for p in tmp_path.glob("*_budget.*")} == {"W-02_budget.svg", "W-03_budget.svg"}
    assert capsys.readouterr().err == ""
    run("reduce", shots[0], "--budget", "--figure", "none", "--results", tmp_path)
    assert (tmp_path / "W-02_budget.png").exists()


def test_nothing_of_others_is_written_over(
    lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    notes = tmp_path / "W-02_budget.png"
    notes.write_text("precious")
    shot = lab / "records" / "W-02.toml"
    assert run("reduce", shot, "--budget", "--results", tmp_path) == 1
    assert "was not written with a result" in capsys.readouterr().err
    assert notes.read_text() == "precious"
    notes.unlink()
    (tmp_path / "W-02_budget.h5").write_text("a shot of that name")
    assert run("reduce", shot, "--budget", "--results", tmp_path) == 1
    assert "belongs to the figure of another shot" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (
            ["--draws", "many"],
            "--draws: found 'many'. Give 200 to 10000000 draws, or adaptive; 10000 are usual",
        ),
        (["--draws", "100"], "--draws: found '100'"),
        (["--draws", "-5"], "--draws"),
        (["--draws", "1e4"], "--draws: found '1e4'"),
        (["--draws", "99999999"], "--draws: found '99999999'"),
        (["--seed", "3"], "--seed: there is nothing to draw. Give --draws as well"),
        (["--draws", "500", "--seed", "-1"], "--seed"),
    ],
)
def test_refusals(
    lab: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], arguments: list[str], message: str
) -> None:
    command = ["reduce", lab / "records" / "W-02.toml", "--results", tmp_path / "out", *arguments]
    try:
        status = run(*command)
    except SystemExit as stop:  # the parser itself refuses "-5"
        status = int(stop.code or 0)
    assert status == 2
    assert message in capsys.readouterr().err
    assert not (tmp_path / "out").exists()
