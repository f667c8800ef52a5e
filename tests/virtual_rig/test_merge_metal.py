"""One simulated shot and its quasi-static curve, merged: the planted rate coefficient is found again.

Law of the simulation, isothermal: true stress (90 + 290 e^0.31)(1 + 0.025 ln(1 + rate/(1 /s))) MPa; neither made with
this program nor known to it. At rest its logarithm is 0, which Johnson and Cook's is at the reference rate of 1 /s: as
codes that use their law do (common practice), rates below the reference count as the reference.
"""

from __future__ import annotations

import dataclasses
import math
from pathlib import Path

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.merge.campaign import MergedMaterial, merge_campaign
from shpb.merge.fit import fit_model
from shpb.merge.from_shot import StoredCurve
from shpb.merge.material_curve import RateRange
from shpb.merge.model_fit import ModelFit, ParameterEstimate
from shpb.merge.models.registry import model_named
from shpb.merge.quasistatic import read_quasistatic
from shpb.merge.settings import MergeSettings
from shpb.reduction import reduce
from shpb.store.merge_input import stored_curve
from shpb.store.shot_file import save_shot
from tests.virtual_rig.conftest import VirtualShot

SLOW = Path(__file__).parents[1] / "merge" / "data" / "virtual_rig_metal_1k_quasistatic.csv"
STRAINS = (0.02, 0.03, 0.04, 0.05, 0.06, 0.08, 0.10, 0.12, 0.15)
PLANTED = {"A": 90e6, "B": 290e6, "n": 0.31}
PLANTED_C = 0.025
LAW = model_named("johnson-cook").with_facts(melting_temperature_k=1356.0)


@pytest.fixture
def shot(metal: VirtualShot, tmp_path: Path) -> StoredCurve:
    specimen = dataclasses.replace(metal.sheet.specimen, material="virtual copper")
    assert specimen.heat_capacity_j_kg_k is None  # nothing heats up in this simulation
    sheet = dataclasses.replace(metal.sheet, specimen=specimen)
    return stored_curve(save_shot(reduce(metal.record, metal.rig, sheet), tmp_path / "metal.h5"))


def merged(shot: StoredCurve, *, indentation_out: bool) -> MergedMaterial:
    settings = MergeSettings(strains=STRAINS, indentation_out=indentation_out, models=("none",))
    found = merge_campaign([shot], [read_quasistatic(SLOW)], settings)
    assert found.left_out == ()
    (one,) = found.materials
    return one


def fitted(one: MergedMaterial, fixed: dict[str, float] | None = None) -> ModelFit:
    assert one.points is not None
    assert not one.points.adiabatic.any()
    points = dataclasses.replace(one.points, rate_per_s=np.maximum(one.points.rate_per_s, 1.0))
    return fit_model(LAW, points, fixed, leave_out=False)


def rate_coefficient(one: MergedMaterial, fixed: dict[str, float] | None = None) -> ParameterEstimate:
    return fitted(one, fixed).estimate("C")


def law_pa(strain: float, rate_per_s: float) -> float:
    static = PLANTED["A"] + PLANTED["B"] * strain ** PLANTED["n"]
    return float(static * (1 + PLANTED_C * math.log1p(rate_per_s)))


def test_rows_hold_the_planted_law(shot: StoredCurve) -> None:
    one = merged(shot, indentation_out=True)
    rows = {range_: [row for row in one.rows if row.range is range_] for range_ in RateRange}
    assert [len(part) for part in rows.values()] == [len(STRAINS)] * 2
    for row in one.rows:
        off = row.stress_pa - law_pa(row.plastic_strain, row.rate_per_s)
        assert abs(off) < 2 * row.u_pa
        if row.plastic_strain >= 0.04:
            assert abs(off) < 0.006 * row.stress_pa
        assert row.rise_k is None
        assert row.isothermal_pa == row.stress_pa


def test_the_planted_rate_coefficient_lies_in_its_interval(shot: StoredCurve) -> None:
    one = merged(shot, indentation_out=True)
    free = fitted(one)
    for name, planted in {**PLANTED, "C": PLANTED_C}.items():
        estimate = free.estimate(name)
        assert estimate.low is not None
        assert estimate.high is not None
        assert estimate.low <= planted <= estimate.high
    for estimate in (free.estimate("C"), rate_coefficient(one, PLANTED)):
        assert estimate.u is not None
        # Measured 0.0251 clean, 0.0252 with noise, hum and drift.
        assert estimate.value == pytest.approx(PLANTED_C, rel=0.02)
        # It hangs on one shot and one slow test whose scales are uncertain by 0.8 %.
        assert 0.03 * PLANTED_C < estimate.u < 0.10 * PLANTED_C


def test_left_in_the_strain_of_the_bar_faces_costs_some_per_cent(shot: StoredCurve) -> None:
    out, left_in = (merged(shot, indentation_out=way) for way in (True, False))
    for fixed in (None, PLANTED):
        low, high = (rate_coefficient(one, fixed).value for one in (left_in, out))
        assert low is not None
        assert high is not None
        # Measured 2.1 to 2.4 %: the fit goes by the later strains, whose stress is known best.
        assert 0.965 < low / high < 0.985
    at = {
        0.02: 0.93,
        0.05: 0.96,
        0.08: 0.97,
    }  # of the plastic strain: the same length of strain at a falling slope
    for strain, expected in at.items():
        assert exponent(left_in, strain) / exponent(out, strain) == pytest.approx(expected, abs=0.015)


def exponent(one: MergedMaterial, strain: float) -> float:
    found = next(study for study in one.rates if study.plastic_strain == strain).sensitivities.all
    assert found is not None
    return found.exponent.value


def test_nothing_left_to_fit_is_said(shot: StoredCurve) -> None:
    points = merged(shot, indentation_out=True).points
    assert points is not None
    bar = points.select(points.rate_per_s > 1)
    with pytest.raises(InputError, match="nothing is left to fit.*C is held"):
        fit_model(LAW, bar, PLANTED, leave_out=False)
