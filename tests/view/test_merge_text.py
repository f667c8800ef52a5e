"""A merge as text and JSON: what a reader needs, no false digits, eighty columns, harmless names."""

from __future__ import annotations

import dataclasses
import json
import re

import numpy as np
import pytest

from shpb.merge.campaign import Merged, merge_campaign
from shpb.merge.settings import MergeSettings
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.merge_json import merge_json
from shpb.view.merge_text import merge_text
from shpb.view.merge_words import rate_text
from shpb.view.summary import SCHEMA_VERSION, json_text
from shpb.view.text import columns_of
from tests.merge.test_campaign import SHOTS, TESTS, C, bar, law, slow

NASTY = "=a$x^2$ [/x] \x1b[2J \u202e " + "very long name " * 8


@pytest.fixture(scope="module")
def merged() -> Merged:
    others = [
        bar(1000.0, 293.15, "b5", verdict="reject", reasons=("overlap", "closure")),
        bar(1010.0, 293.15, "odd", scale=1.15),
        bar(3000.0, 473.15, "part", verdict="restrict", reasons=("friction",)),
    ]
    settings = MergeSettings(
        models=("johnson-cook", "ludwik", "mechanical-threshold"),
        facts={"melting_temperature_k": 2293.15},
        leave_out=False,
    )
    return merge_campaign([*SHOTS, *others], TESTS, settings)


@pytest.fixture(scope="module")
def text(merged: Merged) -> str:
    return merge_text(merged)


def plain(text: str) -> str:
    """The text on one line."""
    return " ".join(text.split())


def test_first_what_was_merged_then_what_stayed_out(text: str) -> None:
    assert plain(text).startswith(
        "MERGED copper-like: 6 bar shots and 4 quasi-static tests merged, 1 file left out."
    )
    assert re.search(r"^  b5 +rejected: overlap, closure$", text, re.MULTILINE)
    assert text.index("Left out") < text.index("Choices") < text.index("copper-like, compression")


def test_the_table_holds_the_planted_stress_with_two_digits_of_u(text: str) -> None:
    # 350 MPa (1 + C ln 0.001) at plastic strain 0.1; u = 0.4 % own and 0.4 % of the machine.
    stress = 350.0 * (1 + C * np.log(1e-3))
    row = next(
        line
        for line in text.split("True stress in MPa")[1].splitlines()
        if line.split()[:2] == ["0.001", "293"]
    )
    value, u = re.findall(r"([\d.]+)\(([\d.]+)\)", row)[2]
    assert float(value) == pytest.approx(stress, abs=0.06)
    assert float(u) == pytest.approx(np.hypot(0.004, 0.004) * stress, abs=0.06)
    assert u == "1.8"


def test_heated_rows_show_rise_and_isothermal_stress(text: str) -> None:
    lines = text.split("True stress in MPa")[1].splitlines()
    at = next(i for i, line in enumerate(lines) if line.split()[:2] == ["3000", "293"])
    rise, isothermal = re.findall(r"\+(\d+) ([\d.]+)", lines[at + 1])[2]
    # At 0.1: work of 340 MPa over 0.1 by 0.9/(8900 * 385) K m3/J, about 9 K; the start temperature is 0.5e-3/K above.
    cold = float(law(np.array(0.1), 3000.0, 293.15)) / 1e6
    assert float(rise) == pytest.approx(0.9 / (8900 * 385) * 0.1 * 325e6 * (1 + C * np.log(3000)), abs=0.8)
    assert float(isothermal) == pytest.approx(cold, rel=3e-3)


def test_repeats_that_stand_out_and_shots_that_were_restricted_are_named(text: str) -> None:
    said = plain(text)
    assert "odd differs from the other repeats by +1" in said
    assert "it is in the mean all the same" in said
    assert "part restricted by friction: only its span enters" in said


def test_choices_are_stated(merged: Merged, text: str) -> None:
    assert "the bar faces' indentation taken out of the strain" in plain(text)
    assert "at true plastic strain 0.02, 0.05, 0.1, 0.15, 0.2" in plain(text)
    other = dataclasses.replace(merged, settings=dataclasses.replace(merged.settings, indentation_out=False))
    assert "indentation left in the strain of the bars" in plain(merge_text(other))


def test_johnson_cook_names_its_reference_rate_and_its_constants(text: str) -> None:
    block = text.split("Johnson-Cook, fitted to")[1]
    assert "reference rate 1 /s" in plain(block)
    found = {
        line.split()[0]: line.split()[1:]
        for line in block.splitlines()
        if line.startswith("  ") and " to " in line
    }
    # The law that was planted is Johnson-Cook with A = 300 MPa, B = 500 MPa, n = 1, C = 0.01, m = 1 (T* up to 2293 K).
    for name, truth in (("A", 300.0), ("B", 500.0), ("n", 1.0), ("C", 0.01), ("m", 1.0)):
        value, unit_or_u = found[name][0], found[name][1]
        u = float(found[name][2] if unit_or_u == "MPa" else unit_or_u)
        assert abs(float(value) - truth) < 4 * u, name
        assert len(f"{u:.10g}".replace(".", "").lstrip("0")) <= 2


def test_laws_that_could_not_be_fitted_say_why_and_what_to_type(text: str) -> None:
    said = plain(text.split("Laws not fitted")[1])
    assert "mechanical-threshold: the law needs burgers_vector_m" in said
    assert "--fact burgers_vector_nm=" in said
    assert "with_facts" not in text


def test_sensitivity_is_the_planted_one(text: str) -> None:
    block = text.split("Rate sensitivity m")[1]
    row = next(line for line in block.splitlines() if re.match(r"\s+473\s+quasi-static", line))
    m, u, low, _, high = row.split()[2:7]
    # Between 0.001 and 0.1 /s the planted law has m = ln(s2/s1)/ln(100), whatever the strain.
    truth = np.log((1 + C * np.log(0.1)) / (1 + C * np.log(1e-3))) / np.log(100)
    assert float(m) == pytest.approx(truth, abs=6e-5)
    assert float(low) < truth < float(high)
    assert float(u) > 0


@pytest.mark.parametrize("full", [False, True])
def test_no_line_passes_eighty_columns_and_all_is_ascii(merged: Merged, full: bool) -> None:
    said = merge_text(merged, full=full)
    assert max(map(len, said.splitlines())) <= 80
    assert said.isascii()
    assert not any(line.endswith(" ") for line in said.splitlines())
    assert "nan" not in said.casefold().split()


def test_full_adds_every_curve_strain_and_law(merged: Merged, text: str) -> None:
    full = merge_text(merged, full=True)
    assert len(full) > 2 * len(text)
    for words in (
        "Every point",
        "correlation",
        "measured less law",
        "chi2",
        "Ludwik, fitted to",
        "shared (frame)",
    ):
        assert words in full
        assert words not in text


@pytest.mark.parametrize("full", [False, True])
def test_nasty_names_are_harmless(full: bool) -> None:
    tests = [
        dataclasses.replace(slow(rate, 293.15, f"{NASTY}{rate}"), material=NASTY, machine=NASTY)
        for rate in (1e-3, 1e-1)
    ]
    merged = merge_campaign([], tests, MergeSettings(models=("ludwik",), leave_out=False))
    said = merge_text(merged, full=full)
    assert "\x1b" not in said
    assert "\u202e" not in said
    assert max(map(columns_of, said.splitlines())) <= 80


def test_one_test_alone_says_what_cannot_be_told() -> None:
    merged = merge_campaign([], [slow(1e-3, 293.15, "q")], MergeSettings(models=("none",)))
    said = plain(merge_text(merged))
    assert "Left out nothing" in said
    assert "no temperature has tests at two rates" in said
    assert "no rate has tests at two temperatures" in said
    assert "Laws: none were asked for." in said


# --- JSON ----------------------------------------------------------------------------------------------


def refuse(constant: str) -> object:
    raise AssertionError(f"{constant} is no JSON")


def test_json_is_strict_and_in_si(merged: Merged) -> None:
    said = json.loads(json_text(merge_json(merged)), parse_constant=refuse)
    assert said["schema"] == "shpb merge"
    assert said["schema_version"] == SCHEMA_VERSION
    (material,) = said["materials"]
    row = next(r for r in material["table"] if r["condition"] == 1 and r["plastic_strain"] == 0.1)
    assert row["true_stress_pa"] == pytest.approx(350e6 * (1 + C * np.log(1e-3)), rel=1e-6)
    assert row["temperature_rise_k"] is None
    assert said["left_out"] == [{"name": "b5", "why": "rejected: overlap, closure"}]
    assert {one["name"] for one in said["files_used"]} == {name for name, _ in merged.used}
    odd = [one for condition in material["conditions"] for one in condition["outlying"]]
    assert [one["file"] for one in odd] == ["odd"]
    cook = next(one for one in material["laws"] if one["law"] == "johnson-cook")
    assert cook["taken_as_known"]["reference_rate_per_s"] == 1.0
    assert len(cook["covariance"]) == len(cook["parameters"]) == 5
    # Half of the standard uncertainty squared would be a factor of two: the diagonal is u squared.
    for i, parameter in enumerate(cook["parameters"]):
        assert cook["covariance"][i][i] == pytest.approx(parameter["u"] ** 2, rel=1e-9)


# --- digits --------------------------------------------------------------------------------------------


def test_values_are_rounded_where_the_second_digit_of_u_stands() -> None:
    random = np.random.default_rng(5)
    for value, u in zip(
        random.normal(size=400) * 10 ** random.uniform(-7, 9, 400),
        10 ** random.uniform(-7, 7, 400),
        strict=True,
    ):
        # Place of the second significant digit of u as printed (JCGM 100:2008, 7.2.6: two digits suffice).
        place = 10.0 ** (np.floor(np.log10(float(f"{u:.1e}"))) - 1)
        shown, shown_u = float(to_uncertainty(float(value), float(u))), float(uncertainty(float(u)))
        assert abs(shown - value) <= 0.5001 * place
        assert abs(shown_u - u) <= 0.5001 * place
        assert abs(shown / place - round(shown / place)) < 1e-4 * max(1, abs(shown / place) * 1e-9)


@pytest.mark.parametrize(
    ("value", "u", "said"),
    [
        (325.84, 1.843, "325.8"),
        (0.0004, 0.012, "0.000"),
        (0.0008, 0.0069, "0.0008"),
        (4.7657e-5, 6e-6, "4.77e-05"),
        (-0.0004, 0.012, "0.000"),
        (None, 1.0, "not known"),
        (float("nan"), 1.0, "not known"),
        (12.3456, None, "12.35"),
        (12.3456, 0.0, "12.35"),
        (12.3456, float("inf"), "12.35"),
    ],
)
def test_rounding_at_the_edges(value: float | None, u: float | None, said: str) -> None:
    assert to_uncertainty(value, u) == said


def test_rates_have_no_exponent_where_people_speak_of_them() -> None:
    assert [rate_text(r) for r in (1e-4, 0.001, 0.1, 1.0, 1639.3, 12000.0)] == [
        "0.0001", "0.001", "0.1", "1", "1639", "12000"
    ]  # fmt: skip
