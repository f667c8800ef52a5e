"""Exports: cells that no spreadsheet runs, other people's files left alone, laws and tables from a stored merge."""

from __future__ import annotations

import csv
import io
import itertools
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from shpb.errors import InputError, StoreError
from shpb.merge.campaign import Merged, merge_campaign
from shpb.merge.models.registry import model_named
from shpb.merge.settings import MergeSettings
from shpb.store.curves_csv import export_csv
from shpb.store.export_cells import cell, comment, csv_text, harmless, write_text
from shpb.store.export_curves import curves_text, table_text
from shpb.store.export_flow import (
    Asked,
    FlowTable,
    file_stems,
    law_table,
    long_text,
    measured_table,
    wide_text,
)
from shpb.store.export_law import laws_in, stored_fit
from shpb.store.merge_csv import export_merged_table
from shpb.store.merge_file import StoredMerge, load_merge, save_merge
from shpb.store.shot_file import load, save_shot
from tests.merge.test_campaign import SHOTS, TESTS
from tests.view.conftest import shot, shots  # noqa: F401 - fixtures

LAWS = ("johnson-cook", "ludwik", "cowper-symonds-voce")


@pytest.fixture(scope="module", name="merged")
def _merged() -> Merged:
    chosen = MergeSettings(
        models=LAWS, facts={"melting_temperature_k": 2293.15}, strains=(0.05, 0.08, 0.1, 0.12, 0.15)
    )
    return merge_campaign(SHOTS, TESTS, chosen)


@pytest.fixture(scope="module", name="merge")
def _merge(merged: Merged, tmp_path_factory: pytest.TempPathFactory) -> StoredMerge:
    return load_merge(save_merge(merged, tmp_path_factory.mktemp("export") / "merged.h5"))


def cells(text: str) -> list[list[str]]:
    return list(csv.reader(io.StringIO(text)))


def rows(text: str) -> list[dict[str, str]]:
    lines = [line for line in text.splitlines() if not line.startswith("#")]
    return list(csv.DictReader(lines))


# --- cells ---------------------------------------------------------------------------------------------


@settings(derandomize=True, deadline=None, max_examples=150)
@given(st.text(max_size=40))
def test_no_text_is_run_as_a_formula(text: str) -> None:
    for separator in (",", ";"):
        for one in csv.reader(
            io.StringIO(csv_text(["name"], [[text]], [comment("by", text)])), delimiter=separator
        ):
            for found in one:
                assert not found.lstrip().startswith(("=", "+", "-", "@", "\t", "\r"))
                assert not found.startswith(("|", "%"))


@pytest.mark.parametrize(
    "text", ["=1+1", "+1", "-2", "@SUM(A1)", "\tx", "\rx", " =1", "\n=1", "|calc", "%00"]
)
def test_what_would_run_gets_an_apostrophe(text: str) -> None:
    assert harmless(text).startswith("'")


def test_numbers_stay_numbers() -> None:
    assert [cell(value) for value in (-1.5, -3, 0.1, float("nan"), None, True)] == [
        "-1.5",
        "-3",
        "0.1",
        "",
        "",
        "True",
    ]


def test_a_comment_stays_on_its_line_and_runs_nothing_behind_a_comma() -> None:
    line = comment("material", "steel,=cmd\n# forged: yes;  @x")
    assert "\n" not in line
    assert line == "# material: steel,'=cmd # forged: yes;  '@x"


# --- writing -------------------------------------------------------------------------------------------


def test_a_foreign_file_is_never_written_over(tmp_path: Path) -> None:
    target = tmp_path / "a.csv"
    target.write_text("notes of a colleague")
    with pytest.raises(StoreError, match="did not export"):
        write_text(target, "time_us\r\n1\r\n", mark="time_", replace=True)
    assert target.read_text() == "notes of a colleague"


def test_an_earlier_export_is_replaced_only_on_request(tmp_path: Path) -> None:
    target = tmp_path / "a.csv"
    assert write_text(target, "time_us\r\n1\r\n", mark="time_", replace=False)
    assert not write_text(target, "time_us\r\n1\r\n", mark="time_", replace=False)
    with pytest.raises(StoreError, match="--replace"):
        write_text(target, "time_us\r\n2\r\n", mark="time_", replace=False)
    assert write_text(target, "time_us\r\n2\r\n", mark="time_", replace=True)
    assert target.read_bytes() == b"time_us\r\n2\r\n"


def test_a_folder_of_that_name_is_refused(tmp_path: Path) -> None:
    (tmp_path / "a.csv").mkdir()
    with pytest.raises(StoreError, match="did not export"):
        write_text(tmp_path / "a.csv", "time_us", mark="time_", replace=True)


# --- shots and merged table ----------------------------------------------------------------------------


@pytest.mark.parametrize("sort", ["good", "not in equilibrium", "tension", "feet", "no modulus"])
def test_stored_curves_are_those_of_the_reduction(sort: str, shots, tmp_path: Path) -> None:  # noqa: F811
    direct = export_csv(shots[sort], tmp_path / "direct.csv").read_bytes()
    stored = load(save_shot(shots[sort], tmp_path / "shot.h5"))
    assert curves_text(stored).encode() == direct


def test_si_units_are_in_the_names_and_the_numbers(shots, tmp_path: Path) -> None:  # noqa: F811
    stored = load(save_shot(shots["good"], tmp_path / "shot.h5"))
    plain, si = rows(curves_text(stored)), rows(curves_text(stored, si=True))
    assert {"time_s", "true_stress_Pa", "force_in_N"} <= set(si[0])
    assert float(si[50]["true_stress_Pa"]) == pytest.approx(
        1e6 * float(plain[50]["true_stress_MPa"]), rel=1e-6
    )
    assert float(si[50]["force_in_N"]) == pytest.approx(1e3 * float(plain[50]["force_in_kN"]), rel=1e-6)


def test_the_stored_table_is_that_of_the_merge(merged: Merged, merge: StoredMerge, tmp_path: Path) -> None:
    direct = export_merged_table(merged, tmp_path / "merged.csv").read_bytes()
    assert table_text(merge).encode() == direct


# --- laws ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("key", LAWS)
def test_a_stored_law_gives_the_curves_of_the_fit(key: str, merged: Merged, merge: StoredMerge) -> None:
    fit = next(one for one in merged.materials[0].fits if one.model.key == key)
    again = stored_fit(merge, 1, key)
    strains = np.linspace(0.0, 0.3, 31)
    for rate, kelvin in ((1e-3, 293.15), (1000.0, 293.15), (30.0, 500.0), (1e5, 1000.0)):
        a, b = fit.flow_curve(strains, rate, kelvin), again.flow_curve(strains, rate, kelvin)
        np.testing.assert_array_equal(a.stress_pa, b.stress_pa)
        np.testing.assert_array_equal(a.extrapolated, b.extrapolated)
        np.testing.assert_allclose(a.u_stress_pa, b.u_stress_pa, rtol=1e-9)
        assert a.reasons == b.reasons


def test_the_table_of_a_law_is_the_published_formula(merge: StoredMerge) -> None:
    # G. R. Johnson, W. H. Cook, Proc. 7th Int. Symp. on Ballistics (1983) 541-547, written out here once more.
    asked = Asked(rates_per_s=(0.01, 100.0), temperatures_k=(293.15, 600.0), step=0.02, most=0.1)
    table = law_table(merge, 1, "johnson-cook", asked)
    names, values = merge.texts["materials/1/laws/johnson-cook/parameters/name"], None
    values = dict(
        zip(names, merge["materials/1/laws/johnson-cook/parameters/value_used"].tolist(), strict=True)
    )
    for row in rows(long_text(table)):
        e, rate, kelvin = (float(row[name]) for name in ("plastic_strain", "rate_per_s", "temperature_K"))
        warm = max(kelvin - 293.15, 0.0) / (2293.15 - 293.15)
        mpa = (
            1e-6
            * (values["A"] + values["B"] * e ** values["n"])
            * (1 + values["C"] * np.log(rate))
            * (1 - warm ** values["m"])
        )
        assert float(row["true_stress_MPa"]) == pytest.approx(mpa, rel=1e-6)
    assert len(rows(long_text(table))) == 6 * 4


def test_both_forms_hold_the_same_numbers_in_rising_order(merge: StoredMerge) -> None:
    table = law_table(merge, 1, "johnson-cook", Asked())
    long, wide = rows(long_text(table)), rows(wide_text(table))
    strains = [float(row["plastic_strain"]) for row in wide]
    assert strains[0] == 0.0
    assert all(b > a for a, b in itertools.pairwise(strains))
    curves = [name for name in wide[0] if name.startswith("true_stress_MPa_")]
    assert len(curves) == len(table.curves) == len(set(curves))
    for place, name in enumerate(curves):
        part = long[place * len(wide) : (place + 1) * len(wide)]
        assert [row[name] for row in wide] == [row["true_stress_MPa"] for row in part]
        assert [row[name.replace("true_stress_MPa", "extrapolated")] for row in wide] == [
            r["extrapolated"] for r in part
        ]
    keys = [(c.temperature_k, c.rate_per_s) for c in table.curves]
    assert keys == sorted(keys)


def test_cells_outside_what_was_fitted_are_flagged(merge: StoredMerge) -> None:
    points = stored_fit(merge, 1, "johnson-cook").points
    inside = float(points.plastic_strain.min()), float(points.plastic_strain.max())
    table = law_table(
        merge, 1, "johnson-cook", Asked(rates_per_s=(1.0, 1e6), temperatures_k=(293.15,), most=0.4)
    )
    for row in rows(long_text(table)):
        far = (
            float(row["rate_per_s"]) > points.rate_per_s.max()
            or not inside[0] - 1e-9 <= float(row["plastic_strain"]) <= inside[1] + 1e-9
        )
        assert row["extrapolated"] == str(int(far))
        assert bool(row["why_extrapolated"]) == far


def test_a_law_that_was_not_fitted_is_named(merge: StoredMerge) -> None:
    assert set(laws_in(merge, 1)) == set(LAWS)
    with pytest.raises(InputError, match="swift was not fitted to copper-like.*Fitted laws: "):
        law_table(merge, 1, "swift", Asked())
    assert model_named("swift")


# --- measured ------------------------------------------------------------------------------------------


def test_measured_curves_hold_at_their_ends_and_say_so(merge: StoredMerge) -> None:
    table = measured_table(merge, 1, Asked(step=0.005))
    for curve in table.curves:
        known = ~curve.extrapolated
        assert known.any()
        assert np.isfinite(curve.stress_pa).all()
        first, last = np.flatnonzero(known)[[0, -1]]
        assert known[first : last + 1].all()
        assert np.isnan(curve.u_pa[~known]).all()
    condition = merge.attributes["materials/1/conditions/0"]
    curve = next(c for c in table.curves if c.rate_per_s == float(condition["mean_rate"]))
    grid, stress = (merge[f"materials/1/conditions/0/{name}"] for name in ("plastic_strain", "true_stress"))
    at = np.flatnonzero(~curve.extrapolated)[3]
    assert curve.stress_pa[at] == pytest.approx(np.interp(table.plastic_strain[at], grid, stress))


def test_measured_curves_have_their_own_rates(merge: StoredMerge) -> None:
    with pytest.raises(InputError, match="--rates"):
        measured_table(merge, 1, Asked(rates_per_s=(1.0,)))


def test_comments_name_law_constants_range_and_hashes(merge: StoredMerge) -> None:
    text = wide_text(law_table(merge, 1, "johnson-cook", Asked()), si=True)
    head = [line for line in text.splitlines() if line.startswith("#")]
    assert head[0].startswith("# shpb flow table")
    said = "\n".join(head)
    for words in (
        "Johnson-Cook",
        "constant A: ",
        "fitted to: plastic strain",
        "no design allowables",
        "stress [Pa]",
    ):
        assert words in said
    assert all(one.sha256 in said for one in merge.used)


@pytest.mark.parametrize("asked", [Asked(step=1e-5, most=3.0), Asked(step=0.5, most=0.1)])
def test_a_step_that_fits_no_table_is_refused(asked: Asked, merge: StoredMerge) -> None:
    with pytest.raises(InputError, match="--strain-step"):
        law_table(merge, 1, "johnson-cook", asked)


def test_file_names_are_harmless_and_different(merge: StoredMerge) -> None:
    kinds = ["compression"] * 4 + ["tension"]
    two = SimpleNamespace(
        materials=("../a b", "..\\a b", "a b", "A B", "a b"),
        attributes={f"materials/{number}": {"kind": kind} for number, kind in enumerate(kinds, 1)},
    )
    stems = file_stems(two)  # type: ignore[arg-type]
    assert len({stem.casefold() for stem in stems}) == 5
    assert not any(set(stem) & set("/\\ ") or stem.startswith(".") for stem in stems)
    assert isinstance(law_table(merge, 1, "ludwik", Asked()), FlowTable)
