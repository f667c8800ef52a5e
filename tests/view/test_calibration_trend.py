"""The history of a rig's values: one table, the same for other programs, one page."""

from __future__ import annotations

import json
import math
from pathlib import Path

import pytest

from shpb.calibrate.history import Trend, trends_of
from shpb.quantity import Quantity
from shpb.rig.calibration import BarCalibration, Calibration, GaugeCalibration
from shpb.view.calibration_trend import trend_json, trend_text
from shpb.view.calibration_trend_page import save_trend_figure, trend_figure
from shpb.view.summary import json_text

Q = Quantity


def calibration(date: str, speed: Quantity, distance: Quantity, gain: float = 500.0) -> Calibration:
    gauge = GaugeCalibration(to_specimen_m=distance, as_stated={"gain": gain})
    return Calibration(
        name=f"bench_{date}",
        rig="Bench \x1b[31m",
        date=date,
        holds_days=365,
        bars={"incident_bar": BarCalibration(wave_speed_m_s=speed)},
        gauges={"incident_gauge": gauge},
    )


def calibrations() -> list[Calibration]:
    return [
        calibration("2030-02-01", Q(5000.0, 3.0), Q(0.9990, 1e-4)),
        calibration("2030-08-01", Q(5005.0, 4.0), Q(0.9991, 1e-4)),
        calibration("2031-02-01", Q(5025.0, 3.0), Q(1.0050, 1e-4), gain=200.0),
    ]


def trends() -> tuple[Trend, ...]:
    return trends_of(calibrations())


def rows(text: str) -> list[list[str]]:
    return [line.split() for line in text.splitlines() if line.startswith("  20")]


def test_the_table_holds_value_step_and_its_size_in_joint_u() -> None:
    found = rows(trend_text("Bench", trends()))
    assert [row[:4] for row in found[:3]] == [
        ["2030-02-01", "5000.0", "3.0", "m/s"],
        ["2030-08-01", "5005.0", "4.0", "m/s"],
        ["2031-02-01", "5025.0", "3.0", "m/s"],
    ]
    # 5 by 5000 and by hypot(3, 4); 20 by 5005 and by hypot(4, 3).
    assert found[0][4:] == []
    assert found[1][4:] == ["+0.10%", "+1.0"]
    assert found[2][4:] == ["+0.40%", "+4.0"]
    # Metres read as millimetres: 0.1 mm by hypot(0.1, 0.1).
    assert found[3][:4] == ["2030-02-01", "999.00", "0.10", "mm"]
    assert found[4][4:] == ["+0.01%", "+0.7"]


def test_a_large_step_is_named_unless_the_rig_file_was_changed() -> None:
    text = trend_text("Bench", trends())
    closing = " ".join(text.split("\n\n")[-1].split())
    assert "incident bar: wave speed on 2031-02-01" in closing
    assert "distance" not in closing  # 5.9 mm is far more, but the gain stands otherwise since
    assert "changed in the rig file before it: gain" in text
    quiet = trend_text("Bench", trends_of(calibrations()[:2]))
    assert "No step is larger than 2.5 joint standard uncertainties" in " ".join(quiet.split())


def test_the_table_keeps_to_80_columns_and_shows_no_control_character() -> None:
    text = trend_text("Bench \x1b[31m" + "x" * 200, trends())
    assert "\x1b" not in text
    assert max(map(len, text.splitlines())) <= 80


def test_other_programs_get_si_and_all_digits() -> None:
    data = json.loads(json_text(trend_json("Bench", calibrations(), trends())))
    assert [one["date"] for one in data["calibrations"]] == ["2030-02-01", "2030-08-01", "2031-02-01"]
    speed, distance = data["values"]
    assert (speed["name"], speed["unit"]) == ("incident bar: wave speed", "m/s")
    assert speed["steps"][1]["in_joint_u"] == pytest.approx(4.0)
    assert distance["points"][2] == {
        "calibration": "bench_2031-02-01",
        "date": "2031-02-01",
        "value": 1.005,
        "u": 1e-4,
    }
    assert distance["steps"][1]["changed_in_rig_file"] == ["gain"]
    assert speed["scatter"] == pytest.approx(math.sqrt((10**2 + 5**2 + 15**2) / 2))


def test_the_page_draws_every_value_with_its_bars() -> None:
    figure = trend_figure("Bench", trends())
    speed, distance = figure.axes
    (points,) = [line for line in speed.lines if line.get_marker() == "o"]
    assert points.get_ydata() == pytest.approx([0.0, 0.1, 0.5])  # % of the first
    (points,) = [line for line in distance.lines if line.get_marker() == "o"]
    assert points.get_ydata() == pytest.approx([0.0, 0.1, 6.0])  # mm
    (bars,) = speed.collections
    heights = [float(segment[1, 1] - segment[0, 1]) for segment in bars.get_segments()]  # type: ignore[attr-defined]
    assert heights == pytest.approx([4 * 0.06, 4 * 0.08, 4 * 0.06])  # k = 2 to both sides


@pytest.mark.parametrize("kind", ["png", "pdf", "svg"])
def test_the_page_is_written_in_each_kind_and_the_same_twice(kind: str, tmp_path: Path) -> None:
    first = save_trend_figure("Bench <b>", trends(), tmp_path / f"a.{kind}").read_bytes()
    again = save_trend_figure("Bench <b>", trends(), tmp_path / f"b.{kind}").read_bytes()
    assert first == again
    assert len(first) > 5000


def test_one_calibration_has_no_steps() -> None:
    one = trends_of(calibrations()[:1])
    text = trend_text("Bench", one)
    assert "calibrated once" in text
    assert len(rows(text)) == 2
    assert trend_figure("Bench", one).axes
