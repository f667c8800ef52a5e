"""Merging as a whole: conditions, table, isothermal stress, scope of each law, and what stays out."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.merge.campaign import MergedMaterial, merge_campaign
from shpb.merge.from_shot import StoredCurve
from shpb.merge.material_curve import RateRange
from shpb.merge.models.registry import model_named
from shpb.merge.quasistatic import QuasistaticTest
from shpb.merge.scope import points_for, scope_words
from shpb.merge.settings import MergeSettings
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind
from tests.merge.curves import linear_hardening
from tests.merge.test_from_shot import stored
from tests.synthetic import copper, sheet

E = 120e9
# s = (300 MPa + 500 MPa e) (1 + C ln rate) (1 - k (T - 293.15)), rate in 1/s.
C, SOFT = 0.01, 5e-4


def law(plastic: np.ndarray, rate: float, temperature: np.ndarray | float) -> np.ndarray:
    return (
        (300e6 + 500e6 * plastic) * (1 + C * np.log(rate)) * (1 - SOFT * (np.asarray(temperature) - 293.15))
    )


def slow(rate: float, kelvin: float, name: str) -> QuasistaticTest:
    plastic = np.linspace(0.0, 0.25, 400)
    return QuasistaticTest(
        material="copper-like",
        kind=TestKind.COMPRESSION,
        temperature_k=Quantity(kelvin),
        strain=plastic,
        stress_pa=law(plastic, rate, kelvin),
        plastic=True,
        rate_per_s=Quantity(rate),
        young_modulus_pa=Quantity(E),
        machine="frame",
        stress_u=0.004,
        stress_u_shared=0.004,
        origin=name,
        sha256=name,
    )


def bar(rate: float, kelvin: float, name: str, *, scale: float = 1.0, **changes: object) -> StoredCurve:
    """A bar shot at a constant true rate, on its own heated path; ``scale`` makes it stronger."""
    time = np.arange(0.0, 0.21 / rate, 0.2e-6)
    plastic = rate * time
    stress, rise = law(plastic, rate, kelvin), np.zeros(plastic.size)
    for _ in range(20):  # the heated path
        rise = HEAT * np.concatenate(
            (np.zeros(1), np.cumsum(np.diff(plastic) * 0.5 * (stress[1:] + stress[:-1])))
        )
        stress = law(plastic, rate, kelvin + rise)
    stress = scale * stress
    true = plastic + stress / E
    strain = 1 - np.exp(-true)
    values: dict[str, object] = {
        "strain": strain,
        "stress_pa": stress / (1 - strain),
        "rate_per_s": rate * (1 - strain),
        "span": (max(int(0.012 / rate / 0.2e-6), 1), time.size),
        "indentation": np.zeros(time.size),
        "indentation_out": True,
        "heating_k": rise,
        "u_pa": 0.011 * stress,
        "u_shared_pa": 0.005 * stress,
        "origin": name,
        "sha256": name,
        "sheet": dataclasses.replace(
            sheet(copper(heat_capacity_j_kg_k=Quantity(385.0))), temperature_k=Quantity(kelvin)
        ),
    }
    return stored(**{**values, **changes})


HEAT = 0.9 / (8900 * 385)  # as the sheets say
TESTS = [
    slow(rate, kelvin, f"q{rate:g}-{kelvin:.0f}") for kelvin in (293.15, 473.15) for rate in (1e-3, 1e-1)
]
SHOTS = [
    bar(1000.0, 293.15, "b1"), bar(1030.0, 293.15, "b2", scale=1.004), bar(3000.0, 293.15, "b3"),
    bar(1000.0, 473.15, "b4"),
]  # fmt: skip


@pytest.fixture(scope="module")
def merged() -> MergedMaterial:
    rejected = bar(1000.0, 293.15, "b5", verdict="reject", reasons=("overlap",))
    settings = MergeSettings(
        models=("cowper-symonds-ludwik", "ludwik", "johnson-cook"), facts={"melting_temperature_k": 2293.15}
    )
    seen: list[tuple[int, int]] = []
    found = merge_campaign(
        [*SHOTS, rejected], TESTS, settings, lambda done, steps: seen.append((done, steps))
    )
    assert [(one.origin, one.why) for one in found.left_out] == [("b5", "rejected: overlap")]
    assert seen == [(1, 4), (2, 4), (3, 4), (4, 4)]
    assert dict(found.used).keys() == {"b1", "b2", "b3", "b4", *(test.origin for test in TESTS)}
    (one,) = found.materials
    return one


def test_conditions_and_repeats(merged: MergedMaterial) -> None:
    found = [(c.range, round(c.temperature_k), len(c.curves)) for c in merged.conditions]
    slow_, bar_ = RateRange.QUASI_STATIC, RateRange.BAR
    assert found == [
        (slow_, 293, 1), (slow_, 293, 1), (slow_, 473, 1), (slow_, 473, 1),
        (bar_, 293, 2), (bar_, 293, 1), (bar_, 473, 1),
    ]  # fmt: skip


def test_the_table_holds_the_law(merged: MergedMaterial) -> None:
    assert len(merged.rows) == 7 * 5
    for row in merged.rows:
        temperature = row.temperature_k + (row.rise_k or 0.0)
        # The repeat that is 0.4 % stronger makes its mean 0.2 % stronger.
        expected = float(law(np.array(row.plastic_strain), row.rate_per_s, temperature))
        assert row.stress_pa == pytest.approx(expected, rel=2.5e-3)
        assert row.u_pa == pytest.approx(np.hypot(row.u_own_pa, row.u_shared_pa))
        assert (row.rise_k is None) is (row.range is RateRange.QUASI_STATIC)
    pair = next(row for row in merged.rows if row.count == 2 and row.plastic_strain == 0.10)
    # One is 0.4 % stronger, and faster by 3 %.
    apart = 0.004 + C * np.log(1.03) / (1 + C * np.log(1000.0))
    assert pair.scatter_pa == pytest.approx(apart / np.sqrt(2) * pair.stress_pa, rel=0.02)
    # Two repeats of 1 % each; the shared 0.5 % stays.
    assert pair.u_own_pa / pair.stress_pa == pytest.approx(0.0098 / np.sqrt(2), rel=0.02)
    assert pair.u_shared_pa / pair.stress_pa == pytest.approx(0.005, rel=0.02)


def test_isothermal_stress(merged: MergedMaterial) -> None:
    for row in merged.rows:
        assert row.isothermal_pa is not None
        expected = float(law(np.array(row.plastic_strain), row.rate_per_s, row.temperature_k))
        # The slope comes from the neighbour in temperature, straight as the law is; repeats differ by 0.2 %.
        assert row.isothermal_pa == pytest.approx(expected, rel=4e-3)
        if row.rise_k is not None and row.plastic_strain == 0.20:
            assert row.isothermal_pa > 1.008 * row.stress_pa  # some 20 K at 5e-4 /K


def test_rate_sensitivity_and_course(merged: MergedMaterial) -> None:
    cold = next(one for one in merged.rates if one.plastic_strain == 0.05 and one.temperature_k < 300)
    everything = cold.sensitivities.all
    assert everything is not None
    # m of the law between 1e-3 and 3e3 /s: ln of the ratio by ln of the rates, heating of 5 K left out.
    exact = np.log((1 + C * np.log(3e3)) / (1 + C * np.log(1e-3))) / np.log(3e6)
    low, high = everything.exponent.interval
    assert low < exact < high
    assert everything.exponent.value == pytest.approx(exact, rel=0.05)
    assert merged.shift is None
    assert "fewer" in merged.why_no_shift or "no rate" in merged.why_no_shift
    assert all(one.course is None and "temperatures" in one.why_not for one in merged.courses)


def test_each_law_gets_the_points_that_it_knows(merged: MergedMaterial) -> None:
    fits = {fit.model.key: fit for fit in merged.fits}
    assert fits["johnson-cook"].points is merged.points
    assert scope_words(fits["johnson-cook"]).startswith("0.001 to 3e+03 /s, 293 to 473 K, 7 conditions")
    rated = fits["cowper-symonds-ludwik"].points
    assert set(np.round(rated.temperature_k)) == {293.0}
    assert len(rated.conditions) == 4
    still = fits["ludwik"].points
    assert len(still.conditions) == 1
    assert still.rate_per_s == pytest.approx(1e-3, rel=1e-6)
    estimates = {one.name: one for one in fits["ludwik"].estimates}
    scale = 1 + C * np.log(1e-3)
    for name, planted in (("sigma_0", 300e6 * scale), ("K", 500e6 * scale), ("n", 1.0)):
        one = estimates[name]
        assert one.low is not None
        assert one.high is not None
        assert one.low < planted < one.high
    # Fitted to most points first.
    assert [fit.model.key for fit in merged.fits] == ["johnson-cook", "cowper-symonds-ludwik", "ludwik"]


def test_johnson_cook_finds_the_law(merged: MergedMaterial) -> None:
    # The law is Johnson & Cook's with n = 1, m = 1, reference rate 1 /s and melting where 1 - k (T - Tr) is nought.
    fit = next(one for one in merged.fits if one.model.key == "johnson-cook")
    planted = {"A": 300e6, "B": 500e6, "n": 1.0, "C": C, "m": 1.0}
    for one in fit.estimates:
        assert one.low is not None
        assert one.high is not None
        assert one.low < planted[one.name] < one.high, one
    assert fit.left_out_rms is not None
    assert fit.left_out_rms < 0.01


def test_a_law_without_rate_takes_a_condition_with_enough_points(merged: MergedMaterial) -> None:
    points = merged.points
    assert points is not None
    # Only two points are left of the slowest condition: three parameters need four.
    slowest = (points.condition == 0) & (points.plastic_strain > 0.06)
    fewer = points.select(~slowest)
    assert points_for(model_named("ludwik"), fewer).conditions == (1,)


def test_nothing_to_merge_says_why() -> None:
    rejected = bar(1000.0, 293.15, "b5", verdict="reject", reasons=("overlap",))
    with pytest.raises(InputError, match="b5: rejected: overlap"):
        merge_campaign([rejected], [], MergeSettings())


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"strains": (0.05, 5.0)}, "0.05 is 5 %"),
        ({"strains": ()}, "true plastic strains"),
        ({"strains": (-0.1,)}, "above 0"),
        ({"reference_rate_per_s": 0.0}, "positive"),
    ],
)
def test_settings_are_checked(changes: dict[str, object], said: str) -> None:
    with pytest.raises(InputError, match=said):
        MergeSettings(**changes)  # type: ignore[arg-type]


def test_a_test_that_cannot_be_used_does_not_stop_the_others() -> None:
    lame = dataclasses.replace(slow(1e-3, 293.15, "lame"), plastic=False, young_modulus_pa=None)
    found = merge_campaign(SHOTS[:1], [lame], MergeSettings(models=("ludwik",)))
    assert [one.origin for one in found.left_out] == ["lame"]
    assert "modulus" in found.left_out[0].why


def test_offset_yield_of_every_test() -> None:
    # Elastic to 200 MPa at 118 GPa, then 800 MPa a unit of plastic strain: at 0.2 % the line meets 201.6 MPa.
    strain, stress = linear_hardening()
    test = QuasistaticTest(
        material="copper-like",
        kind=TestKind.COMPRESSION,
        temperature_k=Quantity(293.15),
        strain=strain,
        stress_pa=stress,
        rate_per_s=Quantity(1e-3),
        young_modulus_pa=Quantity(118e9),
        origin="ramp.csv",
    )
    found = merge_campaign(SHOTS[:1], [test, TESTS[0]], MergeSettings(models=("none",)))
    ramp, plastic = found.offsets
    assert ramp.stress_pa == pytest.approx(200e6 + 800e6 * 0.002, rel=1e-4)
    assert plastic.stress_pa is None
    assert "plastic strain" in plastic.why
    wider = merge_campaign(SHOTS[:1], [test], MergeSettings(models=("none",), offset=0.01)).offsets[0]
    assert wider.stress_pa == pytest.approx(208e6, rel=1e-4)
