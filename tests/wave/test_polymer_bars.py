"""Polymer bars from calibration to curve: forces and velocities set at the faces come back through the measured table.

The strains at the gauges follow from forces and velocities at the faces in closed form: in a bar of complex modulus
E* = rho c*^2 one wave of force F has the velocity F/(rho c* A) and the strain F/(E* A), and travels as exp(-i w x/c*)
(C. Bacon, Exp. Mech. 38 (1998) 242-249; H. Zhao, G. Gary, J. Mech. Phys. Solids 43 (1995) 1335-1348).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.calibrate.propagation.complex_propagation import MeasuredPropagation, complex_propagation
from shpb.pulse.bridge import bridge_output
from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.reduction import ShotResult, reduce
from shpb.response.bar_analysis import FaceMotion
from shpb.response.equilibrium import Outcome
from shpb.rig.propagation_table import PropagationTable
from shpb.rig.rig import Rig
from shpb.settings import Settings
from shpb.trust.carry import ALL_OUTPUTS
from shpb.trust.finding import Weight
from tests.polymer import Solid, apart, polymer_bar, polymer_rig, spectrum_of
from tests.synthetic import copper, sheet, smooth_pulse
from tests.wave.test_complex_propagation import solid_table

Array = NDArray[np.float64]
SOLID = Solid()  # loss tangent up to 0.057, at 14 kHz: the order of acrylic glass
DT, SAMPLES, BEFORE_S = 1e-6, 1600, 700e-6
LENGTH_M, AREA_M2 = 5e-3, np.pi * 25e-6
TIME = DT * np.arange(float(SAMPLES)) - BEFORE_S  # zero is where the load reaches the specimen


@dataclass(frozen=True)
class Truth:
    """At both faces, on ``TIME``."""

    force_n: Array
    velocity_in_m_s: Array
    velocity_out_m_s: Array


def at_faces_and_gauges(lab: Rig) -> tuple[Truth, Array]:
    """60 MPa in equilibrium at 1500 /s, and the strains that this makes at both gauges, shape (2, samples)."""
    force = smooth_pulse(TIME, 60e6 * AREA_M2, 160e-6, 70e-6)
    closing = smooth_pulse(TIME, 1500 * LENGTH_M, 150e-6, 80e-6)
    length = 16 * SAMPLES
    frequency = np.fft.rfftfreq(length, DT)
    speed, xi = SOLID.speed_m_s(frequency), SOLID.xi_per_m(frequency)
    area = lab.incident_bar.area_m2
    f, closed = spectrum_of(force, length), spectrum_of(closing, length)
    impedance, stiffness = SOLID.density_kg_m3 * speed * area, SOLID.density_kg_m3 * speed**2 * area
    v_out = f / impedance  # one wave leaves through the transmitted bar
    v_in = v_out + closed
    # F = F_I + F_R and v = (F_I - F_R)/(rho c* A) at the incident face.
    toward, away = 0.5 * (f + impedance * v_in), 0.5 * (f - impedance * v_in)
    x_i, x_t = float(lab.incident_gauge.to_specimen_m), float(lab.transmitted_gauge.to_specimen_m)
    at_i = (toward * np.exp(xi * x_i) + away * np.exp(-xi * x_i)) / stiffness
    at_t = f * np.exp(-xi * x_t) / stiffness

    def back(spectrum: NDArray[np.complex128]) -> Array:
        return np.asarray(np.fft.irfft(spectrum, length)[:SAMPLES])

    return Truth(force, back(v_in), back(v_out)), np.stack((back(at_i), back(at_t)))


def record_of(strains: Array, lab: Rig, noise: float, seed: int) -> Record:
    """Volts with noise, a share of each channel's peak."""
    stations = (lab.incident_gauge, lab.incident_bar), (lab.transmitted_gauge, lab.transmitted_bar)
    volts = np.stack(
        [
            bridge_output(-strain, gauge, bar.poisson_ratio)
            for strain, (gauge, bar) in zip(strains, stations, strict=True)
        ]
    )
    peaks = np.abs(volts).max(axis=1, keepdims=True)
    volts = volts + noise * peaks * np.random.default_rng(seed).standard_normal(volts.shape)
    return Record(voltage_v=volts, sample_interval_s=DT, start_s=-BEFORE_S, channels=("A", "B"))


@pytest.fixture(scope="module")
def measured() -> MeasuredPropagation:
    """Four shots of the incident bar by itself, noise of 0.05 % of the peak."""
    lab = polymer_rig(SOLID)
    shots = [
        apart(
            SOLID,
            lab,
            shot_id=f"P{k}",
            noise=5e-4,
            seed=20 + k,
            duration_s=16e-6,
            height=1e-3 * (1 + 0.2 * k),
        )
        for k in range(4)
    ]
    return complex_propagation(shots, lab, "incident")


def elastic_rig(speed_m_s: float) -> Rig:
    """What one would state without a table: one speed, and E = rho c^2."""
    bar = polymer_bar(SOLID, wave_speed_m_s=Quantity(speed_m_s))
    return polymer_rig(SOLID, incident_bar=bar, transmitted_bar=bar)


def calibrated_rig(measured: MeasuredPropagation, c0: float | None = None) -> Rig:
    """Both bars of one stock, with what was measured."""
    speed = measured.determination.quantity("incident bar: wave speed") if c0 is None else Quantity(c0)
    bar = polymer_bar(SOLID, wave_speed_m_s=speed, propagation=measured.table)
    return polymer_rig(SOLID, incident_bar=bar, transmitted_bar=bar)


def with_table(table: PropagationTable) -> Rig:
    bar = polymer_bar(SOLID, propagation=table)
    return polymer_rig(SOLID, incident_bar=bar, transmitted_bar=bar)


def reduced(lab: Rig, noise: float = 1e-3) -> ShotResult:
    _, strains = at_faces_and_gauges(lab)
    return reduce(record_of(strains, lab, noise, 3), lab, sheet(copper()), Settings())


def worst(result: ShotResult, truth: Truth) -> dict[str, float]:
    """Greatest error over the loading by the greatest value."""
    motion: FaceMotion = result.response.motion
    clock = result.faces.time_s + result.faces.record_time_of_zero_s
    part = (clock > -30e-6) & (clock < 220e-6)
    found = {}
    for name, of_truth in (
        ("force_in_n", truth.force_n),
        ("force_out_n", truth.force_n),
        ("velocity_in_m_s", truth.velocity_in_m_s),
        ("velocity_out_m_s", truth.velocity_out_m_s),
    ):
        expected = np.interp(clock, TIME, of_truth)
        found[name] = float(np.abs(getattr(motion, name) - expected)[part].max() / np.abs(of_truth).max())
    return found


def test_forces_and_velocities_come_back_through_the_measured_table(measured: MeasuredPropagation) -> None:
    truth, _ = at_faces_and_gauges(polymer_rig(SOLID))
    result = reduced(calibrated_rig(measured))
    # The low-pass ends with the table; the pulses rise in 70 us.
    assert result.faces.low_pass.stop_hz == pytest.approx(measured.table.frequency_hz[-1])
    assert result.faces.low_pass.stop_hz > 40e3
    by_table = worst(result, truth)
    assert max(by_table.values()) < 0.01
    # No single speed does: neither that of slow waves, nor of 8 kHz, nor of fronts.
    for speed in (SOLID.slow_m_s, float(SOLID.speed_m_s(np.array([8e3])).real[0]), 2130.0):
        elastic = worst(reduced(elastic_rig(speed)), truth)
        assert elastic["force_in_n"] > 0.10
        assert elastic["force_out_n"] > 0.03
        assert elastic["velocity_in_m_s"] > 0.03


def test_the_exact_table_leaves_what_the_low_pass_takes() -> None:
    truth, _ = at_faces_and_gauges(polymer_rig(SOLID))
    assert max(worst(reduced(with_table(solid_table(SOLID)), noise=0.0), truth).values()) < 0.003


def test_the_curve_is_that_of_the_specimen(measured: MeasuredPropagation) -> None:
    result = reduced(calibrated_rig(measured))
    response = result.response
    clock = response.time_s + result.faces.record_time_of_zero_s
    flat = (clock > 90e-6) & (clock < 140e-6)  # force and rate are constant
    for curve in (response.one_wave, response.two_wave, response.three_wave):
        np.testing.assert_allclose(curve.stress_pa[flat], 60e6, rtol=0.01)
        np.testing.assert_allclose(curve.strain_rate_per_s[flat], 1500.0, rtol=0.01)
    assert response.equilibrium.outcome is Outcome.REACHED
    # Where travel times put the feet: by the speed of fronts.
    assert result.faces.reflected_misalignment_s == pytest.approx(0.0, abs=3e-6)
    assert not [one for one in result.findings if one.weight in (Weight.RESTRICT, Weight.REJECT)]


def test_the_reference_speed_has_no_say(measured: MeasuredPropagation) -> None:
    one, other = (reduced(calibrated_rig(measured, c0), noise=0.0) for c0 in (2000.0, 2100.0))
    clock = np.linspace(-20e-6, 220e-6, 200)
    for name in ("force_in_n", "force_out_n", "velocity_in_m_s", "velocity_out_m_s"):
        a, b = (
            np.interp(clock, r.faces.time_s + r.faces.record_time_of_zero_s, getattr(r.response.motion, name))
            for r in (one, other)
        )
        # The windows lie where the speed of fronts lays them, with a lead of 12 a/c0; grids differ.
        np.testing.assert_allclose(a, b, atol=1.5e-3 * np.abs(a).max())


@pytest.mark.parametrize("side", ["attenuation", "speed"])
def test_the_budget_says_what_an_error_of_the_table_does(side: str) -> None:
    table = solid_table(SOLID)
    points = len(table.frequency_hz)
    share = 0.004
    known = replace(
        table,
        u_attenuation_per_m=(0.03,) * points,
        u_phase_speed_m_s=tuple(share * c for c in table.phase_speed_m_s),
    )
    if side == "attenuation":
        wrong = replace(known, attenuation_per_m=tuple(a + 0.03 for a in known.attenuation_per_m))
    else:
        wrong = replace(known, phase_speed_m_s=tuple((1 + share) * c for c in known.phase_speed_m_s))
    right, off = (reduced(with_table(one), noise=0.0) for one in (known, wrong))
    name = "bars: attenuation" if side == "attenuation" else "bars: wave speed"
    (line,) = (one for one in right.budget.contributions if one.source == name)
    start, stop = right.response.span or right.response.loading
    middle = (start + stop) // 2
    at = right.response.time_s[middle] + right.faces.record_time_of_zero_s
    for row, curve in ((0, "one_wave"), (3, "three_wave")):
        u = right.budget.u_of(ALL_OUTPUTS[row])[middle]
        stress = [
            float(
                np.interp(
                    at,
                    r.response.time_s + r.faces.record_time_of_zero_s,
                    getattr(r.response, curve).stress_pa,
                )
            )
            for r in (right, off)
        ]
        assert np.sqrt(line.share[row]) * u == pytest.approx(abs(stress[1] - stress[0]), rel=0.15)
