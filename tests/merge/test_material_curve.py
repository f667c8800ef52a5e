from __future__ import annotations

import dataclasses
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq

from shpb.demo.materials import ALLOYS
from shpb.errors import InputError
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.merge.offset import offset_yield
from shpb.merge.prepare import CurveSettings, engineering_curve, from_quasistatic
from shpb.merge.quasistatic import QuasistaticTest, read_quasistatic
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind

from .curves import FACTS, linear_hardening, material_curve, write_table

DATA = Path(__file__).parent / "data"
EXAMPLES = Path(__file__).parents[2] / "examples" / "quasistatic"


def law_test(
    kind: TestKind = TestKind.COMPRESSION, *, noise_pa: float = 0.0, zero: float = 0.0, **more: object
) -> tuple[QuasistaticTest, np.ndarray, np.ndarray]:
    """A test of the true law s = 150 MPa + 400 MPa ep^0.5, made in closed form; also its ep and s."""
    modulus = 118e9
    plastic = np.concatenate((np.zeros(50), np.linspace(0, 0.3, 900)))
    stress = np.concatenate((np.linspace(0, 150e6, 50), 150e6 + 400e6 * np.sqrt(plastic[50:])))
    true = plastic + stress / modulus
    if kind is TestKind.COMPRESSION:
        strain = -np.expm1(-true)
        force = stress / (1 - strain)
    else:
        strain = np.expm1(true)
        force = stress / (1 + strain)
    force = force + noise_pa * np.random.default_rng(4).standard_normal(force.size)
    test = QuasistaticTest(
        material="Wrenmoor 3", kind=kind, temperature_k=Quantity(293.15), strain=strain + zero, stress_pa=force,
        rate_per_s=Quantity(1e-3), young_modulus_pa=Quantity(modulus), origin="law.csv", **more,  # type: ignore[arg-type]
    )  # fmt: skip
    return test, plastic, stress


@pytest.mark.parametrize("kind", list(TestKind))
def test_the_law_comes_back_in_compression_and_tension(kind: TestKind) -> None:
    test, _, _ = law_test(kind)
    curve = from_quasistatic(test)
    inside = curve.plastic_strain >= curve.span[0]
    law = 150e6 + 400e6 * np.sqrt(curve.plastic_strain[inside])
    # Exact but for the zero of the fitted line: true stress bends off engineering stress by 1e-3 in the elastic part.
    np.testing.assert_allclose(curve.stress_pa[inside], law, rtol=3e-4)
    end = 0.3
    if kind is TestKind.TENSION:
        # A. Considere, Annales des Ponts et Chaussees 9 (1885) 574: greatest force where ds/de = s, e with its elastic
        # part: H/(1 + H/E) = s, H = 200 MPa/sqrt(ep).
        def beyond(plastic: float) -> float:
            slope = 200e6 / np.sqrt(plastic)
            return float(slope / (1 + slope / 118e9) - 150e6 - 400e6 * np.sqrt(plastic))

        end = brentq(beyond, 0.1, 0.3)
        assert any("cut at the greatest force" in r for r in curve.remarks)
    assert curve.span[1] == pytest.approx(end, abs=4e-4)  # readings are 3.3e-4 apart


def test_toe_shift_is_taken_out() -> None:
    curve = from_quasistatic(law_test(zero=0.02)[0])
    assert curve.span[1] == pytest.approx(0.3, abs=2e-5)
    kept = from_quasistatic(law_test(zero=0.02)[0], CurveSettings(toe=False))
    # Left in, 2 % of engineering strain at the end (e^-0.3 of the length is left) are 0.0267 of true strain.
    assert kept.span[1] - 0.3 == pytest.approx(-np.log1p(-0.02 / np.exp(-0.3046)), abs=1e-3)


def test_noise_does_not_bias_the_stress() -> None:
    curve = from_quasistatic(law_test(noise_pa=3e6)[0])
    inside = curve.plastic_strain > 0.01
    off = curve.stress_pa[inside] - (150e6 + 400e6 * np.sqrt(curve.plastic_strain[inside]))
    assert (np.diff(curve.plastic_strain) > 0).all()
    # 870 readings with 3 MPa each: their mean is good to 0.1 MPa.
    assert abs(off.mean()) < 0.4e6
    assert off.std() < 3.2e6


def test_the_true_modulus_counts_not_the_apparent_slope() -> None:
    # With a modulus of 59 in place of 118 GPa, 300 MPa leave 0.25 % less plastic strain.
    test, _, _ = law_test()
    wrong = from_quasistatic(dataclasses.replace(test, young_modulus_pa=Quantity(60e9)))
    right = from_quasistatic(test)
    stress = right.stress_pa[-1]
    assert right.span[1] - wrong.span[1] == pytest.approx(stress * (1 / 60e9 - 1 / 118e9), rel=1e-3)


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.csv")), ids=lambda p: p.stem)
def test_the_demo_files_give_their_law(path: Path) -> None:
    curve = from_quasistatic(read_quasistatic(path))
    alloy = next(a for a in ALLOYS if a.name == curve.material)
    inside = curve.plastic_strain >= 0.002
    law = alloy.law.stress_pa(curve.plastic_strain[inside], curve.mean_rate_per_s, curve.temperature_k)
    ratio = curve.stress_pa[inside] / law
    # Noise of 0.15 % of the greatest engineering stress on some 110 readings.
    assert ratio.mean() == pytest.approx(1.0, abs=8e-4)
    assert ratio.std() < 3e-3
    assert curve.span[1] == pytest.approx(0.35, abs=2e-4)


def test_the_simulated_metal_gives_its_planted_law() -> None:
    # The table of an elastodynamic simulation whose flow law is known (header of its TOML file).
    curve = from_quasistatic(read_quasistatic(DATA / "virtual_rig_metal_1k_quasistatic.csv"))
    inside = curve.plastic_strain >= 0.002
    law = (90e6 + 290e6 * curve.plastic_strain[inside] ** 0.31) * (1 + 0.025 * np.log1p(1e-3))
    np.testing.assert_allclose(curve.stress_pa[inside], law, rtol=1e-4)


def test_offset_yield_of_the_engineering_curve() -> None:
    strain, stress = linear_hardening()
    test = dataclasses.replace(law_test()[0], strain=strain + 0.004, stress_pa=stress)
    curve = engineering_curve(test)
    assert curve.linear is not None
    found = offset_yield(curve.strain, curve.stress_pa, modulus_pa=118e9)
    assert found.stress_pa == pytest.approx(
        200e6 + 800e6 * 0.002, rel=1e-5
    )  # closed form of linear hardening


def test_plastic_strain_of_the_table_is_used_as_it_is(tmp_path: Path) -> None:
    plastic = np.linspace(0, 0.2, 30)
    rows = np.column_stack((plastic * 100, 200 + 500 * plastic))
    facts = {k: v for k, v in FACTS.items() if k != "young_modulus_GPa"}
    path = write_table(tmp_path / "p.csv", "true_plastic_strain_percent,true_stress_MPa", rows, facts)
    curve = from_quasistatic(read_quasistatic(path))
    np.testing.assert_allclose(curve.plastic_strain, plastic, atol=1e-9)
    np.testing.assert_allclose(curve.stress_pa, 200e6 + 500e6 * plastic, rtol=1e-8)
    with pytest.raises(InputError, match="not the whole curve"):
        engineering_curve(read_quasistatic(path))


def test_rate_of_a_constant_crosshead_speed() -> None:
    # e_t = -ln(1 - e): true rate = rate/(1 - e).
    curve = from_quasistatic(dataclasses.replace(law_test()[0], rate_is_engineering=True))
    assert curve.rate_per_s[-1] == pytest.approx(1e-3 * np.exp(0.3 + curve.stress_pa[-1] / 118e9), rel=1e-4)
    held = from_quasistatic(law_test()[0])
    assert held.rate_range_per_s == (1e-3, 1e-3)


def test_rate_from_the_times_and_a_contradiction() -> None:
    test, _, _ = law_test()
    time = test.strain / 2e-3  # constant engineering rate of 2e-3 /s
    timed = dataclasses.replace(test, time_s=time, rate_per_s=None)
    curve = from_quasistatic(timed)
    middle = np.abs(curve.plastic_strain - 0.15) < 0.05
    np.testing.assert_allclose(
        curve.rate_per_s[middle], 2e-3 * np.exp(curve.plastic_strain[middle]), rtol=5e-3
    )
    with pytest.raises(InputError, match=r"the times give .* /s, but 0.1 /s is stated"):
        from_quasistatic(dataclasses.replace(timed, rate_per_s=Quantity(0.1)))
    with pytest.raises(InputError, match="no strain rate and no times"):
        from_quasistatic(dataclasses.replace(test, rate_per_s=None))


def test_uncertainties_stated_and_assumed() -> None:
    assumed = from_quasistatic(law_test()[0])
    assert sum("assumed" in r for r in assumed.remarks) == 2
    assert assumed.shared_group == "quasi-static machine"
    stated = from_quasistatic(law_test(machine="Machine 2", stress_u=0.01, stress_u_shared=0.004)[0])
    assert not any("assumed" in r for r in stated.remarks)
    np.testing.assert_allclose(stated.u_own_pa, 0.01 * stated.stress_pa)
    assert (stated.u_shared, stated.shared_group) == (0.004, "Machine 2")


def test_a_missing_modulus() -> None:
    with pytest.raises(
        InputError, match=r"law.csv, young_modulus_GPa: plastic strain needs the Young's modulus"
    ):
        from_quasistatic(dataclasses.replace(law_test()[0], young_modulus_pa=None))


@pytest.mark.parametrize("factor", [100.0, 0.3])
def test_an_elastic_slope_that_no_machine_explains(factor: float) -> None:
    # A strain in per cent below 3, or a wrong area, is not seen in the numbers alone; the modulus tells.
    test, _, _ = law_test()
    short = dataclasses.replace(test, strain=test.strain[:200] * factor, stress_pa=test.stress_pa[:200])
    with pytest.raises(InputError, match=r"the elastic slope is .* GPa where the modulus is 118 GPa"):
        from_quasistatic(short)


def test_nothing_plastic() -> None:
    test, _, _ = law_test()
    with pytest.raises(InputError, match="before the curve counts"):
        from_quasistatic(dataclasses.replace(test, strain=test.strain[:50], stress_pa=test.stress_pa[:50]))


def test_mean_rate_is_strain_over_time() -> None:
    # Half the strain at 1, half at 3 /s: 1/mean = (1/1 + 1/3)/2, mean 1.5 /s, not 2.
    strain = np.array([0, 0.1, 0.1 + 1e-9, 0.2])
    curve = dataclasses.replace(
        material_curve(points=4), plastic_strain=strain, rate_per_s=np.array([1.0, 1, 3, 3]), span=(0.0, 0.2)
    )
    assert curve.mean_rate_per_s == pytest.approx(1.5, rel=1e-6)
    assert curve.rate_range_per_s == (1, 3)


def test_nothing_outside_the_valid_span() -> None:
    curve = material_curve(np.linspace(100e6, 500e6, 401), span=(0.05, 0.1), rise_k=100.0)
    point = curve.at(0.0625)
    assert point is not None
    assert point.stress_pa == pytest.approx(162.5e6)
    assert point.temperature_rise_k == pytest.approx(6.25)
    assert curve.at(0.049) is None
    assert curve.at(0.101) is None


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"plastic_strain": np.array([0, 0.1, 0.1, 0.2])}, "point 2: plastic strain 0.1 after 0.1"),
        ({"plastic_strain": np.array([0, 1.0, 2.0, 20.0])}, "not per cent"),
        ({"stress_pa": np.array([0.0, 1, 1, 1])}, "stress_pa is 0 at its lowest"),
        ({"stress_pa": np.array([np.nan, 1, 1, 1])}, "not finite"),
        ({"stress_pa": np.ones(3)}, "the same length"),
        ({"span": (0.0, 0.5)}, "valid from 0 to 0.5 on a curve from 0 to 0.4"),
        ({"temperature_k": -20.0}, "in kelvin"),
        ({"u_shared": 0.01}, "the rig or machine that shares it"),
        ({"plastic_strain": np.array([0.1])}, "at least two points"),
    ],
)
def test_curves_that_are_none(change: dict[str, object], message: str) -> None:
    curve = material_curve(points=4)
    with pytest.raises(InputError, match=message):
        dataclasses.replace(curve, **change)  # type: ignore[arg-type]


def test_a_curve_is_a_value() -> None:
    curve: MaterialCurve = material_curve()
    assert curve.range is RateRange.QUASI_STATIC
    with pytest.raises(ValueError, match="read-only"):
        curve.stress_pa[0] = 1.0
    with pytest.raises(dataclasses.FrozenInstanceError):
        curve.material = "x"  # type: ignore[misc]


@pytest.mark.parametrize(
    "bad", [{"least_plastic_strain": 0.0}, {"assumed_u": 2.0}, {"assumed_u_shared": -0.1}]
)
def test_settings_are_checked(bad: dict[str, float]) -> None:
    with pytest.raises(InputError, match=next(iter(bad))):
        CurveSettings(**bad)  # type: ignore[arg-type]
