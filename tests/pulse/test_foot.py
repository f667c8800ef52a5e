"""The onset picker on fronts whose tangent foot is known by construction."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.pulse.foot import pick_foot
from shpb.pulse.front import first_front, moving_mean, white_noise
from shpb.pulse.front_shape import STEEPEST, STEEPEST_AT, TANGENT_FOOT, FittedFront, Front, fit_front

Array = NDArray[np.float64]
DT = 5e-7
SMOOTHING = 1e-6


def ramp(foot_s: float, rise_s: float = 20e-6, samples: int = 400) -> Array:
    return np.clip((DT * np.arange(samples) - foot_s) / rise_s, 0.0, 1.0)


def pick(trace: Array, noise: float = 0.0, sign: int | None = None):  # type: ignore[no-untyped-def]
    return pick_foot(trace, 0.0, DT, noise, SMOOTHING, sign)


@pytest.mark.parametrize("fraction", [0.0, 0.25, 0.5, 0.9])
@pytest.mark.parametrize("sign", [1, -1])
def test_foot_of_a_straight_front_to_a_hundredth_of_a_sample(fraction: float, sign: int) -> None:
    foot = pick(sign * ramp((60 + fraction) * DT))
    assert foot.time_s == pytest.approx((60 + fraction) * DT, abs=0.01 * DT)
    assert foot.sign == sign
    assert foot.rise_s == pytest.approx(20e-6, rel=0.1)


def test_shape_of_the_front_moves_the_foot_as_its_tangent_says() -> None:
    # Half a cosine of 20 us: the least-squares line through 10 to 60 % of the height, worked out on a fine grid.
    time = DT * np.arange(400)
    phase = np.clip((time - 30e-6) / 20e-6, 0, 1)
    front = 0.5 * (1 - np.cos(np.pi * phase))
    fine = np.linspace(0, 1, 200_001)
    height = 0.5 * (1 - np.cos(np.pi * fine))
    inside = (height > 0.1) & (height < 0.6)
    slope, level = np.polyfit(fine[inside], height[inside], 1)
    assert pick(front).time_s == pytest.approx(30e-6 - 20e-6 * level / slope, abs=0.5 * DT)


@pytest.mark.parametrize(("decibel", "samples"), [(40, 1.0), (20, 3.0)])
def test_noise(decibel: float, samples: float) -> None:
    """Within 1 sample at 40 dB and 3 at 20 dB (peak over white noise), root mean square of 200 fronts."""
    rng = np.random.default_rng(20)
    noise = 10 ** (-decibel / 20)
    errors = []
    for _ in range(200):
        true = (60 + rng.uniform()) * DT
        foot = pick(ramp(true) + rng.normal(0, noise, 400), noise, sign=1)
        assert foot is not None
        errors.append((foot.time_s - true) / DT)
    assert np.sqrt(np.mean(np.square(errors))) < samples
    assert abs(np.mean(errors)) < samples / 3  # no bias


@pytest.mark.parametrize("noise", [0.003, 0.02, 0.1])
@pytest.mark.parametrize("rise_s", [6e-6, 20e-6, 60e-6])
def test_stated_uncertainty_is_the_scatter(noise: float, rise_s: float) -> None:
    # From a clean record, where the tangent is taken alone, to 20 dB, where the shape has most of the say. The
    # bias of the shape is part of the uncertainty but not of the scatter, hence the wider upper limit.
    rng = np.random.default_rng(21)
    found = [pick(ramp(30.2e-6, rise_s) + rng.normal(0, noise, 400), noise) for _ in range(200)]
    scatter = np.std([foot.time_s for foot in found])
    ratio = np.median([foot.u_time_s for foot in found]) / scatter
    assert 0.8 < ratio < 1.4
    errors = [(foot.time_s - 30.2e-6) / foot.u_time_s for foot in found]
    assert 0.7 < np.sqrt(np.mean(np.square(errors))) < 1.3


def test_a_second_steeper_step_does_not_draw_the_foot_to_it() -> None:
    trace = 0.4 * ramp(30e-6, rise_s=15e-6) + 0.6 * ramp(100e-6, rise_s=12e-6)
    assert pick(trace).time_s == pytest.approx(30e-6, abs=2 * DT)


def test_a_knee_after_the_front_does_not_tilt_the_tangent() -> None:
    # As a yielding specimen transmits: fast to 40 % of the peak, then slowly.
    trace = 0.4 * ramp(30e-6, rise_s=10e-6) + 0.6 * ramp(40e-6, rise_s=100e-6)
    assert pick(trace).time_s == pytest.approx(30e-6, abs=2 * DT)


@pytest.mark.parametrize("noise", [0.0, 0.003, 0.01])
def test_a_first_step_far_gentler_than_the_second_wins(noise: float) -> None:
    # 15 % of the peak at a seventh of the slope that follows. Tolerance: three uncertainties of a front of 0.15.
    trace = 0.15 * ramp(60e-6, rise_s=12e-6) + 0.85 * ramp(100e-6, rise_s=10e-6)
    trace = trace + np.random.default_rng(24).normal(0, noise, 400)
    foot = pick(trace, noise)
    assert foot.time_s == pytest.approx(60e-6, abs=0.05 * DT + 3 * foot.u_time_s)
    assert foot.u_time_s < 2 * DT


def test_a_knee_in_noise() -> None:
    trace = 0.4 * ramp(30e-6, rise_s=10e-6) + 0.6 * ramp(40e-6, rise_s=100e-6)
    rng = np.random.default_rng(25)
    errors = [(pick(trace + rng.normal(0, 0.03, 400), 0.03).time_s - 30e-6) / DT for _ in range(100)]
    assert np.sqrt(np.mean(np.square(errors))) < 1.5  # the first rise stands 22 dB above the noise
    assert np.abs(errors).max() < 6


@pytest.mark.parametrize("noise", [0.0, 0.01, 0.1])
def test_ringing_after_a_steep_front_does_not_move_the_foot(noise: float) -> None:
    # As Pochhammer-Chree dispersion leaves it: 25 % of overshoot, a period of 8 us.
    since = np.clip(DT * np.arange(400) - 65e-6, 0.0, None)
    ringing = 0.25 * np.exp(-since / 20e-6) * np.sin(2 * np.pi * since / 8e-6)
    rng = np.random.default_rng(26)
    trace = -ramp(60e-6, rise_s=5e-6) * (1 + ringing)
    found = [pick(trace + rng.normal(0, noise, 400), noise) for _ in range(50 if noise else 1)]
    assert {foot.sign for foot in found} == {-1}
    errors = [(foot.time_s - 60e-6) / DT for foot in found]
    assert np.sqrt(np.mean(np.square(errors))) < 0.02 + 15 * noise


@pytest.mark.parametrize("noise", [0.0, 0.01, 0.1])
def test_a_zero_line_off_by_one_percent_moves_the_foot_by_one_percent_of_the_rise(noise: float) -> None:
    rng = np.random.default_rng(27)
    trace = 0.01 + ramp(60e-6)
    found = [pick(trace + rng.normal(0, noise, 400), noise).time_s for _ in range(100 if noise else 1)]
    # 0.4 samples; in noise also the bias of the shape, 2 % of the rise or 0.8 samples.
    assert abs(np.mean(found) - 60e-6) < (0.45 + 10 * noise) * DT


def test_thousands_of_samples_on_the_rise() -> None:
    time = np.arange(20_000.0)
    rng = np.random.default_rng(28)
    trace = np.clip((time - 8000.25) / 4000, 0, 1) + rng.normal(0, 0.1, time.size)
    foot = pick_foot(trace, 0.0, 1e-8, 0.1, 1e-6)
    assert foot is not None
    assert foot.u_time_s < 0.01 * 40e-6
    assert foot.time_s == pytest.approx(80.0025e-6, abs=3 * foot.u_time_s)


def test_a_pulse_hardly_above_the_noise_is_no_pulse_or_says_how_uncertain_it_is() -> None:
    # From a third of the noise of one sample to thrice.
    rng = np.random.default_rng(29)
    lost, ratios = [], []
    for height in (0.3, 0.6, 1.0, 1.5, 3.0):
        found = [pick(height * ramp(60e-6) + rng.normal(0, 1.0, 400), 1.0) for _ in range(60)]
        lost.append(sum(foot is None for foot in found))
        ratios += [(foot.time_s - 60e-6) / foot.u_time_s for foot in found if foot is not None]
    assert lost[0] >= 58
    assert lost[-1] == 0
    assert np.sqrt(np.mean(np.square(ratios))) < 1.2
    assert np.abs(ratios).max() < 6


def test_no_pulse_no_foot() -> None:
    rng = np.random.default_rng(22)
    assert pick(rng.normal(0, 1.0, 400), 1.0) is None
    assert pick(np.zeros(400), 0.0) is None
    assert pick(np.ones(6), 0.0) is None
    assert all(
        pick(rng.normal(0, 1.0, samples), 1.0) is None for samples in (60, 400, 4000) for _ in range(40)
    )


def test_moving_mean_is_a_mean_to_the_ends() -> None:
    values = np.arange(10.0)
    np.testing.assert_allclose(moving_mean(values, 3)[1:-1], values[1:-1])
    assert moving_mean(values, 3)[0] == pytest.approx(0.5)
    np.testing.assert_array_equal(moving_mean(values, 1), values)


def test_white_noise_is_deaf_to_fronts_and_drift() -> None:
    rng = np.random.default_rng(23)
    trace = rng.normal(0, 0.3, 4000) + np.linspace(0, 50, 4000)
    trace[2000:] += 100
    assert white_noise(trace) == pytest.approx(0.3, rel=0.05)


def test_first_front() -> None:
    trace = -2.0 * ramp(100e-6)
    trace[20] = 5.0  # a spike is no front
    trace[20] = 0.0
    front = first_front(trace, DT, SMOOTHING)
    assert front is not None
    assert front.sign == -1
    assert front.at == pytest.approx(200 + 0.1 * 40, abs=2)
    assert first_front(np.zeros(400), DT, SMOOTHING) is None


def test_a_single_spike_is_no_front() -> None:
    trace = ramp(100e-6)
    trace[20] = 0.9
    front = first_front(trace, DT, 20 * DT)
    assert front is not None
    assert front.at > 150


# --- the shape that is fitted --------------------------------------------------------------------


def shape(x: Array) -> Array:
    return 0.5 * (1 - np.cos(np.pi * np.clip(x, 0, 1) ** 1.5))


def test_numbers_of_the_shape_follow_from_it() -> None:
    x = np.linspace(0, 1, 400_001)
    height = shape(x)
    slope = np.gradient(height, x)
    steepest = int(slope.argmax())
    assert x[steepest] == pytest.approx(STEEPEST_AT, abs=1e-4)
    assert slope[steepest] == pytest.approx(STEEPEST, abs=1e-4)
    end = height[steepest + int(np.argmax(slope[steepest:] <= 0.25 * slope[steepest]))]
    inside = (height >= 0.1 * end) & (height <= 0.6 * end)
    gradient, level = np.polyfit(x[inside], height[inside], 1)
    assert -level / gradient == pytest.approx(TANGENT_FOOT, abs=1e-4)


def fitted(values: Array, noise: float, guess: Front) -> FittedFront:
    found = fit_front(np.arange(values.size, dtype=float), values, noise, guess, 40.0)
    assert found is not None
    return found


def test_fit_finds_the_front_it_is_made_for() -> None:
    time = np.arange(120.0)
    true = Front(40.3, 36.0, 0.8, 0.2)
    values = true.height * shape((time - true.start) / true.rise)
    values += true.slope * np.clip((time - true.start) / true.rise - 1, 0, None)
    found = fitted(values, 1e-4, Front(46.0, 28.0, 0.7, 0.0))
    np.testing.assert_allclose(found.front, true, rtol=0.02)
    assert found.front.foot == pytest.approx(true.foot, abs=0.02)
    np.testing.assert_allclose(found.curve, values, atol=2e-3)


def test_derivatives_of_the_foot_are_those_of_the_fit() -> None:
    time = np.arange(120.0)
    values = shape((time - 40) / 36)
    guess = Front(42.0, 34.0, 1.0, 0.0)
    at = fitted(values, 0.1, guess)
    offset, largest = np.full(120, 0.005), float(np.abs(at.foot_by_sample).max())
    steps = [0.05 * (time == sample) for sample in (35, 45, 55, 65, 75, 90)]
    for step, within in [(offset, 0.02), *((step, 0.15 * 0.05 * largest) for step in steps)]:
        later, sooner = (fitted(values + side * step, 0.1, guess).front.foot for side in (1, -1))
        assert (later - sooner) / 2 == pytest.approx(float(at.foot_by_sample @ step), abs=within)
