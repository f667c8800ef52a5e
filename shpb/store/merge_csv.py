"""A merge as CSV for spreadsheets: the merged table, and flow curves of the fitted laws. Units in the column names."""

from __future__ import annotations

import csv
import math
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path

import numpy as np

from shpb.merge.campaign import Merged, MergedMaterial
from shpb.merge.model_fit import ModelFit
from shpb.store.export_cells import cell, harmless
from shpb.whole_file import whole_file

_STRAIN_STEPS = 40  # of a flow curve
_SAME_RATE = 1e-6  # relative

__all__ = [
    "CURVE_COLUMNS",
    "TABLE_COLUMNS",
    "asked_of",
    "export_flow_curves",
    "export_merged_table",
    "harmless",
]

TABLE_COLUMNS = (
    "material", "kind", "condition", "tests_by", "plastic_strain", "true_stress_MPa", "u_true_stress_MPa",
    "u_own_MPa", "u_shared_MPa", "scatter_MPa", "tests", "true_rate_per_s", "least_rate_per_s", "greatest_rate_per_s",
    "temperature_K", "temperature_rise_K", "isothermal_stress_MPa", "u_isothermal_stress_MPa", "files",
)  # fmt: skip
CURVE_COLUMNS = (
    "material", "kind", "law", "rate_per_s", "start_temperature_K", "path", "plastic_strain", "true_stress_MPa",
    "u_true_stress_MPa", "temperature_K", "extrapolated", "why_extrapolated",
)  # fmt: skip


def export_merged_table(merged: Merged, path: Path | str) -> Path:
    """Write the merged table: one row a condition and plastic strain; a cell is empty where nothing is known.

    ``condition`` counts from 1 within a material; ``extrapolated`` and the like are 1 or 0.

    Raises
    ------
    StoreError
        If the file cannot be written.
    """
    rows = (row for material in merged.materials for row in _table_rows(material))
    return _write(Path(path), TABLE_COLUMNS, rows)


def _table_rows(material: MergedMaterial) -> Iterator[list[object]]:
    for row in material.rows:
        condition = material.conditions[row.condition]
        yield [
            material.material,
            material.kind.value,
            row.condition + 1,
            row.range.value,
            row.plastic_strain,
            _mega(row.stress_pa),
            _mega(row.u_pa),
            _mega(row.u_own_pa),
            _mega(row.u_shared_pa),
            _mega(row.scatter_pa),
            row.count,
            row.rate_per_s,
            *row.rate_range_per_s,
            row.temperature_k,
            row.rise_k,
            _mega(row.isothermal_pa),
            _mega(row.u_isothermal_pa),
            "; ".join(curve.origin for curve in condition.curves if curve.holds(row.plastic_strain)),
        ]


def export_flow_curves(merged: Merged, path: Path | str) -> Path:
    """Write flow curves of every fitted law at the rates and temperatures of the campaign, and at those asked for.

    Isothermal, and adiabatic where the law knows temperature and the heat of the plastic work is known, from plastic
    strain 0 to the greatest that was tested. ``extrapolated`` is 1 outside what the law was fitted to, with the reasons
    of the curve. ``u_true_stress_MPa`` comes from
    the parameters' covariance, and is empty where the points do not tell.

    Raises
    ------
    StoreError
        If the file cannot be written.
    """
    rows = (
        row
        for material in merged.materials
        for fit in material.fits
        for row in _curve_rows(material, fit, merged.settings.asked)
    )
    return _write(Path(path), CURVE_COLUMNS, rows)


def _curve_rows(
    material: MergedMaterial, fit: ModelFit, asked: Sequence[tuple[float, float]]
) -> Iterator[list[object]]:
    strains = np.linspace(0.0, float(fit.points.plastic_strain.max()), _STRAIN_STEPS + 1)
    heats = fit.points.heat_k_m3_j is not None and fit.model.uses_temperature
    paths = ("isothermal", "adiabatic") if heats else ("isothermal",)
    for rate, temperature in (*asked_of(material, fit), *asked):
        for path in paths:
            curve = fit.flow_curve(strains, rate, temperature, adiabatic=path == "adiabatic")
            for i in range(strains.size):
                far = bool(curve.extrapolated[i])
                yield [
                    material.material, material.kind.value, fit.model.key, rate, temperature, path,
                    float(strains[i]), _mega(float(curve.stress_pa[i])), _mega(float(curve.u_stress_pa[i])),
                    float(curve.temperature_k[i]), int(far), "; ".join(curve.reasons) if far else "",
                ]  # fmt: skip


def asked_of(material: MergedMaterial, fit: ModelFit) -> list[tuple[float, float]]:
    """Rates [1/s] and temperatures [K] of the campaign at which a law can be asked.

    All conditions for a law of rate and temperature; the ones that it was fitted to for a law that knows less.
    """
    held = set(fit.points.conditions)
    whole = fit.model.uses_rate and fit.model.uses_temperature
    found: list[tuple[float, float]] = []
    for number, condition in enumerate(material.conditions):
        one = (condition.mean_rate_per_s, condition.temperature_k)
        near = any(math.isclose(one[0], rate, rel_tol=_SAME_RATE) and one[1] == t for rate, t in found)
        if (whole or number in held) and not near:
            found.append(one)
    return found


def _mega(value_pa: float | None) -> float | None:
    return None if value_pa is None else 1e-6 * value_pa


def _write(target: Path, columns: Sequence[str], rows: Iterable[Sequence[object]]) -> Path:
    with whole_file(target) as part, part.open("w", encoding="utf-8", errors="replace", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(columns)
        for row in rows:
            writer.writerow([cell(value) for value in row])
    return target
