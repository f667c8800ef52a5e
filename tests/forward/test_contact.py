"""Bar faces that give way: closed forms, energy, momentum, symmetry, and gaps that open and close in time.

Indentation u = K F (1 - nu^2)/(E a_s): half-space K = 16/(3 pi^2) for uniform pressure and 1/2 for a rigid punch are
classical elasticity; K = 0.221593 (uniform) and 0.184841 (rigid) at a_s/a = 0.5, nu = 0.30 are static finite
elements made independently of this package (tests/published/reference/bar_face_indentation.csv).
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.forward.contact import FaceSprings
from shpb.forward.flow import FlowLaw
from shpb.forward.specimen import SpecimenHistory, SpecimenModel, SpecimenRun, longest_time_step_s
from tests.forward.conftest import Q, bar

STEEL = bar(poisson_ratio=Q(0.30))  # E = 200 GPa
Z = STEEL.impedance_n_s_m
WIDE = 1e3  # radius of a bar that is a half-space to any specimen [m]


def springs(bar_radius_m: float = 0.01, *, rigid: bool = False) -> FaceSprings:
    return FaceSprings(np.full((1, 2), bar_radius_m), np.full((1, 2), 0.91 / 200e9), rigid)


def marcher(
    specimen: SpecimenModel, step: float, faces: FaceSprings | None, elements: int = 4
) -> SpecimenRun:
    return SpecimenRun(
        [specimen], np.array([Z]), np.array([Z]), np.array([293.15]),
        elements=elements, time_step_s=step, springs=faces,
    )  # fmt: skip


def squeezed(
    specimen: SpecimenModel, force_n: FloatArray, step: float, faces: FaceSprings
) -> SpecimenHistory:
    """The same wave comes to both faces."""
    return marcher(specimen, step, faces).march(force_n[None, :], force_n[None, :])


def integral(values: FloatArray, step: float) -> FloatArray:
    """By the trapezoidal rule, up to each sample."""
    return (np.cumsum(values) - 0.5 * values) * step


def approach(
    history: SpecimenHistory, incident: FloatArray, returning: FloatArray, step: float
) -> FloatArray:
    """How much nearer the bar faces have come, from the waves in the bars alone [m]."""
    front = (2 * incident - history.force_in_n[0]) / Z
    back = (history.force_out_n[0] - 2 * returning) / Z
    return integral(front - back, step)


# Very stiff and almost without mass: what moves are the springs. Half of it gives way by 4e-12 m/N.
STIFF = SpecimenModel(diameter_m=0.020, length_m=0.005, young_modulus_pa=2e12, density_kg_m3=200.0)
STIFF_STEP = 0.5 * longest_time_step_s([STIFF], 1)
OWN_TIME = Z * 0.005 / (2 * 2e12 * math.pi / 4 * 0.020**2)  # its part of the time constant: 50 ns


def springs_of_time_constant(tau_s: float) -> FaceSprings:
    """Z u/F = ``tau_s`` on half-spaces."""
    return FaceSprings(np.full((1, 2), WIDE), np.full((1, 2), tau_s / Z * 0.010 * 3 * np.pi**2 / 16))


@pytest.mark.parametrize(("rigid", "each_um"), [(False, 19.67), (True, 18.20)])
def test_slowly_squeezed_elastic_specimen(rigid: bool, each_um: float) -> None:
    # 20 kN on a specimen of radius 2.5 mm between steel half-spaces: 19.67 um each face by uniform pressure,
    # 18.20 um by a rigid punch; and F L/(E A) of the specimen, 2.55 um at E = 2000 GPa.
    specimen = SpecimenModel(diameter_m=0.005, length_m=0.005, young_modulus_pa=2e12, density_kg_m3=8000.0)
    step = 0.5 * longest_time_step_s([specimen], 4)
    force = 10e3 * np.minimum(1.0, step * np.arange(8000) / 100e-6)
    history = squeezed(specimen, force, step, springs(WIDE, rigid=rigid))
    assert history.force_in_n[0, -1] == pytest.approx(20e3, rel=1e-6)
    shortening = 20e3 * 0.005 / (2e12 * math.pi / 4 * 0.005**2)
    # The wider specimen (half its strain of 5e-4) and as much in its area: 0.03 %; the values' rounding 0.03 %.
    expected = shortening + 2e-6 * each_um
    assert approach(history, force, force, step)[-1] == pytest.approx(expected, rel=8e-4)
    assert 1e6 * history.indentation_in_m[0, -1] == pytest.approx(each_um, abs=0.02)
    assert 1e6 * history.indentation_out_m[0, -1] == pytest.approx(each_um, abs=0.02)


@pytest.mark.parametrize(("rigid", "factor"), [(False, 0.221593), (True, 0.184841)])
def test_a_bar_twice_as_wide_as_the_specimen(rigid: bool, factor: float) -> None:
    specimen = SpecimenModel(diameter_m=0.010, length_m=0.005, young_modulus_pa=2e12, density_kg_m3=8000.0)
    step = 0.5 * longest_time_step_s([specimen], 4)
    force = 10e3 * np.minimum(1.0, step * np.arange(8000) / 100e-6)
    faces = FaceSprings.of_bars([(STEEL, STEEL)], rigid=rigid)
    history = squeezed(specimen, force, step, faces)
    expected = factor * 20e3 * 0.91 / (200e9 * 0.005)
    np.testing.assert_allclose(history.indentation_in_m[0, -1], expected, rtol=1e-3)


def test_the_specimens_current_radius_counts() -> None:
    # Between half-spaces u = 16/(3 pi^2) F (1 - nu^2)/(E a_s), a_s = 2.5 mm/sqrt(1 - e): at e = 0.3 it is 16 % less.
    soft = SpecimenModel(
        diameter_m=0.005, length_m=0.003, young_modulus_pa=1e11, density_kg_m3=8000.0,
        flow=FlowLaw(initial_pa=300e6, hardening_pa=300e6), heat_share=0.0,
    )  # fmt: skip
    step = 0.3 * longest_time_step_s([soft], 4)
    force = 30e3 * np.minimum(1.0, step * np.arange(2000) / 20e-6)
    history = marcher(soft, step, springs(WIDE), elements=1).march(force[None, :], force[None, :])
    e = history.eng_strain[0, -1]
    assert 0.25 < e < 0.5
    expected = 16 / (3 * np.pi**2) * history.force_in_n[0, -1] * 0.91 / (200e9 * 0.0025) * math.sqrt(1 - e)
    assert history.indentation_in_m[0, -1] == pytest.approx(expected, rel=1e-5)


def test_a_step_of_force_comes_in_with_the_time_constant() -> None:
    # F + tau dF/dt = 2 p with the specimen at rest: F = 2 p (1 - exp(-t/tau)), tau = Z u/F; and u = C F.
    tau = 40 * STIFF_STEP
    time = STIFF_STEP * np.arange(400)
    run = marcher(STIFF, STIFF_STEP, springs_of_time_constant(tau), elements=1)
    history = run.march(np.full((1, 400), 100.0), np.full((1, 400), 100.0))
    expected = 200.0 * (1 - np.exp(-time / (tau + OWN_TIME)))
    # The jump itself is smeared over a step, a fortieth of the time constant.
    np.testing.assert_allclose(history.force_in_n[0], expected, atol=200.0 / 40)
    np.testing.assert_allclose(history.indentation_in_m, tau / Z * history.force_in_n, rtol=1e-3)


@pytest.mark.parametrize("share", [0.5, 0.05, 1e-3])
def test_a_spring_stiffer_than_the_step_can_follow_does_not_ring(share: float) -> None:
    run = marcher(STIFF, STIFF_STEP, springs_of_time_constant(share * STIFF_STEP), elements=1)
    force = run.march(np.full((1, 400), 100.0), np.full((1, 400), 100.0)).force_in_n[0]
    np.testing.assert_allclose(force[60:], 200.0, rtol=1e-6)
    assert force.max() < 1.3 * 200.0  # the light specimen itself rings for some steps


def test_a_smooth_rise_lags_by_the_time_constant() -> None:
    # p = p0 (1 - cos(w t))/2 begins without a jump; F + tau dF/dt = 2 p in closed form.
    tau, omega, p0 = 2e-6, np.pi / 10e-6, 1000.0
    whole = tau + OWN_TIME
    q = 1 + (omega * whole) ** 2
    time = STIFF_STEP * np.arange(int(20e-6 / STIFF_STEP))
    exact = p0 * (1 - (np.cos(omega * time) + omega * whole * np.sin(omega * time)) / q)
    exact -= p0 * (1 - 1 / q) * np.exp(-time / whole)
    wave = 0.5 * p0 * (1 - np.cos(omega * time))[None, :]
    found = marcher(STIFF, STIFF_STEP, springs_of_time_constant(tau), elements=1).march(wave, wave)
    # One step late would be 4e-3 of the height, a formula of first order 2e-4.
    assert np.abs(found.force_in_n[0] - exact).max() / (2 * p0) < 1e-5


def test_springs_give_their_energy_back() -> None:
    # An elastic specimen loaded and unloaded: while loaded, the work of the bars is what the specimen stores and moves
    # with and half u F of each spring; afterwards all has come back.
    specimen = SpecimenModel(diameter_m=0.008, length_m=0.010, young_modulus_pa=110e9, density_kg_m3=8000.0)
    step = 0.5 * longest_time_step_s([specimen], 8)
    time = step * np.arange(2200)
    wave = 15e3 * np.sin(np.pi * np.clip(time / 120e-6, 0, 1)) ** 2
    run = marcher(specimen, step, springs(), elements=8)
    history = run.march(wave[None, :], 0 * wave[None, :])
    front, back = history.force_in_n[0], history.force_out_n[0]
    work = integral(front * (2 * wave - front) / Z - back * back / Z, step)
    nominal, e = history.nominal_stress_pa[0], history.eng_strain[0]
    volume, mass = specimen.area_m2 * 0.010, 8000.0 * specimen.area_m2 * 0.010
    stored = volume * np.concatenate(([0.0], np.cumsum(0.5 * (nominal[1:] + nominal[:-1]) * np.diff(e))))
    moving = 0.5 * integral(front - back, step) ** 2 / mass
    sprung = 0.5 * (history.indentation_in_m[0] * front + history.indentation_out_m[0] * back)
    peak = int(np.argmax(sprung))
    assert sprung[peak] > 0.25 * work[peak]  # else the test would not see them
    loaded = (time > 20e-6) & (time < 100e-6)
    np.testing.assert_allclose((stored + moving + sprung)[loaded], work[loaded], atol=2e-3 * work[peak])
    # What is left of the motion after the contacts have opened.
    assert abs(work[-1]) < 5e-3 * work[peak]


def flowing(diameter_m: float = 0.008) -> SpecimenModel:
    return SpecimenModel(
        diameter_m=diameter_m, length_m=0.004, young_modulus_pa=118e9, density_kg_m3=8900.0,
        flow=FlowLaw(initial_pa=200e6, hardening_pa=400e6, rate_coefficient=0.02), heat_share=0.0,
    )  # fmt: skip


def test_momentum_and_the_approach_of_the_faces() -> None:
    # Impulse in less impulse out is the specimen's momentum, and the bar faces come nearer by its shortening and both
    # indentations, whatever happens.
    specimen = flowing()
    step = 0.4 * longest_time_step_s([specimen], 6)
    time = step * np.arange(1600)
    wave = 60e3 * np.sin(np.pi * np.clip(time / 120e-6, 0, 1)) ** 2
    run = marcher(specimen, step, springs(), elements=6)
    history = run.march(wave[None, :], 0 * wave[None, :])
    impulse = (history.force_in_n - history.force_out_n)[0].sum() * step
    assert impulse == pytest.approx(run.momentum_n_s[0], rel=1e-10)
    loaded = (time > 5e-6) & (time < 80e-6)
    nearer = approach(history, wave, 0 * wave, step)
    sum_of_all = history.eng_strain[0] * 0.004 + history.indentation_in_m[0] + history.indentation_out_m[0]
    np.testing.assert_allclose(nearer[loaded], sum_of_all[loaded], atol=1e-8)
    together = history.indentation_in_m[0] + history.indentation_out_m[0]
    assert together[loaded].max() > 6e-6
    assert history.eng_strain[0, -1] > 0.08


def test_mirrored_shots_are_mirror_images() -> None:
    specimen = flowing()
    step = 0.4 * longest_time_step_s([specimen], 4)
    time = step * np.arange(1200)
    wave = 60e3 * np.sin(np.pi * np.clip(time / 60e-6, 0, 1)) ** 2
    faces = FaceSprings(np.array([[0.008, 0.011]]), np.array([[3e-12, 5e-12]]))
    turned = FaceSprings(faces.bar_radius_m[:, ::-1], faces.give_per_pa[:, ::-1])
    one = marcher(specimen, step, faces).march(wave[None, :], 0.2 * wave[None, :])
    other = marcher(specimen, step, turned).march(0.2 * wave[None, :], wave[None, :])
    pairs = (("force_in_n", "force_out_n"), ("indentation_in_m", "indentation_out_m"))
    for a, b in pairs:
        largest = getattr(one, a).max()
        np.testing.assert_allclose(getattr(one, a), getattr(other, b), atol=1e-9 * largest)
        np.testing.assert_allclose(getattr(one, b), getattr(other, a), atol=1e-9 * largest)
    np.testing.assert_allclose(one.eng_strain, other.eng_strain, atol=1e-12)
    # The softer face gives way more under the greater force.
    assert one.indentation_in_m.max() != pytest.approx(one.indentation_out_m.max(), rel=0.2)


def test_a_gap_opens_and_closes_when_it_should() -> None:
    # A specimen that stays where it is, and a wave that falls by a straight line and rises again. F + tau dF/dt = 2 p:
    # behind the ramp the force lags by tau, so it is zero tau after the wave is. From then the bar face moves at 2 p/Z,
    # and is back when the integral of p since then is zero.
    p0, fall, tau, step = 500.0, 20e-6, 2e-6, STIFF_STEP
    time = step * np.arange(int(120e-6 / step))
    falling = p0 * (1 - (time - 20e-6) / fall)  # zero at 40 us
    wave = np.minimum(p0, np.maximum(falling, -falling - p0))  # lowest, -p0/2, at 50 us; zero at 60 us
    run = marcher(STIFF, step, springs_of_time_constant(tau), elements=1)
    history = run.march(wave[None, :], wave[None, :])
    force = history.force_in_n[0]
    opened = time[np.argmax((force == 0) & (time > 20e-6))]
    assert opened == pytest.approx(40e-6 + tau + OWN_TIME, abs=2 * step)
    slope = p0 / fall
    below = slope * ((10e-6) ** 2 - 0.5 * (tau + OWN_TIME) ** 2)  # integral of -p from there to 60 us
    back = 60e-6 + math.sqrt(2 * below / slope)
    closed = time[np.argmax((force > 0) & (time > 50e-6))]
    assert closed == pytest.approx(back, abs=3 * step)
    assert not history.indentation_in_m[0, (time > opened) & (time < closed)].any()
    assert force.min() >= 0.0


def test_a_specimen_that_outgrows_the_bar_leaves_it_smoothly() -> None:
    # From 0.95 of the bar's width to beyond it: the spring ends, and the forces go over to those of plane faces.
    specimen = flowing(0.019)
    step = 0.4 * longest_time_step_s([specimen], 4)
    time = step * np.arange(1400)
    wave = 250e3 * np.sin(0.5 * np.pi * np.clip(time / 20e-6, 0, 1)) ** 2
    given, plane = (
        marcher(specimen, step, faces).march(wave[None, :], 0 * wave[None, :]) for faces in (springs(), None)
    )
    filled = np.argmax(plane.eng_strain[0] > 0.10)  # (19/20)^2 = 0.9025: from 0.0975
    assert given.indentation_in_m[0, : filled // 2].max() > 1e-7
    assert not given.indentation_in_m[0, filled:].any()
    apart = (given.force_in_n - plane.force_in_n)[0] / plane.force_in_n.max()
    assert np.abs(apart[filled:]).max() < 4e-4
    # The last of the spring ends within a step (du/dt jumps to zero: 1e-4 of the force); nothing rings behind it.
    assert np.abs(np.diff(apart[filled:], 2)).max() < 2e-5


def test_faces_that_do_not_give_way_are_as_without_springs() -> None:
    specimen = flowing()
    step = 0.4 * longest_time_step_s([specimen], 4)
    wave = 60e3 * np.sin(np.pi * np.clip(step * np.arange(1500) / 60e-6, 0, 1)) ** 2
    faces = FaceSprings.of_bars([(STEEL, STEEL)], giving=[False])
    with_springs = marcher(specimen, step, faces).march(wave[None, :], -0.3 * wave[None, :])
    without = marcher(specimen, step, None).march(wave[None, :], -0.3 * wave[None, :])
    for name in SpecimenHistory.__dataclass_fields__:
        np.testing.assert_array_equal(getattr(with_springs, name), getattr(without, name))


def test_refuses_faces_of_other_specimens() -> None:
    two = FaceSprings.of_bars([(STEEL, STEEL)] * 2)
    with pytest.raises(InputError, match="Describe both bar faces of every specimen"):
        marcher(flowing(), 1e-8, two)
