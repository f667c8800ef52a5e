"""The flow law against published constants and its own definition."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.forward.flow import FlowLaw, side_by_side


def test_johnson_cook_values() -> None:
    # G. R. Johnson, W. H. Cook, Proc. 7th Int. Symp. on Ballistics (1983): OFHC copper, 4340 steel. The law
    # here has ln(1 + r/r0) for ln r: at 1000 /s against 1 /s they differ by 1.4e-4 of C's part.
    copper = FlowLaw(
        initial_pa=90e6, hardening_pa=292e6, hardening_exponent=0.31, rate_coefficient=0.025,
        reference_temperature_k=293.0, melting_temperature_k=1356.0, softening_exponent=1.09,
    )  # fmt: skip
    assert copper.stress_pa(0.1, 0.0, 293.0) / 1e6 == pytest.approx(233.015, rel=1e-5)
    assert copper.stress_pa(0.2, 1e3, 293.0) / 1e6 == pytest.approx(313.458, rel=3e-5)
    assert copper.stress_pa(0.2, 1e3, 493.0) / 1e6 == pytest.approx(262.714, rel=3e-5)
    steel = FlowLaw(
        initial_pa=792e6, hardening_pa=510e6, hardening_exponent=0.26, rate_coefficient=0.014,
        melting_temperature_k=1793.0, softening_exponent=1.03,
    )  # fmt: skip
    assert steel.stress_pa(0.1, 1e3, 293.0) / 1e6 == pytest.approx(1175.963, rel=3e-5)


def test_slope_with_log_rate_is_the_derivative() -> None:
    law = FlowLaw(
        initial_pa=400e6, rate_coefficient=0.02, peak_height=0.4, peak_temperature_k=900.0,
        peak_width_k=200.0, peak_rate_slope_per_k=1.4e-5,
    )  # fmt: skip
    y, static, temperature = np.array([2.0, 10.0, 15.0]), np.full(3, 400e6), np.array([700.0, 950.0, 1100.0])
    soft = law.softening(temperature)
    up, _ = law.at_log_rate(static, soft, y + 1e-4, temperature)
    down, _ = law.at_log_rate(static, soft, y - 1e-4, temperature)
    _, slope = law.at_log_rate(static, soft, y, temperature)
    np.testing.assert_allclose(slope, (up - down) / 2e-4, rtol=1e-6)


def test_peak_climbs_as_a_thermally_activated_process() -> None:
    # ln r = const - Q/(k Tp): 1/Tp falls linearly with ln r.
    law = FlowLaw(initial_pa=1.0, peak_height=10.0, peak_temperature_k=900.0, peak_width_k=80.0,
                  peak_rate_slope_per_k=1.4e-5, reference_rate_per_s=1e-6,
                  melting_temperature_k=1e9)  # fmt: skip
    temperature = np.linspace(600.0, 1400.0, 80001)
    found = [temperature[np.argmax(law.stress_pa(0.0, rate, temperature))] for rate in (1e-3, 1.0, 1e3)]
    expected = [1 / (1 / 900.0 - 1.4e-5 * np.log(rate)) for rate in (1e-3, 1.0, 1e3)]
    np.testing.assert_allclose(found, expected, rtol=1e-4)


def test_melts_to_nothing_and_does_not_harden_in_the_cold() -> None:
    law = FlowLaw(initial_pa=100e6, melting_temperature_k=1000.0)
    assert law.stress_pa(0.1, 1.0, 1200.0) == 0.0
    assert law.stress_pa(0.1, 1.0, 100.0) == law.stress_pa(0.1, 1.0, 293.15)


def test_side_by_side_keeps_each_law() -> None:
    laws = [FlowLaw(initial_pa=1e8, rate_coefficient=0.01), FlowLaw(initial_pa=2e8, peak_height=0.1)]
    both = side_by_side(laws).stress_pa(np.full((2, 3), 0.1), 1e3, 600.0)
    for row, law in zip(both, laws, strict=True):
        np.testing.assert_allclose(row, law.stress_pa(0.1, 1e3, 600.0), rtol=1e-14)
