"""The history of a rig: which calibrations a folder holds, each value over time, and its drift in joint u."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from shpb.calibrate.history import history_of, trends_of
from shpb.errors import FileMistakes, InputError
from shpb.quantity import Quantity
from shpb.rig.calibration import BarCalibration, Calibration, GaugeCalibration
from shpb.rig.calibration_file import free_name, write_calibration

Q = Quantity


def calibration(date: str, speed: Quantity, factor: Quantity | None, **changes: object) -> Calibration:
    stated = {"gauge_factor": 2.08, "gain": 500.0, **changes}
    gauges = (
        {} if factor is None else {"incident_gauge": GaugeCalibration(gauge_factor=factor, as_stated=stated)}
    )
    bars = {"incident_bar": BarCalibration(wave_speed_m_s=speed)}
    return Calibration(name=f"bench_{date}", rig="bench", date=date, holds_days=365, bars=bars, gauges=gauges)


@pytest.fixture(name="folder")
def _folder(tmp_path: Path) -> Path:
    """Three calibrations written in no order, and files of other kinds beside them."""
    for one in (
        calibration("2031-08-11", Q(5003.0, 3.0), Q(2.10, 0.004), gain=200.0),
        calibration("2030-02-01", Q(5000.0, 4.0), Q(2.09, 0.003)),
        calibration("2031-02-03", Q(5001.0, None), None),
    ):
        write_calibration(one, free_name(tmp_path, one.name))
    (tmp_path / "bench.toml").write_text('[rig]\nname = "bench"\n')
    (tmp_path / "session.toml").write_text("[calibration]\ndate = 2031-02-03\n")
    (tmp_path / "README.md").write_text("x")
    return tmp_path


def test_the_calibrations_of_a_folder_come_by_date(folder: Path) -> None:
    assert [one.date for one in history_of(folder)] == ["2030-02-01", "2031-02-03", "2031-08-11"]
    assert history_of(folder, "bench") == history_of(folder)


def test_the_drift_is_told_in_joint_uncertainty(folder: Path) -> None:
    trends = {trend.name: trend for trend in trends_of(history_of(folder))}
    assert list(trends) == ["incident bar: wave speed", "incident gauge factor"]
    speed, factor = trends.values()
    assert speed.unit == "m/s"
    assert [point.date for point in speed.points] == ["2030-02-01", "2031-02-03", "2031-08-11"]
    first, second = speed.drifts
    assert first.relative == pytest.approx(2e-4)
    assert first.in_u is None  # nobody knows the u of one of them
    assert second.in_u is None
    assert speed.scatter == pytest.approx(math.sqrt(7 / 3))  # of 0, 1, 3
    # The calibration between did not measure the factor: the step is from the first to the third.
    (step,) = factor.drifts
    assert (step.earlier.date, step.later.date) == ("2030-02-01", "2031-08-11")
    assert step.in_u == pytest.approx(0.01 / 0.005)  # 3-4-5
    assert step.changed == ("gain",)


def test_two_of_one_day_stand_by_name(folder: Path) -> None:
    again = calibration("2031-08-11", Q(5004.0, 3.0), None)
    write_calibration(again, free_name(folder, again.name))
    speed = trends_of(history_of(folder))[0]
    assert speed.drifts[-1].in_u == pytest.approx(1 / math.hypot(3, 3))


def test_calibrations_of_two_rigs_are_not_mixed(folder: Path) -> None:
    other = Calibration(name="o", rig="other", date="2031-01-01", holds_days=100)
    write_calibration(other, folder / "other.toml")
    with pytest.raises(InputError, match=r"calibrations of 2 rigs: .*Name one of them"):
        history_of(folder)
    assert [one.name for one in history_of(folder, "other")] == ["o"]
    with pytest.raises(InputError, match="no calibration of the rig third. There are some of"):
        history_of(folder, "third")


def test_a_damaged_calibration_is_no_silent_gap(folder: Path) -> None:
    path = folder / "bench_2031-02-03.toml"
    path.write_text(path.read_text().replace("wave_speed_m_s", "wave_speed"))
    with pytest.raises(FileMistakes, match=r"bench_2031-02-03.toml"):
        history_of(folder)


def test_a_folder_without_any(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="there is no calibration"):
        history_of(tmp_path)
    with pytest.raises(InputError, match="no such folder"):
        history_of(tmp_path / "none")
