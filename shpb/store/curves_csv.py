"""The curves of a shot as CSV, units in the column names."""

from __future__ import annotations

import csv
from collections.abc import Callable
from pathlib import Path

import numpy as np

from shpb.arrays import FloatArray
from shpb.reduction import ShotResult
from shpb.whole_file import whole_file

_COLUMNS: tuple[tuple[str, Callable[[ShotResult], FloatArray]], ...] = (
    ("time_us", lambda r: 1e6 * r.response.time_s),
    ("counts", lambda r: _counts(r)),  # noqa: PLW0108 - defined below
    ("true_strain", lambda r: r.response.curve.true_strain),
    ("true_stress_MPa", lambda r: 1e-6 * r.response.curve.true_stress_pa),
    ("u_true_strain", lambda r: r.budget.u_true_strain),
    ("u_true_stress_MPa", lambda r: 1e-6 * r.budget.u_true_stress_pa),
    ("true_strain_rate_per_s", lambda r: r.response.curve.true_strain_rate_per_s),
    ("strain_1w", lambda r: r.response.one_wave.strain),
    ("stress_1w_MPa", lambda r: 1e-6 * r.response.one_wave.stress_pa),
    ("strain_rate_1w_per_s", lambda r: r.response.one_wave.strain_rate_per_s),
    ("strain_3w", lambda r: r.response.three_wave.strain),
    ("stress_3w_MPa", lambda r: 1e-6 * r.response.three_wave.stress_pa),
    ("strain_rate_3w_per_s", lambda r: r.response.three_wave.strain_rate_per_s),
    ("force_in_kN", lambda r: 1e-3 * r.response.motion.force_in_n),
    ("force_out_kN", lambda r: 1e-3 * r.response.motion.force_out_n),
    ("equilibrium_ratio", lambda r: r.response.equilibrium.ratio),
    ("equilibrium_floor", lambda r: r.response.equilibrium.floor),
    ("u_force_difference", lambda r: r.budget.u_force_difference),
    ("indentation_strain", lambda r: r.response.indentation_strain),
)


def _columns(result: ShotResult) -> tuple[tuple[str, FloatArray], ...]:
    """Every column that this shot has: the temperature only where its heating is known."""
    columns = tuple((name, of(result)) for name, of in _COLUMNS)
    rise = result.response.heating_k
    if rise is None:
        return columns
    return (*columns, ("temperature_K", rise + result.sheet.temperature_k))


def _counts(result: ShotResult) -> FloatArray:
    """1 where a sample lies in the span that counts, else 0."""
    counts = np.zeros(result.response.time_s.size)
    if result.response.span is not None:
        counts[slice(*result.response.span)] = 1
    return counts


def export_csv(result: ShotResult, path: Path | str) -> Path:
    """Write the curves from just before the front to the end of loading, comma-separated, one row a sample.

    Column ``counts`` is 1 inside the span that counts and 0 elsewhere; strain and stress without "true" in their
    name are engineering values.

    Raises
    ------
    StoreError
        If the file cannot be written.

    Examples
    --------
    >>> import shpb
    >>> path = shpb.export_csv(result, folder / "W-02.csv")
    >>> path.read_text().splitlines()[0].split(",")[:4]
    ['time_us', 'counts', 'true_strain', 'true_stress_MPa']
    """
    target = Path(path)
    response = result.response
    stop = min(response.loading[1] + (response.loading[1] - response.loading[0]) // 10, response.time_s.size)
    columns = _columns(result)
    values = np.column_stack([column[:stop] for _, column in columns])
    with whole_file(target) as part, part.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow([name for name, _ in columns])
        writer.writerows([f"{value:.8g}" for value in row] for row in values.tolist())
    return target
