"""Stored shots and their calibration: kept with the shot, and exchanged for another without touching the result."""

from __future__ import annotations

import dataclasses
import json
from pathlib import Path

import h5py
import numpy as np
import pytest

from shpb.errors import InputError, StoreError
from shpb.quantity import Quantity
from shpb.record.record import Record, Source
from shpb.reduction import ShotResult, draw_shot, reduce
from shpb.rig.calibration import BarCalibration, Calibration, GaugeCalibration, stated_of
from shpb.rig.calibration_file import read_calibration, write_calibration
from shpb.rig.propagation_table import PropagationTable
from shpb.rig.rig import Rig
from shpb.rig.rig_file import read_rig
from shpb.store.plain import from_plain, to_plain
from shpb.store.recalibrated import OtherRigError, recalibrate, reduced_with, stated_rig
from shpb.store.shot_file import load, save_shot
from shpb.trust.finding import Weight
from shpb.view.figure import shot_figure
from shpb.view.summary import shot_json
from shpb.view.terminal import shot_text
from tests.synthetic import copper, record_of, sheet, uniform_plastic_shot

Q = Quantity

# The rig of tests.synthetic as a file.
BAR = (
    'material = "steel"\ndiameter_mm = 20\nlength_m = 2\ndensity_kg_m3 = 8000\nwave_speed_m_s = 5000\n'
    "poisson_ratio = 0.29\n"
)
GAUGE = (
    'channel = "{}"\nto_specimen_m = {}\narrangement = "half-opposite"\ngauge_factor = 2.1\nexcitation_V = 5\n'
    'gain = 200\nvoltage_under_compression = "negative"\n'
)
RIG = (
    f'[rig]\nname = "closed form"\n{{}}\n[incident_bar]\n{BAR}[transmitted_bar]\n{BAR}'
    f"[incident_gauge]\n{GAUGE.format('A', 1.0)}[transmitted_gauge]\n{GAUGE.format('B', 0.6)}"
    "[striker]\nlength_mm = 300\n"
)


def rig_at(folder: Path, calibration: str = "") -> Rig:
    named = f'calibration = "{calibration}"' if calibration else 'calibration_date = "2031-01-01"'
    path = folder / "rig.toml"
    path.write_text(RIG.format(named), encoding="utf-8")
    return read_rig(path)


def calibration_at(folder: Path, name: str, **changes: object) -> Calibration:
    """A transmitted chain that reads 2 % low by the rig file: its true factor is 2.1/1.02."""
    values: dict[str, object] = {
        "name": name,
        "rig": "closed form",
        "date": "2031-02-03",
        "holds_days": 365,
        "gauges": {"transmitted_gauge": GaugeCalibration(gauge_factor=Q(2.1 / 1.02, 0.004, "lines"))},
    }
    made = Calibration(**{**values, **changes})  # type: ignore[arg-type]
    return read_calibration(write_calibration(made, folder / f"{name}.toml"))


@pytest.fixture(scope="module", name="record")
def _record(tmp_path_factory: pytest.TempPathFactory) -> Record:
    lab = rig_at(tmp_path_factory.mktemp("rig"))
    faces, _ = uniform_plastic_shot(lab, copper(), interval_s=5e-7)
    source = Source(name="b.csv", sha256="ab" * 32, size_bytes=10, reader="text")
    return dataclasses.replace(record_of(faces, lab, noise_v=0.002), sources=(source,))


def reduced(record: Record, lab: Rig) -> ShotResult:
    return reduce(record, lab, sheet())


def test_the_calibration_is_kept_with_the_shot_word_for_word(record: Record, tmp_path: Path) -> None:
    table = PropagationTable(
        frequency_hz=(1e3, 2e3, 3e3, 1e5 / 3),
        attenuation_per_m=(0.0, 0.1, 0.2, 1 / 3),
        phase_speed_m_s=(5e3, 5e3, 5e3, 5e3),
        u_attenuation_per_m=(0.1, 0.1, 0.1, 0.1),
        u_phase_speed_m_s=(1.0, 1.0, 1.0, 1.0),
        coherence=(1.0, 1.0, 1.0, 0.9),
    )
    calibration_at(tmp_path, "spring")
    lab = rig_at(tmp_path, "spring.toml")
    path = save_shot(reduced(record, lab), tmp_path / "s.h5")
    stored = load(path)
    assert stored.rig == lab
    assert stored.rig.calibration is not None
    factor = stored.rig.calibration.gauges["transmitted_gauge"].gauge_factor
    assert factor is not None
    assert (float(factor), factor.u, factor.origin) == (2.1 / 1.02, 0.004, "lines")
    with h5py.File(path) as file:
        kept = file["rig/calibration_file"]
        assert kept[()].decode() == (tmp_path / "spring.toml").read_text(encoding="utf-8")
        assert kept.attrs["name"] == "spring"
        assert kept.attrs["sha256"] == stored.rig.calibration.sha256
    # A table of propagation and departures come back too.
    whole = dataclasses.replace(
        stored.rig,
        transmitted_bar=dataclasses.replace(lab.transmitted_bar, propagation=table),
        name="renamed",
    )
    moved = whole.calibrated(stored.rig.calibration)
    back = from_plain(Rig, json.loads(json.dumps(to_plain(moved))))
    assert back == moved
    assert back.departures[0].key == "name"
    assert back.transmitted_bar.propagation == table


def test_a_file_from_before_calibrations_still_loads(record: Record, tmp_path: Path) -> None:
    path = save_shot(reduced(record, rig_at(tmp_path)), tmp_path / "s.h5")
    with h5py.File(path, "r+") as file:
        old = json.loads(file["rig/rig_as_used"][()])
        for name in ("calibration", "departures"):
            del old[name]
        del file["rig/rig_as_used"]
        file["rig/rig_as_used"] = json.dumps(old)
    stored = load(path)
    assert stored.rig.calibration is None
    assert reduced_with(stored, calibration_at(tmp_path, "c")).rig.calibration is not None


def test_text_json_and_figure_name_the_calibration(record: Record, tmp_path: Path) -> None:
    calibration_at(tmp_path, "spring")
    result = reduced(record, rig_at(tmp_path, "spring.toml"))
    assert "Calibration   spring of 2031-02-03, rig closed form." in shot_text(result).splitlines()
    said = shot_json(result)["inputs"]["calibration"]
    assert (said["name"], said["date"], said["holds_days"]) == ("spring", "2031-02-03", 365)
    assert said["sha256"] == result.rig.calibration.sha256
    texts = [text.get_text() for text in shot_figure(result).texts]
    assert any("calibration spring of 2031-02-03" in text for text in texts)
    without = reduced(record, rig_at(tmp_path))
    assert "Calibration  " not in shot_text(without)
    assert shot_json(without)["inputs"]["calibration"] is None


def test_a_gauge_that_read_low_raises_stress_and_leaves_strain(record: Record, tmp_path: Path) -> None:
    earlier = save_shot(reduced(record, rig_at(tmp_path)), tmp_path / "s.h5")
    before = earlier.read_bytes()
    result, compared = recalibrate(earlier, calibration_at(tmp_path, "spring"), tmp_path / "new" / "s.h5")
    # One-wave stress is force over area: all of it by 2 %. Equal bars: strain and rate come from the reflected pulse.
    stored = load(earlier)
    stress, now = stored["response/stress_1w"], result.response.one_wave.stress_pa
    np.testing.assert_allclose(now, 1.02 * stress, rtol=1e-9, atol=1.0)
    assert compared.flow_stress_change == pytest.approx(
        0.02, abs=5e-4
    )  # read at plastic strain, which shifts a little
    assert compared.rate_change == pytest.approx(0.0, abs=1e-9)
    assert compared.strain_change == pytest.approx(0.0, abs=1e-3)
    assert (compared.before.calibration, compared.before.date) == ("", "2031-01-01")
    assert compared.after.calibration == "spring"
    assert earlier.read_bytes() == before
    assert load(tmp_path / "new" / "s.h5").rig.calibration_date == "2031-02-03"


def test_a_wave_speed_scales_rate_and_stress(record: Record, tmp_path: Path) -> None:
    # Rate is 2 c e_R/L, stress E A e_T/A_s with E = rho c^2: +0.2 % and +0.4 %.
    bars = {
        side: BarCalibration(wave_speed_m_s=Q(5010.0, 1.0)) for side in ("incident_bar", "transmitted_bar")
    }
    by = calibration_at(tmp_path, "c", gauges={}, bars=bars)
    earlier = save_shot(reduced(record, rig_at(tmp_path)), tmp_path / "s.h5")
    result, compared = recalibrate(earlier, by, tmp_path / "new" / "s.h5")
    stored, response = load(earlier), result.response
    # Impulse and final strain: dispersion and low-pass leave the area under a pulse as it is.
    for name, now, share in (
        ("stress_1w", response.one_wave.stress_pa, 1.004004),
        ("strain_rate_1w", response.one_wave.strain_rate_per_s, 1.002),
    ):
        assert now.sum() / stored[f"response/{name}"].sum() == pytest.approx(share, abs=3e-4), name
    # The reflected pulse comes 0.8 us earlier too, along a rate that falls by some 20 % in 100 us.
    assert 0.002 < compared.rate_change < 0.005


def test_a_shot_that_used_a_calibration_is_taken_back_first(record: Record, tmp_path: Path) -> None:
    first = calibration_at(
        tmp_path,
        "first",
        gauges={"incident_gauge": GaugeCalibration(gauge_factor=Q(2.2, 0.01), to_specimen_m=Q(1.001, 1e-4))},
    )
    second = calibration_at(tmp_path, "second")
    plain = save_shot(reduced(record, rig_at(tmp_path)), tmp_path / "plain.h5")
    once = save_shot(reduced(record, rig_at(tmp_path, "first.toml")), tmp_path / "once.h5")
    assert load(once).rig.calibration == first
    back = stated_rig(load(once))
    assert back.incident_gauge.gauge_factor == 2.1  # nothing of the first one is left
    assert back.incident_gauge.to_specimen_m == 1.0
    by_plain, by_once = (recalibrate(path, second, tmp_path / "new" / path.name)[0] for path in (plain, once))
    np.testing.assert_array_equal(
        by_plain.response.curve.true_stress_pa, by_once.response.curve.true_stress_pa
    )
    np.testing.assert_array_equal(by_plain.response.curve.true_strain, by_once.response.curve.true_strain)
    # To and fro: by the first again it is the first result, bit for bit.
    again, _ = recalibrate(tmp_path / "new" / "once.h5", first, tmp_path / "again" / "once.h5")
    np.testing.assert_array_equal(load(once)["response/true_stress"], again.response.curve.true_stress_pa)


def test_a_gauge_that_was_changed_before_is_a_finding(record: Record, tmp_path: Path) -> None:
    lab = rig_at(tmp_path)
    as_it_was = {**stated_of(lab.transmitted_gauge), "gain": 100.0}
    gauges = {"transmitted_gauge": GaugeCalibration(gauge_factor=Q(2.1), as_stated=as_it_was)}
    earlier = save_shot(reduced(record, lab), tmp_path / "s.h5")
    _, compared = recalibrate(
        earlier, calibration_at(tmp_path, "c", gauges=gauges), tmp_path / "new" / "s.h5"
    )
    assert "calibration matches" in compared.after.reasons
    stored = load(tmp_path / "new" / "s.h5")
    assert next(f for f in stored.findings if f.check == "calibration matches").weight is Weight.REJECT


def test_draws_are_drawn_again_from_the_same_seed(record: Record, tmp_path: Path) -> None:
    result = draw_shot(reduced(record, rig_at(tmp_path)), 300, seed=9)
    earlier = save_shot(result, tmp_path / "s.h5")
    recalibrate(earlier, calibration_at(tmp_path, "c"), tmp_path / "new" / "s.h5")
    drawn = load(tmp_path / "new" / "s.h5").attributes["trust/draws"]
    assert (drawn["draws"], drawn["seed"]) == (300, 9)


def test_another_rig_and_other_results_are_left_alone(record: Record, tmp_path: Path) -> None:
    earlier = save_shot(reduced(record, rig_at(tmp_path)), tmp_path / "s.h5")
    spring = calibration_at(tmp_path, "spring")
    with pytest.raises(
        OtherRigError, match="fired on the rig closed form, while the calibration is of another"
    ):
        recalibrate(earlier, calibration_at(tmp_path, "o", rig="another"), tmp_path / "new" / "s.h5")
    with pytest.raises(StoreError, match="over the earlier one"):
        recalibrate(earlier, spring, earlier)
    target = tmp_path / "new" / "s.h5"
    recalibrate(earlier, spring, target)
    recalibrate(earlier, spring, target)  # the same again may stand there
    before = target.read_bytes()
    summer = calibration_at(tmp_path, "summer", date="2031-08-11")
    with pytest.raises(StoreError, match="a result by the calibration spring stands there"):
        recalibrate(earlier, summer, target)
    save_shot(reduced(record, rig_at(tmp_path)), tmp_path / "taken" / "s.h5")
    with pytest.raises(StoreError, match="a result by the values of the rig file stands there"):
        recalibrate(earlier, summer, tmp_path / "taken" / "s.h5")
    assert target.read_bytes() == before


def test_a_calibrated_rig_without_its_file_cannot_be_taken_back(record: Record, tmp_path: Path) -> None:
    calibration_at(tmp_path, "spring")
    lab = dataclasses.replace(rig_at(tmp_path, "spring.toml"), text="")
    earlier = save_shot(reduced(record, lab), tmp_path / "s.h5")
    with pytest.raises(StoreError, match="what the rig file stated is not stored"):
        recalibrate(earlier, calibration_at(tmp_path, "c"), tmp_path / "new" / "s.h5")


def test_a_calibration_that_puts_a_gauge_off_its_bar_is_refused(record: Record, tmp_path: Path) -> None:
    gauges = {"incident_gauge": GaugeCalibration(to_specimen_m=Q(2.5, 1e-4))}
    earlier = save_shot(reduced(record, rig_at(tmp_path)), tmp_path / "s.h5")
    with pytest.raises(InputError, match="on a bar of 2 m"):
        recalibrate(earlier, calibration_at(tmp_path, "c", gauges=gauges), tmp_path / "new" / "s.h5")
    assert not (tmp_path / "new").exists()
