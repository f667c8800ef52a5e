"""A bar with a measured table of propagation: the step of the first mode, with attenuation and complex impedance."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.quantity import Quantity
from shpb.rig.bar import Bar
from shpb.rig.propagation_table import PropagationTable
from shpb.settings import DEFAULT, Dispersion
from shpb.wave.complex_propagation import complex_speed_m_s, u_attenuation_per_m
from shpb.wave.faces import low_pass_of
from shpb.wave.pochhammer import first_mode_at_frequency
from shpb.wave.propagation import CarriedPulse, Grid, LowPass, carry_pulse
from tests.polymer import Solid, polymer_bar, polymer_rig, spectrum_of
from tests.synthetic import rig, smooth_pulse, steel_bar

Array = NDArray[np.float64]
DT = 1e-6
SOLID = Solid(unrelaxed_pa=5.3e9)


def table_of(
    frequency_hz: Array, attenuation: Array, speed: Array, u_attenuation: float = 0.0
) -> PropagationTable:
    points = frequency_hz.size
    return PropagationTable(
        frequency_hz=tuple(map(float, frequency_hz)),
        attenuation_per_m=tuple(map(float, attenuation)),
        phase_speed_m_s=tuple(map(float, speed)),
        u_attenuation_per_m=(u_attenuation,) * points,
        u_phase_speed_m_s=(0.5,) * points,
        coherence=(1.0,) * points,
    )


def solid_table(solid: Solid = SOLID, points: int = 80, last_hz: float = 60e3) -> PropagationTable:
    at = np.linspace(200.0, last_hz, points)
    xi = solid.xi_per_m(at)
    return table_of(at, xi.real, 2 * np.pi * at / xi.imag)


def elastic_table(bar: Bar, points: int = 80, last_hz: float = 180e3) -> PropagationTable:
    at = np.linspace(1e3, last_hz, points)
    speed = (
        first_mode_at_frequency(at * bar.radius_time_s, bar.poisson_ratio).phase_speed * bar.wave_speed_m_s
    )
    return table_of(at, np.zeros(points), speed)


def motions(carried: CarriedPulse, bar: Bar) -> tuple[Array, Array]:
    return bar.force_per_strain_n * carried.force_strain, bar.wave_speed_m_s * carried.velocity_strain


def test_a_pulse_is_carried_as_the_complex_modulus_says() -> None:
    # Truth: the spectrum times exp(-xi x) of the standard linear solid, and its own E* for the force.
    grid = Grid(-600e-6, DT, 3000)
    pulse = smooth_pulse(grid.time_s, 1e-3, 120e-6, 40e-6)
    bar, low_pass = replace(polymer_bar(SOLID), propagation=solid_table()), LowPass(40e3)
    length = 32768
    frequency = np.fft.rfftfreq(length, DT)
    xi, speed = SOLID.xi_per_m(frequency), SOLID.speed_m_s(frequency)
    for way in (1.3, -0.7):  # backwards the wave grows
        there = spectrum_of(pulse, length) * np.exp(-xi * way) * low_pass.gain(frequency)
        carried = carry_pulse(pulse, grid.start_s, grid, way, bar, low_pass, Dispersion.PHASE)
        force, velocity = motions(carried, bar)
        for got, spectrum in (
            (carried.strain, there),
            (force, there * SOLID.density_kg_m3 * speed**2 * bar.area_m2),
            (velocity, there * speed),
        ):
            expected = np.fft.irfft(spectrum, length)[: grid.samples]
            # 1e-4: below 200 Hz the table's first value stands.
            np.testing.assert_allclose(got, expected, atol=2e-4 * np.abs(expected).max())
    # The bar takes the sharpness of the front; rigidly carried it stays.
    rigid = carry_pulse(pulse, grid.start_s, grid, 1.3, bar, low_pass, Dispersion.NONE)
    assert rigid.force_strain is rigid.strain
    carried = carry_pulse(pulse, grid.start_s, grid, 1.3, bar, low_pass, Dispersion.PHASE)
    assert np.gradient(carried.strain).max() < 0.9 * np.gradient(rigid.strain).max()


def test_there_and_back_is_the_low_pass_alone() -> None:
    grid = Grid(-900e-6, DT, 4000)
    pulse = smooth_pulse(grid.time_s, 1e-3, 150e-6, 40e-6)
    bar, low_pass = replace(polymer_bar(SOLID), propagation=solid_table()), LowPass(30e3)

    def carried(strain: Array, way: float) -> Array:
        return carry_pulse(strain, grid.start_s, grid, way, bar, low_pass, Dispersion.PHASE).strain

    np.testing.assert_allclose(
        carried(carried(pulse, 0.9), -0.9), carried(carried(pulse, 0.0), 0.0), atol=2e-8
    )


@pytest.mark.parametrize("dispersion", [Dispersion.PHASE, Dispersion.FULL])
def test_a_table_of_the_first_mode_does_what_the_first_mode_does(dispersion: Dispersion) -> None:
    bar = steel_bar()
    measured = replace(bar, propagation=elastic_table(bar))
    grid = Grid(-400e-6, 2e-7, 6000)
    pulse = smooth_pulse(grid.time_s, 1e-3, 100e-6, 20e-6)
    by_mode, by_table = (
        carry_pulse(pulse, grid.start_s, grid, 1.0, one, LowPass(117e3), dispersion)
        for one in (bar, measured)
    )
    # Interpolation in 2 kHz steps, twelve wavelengths at 60 kHz.
    for got, expected in zip(by_table, by_mode, strict=True):
        np.testing.assert_allclose(got, expected, atol=2e-5 * np.abs(expected).max())


@pytest.mark.parametrize("dispersion", [Dispersion.PHASE, Dispersion.FULL])
def test_the_reference_speed_does_not_matter(dispersion: Dispersion) -> None:
    grid = Grid(-600e-6, DT, 3000)
    pulse = smooth_pulse(grid.time_s, 1e-3, 120e-6, 40e-6)
    results = []
    for speed in (SOLID.slow_m_s, 0.96 * SOLID.slow_m_s, 1.03 * SOLID.slow_m_s):
        bar = polymer_bar(
            SOLID, wave_speed_m_s=Quantity(speed), propagation=solid_table(), poisson_ratio=Quantity(0.35)
        )
        carried = carry_pulse(pulse, grid.start_s, grid, -0.8, bar, LowPass(30e3), dispersion)
        results.append((carried.strain, *motions(carried, bar)))
    for other in results[1:]:
        for got, expected in zip(other, results[0], strict=True):
            np.testing.assert_allclose(got, expected, atol=1e-9 * np.abs(expected).max())


def test_interpolation_is_smooth_between_few_points() -> None:
    few, at = solid_table(points=30), np.linspace(1e3, 58e3, 400)
    # In steps of 2 kHz the solid's own frequency, 13 kHz, is well resolved.
    np.testing.assert_allclose(complex_speed_m_s(few, at), SOLID.speed_m_s(at), rtol=1e-4)


def test_the_low_pass_ends_where_the_table_ends() -> None:
    lab = polymer_rig(SOLID)
    known = replace(lab, transmitted_bar=replace(lab.transmitted_bar, propagation=solid_table(last_hz=24e3)))
    assert low_pass_of(lab, DEFAULT).stop_hz > 24e3
    assert low_pass_of(known, DEFAULT).stop_hz == pytest.approx(24e3)
    assert low_pass_of(known, replace(DEFAULT, cutoff_hz=30e3)).stop_hz == pytest.approx(24e3)
    assert low_pass_of(known, replace(DEFAULT, cutoff_hz=10e3)).cutoff_hz == 10e3
    # Elastic bars are not touched.
    assert low_pass_of(rig(), replace(DEFAULT, cutoff_hz=300e3)).cutoff_hz == 300e3


def test_uncertainty_of_attenuation_falls_to_nothing_at_rest() -> None:
    table = table_of(np.array([1e3, 2e3, 3e3, 4e3]), np.zeros(4), np.full(4, 2e3), u_attenuation=0.02)
    np.testing.assert_allclose(
        u_attenuation_per_m(table, np.array([0.0, 500.0, 1e3, 9e3])), [0, 0.01, 0.02, 0.02]
    )
