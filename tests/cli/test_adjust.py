"""``shpb adjust`` by options: what is moved, by whom and why is stored beside the program's choice; nothing is lost."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import h5py
import pytest

import shpb
from shpb.cli.main import main
from shpb.demo.campaign import write_demo

SIGNED = ("--by", "A. B.", "--why", "bump of a loose cable at 655 us")


def run(*arguments: str | Path) -> int:
    return main([str(argument) for argument in arguments])


@pytest.fixture(scope="module", name="demo")
def _demo(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One accepted and one rejected shot, reduced."""
    folder = tmp_path_factory.mktemp("adjust") / "demo"
    write_demo(folder)
    sheets = [folder / "records" / f"W-0{number}.toml" for number in (2, 8)]
    run("reduce", *sheets, "--figure", "none", "--workers", "1", "--results", folder / "results")
    return folder


@pytest.fixture(name="lab")
def _lab(demo: Path, tmp_path: Path) -> Path:
    """A copy that a test may spoil."""
    return Path(shutil.copytree(demo, tmp_path / "lab"))


@pytest.fixture(name="stored")
def _stored(lab: Path) -> Path:
    return lab / "results" / "W-02.h5"


Adjust = Callable[..., int]


@pytest.fixture(name="adjust")
def _adjust(stored: Path, capsys: pytest.CaptureFixture[str]) -> Adjust:
    def call(*arguments: str) -> int:
        capsys.readouterr()
        return run("adjust", stored, "--figure", "none", *arguments)

    return call


def test_a_window_is_moved_and_signed(
    adjust: Adjust, stored: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    own = shpb.load(stored)
    assert adjust("--reflected-window", "345,650", "--incident-foot", "-1.5", *SIGNED) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert out.startswith("Before    ACCEPT")
    assert "\nAfter     ACCEPT" in out
    words = " ".join(out.split())
    assert "reflected window: 358.68 to 728.29 us, now 345.00 to 650.00 us" in words
    assert "reflected window moved by hand by A. B. on" in words
    assert "starts 13.68 us earlier, ends 78.29 us earlier, because bump of a loose cable at 655 us" in words
    assert max(map(len, out.split("written:")[0].splitlines())) <= 80

    now = shpb.load(stored)
    assert now.settings.reflected_window_s == pytest.approx((345e-6, 650e-6))
    assert now.settings.incident_foot_s == pytest.approx(-1.5e-6)
    (kept,) = now.by_hand
    assert (kept.by, kept.why) == (SIGNED[1], SIGNED[3])
    assert [(move.pulse, move.part) for move in kept.moves] == [("incident", "foot"), ("reflected", "window")]
    automatic = own.attributes["pulse/reflected"]["window"]
    assert list(kept.moves[1].automatic_s) == automatic
    assert now.attributes["pulse/reflected"]["window"] == pytest.approx([345e-6, 650e-6])
    # What the file says is what the record gives with these settings.
    again = now.reduce_again()
    assert again.by_hand == now.by_hand
    assert (again.response.curve.true_stress_pa == now["response/true_stress"]).all()


def test_a_time_before_the_trigger_is_no_option(adjust: Adjust, stored: Path) -> None:
    assert adjust("--incident-window", "-25.5,200", *SIGNED) == 0
    assert shpb.load(stored).settings.incident_window_s == pytest.approx((-25.5e-6, 200e-6))


def test_every_change_stays_in_the_history(adjust: Adjust, stored: Path) -> None:
    adjust("--reflected-window", "345,650", *SIGNED)
    adjust("--reflected-window", "345,600", "--by", "C. D.", "--why", "it reaches further down")
    assert adjust("--reset", "reflected", "--by", "E. F.", "--why", "cable mended, record read anew") == 0
    shot = shpb.load(stored)
    assert [kept.by for kept in shot.by_hand] == ["A. B.", "C. D.", "E. F."]
    assert shot.settings.reflected_window_s is None
    first, second, third = (kept.moves[0] for kept in shot.by_hand)
    assert first.after_s == second.before_s
    assert second.after_s == third.before_s
    assert not third.by_hand
    assert third.after_s == first.automatic_s


def test_one_part_is_given_back_by_its_word(adjust: Adjust, stored: Path) -> None:
    adjust("--reflected-window", "345,650", "--reflected-foot", "371", *SIGNED)
    assert adjust("--reflected-foot", "automatic", *SIGNED) == 0
    settings = shpb.load(stored).settings
    assert settings.reflected_foot_s is None
    assert settings.reflected_window_s is not None


def test_reducing_anew_keeps_what_a_hand_moved(
    adjust: Adjust, lab: Path, stored: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    adjust("--reflected-window", "345,650", *SIGNED)
    history = shpb.load(stored).by_hand
    sheet = lab / "records" / "W-02.toml"
    assert run("reduce", sheet, "--figure", "none", "--results", lab / "results") == 0
    assert "moved by hand by A. B." in " ".join(capsys.readouterr().out.split())
    now = shpb.load(stored)
    assert now.by_hand == history
    assert now.settings.reflected_window_s == pytest.approx((345e-6, 650e-6))
    # A sheet that is changed afterwards has the last word; the history stays.
    text = sheet.read_text(encoding="utf-8")
    sheet.write_text(text + "\n[settings]\nreflected_window_us = [350.0, 700.0]\n", encoding="utf-8")
    assert run("reduce", sheet, "--figure", "none", "--results", lab / "results") == 0
    now = shpb.load(stored)
    assert now.by_hand == history
    assert now.settings.reflected_window_s == pytest.approx((350e-6, 700e-6))
    assert "set by hand in shot sheet" in " ".join(capsys.readouterr().out.split())


def test_from_a_sheet_before_it_was_ever_reduced(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    results = lab / "fresh"
    sheet = lab / "records" / "W-02.toml"
    assert run("adjust", sheet, "--results", results, "--transmitted-window", "290,690", *SIGNED) == 0
    assert sorted(path.name for path in results.iterdir()) == ["W-02.h5", "W-02.png"]
    assert len(shpb.load(results / "W-02.h5").by_hand) == 1
    capsys.readouterr()
    # The second time it begins from what was stored.
    assert run("adjust", sheet, "--results", results, "--transmitted-window", "290,690", *SIGNED) == 0
    assert "Nothing differs" in capsys.readouterr().out
    assert len(shpb.load(results / "W-02.h5").by_hand) == 1


def test_what_stands_beside_is_written_anew(stored: Path, capsys: pytest.CaptureFixture[str]) -> None:
    shot = shpb.load(stored).reduce_again()
    others = [stored.with_suffix(".csv"), stored.with_suffix(".svg")]
    shpb.export_csv(shot, others[0])
    shpb.save_figure(shot, others[1])
    before = [path.read_bytes() for path in others]
    assert run("adjust", stored, "--transmitted-window", "290,440", *SIGNED) in (0, 3)
    assert all(path.read_bytes() != old for path, old in zip(others, before, strict=True))
    assert not stored.with_suffix(".png").exists()
    svg = others[1].read_text(encoding="utf-8")
    assert "A. B." in svg


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("--reflected-window", "345,650"), "--by: is not given"),
        (("--reflected-window", "345,650", "--by", "A. B."), "--why: is not given"),
        (("--reflected-window", "345,650", "--by", "  ", "--why", "x"), "--by: is empty"),
        (("--reflected-window", "345,650", "--by", "A. B.", "--why", ""), "--why: is empty"),
        (("--reflected-window", "650,345", *SIGNED), "start before the end"),
        (("--reflected-window", "345", *SIGNED), "two times with a comma"),
        (("--reflected-window", "345,nan", *SIGNED), "two times with a comma"),
        (("--reflected-foot", "345,650", *SIGNED), "one time, 367.4"),
        (("--reflected-window", "345,99999", *SIGNED), "does not lie inside the record"),
        (("--reflected-foot", "10", *SIGNED), "lies outside its window"),
        (("--reflected-window", "400,402", *SIGNED), "holds"),
        (("--reset", "refleced", *SIGNED), "incident, reflected, transmitted or all"),
        (("--json",), "no change to report"),
        (("--reset", "--rig", "rig.toml", *SIGNED), "a stored shot holds its rig"),
    ],
)
def test_what_cannot_be_done_is_refused_and_nothing_stored(
    adjust: Adjust, stored: Path, arguments: tuple[str, ...], said: str, capsys: pytest.CaptureFixture[str]
) -> None:
    before = stored.read_bytes()
    assert adjust(*arguments) == 2
    out, err = capsys.readouterr()
    assert said in err + out
    assert "Traceback" not in err
    assert stored.read_bytes() == before


def test_nothing_to_change_is_nothing_stored(
    adjust: Adjust, stored: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    before = stored.read_bytes()
    assert adjust("--reset", *SIGNED) == 0
    assert "Nothing differs from what stands already; nothing was stored." in capsys.readouterr().out
    assert stored.read_bytes() == before


def test_a_rejected_shot_has_status_3(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    stored = lab / "results" / "W-08.h5"
    window = shpb.load(stored).attributes["pulse/incident"]["window"]
    given = f"{window[0] * 1e6 - 2:.1f},{window[1] * 1e6:.1f}"
    assert run("adjust", stored, "--figure", "none", "--incident-window", given, *SIGNED) == 3
    assert capsys.readouterr().out.startswith("Before    REJECT")


def test_json(adjust: Adjust, stored: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert adjust("--reflected-window", "345,650", "--json", *SIGNED) == 0
    said = json.loads(capsys.readouterr().out)
    assert (said["schema"], said["shot_id"]) == ("shpb adjust", "W-02")
    assert said["before"]["verdict"] == said["after"]["verdict"] == "accept"
    (change,) = said["changes"]
    assert change["after_s"] == pytest.approx([345e-6, 650e-6])
    assert said["shot"]["by_hand"][0]["by"] == "A. B."
    assert said["shot"]["pulses"]["reflected"]["set_by_hand"]
    assert said["files"] == [str(stored)]
    assert adjust("--reset", "everything", "--json", *SIGNED) == 2
    assert json.loads(capsys.readouterr().out)["schema"] == "shpb error"


def test_hostile_names_and_reasons_are_kept_and_shown_harmless(
    adjust: Adjust, stored: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    why = "=cmd()\x1b[2J <script>[/red] \u202e $x^2$"
    assert adjust("--reflected-window", "345,650", "--by", "[bold]A\nB", "--why", why) == 0
    out = capsys.readouterr().out
    assert "\x1b" not in out
    assert "\u202e" not in out
    assert shpb.load(stored).by_hand[0].why == why


def test_two_people_at_once_do_not_lose_the_first(stored: Path, lab: Path) -> None:
    from shpb.adjust.following import Following
    from shpb.cli.adjust_files import open_shot, store
    from shpb.errors import StoreError
    from shpb.pulse.by_hand import kept_now

    opened = open_shot(stored, None, None)
    assert run("adjust", stored, "--figure", "none", "--reflected-window", "345,650", *SIGNED) == 0
    shot = Following(opened.record, opened.rig, opened.sheet, opened.settings)
    settings = opened.settings.replaced(incident_foot_s=-1.4e-6)
    late = kept_now("C. D.", "x", shot.moves(opened.settings, settings))
    with pytest.raises(StoreError, match="by somebody else meanwhile"):
        store(opened, shot.reduced(settings, (late,)), "none")
    assert [kept.by for kept in shpb.load(stored).by_hand] == ["A. B."]


def test_windows_that_gave_no_curve_can_be_mended(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sheet = lab / "records" / "W-02.toml"
    text = sheet.read_text(encoding="utf-8")
    sheet.write_text(text + "\n[settings]\nreflected_foot_us = 10.0\n", encoding="utf-8")
    results = lab / "mended"
    assert run("reduce", sheet, "--figure", "none", "--results", results) == 3
    capsys.readouterr()
    given = ("--reflected-foot", "automatic", "--figure", "none", "--results", results)
    assert run("adjust", sheet, *given, *SIGNED) == 0
    assert capsys.readouterr().out.startswith("Before    FAILED")


def test_files_of_before_load_and_say_nothing(stored: Path) -> None:
    with h5py.File(stored) as file:
        assert "by_hand" not in file["pulse"]  # the layout of before, where nobody has moved anything
    assert shpb.load(stored).by_hand == ()


def test_a_figure_that_cannot_be_drawn_is_said_and_the_change_is_kept(
    stored: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    stored.with_suffix(".png").mkdir()
    assert run("adjust", stored, "--reflected-window", "345,650", *SIGNED) == 0
    assert "the shot is stored, but not all that stands beside it" in capsys.readouterr().err
    assert len(shpb.load(stored).by_hand) == 1


def test_another_calibration_keeps_the_history(stored: Path, adjust: Adjust, lab: Path) -> None:
    from shpb.rig.calibration import Calibration
    from shpb.rig.calibration_file import write_calibration

    adjust("--reflected-window", "345,650", *SIGNED)
    name = shpb.load(stored).rig.name
    made = Calibration(name="spring", rig=name, date="2031-02-10", holds_days=365)
    write_calibration(made, lab / "spring.toml")
    arguments = ("--calibration", lab / "spring.toml", "--into", lab / "again", "--figure", "none")
    assert run("recalibrate", stored, *arguments, "--workers", "1") == 0
    assert shpb.load(lab / "again" / "W-02.h5").by_hand == shpb.load(stored).by_hand


def test_draws_are_drawn_again(lab: Path) -> None:
    sheet, results = lab / "records" / "W-02.toml", lab / "drawn"
    run("reduce", sheet, "--figure", "none", "--results", results, "--draws", "300", "--seed", "5")
    stored = results / "W-02.h5"
    assert run("adjust", stored, "--figure", "none", "--reflected-window", "345,650", *SIGNED) == 0
    drawn = shpb.load(stored).attributes["trust/draws"]
    assert (drawn["draws"], drawn["seed"]) == (300, 5)


def test_several_shots_are_not_adjusted_at_once(lab: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("adjust", lab / "records", "--reset", *SIGNED) == 2
    assert "one at a time" in capsys.readouterr().err


def test_without_a_window_the_options_are_named(stored: Path) -> None:
    before = stored.read_bytes()
    done = subprocess.run(
        [sys.executable, "-m", "shpb", "adjust", str(stored)],
        env={**os.environ, "MPLBACKEND": "Agg", "DISPLAY": ""}, capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 2
    assert "--incident-window START,END" in done.stderr
    assert "Traceback" not in done.stderr
    assert stored.read_bytes() == before
