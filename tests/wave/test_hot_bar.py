"""Waves through a hot bar end: published limits, energy, and a way back that ends where it began."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.reduction import reduce
from shpb.response.corrections.correction import Report
from shpb.settings import Correction, Settings
from shpb.wave.hot_bar import HotEnd, through_hot_end, whole_slices
from tests.synthetic import copper, record_of, rig, sheet, steel_bar, uniform_plastic_shot

DT = 0.1e-6
TIME = np.arange(16000) * DT


def hot_end(length_m: float, ratio: float = 0.8) -> HotEnd:
    return HotEnd(steel_bar(), 293.15 + 500, length_m, (ratio - 1) / 500)


def pulse(width_s: float) -> np.ndarray:
    return np.exp(-(((TIME - 700e-6) / width_s) ** 2))


def test_a_pulse_short_against_the_gradient_keeps_its_energy_flux() -> None:
    # Chiddister & Malvern 1963: force by (E_h/E_c)^(1/4) = 0.94574, velocity by its inverse. A pulse of 5 us in a
    # gradient of 1 m (200 us) still feels the gradient by 1e-3.
    end, away = hot_end(1.0), pulse(5e-6)
    back, out = through_hot_end(np.zeros_like(away), away, end, DT)
    assert (out + back).max() == pytest.approx(0.8**0.25, abs=1e-3)
    assert ((out - back) / end.impedance_ratio).max() == pytest.approx(0.8**-0.25, abs=1e-3)


def test_a_pulse_long_against_the_gradient_does_not_feel_it() -> None:
    # The heated length is then a short body between bar and specimen: same force and velocity at both its ends.
    end, away = hot_end(0.05), pulse(250e-6)
    back, out = through_hot_end(np.zeros_like(away), away, end, DT)
    at_face = slice(3000, 12000)
    np.testing.assert_allclose(
        (out + back)[at_face], np.roll(away, -whole_slices(end, DT))[at_face], atol=0.03
    )
    assert (out + back).max() == pytest.approx(1.0, abs=1e-3)


@pytest.mark.parametrize("width_s", [5e-6, 40e-6])
def test_energy_is_kept(width_s: float) -> None:
    end, away = hot_end(0.3), pulse(width_s)
    toward = 0.6 * np.roll(away, -900)
    p, n = through_hot_end(toward, away, end, DT)
    work_at_cold_end = np.sum(toward**2 - away**2)
    assert np.sum((p + n) * (p - n)) / end.impedance_ratio == pytest.approx(work_at_cold_end, rel=1e-9)


def echo_of_a_hot_end(sent: np.ndarray, ratios: np.ndarray, dashpot: float) -> np.ndarray:
    """What comes back from slices of one sample each with a dashpot behind them: scattering, marched in time.

    ``ratios`` are the impedances of the slices by that of the cold bar; so is ``dashpot``, force by velocity.
    """
    before, behind = np.concatenate(([1.0], ratios[:-1])), ratios
    up_share, down_share = 2 * behind / (before + behind), 2 * before / (before + behind)
    mirror = (behind - before) / (before + behind)
    at_end = (dashpot - ratios[-1]) / (dashpot + ratios[-1])
    downward, upward = (
        np.zeros(ratios.size),
        np.zeros(ratios.size),
    )  # arrived at a slice's hot, at its cold side
    echo = np.zeros_like(sent)
    for k, wave in enumerate(sent):
        from_cold = np.concatenate(([wave], downward[:-1]))
        enters = up_share * from_cold - mirror * upward
        leaves = mirror * from_cold + down_share * upward
        echo[k] = leaves[0]
        upward = np.concatenate((leaves[1:], [at_end * downward[-1]]))
        downward = enters
    return echo


@pytest.mark.parametrize("dashpot", [0.0, 0.35, 3.0])
def test_a_dashpot_behind_a_hot_end_is_found_again(dashpot: float) -> None:
    # Scattering marched forwards knows nothing of the program's way back. At the face F = dashpot v must come out.
    end, toward = hot_end(0.2), pulse(20e-6)
    away = echo_of_a_hot_end(toward, end.impedance_ratios(whole_slices(end, DT)), dashpot)
    p, n = through_hot_end(toward, away, end, DT)
    known = slice(0, TIME.size - whole_slices(end, DT))
    force, velocity = (p + n)[known], ((p - n) / end.impedance_ratio)[known]
    np.testing.assert_allclose(force, dashpot * velocity, atol=1e-12)
    assert velocity.max() > 0.4


def test_no_temperature_no_change() -> None:
    away = pulse(20e-6)
    toward = np.roll(away, -500)
    p, n = through_hot_end(toward, away, hot_end(0.1, ratio=1.0), DT)
    shift = whole_slices(hot_end(0.1, ratio=1.0), DT)
    np.testing.assert_array_equal(p[shift:], toward[:-shift])
    np.testing.assert_array_equal(n[:-shift], away[shift:])
    assert 1e6 * hot_end(0.1, ratio=1.0).travel_s == pytest.approx(20.0)


def test_travel_time_is_the_integral() -> None:
    end = hot_end(0.15, ratio=0.7)
    x = (np.arange(200000) + 0.5) / 200000
    speed = 5000 * np.sqrt(1 - 0.3 * x)
    assert end.travel_s == pytest.approx(float(np.mean(0.15 / speed)), rel=1e-9)


def test_an_impossible_face_is_refused() -> None:
    with pytest.raises(InputError, match="modulus at the bar's face"):
        HotEnd(steel_bar(), 293.15 + 500, 0.1, -0.005)


def _hot(**changes: object) -> tuple[Report, object]:
    bar = steel_bar(modulus_temperature_coefficient_per_k=Quantity(-4e-4))
    lab = rig(incident_bar=bar, transmitted_bar=bar)
    faces, _ = uniform_plastic_shot(lab, copper())
    stated = dataclasses.replace(
        sheet(), incident_face_temperature_k=Quantity(793.15), transmitted_face_temperature_k=Quantity(793.15),
        heated_length_m=Quantity(0.06), **changes,
    )  # fmt: skip
    record = record_of(faces, lab)
    hot = reduce(record, lab, stated, Settings(corrections=(Correction.MISMATCH, Correction.BAR_TEMPERATURE)))
    cold = reduce(record, lab, stated)
    return hot.response.correction(Correction.BAR_TEMPERATURE), (hot, cold)


def test_a_shot_with_hot_bar_ends() -> None:
    report, (hot, cold) = _hot()  # type: ignore[misc]
    assert report.applied
    assert "force up to -5.4 %, velocity +5.7 %" in report.size  # 1 - 4e-4 x 500 = 0.8
    assert not cold.response.correction(Correction.BAR_TEMPERATURE).applied
    # The plateau is long against 60 mm of heated bar: in the middle of it force and rate are as without, by 2 %;
    # while the pulses rise (some 20 us, the travel time to and fro) they differ by more.
    middle = sum(cold.response.loading) // 2
    for name in ("stress_pa", "strain_rate_per_s"):
        with_, without = (getattr(r.response.three_wave, name)[middle] for r in (hot, cold))
        assert with_ == pytest.approx(without, rel=0.02)
    rise = slice(hot.response.loading[0], hot.response.loading[0] + 150)
    apart = np.abs(hot.response.motion.force_out_n - cold.response.motion.force_out_n)[rise].max()
    assert 0.005 < apart / cold.response.motion.force_out_n.max() < 0.2


def test_a_heated_length_beyond_the_gauge_is_refused() -> None:
    faces, _ = uniform_plastic_shot(rig(), copper())
    bar = steel_bar(modulus_temperature_coefficient_per_k=Quantity(-4e-4))
    lab = rig(incident_bar=bar, transmitted_bar=bar)
    stated = dataclasses.replace(
        sheet(), transmitted_face_temperature_k=Quantity(793.15), heated_length_m=Quantity(0.7)
    )
    settings = Settings(corrections=(Correction.BAR_TEMPERATURE,))
    report = reduce(record_of(faces, lab), lab, stated, settings).response.correction(
        Correction.BAR_TEMPERATURE
    )
    assert not report.applied
    assert "beyond the transmitted gauge" in report.refused
