"""A calibration on the screen, on its page and for other programs."""

from __future__ import annotations

import dataclasses
import json
from collections.abc import Callable
from pathlib import Path

import pytest

from shpb.calibrate.calibration import Calibrated, calibrate
from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.records import fired_shots
from shpb.calibrate.session_file import read_session, session_on_rig
from shpb.demo import write_calibration_demo
from shpb.rig.rig_file import read_rig
from shpb.view.calibrated import calibrated_json, calibrated_text, in_force_text, value_lines
from shpb.view.calibrated_page import calibrated_figure, save_calibrated_figure
from shpb.view.summary import json_text

Make = Callable[[str], Calibrated]


@pytest.fixture(scope="module", name="made")
def _made(tmp_path_factory: pytest.TempPathFactory) -> Make:
    folder = tmp_path_factory.mktemp("view") / "demo"
    write_calibration_demo(folder)
    kept: dict[str, Calibrated] = {}

    def make(name: str) -> Calibrated:
        if name not in kept:
            session = read_session(folder / f"session_{name}.toml")
            rig = read_rig(session.rig_file, as_stated=True)
            session = session_on_rig(session, rig)
            kept[name] = calibrate(session, rig, list(fired_shots(session, rig)))
        return kept[name]

    return make


@pytest.fixture(name="steel")
def _steel(made: Make) -> Calibrated:
    return made("bench_4_2031-02-03")


@pytest.fixture(name="acrylic")
def _acrylic(made: Make) -> Calibrated:
    return made("bench_3_2031-03-19")


def on_one_line(text: str) -> str:
    return " ".join(text.split())


def test_the_lines_hold_what_was_measured(steel: Calibrated) -> None:
    lines = {(line.table, line.what): line for line in value_lines(steel)}
    speed = lines["incident_bar", "wave speed"]
    assert speed.measured == steel.calibration.bars["incident_bar"].wave_speed_m_s
    assert float(speed.stated) == 4870.0
    assert speed.change == pytest.approx(speed.measured / 4870.0 - 1)
    # E = rho c0^2 of the steel as stated, 8010 kg/m3, with the new speed.
    modulus = lines["incident_bar", "modulus"]
    assert float(modulus.measured) == pytest.approx(8010.0 * speed.measured**2, rel=1e-12)
    text = calibrated_text(steel)
    assert f"{speed.measured:.2f}" in text
    assert f"{1e3 * lines['transmitted_gauge', 'distance'].measured:.2f}" in text
    assert f"{modulus.measured / 1e9:.2f}" in text


@pytest.mark.parametrize("width", [80, 100])
def test_the_text_keeps_its_width(steel: Calibrated, acrylic: Calibrated, width: int) -> None:
    for done in (steel, acrylic):
        assert max(map(len, calibrated_text(done, width).splitlines())) <= width
        assert all(line == line.rstrip() for line in calibrated_text(done, width).splitlines())


def test_every_source_has_a_line_below_its_station(steel: Calibrated) -> None:
    text = calibrated_text(steel)
    part = text[text.index("incident gauge  ", text.index("SENSITIVITY")) : text.index("PULSES AND LINES")]
    assert steel.sensitivities is not None
    assert part.count("shunt SH-") == 4
    assert part.count("striker line") == 2
    assert len([line for line in part.splitlines() if line.startswith("  ")]) == len(
        steel.sensitivities.sources
    )


def test_lines_contacts_and_free_ends_are_told(steel: Calibrated) -> None:
    text = on_one_line(calibrated_text(steel))
    assert "striker line of the incident gauge: 7 shots; intercept" in text
    assert "transmitted gauge laid on the incident gauge: 5 times" in text
    assert "contact of the bars sends back" in text
    assert "shunts of the transmitted gauge: 2, excitation and gain" in text
    data = json.loads(json_text(calibrated_json(steel, "a.toml", "")))
    assert len(data["contacts"]) == 5
    # Bars of nearly one impedance: 0.06 % apart in wave speed, 0.03 % in diameter.
    assert all(abs(one["reflected_share"]) < 2e-3 for one in data["contacts"])
    # A free end turns the sign and keeps the size, but for the planted losses.
    assert all(one["ratio"] == pytest.approx(-1, abs=4e-3) for one in data["free_ends"])
    line = next(one for one in data["striker_lines"] if one["station"] == "incident_gauge")
    assert line["q"] == pytest.approx(line["q_by_momentum"], rel=5e-3)
    assert [one["shot_id"] for one in line["points"]][-1] == "BT-5"
    assert [len(one["points"]) for one in data["shunts"]] == [2, 2]


def test_what_several_shots_show_alike_is_said_once(steel: Calibrated) -> None:
    findings = tuple(
        CalibrationFinding(check="free end", measured=f"B{n} returns 9{n} %", limit="2 %", action="Look.")
        for n in (1, 2)
    )
    text = on_one_line(calibrated_text(dataclasses.replace(steel, findings=findings)))
    assert "free end: B1 returns 91 %; B2 returns 92 % (limit: 2 %). To do: Look." in text
    assert text.count("To do") == 1


def test_a_grave_finding_stands_before_the_line_for_the_rig_file(steel: Calibrated) -> None:
    grave = CalibrationFinding(check="x", measured="y", limit="z", action="Look.", grave=True)
    doubtful = dataclasses.replace(steel, findings=(grave,))
    assert "!! x: y" in calibrated_text(doubtful)
    assert "calibration =" not in in_force_text(doubtful, "a.toml", "rig.toml")
    assert 'calibration = "' in in_force_text(steel, "a.toml", "rig.toml")
    assert doubtful.grave


def test_a_calibration_without_findings_says_so(steel: Calibrated) -> None:
    assert "Nothing contradicts anything" in calibrated_text(dataclasses.replace(steel, findings=()))


def test_names_from_outside_are_harmless(steel: Calibrated) -> None:
    hostile = dataclasses.replace(steel.calibration, rig="a\x1b[31m\u202eb $x^2$", date="<b>")
    done = dataclasses.replace(steel, calibration=hostile, remarks=("\x07bell",))
    text = calibrated_text(done)
    assert not any(character in text for character in "\x1b\u202e\x07")
    assert calibrated_figure(done).texts


def test_other_programs_get_si(steel: Calibrated, acrylic: Calibrated) -> None:
    data = json.loads(json_text(calibrated_json(steel, "a.toml", "")))
    values = {(one["table"], one["what"]): one for one in data["values"]}
    place = steel.calibration.gauges["transmitted_gauge"].to_specimen_m
    assert place is not None
    assert values["transmitted_gauge", "distance"] == {
        "table": "transmitted_gauge",
        "what": "distance",
        "unit": "m",
        "stated": 0.6,
        "stated_u": pytest.approx(0.3e-3),
        "measured": float(place),
        "u": place.u,
        "in_joint_u": pytest.approx((place - 0.6) / (0.3e-3**2 + (place.u or 0) ** 2) ** 0.5),
    }
    assert data["figure"] is None
    assert data["correlations"]
    assert json.loads(json_text(calibrated_json(acrylic, "a.toml", "b.png")))["figure"] == "b.png"


def test_the_page_shows_bars_lines_and_sources(steel: Calibrated) -> None:
    figure = calibrated_figure(steel)
    labels = [axes.get_ylabel() for axes in figure.axes]
    assert labels.count("phase speed, m/s") == 2
    assert labels.count("by gauge, microstrain") == 2
    assert labels.count("off the line, %") == 2
    points = next(line for line in figure.axes[2].lines if line.get_marker() == "o")
    assert steel.lines is not None
    expected = [1e6 * point.expected for point in steel.lines.lines[0].points]
    assert list(points.get_xdata()) == pytest.approx(expected)
    # The fitted curve falls from c0 with frequency, as the first mode does.
    curve = figure.axes[0].lines[-1].get_ydata()
    assert curve[0] > curve[-1] * 1.01  # type: ignore[index]
    words = " ".join(text.get_text() for text in figure.texts)
    assert "striker line" in words
    assert "shunt SH-T2" in words


def test_the_page_of_damped_bars_shows_their_attenuation(acrylic: Calibrated) -> None:
    labels = [axes.get_ylabel() for axes in calibrated_figure(acrylic).axes]
    assert labels.count("attenuation, Np/m") == 2


@pytest.mark.parametrize("kind", ["png", "svg"])
def test_the_page_is_the_same_twice(steel: Calibrated, kind: str, tmp_path: Path) -> None:
    first = save_calibrated_figure(steel, tmp_path / f"a.{kind}").read_bytes()
    assert save_calibrated_figure(steel, tmp_path / f"b.{kind}").read_bytes() == first
