"""The file of a merge: round trip, units, what it names by hash, whom it never overwrites; and its CSV."""

from __future__ import annotations

import csv
import dataclasses
import hashlib
from pathlib import Path

import h5py
import numpy as np
import pytest

from shpb.errors import StoreError
from shpb.merge.campaign import Merged, merge_campaign
from shpb.merge.settings import MergeSettings
from shpb.store.merge_csv import (
    CURVE_COLUMNS,
    TABLE_COLUMNS,
    export_flow_curves,
    export_merged_table,
    harmless,
)
from shpb.store.merge_file import changed_since, load_merge, require_replaceable, save_merge
from shpb.store.peek import Holds, peek
from tests.merge.test_campaign import SHOTS, TESTS, C, bar, law, slow


@pytest.fixture(scope="module")
def merged() -> Merged:
    rejected = bar(1000.0, 293.15, "b5", verdict="reject", reasons=("overlap",))
    settings = MergeSettings(
        models=("johnson-cook", "ludwik", "mechanical-threshold"),
        facts={"melting_temperature_k": 2293.15},
        strains=(0.05, 0.08, 0.1, 0.12, 0.15),
    )
    return merge_campaign([*SHOTS, rejected], TESTS, settings)


@pytest.fixture(scope="module")
def path(merged: Merged, tmp_path_factory: pytest.TempPathFactory) -> Path:
    return save_merge(merged, tmp_path_factory.mktemp("merge") / "merged.h5")


# --- round trip ----------------------------------------------------------------------------------------


def test_settings_files_and_reasons_come_back(merged: Merged, path: Path) -> None:
    stored = load_merge(path)
    assert stored.settings == merged.settings
    assert tuple((one.name, one.sha256) for one in stored.used) == merged.used
    assert stored.left_out == merged.left_out
    assert stored.materials == ("copper-like",)
    assert stored.attributes["/"]["format"] == "shpb-merge"


def test_curves_come_back_bit_for_bit(merged: Merged, path: Path) -> None:
    stored, (material,) = load_merge(path), merged.materials
    for number, condition in enumerate(material.conditions):
        group = f"materials/1/conditions/{number}"
        for name, values in (
            ("plastic_strain", condition.plastic_strain),
            ("true_stress", condition.stress_pa),
            ("true_stress_errors", condition.u_pa()),
            ("true_strain_rate", condition.rate_per_s),
            ("tests", condition.count),
        ):
            np.testing.assert_array_equal(stored[f"{group}/{name}"], values)
        held = stored.attributes[group]
        assert held["files"] == [curve.origin for curve in condition.curves]
        assert held["temperature"] == condition.temperature_k
        assert held["NX_class"] == "NXdata"
        assert (held["signal"], held["axes"]) == ("true_stress", ["plastic_strain"])
    assert stored.units["materials/1/conditions/0/true_stress"] == "Pa"


def test_the_table_comes_back_with_units(merged: Merged, path: Path) -> None:
    stored, (material,) = load_merge(path), merged.materials
    table = "materials/1/table"
    np.testing.assert_array_equal(stored[f"{table}/stress"], [row.stress_pa for row in material.rows])
    np.testing.assert_array_equal(stored[f"{table}/u_stress"], [row.u_pa for row in material.rows])
    assert stored.texts[f"{table}/range"] == tuple(row.range.value for row in material.rows)
    cold = [row.rise_k is None for row in material.rows]
    np.testing.assert_array_equal(np.isnan(stored[f"{table}/temperature_rise"]), cold)
    assert {stored.units[f"{table}/{name}"] for name in ("rate", "least_rate")} == {"1/s"}
    # The planted law at plastic strain 0.1, 0.001 /s, 20 C.
    first = np.flatnonzero((stored[f"{table}/condition"] == 0) & (stored[f"{table}/plastic_strain"] == 0.1))
    assert stored[f"{table}/stress"][first] == pytest.approx(350e6 * (1 + C * np.log(1e-3)), rel=1e-6)


def test_laws_come_back_with_covariance_and_residuals(merged: Merged, path: Path) -> None:
    stored, (material,) = load_merge(path), merged.materials
    fit = next(fit for fit in material.fits if fit.model.key == "johnson-cook")
    group = "materials/1/laws/johnson-cook"
    np.testing.assert_array_equal(stored[f"{group}/covariance"], fit.covariance)
    np.testing.assert_array_equal(stored[f"{group}/correlation"], fit.correlation)
    np.testing.assert_array_equal(stored[f"{group}/parameters/value_used"], fit.parameters)
    assert stored.texts[f"{group}/parameters/name"] == fit.model.names
    assert stored.attributes[f"{group}/facts"]["reference_rate_per_s"] == 1.0
    assert stored.attributes[f"{group}/facts"]["melting_temperature_k"] == 2293.15
    measured, predicted = stored[f"{group}/points/stress"], stored[f"{group}/points/law_stress"]
    np.testing.assert_allclose(stored[f"{group}/points/residual"], measured / predicted - 1, rtol=1e-12)
    np.testing.assert_array_equal(stored[f"{group}/residuals/rms"], [one.rms for one in fit.conditions])
    assert stored.texts["materials/1/laws_not_fitted/key"] == ("mechanical-threshold",)


def test_sensitivities_and_courses_come_back(merged: Merged, path: Path) -> None:
    stored, (material,) = load_merge(path), merged.materials
    group = "materials/1/rate_sensitivity"
    tests, strains = stored.texts[f"{group}/tests"], stored[f"{group}/plastic_strain"]
    for study in material.rates:
        held = study.sensitivities.all
        assert held is not None
        (row,) = [
            i
            for i, name in enumerate(tests)
            if name == "all"
            and strains[i] == study.plastic_strain
            and stored[f"{group}/temperature"][i] == study.temperature_k
        ]
        assert stored[f"{group}/m"][row] == held.exponent.value
        assert (stored[f"{group}/low_m"][row], stored[f"{group}/high_m"][row]) == held.exponent.interval
    courses = [name for name in stored.attributes if name.startswith("materials/1/temperature_courses/")]
    assert len(courses) == len(material.courses)
    assert stored.attributes["materials/1/peak_shift"]["why_not"] == material.why_no_shift


def test_any_viewer_finds_a_curve_by_the_defaults(path: Path) -> None:
    with h5py.File(path) as file:
        item: h5py.Group = file
        while "default" in item.attrs:
            item = item[item.attrs["default"]]
        assert item.attrs["NX_class"] == "NXdata"
        signal, (axis,) = item[item.attrs["signal"]], item.attrs["axes"]
        assert signal.shape == item[axis].shape
        assert signal.attrs["units"] == "Pa"


def test_a_missing_path_lists_what_there_is(path: Path) -> None:
    with pytest.raises(StoreError, match="materials/1/table/stress"):
        load_merge(path)["materials/1/table/strength"]


def test_names_that_are_no_text_keep_their_bytes(tmp_path: Path) -> None:
    name = "\udce9t\udce9.csv"  # latin-1 bytes, as the file system hands them over
    test = dataclasses.replace(slow(1e-3, 293.15, name), material="a\0b =1+1 \x1b[2J", sources=())
    merged = merge_campaign([], [test], MergeSettings(models=("none",)))
    stored = load_merge(save_merge(merged, tmp_path / "m.h5"))
    assert stored.used[0].name == name
    assert stored.materials == ("a\\x00b =1+1 \x1b[2J",)


# --- whom it overwrites --------------------------------------------------------------------------------


def test_a_merge_is_replaced_by_a_merge(merged: Merged, tmp_path: Path) -> None:
    target = tmp_path / "merged.h5"
    save_merge(dataclasses.replace(merged, left_out=()), target)
    save_merge(merged, target)
    assert load_merge(target).left_out == merged.left_out
    assert [p.name for p in tmp_path.iterdir()] == ["merged.h5"]


@pytest.mark.parametrize("content", ["text", "other"])
def test_a_foreign_file_is_never_overwritten(merged: Merged, tmp_path: Path, content: str) -> None:
    target = tmp_path / "merged.h5"
    if content == "text":
        target.write_text("my notes")
    else:
        with h5py.File(target, "w") as file:
            file["mine"] = [1.0]
    before = target.read_bytes()
    with pytest.raises(StoreError, match="not written over it"):
        save_merge(merged, target)
    assert target.read_bytes() == before
    with pytest.raises(StoreError, match="not written over it"):
        require_replaceable(target)


def test_what_cannot_be_read_says_why(path: Path, tmp_path: Path) -> None:
    with pytest.raises(StoreError, match="no such file"):
        load_merge(tmp_path / "none.h5")
    cut = tmp_path / "cut.h5"
    cut.write_bytes(path.read_bytes()[:5000])
    with pytest.raises(StoreError, match="merge again"):
        load_merge(cut)
    with h5py.File(tmp_path / "other.h5", "w") as file:
        file["mine"] = [1.0]
    with pytest.raises(StoreError, match="not a merge"):
        load_merge(tmp_path / "other.h5")
    later = tmp_path / "later.h5"
    later.write_bytes(path.read_bytes())
    with h5py.File(later, "r+") as file:
        file.attrs["format_version"] = 99
    with pytest.raises(StoreError, match="version 99"):
        load_merge(later)
    assert [peek(p).holds for p in (path, cut, tmp_path / "other.h5")] == [
        Holds.MERGE, Holds.DAMAGED, Holds.OTHER
    ]  # fmt: skip


# --- what has changed ----------------------------------------------------------------------------------


def test_a_changed_and_a_missing_file_are_noticed(tmp_path: Path) -> None:
    tests = []
    for number, name in enumerate(("a.csv", "b.csv", "c.csv")):
        (tmp_path / "quasistatic").mkdir(exist_ok=True)
        (tmp_path / "quasistatic" / name).write_text(name)
        sha256 = hashlib.sha256(name.encode()).hexdigest()
        test = slow(10.0 ** -(number + 1), 293.15, name)
        tests.append(dataclasses.replace(test, sha256=sha256, sources=((name, sha256),)))
    merged = merge_campaign([], tests, MergeSettings(models=("none",)))
    places = {one: f"quasistatic/{one[0]}" for one in merged.used}
    target = save_merge(merged, tmp_path / "merged.h5", places=places)
    assert changed_since(target, tmp_path) == []
    (tmp_path / "quasistatic" / "b.csv").write_text("b.csv ")
    (tmp_path / "quasistatic" / "c.csv").unlink()
    assert [one.in_words() for one in changed_since(target, tmp_path)] == [
        "quasistatic/b.csv has changed since the last merge",
        "quasistatic/c.csv is gone since the last merge",
    ]


# --- CSV -----------------------------------------------------------------------------------------------


def rows_of(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_the_table_as_csv(merged: Merged, tmp_path: Path) -> None:
    rows = rows_of(export_merged_table(merged, tmp_path / "merged.csv"))
    (material,) = merged.materials
    assert tuple(rows[0]) == TABLE_COLUMNS
    assert len(rows) == len(material.rows)
    for row, truth in zip(rows, material.rows, strict=True):
        assert float(row["true_stress_MPa"]) == pytest.approx(truth.stress_pa / 1e6, rel=1e-7)
        assert float(row["u_true_stress_MPa"]) == pytest.approx(truth.u_pa / 1e6, rel=1e-7)
        assert float(row["true_rate_per_s"]) == pytest.approx(truth.rate_per_s, rel=1e-7)
        assert (row["temperature_rise_K"] == "") == (truth.rise_k is None)
        assert int(row["condition"]) == truth.condition + 1


def test_flow_curves_as_csv_follow_the_law_and_flag_what_was_not_tested(
    merged: Merged, tmp_path: Path
) -> None:
    rows = rows_of(export_flow_curves(merged, tmp_path / "flow_curves.csv"))
    assert tuple(rows[0]) == CURVE_COLUMNS
    cook = [row for row in rows if row["law"] == "johnson-cook"]
    assert {row["path"] for row in cook} == {"isothermal", "adiabatic"}
    for row in cook:
        strain, rate = float(row["plastic_strain"]), float(row["rate_per_s"])
        # The planted law: cold where isothermal, at the temperature of the path where adiabatic.
        truth = float(law(np.array(strain), rate, float(row["temperature_K"]))) / 1e6
        if 0.05 <= strain <= 0.15:
            assert float(row["true_stress_MPa"]) == pytest.approx(truth, rel=6e-3)
            warm = float(row["temperature_K"]) - float(row["start_temperature_K"])
            assert (warm > 0.5) == (row["path"] == "adiabatic")
        assert (row["extrapolated"] == "1") >= (strain < 0.05 - 1e-9)
        assert (row["why_extrapolated"] != "") == (row["extrapolated"] == "1")
    inside = [row for row in cook if row["extrapolated"] == "0"]
    assert len(inside) > 100
    # Ludwik knows neither rate nor temperature: one condition, no heating.
    assert len({(row["rate_per_s"], row["path"]) for row in rows if row["law"] == "ludwik"}) == 1


@pytest.mark.parametrize(
    "text", ["=1+1", "+1", "-1+cmd", "@SUM(A1)", " =1", "\t=1", "\n=1", "\r@x", "|x", "%x"]
)
def test_cells_that_a_spreadsheet_would_run_are_text(text: str) -> None:
    assert harmless(text).startswith("'")


def test_formulas_in_names_are_harmless_in_the_files(tmp_path: Path) -> None:
    tests = [
        dataclasses.replace(slow(rate, 293.15, "=HYPERLINK(1).csv"), material='=cmd|"/c calc"!A1')
        for rate in (1e-3, 1e-1)
    ]
    merged = merge_campaign([], tests, MergeSettings(models=("ludwik",), leave_out=False))
    for path in (
        export_merged_table(merged, tmp_path / "merged.csv"),
        export_flow_curves(merged, tmp_path / "flow_curves.csv"),
    ):
        for row in rows_of(path):
            assert row["material"] == '\'=cmd|"/c calc"!A1'
            for cell in row.values():
                assert not cell.startswith(("=", "+", "@")), cell
