"""The files of the campaign to merge: records, shot list, slow curves, read-me; and what really happened."""

from __future__ import annotations

from functools import cache
from importlib import resources

import numpy as np

from shpb.arrays import FloatArray
from shpb.demo.materials import ALLOYS, Alloy, quasistatic_curve, rate_words
from shpb.demo.merge_scenario import (
    BENCHES,
    QUASISTATIC_RATES_PER_S,
    TEMPERATURES_C,
    U_TEMPERATURE_K,
    merge_shots,
)
from shpb.demo.paper import shot_list
from shpb.demo.record_files import record_files
from shpb.demo.scenario import Expected
from shpb.demo.scope import random_for, scope_record
from shpb.demo.truth import DemoTruth, truths_of

MERGE_BENCHES = BENCHES
MACHINE = "Machine 2"
U_OWN, U_SHARED = 0.005, 0.005  # of the slow stresses: area of each specimen, load cell of the machine
_NOISE = 0.0005  # of their readings

_END_S = 0.66e-3  # beyond the end of the records, and long enough that the second loading is not yet there


@cache
def merge_truth() -> dict[str, DemoTruth]:
    """Return the truth of every shot of the campaign to merge by its id (some six seconds, once)."""
    return truths_of(merge_shots(), _END_S)


def merge_files(truths: dict[str, DemoTruth], list_name: str) -> dict[str, bytes]:
    """Every file of the campaign by its path within the folder, but rig files and marker."""
    files: dict[str, bytes] = {}
    listed: list[tuple[DemoTruth, str]] = []
    for truth in truths.values():
        (own,) = record_files(truth.shot, scope_record(truth)).items()
        name = f"records/{own[0]}"
        files[name] = own[1]
        listed.append((truth, name))
    files[list_name] = shot_list(listed, U_TEMPERATURE_K).encode()
    for alloy in ALLOYS:
        for celsius in TEMPERATURES_C[alloy.code]:
            for rate in QUASISTATIC_RATES_PER_S:
                name = f"{alloy.code}_{celsius:.0f}C_{rate_words(rate)}.csv"
                files[f"quasistatic/{name}"] = _slow_test(alloy, celsius, rate, name).encode()
    files["README.txt"] = _readme().encode()
    return files


def _slow_test(alloy: Alloy, celsius: float, rate_per_s: float, name: str) -> str:
    """A slow test with its facts: temperature, area and load cell are off by their uncertainties."""
    strain, stress = _measured(alloy, celsius, rate_per_s, name)
    lines = [
        f"# material: {alloy.name}",
        "# kind: compression",
        "# test: quasi-static compression, extensometer on the specimen (invented)",
        f"# machine: {MACHINE}",
        f"# temperature_C: {celsius:g}",
        f"# rate_per_s: {rate_per_s:g}",
        f"# young_modulus_GPa: {alloy.young_modulus_pa / 1e9:g}",
        f"# stress_u_percent: {100 * U_OWN:g}",
        f"# stress_u_shared_percent: {100 * U_SHARED:g}",
        "engineering_strain,engineering_stress_MPa",
        *(f"{e:.6f},{s / 1e6:.2f}" for e, s in zip(strain, stress, strict=True)),
    ]
    return "\n".join(lines) + "\n"


def _measured(alloy: Alloy, celsius: float, rate_per_s: float, name: str) -> tuple[FloatArray, FloatArray]:
    random = random_for(f"{name} of the campaign to merge")
    error_k = U_TEMPERATURE_K * float(np.clip(random.standard_normal(), -2, 2))
    strain, stress = quasistatic_curve(alloy, rate_per_s, celsius + 273.15 + error_k, random, _NOISE)
    own = U_OWN * float(random.standard_normal())
    machine = U_SHARED * float(np.clip(random_for(MACHINE).standard_normal(), -2, 2))
    return strain, stress * (1 + own + machine)


def _readme() -> str:
    text = resources.files("shpb.demo").joinpath("texts", "README_merge.txt").read_text(encoding="utf-8")
    mishaps = [shot for shot in merge_shots() if shot.expected is not Expected.GOOD or shot.remarks]
    lines = (f"  {shot.shot_id}  {shot.special}" for shot in mishaps)
    return text.replace("{shots}", str(len(merge_shots()))).replace("{mishaps}", "\n".join(lines))
