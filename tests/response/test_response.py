"""Response of the specimen on shots whose answer is known in closed form or by fine integration."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.reduction import ShotResult, reduce
from shpb.response.equilibrium import Outcome
from shpb.response.flow import back_extrapolated_yield_pa, flow_stresses, plastic_strain
from shpb.response.span import loading_span, rate_summary
from shpb.settings import DEFAULT, Alignment, Analysis, Dispersion
from tests.synthetic import FaceStrains, copper, record_of, rig, sheet, smooth_pulse, uniform_plastic_shot


@pytest.fixture(scope="module")
def plastic() -> tuple[FaceStrains, np.ndarray]:
    return uniform_plastic_shot(rig(), copper())


@pytest.fixture(scope="module")
def result(plastic: tuple[FaceStrains, np.ndarray]) -> ShotResult:
    return reduce(record_of(plastic[0], rig(), noise_v=0.002), rig(), sheet())


def test_a_specimen_in_equilibrium_reads_back(
    result: ShotResult, plastic: tuple[FaceStrains, np.ndarray]
) -> None:
    faces, strain = plastic
    response = result.response
    assert response.equilibrium.outcome is Outcome.REACHED
    assert response.span is not None
    part = slice(*response.span)
    own = response.time_s[part] + result.faces.record_time_of_zero_s - 150e-6
    expected = np.interp(own, faces.time_s, strain)
    # 0.5 % of the strain; a window one microsecond late would cost 1.5 %.
    np.testing.assert_allclose(response.one_wave.strain[part], expected, atol=0.005 * strain.max())
    np.testing.assert_allclose(response.three_wave.strain[part], expected, atol=0.005 * strain.max())
    # Yield 400 MPa, hardening 1 GPa of plastic strain (the elastic share is s/100 GPa).
    stress = 400e6 + 1e9 * (expected - response.one_wave.stress_pa[part] / 100e9)
    inner = slice(75, -60)  # away from the corners, where the low-pass rings
    np.testing.assert_allclose(response.one_wave.stress_pa[part][inner], stress[inner], rtol=0.006)
    np.testing.assert_allclose(response.three_wave.stress_pa[part][inner], stress[inner], rtol=0.012)


def test_rate_of_the_closed_form() -> None:
    # Constant incident strain, rigid-plastic with linear hardening: e' = (2c/L)(I - A_s Y/(E A)) exp(-t/theta),
    # theta = E A L/(2 c A_s H). For 2e-3, 400 MPa, 1 GPa, 10 x 5 mm on these bars: 3000 /s, 400 us, and
    # e(100 us) = 0.265439 (worked out apart from the program).
    lab, specimen = rig(), copper()
    bar = lab.incident_bar
    theta = bar.force_per_strain_n * specimen.length_m / (2 * bar.wave_speed_m_s * specimen.area_m2 * 1e9)
    assert theta == pytest.approx(400e-6)
    time = np.arange(0.0, 100e-6 + 1e-9, 1e-7)
    rate = (
        2 * 5000 / 0.005 * (2e-3 - specimen.area_m2 * 400e6 / bar.force_per_strain_n) * np.exp(-time / theta)
    )
    assert rate[0] == pytest.approx(3000.0)
    stress = 400e6 + 1e9 * theta * 3000.0 * (1 - np.exp(-time / theta))
    transmitted = stress * specimen.area_m2 / bar.force_per_strain_n
    from shpb.response.bar_analysis import face_motion, one_wave
    from shpb.rig.gauge import TestKind
    from tests.published.test_bar_analysis import faces_of

    faces = faces_of(np.full_like(time, 2e-3), transmitted - 2e-3, transmitted, 1e-7)
    curve = one_wave(faces, face_motion(faces, lab), lab, specimen, TestKind.COMPRESSION)
    np.testing.assert_allclose(curve.strain_rate_per_s, rate, rtol=1e-9)
    assert curve.strain[-1] == pytest.approx(0.265439, abs=2e-6)
    np.testing.assert_allclose(curve.stress_pa, stress, rtol=1e-9)


def test_span_begins_in_equilibrium_and_ends_with_the_loading(result: ShotResult) -> None:
    response = result.response
    assert response.span is not None
    start, end = response.time_s[response.span[0]], response.time_s[response.span[1] - 1]
    assert 0 < start < 40e-6
    assert end == pytest.approx(110e-6, abs=12e-6)  # pulse of 100 us, flanks of 25 us
    assert response.strain_span is not None
    assert response.strain_span[0] < 0.05 < response.strain_span[1]


def test_which_curve_is_put_forward() -> None:
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=5e-7)
    record = record_of(faces, rig())
    three = reduce(record, rig(), sheet(), DEFAULT.replaced(analysis=Analysis.THREE_WAVE)).response
    assert three.curve is three.three_wave
    one = reduce(record, rig(), sheet()).response
    assert one.curve is one.one_wave


# --- equilibrium: four outcomes -----------------------------------------------------------------


def out_of_balance(share: float, until_s: float = 1.0) -> FaceStrains:
    """The plastic shot with the front force raised by a share of the back force until a time."""
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=5e-7)
    early = 0.5 * (1 - np.tanh((faces.time_s - until_s) / 3e-6))
    return FaceStrains(
        faces.time_s, faces.incident, faces.reflected + share * early * faces.transmitted, faces.transmitted
    )


def outcome_of(faces: FaceStrains, **settings: object) -> ShotResult:
    return reduce(record_of(faces, rig()), rig(), sheet(), DEFAULT.replaced(**settings))


def test_reached() -> None:
    eq = outcome_of(out_of_balance(0.02)).response.equilibrium
    assert eq.outcome is Outcome.REACHED
    # F_in = 1.02 F_out: R = 2 x 0.02/2.02 throughout.
    assert eq.mean_ratio == pytest.approx(0.0198, abs=0.002)
    assert eq.impulse_ratio == pytest.approx(1 / 1.02, abs=0.002)
    assert eq.nrms == pytest.approx(0.0198, abs=0.002)


def test_reached_late() -> None:
    result = outcome_of(out_of_balance(0.3, until_s=45e-6))
    eq = result.response.equilibrium
    assert eq.outcome is Outcome.REACHED_LATE
    assert eq.strain_at_start is not None
    assert eq.strain_at_start > 0.03
    assert eq.start is not None
    assert result.response.time_s[eq.start] == pytest.approx(48e-6, abs=5e-6)
    assert result.verdict.value == "restrict"


def test_not_reached() -> None:
    result = outcome_of(out_of_balance(0.3))
    eq = result.response.equilibrium
    assert eq.outcome is Outcome.NOT_REACHED
    assert eq.start is None
    assert result.response.span is None
    # 2 x 0.3/2.3 = 0.2609
    assert eq.mean_ratio == pytest.approx(0.2609, abs=0.02)
    assert result.verdict.value == "reject"
    assert all(point.stress_pa is None for point in result.response.flow)
    assert result.response.yield_back_extrapolated_pa is None


def test_cannot_be_decided() -> None:
    # Soft specimen: the forces are a fiftieth of the incident one. With pulses good to 0.5 % the front force is
    # known to 0.005 sqrt(2) x 50 = 35 %, however small R comes out.
    faces, _ = uniform_plastic_shot(rig(), copper(), yield_pa=30e6, hardening_pa=10e6, interval_s=5e-7)
    result = outcome_of(faces)
    eq = result.response.equilibrium
    assert eq.outcome is Outcome.CANNOT_BE_DECIDED
    force = faces.transmitted[(faces.time_s > 40e-6) & (faces.time_s < 90e-6)].mean()
    assert eq.typical_floor == pytest.approx(0.005 * np.hypot(2e-3, 2e-3 - force) / force, rel=0.1)
    assert eq.start is None
    assert result.verdict.value == "reject"
    # With pulses known twenty times better it can be decided.
    assert outcome_of(faces, pulse_error=0.00025).response.equilibrium.outcome is Outcome.REACHED


# --- numbers read off -----------------------------------------------------------------------------


def test_flow_stress_at_plastic_strain_uses_the_given_modulus() -> None:
    strain = np.linspace(0, 0.2, 2001)
    stress = 300e6 + 1e9 * strain
    span = (100, 2001)
    points = flow_stresses(strain, stress, np.full(2001, 1000.0), span, 100e9, (0.05, 0.005, 0.3))
    # e_p = e - (300e6 + 1e9 e)/100e9 => e = (0.05 + 0.003)/0.99
    assert points[0].stress_pa == pytest.approx(300e6 + 1e9 * 0.053 / 0.99, rel=1e-9)
    assert points[0].plastic
    assert points[1].stress_pa is None  # before the span that counts
    assert points[2].stress_pa is None  # beyond it
    total = flow_stresses(strain, stress, np.full(2001, 1000.0), span, None, (0.05,))[0]
    assert not total.plastic
    assert total.stress_pa == pytest.approx(350e6, rel=1e-9)
    np.testing.assert_array_equal(plastic_strain(strain, stress, None), strain)


def test_back_extrapolated_yield() -> None:
    # Line 300 MPa + 1 GPa e meets E e, E = 100 GPa, at s = 300 MPa x 100/99.
    strain = np.linspace(0, 0.2, 2001)
    stress = 300e6 + 1e9 * strain
    found = back_extrapolated_yield_pa(strain, stress, (100, 2001), 100e9)
    assert found == pytest.approx(300e6 * 100 / 99, rel=1e-9)
    assert back_extrapolated_yield_pa(strain, stress, (100, 2001), None) is None
    assert back_extrapolated_yield_pa(strain, stress, (400, 2001), 100e9) is None  # begins at 4 %
    assert back_extrapolated_yield_pa(strain, stress, None, 100e9) is None


def test_loading_ends_where_the_rate_has_fallen_to_a_fifth() -> None:
    time = np.arange(-20e-6, 200e-6, 1e-6)
    rate = smooth_pulse(time, 1000.0, 100e-6, 10e-6)
    first, last = loading_span(rate, time)
    assert time[first] == pytest.approx(0, abs=1e-6)
    # Half-cosine flank: down to 0.2 after 10 us x acos(-0.6)/pi = 7.05 us.
    assert time[last] == pytest.approx(107.05e-6, abs=1.1e-6)
    summary = rate_summary(rate, rate, (first + 15, last))
    assert summary.mean_per_s == pytest.approx(1000, rel=0.01)
    assert summary.least_per_s > 500
    assert summary.variation < 0.1


def test_heating_is_not_silently_in_it_and_indentation_is_shown(result: ShotResult) -> None:
    # About 40 kN on a 10 mm specimen between 20 mm steel bars: some 1 to 3e-3 of strain on 5 mm.
    assert 1e-3 < result.response.indentation_strain[slice(*result.response.loading)].max() < 4e-3
    tension = sheet(kind=__import__("shpb.rig.gauge", fromlist=["TestKind"]).TestKind.TENSION)
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=5e-7)
    pulled = reduce(record_of(faces, rig(), tension.kind), rig(), tension)
    assert not pulled.response.indentation_strain.any()
    assert pulled.response.one_wave.true_strain[-1] < pulled.response.one_wave.strain[-1]


def test_specimen_without_modulus_or_density_still_reduces() -> None:
    bare = copper(young_modulus_pa=None, density_kg_m3=None, length_after_m=Quantity(0.0038))
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=5e-7)
    result = reduce(record_of(faces, rig()), rig(), sheet(bare))
    assert result.response.equilibrium.reverberations is None
    assert not result.response.flow[0].plastic


def test_a_foot_set_by_hand_moves_the_pulse() -> None:
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=5e-7)
    record = record_of(faces, rig(), noise_v=0.002)
    feet = DEFAULT.replaced(alignment=Alignment.FEET)
    own = reduce(record, rig(), sheet(), feet)
    assert own.pulses.reflected.foot is not None
    later = own.pulses.reflected.foot.time_s + 5e-6
    moved = reduce(record, rig(), sheet(), feet.replaced(reflected_foot_s=later))
    # Its foot stands 5 us (and what the face's picker sees differently) later: so much more it is laid back.
    assert moved.faces.reflected_shift_s - own.faces.reflected_shift_s == pytest.approx(-5e-6, abs=1e-6)
    assert moved.pulses.reflected.set_by_hand


def test_settings_are_looked_at_before_they_are_used() -> None:
    assert DEFAULT.replaced(dispersion="none").dispersion is Dispersion.NONE
    for wrong in ({"dispersion": "foo"}, {"cutoff_hz": -1.0}, {"pulse_error": float("nan")}):
        with pytest.raises(InputError, match="settings"):
            DEFAULT.replaced(**wrong)
