"""The first mode against tables made independently (mpmath, 40 digits; see reference/README.md) and against limits.

Frequency equation: Pochhammer 1876, Chree 1889, Bancroft 1941; section factors: Davies 1948, Tyas & Watson 2001.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.wave.pochhammer import (
    LAME_WAVENUMBER,
    first_mode_at_frequency,
    first_mode_at_wavelength,
    phase_speed_ratio,
)

REFERENCE = Path(__file__).parent / "reference"


def table(name: str) -> dict[str, np.ndarray]:
    lines = [line for line in (REFERENCE / name).read_text().splitlines() if line and line[0] != "#"]
    names = lines[0].split(",")
    values = np.array([[float(cell) for cell in line.split(",")] for line in lines[1:]])
    return dict(zip(names, values.T, strict=True))


@pytest.mark.parametrize("nu", ["0.29", "0.30", "0.34"])
def test_phase_and_group_speed_by_wavelength(nu: str) -> None:
    reference = table(f"pc_first_mode_by_wavelength_nu{nu}.csv")
    mode = first_mode_at_wavelength(reference["a_over_Lambda"], float(nu))
    np.testing.assert_allclose(mode.phase_speed, reference["c_over_c0"], rtol=1e-12)
    np.testing.assert_allclose(mode.group_speed, reference["cg_over_c0"], rtol=1e-10)
    np.testing.assert_allclose(mode.frequency_fa_c0, reference["fa_over_c0"], rtol=1e-12)


@pytest.mark.parametrize("nu", ["0.29", "0.30", "0.34"])
def test_speeds_and_section_factors_by_frequency(nu: str) -> None:
    reference = table(f"pc_first_mode_by_frequency_nu{nu}.csv")
    mode = first_mode_at_frequency(reference["fa_over_c0"], float(nu))
    np.testing.assert_allclose(mode.phase_speed, reference["c_over_c0"], rtol=1e-12)
    np.testing.assert_allclose(mode.group_speed, reference["cg_over_c0"], rtol=1e-10)
    np.testing.assert_allclose(mode.wavenumber_ka, 2 * np.pi * reference["a_over_Lambda"], rtol=1e-12)
    np.testing.assert_allclose(mode.mean_strain, reference["m_strain"], rtol=1e-11)
    np.testing.assert_allclose(mode.modulus, reference["m_modulus"], rtol=1e-12)
    np.testing.assert_allclose(mode.stress, reference["m_stress"], rtol=1e-11)
    np.testing.assert_allclose(mode.velocity, reference["m_velocity"], rtol=1e-11)


def test_anchors() -> None:
    lines = [x for x in (REFERENCE / "pc_anchors.csv").read_text().splitlines() if x and x[0] != "#"]
    names = lines[0].split(",")
    for line in lines[1:]:
        row = dict(zip(names, map(float, line.split(",")), strict=True))
        nu = row["nu"]
        # The surface-strain factor changes sign through its pole.
        below, above = first_mode_at_frequency(
            row["pole_fa_over_c0"] + np.array([-1e-6, 1e-6]), nu
        ).mean_strain
        assert below > 1e4
        assert above < -1e4
        short = first_mode_at_wavelength([row["cmin_a_over_Lambda"]], nu)
        assert short.phase_speed[0] == pytest.approx(row["cmin_over_c0"], abs=1e-9)
        slow = first_mode_at_wavelength([row["cgmin_a_over_Lambda"]], nu)
        assert slow.group_speed[0] == pytest.approx(row["cgmin_over_c0"], abs=1e-7)
        # Short waves come back up to Rayleigh's speed from below: 0.01 % off at a/Lambda = 100.
        shortest = first_mode_at_wavelength([100.0], nu).phase_speed[0]
        assert row["cmin_over_c0"] < shortest < row["cR_over_c0"]
        assert shortest == pytest.approx(row["cR_over_c0"], rel=3e-4)


@pytest.mark.parametrize("nu", [0.0, 0.05, 0.2, 0.29, 0.4, 0.49])
def test_lames_point_is_exact(nu: float) -> None:
    # k a = first zero of J1': c = sqrt(2) c_T = c0/sqrt(1 + nu), whatever the Poisson's ratio.
    mode = first_mode_at_wavelength([LAME_WAVENUMBER / (2 * np.pi)], nu)
    assert mode.phase_speed[0] == pytest.approx(1 / np.sqrt(1 + nu), rel=1e-13)


# Bar literature, exact roots to nine digits (computed apart from this program).
@pytest.mark.parametrize(
    ("nu", "expected"),
    [
        (0.25, [0.998428087, 0.993330675, 0.965585830, 0.886809748, 0.693443101, 0.589323753]),
        (0.33, [0.997276568, 0.988655994, 0.946986652, 0.859793730, 0.684555311, 0.582719002]),
    ],
)
def test_other_poisson_ratios(nu: float, expected: list[float]) -> None:
    found = first_mode_at_wavelength([0.05, 0.10, 0.20, 0.30, 0.50, 1.00], nu).phase_speed
    np.testing.assert_allclose(found, expected, atol=1e-9)


@pytest.mark.parametrize("nu", [0.1, 0.29, 0.45])
def test_long_waves_slow_by_the_lateral_inertia_term(nu: float) -> None:
    # Rayleigh (Theory of Sound, 1894); Love, Treatise 4th ed. 1927, ch. XII: c/c0 = 1 - (nu pi a/Lambda)^2.
    ratio = 0.005
    slowed = 1 - first_mode_at_wavelength([ratio], nu).phase_speed[0]
    # The next term is of relative order (2 pi a/Lambda)^2 = 1e-3.
    assert slowed == pytest.approx((nu * np.pi * ratio) ** 2, rel=2e-3)


def test_without_lateral_contraction_nothing_disperses() -> None:
    below_the_crossing = np.linspace(0, 0.29, 30)
    np.testing.assert_array_equal(phase_speed_ratio(below_the_crossing, 0.0), 1.0)


@pytest.mark.parametrize("nu", [0.0, 1e-6, 0.01, 0.1, 0.29, 0.4, 0.48, 0.49])
def test_one_smooth_branch_for_every_poisson_ratio(nu: float) -> None:
    frequency = np.linspace(0, 1.7, 3401)
    mode = first_mode_at_frequency(frequency, nu)
    # One branch: the wavenumber rises steadily, energy travels forwards, and no sample jumps to another mode.
    assert (np.diff(mode.wavenumber_ka) > 0).all()
    assert (mode.group_speed > 0).all()
    assert np.abs(np.diff(mode.phase_speed)).max() < 0.02
    # Both grids give one curve.
    again = first_mode_at_wavelength(mode.wavenumber_ka / (2 * np.pi), nu)
    np.testing.assert_allclose(again.frequency_fa_c0, frequency, atol=1e-13)
    # The group speed is the slope of the branch itself.
    slope = np.gradient(2 * np.pi * frequency, mode.wavenumber_ka, edge_order=2)
    smooth = np.abs(np.gradient(mode.group_speed)) < 1e-3
    np.testing.assert_allclose(mode.group_speed[smooth], slope[smooth], rtol=5e-3)


def test_mean_stress_factor_is_the_square_of_the_speed() -> None:
    # The section's axial momentum with a free lateral surface: F/v = rho c A at every frequency.
    mode = first_mode_at_frequency(np.linspace(0.01, 0.28, 50), 0.3)
    np.testing.assert_allclose(mode.stress / mode.velocity, mode.phase_speed, rtol=1e-14)


def test_extra_delay_of_a_worked_example() -> None:
    # d = 20 mm, c0 = 5000 m/s, 50 kHz, 1 m: 1.82559 us, 0.573525 rad (computed apart from this program).
    ratio = phase_speed_ratio([0.1], 0.29)[0]
    delay = (1 / ratio - 1) / 5000.0
    assert delay == pytest.approx(1.82559e-6, abs=1e-11)
    assert 2 * np.pi * 50e3 * delay == pytest.approx(0.573525, abs=1e-6)


def test_rational_curve_of_the_literature_is_near_the_root() -> None:
    # Felice 1986; Gong, Malvern & Jenkins 1990, coefficients from memory: a 0.3 % curve, no more.
    reference = table("rational_approximation_nu0.29.csv")
    exact = first_mode_at_wavelength(reference["a_over_Lambda"], 0.29).phase_speed
    np.testing.assert_allclose(exact, reference["c_exact"], atol=1e-12)
    assert np.abs(exact - reference["c_A_0.5746"]).max() < 4e-3


@pytest.mark.parametrize("nu", [-0.1, 0.5, 0.6, float("nan")])
def test_impossible_poisson_ratio_is_refused(nu: float) -> None:
    with pytest.raises(InputError, match="from 0 to 0.49"):
        phase_speed_ratio([0.1], nu)


def test_negative_frequency_is_refused() -> None:
    with pytest.raises(InputError, match="not negative"):
        phase_speed_ratio([-0.1], 0.3)
