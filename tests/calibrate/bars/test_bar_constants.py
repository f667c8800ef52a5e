"""Wave speed, Poisson's ratio and gauge positions of records whose truth is known by hand (exact phases, own signs)."""

from __future__ import annotations

import csv
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from shpb.calibrate.bars.arrival_speed import arrival_wave_speed
from shpb.calibrate.bars.bar_constants import BarConstants, bar_constants
from shpb.calibrate.bars.constants_words import findings_of_bar
from shpb.calibrate.bars.mode_table import mode_at
from shpb.calibrate.session import BarEnd, ShotKind
from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.rig.rig import Rig
from shpb.wave.pochhammer import first_mode_at_frequency
from tests.calibrate.fired import bar, fired, gauge, lab, shunted
from tests.calibrate.runs import (
    C0,
    INTERVAL_S,
    LENGTH_M,
    NU,
    STATION_M,
    U_LENGTH_M,
    U_STATION_M,
    Run,
    run_record,
    run_rig,
)

MATERIALS = Path(__file__).parents[2] / "published" / "reference" / "bar_materials.csv"
SPEED, POISSON = "incident bar: wave speed", "incident bar: Poisson's ratio"
POSITION = "incident gauge distance"


def measured(run: Run, rig: Rig | None = None) -> BarConstants:
    rig = rig or run_rig(run.station_m)
    return bar_constants([run_record(run, rig)], rig)


def value(found: BarConstants, name: str) -> Quantity:
    (determination,) = found.determinations
    return determination.quantity(name)


# --- one bar ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("noise", [0.0, 0.003, 0.01], ids=["clean", "50 dB", "40 dB"])
@pytest.mark.parametrize("at_specimen", [False, True])
def test_wave_speed_and_poisson_s_ratio(noise: float, at_specimen: bool) -> None:
    """The rig file says 4950 m/s and 0.30: neither takes part."""
    found = measured(Run(noise=noise, at_specimen=at_specimen))
    speed, poisson = value(found, SPEED), value(found, POISSON)
    assert speed == pytest.approx(C0, rel=2e-4)
    # No better than the length of the bar: 0.3 mm in 1.8 m.
    assert speed.u == pytest.approx(C0 * U_LENGTH_M / LENGTH_M, rel=0.3)
    assert poisson == pytest.approx(NU, abs=0.01)
    assert poisson.u is not None
    assert 1e-4 < poisson.u < 0.012
    assert found.findings == ()


def test_a_sample_more_on_the_way_is_seen() -> None:
    """Everything after the first passage comes one sample late: 0.5 us in up to 1080 us, and not by chance."""
    right, late = (measured(Run(late_s=late)) for late in (0.0, INTERVAL_S))
    # Alone, the way of 1080 us would say c0 0.046 % low, a round trip after that nothing; the distance takes some.
    change = value(late, SPEED) / value(right, SPEED) - 1
    assert -6e-4 < change < -2.5e-4
    # That is more than the other tests allow.
    assert value(late, SPEED) / C0 - 1 < -2e-4


def test_figures_get_the_curve_that_was_measured() -> None:
    found = measured(Run(noise=0.001)).bars["incident"]
    frequency = found.frequency_hz
    assert frequency[0] > 3e3
    assert found.band_hz == (frequency[0], frequency[-1])
    assert frequency[-1] * 0.01 / C0 <= 0.25
    assert frequency[-1] > 80e3
    exact = C0 * first_mode_at_frequency(frequency * 0.01 / C0, NU).phase_speed
    assert found.fitted_m_s == pytest.approx(exact, rel=1e-3)
    pulls = (found.phase_speed_m_s - found.fitted_m_s) / found.u_phase_speed_m_s
    assert np.abs(pulls).max() < 4.5
    assert 0.3 < pulls.std() < 1.6
    # Dispersion is there: at the end of the band waves are 3 % slower at least.
    assert found.phase_speed_m_s[-1] < 0.97 * found.phase_speed_m_s[1]
    assert found.passages == 4
    assert 0.4 < found.misfit / found.freedom < 3.0
    modulus = found.young_modulus_pa
    assert modulus == pytest.approx(8000.0 * C0**2, rel=1e-3)
    assert modulus.u is not None
    assert modulus.u / modulus == pytest.approx(np.hypot(4 / 8000, 2 * U_LENGTH_M / LENGTH_M), rel=0.3)


def test_several_shots_and_a_second_station_agree() -> None:
    stations = (STATION_M, 0.7)
    rig = run_rig(stations)
    shots = [run_record(Run(station_m=stations, seed=seed, noise=0.01), rig) for seed in (1, 2, 3)]
    found = bar_constants(shots, rig)
    assert found.bars["incident"].passages == 3 * 8
    assert value(found, SPEED) == pytest.approx(C0, rel=2e-4)
    (determination,) = found.determinations
    assert "incident gauge 2 distance" in determination.names
    # All lengths err together: c0 by the bar's length, and the stations with it.
    assert determination.correlation(SPEED, "incident gauge 2 distance") > 0.15
    assert np.linalg.eigvalsh(determination.covariance).min() > 0


def test_the_transmitted_bar_alone() -> None:
    rig = lab(transmitted_bar=bar(material="another", length_m=Quantity(1.6, 2e-4)))
    one = fired(rig, "BA-T", ShotKind.BARS_APART, bar="transmitted", struck_end=BarEnd.SPECIMEN, samples=2600)
    found = bar_constants([one], rig)
    assert set(found.bars) == {"transmitted"}
    assert value(found, "transmitted bar: wave speed") == pytest.approx(5000.0, rel=3e-4)


# --- positions ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("off_mm", "words"), [(2.0, "farther from"), (-2.0, "nearer to")])
def test_a_station_elsewhere_is_found_and_named(off_mm: float, words: str) -> None:
    true = STATION_M + 1e-3 * off_mm
    found = measured(Run(station_m=(true,)), run_rig((STATION_M,)))
    (finding,) = found.findings
    assert finding.check == "gauge position"
    assert f"2.0 mm {words} the specimen" in finding.measured
    assert value(found, POSITION) == pytest.approx(true, abs=3e-4)
    assert value(found, SPEED) == pytest.approx(C0, rel=3e-4)


def test_a_station_where_it_should_be_is_known_better_afterwards() -> None:
    found = measured(Run(station_m=(STATION_M + 0.4e-3,)), run_rig((STATION_M,)))
    assert found.findings == ()
    position = value(found, POSITION)
    assert position.u is not None
    assert position.u < 0.5 * U_STATION_M
    assert position == pytest.approx(STATION_M + 0.4e-3, abs=3e-4)


def test_two_passages_say_nothing_of_a_distance() -> None:
    found = measured(Run(samples=1500))
    assert found.bars["incident"].passages == 2
    assert POSITION not in found.determinations[0].names
    # One way, 2 x: c0 is as well known as x.
    speed = value(found, SPEED)
    assert speed == pytest.approx(C0, rel=5e-4)
    assert speed.u == pytest.approx(C0 * U_STATION_M / STATION_M, rel=0.2)


# --- two bars -----------------------------------------------------------------------------------------------------


def test_bars_of_one_stock_share_their_values() -> None:
    rig = lab()
    shots = [
        fired(rig, "BA-I", ShotKind.BARS_APART),
        fired(rig, "BA-T", ShotKind.BARS_APART, bar="transmitted", struck_end=BarEnd.SPECIMEN),
    ]
    found = bar_constants(shots, rig)
    (determination,) = found.determinations
    names = SPEED, "transmitted bar: wave speed"
    assert value(found, names[0]) == value(found, names[1]) == pytest.approx(5000.0, rel=2e-4)
    assert determination.correlation(*names) == pytest.approx(1.0)


def test_bars_called_one_stock_that_are_two_are_told_apart() -> None:
    stated = lab()
    true = replace(
        stated, transmitted_bar=replace(stated.transmitted_bar, wave_speed_m_s=Quantity(5020.0, 1.0))
    )
    shots = [
        fired(true, "BA-I", ShotKind.BARS_APART),
        fired(true, "BA-T", ShotKind.BARS_APART, bar="transmitted", struck_end=BarEnd.SPECIMEN),
    ]
    found = bar_constants(shots, stated)
    assert [finding.check for finding in found.findings] == ["one stock"]
    assert value(found, SPEED) == pytest.approx(5000.0, rel=3e-4)
    assert value(found, "transmitted bar: wave speed") == pytest.approx(5020.0, rel=3e-4)


def test_bars_together_serve_the_bar_that_was_not_struck_alone() -> None:
    rig = lab(transmitted_bar=bar(material="another", length_m=Quantity(1.6, 2e-4)))
    shots = [
        fired(rig, "BA-I", ShotKind.BARS_APART),
        *(fired(rig, f"BT-{n}", ShotKind.BARS_TOGETHER, seed=n) for n in (1, 2)),
    ]
    found = bar_constants(shots, rig)
    assert value(found, SPEED) == pytest.approx(5000.0, rel=3e-4)
    assert value(found, "transmitted bar: wave speed") == pytest.approx(5000.0, rel=5e-4)
    assert value(found, "transmitted bar: wave speed").u > value(found, SPEED).u  # type: ignore[operator]


def test_what_the_shots_do_not_determine_is_said() -> None:
    """Two unknown bars and one way through both: no wave speed."""
    rig = lab(transmitted_bar=bar(material="another", length_m=Quantity(1.6, 2e-4)))
    found = bar_constants([fired(rig, "BT-1", ShotKind.BARS_TOGETHER, samples=1600)], rig)
    assert SPEED not in {name for one in found.determinations for name in one.names}
    assert any("strike this bar alone" in remark for remark in found.remarks)


# --- doubt and refusal ----------------------------------------------------------------------------------------------


def test_a_wave_speed_far_from_the_stated_modulus_is_grave() -> None:
    rig = run_rig(stated_modulus_pa=Quantity(215e9, 2e9))  # sqrt(215e9/8000) = 5184 m/s
    found = measured(Run(), rig)
    (finding,) = found.findings
    assert finding.grave
    assert "215.0 GPa" in finding.measured
    assert "-3.6 %" in finding.measured
    assert measured(Run(), run_rig(stated_modulus_pa=Quantity(205e9, 2e9))).findings == ()


def test_passages_that_differ_are_a_finding() -> None:
    found = measured(Run(stray=0.05))
    (finding,) = found.findings
    assert finding.check == "passages against each other"
    assert not finding.grave
    share = float(finding.measured.split("by ")[1].split(" %")[0])
    assert 1.0 < share < 5.0


def test_handbook_bars_go_with_their_moduli() -> None:
    """Rows of a table of bar materials: c0 of each goes with its modulus and density, and with no other by chance."""
    lines = [line for line in MATERIALS.read_text().splitlines() if not line.startswith("#")]
    rows = {row["material"]: row for row in csv.DictReader(lines)}
    assert len(rows) > 8
    for name, row in rows.items():
        density, modulus, c0 = float(row["rho"]), 1e9 * float(row["E"]), float(row["c0"])
        one = bar(density_kg_m3=Quantity(density), stated_modulus_pa=Quantity(modulus),
                  wave_speed_m_s=Quantity((modulus / density) ** 0.5))  # fmt: skip
        assert findings_of_bar("incident", one, Quantity(c0, 1.0)) == [], name
        (above,) = findings_of_bar("incident", one, Quantity(1.035 * c0, 1.0))
        assert above.grave
        assert "+3.5 %" in above.measured
    maraging, steel = rows["maraging steel C300"], rows["AISI 4340 steel"]
    taken = bar(density_kg_m3=Quantity(float(maraging["rho"])),
                stated_modulus_pa=Quantity(1e9 * float(maraging["E"])))  # fmt: skip
    assert findings_of_bar("incident", taken, Quantity(float(steel["c0"]), 1.0))


@pytest.mark.parametrize("rise_s", [40e-6, 80e-6])
def test_a_shaped_pulse_still_gives_the_wave_speed(rise_s: float) -> None:
    found = measured(Run(rise_s=rise_s, pulse_s=120e-6, noise=0.005))
    assert value(found, SPEED) == pytest.approx(C0, rel=5e-4)
    assert found.findings == ()


def test_lengths_without_uncertainty_are_assumed_and_said() -> None:
    rig = run_rig()
    bare = replace(rig, incident_bar=replace(rig.incident_bar, length_m=Quantity(LENGTH_M)))
    found = measured(Run(), bare)
    assert any("incident bar's length" in remark and "0.1 %" in remark for remark in found.remarks)
    # The way 2 x says c0 as well as x is known, a round trip as well as L; both together by their variances.
    expected = 1 / np.hypot(1 / 1e-3, STATION_M / U_STATION_M)
    assert value(found, SPEED).u == pytest.approx(expected * C0, rel=0.05)


def test_a_band_too_short_for_poisson_s_ratio_leaves_it_as_stated() -> None:
    rig = run_rig()
    one = run_record(Run(), rig)
    # A slow amplifier and much noise.
    volts = np.fft.rfft(one.record.voltage_v, axis=1)
    frequency = np.fft.rfftfreq(one.record.samples, INTERVAL_S)
    slow = np.fft.irfft(volts * np.exp(-((frequency / 4e3) ** 2)), one.record.samples, axis=1)
    noise = 4e-2 * np.abs(slow).max() * np.random.default_rng(3).standard_normal(slow.shape)
    slowed = replace(one, record=replace(one.record, voltage_v=slow + noise))
    found = bar_constants([slowed], rig)
    assert POISSON not in found.determinations[0].names
    assert found.bars["incident"].poisson_ratio is None
    assert any("Poisson's ratio" in remark for remark in found.remarks)
    assert value(found, SPEED) == pytest.approx(C0, rel=1e-3)


def test_wrong_sessions_are_refused() -> None:
    rig = run_rig()
    one = run_record(Run(), rig)
    with pytest.raises(InputError, match="byte for byte"):
        bar_constants([one, replace(one, shot=replace(one.shot, shot_id="BA-2"))], rig)
    with pytest.raises(InputError, match="no shot shows a wave speed"):
        bar_constants([shunted(lab(), "SH", "incident_gauge", 174_650.0)], rig)
    elsewhere = replace(rig, incident_gauge=gauge("CH9", STATION_M))
    with pytest.raises(InputError, match="CH9"):
        bar_constants([one], elsewhere)


# --- odds, and what it is compared with -------------------------------------------------------------------------------


@cache
def pulls() -> dict[str, np.ndarray]:
    """Errors by their standard uncertainties, length and distance drawn from what the rig file states."""
    random, rig = np.random.default_rng(20310203), run_rig()
    found: dict[str, list[float]] = {SPEED: [], POISSON: [], POSITION: []}
    for number in range(60):
        station = STATION_M + U_STATION_M * random.standard_normal()
        length = LENGTH_M + U_LENGTH_M * random.standard_normal()
        run = Run(length_m=length, station_m=(station,), seed=1000 + number, noise=0.004)
        one = measured(run, rig)
        for name, true in ((SPEED, C0), (POISSON, NU), (POSITION, station)):
            quantity = value(one, name)
            assert quantity.u is not None
            found[name].append((quantity - true) / quantity.u)
    return {name: np.array(values) for name, values in found.items()}


@pytest.mark.slow
def test_intervals_hold_the_truth_as_often_as_they_say() -> None:
    for name, values in pulls().items():
        held = float((np.abs(values) < 1.96).mean())
        assert held >= 0.88, name
        assert abs(values.mean()) < 0.5, name
    speed = pulls()[SPEED]
    assert 0.90 <= float((np.abs(speed) < 1.96).mean()) <= 0.99
    assert 0.75 < speed.std() < 1.25


def test_cross_correlation_is_low() -> None:
    rig = run_rig()
    found = arrival_wave_speed(run_record(Run(noise=0.001), rig), rig)
    assert found.path_m == pytest.approx(3 * LENGTH_M)
    assert -6e-3 < found.by_correlation_m_s / C0 - 1 < -1e-3
    assert found.by_foot_m_s == pytest.approx(C0, rel=6e-3)
    with pytest.raises(InputError, match="bars apart"):
        arrival_wave_speed(fired(lab(), "BT-1", ShotKind.BARS_TOGETHER), lab())


def test_the_table_of_the_mode_is_the_mode() -> None:
    fa_c0 = np.linspace(0.0, 0.3, 301)
    for nu in (0.2, 0.29, 0.345):
        table, exact = mode_at(fa_c0, nu), first_mode_at_frequency(fa_c0, nu)
        assert table.slowness == pytest.approx(1 / exact.phase_speed, rel=1e-8)
        assert table.group_slowness == pytest.approx(1 / exact.group_speed, rel=1e-6)
    # Published check value, nu 0.29 (published table, Bancroft's equation): c/c0 at f a/c0 = 0.10.
    assert 1 / mode_at(np.array([0.10]), 0.29).slowness[0] == pytest.approx(0.99095463, abs=2e-8)
