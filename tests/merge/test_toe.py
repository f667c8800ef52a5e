from __future__ import annotations

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.merge.toe import linear_part, reading_noise, without_toe

MODULUS, YIELD, HARDENING = 200e9, 900e6, 500e6


def with_toe(
    *,
    toe: float = 2e-3,
    zero: float = 0.0,
    noise_pa: float = 0.0,
    per_stress_pa: float = 60e6,
    points: int = 400,
) -> tuple[np.ndarray, np.ndarray]:
    """Sharp yield with a contact that gives way by ``toe`` and is closed well below yield.

    In closed form: e = zero + s/E + toe (1 - exp(-s/s0)) + plastic. The straight part, carried on to zero
    stress, meets the axis at ``zero + toe``.
    """
    plastic = np.concatenate((np.zeros(points), np.linspace(0, 0.1, points)))
    stress = np.concatenate(
        (np.linspace(0, YIELD, points), YIELD + HARDENING * np.linspace(0, 0.1, points) ** 0.5)
    )
    strain = zero + stress / MODULUS + toe * (1 - np.exp(-stress / per_stress_pa)) + plastic
    noise = noise_pa * np.random.default_rng(11).standard_normal(stress.size)
    return strain, stress + noise


@pytest.mark.parametrize("zero", [0.0, 0.013, -0.002])
def test_toe_and_start_are_taken_off(zero: float) -> None:
    strain, stress = with_toe(zero=zero)
    part = linear_part(strain, stress)
    # The contact still closes by exp(-s/s0) along the line: the slope is 0.5 % low at most, the zero 1 % of the toe.
    assert part.slope_pa == pytest.approx(MODULUS, rel=5e-3)
    assert part.zero_strain == pytest.approx(zero + 2e-3, abs=4e-5)
    low, high = part.stress_range_pa
    assert 60e6 < low < 400e6
    assert 0.9 * YIELD < high <= 1.001 * YIELD
    # Taken off, the curve is that of the specimen alone.
    alone = without_toe(strain, part)
    inside = stress > 0.5 * YIELD
    truth = strain - zero - 2e-3 * (1 - np.exp(-stress / 60e6))
    np.testing.assert_allclose(alone[inside], truth[inside], atol=4e-5)


def test_the_line_itself_without_toe_and_noise() -> None:
    part = linear_part(*with_toe(toe=0.0))
    assert part.slope_pa == pytest.approx(MODULUS, rel=1e-9)
    assert part.zero_strain == pytest.approx(0.0, abs=1e-12)
    assert part.points > 390


@pytest.mark.parametrize("noise", [1e6, 5e6, 15e6])
def test_noise_is_reported_and_inside_its_uncertainty(noise: float) -> None:
    strain, stress = with_toe(toe=0.0, noise_pa=noise)
    part = linear_part(strain, stress)
    # The part is chosen among steep ones, which leans to high slopes by about one standard uncertainty.
    assert abs(part.slope_pa - MODULUS) < 4 * part.u_slope_pa
    assert part.u_slope_pa < 0.02 * MODULUS
    assert part.noise_pa == pytest.approx(noise, rel=0.25)
    assert abs(part.zero_strain) < 4 * part.u_zero_strain + 1e-12


def test_uncertainty_covers_over_many_seeds() -> None:
    off = []
    for seed in range(60):
        strain, stress = with_toe(toe=0.0, points=150)
        part = linear_part(strain, stress + 5e6 * np.random.default_rng(seed).standard_normal(stress.size))
        off.append((part.slope_pa - MODULUS) / part.u_slope_pa)
    assert abs(np.mean(off)) < 1.5
    assert np.mean(np.abs(off) < 3) > 0.9


def test_readings_in_steps_of_the_crosshead() -> None:
    strain, stress = with_toe(toe=0.0)
    part = linear_part(np.round(strain / 2e-4) * 2e-4, stress)
    assert part.slope_pa == pytest.approx(MODULUS, rel=0.02)


@pytest.mark.parametrize(
    ("name", "law"),
    [
        ("power law without elastic part", lambda e: 300e6 * e**0.2),
        ("parabola", lambda e: 1e9 * e**2),
        ("exponential, as rubber", lambda e: 1e6 * np.expm1(e * 20)),
        ("square root", lambda e: 400e6 * np.sqrt(e)),
    ],
)
def test_refused_where_nothing_is_straight(name: str, law: object) -> None:
    strain = np.linspace(0, 0.3, 1000)
    with pytest.raises(InputError, match="holds no straight part"):
        linear_part(strain, law(strain))  # type: ignore[operator]


def test_refused_with_too_few_readings_in_the_rise() -> None:
    with pytest.raises(InputError, match="holds no straight part"):
        linear_part(
            np.array([0, 0.001, 0.05, 0.1, 0.2, 0.3]), np.array([0, 200e6, 300e6, 350e6, 390e6, 420e6])
        )
    with pytest.raises(InputError, match="not finite"):
        linear_part(np.array([0, np.nan]), np.zeros(2))


def test_noise_of_readings_is_not_upset_by_a_knee() -> None:
    strain, stress = with_toe(toe=0.0, noise_pa=3e6)
    assert reading_noise(strain, stress) == pytest.approx(3e6, rel=0.15)
