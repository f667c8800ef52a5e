"""Constitutive laws against published constants and formulas.

Check values were computed from the published formulas apart from the program; constants are from memory of the
sources named beside them, unless a table of ``data/`` holds them.
"""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from shpb.merge.adiabatic import adiabatic_stress_pa
from shpb.merge.fit import fit_model
from shpb.merge.fit_problem import FitProblem
from shpb.merge.models.cowper_symonds import COWPER_SYMONDS_LUDWIK, COWPER_SYMONDS_VOCE
from shpb.merge.models.model import Model
from shpb.merge.models.registry import model_named
from tests.merge.campaign import grid, with_stress

DATA = Path(__file__).parent / "data"


def rows(name: str) -> list[dict[str, str]]:
    lines = (DATA / name).read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


MATERIALS = {row["material"]: row for row in rows("johnson_cook_1983.csv")}
FLOW = rows("johnson_cook_flow_stress.csv")


def johnson_cook(material: str, room_k: float = 298.0) -> tuple[Model, np.ndarray]:
    """Law and constants [SI] of a material of the paper."""
    row = MATERIALS[material]
    model = model_named("johnson-cook").with_facts(
        melting_temperature_k=float(row["T_melt_K"]), reference_temperature_k=room_k, reference_rate_per_s=1.0
    )
    return model, np.array(
        [1e6 * float(row["A_MPa"]), 1e6 * float(row["B_MPa"]), *(float(row[k]) for k in ("n", "C", "m"))]
    )


@pytest.mark.parametrize("row", FLOW, ids=lambda r: f"{r['material']}-{r['rate_per_s']}-{r['T_K']}")
def test_johnson_cook_flow_stress_of_all_materials(row: dict[str, str]) -> None:
    model, p = johnson_cook(row["material"], float(row["T_room_K"]))
    stress = model.stress_pa(p, float(row["plastic_strain"]), float(row["rate_per_s"]), float(row["T_K"]))
    # Twelve digits in the table; above melting nothing is left.
    assert float(stress) / 1e6 == pytest.approx(float(row["flow_stress_MPa"]), rel=1e-10, abs=1e-9)


def test_the_tables_are_whole() -> None:
    assert len(MATERIALS) == 12
    assert {row["material"] for row in FLOW} == set(MATERIALS)


@pytest.mark.parametrize(
    ("material", "strain", "rate", "kelvin", "mpa"),
    [
        ("OFHC copper", 0.1, 1.0, 293.0, 233.015),
        ("OFHC copper", 0.2, 1e3, 293.0, 313.458),
        ("OFHC copper", 0.2, 1e3, 493.0, 262.714),
        ("4340 steel", 0.1, 1.0, 293.0, 1072.266),
        ("4340 steel", 0.1, 1e3, 293.0, 1175.963),
        ("Armco iron", 0.1, 1.0, 293.0, 356.879),
        ("Armco iron", 0.1, 1e3, 293.0, 504.794),
        ("Armco iron", 0.1, 1e3, 493.0, 339.224),
        ("OFHC copper", 0.2, 1e3, 200.0, 313.458),  # below the reference temperature T* is 0
    ],
)
def test_johnson_cook_by_hand(material: str, strain: float, rate: float, kelvin: float, mpa: float) -> None:
    model, p = johnson_cook(material, 293.0)
    assert float(model.stress_pa(p, strain, rate, kelvin)) / 1e6 == pytest.approx(mpa, abs=6e-4)


@pytest.mark.parametrize("material", sorted(MATERIALS))
def test_published_constants_are_found_again_from_their_own_curves(material: str) -> None:
    # 1 % noise on curves of the published law at three rates and two temperatures: the constants lie inside 99.9 %
    # (3.4 standard uncertainties; sixty constants are tried), and stresses of the law come back to 0.5 %.
    model, true = johnson_cook(material)
    points = grid(
        rates=(1e-3, 1.0, 1e3), temperatures=(298.0, 448.0), strains=np.linspace(0.02, 0.3, 10), heat=None
    )
    problem = FitProblem(model, points, true, np.ones(5, dtype=bool))
    clean = problem.law_pa(problem.variables(true))
    noise = 1 + 0.01 * np.random.default_rng(1983).standard_normal(clean.size)
    fit = fit_model(model, with_stress(points, clean * noise, 0.01 * clean), leave_out=False)
    for one, value in zip(fit.estimates, true, strict=True):
        assert one.value is not None
        assert one.u is not None
        assert abs(one.value - value) < 3.4 * one.u
    assert fit.stress_pa == pytest.approx(clean, rel=0.015)
    assert float(np.mean(fit.stress_pa / clean)) == pytest.approx(1.0, abs=5e-3)
    exact = fit_model(model, with_stress(points, clean, 0.01 * clean), leave_out=False)
    assert exact.parameters == pytest.approx(true, rel=1e-6)


@pytest.mark.parametrize(
    ("doubling", "q", "rate", "ratio"),
    [
        (40.4, 5.0, 40.4, 2.0),  # mild steel
        (40.4, 5.0, 1.0, 1.47723),
        (40.4, 5.0, 100.0, 2.19874),
        (40.4, 5.0, 1000.0, 2.89987),
        (6500.0, 4.0, 1000.0, 1.62628),  # aluminium alloy
        (100.0, 10.0, 1000.0, 2.25893),  # 304 stainless steel
    ],
)
def test_cowper_symonds_ratio(doubling: float, q: float, rate: float, ratio: float) -> None:
    # G. R. Cowper, P. S. Symonds, Brown University, Div. Appl. Math. report 28 (1957); s/static = 1 + (rate/D)^(1/q).
    static = {"ludwik": (200e6, 300e6, 0.4), "voce": (420e6, 210e6, 0.1)}
    for model, key in ((COWPER_SYMONDS_LUDWIK, "ludwik"), (COWPER_SYMONDS_VOCE, "voce")):
        below = float(model_named(key).stress_pa(np.array(static[key]), 0.1, 1.0, 293.0))
        stress = float(model.stress_pa(np.array([*static[key], doubling, q]), 0.1, rate, 293.0))
        assert stress / below == pytest.approx(ratio, abs=6e-6)


def test_zerilli_armstrong_copper_and_iron() -> None:
    # F. J. Zerilli, R. W. Armstrong, J. Appl. Phys. 61 (1987) 1816-1825, constants from memory.
    copper = np.array([65e6, 890e6, 0.0028, 0.000115])
    fast, slow = (
        model_named("zerilli-armstrong-fcc").stress_pa(copper, 0.2, np.array([1e3, 1e-3]), 300.0) / 1e6
    )
    assert fast == pytest.approx(283.071, abs=6e-4)
    assert slow == pytest.approx(200.393, abs=6e-4)
    assert np.log(fast / slow) / np.log(1e6) == pytest.approx(0.02500, abs=6e-6)
    iron = np.array([0.0, 1033e6, 0.00698, 0.000415, 266e6, 0.289])
    stress = model_named("zerilli-armstrong-bcc").stress_pa(iron, 0.2, np.array([1e3, 1e-3]), 300.0) / 1e6
    assert stress == pytest.approx([467.800, 220.913], abs=6e-4)


def test_voce() -> None:
    # E. Voce, J. Inst. Metals 74 (1948) 537-562: from 100 to 300 MPa, characteristic strain 0.1, at 0.1: 300 - 200/e.
    stress = model_named("voce").stress_pa(np.array([300e6, 100e6, 0.1]), 0.1, 1.0, 293.0)
    assert float(stress) / 1e6 == pytest.approx(226.4241, abs=6e-5)


def test_power_laws() -> None:
    # Ludwik 1909, Hollomon 1945, Swift 1952, by hand: 0.25^0.5 = 0.5.
    assert float(
        model_named("ludwik").stress_pa(np.array([100e6, 400e6, 0.5]), 0.25, 1.0, 293.0)
    ) == pytest.approx(300e6)
    assert float(
        model_named("hollomon").stress_pa(np.array([400e6, 0.5]), 0.25, 1.0, 293.0)
    ) == pytest.approx(200e6)
    assert float(
        model_named("swift").stress_pa(np.array([400e6, 0.05, 0.5]), 0.2, 1.0, 293.0)
    ) == pytest.approx(200e6)


def test_mechanical_threshold_of_copper() -> None:
    # P. S. Follansbee, U. F. Kocks, Acta Metall. 36 (1988) 81-93, constants from memory: s_a 40 MPa, threshold 300 MPa,
    # g0 1.6, p 2/3, q 1, rate0 1e7 /s, mu 42.3 GPa at 295 K, b 0.256 nm.
    model = model_named("mechanical-threshold").with_facts(burgers_vector_m=0.256e-9, shear_modulus_pa=42.3e9)
    p = np.array([40e6, 300e6, 0.0, 900e6, 1.6, 0.0])
    assert model.stress_pa(p, 0.1, np.array([1e-3, 1e3]), 295.0) / 1e6 == pytest.approx(
        [268.463, 287.223], abs=6e-4
    )
    # First hardening of the threshold is theta_0 (1 - tanh(2 X)/tanh 2), and it ends at the saturation threshold.
    p[2] = 2.3e9
    x = (300 - 40) / (900 - 40)
    cold = model.stress_pa(p, np.array([0.0, 1e-6, 50.0]), 0.99e7, 1e-3)  # no thermal help at all
    slope = (cold[1] - cold[0]) / 1e-6
    assert slope == pytest.approx(2.3e9 * (1 - np.tanh(2 * x) / np.tanh(2)), rel=1e-4)
    assert cold[2] == pytest.approx(900e6, rel=1e-6)


def test_adiabatic_copper() -> None:
    # Johnson-Cook OFHC copper at 1e3 /s from 293 K, share 0.9, 8960 kg/m3, 383 J/(kg K), computed apart from the
    # program: 306.80 K and 310.705 MPa at 0.2, 333.92 K and 370.797 MPa at 0.5.
    model, p = johnson_cook("OFHC copper", 293.0)
    stress, kelvin = adiabatic_stress_pa(model, p, np.array([0.2, 0.5]), 1e3, 293.0, 0.9 / (8960 * 383))
    assert kelvin == pytest.approx([306.80, 333.92], abs=6e-3)
    assert stress / 1e6 == pytest.approx([310.705, 370.797], abs=6e-4)


@pytest.mark.parametrize(
    ("material", "strain", "rise_k", "flow_pa"),
    [
        ("2024-T351 aluminum", 0.3, 50.196057389964814, 490241698.6735306),
        ("1006 steel", 0.5, 62.70730232808427, 540883699.0950984),
    ],
)
def test_adiabatic_closed_form(material: str, strain: float, rise_k: float, flow_pa: float) -> None:
    # m = 1 at the reference rate, share 0.9: dT = (Tm - T0)(1 - exp(-share W/(rho c_p (Tm - T0)))),
    # W = A e + B e^(n+1)/(n+1); the numbers are those of reference/closed_form_mechanics.json (50 digits).
    row = MATERIALS[material]
    model, p = johnson_cook(material)
    assert p[4] == 1.0
    heat = 0.9 / (float(row["density_kg_m3"]) * float(row["cp_J_kgK"]))
    stress, kelvin = adiabatic_stress_pa(model, p, np.array([strain]), 1.0, 298.0, heat)
    assert kelvin[0] - 298.0 == pytest.approx(rise_k, abs=1e-8)
    assert stress[0] == pytest.approx(flow_pa, rel=1e-11)


def test_shear_modulus_after_varshni() -> None:
    # Y. P. Varshni, Phys. Rev. B 2 (1970) 3952-3958: mu = mu_0 - drop/(exp(T_mu/T) - 1). At T = T_mu/ln 2 the drop is
    # whole; the threshold law then gives what it gives with that modulus alone.
    p = np.array([40e6, 300e6, 0.0, 900e6, 1.6, 0.0])
    facts = {"burgers_vector_m": 0.256e-9}
    kelvin = 200.0 / np.log(2.0)
    soft = model_named("mechanical-threshold").with_facts(
        **facts, shear_modulus_pa=45e9, shear_modulus_drop_pa=3e9, shear_modulus_temperature_k=200.0
    )
    plain = model_named("mechanical-threshold").with_facts(**facts, shear_modulus_pa=42e9)
    stress = [float(model.stress_pa(p, 0.1, 1.0, kelvin)) for model in (soft, plain)]
    assert stress[0] == pytest.approx(stress[1], rel=1e-12)
