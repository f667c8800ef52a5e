"""The curves of a stored shot and the table of a stored merge as CSV, taken from the file: nothing is worked out anew.

Columns and rows of a shot are those of :func:`shpb.store.curves_csv.export_csv`.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import StoreError
from shpb.store.export_cells import csv_text
from shpb.store.merge_csv import TABLE_COLUMNS
from shpb.store.merge_read import StoredMerge
from shpb.store.shot_file import StoredShot

CURVES_MARK = "time_"  # how every table of curves begins
TABLE_MARK = "material,"

# Column, factor and unit for people's hands, unit in SI, path in the file.
_COLUMNS = (
    ("time", 1e6, "us", "s", "response/time"),
    ("counts", 1.0, "", "", ""),
    ("true_strain", 1.0, "", "", "response/true_strain"),
    ("true_stress", 1e-6, "MPa", "Pa", "response/true_stress"),
    ("u_true_strain", 1.0, "", "", "trust/u_true_strain"),
    ("u_true_stress", 1e-6, "MPa", "Pa", "trust/u_true_stress"),
    ("true_strain_rate", 1.0, "per_s", "per_s", "response/true_strain_rate"),
    ("strain_1w", 1.0, "", "", "response/strain_1w"),
    ("stress_1w", 1e-6, "MPa", "Pa", "response/stress_1w"),
    ("strain_rate_1w", 1.0, "per_s", "per_s", "response/strain_rate_1w"),
    ("strain_3w", 1.0, "", "", "response/strain_3w"),
    ("stress_3w", 1e-6, "MPa", "Pa", "response/stress_3w"),
    ("strain_rate_3w", 1.0, "per_s", "per_s", "response/strain_rate_3w"),
    ("force_in", 1e-3, "kN", "N", "response/force_in"),
    ("force_out", 1e-3, "kN", "N", "response/force_out"),
    ("equilibrium_ratio", 1.0, "", "", "response/equilibrium_ratio"),
    ("equilibrium_floor", 1.0, "", "", "trust/equilibrium_floor"),
    ("u_force_difference", 1.0, "", "", "trust/u_force_difference"),
    ("indentation_strain", 1.0, "", "", "response/indentation_strain"),
)


def curves_text(stored: StoredShot, *, si: bool = False) -> str:
    """The curves of a stored shot as CSV, one row a sample, from just before the front to the end of loading.

    Parameters
    ----------
    stored : StoredShot
    si : bool
        Seconds, pascals and newtons; else microseconds, MPa and kN. The column names carry the unit.

    Raises
    ------
    StoreError
        If the file lacks a curve.
    """
    time = stored["response/time"]
    facts = stored.attributes["response"]
    end = int(np.searchsorted(time, float(facts["loading_end_time"]) - 1e-12)) + 1
    start = int(np.searchsorted(time, -1e-12))
    stop = min(end + (end - start) // 10, time.size)
    names, values = [], []
    for name, factor, unit, si_unit, path in _COLUMNS:
        used = si_unit if si else unit
        names.append(f"{name}_{used}" if used else name)
        if name == "counts":
            values.append(_counts(stored, time))
        else:
            values.append(stored[path] if si else factor * stored[path])
    rise = stored.arrays.get("response/temperature_rise")
    if rise is not None:
        names.append("temperature_K")
        values.append(rise + float(stored.sheet.temperature_k))
    if any(column.shape != time.shape for column in values):
        raise StoreError(
            "its curves are of different lengths", where=str(stored.path), mend="Reduce the record again"
        )
    return csv_text(names, np.column_stack([column[:stop] for column in values]).tolist())


def _counts(stored: StoredShot, time: FloatArray) -> FloatArray:
    """1.0 where a sample lies in the span that counts, else 0.0."""
    facts = stored.attributes["response"]
    if "span_start_time" not in facts:
        return np.zeros(time.size)
    inside = (time >= facts["span_start_time"] - 1e-12) & (time <= facts["span_end_time"] + 1e-12)
    return np.asarray(inside, dtype=float)


def table_text(merge: StoredMerge, *, si: bool = False) -> str:
    """The merged table of a stored merge as CSV, one row a condition and plastic strain."""
    columns = [name.replace("_MPa", "_Pa") for name in TABLE_COLUMNS] if si else TABLE_COLUMNS
    rows = (row for number in range(1, len(merge.materials) + 1) for row in _table_rows(merge, number, si))
    return csv_text(columns, rows)


def _table_rows(merge: StoredMerge, number: int, si: bool) -> Iterator[list[object]]:
    base = f"materials/{number}"
    about, factor = merge.attributes[base], 1.0 if si else 1e-6

    def column(name: str) -> FloatArray:
        return merge[f"{base}/table/{name}"]

    for place, kind in enumerate(merge.texts[f"{base}/table/range"]):
        condition = int(column("condition")[place])
        strain = float(column("plastic_strain")[place])
        held = merge.attributes[f"{base}/conditions/{condition}"]
        files = [
            str(name)
            for name, span in zip(held["files"], held["spans"], strict=True)
            if span[0] - 1e-12 <= strain <= span[1] + 1e-12
        ]
        yield [
            str(about["material"]), str(about["kind"]), condition + 1, kind, strain,
            *(factor * float(column(name)[place]) for name in
              ("stress", "u_stress", "u_own_stress", "u_shared_stress", "scatter_stress")),
            int(column("tests")[place]),
            *(float(column(name)[place]) for name in
              ("rate", "least_rate", "greatest_rate", "temperature", "temperature_rise")),
            *(factor * float(column(name)[place]) for name in ("isothermal_stress", "u_isothermal_stress")),
            "; ".join(files),
        ]  # fmt: skip
