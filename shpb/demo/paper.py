"""The papers of the demo campaign: shot sheets, the shot list, quasi-static curves."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import dataclass

from shpb.demo.materials import ALLOYS, QUASISTATIC_RATES_PER_S, quasistatic_curve, rate_words
from shpb.demo.scenario import DemoShot
from shpb.demo.scope import random_for
from shpb.demo.truth import DemoTruth

SPEED_U = 0.005  # of the light gates, relative


@dataclass(frozen=True, slots=True)
class Readings:
    """What the operator measured at one shot, with its errors."""

    striker_speed_m_s: float
    length_after_mm: float
    mass_g: float  # before the shot


def readings(truth: DemoTruth) -> Readings:
    """Striker speed within its uncertainty, length to 0.01 mm, mass to 1 mg; seeded by the shot's id."""
    shot = truth.shot
    fired = shot.really
    volume_mm3 = math.pi / 4 * fired.diameter_mm**2 * fired.length_mm
    error = float(random_for(f"{shot.shot_id} readings").standard_normal())
    return Readings(
        striker_speed_m_s=round(shot.striker_speed_m_s * (1 + SPEED_U * error), 2),
        length_after_mm=round(1e3 * truth.length_after_m, 2),
        mass_g=round(1e-6 * shot.alloy.density_kg_m3 * volume_mm3, 3),
    )


def hot_sides(shot: DemoShot) -> tuple[str, ...]:
    """The bars whose faces were measured: both where the specimen was hot, brought up to it just before the shot."""
    return ("incident", "transmitted") if shot.temperature_c > 50 else ()


def shot_sheet(truth: DemoTruth, record_names: tuple[str, ...]) -> str:
    """Text of the shot sheet that lies beside the record."""
    shot, alloy, read = truth.shot, truth.shot.alloy, readings(truth)
    record = ", ".join(f'"{name}"' for name in record_names)
    if len(record_names) > 1:
        record = f"[{record}]"
    lines = [
        f"# Shot {shot.shot_id} of the demo campaign. Every value is invented.",
        "",
        "[shot]",
        f'id = "{shot.shot_id}"',
        'kind = "compression"',
        f"record = {record}",
        f'rig = "../calibration/{shot.bench}.toml"',
        f"date = {shot.date}",
        f'operator = "{shot.operator}"',
        f"striker_speed_m_s = {{ value = {read.striker_speed_m_s:.2f}, u_percent = {100 * SPEED_U:g}, "
        'origin = "light gates" }',
        f"temperature_C = {shot.temperature_c:g}",
        *(f"{side}_face_temperature_C = {shot.face_temperature_c:g}" for side in hot_sides(shot)),
        f'remarks = "{shot.remarks}"',
        "",
        "[specimen]",
        f'material = "{alloy.name}"',
        f'diameter_mm = {{ value = {shot.diameter_mm:.2f}, u = 0.005, origin = "micrometer" }}',
        f'length_mm = {{ value = {shot.length_mm:.2f}, u = 0.005, origin = "micrometer" }}',
        f'length_after_mm = {{ value = {read.length_after_mm:.2f}, u = 0.005, origin = "micrometer" }}',
        f"mass_g = {read.mass_g:.3f}",
        f"young_modulus_GPa = {alloy.young_modulus_pa / 1e9:g}",
        f"density_kg_m3 = {alloy.density_kg_m3:g}",
        f"poisson_ratio = {alloy.poisson_ratio:g}",
        f"heat_capacity_J_kg_K = {alloy.heat_capacity_j_kg_k:g}",
        f'lubricant = "{shot.lubricant}"',
    ]
    return "\n".join(line for line in lines if line != 'remarks = ""') + "\n"


_COLUMNS = (
    "shot_id", "kind", "record", "rig", "date", "operator", "striker_speed_m_s", "u_striker_speed_m_s",
    "temperature_C", "incident_face_temperature_C", "transmitted_face_temperature_C", "material",
    "diameter_mm", "u_diameter_mm", "length_mm", "u_length_mm",
    "length_after_mm", "u_length_after_mm", "mass_g", "young_modulus_GPa", "density_kg_m3", "poisson_ratio",
    "heat_capacity_J_kg_K", "lubricant", "remarks",
)  # fmt: skip


def shot_list(shots: list[tuple[DemoTruth, str]], u_temperature_k: float | None = None) -> str:
    """Text of the shot list: one row for each shot, with its record as seen from the list.

    With ``u_temperature_k`` there is a column of that uncertainty [K], too.
    """
    more = {} if u_temperature_k is None else {"u_temperature_C": f"{u_temperature_k:g}"}
    place = _COLUMNS.index("temperature_C") + 1
    out = io.StringIO()
    out.write("# Shot list of the demo campaign. Every value is invented.\n")
    table = csv.DictWriter(out, [*_COLUMNS[:place], *more, *_COLUMNS[place:]], lineterminator="\n")
    table.writeheader()
    for truth, record in shots:
        table.writerow({**_row(truth, record), **more})
    return out.getvalue()


def _row(truth: DemoTruth, record: str) -> dict[str, str]:
    shot: DemoShot = truth.shot
    alloy, read = shot.alloy, readings(truth)
    return {
        "shot_id": shot.shot_id,
        "kind": "compression",
        "record": record,
        "rig": f"calibration/{shot.bench}.toml",
        "date": shot.date,
        "operator": shot.operator,
        "striker_speed_m_s": f"{read.striker_speed_m_s:.2f}",
        "u_striker_speed_m_s": f"{SPEED_U * read.striker_speed_m_s:.3f}",
        "temperature_C": f"{shot.temperature_c:g}",
        **{f"{side}_face_temperature_C": f"{shot.face_temperature_c:g}" for side in hot_sides(shot)},
        "material": alloy.name,
        "diameter_mm": f"{shot.diameter_mm:.2f}",
        "u_diameter_mm": "0.005",
        "length_mm": f"{shot.length_mm:.2f}",
        "u_length_mm": "0.005",
        "length_after_mm": f"{read.length_after_mm:.2f}",
        "u_length_after_mm": "0.005",
        "mass_g": f"{read.mass_g:.3f}",
        "young_modulus_GPa": f"{alloy.young_modulus_pa / 1e9:g}",
        "density_kg_m3": f"{alloy.density_kg_m3:g}",
        "poisson_ratio": f"{alloy.poisson_ratio:g}",
        "heat_capacity_J_kg_K": f"{alloy.heat_capacity_j_kg_k:g}",
        "lubricant": shot.lubricant,
        "remarks": shot.remarks,
    }


def quasistatic_files() -> dict[str, bytes]:
    """The slow compression curves of both alloys, by file name."""
    files = {}
    for alloy in ALLOYS:
        for kelvin in alloy.quasistatic_temperatures_k:
            for rate in QUASISTATIC_RATES_PER_S:
                celsius = round(kelvin - 273.15)
                name = f"{alloy.code}_{celsius}C_{rate_words(rate)}.csv"
                strain, stress = quasistatic_curve(alloy, rate, kelvin, random_for(name))
                lines = [
                    f"# material: {alloy.name}",
                    "# kind: compression",
                    "# test: quasi-static compression, extensometer on the specimen (invented)",
                    f"# temperature_C: {celsius}",
                    f"# strain_rate_per_s: {rate:g}",
                    f"# young_modulus_GPa: {alloy.young_modulus_pa / 1e9:g}",
                    "engineering_strain,engineering_stress_MPa",
                    *(f"{e:.6f},{s / 1e6:.2f}" for e, s in zip(strain, stress, strict=True)),
                ]
                files[name] = ("\n".join(lines) + "\n").encode()
    return files
