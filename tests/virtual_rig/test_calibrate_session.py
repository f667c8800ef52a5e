"""``shpb calibrate`` from files to file on the independent simulation, its rig file wrong by what is stated of it."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from shpb.cli.main import main
from shpb.rig.calibration import Calibration
from shpb.rig.calibration_file import read_calibration
from shpb.rig.rig_file import read_rig
from tests.virtual_rig.conftest import DATA

OFF = 1.004  # the stated wave speed by the true one


def bar(facts: dict[str, float], length_m: float, table: str) -> str:
    c0 = (facts["E_Pa"] / facts["density_kg_m3"]) ** 0.5
    return f"""
[{table}]
material = "steel"
diameter_m = {facts["diameter_m"]}
length_m = {{ value = {length_m}, u = 0.0001 }}
density_kg_m3 = {{ value = {facts["density_kg_m3"]}, u = 5 }}
wave_speed_m_s = {{ value = {OFF * c0:.2f}, u = 20 }}
poisson_ratio = 0.30
"""


def gauge(channel: dict[str, float], name: str, distance_m: float, table: str) -> str:
    return f"""
[{table}]
to_specimen_m = {{ value = {distance_m:.6f}, u = 0.0001 }}
channel = "{name}"
gauge_factor = {{ value = {channel["gauge_factor"]}, u_percent = 1 }}
excitation_V = {{ value = {channel["excitation_V"]}, u_percent = 0.5 }}
gain = {{ value = {channel["amplifier_gain"]}, u_percent = 0.5 }}
arrangement = "half-opposite"
voltage_under_compression = "negative"
output_proportional_to_strain = true
gauge_length_mm = 2
bandwidth_MHz = 1
"""


def calibrated(case: str, tmp_path: Path, *, noisy: bool) -> tuple[Calibration, float]:
    facts = json.loads((DATA / case / "facts.json").read_text())
    bars, channels, striker = facts["bars"], facts["channels"], facts["striker"]
    text = f'[rig]\nname = "{case}"\n'
    if case == "plain-bar":
        length = bars["length_m"]
        text += bar(bars, length, "incident_bar") + bar(bars, length, "transmitted_bar")
        for name, table in (("station_A", "incident_gauge"), ("station_B", "incident_gauge_2")):
            away = length - channels[name]["distance_from_impact_end_m"]
            text += gauge(channels[name], f"{name}_V", away, table)
        text += gauge(channels["station_A"], "not connected", 0.6, "transmitted_gauge")
    else:
        for side in ("incident", "transmitted"):
            text += bar(bars, bars[f"{side}_length_m"], f"{side}_bar")
            away = channels[side]["distance_to_specimen_face_m"]
            text += gauge(channels[side], f"{side}_V", away, f"{side}_gauge")
    text += f"""
[striker]
length_m = {striker["length_m"]}
diameter_m = {striker["diameter_m"]}
density_kg_m3 = {bars["density_kg_m3"]}
wave_speed_m_s = 5100
"""
    (tmp_path / "rig.toml").write_text(text)
    record = DATA / case / ("record_noisy.csv" if noisy else "record.csv")
    (tmp_path / "session.toml").write_text(
        f"""
[calibration]
date = 2031-01-01
rig = "rig.toml"
name = "found"
[[shot]]
id = "A"
kind = "{"bars-apart" if case == "plain-bar" else case}"
record = "{record.as_posix()}"
striker_speed_m_s = {{ value = {striker["velocity_m_s"]}, u = 0.01 }}
"""
    )
    assert main(["calibrate", str(tmp_path / "session.toml"), "--figure", "none"]) == 0
    return read_calibration(tmp_path / "found.toml"), (bars["E_Pa"] / bars["density_kg_m3"]) ** 0.5


@pytest.mark.parametrize("case", ["plain-bar", "bars-together"])
def test_wave_speed_and_sensitivities_from_files_to_file(case: str, noisy: bool, tmp_path: Path) -> None:
    found, c0 = calibrated(case, tmp_path, noisy=noisy)
    for one in found.bars.values():
        assert one.wave_speed_m_s == pytest.approx(c0, rel=2e-4)
        assert one.poisson_ratio == pytest.approx(0.285, abs=0.005)
    stations = ("incident_gauge", "incident_gauge_2" if case == "plain-bar" else "transmitted_gauge")
    assert set(found.gauges) >= set(stations)
    for name in stations:
        gauge_found = found.gauges[name]
        stated = gauge_found.as_stated["gauge_factor"]
        assert isinstance(stated, float)
        assert gauge_found.gauge_factor == pytest.approx(
            stated, rel=1.5e-3
        )  # the simulated chains are as stated
        assert gauge_found.gauge_factor is not None
        assert gauge_found.gauge_factor.u is not None
        assert gauge_found.gauge_factor.u / stated < 0.004
    # Both bars are of one stock: the budget knows their values by one name, and each pair is said once.
    pairs = [frozenset((one.first, one.second)) for one in found.correlations]
    assert len(pairs) == len(set(pairs))
    assert frozenset(("bars: wave speed", "incident gauge factor")) in pairs
    rig_file = tmp_path / "rig.toml"
    text = rig_file.read_text().replace("[rig]\n", '[rig]\ncalibration = "found.toml"\n')
    rig_file.write_text(text)
    assert read_rig(rig_file).incident_bar.wave_speed_m_s == pytest.approx(c0, rel=2e-4)
