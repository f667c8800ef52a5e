"""Long shots by stations: what cannot be done says so; the rig file, the command and the shot file."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import numpy as np
import pytest

from shpb.cli.main import main
from shpb.errors import InputError
from shpb.pulse.front import UnusableShotError
from shpb.reduction import ShotResult, draw_shot, reduce
from shpb.rig.rig import Rig
from shpb.rig.rig_file import rig_from_text
from shpb.settings import Settings, Waves
from shpb.store.shot_file import load, save_shot
from shpb.wave.station_waves import station_pulses
from tests.wave.long_shots import Q, fired, long_sheet, record_of_shot

BY_STATIONS = Settings(waves=Waves.STATIONS)


@pytest.fixture(scope="module", name="two")
def _two() -> ShotResult:
    return reduce(record_of_shot(fired()), fired().plan.rig, long_sheet(), BY_STATIONS)


# --- what cannot be done says so --------------------------------------------------------------------


def test_draws_are_refused(two: ShotResult) -> None:
    with pytest.raises(InputError, match="told apart by stations"):
        draw_shot(two, 200)


def bad_rig(how: str) -> Rig:
    rig = fired().plan.rig
    second = rig.more_incident_gauges[0]
    more = {
        "one station": (),
        "one place": (dataclasses.replace(second, to_specimen_m=Q(1.5)),),
        "no channel": (dataclasses.replace(second, channels=("nowhere",)),),
        "window": (second,),
    }[how]
    return dataclasses.replace(rig, more_incident_gauges=more)


@pytest.mark.parametrize(
    ("rows", "said"),
    [
        ((0, 0, 2), "sooner than its distance|later than its distance"),
        ((1, 0, 2), "320 us sooner than its distance.*channels of the two stations"),
        ((0, -1, 2), "incident gauge 2: its first pulse comes out negative"),
        ((0, None, 2), "incident gauge 2: there is no pulse above the noise"),
    ],
)
def test_dead_inverted_and_swapped_stations_are_refused(rows: tuple[int | None, ...], said: str) -> None:
    record = record_of_shot(fired())
    volts = np.stack([
        np.zeros(record.samples) if row is None else -record.voltage_v[1] if row < 0 else record.voltage_v[row]
        for row in rows
    ])  # fmt: skip
    with pytest.raises(UnusableShotError, match=said):
        reduce(dataclasses.replace(record, voltage_v=volts), fired().plan.rig, long_sheet(), BY_STATIONS)


@pytest.mark.parametrize(
    ("how", "said"),
    [
        ("one station", "one gauge station only"),
        (
            "one place",
            "incident_gauge and incident_gauge_2 stand at one place|incident_gauge_2 and incident_gauge stand at one",
        ),
        ("no channel", "nowhere"),
        ("window", "reflected window is set by hand"),
    ],
)
def test_bad_rigs_are_refused(how: str, said: str) -> None:
    by_hand = Settings(waves=Waves.STATIONS, reflected_window_s=(0.001, 0.002))
    settings = by_hand if how == "window" else BY_STATIONS
    with pytest.raises(InputError, match=said):
        reduce(record_of_shot(fired()), bad_rig(how), long_sheet(), settings)


def test_record_that_begins_after_the_front_is_refused() -> None:
    # The front passes 1.5 m at -300 us and 0.7 m at -140 us; with 2.6 m it is there before the record begins.
    late = record_of_shot(fired(), start_s=-250e-6)
    with pytest.raises(UnusableShotError, match="a record that begins on the pulse|no quiet time"):
        reduce(late, fired().plan.rig, long_sheet(), BY_STATIONS)
    truth = fired((0.7, 1.5))
    with pytest.raises(UnusableShotError, match="not seen at rest"):
        reduce(record_of_shot(truth, start_s=-250e-6), truth.plan.rig, long_sheet(), BY_STATIONS)


def test_stations_of_another_clock_are_refused(two: ShotResult) -> None:
    from shpb.pulse.strain import StationStrain, gauge_strain

    strain = gauge_strain(two.record, two.rig, two.sheet.kind, every=True)
    short = strain.more["incident_gauge_2"]
    cut = StationStrain(short.axial[:-5], None, short.voltage_v[:, :-5])
    other = dataclasses.replace(strain, more={"incident_gauge_2": cut})
    with pytest.raises(InputError, match="different numbers of samples"):
        station_pulses(other, two.rig, two.sheet.specimen, BY_STATIONS)


# --- files and the command ---------------------------------------------------------------------------

RIG_FILE = """
[rig]
name = "long bars"
calibration_date = "2031-02-03"

[incident_bar]
material = "steel"
diameter_mm = 20.0
length_mm = 3000.0
density_kg_m3 = 8000.0
wave_speed_m_s = 5000.0
poisson_ratio = 0.29

[transmitted_bar]
material = "steel"
diameter_mm = 20.0
length_mm = 3000.0
density_kg_m3 = 8000.0
wave_speed_m_s = 5000.0
poisson_ratio = 0.29

[incident_gauge]
channel = "I1"
to_specimen_mm = 1500.0
GAUGE

[incident_gauge_2]
channel = "I2"
to_specimen_mm = 700.0
GAUGE

[transmitted_gauge]
channel = "T1"
to_specimen_mm = 1000.0
GAUGE

[striker]
length_mm = 1600.0

[settings]
waves = "stations"
""".replace(
    "GAUGE",
    'gauge_factor = 2.1\nexcitation_V = 5.0\ngain = 200.0\narrangement = "half-opposite"\n'
    'voltage_under_tension = "positive"\nscope_range_V = [-3.0, 3.0]\nscope_bits = 12',
)

SHEET = """
[shot]
id = "L-01"
kind = "compression"
date = "2031-02-17"
rig = "long.toml"
record = "L-01.csv"

[specimen]
material = "soft alloy"
diameter_mm = 10.0
length_mm = 10.0
young_modulus_GPa = 118.0
density_kg_m3 = 8900.0
"""


def test_rig_file_takes_a_long_striker_where_stations_tell_the_waves_apart() -> None:
    assert rig_from_text(RIG_FILE, "long.toml").settings["waves"] is Waves.STATIONS
    with pytest.raises(InputError, match=r"(?s)striker shorter than.*incident_gauge_2"):
        rig_from_text(RIG_FILE.replace('"stations"', '"windows"'), "long.toml")


def test_command_reduces_a_long_shot(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    record = record_of_shot(fired())
    (tmp_path / "long.toml").write_text(RIG_FILE)
    (tmp_path / "L-01.toml").write_text(SHEET)
    time = record.start_s + record.sample_interval_s * np.arange(record.samples)
    table = np.column_stack((time, record.voltage_v.T))
    header = "time (s)," + ",".join(f"{name} (V)" for name in record.channels)
    np.savetxt(tmp_path / "L-01.csv", table, delimiter=",", header=header, comments="", fmt="%.9g")
    assert main(["reduce", str(tmp_path / "L-01.toml"), "--results", str(tmp_path)]) == 0
    said = capsys.readouterr().out
    assert "accept" in said.lower()
    stored = load(tmp_path / "L-01.h5")
    assert stored.settings.waves is Waves.STATIONS
    again = stored.reduce_again()
    np.testing.assert_array_equal(again.response.three_wave.stress_pa, stored["response/stress_3w"])


def test_shot_file_holds_the_separated_waves(two: ShotResult, tmp_path: Path) -> None:
    stored = load(save_shot(two, tmp_path / "two.h5"))
    np.testing.assert_array_equal(stored["pulse/reflected/strain"], two.pulses.reflected.strain)
