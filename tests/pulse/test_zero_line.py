"""Zero lines: offset, drift, hum, and the tail of the pulse before."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.pulse.zero_line import quiet_before_front, quiet_gap, quiet_window, zero_line

DT = 2e-7
TIME = DT * np.arange(5000)


def test_level_and_slope_of_a_quiet_window() -> None:
    window = quiet_window(3.0 + 0.01 * np.arange(200.0), 50, 150)
    assert window is not None
    assert window.level == pytest.approx(3.0 + 0.01 * 99.5)
    assert window.slope == pytest.approx(0.01)
    assert window.noise == pytest.approx(0, abs=1e-9)
    assert quiet_window(np.zeros(20), 0, 5) is None


def test_drift_is_followed_across_the_pulse() -> None:
    # 1 % of the peak a millisecond, seen in 300 us before the pulse: its prolongation 100 us on is right to 0.02 %.
    rng = np.random.default_rng(1)
    trace = 0.05 + 10.0 * TIME + rng.normal(0, 0.003, TIME.size)
    before = quiet_before_front(trace, 1500, DT)
    assert before is not None
    line = zero_line(before, (), 1.0, DT)
    at = 2000
    assert line.at(at, at + 1)[0] == pytest.approx(0.05 + 10.0 * TIME[at], abs=6e-4)


def test_hum_is_a_straight_line_for_the_time_that_matters() -> None:
    hum = 0.01 * np.sin(2 * np.pi * 50 * TIME + 1.0)
    before = quiet_before_front(hum, 2000, DT)
    assert before is not None
    line = zero_line(before, (), 1.0, DT)
    under = slice(2000, 2750)  # 150 us of pulse
    assert np.abs(line.at(2000, 2750) - hum[under]).max() < 1e-4  # 1 % of the hum, 0.01 % of the peak


def test_a_noisy_short_window_cannot_tilt_the_line() -> None:
    rng = np.random.default_rng(2)
    tilts = []
    for _ in range(200):
        before = quiet_window(rng.normal(0, 0.02, 60), 0, 60)
        assert before is not None
        tilts.append(zero_line(before, (), 1.0, DT).slope / DT)
    # Without the prior the slope would scatter by 0.02 sqrt(12/60)/(60 DT) = 745 a second.
    assert np.std(tilts) < 40


def test_a_tail_is_not_taken_for_zero() -> None:
    # A shaped pulse whose tail dies with 60 us: at the end of the gap 2 % of the peak still stands.
    peak_end, front = 1000, 2200
    trace = np.where(TIME[peak_end] > TIME, 1.0, np.exp(-(TIME - TIME[peak_end]) / 60e-6))
    assert quiet_gap(trace, 1.0, peak_end, front) is None


def test_the_quiet_part_of_a_gap_is_found() -> None:
    peak_end, front = 1000, 3000
    rng = np.random.default_rng(3)
    trace = np.where(TIME[peak_end] > TIME, 1.0, np.exp(-(TIME - TIME[peak_end]) / 25e-6))
    trace = trace + 0.03 + rng.normal(0, 0.005, TIME.size)
    window = quiet_gap(trace, 1.0, peak_end, front)
    assert window is not None
    assert window.stop == front
    assert window.level == pytest.approx(0.03, abs=1.5e-3)


def test_a_jump_of_the_zero_does_not_tilt_the_line() -> None:
    # A gauge that came loose between the two windows: a tenth of the peak within 200 us is no drift.
    rng = np.random.default_rng(4)
    trace = rng.normal(0, 0.003, TIME.size)
    trace[1500:] -= 0.1
    before, gap = quiet_window(trace, 0, 1000), quiet_window(trace, 2000, 2500)
    assert before is not None
    assert gap is not None
    assert abs(zero_line(gap, (before,), 1.0, DT).slope / DT) < 15  # 100 V/s would join the two
