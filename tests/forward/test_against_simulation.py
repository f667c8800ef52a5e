"""The forward model against a two-dimensional elastodynamic simulation that this package did not make.

Data and how they were made: tests/virtual_rig/data/README.md.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np

from shpb.forward.bars import BarWaves
from shpb.forward.flow import FlowLaw
from shpb.forward.specimen import SpecimenModel, SpecimenRun, longest_time_step_s
from tests.forward.conftest import Q, bar

DATA = Path(__file__).parents[1] / "virtual_rig" / "data"


def facts(shot: str, name: str = "facts") -> dict[str, Any]:
    found: dict[str, Any] = json.loads((DATA / shot / f"{name}.json").read_text())
    return found


def simulated_bar(shot: str) -> Any:
    stated = facts(shot)["bars"]
    return bar(
        diameter_m=Q(stated["diameter_m"]),
        density_kg_m3=Q(stated["density_kg_m3"]),
        wave_speed_m_s=Q((stated["E_Pa"] / stated["density_kg_m3"]) ** 0.5),
        poisson_ratio=Q(stated["poisson"]),
        length_m=Q(3.0),
    )


def test_specimen_strains_and_pushes_as_the_simulated_one() -> None:
    # Given the wave that came to the simulated front face, p = (F1 + Z v1)/2, and the simulation's own law.
    law = facts("metal-1k", "truth")["flow_law"]
    specimen = facts("metal-1k")["specimen"]
    with np.load(DATA / "metal-1k" / "truth.npz") as truth:
        t, front, back = truth["time_s"], truth["force_front_N"], truth["force_back_N"]
        strain, moved = truth["eng_strain"], truth["barface_front_mean_disp_m"]
        between_bars = (moved - truth["barface_back_mean_disp_m"]) / facts("metal-1k")["specimen"]["length_m"]
    z = simulated_bar("metal-1k").impedance_n_s_m
    model = SpecimenModel(
        diameter_m=specimen["diameter_m"], length_m=specimen["length_m"],
        young_modulus_pa=law["E"], density_kg_m3=law["rho"], heat_share=0.0,
        flow=FlowLaw(initial_pa=law["A"], hardening_pa=law["B"], hardening_exponent=law["n"],
                     rate_coefficient=law["C"], reference_rate_per_s=law["rate0"]),
    )  # fmt: skip
    step = 0.5 * longest_time_step_s([model], 4)
    time = np.arange(t[0], t[-1], step)
    arriving = np.interp(time, t, 0.5 * (front + z * np.gradient(moved, t)))
    run = SpecimenRun([model], np.array([z]), np.array([z]), np.array([293.15]), elements=4, time_step_s=step)
    history = run.march(arriving[None, :], np.zeros((1, time.size)))

    true_strain = np.interp(time, t, strain)
    loading = (true_strain > 0.004) & (time < t[int(np.argmax(strain))])
    assert loading.sum() > 300
    # The simulated bar faces are indented, so their approach is some 0.0014 more than the specimen's strain;
    # faces of the model are rigid, and its strain lies between the two.
    found = history.eng_strain[0, loading]
    assert (found > true_strain[loading]).all()
    assert (found < np.interp(time, t, between_bars)[loading]).all()
    assert np.abs(found - true_strain[loading]).max() < 1.2e-3
    # Radial inertia and the bulge of the simulated specimen are not in the model: some 0.5 % here.
    for force, expected in ((history.force_in_n, front), (history.force_out_n, back)):
        apart = force[0, loading] / np.interp(time, t, expected)[loading] - 1
        assert np.sqrt(np.mean(apart**2)) < 0.010
        assert abs(apart.mean()) < 0.006


def test_wave_arrives_at_the_second_station_as_simulated() -> None:
    # Strain at 0.8 m carried to 2.0 m; both in the model's own band, where the first mode is all there is.
    rod = simulated_bar("plain-bar")
    with np.load(DATA / "plain-bar" / "truth.npz") as truth:
        t, near, far = truth["gauge_time_s"], truth["gauge_strain_A"], truth["gauge_strain_B"]
    reflected = 1.8 / rod.wave_speed_m_s + 0.8 / rod.wave_speed_m_s  # the free end's answer comes later
    waves = BarWaves(rod, t.size, float(t[1] - t[0]), 3.0)
    first = int(np.argmax(np.abs(near) > 0.05 * np.abs(near).max()))
    outward = np.where(t < t[first] + reflected, near, 0.0)
    carried = waves.history(waves.carried(waves.spectrum(outward), 1.2))
    expected = waves.history(waves.carried(waves.spectrum(far), 0.0))
    window = (t > t[first] + 1.0 / rod.wave_speed_m_s) & (t < t[first] + 1.2 / rod.wave_speed_m_s + 190e-6)
    peak = np.abs(expected).max()
    rms = np.sqrt(np.mean((carried - expected)[window] ** 2)) / peak
    # The simulation's phase speed is within 0.16 % of the exact one; a rigid shift is 3 % off.
    assert rms < 2e-3
    rigid = BarWaves(rod, t.size, float(t[1] - t[0]), 3.0, dispersive=False)
    shifted = rigid.history(rigid.carried(rigid.spectrum(outward), 1.2))
    unlike = waves.history(waves.carried(waves.spectrum(shifted), 0.0))
    assert np.sqrt(np.mean((unlike - expected)[window] ** 2)) / peak > 10 * rms
