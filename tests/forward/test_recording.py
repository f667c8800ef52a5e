"""Bridge, amplifier and scope, against exact circuit theory and plain statistics."""

from __future__ import annotations

import csv
from typing import Any

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.forward.recording import (
    Disturbance,
    amplified,
    bridge_ratio,
    digitised,
    recorded,
    sampled,
)
from shpb.rig.gauge import Arrangement
from tests.forward.conftest import DATA, Q, gauge

QUIET = Disturbance()


def reference_rows() -> list[dict[str, str]]:
    with (DATA / "bridge_exact_output.csv").open(encoding="utf-8") as file:
        return list(csv.DictReader(line for line in file if not line.startswith("#")))


@pytest.mark.parametrize("arrangement", ["quarter", "half-opposite", "half-poisson", "full-poisson"])
def test_bridge_is_exact_with_and_without_bending(arrangement: str) -> None:
    # Divider formula evaluated at 30 digits, independently of this package (header of the file).
    rows = [row for row in reference_rows() if row["config"] == arrangement.replace("-", "_")]
    assert len(rows) == 7
    for row in rows:
        station = gauge(arrangement=Arrangement(arrangement), gauge_factor=Q(float(row["gauge_factor"])))
        ratio = bridge_ratio(
            np.array([float(row["eps_axial"])]), station, float(row["poisson"]), float(row["eps_bending"])
        )
        assert ratio[0] == pytest.approx(float(row["Vo_over_Vex"]), rel=1e-12)


def test_full_bridge_and_linear_amplifier() -> None:
    strain = np.array([-2e-3, 1e-3])
    full = gauge(arrangement=Arrangement.FULL)
    np.testing.assert_allclose(bridge_ratio(strain, full, 0.3), 2.0 * strain, rtol=1e-12)
    for arrangement, active in (("quarter", 1.0), ("half-opposite", 2.0), ("half-poisson", 1.3),
                                ("full-poisson", 2.6), ("full", 4.0)):  # fmt: skip
        linear = gauge(arrangement=Arrangement(arrangement), linear_amplifier=True)
        np.testing.assert_allclose(bridge_ratio(strain, linear, 0.3), active * 2.0 * strain / 4, rtol=1e-12)


def test_leads_desensitise() -> None:
    # k R/(R + R_lead)
    station = gauge(resistance_ohm=Q(120.0), lead_resistance_ohm=Q(1.2), linear_amplifier=True)
    assert bridge_ratio(np.array([1e-3]), station, 0.3)[0] == pytest.approx(1e-3 / 1.01, rel=1e-12)


@pytest.mark.parametrize(("tension_sign", "tension", "sign"), [(1, False, -1), (-1, False, 1), (1, True, 1)])
def test_polarity(tension_sign: int, tension: bool, sign: int) -> None:
    station = gauge(tension_sign=tension_sign, gain=Q(500.0))
    wrote = recorded(
        np.full(100, 1e-3), station, 0.3, np.arange(100) * 1e-7, disturbance=QUIET,
        random=np.random.default_rng(1), tension=tension,
    )  # fmt: skip
    # 2 active arms, k = 2, 5 V, gain 500: 2.5 V per 1e-3 within the bridge's 0.1 %.
    np.testing.assert_allclose(wrote.voltage_v, sign * 2.5, rtol=2e-3)


def test_digitiser_rounds_and_stays_at_its_rails() -> None:
    wrote = digitised(np.array([-9.0, -5.0, -0.0012, 0.0013, 4.999, 9.0]), (-5.0, 5.0), 12)
    assert wrote.volts_per_code == pytest.approx(10 / 4096)
    np.testing.assert_array_equal(wrote.codes, [-2048, -2048, 0, 1, 2047, 2047])
    uneven = digitised(np.array([-3.0, 7.9]), (-2.0, 8.0), 10)
    np.testing.assert_array_equal(uneven.codes, [-205, 809])
    noise = digitised(np.random.default_rng(3).uniform(-1, 1, 20000), (-5.0, 5.0), 12)
    original = np.random.default_rng(3).uniform(-1, 1, 20000)
    # Rounding error of an even density: step/sqrt(12).
    assert np.std(noise.voltage_v - original) == pytest.approx(10 / 4096 / np.sqrt(12), rel=0.02)


def test_noise_hum_offset_and_drift_are_what_was_asked_for() -> None:
    time = np.arange(100000) * 1e-6
    station = gauge(scope_bits=24)
    added = Disturbance(white_rms_v=0.01, hum_v=0.05, hum_phase_rad=0.4, offset_v=0.03, drift_v_per_s=0.2)
    wrote = recorded(
        np.zeros(time.size), station, 0.3, time, disturbance=added, random=np.random.default_rng(5)
    ).voltage_v
    wave = 2 * np.pi * 50.0 * time
    basis = np.stack((np.sin(wave), np.cos(wave), np.ones_like(time), time), axis=1)
    fit, *_ = np.linalg.lstsq(basis, wrote, rcond=None)
    np.testing.assert_allclose(fit, [0.05 * np.cos(0.4), 0.05 * np.sin(0.4), 0.03, 0.2], rtol=0.01, atol=2e-4)
    assert np.std(wrote - basis @ fit) == pytest.approx(0.01, rel=0.01)


def test_seed_decides_the_noise() -> None:
    def one(seed: int) -> np.ndarray:
        return recorded(
            np.zeros(500), gauge(), 0.3, np.arange(500) * 1e-7, disturbance=Disturbance(white_rms_v=0.1),
            random=np.random.default_rng(seed),
        ).codes  # fmt: skip

    np.testing.assert_array_equal(one(7), one(7))
    assert (one(7) != one(8)).any()


def test_amplifier_is_3_db_down_at_its_bandwidth_and_brings_no_delay() -> None:
    time = np.arange(20000) * 1e-7
    tone = np.sin(2 * np.pi * 200e3 * time)
    passed = amplified(tone, 1e-7, 200e3)
    middle = slice(5000, 15000)
    np.testing.assert_allclose(passed[middle], tone[middle] / np.sqrt(2), atol=1e-3)
    assert amplified(tone, 1e-7, None) is tone


def test_sampling_between_grid_points() -> None:
    time = np.arange(-10, 2000) * 2e-7
    signal = np.sin(2 * np.pi * 100e3 * time)
    at = np.linspace(1e-6, 390e-6, 3001) + 0.37e-7
    # (omega h)^4 3/128 for a cubic through four points: 6e-6 of the amplitude.
    np.testing.assert_allclose(sampled(signal, time, at), np.sin(2 * np.pi * 100e3 * at), atol=1e-5)
    with pytest.raises(InputError, match="Run the shot for longer"):
        sampled(signal, time, np.array([1.0]))


@pytest.mark.parametrize(
    ("changes", "message"),
    [({"scope_range_v": None}, "no scope range"), ({"scope_bits": 0}, "0 bits")],
)
def test_refuses_a_gauge_without_scope(changes: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        recorded(
            np.zeros(10), gauge(**changes), 0.3, np.arange(10) * 1e-7, disturbance=QUIET,
            random=np.random.default_rng(1),
        )  # fmt: skip
