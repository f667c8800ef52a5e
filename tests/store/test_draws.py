"""What the draws gave, kept in the shot file."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np

from shpb.reduction import ShotResult, draw_shot, reduce
from shpb.store.curves_csv import export_csv
from shpb.store.shot_file import load, save_shot
from shpb.trust.drawn_curves import CURVES
from tests.synthetic import copper, record_of, rig, sheet, uniform_plastic_shot


def drawn() -> ShotResult:
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=5e-7)
    return draw_shot(reduce(record_of(faces, rig(), noise_v=0.004), rig(), sheet()), 300, seed=9)


def test_draws_come_back_and_plot_in_any_viewer(tmp_path: Path) -> None:
    result = drawn()
    draws = result.draws
    assert draws is not None
    path = save_shot(result, tmp_path / "s.h5")
    stored = load(path)
    for number, curve in enumerate(CURVES):
        for what in ("mean", "u", "low", "high"):
            np.testing.assert_array_equal(stored[f"trust/draws/{what}_{curve}"], getattr(draws, what)[number])
    np.testing.assert_array_equal(stored["trust/draws/time"], draws.time_s)
    np.testing.assert_array_equal(
        stored["trust/draws/flow_stress"][:, 2], [point.u_pa for point in draws.flow]
    )
    said = stored.attributes["trust/draws"]
    assert (said["draws"], said["seed"], said["probability"]) == (300, 9, 0.95)
    assert "settled" not in said
    units = {curve: stored.units[f"trust/draws/u_{curve}"] for curve in CURVES}
    assert units["stress_3w"] == units["true_stress"] == "Pa"
    assert units["strain_rate_1w"] == "1/s"
    assert units["true_strain"] == units["equilibrium_ratio"] == ""
    with h5py.File(path) as file:
        group = file["trust/draws"]
        assert group[group.attrs["signal"]].shape == group[group.attrs["axes"][0]].shape
    assert "trust/draws/time" not in load(save_shot(stored.reduce_again(), tmp_path / "again.h5")).arrays


def test_r_by_all_sources_is_stored_beside_its_floor(tmp_path: Path) -> None:
    result = drawn()
    stored = load(save_shot(result, tmp_path / "s.h5"))
    assert stored.attributes["trust"]["coverage_factor"] == 2.0
    np.testing.assert_array_equal(stored["trust/u_force_difference"], result.budget.u_force_difference)
    low, high = stored["trust/equilibrium_ratio_low"], stored["trust/equilibrium_ratio_high"]
    ratio = stored["response/equilibrium_ratio"]
    assert np.all((low <= ratio) & (ratio <= high) & (low >= 0) & (high <= 2))
    header = export_csv(result, tmp_path / "s.csv").read_text().splitlines()[0].split(",")
    assert "u_force_difference" in header
