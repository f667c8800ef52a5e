"""The folder that the demo writes: complete, readable, the same every time, and nobody's files touched."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from shpb.demo import DemoCampaign, Expected, demo_truth, write_demo
from shpb.errors import InputError
from shpb.record.read import read_record
from shpb.rig.rig_file import read_rig
from shpb.rig.sheet import ShotSheet
from shpb.rig.sheet_file import check_sheet_fits_rig, read_sheet
from shpb.rig.shot_list import read_shot_list


def contents(folder: Path) -> dict[str, bytes]:
    return {str(p.relative_to(folder)): p.read_bytes() for p in folder.rglob("*") if p.is_file()}


def sheets_of(campaign: DemoCampaign) -> dict[str, ShotSheet]:
    listed = read_shot_list(campaign.shot_list)
    written = [read_sheet(shot.sheet) for shot in campaign.shots if shot.sheet is not None]
    return {sheet.shot_id: sheet for sheet in (*written, *listed)}


def test_every_shot_has_a_sheet_or_a_row_and_a_record(campaign: DemoCampaign) -> None:
    sheets = sheets_of(campaign)
    assert sorted(sheets) == sorted(shot.shot.shot_id for shot in campaign.shots)
    assert sum(shot.sheet is None for shot in campaign.shots) >= 4
    assert sum(shot.sheet is not None for shot in campaign.shots) >= 4
    for shot in campaign.shots:
        sheet = sheets[shot.shot.shot_id]
        assert sheet.rig_file is not None
        assert sheet.rig_file.resolve() == shot.rig_file.resolve()
        assert [p.resolve() for p in sheet.record_files] == [p.resolve() for p in shot.record_files]
        check_sheet_fits_rig(sheet, read_rig(sheet.rig_file))
        assert sheet.specimen.diameter_m == pytest.approx(shot.shot.diameter_mm / 1e3)
        assert sheet.temperature_k == pytest.approx(shot.shot.temperature_c + 273.15)


def test_records_read_back_as_they_were_taken(campaign: DemoCampaign) -> None:
    sheets = sheets_of(campaign)
    formats = set()
    for shot in campaign.shots:
        truth = demo_truth(shot.shot.shot_id)
        rig = read_rig(shot.rig_file)
        record = read_record(sheets[shot.shot.shot_id].record_files, rig.record)
        assert record.voltage_v.shape == (2, shot.shot.samples)
        assert record.sample_interval_s == pytest.approx(truth.record_interval_s, rel=1e-6)
        assert record.start_s == pytest.approx(truth.record_start_s, abs=1e-9)
        assert record.channels == (rig.incident_gauge.channels[0], rig.transmitted_gauge.channels[0])
        # Volts of a 12-bit scope over 10 V, to the six decimals that text files hold.
        codes = record.voltage_v / (10 / 4096)
        np.testing.assert_allclose(codes, np.rint(codes), atol=5e-4)
        assert codes.min() >= -2048.001
        assert codes.max() <= 2047.001
        formats.add(shot.shot.format)
    assert len(formats) == 8


def test_voltages_show_the_pulses_where_truth_has_them(campaign: DemoCampaign) -> None:
    # Polarity, gain and clock by the linear bridge, strain = 4 V/(N k U g), N = 2 on bench 1.
    sheets = sheets_of(campaign)
    for shot in campaign.shots:
        if shot.shot.expected is not Expected.GOOD or shot.shot.bench != "bench_1":
            continue
        truth, rig = demo_truth(shot.shot.shot_id), read_rig(shot.rig_file)
        record = read_record(sheets[shot.shot.shot_id].record_files, rig.record)
        for channel, gauge, strain in (
            (0, rig.incident_gauge, truth.incident_strain),
            (1, rig.transmitted_gauge, truth.transmitted_strain),
        ):
            quiet = record.time_s < truth.arrivals_s["incident"] - 40e-6
            volts = record.voltage_v[channel] - record.voltage_v[channel][quiet].mean()
            seen = -2 * volts / (gauge.gauge_factor * gauge.excitation_v * gauge.gain)
            true = np.interp(record.time_s, truth.time_s, strain)
            # Curvature of the bridge 0.25 %, noise at 46 to 54 dB 0.5 %, hum and drift 0.7 % of the peak.
            rms = np.sqrt(np.mean((seen - true) ** 2)) / np.abs(true).max()
            assert rms < (0.02 if shot.shot.peak_to_noise_db < 45 else 0.01), shot.shot.shot_id


def test_the_two_gauges_of_a_bench_are_not_interchangeable(campaign: DemoCampaign) -> None:
    # Taking one for the other must show: 64 % on bench 1, 5 % on bench 2.
    for path in campaign.rig_files:
        rig = read_rig(path)
        factors = sorted((rig.incident_gauge.gauge_factor, rig.transmitted_gauge.gauge_factor))
        assert factors[1] / factors[0] > 1.05


def test_the_scope_ranges_are_well_used(campaign: DemoCampaign) -> None:
    sheets = sheets_of(campaign)
    for shot in campaign.shots:
        if shot.shot.expected is Expected.GOOD:
            record = read_record(sheets[shot.shot.shot_id].record_files, read_rig(shot.rig_file).record)
            peaks = np.abs(record.voltage_v).max(axis=1)
            assert (peaks > 0.2 * 5.0).all(), shot.shot.shot_id
            assert (peaks < 0.9 * 5.0).all(), shot.shot.shot_id


@pytest.mark.parametrize(("shot_id", "ratio"), [("W-01", 54.0), ("W-04", 40.0), ("W-05", 20.0)])
def test_noise_is_as_the_shot_says(campaign: DemoCampaign, shot_id: str, ratio: float) -> None:
    shot = next(s for s in campaign.shots if s.shot.shot_id == shot_id)
    record = read_record(shot.record_files, read_rig(shot.rig_file).record)
    truth = demo_truth(shot_id)
    quiet = record.voltage_v[0][record.time_s < truth.arrivals_s["incident"] - 40e-6]
    pulse = record.voltage_v[0][(record.time_s > 10e-6) & (record.time_s < 100e-6)]
    peak = np.abs(np.median(pulse) - quiet.mean())
    # Differences of neighbours hold no hum; those of white noise have twice its variance. The amplifier's
    # bandwidth is beyond; the peak stands some 10 % over the plateau.
    noise = np.std(np.diff(quiet)) / np.sqrt(2)
    floor = np.hypot(10 ** (-ratio / 20) * peak, 0.5e-3)
    assert 0.8 < noise / floor < 1.35


def test_faults_are_in_the_records(campaign: DemoCampaign) -> None:
    by_id = {shot.shot.shot_id: shot for shot in campaign.shots}

    def volts(shot_id: str) -> tuple[np.ndarray, np.ndarray]:
        record = read_record(by_id[shot_id].record_files, read_rig(by_id[shot_id].rig_file).record)
        return record.time_s, record.voltage_v

    _, clipped = volts("H-05")
    assert (clipped[1] == clipped[1].min()).sum() > 100
    assert (clipped[0] == clipped[0].min()).sum() < 5
    time, swapped = volts("H-07")
    early = (time > 20e-6) & (time < 100e-6)
    assert np.abs(swapped[1][early]).mean() > 10 * np.abs(swapped[0][early] - swapped[0][:500].mean()).mean()
    time, loose = volts("H-08")
    between = (time > 200e-6) & (time < 300e-6)
    before = time < -40e-6
    moved = np.abs(loose[0][between].mean() - loose[0][before].mean())
    assert moved > 0.08 * np.abs(loose[0]).max()
    truth = demo_truth("H-06")
    assert truth.shot.plan.striker_used.pulse_duration_s > (
        truth.arrivals_s["reflected"] - truth.arrivals_s["incident"]
    )


def test_the_same_bytes_every_time(campaign: DemoCampaign, tmp_path: Path) -> None:
    # In a process of its own, so that nothing is remembered from the first run.
    code = "import sys; from shpb.demo import write_demo; write_demo(sys.argv[1])"
    subprocess.run([sys.executable, "-c", code, str(tmp_path / "again")], check=True)
    assert contents(tmp_path / "again") == contents(campaign.folder)


def test_readme_cautions_and_names_every_shot(campaign: DemoCampaign) -> None:
    text = (campaign.folder / "README.txt").read_text(encoding="utf-8")
    for word in (
        "compressed gas",
        "moving bars",
        "fragments",
        "hot specimens",
        "never about safety",
        "local codes",
    ):
        assert word in text
    for shot in campaign.shots:
        assert shot.shot.shot_id in text
    assert "{" not in text


def test_no_truth_is_written(campaign: DemoCampaign) -> None:
    names = " ".join(contents(campaign.folder)).casefold()
    assert "truth" not in names


def test_quasistatic_curves_follow_the_alloys(campaign: DemoCampaign) -> None:
    flow: dict[tuple[str, int, str], float] = {}
    for path in campaign.quasistatic_files:
        head = [line for line in path.read_text().splitlines() if line.startswith("#")]
        assert any("strain_rate_per_s" in line for line in head)
        strain, stress = np.loadtxt(path, delimiter=",", skiprows=len(head) + 1, unpack=True)
        assert (np.diff(strain) > 0).all()
        # Slope of the elastic line is the modulus, within the noise of 0.15 %.
        stated = next(float(line.split(":")[1]) for line in head if "young_modulus" in line)
        assert np.polyfit(strain[:11], stress[:11], 1)[0] == pytest.approx(1e3 * stated, rel=0.02)
        true = stress * (1 - strain)
        alloy, celsius, rate = path.stem.split("_")
        flow[alloy, int(celsius[:-1]), rate] = float(np.interp(0.10, strain, true))
    rates = {rate for _, _, rate in flow}
    assert len(rates) == 3
    for rate in rates:
        w = [flow["W", t, rate] for t in (20, 200, 400)]
        h = [flow["H", t, rate] for t in (20, 400, 600, 800)]
        assert w[0] > w[1] > w[2]  # softens
        assert max(h[1], h[2]) > 1.08 * h[0]  # peaks when hot
        assert h[3] < max(h)
    assert flow["W", 20, "1e-1"] > 1.02 * flow["W", 20, "1e-4"]


def test_writing_again_restores_the_demo_and_leaves_other_files_alone(
    campaign: DemoCampaign, tmp_path: Path
) -> None:
    folder = tmp_path / "demo"
    write_demo(folder)
    (folder / "results").mkdir()
    (folder / "results" / "W-01.h5").write_bytes(b"result")
    (folder / "records" / "W-02.csv").unlink()
    said: list[str] = []
    write_demo(folder, progress=said.append)
    assert len(said) >= 2
    assert (folder / "results" / "W-01.h5").read_bytes() == b"result"
    present = contents(folder)
    del present[os.path.join("results", "W-01.h5")]
    assert present == contents(campaign.folder)
    assert not [p for p in tmp_path.iterdir() if p.name.startswith(".")]


def test_refuses_a_folder_with_other_files(tmp_path: Path) -> None:
    (tmp_path / "thesis.txt").write_text("mine")
    with pytest.raises(InputError, match="holds files and is no demo campaign"):
        write_demo(tmp_path)
    assert contents(tmp_path) == {"thesis.txt": b"mine"}


def test_refuses_to_write_over_a_file_that_was_changed(campaign: DemoCampaign, tmp_path: Path) -> None:
    folder = tmp_path / "demo"
    write_demo(folder)
    edited = folder / "calibration" / "bench_1.toml"
    edited.write_text(edited.read_text() + "# my own remark\n")
    before = contents(folder)
    with pytest.raises(InputError, match=r"bench_1\.toml.*was changed since"):
        write_demo(folder)
    assert contents(folder) == before


def test_refuses_a_file_in_place_of_the_folder(tmp_path: Path) -> None:
    (tmp_path / "demo").write_text("a file")
    with pytest.raises(InputError, match="this is a file"):
        write_demo(tmp_path / "demo")


@pytest.mark.parametrize("marker", ["", "{", "[]", '{"format": "other"}', '{"format": "shpb-demo-campaign"}'])
def test_a_damaged_marker_is_no_demo(tmp_path: Path, marker: str) -> None:
    (tmp_path / "demo_campaign.json").write_text(marker)
    with pytest.raises(InputError, match="no demo campaign"):
        write_demo(tmp_path)


@pytest.mark.parametrize("failing", range(3))
def test_a_failed_write_leaves_nothing_behind(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, failing: int
) -> None:
    real, calls = Path.write_bytes, 0

    def full(self: Path, data: bytes) -> int:
        nonlocal calls
        calls += 1
        if calls > 20 * failing:
            raise OSError(28, "No space left on device")
        return real(self, data)

    monkeypatch.setattr(Path, "write_bytes", full)
    with pytest.raises(InputError, match="No space left"):
        write_demo(tmp_path / "demo")
    assert list(tmp_path.iterdir()) == []


def test_imports_of_the_package_stay_light() -> None:
    # h5py and scipy are loaded only while their formats are written.
    code = (
        "import sys, shpb.demo, shpb.forward.shot, shpb.forward.recording;"
        "print([m for m in ('h5py', 'scipy', 'matplotlib', 'rich') if m in sys.modules])"
    )
    out = subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True)
    assert out.stdout.strip() == "[]"
