"""Carrying a pulse along a bar: identities that hold whatever the pulse."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.quantity import Quantity
from shpb.settings import Dispersion
from shpb.wave.pochhammer import first_mode_at_frequency
from shpb.wave.propagation import (
    AMPLITUDE_NONE_FA_C0,
    Grid,
    LowPass,
    bar_transfer,
    capped_factor,
    carry_pulse,
    fast_length,
    padded_length,
)
from tests.synthetic import smooth_pulse, steel_bar

Array = NDArray[np.float64]
DT = 2e-7
LOW_PASS = LowPass(120e3)


def pulse_on(grid: Grid, begins_s: float) -> Array:
    return smooth_pulse(grid.time_s - begins_s, 1e-3, 100e-6, 20e-6)


def carried(strain: Array, grid: Grid, distance: float, dispersion: Dispersion, **more: float) -> Array:
    bar = steel_bar(poisson_ratio=Quantity(more.pop("nu", 0.29)))
    return carry_pulse(strain, grid.start_s, grid, distance, bar, LOW_PASS, dispersion, **more).strain


def test_there_and_back_is_the_low_pass_alone() -> None:
    grid = Grid(-500e-6, DT, 8000)
    start = pulse_on(grid, 0.0)
    there = carried(start, grid, 1.3, Dispersion.PHASE)
    back = carried(there, grid, -1.3, Dispersion.PHASE)
    filtered_twice = carried(carried(start, grid, 0.0, Dispersion.PHASE), grid, 0.0, Dispersion.PHASE)
    np.testing.assert_allclose(back, filtered_twice, atol=1e-9)


def test_phase_only_keeps_integral_and_energy() -> None:
    grid = Grid(-500e-6, DT, 8000)
    start = carried(pulse_on(grid, 0.0), grid, 0.0, Dispersion.NONE)
    there = carry_pulse(start, grid.start_s, grid, 1.0, steel_bar(), LowPass(1e6), Dispersion.PHASE).strain
    assert there.sum() == pytest.approx(start.sum(), rel=1e-9)
    assert (there**2).sum() == pytest.approx((start**2).sum(), rel=1e-9)
    assert np.abs(there - start).max() > 1e-5  # it did disperse


def test_no_lateral_contraction_is_a_rigid_shift_to_a_fraction_of_a_sample() -> None:
    grid = Grid(-100e-6, DT, 4000)
    distance = 1.0 + 0.37 * DT * 5000.0  # 200 us and 0.37 of a sample
    # With nu = 0 plane waves travel at c0 up to Lame's point, f a/c0 = 0.293: stay below 146 kHz.
    bar, low_pass = steel_bar(poisson_ratio=Quantity(0.0)), LowPass(90e3)
    start = pulse_on(grid, 0.0)
    moved = carry_pulse(start, grid.start_s, grid, distance, bar, low_pass, Dispersion.PHASE).strain
    late = pulse_on(grid, distance / 5000.0)
    filtered = carry_pulse(late, grid.start_s, grid, 0.0, bar, low_pass, Dispersion.NONE).strain
    np.testing.assert_allclose(moved, filtered, atol=1e-8)


def test_direction_of_time() -> None:
    # Forward is later; dispersion makes ringing follow the front, not precede it.
    grid = Grid(-100e-6, DT, 4000)
    there = carried(pulse_on(grid, 0.0), grid, 1.0, Dispersion.PHASE)
    front = grid.time_s[np.argmax(there > 0.5e-3)]
    assert front == pytest.approx(200e-6 + 10e-6, abs=2e-6)
    before = there[grid.time_s < 190e-6]
    after = there[(grid.time_s > 340e-6) & (grid.time_s < 400e-6)]
    assert np.abs(before).max() < 0.2 * np.abs(after).max()


def test_energy_arrives_with_the_group_speed() -> None:
    # A packet at 100 kHz over 1 m: f a/c0 = 0.2, nu = 0.29; c_g from the table of Bancroft's equation.
    grid = Grid(0.0, DT, 8192)
    packet = np.exp(-(((grid.time_s - 300e-6) / 60e-6) ** 2)) * np.sin(2 * np.pi * 100e3 * grid.time_s)
    there = carry_pulse(packet, 0.0, grid, 1.0, steel_bar(), LowPass(300e3), Dispersion.PHASE).strain
    centre = (grid.time_s * there**2).sum() / (there**2).sum()
    group = first_mode_at_frequency([0.2], 0.29).group_speed[0]
    assert centre - 300e-6 == pytest.approx(1.0 / (5000.0 * group), rel=5e-3)


def test_a_tuned_shift_only_delays() -> None:
    grid = Grid(-100e-6, DT, 4000)
    start = pulse_on(grid, 0.0)
    late = carried(start, grid, 0.5, Dispersion.PHASE, shift_s=10 * DT)
    plain = carried(start, grid, 0.5, Dispersion.PHASE)
    np.testing.assert_allclose(late[10:], plain[:-10], atol=1e-12)


def test_amplitude_correction_stays_below_the_pole() -> None:
    mode = first_mode_at_frequency(np.linspace(0, 0.6, 601), 0.29)
    factor = capped_factor(mode, mode.stress)
    fa = mode.frequency_fa_c0
    assert np.isfinite(factor).all()
    # Whole at 0.15 (1.041237, exact value worked out apart from the program) and gone from 0.25 on.
    assert np.interp(0.15, fa, factor) == pytest.approx(1.041237, abs=1e-5)
    assert (factor[fa >= AMPLITUDE_NONE_FA_C0] == 1).all()
    assert factor.max() < 1.15


def test_full_correction_gives_force_and_velocity_of_their_own() -> None:
    grid = Grid(-100e-6, DT, 4000)
    bar = steel_bar()
    full = carry_pulse(pulse_on(grid, 0.0), grid.start_s, grid, 0.5, bar, LOW_PASS, Dispersion.FULL)
    phase = carry_pulse(pulse_on(grid, 0.0), grid.start_s, grid, 0.5, bar, LOW_PASS, Dispersion.PHASE)
    np.testing.assert_array_equal(full.strain, phase.strain)
    assert phase.force_strain is phase.strain
    # Long waves are not touched: impulse and mean momentum stay.
    assert full.force_strain.sum() == pytest.approx(full.strain.sum(), rel=1e-8)
    # At 50 kHz (f a/c0 = 0.1) force by surface strain is 1.014309, velocity 1.023568.
    packet = np.exp(-(((grid.time_s - 300e-6) / 80e-6) ** 2)) * np.sin(2 * np.pi * 50e3 * grid.time_s)
    there = carry_pulse(packet, grid.start_s, grid, 0.0, bar, LOW_PASS, Dispersion.FULL)
    for strain, factor in ((there.force_strain, 1.014309), (there.velocity_strain, 1.023568)):
        assert np.sqrt((strain**2).sum() / (there.strain**2).sum()) == pytest.approx(factor, rel=5e-4)


def test_low_pass_is_one_half_and_nothing() -> None:
    gain = LowPass(100e3).gain(np.array([0.0, 50e3, 100e3, 150e3, 1e6]))
    np.testing.assert_allclose(gain, [1, 1, 0.5, 0, 0], atol=1e-15)


@pytest.mark.parametrize("samples", [1, 2, 7, 100, 1001, 4097, 99_999, 131_073])
def test_fast_length(samples: int) -> None:
    length = fast_length(samples)
    assert samples <= length <= 1.2 * samples + 2
    assert length % 2 == 0
    for prime in (2, 3, 5):
        while length % prime == 0:
            length //= prime
    assert length == 1


@pytest.mark.parametrize("dispersion", list(Dispersion))
@pytest.mark.parametrize("every", [2, 5, 12])
def test_a_coarser_clock_holds_the_same_values(every: int, dispersion: Dispersion) -> None:
    # Nothing above the low-pass comes to the faces, so every nth sample of the fine result is the coarse one.
    bar, low_pass, fine = steel_bar(), LowPass(120e3), 0.02e-6
    time = np.arange(0.0, 150e-6, fine)
    strain = smooth_pulse(time - 20e-6, 1e-3, 60e-6, 8e-6)
    length = every * fast_length(-(-padded_length(strain.size, 0.9, bar, low_pass, fine) // every))
    transfer = bar_transfer(bar, fine, length, low_pass, dispersion)
    start = 171.3e-6
    whole = transfer.carry(strain, 0.0, Grid(start, fine, 1200 * every), 0.9)
    thinned = transfer.carry(strain, 0.0, Grid(start, every * fine, 1200), 0.9)
    for a, b in zip(whole, thinned, strict=True):
        np.testing.assert_allclose(b, a[::every], atol=1e-12)
    assert whole.strain.max() > 0.9e-3
