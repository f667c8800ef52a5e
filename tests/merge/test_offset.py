from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

from shpb.errors import InputError
from shpb.merge.offset import HardeningStrain, hardening_exponent, offset_yield
from shpb.merge.toe import linear_part

MODULUS = 70e9


def ramberg_osgood(
    stress: np.ndarray | float, proof_pa: float = 250e6, exponent: float = 12.0
) -> np.ndarray | float:
    # W. Ramberg, W. R. Osgood, NACA TN 902 (1943), in the form e = s/E + 0.002 (s/s_0.2)^n: the stress at which the
    # plastic strain is p is s_0.2 (p/0.002)^(1/n), in closed form.
    return stress / MODULUS + 0.002 * (stress / proof_pa) ** exponent


@pytest.mark.parametrize("offset", [0.0005, 0.001, 0.002, 0.005, 0.01])
def test_offset_yield_of_ramberg_osgood_at_any_offset(offset: float) -> None:
    stress = np.linspace(0, 350e6, 3000)
    found = offset_yield(ramberg_osgood(stress), stress, offset, modulus_pa=MODULUS)
    expected = 250e6 * (offset / 0.002) ** (1 / 12)
    # Straight lines between readings 0.12 MPa apart: below 1e-6.
    assert found.stress_pa == pytest.approx(expected, rel=1e-6)
    assert found.strain == pytest.approx(expected / MODULUS + offset, rel=1e-6)
    assert found.slope_from == "given modulus"


def test_offset_yield_with_another_slope_is_the_root_of_the_construction() -> None:
    # With a fitted slope 10 % low the crossing solves s = m (e(s) - 0.002); found here by a root finder.
    stress = np.linspace(0, 350e6, 3000)
    slope = 0.9 * MODULUS
    root = brentq(lambda s: s - slope * (ramberg_osgood(s) - 0.002), 100e6, 340e6)
    found = offset_yield(ramberg_osgood(stress), stress, fitted_slope_pa=slope)
    assert found.stress_pa == pytest.approx(root, rel=1e-6)
    assert found.slope_from == "fitted slope"
    assert found.stress_pa > 250e6 * 1.01


def test_between_coarse_readings_the_curve_is_straight() -> None:
    # Two readings on either side of the line: crossing of two straight lines, by hand.
    # Line: s = 100e9 (e - 0.002). Curve from (0.003, 250 MPa) to (0.006, 310 MPa): s = 250e6 + 20e9 (e - 0.003).
    # 100e9 e - 200e6 = 190e6 + 20e9 e  =>  e = 0.004875, s = 287.5 MPa.
    strain, stress = np.array([0.0, 0.0025, 0.003, 0.006]), np.array([0.0, 250e6, 250e6, 310e6])
    found = offset_yield(strain, stress, modulus_pa=100e9)
    assert found.strain == pytest.approx(0.004875)
    assert found.stress_pa == pytest.approx(287.5e6)


def test_sharp_yield_with_a_drop() -> None:
    # Upper yield 300 MPa, then a plateau at 260 MPa: R_p0.2 is the plateau.
    strain = np.array([0, 300e6 / MODULUS, 300e6 / MODULUS + 2e-4, 0.02, 0.05])
    stress = np.array([0, 300e6, 260e6, 260e6, 300e6])
    assert offset_yield(strain, stress, modulus_pa=MODULUS).stress_pa == pytest.approx(260e6)


def test_noise_shifts_it_by_no_more_than_itself() -> None:
    stress = np.linspace(0, 350e6, 2000)
    strain = np.asarray(ramberg_osgood(stress))
    noisy = stress + 1e6 * np.random.default_rng(2).standard_normal(stress.size)
    part = linear_part(strain, noisy)
    found = offset_yield(strain, noisy, fitted_slope_pa=part.slope_pa, zero_strain=part.zero_strain)
    assert found.stress_pa == pytest.approx(250e6, abs=4e6)


def test_toe_moves_the_line_along() -> None:
    stress = np.linspace(0, 350e6, 3000)
    found = offset_yield(
        np.asarray(ramberg_osgood(stress)) + 0.004, stress, modulus_pa=MODULUS, zero_strain=0.004
    )
    assert found.stress_pa == pytest.approx(250e6, rel=1e-6)


def test_offset_yield_refusals() -> None:
    stress = np.linspace(0, 100e6, 100)
    strain = np.asarray(ramberg_osgood(stress))
    with pytest.raises(InputError, match="never meets the line moved by a strain of 0.002"):
        offset_yield(strain, stress, modulus_pa=MODULUS)
    with pytest.raises(InputError, match="Give the Young's modulus"):
        offset_yield(strain, stress)
    with pytest.raises(InputError, match=r"0.002 is 0.2 %"):
        offset_yield(strain, stress, 0.0, modulus_pa=MODULUS)
    with pytest.raises(InputError, match="same length"):
        offset_yield(strain, stress[:-1], modulus_pa=MODULUS)


def test_hardening_exponent_of_hollomon_is_exact() -> None:
    # J. H. Hollomon, Trans. AIME 162 (1945) 268: s = K e^n. Against total strain, as ISO 10275 and ASTM E646.
    strain = np.linspace(0.001, 0.2, 300)
    found = hardening_exponent(strain, 530e6 * strain**0.24, (0.02, 0.18))
    assert found.n == pytest.approx(0.24, abs=1e-12)
    assert found.coefficient_pa == pytest.approx(530e6, rel=1e-10)
    assert found.against is HardeningStrain.TOTAL


def test_hardening_exponent_against_plastic_strain_is_exact_too() -> None:
    plastic = np.linspace(0.001, 0.2, 300)
    stress = 530e6 * plastic**0.24
    found = hardening_exponent(plastic + stress / MODULUS, stress, (0.02, 0.18), modulus_pa=MODULUS)
    assert found.n == pytest.approx(0.24, abs=1e-10)
    assert found.against is HardeningStrain.PLASTIC
    # The two definitions differ, which the result has to say: by about 4 % here.
    total = hardening_exponent(plastic + stress / MODULUS, stress, (0.02, 0.18))
    assert total.n > 1.02 * found.n


def test_interval_of_the_hardening_exponent_covers() -> None:
    random = np.random.default_rng(8)
    strain = np.linspace(0.02, 0.2, 40)
    hits = 0
    for _ in range(400):
        stress = 530e6 * strain**0.24 * np.exp(0.01 * random.standard_normal(strain.size))
        low, high = hardening_exponent(strain, stress, (0.02, 0.2)).n_interval
        hits += low <= 0.24 <= high
    # 95 % of 400, four standard deviations of the count to either side.
    assert 362 <= hits <= 397


@pytest.mark.parametrize(
    ("strain_range", "message"),
    [((0.1, 0.05), "two rising strains"), ((0.3, 0.5), "0 readings"), ((0.0, 0.1), "two rising strains")],
)
def test_hardening_exponent_refusals(strain_range: tuple[float, float], message: str) -> None:
    strain = np.linspace(0.001, 0.2, 50)
    with pytest.raises(InputError, match=message):
        hardening_exponent(strain, 530e6 * strain**0.24, strain_range)
    with pytest.raises(InputError, match="not positive"):
        hardening_exponent(strain, -strain, (0.05, 0.1))
