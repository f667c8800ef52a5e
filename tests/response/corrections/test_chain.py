"""Corrections of a shot: computed always, applied where asked, refused where they do not hold."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.forward.uniform import FlowCurve, UniformSpecimen, pass_through
from shpb.quantity import Quantity
from shpb.reduction import ShotResult, reduce
from shpb.response.corrections.correction import Report
from shpb.rig.gauge import TestKind
from shpb.settings import Correction, Settings
from shpb.wave.indentation import face_indentation_m
from tests.synthetic import (
    FaceStrains,
    copper,
    gauge,
    record_of,
    rig,
    sheet,
    smooth_pulse,
    steel_bar,
    uniform_plastic_shot,
)

C = Correction
Q = Quantity


@pytest.fixture(scope="module")
def faces() -> FaceStrains:
    return uniform_plastic_shot(rig(), copper())[0]


def reduced(faces: FaceStrains, *corrections: Correction, **specimen: object) -> ShotResult:
    lab = rig()
    shot = sheet(copper(**specimen))
    return reduce(record_of(faces, lab), lab, shot, Settings(corrections=(C.MISMATCH, *corrections)))


def report(result: ShotResult, which: Correction) -> Report:
    return result.response.correction(which)


def test_every_correction_reports_on_every_shot(faces: FaceStrains) -> None:
    result = reduced(faces)
    assert [one.correction for one in result.response.corrections] == [
        C.GAUGE_RISE, C.BAR_TEMPERATURE, C.MISMATCH, C.INDENTATION, C.INERTIA, C.FRICTION, C.HEATING,
    ]  # fmt: skip
    for one in result.response.corrections:
        assert one.size
        assert one.fact.source
        assert one.fact.holds_for
        assert one.applied is (one.correction is C.MISMATCH)


def test_indentation_is_taken_off_strain_and_rate(faces: FaceStrains) -> None:
    with_, without = reduced(faces, C.INDENTATION), reduced(faces)
    off = report(with_, C.INDENTATION).off.strain
    assert isinstance(off, np.ndarray)
    before, after = without.response.three_wave, with_.response.three_wave
    np.testing.assert_allclose(after.strain, before.strain - off, atol=1e-12)
    np.testing.assert_allclose(after.true_strain, -np.log1p(-after.strain), atol=1e-12)
    # Stress is as it was; the true stress acts on an area that has grown less.
    np.testing.assert_array_equal(after.stress_pa, before.stress_pa)
    # Rate is the slope of strain, also with what was taken off.
    slope = np.gradient(after.strain, with_.response.time_s)
    part = slice(with_.response.loading[0] + 5, with_.response.loading[1] - 5)
    np.testing.assert_allclose(after.strain_rate_per_s[part], slope[part], atol=15)
    # In the middle of the loading: both faces by the formula, with the radius at constant volume.
    at = sum(with_.response.loading) // 2
    radius = 0.005 / np.sqrt(1 - before.strain[at])
    force = without.response.motion
    each = [
        face_indentation_m(np.array([f[at]]), np.array([radius]), steel_bar())[0]
        for f in (force.force_in_n, force.force_out_n)
    ]
    assert off[at] == pytest.approx(sum(each) / 0.005, rel=1e-9)
    assert not with_.response.elastic_faces_strain.any()
    np.testing.assert_array_equal(without.response.elastic_faces_strain, without.response.indentation_strain)


def test_each_analysis_gets_the_inertia_of_the_face_it_looks_at(faces: FaceStrains) -> None:
    with_, without = reduced(faces, C.INERTIA), reduced(faces)
    off = report(with_, C.INERTIA).off
    for name, taken in zip(("one_wave", "two_wave", "three_wave"), off[1:], strict=True):
        after, before = getattr(with_.response, name), getattr(without.response, name)
        np.testing.assert_allclose(after.stress_pa, before.stress_pa - taken, atol=1.0)
    # The mean of both faces is what the three-wave analysis looks at.
    np.testing.assert_allclose(
        off.stress_3w_pa, 0.5 * (np.asarray(off.stress_1w_pa) + off.stress_2w_pa), atol=1e-3
    )
    # Momentum: front less back face, by area, is the specimen's mass times the acceleration of its middle.
    at = slice(*without.response.loading)
    motion, time = without.response.motion, without.response.time_s
    middle = 0.5 * (motion.velocity_in_m_s + motion.velocity_out_m_s)
    specimen = copper()
    mass = 8900.0 * specimen.area_m2 * specimen.length_m
    force = (np.asarray(off.stress_2w_pa) - off.stress_1w_pa) * specimen.area_m2
    # Band-limited records: the derivative of strain times length and of velocity agree by a few per cent of the peak.
    expected = mass * np.gradient(middle, time)
    assert np.abs(force - expected)[at].max() < 0.05 * np.abs(expected)[at].max()


def test_friction_divides_the_stress(faces: FaceStrains) -> None:
    with_ = reduced(faces, C.FRICTION, friction_coefficient=Q(0.06))
    without = reduced(faces, friction_coefficient=Q(0.06))
    at = sum(with_.response.loading) // 2
    strain = without.response.three_wave.strain[at]
    # mu d/h with d and h as they are by then: d0/h0 = 2 grows by (1 - e)^(-3/2). Rand's quotient.
    c = 0.06 * 2 * (1 - strain) ** -1.5
    factor = 2 * (np.exp(c) - c - 1) / c**2
    ratio = without.response.one_wave.stress_pa[at] / with_.response.one_wave.stress_pa[at]
    assert ratio == pytest.approx(factor, rel=1e-9)
    assert 1.03 < ratio < 1.08


def test_isothermal_stress_is_higher_where_heat_softens(faces: FaceStrains) -> None:
    thermal = {"heat_capacity_j_kg_k": Q(385.0), "stress_slope_per_k": Q(-8e-4)}
    with_, without = reduced(faces, C.HEATING, **thermal), reduced(faces, **thermal)
    warm = without.response.heating_k
    assert warm is not None
    at = without.response.loading[1] - 1
    curve = without.response.three_wave
    plastic = np.maximum.accumulate(curve.true_strain - curve.true_stress_pa / 120e9)
    part = slice(without.response.loading[0], at + 1)
    work = np.trapezoid(curve.true_stress_pa[part], plastic[part])
    # Taylor-Quinney share 0.9 by default; the first samples, before any plastic strain, hold nothing.
    assert warm[at] == pytest.approx(0.9 * work / (8900 * 385), rel=2e-3)
    ratio = with_.response.one_wave.stress_pa[at] / without.response.one_wave.stress_pa[at]
    # Laid on the time axis from a thinned grid, where the end of the loading is a corner.
    assert ratio == pytest.approx(1 / (1 - 8e-4 * warm[at]), rel=2e-5)
    assert np.all(np.diff(warm[part]) >= 0)


def test_gauge_rise_sharpens_the_fronts(faces: FaceStrains) -> None:
    # A gauge of 8 mm shows 94 % at 120 kHz and 5000 m/s: sin(0.192 pi)/(0.192 pi). A record without averaging is
    # sharpened by what the gauge is said to take.
    def with_gauge(length_m: float) -> ShotResult:
        lab = rig(
            incident_gauge=gauge("A", 1.0, length_m=Q(length_m)),
            transmitted_gauge=gauge("B", 0.6, length_m=Q(length_m)),
        )
        return reduce(
            record_of(faces, lab), lab, sheet(copper()), Settings(corrections=(C.MISMATCH, C.GAUGE_RISE))
        )

    plain, sharp = reduced(faces), with_gauge(8e-3)
    assert report(sharp, C.GAUGE_RISE).applied
    before = np.fft.rfft(plain.faces.incident.strain)
    after = np.fft.rfft(sharp.faces.incident.strain)
    frequency = np.fft.rfftfreq(plain.faces.incident.strain.size, plain.faces.interval_s)
    band = (frequency > 5e3) & (frequency < 60e3) & (np.abs(before) > 0.02 * np.abs(before).max())
    np.testing.assert_allclose(
        np.abs(after / before)[band], 1 / np.sinc(frequency * 8e-3 / 5000)[band], rtol=5e-3
    )
    # sin(x)/x = 1/2 at x = 1.8955: a gauge of 20 mm shows half at f = 1.8955 c/(pi L) = 150.8 kHz, and no further is it
    # undone. The window's bins are some 1.4 kHz wide. Looked at where the trace before the pulse is silent.
    long = with_gauge(20e-3)
    assert report(long, C.GAUGE_RISE).applied
    assert long.faces.undone_hz[2] == pytest.approx(1.8955 * 5000 / (np.pi * 20e-3), abs=4e3)


def test_unequal_bars_need_the_mismatch_term() -> None:
    # The same specimen between steel and a lighter bar: with the term one- and three-wave strain agree, without not.
    light = steel_bar(density_kg_m3=Q(2700.0), material="aluminium")
    lab = rig(transmitted_bar=light)
    bar = lab.incident_bar
    time = np.arange(-40e-6, 220e-6, 2e-7)
    incident = smooth_pulse(time, 2e-3, 100e-6, 25e-6)
    specimen = UniformSpecimen(
        0.005, copper().area_m2, 100e9, 0.0, FlowCurve(np.array([0.0, 1.0]), np.array([4e8, 1.4e9]))
    )
    passed = pass_through(
        bar.force_per_strain_n * incident, 2e-7, specimen, (bar.impedance_n_s_m, light.impedance_n_s_m)
    )
    reflected = passed.force_in_n / bar.force_per_strain_n - incident
    faces = FaceStrains(time, incident, reflected, passed.force_out_n / light.force_per_strain_n)
    record = record_of(faces, lab)

    def apart(settings: Settings) -> float:
        response = reduce(record, lab, sheet(), settings).response
        at = sum(response.loading) // 2
        return float(response.one_wave.strain[at] / response.three_wave.strain[at] - 1)

    assert abs(apart(Settings())) < 0.01
    assert abs(apart(Settings(equal_bars=True))) > 0.1


@pytest.mark.parametrize(
    ("which", "specimen", "why"),
    [
        (C.INERTIA, {"density_kg_m3": None}, "needs the specimen's density"),
        (C.FRICTION, {}, "needs friction_coefficient"),
        (C.FRICTION, {"friction_coefficient": Q(0.45)}, "may stick"),
        (C.HEATING, {}, "density and heat capacity"),
        (C.HEATING, {"heat_capacity_j_kg_k": Q(385.0)}, "states no temperature sensitivity"),
        (C.INDENTATION, {"diameter_m": Q(0.0178)}, "of the bar's radius"),
        (C.BAR_TEMPERATURE, {}, "no temperature of the bar faces"),
        (C.GAUGE_RISE, {}, "neither gauge length nor bandwidth"),
    ],
)
def test_refusals_say_why_and_leave_the_curve_alone(
    faces: FaceStrains, which: Correction, specimen: dict[str, object], why: str
) -> None:
    asked, plain = reduced(faces, which, **specimen), reduced(faces, **specimen)
    found = report(asked, which)
    assert not found.applied
    assert why in found.refused
    assert found.state.startswith("refused")
    np.testing.assert_array_equal(asked.response.curve.true_stress_pa, plain.response.curve.true_stress_pa)
    np.testing.assert_array_equal(asked.response.curve.true_strain, plain.response.curve.true_strain)


def test_in_tension_nothing_presses_on_the_faces() -> None:
    faces, _ = uniform_plastic_shot(rig(), copper())
    shot = dataclasses.replace(sheet(copper(friction_coefficient=Q(0.05))), kind=TestKind.TENSION)
    record = record_of(faces, rig(), TestKind.TENSION)
    every = Settings(corrections=(C.INDENTATION, C.INERTIA, C.FRICTION))
    result = reduce(record, rig(), shot, every)
    for which in (C.INDENTATION, C.INERTIA, C.FRICTION):
        assert report(result, which).refused
    assert not result.response.indentation_strain.any()
