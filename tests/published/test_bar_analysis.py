"""Worked numbers of the bar analysis and its identities.

Sources: Kolsky 1949, Lindholm 1964, Gray 2000 (formulas); numbers are exact arithmetic done apart from the program.
"""

from __future__ import annotations

import numpy as np
import pytest

from shpb.pulse.arrivals import geometric_arrivals
from shpb.pulse.pulse import Pulse, Pulses
from shpb.pulse.zero_line import ZeroLine
from shpb.quantity import Quantity
from shpb.response.balance import work_balance
from shpb.response.bar_analysis import face_motion, integrated, one_wave, three_wave, two_wave
from shpb.rig.gauge import TestKind
from shpb.rig.rig import Rig
from shpb.settings import DEFAULT
from shpb.wave.faces import FacePulses, low_pass_of
from shpb.wave.indentation import face_indentation_m
from shpb.wave.propagation import CarriedPulse
from tests.synthetic import copper, rig, steel_bar


def faces_of(
    incident: np.ndarray, reflected: np.ndarray, transmitted: np.ndarray, interval: float
) -> FacePulses:
    def carried(strain: np.ndarray) -> CarriedPulse:
        return CarriedPulse(strain, strain, strain)

    return FacePulses(
        time_s=interval * np.arange(incident.size),
        interval_s=interval,
        record_time_of_zero_s=0.0,
        incident=carried(incident),
        reflected=carried(reflected),
        transmitted=carried(transmitted),
        low_pass=low_pass_of(rig(), DEFAULT),
        reflected_misalignment_s=None,
        transmitted_misalignment_s=None,
        u_misalignment_s=0.0,
        whole=incident.size,
    )


def pulses_of(faces: FacePulses) -> Pulses:
    """The same pulses at gauges that sit on the faces."""

    def pulse(name: str, strain: np.ndarray) -> Pulse:
        zero = ZeroLine(level=0.0, slope=0.0, centre=0.0, u_level=0.0, u_slope=0.0, quiet=())
        return Pulse(
            name=name, strain=strain, start_s=0.0, window_s=(0.0, 1.0), automatic_window_s=(0.0, 1.0), foot=None,
            automatic_foot=None, zero=zero, noise=0.0,
        )  # fmt: skip

    return Pulses(
        incident=pulse("incident", faces.incident.strain),
        reflected=pulse("reflected", faces.reflected.strain),
        transmitted=pulse("transmitted", faces.transmitted.strain),
        arrivals=geometric_arrivals(0.0, rig(), copper()),
        sample_interval_s=faces.interval_s,
        tail_at_reflection=0.0,
    )


def constant(value: float, samples: int = 1001) -> np.ndarray:
    return np.full(samples, value)


def test_bar_constants() -> None:
    bar = steel_bar()
    assert bar.young_modulus_pa == pytest.approx(200e9)
    assert bar.area_m2 == pytest.approx(3.14159265e-4, rel=1e-8)
    assert bar.impedance_n_s_m == pytest.approx(12566.3706, rel=1e-8)
    assert bar.force_per_strain_n == pytest.approx(62.831853e6, rel=1e-8)


@pytest.mark.parametrize("kind", list(TestKind))
def test_equilibrium_shot_of_500_mpa_at_2750_per_second(kind: TestKind) -> None:
    # Striker of the bar's own kind at 20 m/s: I = 2e-3; specimen 10 x 5 mm at 500 MPa: T = 6.25e-4, R = -1.375e-3.
    faces = faces_of(constant(2.0e-3), constant(-1.375e-3), constant(6.25e-4), 1e-7)
    lab, specimen = rig(), copper()
    motion = face_motion(faces, lab)
    assert motion.velocity_in_m_s[0] == pytest.approx(5000 * 3.375e-3)
    for curve in (
        one_wave(faces, motion, lab, specimen, kind),
        two_wave(faces, motion, lab, specimen, kind),
        three_wave(faces, motion, specimen, kind),
    ):
        np.testing.assert_allclose(curve.stress_pa, 500e6, rtol=1e-12)
        np.testing.assert_allclose(curve.strain_rate_per_s, 2750.0, rtol=1e-12)
        assert curve.strain[-1] == pytest.approx(0.275, rel=1e-12)
        if kind is TestKind.COMPRESSION:
            assert curve.true_strain[-1] == pytest.approx(0.32158, abs=5e-6)
            assert curve.true_stress_pa[-1] == pytest.approx(500e6 * 0.725, rel=1e-12)
        else:
            assert curve.true_strain[-1] == pytest.approx(np.log(1.275), rel=1e-12)
            assert curve.true_stress_pa[-1] == pytest.approx(500e6 * 1.275, rel=1e-12)


def test_each_bar_has_its_own_values() -> None:
    # Aluminium output bar of 16 mm; the specimen transmits 30 kN in equilibrium and closes at 12 m/s.
    aluminium = steel_bar(
        density_kg_m3=Quantity(2700.0), wave_speed_m_s=Quantity(5050.0), diameter_m=Quantity(0.016)
    )
    lab: Rig = rig(transmitted_bar=aluminium)
    force, closing = 30e3, 12.0
    transmitted = force / aluminium.force_per_strain_n
    v_out = force / aluminium.impedance_n_s_m
    v_in = v_out + closing
    # F = E A (I + R), v = c (I - R)
    total, difference = force / lab.incident_bar.force_per_strain_n, v_in / lab.incident_bar.wave_speed_m_s
    faces = faces_of(
        constant((total + difference) / 2), constant((total - difference) / 2), constant(transmitted), 1e-7
    )
    motion, specimen, kind = face_motion(faces, lab), copper(), TestKind.COMPRESSION
    for curve in (
        one_wave(faces, motion, lab, specimen, kind),
        two_wave(faces, motion, lab, specimen, kind),
        three_wave(faces, motion, specimen, kind),
    ):
        np.testing.assert_allclose(curve.stress_pa, force / specimen.area_m2, rtol=1e-12)
        np.testing.assert_allclose(curve.strain_rate_per_s, closing / specimen.length_m, rtol=1e-12)


def test_work_identity_holds_for_any_pulses() -> None:
    # W_I - W_R - W_T = integral of (F1 v1 - F2 v2), exactly, equilibrium or not.
    rng = np.random.default_rng(7)
    pulses = [np.cumsum(rng.normal(0, 1e-5, 4000)) for _ in range(3)]
    faces = faces_of(*pulses, 2e-7)
    lab = rig()
    motion = face_motion(faces, lab)
    curve = three_wave(faces, motion, copper(), TestKind.COMPRESSION)
    balance = work_balance(pulses_of(faces), faces, curve, lab, copper(), (0, 4000), None)
    power = motion.force_in_n * motion.velocity_in_m_s - motion.force_out_n * motion.velocity_out_m_s
    assert balance.work_j == pytest.approx(power.sum() * 2e-7, rel=1e-10)
    # ... = specimen work + integral of (F1 - F2)(v1 + v2)/2
    rest = (motion.force_in_n - motion.force_out_n) * (motion.velocity_in_m_s + motion.velocity_out_m_s) / 2
    assert balance.work_j == pytest.approx(balance.specimen_work_j + rest.sum() * 2e-7, rel=1e-10)


def test_striker_momentum_and_energy() -> None:
    # A square pulse of V/(2 c0) lasting 2 L/c0 holds the striker's whole momentum and energy: 20 m/s, 0.3 m.
    lab = rig()
    samples = int(120e-6 / 1e-7)
    faces = faces_of(constant(2e-3, samples), constant(0.0, samples), constant(0.0, samples), 1e-7)
    motion = face_motion(faces, lab)
    curve = three_wave(faces, motion, copper(), TestKind.COMPRESSION)
    balance = work_balance(pulses_of(faces), faces, curve, lab, copper(), (0, samples), 20.0)
    assert motion.force_in_n[0] == pytest.approx(125.6637e3, rel=1e-6)
    assert balance.incident_impulse_n_s == pytest.approx(balance.striker_momentum_n_s, rel=1e-12)
    mass = 8000 * 0.3 * np.pi * 0.01**2
    assert balance.incident_work_j == pytest.approx(0.5 * mass * 20.0**2, rel=1e-12)


def test_offset_of_the_zero_line_becomes_strain() -> None:
    # 2 c0 delta t/L: 5 microstrain over 100 us on a 5 mm specimen is 1.0e-3 of strain and 10 /s of rate.
    faces = faces_of(constant(0.0), constant(-5e-6), constant(0.0), 1e-7)
    lab = rig()
    curve = one_wave(faces, face_motion(faces, lab), lab, copper(), TestKind.COMPRESSION)
    assert curve.strain_rate_per_s[0] == pytest.approx(10.0)
    assert curve.strain[-1] == pytest.approx(1.0e-3)


def test_running_integral_is_exact_for_a_straight_line() -> None:
    time = np.linspace(0, 2, 41)
    np.testing.assert_allclose(integrated(3 * time + 1, 0.05), 1.5 * time**2 + time, atol=1e-12)


def test_indentation_of_a_half_space() -> None:
    # F = 20 kN, a_s = 2.5 mm, E = 200 GPa, nu = 0.3: 18.20 um rigid, 19.67 um uniform (classical elasticity).
    wide = steel_bar(diameter_m=Quantity(50.0), length_m=Quantity(1e3), poisson_ratio=Quantity(0.3))
    force, radius = np.array([20e3]), np.array([2.5e-3])
    assert 1e6 * face_indentation_m(force, radius, wide, rigid=True)[0] == pytest.approx(18.20, abs=0.02)
    assert 1e6 * face_indentation_m(force, radius, wide)[0] == pytest.approx(19.67, abs=0.02)


def test_indentation_of_a_finite_bar_follows_the_table() -> None:
    from tests.published.test_bridge import rows

    for row in rows("bar_face_indentation.csv"):
        nu, ratio = float(row["nu"]), float(row["a_s_over_a"])
        bar = steel_bar(poisson_ratio=Quantity(nu))
        radius = np.array([ratio * bar.radius_m])
        unit = (1 - nu**2) / (bar.young_modulus_pa * radius[0])
        for column, rigid in (("K_uniform", False), ("K_rigid", True)):
            found = face_indentation_m(np.array([1.0]), radius, bar, rigid=rigid)[0] / unit
            # The values at nu = 0.30 serve every bar: at most 0.7 % off near the rim, 0.3 % elsewhere.
            assert found == pytest.approx(float(row[column]), rel=8e-3)
