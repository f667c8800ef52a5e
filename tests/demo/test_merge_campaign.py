"""The campaign that is made to be merged: complete, readable, and off from its papers by no more than they state."""

from __future__ import annotations

import dataclasses
import json
import math
from pathlib import Path

import numpy as np
import pytest

import shpb
from shpb.cli.main import main
from shpb.demo import DemoCampaign, write_demo
from shpb.demo.materials import HEXALUNE, WRENMOOR
from shpb.demo.merge_scenario import (
    QUASISTATIC_RATES_PER_S,
    RATES_PER_S,
    TEMPERATURES_C,
    U_SIZE_MM,
    U_TEMPERATURE_K,
    merge_shots,
    true_rig,
)
from shpb.demo.planted import planted_johnson_cook, planted_stress_pa
from shpb.demo.scenario import Expected, bench_rig
from shpb.errors import InputError
from shpb.merge.quasistatic import read_quasistatic
from shpb.quantity import Quantity
from shpb.rig.sheet_file import check_sheet_fits_rig


@pytest.fixture(scope="module")
def to_merge(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("to_merge") / "demo", to_merge=True)


def test_every_shot_stands_in_the_list_with_its_record_and_rig(to_merge: DemoCampaign) -> None:
    sheets = {sheet.shot_id: sheet for sheet in shpb.read_shot_list(to_merge.shot_list)}
    assert list(sheets) == [shot.shot_id for shot in merge_shots()]
    assert 40 <= len(sheets) <= 60
    rigs = {path.resolve(): shpb.read_rig(path) for path in to_merge.rig_files}
    assert {rig.name for rig in rigs.values()} == {
        "Fennick Hollow bench 1, 19 mm"
    }  # so they share their errors
    assert sorted(float(rig.striker.length_m) for rig in rigs.values() if rig.striker) == [0.3, 0.6]
    for written in to_merge.shots:
        sheet = sheets[written.shot.shot_id]
        assert sheet.rig_file is not None
        check_sheet_fits_rig(sheet, rigs[sheet.rig_file.resolve()])
        assert all(path.is_file() for path in sheet.record_files)
        specimen = sheet.specimen
        assert specimen.heat_capacity_j_kg_k is not None
        assert specimen.density_kg_m3 is not None
        assert specimen.young_modulus_pa is not None
        assert sheet.temperature_k.u == pytest.approx(U_TEMPERATURE_K)
        hot = written.shot.temperature_c > 50
        assert (sheet.incident_face_temperature_k is not None) is hot


def test_the_plan_covers_rates_temperatures_and_repeats() -> None:
    good = [shot for shot in merge_shots() if shot.expected is Expected.GOOD and not shot.remarks]
    for alloy in (WRENMOOR, HEXALUNE):
        count: dict[tuple[float, float], int] = {}
        for shot in good:
            if shot.alloy is alloy:
                code, rate, _, _ = shot.shot_id.split("-")
                assert code == alloy.code
                count[float(rate), shot.temperature_c] = count.get((float(rate), shot.temperature_c), 0) + 1
        assert set(count) == {(rate, t) for rate in RATES_PER_S for t in TEMPERATURES_C[alloy.code]}
        assert {count[rate, 20.0] for rate in RATES_PER_S} == {3}
        assert all(count[1600.0, t] >= 2 for t in TEMPERATURES_C[alloy.code])


def test_what_was_fired_is_off_by_what_the_papers_state() -> None:
    shots = [shot for shot in merge_shots() if shot.expected is not Expected.MISWRITTEN]
    size, warmth = [], []
    for shot in shots:
        assert shot.fired is not None
        size += [shot.fired.diameter_mm - shot.diameter_mm, shot.fired.length_mm - shot.length_mm]
        warmth.append(shot.fired.temperature_c - shot.temperature_c)
    # Standard deviations of some hundred and fifty draws: within a quarter.
    assert np.std(size) == pytest.approx(U_SIZE_MM, rel=0.25)
    assert np.std(warmth) == pytest.approx(U_TEMPERATURE_K, rel=0.25)
    assert np.abs(warmth).max() <= 2.0
    # No two alike: every shot has its own.
    assert len(set(warmth)) > 0.9 * len(warmth)
    (slip,) = [shot for shot in merge_shots() if shot.expected is Expected.MISWRITTEN]
    assert slip.fired is not None
    assert slip.diameter_mm - slip.fired.diameter_mm == pytest.approx(1.0, abs=4 * U_SIZE_MM)


def test_one_draw_for_the_rig_is_shared_by_the_whole_campaign() -> None:
    parts = ("incident_bar", "transmitted_bar", "incident_gauge", "transmitted_gauge")
    pulls = []
    for part in parts:
        stated, true = getattr(bench_rig("bench_1"), part), getattr(true_rig("bench_1"), part)
        other = getattr(true_rig("bench_1_long"), part)
        for field in dataclasses.fields(stated):
            value = getattr(stated, field.name)
            now = getattr(true, field.name)
            if isinstance(value, Quantity) and value.u:
                pulls.append((now - value) / value.u)
                assert float(getattr(other, field.name)) == float(now)
            else:
                assert now == value
    assert len(pulls) > 15
    assert 0.6 < np.sqrt(np.mean(np.square(pulls))) < 1.4
    assert np.abs(pulls).max() <= 2.0 + 1e-9
    rigs = {id(shot.really.rig) for shot in merge_shots()}
    assert len(rigs) == 2


def test_slow_curves_read_as_they_stand_and_follow_the_law(to_merge: DemoCampaign) -> None:
    tests = [read_quasistatic(path) for path in to_merge.quasistatic_files]
    assert len(tests) == 30
    off = []
    for test in tests:
        alloy = WRENMOOR if test.material == WRENMOOR.name else HEXALUNE
        assert test.rate_per_s in QUASISTATIC_RATES_PER_S
        assert round(test.temperature_k - 273.15) in TEMPERATURES_C[alloy.code]
        assert test.stress_u == pytest.approx(0.005)
        assert test.stress_u_shared == pytest.approx(0.005)
        assert test.machine == "Machine 2"
        true_strain = -np.log1p(-test.strain)
        true_stress = test.stress_pa * (1 - test.strain)
        plastic = true_strain - true_stress / float(test.young_modulus_pa or np.nan)
        at = float(np.interp(0.1, plastic, true_stress))
        off.append(at / float(planted_stress_pa(alloy, 0.1, float(test.rate_per_s), test.temperature_k)) - 1)
    # Own 0.5 %, temperature 0.2 to 0.5 %, and one machine.
    assert 0.003 < np.std(off) < 0.012
    assert abs(np.mean(off)) < 0.013


def test_the_slow_curves_of_the_plain_demo_can_be_merged_too(campaign: DemoCampaign) -> None:
    for path in campaign.quasistatic_files:
        assert read_quasistatic(path).kind.value == "compression"


def test_planted_johnson_cook_is_the_law_at_any_reference_rate() -> None:
    for reference in (1.0, 1e-3, 1000.0):
        p = planted_johnson_cook(WRENMOOR, reference)
        for rate in (1e-3, 1.0, 2800.0):
            for kelvin in (293.15, 500.0, 673.15):
                warm = (kelvin - 293.15) / (1350.0 - 293.15)
                stress = (p["A"] + p["B"] * 0.1 ** p["n"]) * (1 + p["C"] * math.log(rate / reference))
                stress *= 1 - warm ** p["m"]
                # ln(1 + r/r0) of the law is ln(r/r0) to 1 % at a hundred times r0, times C.
                assert float(planted_stress_pa(WRENMOOR, 0.1, rate, kelvin)) == pytest.approx(
                    stress, rel=2e-4
                )
    with pytest.raises(InputError, match="Hexalune 7 has a strength peak"):
        planted_johnson_cook(HEXALUNE)


def test_planted_heating_is_the_plastic_work() -> None:
    # A law without temperature would heat by work/(rho c): here softening takes a little of it away.
    plastic, rate, start = 0.2, 1600.0, 293.15
    strain = np.linspace(0, plastic, 2001)
    cold = np.array([float(planted_stress_pa(WRENMOOR, e, rate, start)) for e in strain])
    work = float((0.5 * (cold[1:] + cold[:-1]) * np.diff(strain)).sum())
    rise = 0.9 * work / (8900.0 * 385.0)
    heated = float(planted_stress_pa(WRENMOOR, plastic, rate, start, adiabatic=True))
    assert heated < cold[-1]
    assert heated == pytest.approx(float(planted_stress_pa(WRENMOOR, plastic, rate, start + rise)), rel=1e-3)
    assert 8 < rise < 15


def test_readme_cautions_and_names_the_mishaps(to_merge: DemoCampaign) -> None:
    text = (to_merge.folder / "README.txt").read_text(encoding="utf-8")
    for word in (
        "compressed gas",
        "fragments",
        "hot specimens",
        "never about safety",
        "local codes",
        "shpb merge",
    ):
        assert word in text
    for shot_id in ("W-1600-20C-4", "H-1600-20C-4", "H-1600-20C-5", "W-2800-20C-4"):
        assert shot_id in text
    assert "{" not in text


def test_the_two_demo_campaigns_do_not_mix(to_merge: DemoCampaign, campaign: DemoCampaign) -> None:
    before = sorted(path.name for path in to_merge.folder.rglob("*"))
    with pytest.raises(InputError, match="holds another demo campaign"):
        write_demo(to_merge.folder)
    with pytest.raises(InputError, match="holds another demo campaign"):
        write_demo(campaign.folder, to_merge=True)
    assert sorted(path.name for path in to_merge.folder.rglob("*")) == before
    marker = json.loads((to_merge.folder / "demo_campaign.json").read_text(encoding="utf-8"))
    assert len(marker["files"]) == len([p for p in to_merge.folder.rglob("*") if p.is_file()]) - 1


def test_the_same_campaign_every_time(to_merge: DemoCampaign, tmp_path: Path) -> None:
    first = merge_shots()
    merge_shots.cache_clear()
    true_rig.cache_clear()
    assert merge_shots() == first
    again = write_demo(tmp_path / "again", to_merge=True)
    for path in again.folder.rglob("*"):
        if path.is_file():
            assert path.read_bytes() == (to_merge.folder / path.relative_to(again.folder)).read_bytes()


def test_the_verb_writes_it(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["demo", str(tmp_path / "lab"), "--merge", "--write-only"]) == 0
    assert (tmp_path / "lab" / "records" / "H-2800-800C-1.npz").is_file()
    assert "written to" in capsys.readouterr().err
    assert main(["demo", str(tmp_path / "lab"), "--write-only"]) == 2
    assert "another demo campaign" in capsys.readouterr().err
