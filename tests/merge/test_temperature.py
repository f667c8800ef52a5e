from __future__ import annotations

import math

import numpy as np
import pytest

from shpb.demo.materials import HEXALUNE
from shpb.errors import InputError
from shpb.merge.peak_shift import RatePeak, peak_shift
from shpb.merge.temperature import Extreme, Place, TemperatureCourse, temperature_course

K = 1.380649e-23
KELVIN = np.arange(300.0, 1301.0, 100.0)


def course(
    law: object, u: float = 0.005, seed: int = 0, kelvin: np.ndarray = KELVIN, noise: bool = True
) -> TemperatureCourse:
    stress = law(kelvin)  # type: ignore[operator]
    u_pa = u * stress
    if noise:
        stress = stress + u_pa * np.random.default_rng(seed + 100).standard_normal(stress.size)
    return temperature_course(kelvin, stress, u_pa)


def anomalous(peak_k: float = 930.0) -> object:
    """Falls, rises to a peak, falls: a cubic with minimum at 500 K and peak at ``peak_k``, in closed form."""

    def law(t: np.ndarray) -> np.ndarray:
        # d/dt = -5 (t - 500)(t - peak) Pa/K
        a = 500.0
        integral = t**3 / 3 - (a + peak_k) * t**2 / 2 + a * peak_k * t
        at = a**3 / 3 - (a + peak_k) * a**2 / 2 + a * peak_k * a
        return 400e6 - 5.0 * (integral - at)

    return law


def test_minimum_and_peak_of_a_cubic_are_exact() -> None:
    found = course(anomalous(), noise=False)
    assert found.rises
    for extreme, kelvin in ((found.minimum, 500.0), (found.peak, 930.0)):
        assert extreme.place is Place.INSIDE
        assert extreme.temperature_k == pytest.approx(kelvin, abs=1e-6)
        assert extreme.stress_pa == pytest.approx(float(anomalous()(np.array(kelvin))), rel=1e-9)  # type: ignore[operator]
        # No better than half a spacing of 100 K, whatever the noise.
        assert extreme.u_temperature_k is not None
        assert extreme.u_temperature_k >= 50 / math.sqrt(3)
        assert extreme.interval_k is not None
        assert extreme.interval_k[1] - extreme.interval_k[0] >= 100


def test_intervals_hold_the_planted_peak_and_minimum() -> None:
    hits = np.zeros(2)
    for seed in range(80):
        peak = 850.0 + 2 * seed
        found = course(anomalous(peak), seed=seed)
        for i, (extreme, kelvin) in enumerate(((found.minimum, 500.0), (found.peak, peak))):
            assert extreme.interval_k is not None
            hits[i] += extreme.interval_k[0] <= kelvin <= extreme.interval_k[1]
    assert (hits >= 76).all()


@pytest.mark.parametrize("rate", [1e-4, 1e-3, 1e-1, 500.0, 1500.0])
def test_the_demo_alloy_at_its_own_four_temperatures(rate: float) -> None:
    # 293 to 1073 K, 200 and 380 K apart: no model is assumed, and the law is no cubic.
    def law(kelvin: np.ndarray) -> np.ndarray:
        return np.array([float(HEXALUNE.law.stress_pa(np.array([0.05]), rate, t)[0]) for t in kelvin])

    dense = np.linspace(293.15, 1073.15, 2000)
    truth = dense[np.argmax(law(dense))]
    peak = course(law, kelvin=np.array([293.15, 673.15, 873.15, 1073.15])).peak
    assert peak.place is Place.INSIDE
    assert peak.interval_k is not None
    assert peak.interval_k[0] < truth < peak.interval_k[1]
    assert peak.temperature_k == pytest.approx(truth, abs=40)
    assert peak.stress_pa is not None
    assert peak.u_stress_pa is not None
    assert abs(peak.stress_pa - law(dense).max()) < 2.5 * peak.u_stress_pa


def test_monotone_softening_has_none() -> None:
    found = course(lambda t: 600e6 - 0.4e6 * (t - 300))
    assert not found.rises
    assert found.peak.place is Place.NONE
    assert found.minimum.place is Place.NONE
    assert found.reason in {"the stress falls from temperature to temperature"} or "no rise" in found.reason


def test_noise_alone_has_none() -> None:
    named = sum(course(lambda t: np.full(t.size, 500e6), seed=seed).rises for seed in range(200))
    assert 2 <= named <= 20  # 5 % of 200, which is what the test is made for: never far less, never far more


def test_softening_with_a_plateau_has_fewer_false_rises() -> None:
    named = sum(course(lambda t: 600e6 - 0.1e6 * (t - 300), seed=seed).rises for seed in range(100))
    assert named <= 5


def test_a_peak_at_the_edge_is_at_or_beyond_it() -> None:
    found = course(anomalous(1700.0))
    assert found.rises
    assert found.peak.place is Place.AT_END
    assert found.peak.temperature_k is None
    assert found.minimum.place is Place.INSIDE


def test_a_fall_within_the_uncertainty_does_not_bracket_the_peak() -> None:
    kelvin = np.array([300.0, 500, 700, 900])
    stress = np.array([400e6, 450e6, 500e6, 499e6])
    found = temperature_course(kelvin, stress, np.full(4, 5e6))
    assert found.peak.place is Place.AT_END
    assert 0.3 < found.peak.bracketed_share < 0.8


def test_a_rise_from_the_first_temperature_on_has_its_minimum_at_or_below_it() -> None:
    found = course(lambda t: 400e6 + 200e6 * np.exp(-(((t - 900) / 200) ** 2)) + 0.05e6 * (t - 300))
    assert found.minimum.place is Place.AT_START
    assert found.peak.place is Place.INSIDE


def test_repeats_at_one_temperature_are_averaged() -> None:
    kelvin = np.array([900.0, 300, 301, 600])
    found = temperature_course(kelvin, np.array([3e8, 5e8, 5.2e8, 4e8]), np.full(4, 5e6))
    assert found.temperature_k.tolist() == [300.5, 600, 900]
    assert found.stress_pa[0] == pytest.approx(5.1e8)
    assert found.u_pa[0] == pytest.approx(5e6 / math.sqrt(2))


def test_the_same_seed_gives_the_same_answer_and_the_order_does_not_matter() -> None:
    law = anomalous()
    stress = law(KELVIN)  # type: ignore[operator]
    u = 0.01 * stress
    order = np.random.default_rng(1).permutation(KELVIN.size)
    a, b = (
        temperature_course(KELVIN, stress, u, seed=3),
        temperature_course(KELVIN[order], stress[order], u[order], seed=3),
    )
    assert a.peak == b.peak
    assert a.chance == b.chance


def test_uncertain_temperatures_widen_the_interval() -> None:
    law = anomalous()
    stress = law(KELVIN)  # type: ignore[operator]
    sure, unsure = (
        temperature_course(KELVIN, stress, 0.002 * stress, u_temperature_k=u).peak.u_temperature_k
        for u in (0.0, 30.0)
    )
    assert sure is not None
    assert unsure is not None
    assert unsure > sure + 5


@pytest.mark.parametrize(
    ("kelvin", "stress", "u", "message"),
    [
        ([300, 301, 600], [1e8] * 3, [1e6] * 3, "2 different temperatures"),
        ([300, 500, np.nan], [1e8] * 3, [1e6] * 3, "not finite"),
        ([300, 500, 600], [1e8] * 3, [0] * 3, "uncertainty is 0"),
        ([300, 500, 600], [1e8] * 2, [1e6] * 3, "the same number of each"),
    ],
)
def test_refusals(kelvin: list[float], stress: list[float], u: list[float], message: str) -> None:
    with pytest.raises(InputError, match=message):
        temperature_course(*(np.array(a, dtype=float) for a in (kelvin, stress, u)))


# --- shift of the peak with the rate ----------------------------------------------------------------------------


def at(kelvin: float | None, u: float = 10.0) -> Extreme:
    if kelvin is None:
        return Extreme(place=Place.AT_END)
    return Extreme(
        place=Place.INSIDE, temperature_k=kelvin, u_temperature_k=u, interval_k=(kelvin - 20, kelvin + 20),
        stress_pa=5e8, u_stress_pa=1e6, bracketed_share=1.0,
    )  # fmt: skip


def arrhenius(rate: float, energy_j: float = 4.8e-19, constant: float = 40.0) -> float:
    return energy_j / (K * (constant - math.log(rate)))


def test_activation_energy_of_an_exact_arrhenius_line() -> None:
    rates = (1e-4, 1e-2, 1.0, 1e3)
    found = peak_shift([RatePeak(rate_per_s=r, peak=at(arrhenius(r))) for r in rates])
    assert found.activation_energy_j is not None
    assert found.activation_energy_j.value == pytest.approx(4.8e-19, rel=1e-6)
    # 4.8e-19 J are 2.996 eV and 289.1 kJ/mol.
    assert found.activation_energy_j_per_mol is not None
    assert found.activation_energy_j_per_mol.value == pytest.approx(289.06e3, rel=1e-4)
    low, high = found.activation_energy_j.interval
    assert low < 4.8e-19 < high


def test_kelvin_per_decade_and_what_is_left_out() -> None:
    peaks = [(1e-3, 800.0), (1e-1, 840.0), (1e1, 880.0), (1e3, None)]
    found = peak_shift([RatePeak(rate_per_s=r, peak=at(t)) for r, t in peaks])
    assert found.kelvin_per_decade.value == pytest.approx(20.0, rel=1e-9)
    # Three points two decades apart, 10 K each: u = 10/sqrt(8) per decade.
    assert found.kelvin_per_decade.u == pytest.approx(10 / math.sqrt(8), rel=1e-9)
    assert found.used == (1e-3, 1e-1, 1e1)
    assert found.left_out == (1e3,)


def test_a_peak_that_does_not_move_up_has_no_activation_energy() -> None:
    found = peak_shift([RatePeak(rate_per_s=r, peak=at(t)) for r, t in ((1e-3, 900.0), (1e3, 850.0))])
    assert found.activation_energy_j is None
    assert found.activation_energy_j_per_mol is None
    still = peak_shift([RatePeak(rate_per_s=r, peak=at(t)) for r, t in ((1e-3, 900.0), (1e3, 905.0))])
    assert still.energy_open


def test_one_bracketed_peak_tells_no_shift() -> None:
    with pytest.raises(InputError, match="1 rates with a peak between tested temperatures"):
        peak_shift([RatePeak(rate_per_s=1e-3, peak=at(900.0)), RatePeak(rate_per_s=1e3, peak=at(None))])
    with pytest.raises(InputError, match="Give positive rates"):
        peak_shift([RatePeak(rate_per_s=0.0, peak=at(900.0))])
