"""The onset picker on fronts whose tangent foot is known by construction."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.pulse.foot import pick_foot
from shpb.pulse.front import first_front, moving_mean, white_noise

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


def test_stated_uncertainty_is_the_scatter() -> None:
    rng = np.random.default_rng(21)
    found = [pick(ramp(30.2e-6) + rng.normal(0, 0.02, 400), 0.02) for _ in range(300)]
    scatter = np.std([foot.time_s for foot in found])
    assert np.median([foot.u_time_s for foot in found]) == pytest.approx(scatter, rel=0.25)


def test_a_second_steeper_step_does_not_draw_the_foot_to_it() -> None:
    trace = 0.4 * ramp(30e-6, rise_s=15e-6) + 0.6 * ramp(100e-6, rise_s=12e-6)
    assert pick(trace).time_s == pytest.approx(30e-6, abs=2 * DT)


def test_a_knee_after_the_front_does_not_tilt_the_tangent() -> None:
    # As a yielding specimen transmits: fast to 40 % of the peak, then slowly.
    trace = 0.4 * ramp(30e-6, rise_s=10e-6) + 0.6 * ramp(40e-6, rise_s=100e-6)
    assert pick(trace).time_s == pytest.approx(30e-6, abs=2 * DT)


def test_no_pulse_no_foot() -> None:
    rng = np.random.default_rng(22)
    assert pick(rng.normal(0, 1.0, 400), 1.0) is None
    assert pick(np.zeros(400), 0.0) is None
    assert pick(np.ones(6), 0.0) is None


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
    assert front.index == pytest.approx(200 + 0.1 * 40, abs=2)
    assert first_front(np.zeros(400), DT, SMOOTHING) is None


def test_a_single_spike_is_no_front() -> None:
    trace = ramp(100e-6)
    trace[20] = 0.9
    front = first_front(trace, DT, 20 * DT)
    assert front is not None
    assert front.index > 150
