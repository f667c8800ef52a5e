"""Gauge and amplifier: a record that both have rounded comes back where it stands above the noise, and no further."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.forward.recording import amplified
from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.reduction import ShotResult, reduce
from shpb.response.corrections.correction import Report
from shpb.rig.rig import Rig
from shpb.settings import Correction, Settings
from shpb.wave.recording_chain import FADE_OUT, chain_gain, chain_left, chain_rise_s
from tests.synthetic import FaceStrains, copper, gauge, record_of, rig, sheet, uniform_plastic_shot

Array = NDArray[np.float64]
LENGTH_M, BANDWIDTH_HZ = 10e-3, 80e3


def lab_with(shift_m: float = 0.0, **of_gauges: object) -> Rig:
    return rig(
        incident_gauge=gauge("A", 0.5 + shift_m, **of_gauges),
        transmitted_gauge=gauge("B", 0.4 + shift_m, **of_gauges),
    )


STATED = lab_with(length_m=Quantity(LENGTH_M), bandwidth_hz=Quantity(BANDWIDTH_HZ))


@pytest.fixture(scope="module")
def faces() -> FaceStrains:
    """A front of 14 us: some of it lies above 50 kHz."""
    return uniform_plastic_shot(rig(), copper(), duration_s=80e-6, rise_s=14e-6)[0]


@pytest.fixture(scope="module")
def rounded(faces: FaceStrains) -> Record:
    """The mean over the gauge, by Gauss's quadrature of the wave at five places, behind the amplifier."""
    places, weights = np.polynomial.legendre.leggauss(5)
    records = [record_of(faces, lab_with(0.5 * LENGTH_M * place)) for place in places]
    volts = sum(0.5 * w * one.voltage_v for w, one in zip(weights, records, strict=True))
    interval = records[0].sample_interval_s
    rows = [amplified(row, interval, BANDWIDTH_HZ) for row in np.asarray(volts)]
    return replace(records[0], voltage_v=np.stack(rows))


def noisy(record: Record, share: float, seed: int = 5) -> Record:
    volts = record.voltage_v
    noise = np.random.default_rng(seed).standard_normal(volts.shape)
    return replace(record, voltage_v=volts + share * np.abs(volts).max() * noise)


def reduced(record: Record, lab: Rig, *corrections: Correction) -> ShotResult:
    settings = Settings(corrections=(Correction.MISMATCH, *corrections), cutoff_hz=100e3)
    return reduce(record, lab, sheet(copper()), settings)


def off(result: ShotResult, truth: ShotResult, which: str) -> Array:
    """Strain at the face less the true one, over the loading."""
    at = truth.faces.time_s + truth.faces.record_time_of_zero_s
    clock = result.faces.time_s + result.faces.record_time_of_zero_s
    mine = np.interp(at, clock, getattr(result.faces, which).strain)
    loading = (truth.faces.time_s > -10e-6) & (truth.faces.time_s < 110e-6)
    return np.asarray((mine - getattr(truth.faces, which).strain)[loading])


def report(result: ShotResult) -> Report:
    return result.response.correction(Correction.GAUGE_RISE)


@pytest.mark.parametrize("which", ["incident", "reflected", "transmitted"])
def test_what_gauge_and_amplifier_took_comes_back(faces: FaceStrains, rounded: Record, which: str) -> None:
    truth = reduced(record_of(faces, lab_with()), lab_with())
    left = reduced(rounded, STATED)
    given = reduced(rounded, STATED, Correction.GAUGE_RISE)
    assert report(given).applied
    before, after = (np.abs(off(one, truth, which)).max() for one in (left, given))
    peak = np.abs(getattr(truth.faces, which).strain).max()
    assert before > 0.015 * peak
    assert after < 0.1 * before


def test_within_the_noise_where_the_record_is_noisy(faces: FaceStrains, rounded: Record) -> None:
    truth = reduced(record_of(faces, lab_with()), lab_with())
    record = noisy(rounded, 5e-4)
    left, given = reduced(record, STATED), reduced(record, STATED, Correction.GAUGE_RISE)
    for which in ("incident", "reflected"):
        pulse = getattr(given.pulses, which)
        passed = pulse.noise * given.faces.low_pass.noise_share(given.pulses.sample_interval_s)
        before, after = off(left, truth, which), off(given, truth, which)
        # Noise is lifted too, by a factor of 2 at the upper end.
        assert after.std() < 2 * passed
        assert np.abs(after).max() < 7 * passed
        assert np.abs(before).max() > 50 * passed


def test_in_heavy_noise_it_fades_out_earlier_and_never_does_harm(faces: FaceStrains, rounded: Record) -> None:
    truth = reduced(record_of(faces, lab_with()), lab_with())
    clean = reduced(rounded, STATED, Correction.GAUGE_RISE).faces.undone_hz
    record = noisy(rounded, 0.05)
    plain, asked = reduced(record, STATED), reduced(record, STATED, Correction.GAUGE_RISE)
    for n, which in enumerate(("incident", "reflected", "transmitted")):
        assert asked.faces.undone_hz[n] < 0.8 * clean[n]
        before, after = off(plain, truth, which), off(asked, truth, which)
        assert np.sqrt(np.mean(after**2)) < 1.1 * np.sqrt(np.mean(before**2))
    said = report(asked)
    assert said.applied
    assert "(rise 4.81 us)" in said.size
    assert f"transmitted pulse known up to {asked.faces.undone_hz[2] / 1e3:.0f} kHz" in said.size
    assert "faster changes limited by the rise time" in said.size


def test_where_the_pulse_stands_above_the_noise_only_while_nothing_is_lost_it_is_refused() -> None:
    # A slow pulse in noise, and a gauge of 2 mm: 0.2 % are lost at 87 kHz.
    slow = uniform_plastic_shot(rig(), copper(), duration_s=60e-6, rise_s=40e-6)[0]
    lab = lab_with(length_m=Quantity(2e-3))
    record = noisy(record_of(slow, lab), 0.02)
    plain, asked = reduced(record, lab), reduced(record, lab, Correction.GAUGE_RISE)
    said = report(asked)
    assert not said.applied
    assert "the pulses stand above their noise up to" in said.refused
    assert "rise time of 0.40 us is the limit" in said.refused
    np.testing.assert_array_equal(asked.faces.incident.strain, plain.faces.incident.strain)


def test_off_it_does_nothing(rounded: Record) -> None:
    stated, silent = reduced(rounded, STATED), reduced(rounded, lab_with())
    for which in ("incident", "reflected", "transmitted"):
        np.testing.assert_array_equal(
            getattr(stated.faces, which).strain, getattr(silent.faces, which).strain
        )


def test_the_gain_is_whole_to_a_frequency_and_then_fades_to_one() -> None:
    station = STATED.incident_gauge, STATED.incident_bar
    at = np.linspace(0.0, 200e3, 2001)
    gain = chain_gain(at, *station)
    left = chain_left(at, *station, 100e3)
    np.testing.assert_allclose(left[at <= 100e3], gain[at <= 100e3], rtol=1e-12)
    np.testing.assert_array_equal(left[at >= FADE_OUT * 100e3], 1.0)
    between = left[(at > 100e3) & (at < FADE_OUT * 100e3)]
    assert (between < 1.0).all()
    assert (between > gain[(at > 100e3) & (at < FADE_OUT * 100e3)]).all()
    np.testing.assert_array_equal(chain_left(at, *station, 0.0), 1.0)


def test_rise_times_add_in_squares() -> None:
    # 10 mm at 5000 m/s: 2 us; 0.35/80 kHz = 4.375 us (common practice).
    assert chain_rise_s(STATED.incident_gauge, STATED.incident_bar) == pytest.approx(4.8105e-6, abs=1e-10)
