"""One HDF5 file a merge: written whole or not at all, read back, and asked whether what went in has changed.

Layout and names: :mod:`shpb.store.merge_layout`. Groups that hold curves carry the NeXus NXdata attributes
(``NX_class``, ``signal``, ``axes``, ``units``, ``long_name``), so any general HDF5 viewer plots them. A number that is
not known is NaN.
"""

from __future__ import annotations

import datetime
import json
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from shpb.errors import StoreError
from shpb.merge.campaign import CourseAtRate, Merged, MergedMaterial
from shpb.merge.model_fit import ModelFit
from shpb.merge.repeats import Repeats
from shpb.store import merge_layout as layout
from shpb.store.merge_read import StoredMerge, changed_since, load_merge
from shpb.store.plain import to_plain
from shpb.version import VERSION
from shpb.whole_file import whole_file

if TYPE_CHECKING:
    import h5py

__all__ = ["StoredMerge", "changed_since", "load_merge", "require_replaceable", "save_merge"]

Places = Mapping[tuple[str, str], str]


def save_merge(merged: Merged, path: Path | str, *, places: Places | None = None) -> Path:
    """Write a merge to its HDF5 file, whole or not at all.

    Parameters
    ----------
    merged : Merged
    path : Path
        File to write. What stands there is replaced only if it is a merge.
    places : mapping of (name, sha256) to str, optional
        Where each file that went in lies, relative to the folder that was merged; its name alone if left out.

    Raises
    ------
    StoreError
        If another file stands there, or the disk refuses.
    """
    import h5py

    target = Path(path)
    require_replaceable(target)
    # Built in memory and written as plain bytes: on a full disk the HDF5 library itself may bring the process down.
    with h5py.File("merged", "w", driver="core", backing_store=False, libver=("earliest", "v110")) as file:
        _write(file, merged, places or {})
        file.flush()
        image = file.id.get_file_image()
    with whole_file(target) as part:
        part.write_bytes(image)
    return target


def require_replaceable(target: Path) -> None:
    """Raise StoreError if something else than a merge of this program stands at ``target``."""
    import h5py

    if not target.exists():
        return
    what = "is not a merge of this program"
    try:
        with h5py.File(target, "r", locking="best-effort") as file:
            if file.attrs.get("format") == layout.FORMAT:
                return
    except (OSError, RuntimeError):
        what = "cannot be read as a merge of this program"
    raise StoreError(
        f"the file {what}; the new merge is not written over it",
        where=str(target),
        mend="Choose another folder with --results, or move that file away",
    )


def _write(file: h5py.File, merged: Merged, places: Places) -> None:
    file.attrs.update(
        {
            "format": layout.FORMAT,
            "format_version": layout.FORMAT_VERSION,
            "program_version": VERSION,
            "created_utc": datetime.datetime.now(datetime.UTC).isoformat(timespec="seconds"),
            "NX_class": "NXroot",
            "default": "materials",
        }
    )
    file["settings"] = json.dumps(to_plain(merged.settings))
    file["offset_yields"] = json.dumps([to_plain(one) for one in merged.offsets])
    used = merged.used
    _write_table(
        file.create_group("files"),
        (
            layout.Column("name", "", "File that went in", [name for name, _ in used]),
            layout.Column("sha256", "", "Hash of its bytes", [sha256 for _, sha256 in used]),
            layout.Column("place", "", "Where it lay", [places.get(one, one[0]) for one in used]),
        ),
    )
    _write_table(
        file.create_group("left_out"),
        (
            layout.Column("name", "", "File that stayed out", [one.origin for one in merged.left_out]),
            layout.Column("why", "", "Why", [one.why for one in merged.left_out]),
        ),
    )
    parent = file.create_group("materials")
    parent.attrs.update({"NX_class": "NXentry", "default": "1"})
    for number, material in enumerate(merged.materials, 1):
        _write_material(parent.create_group(str(number)), material)


def _write_material(group: h5py.Group, material: MergedMaterial) -> None:
    group.attrs.update({"NX_class": "NXentry", "default": "conditions"})
    _put(group, {"material": material.material, "kind": material.kind.value})
    conditions = group.create_group("conditions")
    conditions.attrs.update({"NX_class": "NXentry", "default": "0"})
    for number, condition in enumerate(material.conditions):
        _write_condition(conditions.create_group(str(number)), condition)
    _write_table(group.create_group("table"), layout.flow_columns(material))
    _write_table(group.create_group("rate_sensitivity"), layout.sensitivity_columns(material))
    _write_table(group.create_group("upturn"), layout.upturn_columns(material))
    courses = group.create_group("temperature_courses")
    for number, course in enumerate(material.courses):
        _write_course(courses.create_group(str(number)), course)
    _write_shift(group.create_group("peak_shift"), material)
    laws = group.create_group("laws")
    for rank, fit in enumerate(material.fits, 1):
        _write_law(laws.create_group(fit.model.key), fit, rank)
    _write_table(
        group.create_group("laws_not_fitted"),
        (
            layout.Column("key", "", "Law", [one.model.key for one in material.not_fitted]),
            layout.Column("why", "", "Why it was not fitted", [one.why for one in material.not_fitted]),
        ),
    )


def _write_condition(group: h5py.Group, condition: Repeats) -> None:
    group.attrs.update({"NX_class": "NXdata", "signal": "true_stress", "axes": ["plastic_strain"]})
    curves = [
        ("plastic_strain", "", "True plastic strain", condition.plastic_strain),
        ("true_stress", "Pa", "Mean true stress of the repeats", condition.stress_pa),
        ("true_stress_errors", "Pa", "Standard uncertainty of the mean, own and shared parts", condition.u_pa()),
        ("u_own_true_stress", "Pa", "Its own part", condition.u_own_pa),
        ("scatter_true_stress", "Pa", "Standard deviation among the repeats", condition.scatter_pa),
        ("true_strain_rate", "1/s", "Mean true strain rate", condition.rate_per_s),
        ("tests", "", "Tests that are valid there", condition.count),
    ]  # fmt: skip
    if condition.temperature_rise_k is not None:
        curves.append(("temperature_rise", "K", "Mean adiabatic rise", condition.temperature_rise_k))
    for name, units, label, values in curves:
        group[name] = values
        group[name].attrs.update({"units": units, "long_name": label})
    shared = group.create_group("u_shared")
    for number, (name, relative) in enumerate(condition.shared.items()):
        dataset = shared.create_dataset(str(number), data=relative)
        _put(
            dataset,
            {"units": "", "long_name": "Relative part of u that the rig or machine shares", "of": name},
        )
    _put(
        group,
        {
            "range": condition.range.value,
            "mean_rate": condition.mean_rate_per_s,  # [1/s]
            "rate_range": condition.rate_range_per_s,
            "temperature": condition.temperature_k,  # [K], at the start
            "temperature_range": condition.temperature_range_k,
            "files": [curve.origin for curve in condition.curves],
            "sha256": [curve.sha256 for curve in condition.curves],
            "spans": np.array([curve.span for curve in condition.curves]),
            "remarks": ["; ".join(curve.remarks) for curve in condition.curves],
            "outlying": [one.in_words() for one in condition.outliers],
        },
    )


def _write_course(group: h5py.Group, course: CourseAtRate) -> None:
    _put(
        group,
        {
            "plastic_strain": course.plastic_strain,
            "rate": course.rate_per_s,  # [1/s]
            "conditions": np.array(course.conditions),
            "why_not": course.why_not,
        },
    )
    found = course.course
    if found is None:
        return
    group.attrs.update({"NX_class": "NXdata", "signal": "true_stress", "axes": ["temperature"]})
    _write_table(
        group,
        (
            layout.Column("temperature", "K", "Temperature at the start", found.temperature_k.tolist()),
            layout.Column("true_stress", "Pa", "True stress", found.stress_pa.tolist()),
            layout.Column("true_stress_errors", "Pa", "Standard uncertainty", found.u_pa.tolist()),
        ),
    )
    _put(
        group,
        {
            "rises": found.rises,
            "rise": found.rise_pa,  # [Pa]
            "u_rise": found.u_rise_pa,
            "rise_between": found.rise_between_k,  # [K]
            "chance": found.chance,
            "reason": found.reason,
            **layout.extreme_attributes("minimum", found.minimum),
            **layout.extreme_attributes("peak", found.peak),
        },
    )


def _write_shift(group: h5py.Group, material: MergedMaterial) -> None:
    shift = material.shift
    if shift is None:
        _put(group, {"why_not": material.why_no_shift})
        return
    _write_table(
        group,
        [
            *layout.estimate_columns(
                "kelvin_per_decade", "K", "Peak temperature over log10(rate)", [shift.kelvin_per_decade]
            ),
            *layout.estimate_columns(
                "activation_energy", "J", "Q of ln(rate) = const - Q/(k T_peak)", [shift.activation_energy_j]
            ),
            layout.Column("used_rate", "1/s", "Rates with a bracketed peak", shift.used),
            layout.Column("left_out_rate", "1/s", "Rates without", shift.left_out),
        ],
    )


def _write_law(group: h5py.Group, fit: ModelFit, rank: int) -> None:
    numbers: dict[str, object] = {
        "name": fit.model.name,
        "formula": fit.model.formula,
        "source": fit.model.source,
        "rank": rank,
        "chi2": fit.chi2,
        "degrees_of_freedom": fit.degrees_of_freedom,
        "scatter_factor": fit.scatter_factor,
        "shared_factor": fit.shared_factor,
        "condition_number": fit.condition_number,
        "converged": fit.converged,
        "warnings": list(fit.warnings),
    }
    for name, value in (
        ("aicc", fit.aicc),
        ("left_out_rms", fit.left_out_rms),
        ("heat", fit.points.heat_k_m3_j),  # [K m3/J]
    ):
        if value is not None:
            numbers[name] = value
    _put(group, numbers)
    _put(group.create_group("facts"), dict(fit.model.known_facts()))
    _write_table(group.create_group("parameters"), layout.parameter_columns(fit))
    for name, label, matrix in (
        ("covariance", "Covariance of the parameters, in the products of their units", fit.covariance),
        ("correlation", "Correlation of the parameters", fit.correlation),
    ):
        group[name] = matrix
        group[name].attrs["long_name"] = label
    _write_table(group.create_group("shared_errors"), layout.shared_columns(fit))
    _write_table(group.create_group("residuals"), layout.residual_columns(fit))
    _write_table(group.create_group("points"), layout.point_columns(fit))


# --- plain pieces --------------------------------------------------------------------------------------


def _write_table(group: h5py.Group, columns: Iterable[layout.Column]) -> None:
    """One dataset a column: text where it holds text, else floats."""
    import h5py

    text = h5py.string_dtype("utf-8")
    for column in columns:
        if any(isinstance(value, str) for value in column.values) or column.name in _TEXTS:
            dataset = group.create_dataset(
                column.name, data=_encoded([str(value or "") for value in column.values]), dtype=text
            )
        else:
            dataset = group.create_dataset(column.name, data=layout.numbers(column.values))
        dataset.attrs.update({"units": column.units, "long_name": column.label})


# Columns of text, also where there is no row to show it.
_TEXTS = {"name", "sha256", "place", "why", "key", "unit", "standing", "reason", "range", "outcome", "why_not",
          "left_out_reason", "meaning"}  # fmt: skip


def _put(item: h5py.Group | h5py.Dataset, attributes: Mapping[str, object]) -> None:
    """Attributes; texts in UTF-8 whatever stands in them."""
    import h5py

    text = h5py.string_dtype("utf-8")
    for name, value in attributes.items():
        if isinstance(value, str):
            item.attrs.create(name, _encoded([value])[0], dtype=text)
        elif isinstance(value, list):
            item.attrs.create(name, _encoded(value), shape=(len(value),), dtype=text)
        else:
            item.attrs[name] = value


def _encoded(texts: Sequence[str]) -> np.ndarray:
    """Bytes of each text: a name that is no UTF-8 keeps its own; a NUL, which ends a text in HDF5, is spelt out."""
    return np.array(
        [text.replace("\0", "\\x00").encode("utf-8", "surrogateescape") for text in texts], dtype=object
    )
