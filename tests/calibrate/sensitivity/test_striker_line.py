"""Absolute sensitivity by the striker. Truth: impact of two rods, V Z_s/((Z_s + Z_b) c0), and planted sensitivities."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from shpb.calibrate.sensitivity.impact import impact_of
from shpb.calibrate.sensitivity.line_tests import line_tests, odd_point
from shpb.calibrate.sensitivity.sensitivity_ratio import sensitivity_ratio
from shpb.calibrate.sensitivity.striker_line import StrikerLine, striker_line
from shpb.calibrate.session import BarEnd, FiredShot, ShotKind
from shpb.errors import InputError
from shpb.forward.solids import StandardLinearSolid
from shpb.forward.striker import Shaper
from shpb.rig.gauge import Arrangement
from shpb.rig.propagation_table import PropagationTable
from shpb.rig.rig import Rig
from tests.calibrate.fired import NOISY, QUIET, Q, bar, fired, gauge, lab, shot, striker, with_q

APART, TOGETHER = ShotKind.BARS_APART, ShotKind.BARS_TOGETHER
SPEEDS = (4.0, 6.0, 8.0, 10.0, 12.0)


def shots(true: Rig, *speeds: float, noise: float = NOISY, **said: object) -> list[FiredShot]:
    return [
        fired(true, f"B{n}", TOGETHER, v, noise=noise, seed=n, **said)  # type: ignore[arg-type]
        for n, v in enumerate(speeds or SPEEDS, 1)
    ]


def said_speed(one: FiredShot, factor: float, more: float = 0.0, u: float = 0.001) -> FiredShot:
    speed = one.shot.striker_speed_m_s
    assert speed is not None
    value = float(speed) * factor + more
    return replace(one, shot=replace(one.shot, striker_speed_m_s=Q(value, u * value)))


def line_of(fired_shots: list[FiredShot], rig: Rig) -> StrikerLine:
    (line,) = striker_line(fired_shots, rig).lines
    return line


# --- what the striker must make ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("diameter", "density", "speed"), [(0.02, 8000, 5000), (0.016, 8000, 5000), (0.02, 2800, 5050)]
)
def test_expected_strain_is_that_of_two_rods(diameter: float, density: float, speed: float) -> None:
    # W. Johnson, Impact Strength of Materials (1972), chapter 1 (from memory).
    used = striker(diameter_m=Q(diameter), density_kg_m3=Q(density), wave_speed_m_s=Q(speed))
    impact = impact_of(FiredShot(shot=shot("A", APART, 10.0, striker=used), record=None), lab())  # type: ignore[arg-type]
    z_s, z_b = density * speed * diameter**2, 8000 * 5000 * 0.02**2
    assert impact.strain == pytest.approx(10.0 * z_s / (z_s + z_b) / 5000, rel=1e-9)
    assert impact.duration_s == pytest.approx(2 * 0.25 / speed, rel=1e-9)
    # m V/(E A): the areas' pi/4 is common.
    mass, stiffness = density * 0.25 * diameter**2, 8000 * 5000**2 * 0.02**2
    assert impact.impulse == pytest.approx(mass * 10.0 / stiffness, rel=1e-9)


def test_a_striker_of_equal_impedance_makes_half_of_v_by_c0() -> None:
    impact = impact_of(FiredShot(shot=shot("A", APART, 10.0), record=None), lab())  # type: ignore[arg-type]
    assert impact.strain == pytest.approx(10.0 / (2 * 5000.0), rel=1e-12)
    # Square pulse: strain times duration is the impulse.
    assert impact.strain * impact.duration_s == pytest.approx(impact.impulse, rel=1e-12)


def test_what_was_measured_of_the_bar_holds_for_a_striker_of_its_stock() -> None:
    rig = lab()
    faster = replace(rig, incident_bar=replace(rig.incident_bar, wave_speed_m_s=Q(5050.0, 1.0)))
    impact = impact_of(FiredShot(shot=shot("A", APART, 10.0), record=None), faster)  # type: ignore[arg-type]
    assert impact.strain == pytest.approx(10.0 / (2 * 5050.0), rel=1e-12)
    assert impact.remarks
    # Of one stock the wave speed acts once: d ln strain = -d ln c; densities cancel.
    assert impact.terms["incident bar: wave speed"] == pytest.approx(-1.0 / 5050.0, rel=1e-9)
    assert not any("density" in name for name in impact.terms)


@pytest.mark.parametrize(
    ("what", "name"),
    [
        ("diameter_m", "striker: diameter"),
        ("density_kg_m3", "striker: density"),
        ("wave_speed_m_s", "striker: wave speed"),
    ],
)
def test_terms_are_the_changes_that_they_say(what: str, name: str) -> None:
    used = striker(diameter_m=Q(0.016, 5e-6), density_kg_m3=Q(7800.0, 6.0), wave_speed_m_s=Q(4950.0, 8.0))
    other = replace(used, **{what: Q(getattr(used, what) + getattr(used, what).u, getattr(used, what).u)})
    before, after = (
        impact_of(FiredShot(shot=shot("A", APART, 10.0, striker=one), record=None), lab())  # type: ignore[arg-type]
        for one in (used, other)
    )
    assert np.log(after.strain / before.strain) == pytest.approx(before.terms[name], rel=2e-3)


# --- lines ------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("noise", "near"), [(QUIET, 3e-4), (NOISY, 1e-3)])
def test_the_planted_sensitivity_is_found(noise: float, near: float) -> None:
    found = striker_line(shots(with_q(lab(), incident_gauge=1.02), noise=noise), lab())
    (line,) = found.lines
    assert line.station == "incident_gauge"
    assert len(line.points) == 5
    assert line.q == pytest.approx(1.02, rel=near)
    assert abs(line.q - 1.02) < 2 * line.u_q < 0.005
    assert line.momentum is not None
    # The forward model's striker gives all its momentum.
    assert line.momentum.value == pytest.approx(1.02, rel=3 * near)
    assert line.u_momentum > 0.005
    assert not found.findings


def test_bars_apart_give_either_bar_its_line() -> None:
    true = with_q(lab(), incident_gauge=1.02, transmitted_gauge=0.97)
    alone = [
        fired(true, "A1", APART),
        fired(true, "A2", APART, bar="transmitted", struck_end=BarEnd.SPECIMEN),
    ]
    found = {line.station: line.q for line in striker_line(alone, lab()).lines}
    assert found == {
        "incident_gauge": pytest.approx(1.02, rel=1.5e-3),
        "transmitted_gauge": pytest.approx(0.97, rel=1.5e-3),
    }


@pytest.mark.parametrize("diameter", [0.016, 0.023])
def test_a_striker_of_another_section(diameter: float) -> None:
    # 0.64 and 1.32 times the bar's impedance: a rebound, and a staircase of which the first step counts.
    used = striker(diameter_m=Q(diameter, 5e-6))
    found = striker_line(shots(lab(), 8.0, noise=QUIET, used=used, striker=used), lab())
    (line,) = found.lines
    assert line.q == pytest.approx(1.0, rel=1e-3)
    assert line.momentum is None  # only a striker of equal impedance keeps nothing
    assert not found.findings


def test_a_speed_in_error_moves_all_shots_alike_and_is_not_averaged_away() -> None:
    many = line_of([said_speed(one, 1.01) for one in shots(lab())], lab())
    assert many.q == pytest.approx(1.01, rel=1e-3)
    assert many.terms["striker speed"] == pytest.approx(0.001)
    assert many.u_q > 0.001
    assert many.u_own < 0.0008


def test_what_a_speed_has_more_than_the_common_part_is_its_own() -> None:
    good, bad = shots(lab(), 8.0, 10.0)
    line = line_of([said_speed(good, 1.0), said_speed(bad, 1.02, u=0.02)], lab())
    assert line.terms["striker speed"] == pytest.approx(0.001)
    assert line.q == pytest.approx(1.0, rel=1e-3)  # the uncertain one hardly counts


def test_an_intercept_is_found() -> None:
    # Light gates that read 0.15 m/s too much.
    wrong = [said_speed(one, 1.0, 0.15) for one in shots(lab(), 3.0, 5.0, 7.0, 9.0, 12.0)]
    found = striker_line(wrong, lab())
    (line,) = found.lines
    assert line.tests.intercept == pytest.approx(-0.15 / (2 * 5000.0), rel=0.2)
    assert "intercept of the calibration line" in {one.check for one in found.findings}


def test_a_bridge_that_is_not_as_linear_as_stated_is_found() -> None:
    quarter = gauge("CH1", 0.9, gauge_factor=Q(16.0, 0.02), gain=Q(20.0), arrangement=Arrangement.QUARTER)
    rig = lab(incident_gauge=quarter)
    said = replace(rig, incident_gauge=replace(rig.incident_gauge, linear_amplifier=True))
    found = striker_line(shots(rig, noise=0.001), said)
    (line,) = found.lines
    # |V| = k e/(4 - 2 k e) is read as k e/4: more by k e/2, 1 % at 1.2e-3 where k is 16.
    assert line.tests.curvature == pytest.approx(16.0 * 1.2e-3 / 2, rel=0.25)
    assert "curvature of the calibration line" in {one.check for one in found.findings}


def test_a_line_of_numbers() -> None:
    class Point:
        def __init__(self, expected: float, stated: float) -> None:
            self.expected, self.stated = expected, stated

    x = np.array([1.0, 2.0, 3.0, 4.0])
    tests = line_tests([Point(a, 0.1 + 0.9 * a) for a in x], [0.01] * 4)
    assert tests.intercept == pytest.approx(0.1)
    assert tests.slope == pytest.approx(0.9)
    tests = line_tests([Point(a, 0.9 * a * (1 + 0.02 * a / 4)) for a in x], [0.01] * 4)
    assert tests.curvature == pytest.approx(0.02)
    assert line_tests([Point(1.0, 1.0), Point(2.0, 2.0)], [0.01] * 2).intercept is None


def test_bars_that_creep() -> None:
    """Acrylic as a standard linear solid: its propagation is known in closed form."""
    solid, rho = StandardLinearSolid(relaxed_pa=5.2e9, unrelaxed_pa=5.7e9, relaxation_time_s=12e-6), 1190.0
    frequency = np.arange(1e3, 18.5e3, 1e3)
    xi = 2j * np.pi * frequency * np.sqrt(rho / solid.modulus_pa(frequency))
    table = PropagationTable(
        frequency_hz=tuple(frequency), attenuation_per_m=tuple(xi.real),
        phase_speed_m_s=tuple(2 * np.pi * frequency / xi.imag), u_attenuation_per_m=(1e-3,) * frequency.size,
        u_phase_speed_m_s=(1.0,) * frequency.size, coherence=(1.0,) * frequency.size,
    )  # fmt: skip
    stock = {"density_kg_m3": Q(rho, 1.0), "wave_speed_m_s": Q(solid.wave_speed_m_s(rho), 1.0)}
    rod = bar(material="acrylic", length_m=Q(2.0, 2e-4), poisson_ratio=Q(0.35), **stock)
    true = lab(
        incident_bar=rod, transmitted_bar=rod, incident_gauge=gauge("CH1", 1.0, gain=Q(50.0, 0.3)),
        transmitted_gauge=gauge("CH2", 1.0, gain=Q(50.0, 0.3)), striker=striker(length_m=Q(0.2, 1e-5), **stock),
    )  # fmt: skip
    rig = replace(
        true, incident_bar=replace(rod, propagation=table), transmitted_bar=replace(rod, propagation=table)
    )
    one = fired(with_q(true, incident_gauge=1.03), "A1", APART, 5.0, solid=solid, samples=4400, noise=0.003)
    line = line_of([one], rig)
    assert line.q == pytest.approx(1.03, rel=2e-3)
    assert abs(line.q - 1.03) < 2 * line.u_q
    (free,) = sensitivity_ratio([one], rig).free_ends
    # Carried over two metres that take half of the pulse at 10 kHz each, it is turned whole.
    assert free.ratio == pytest.approx(-1.0, abs=3e-3)
    assert free.comparison.rms < 6e-3


# --- what is no point of a line ---------------------------------------------------------------------------------------


def test_no_speed() -> None:
    silent = replace(shots(lab(), 8.0)[0], shot=shot("B1", TOGETHER))
    with pytest.raises(InputError, match=r"none of the shots \(B1\) states its striker's speed"):
        striker_line([silent], lab())
    still = replace(silent, shot=shot("B1", TOGETHER, 0.0))
    with pytest.raises(InputError, match=r"shot B1 .*striker speed is 0"):
        striker_line([still], lab())
    # One that states it counts, the other is passed over.
    assert len(line_of([silent, *shots(lab(), 8.0)], lab()).points) == 1


def test_no_striker() -> None:
    with pytest.raises(InputError, match="no striker is described"):
        striker_line(shots(lab(), 8.0), lab(striker=None))


def test_a_shaped_pulse_is_left_out() -> None:
    soft = Shaper(diameter_m=0.006, thickness_m=0.001, stress_pa=4e8)
    shaped = fired(lab(), "S1", TOGETHER, shaper=soft)
    found = striker_line([shaped], lab())
    assert not found.lines
    (said,) = found.findings
    assert "the pulse of S1" in said.measured
    assert "not flat" in said.measured
    found = striker_line([shaped, *shots(lab(), 8.0)], lab())
    assert [point.shot_id for point in found.lines[0].points] == ["B1"]


def test_another_striker_than_stated_is_found_by_its_pulse() -> None:
    found = striker_line(shots(lab(), 10.0, used=striker(length_m=Q(0.2))), lab())
    checks = {one.check: one.measured for one in found.findings}
    assert "lasts 80 us" in checks["length of the striker"]
    # A fifth less momentum than the stated mass would have: 1/0.8 = 25 % more strain per volt.
    said = checks["plateau against momentum"].partition("says ")[2]
    assert float(said.partition(" %")[0]) == pytest.approx(25.0, abs=0.3)


# --- a shot that is none of the others --------------------------------------------------------------------------------


@pytest.mark.parametrize(("factor", "words", "grave"), [(10.0, "10 times", True), (1.012, "+1.2 %", False)])
def test_a_speed_that_was_noted_wrong_is_left_out_and_named(factor: float, words: str, grave: bool) -> None:
    rig = lab()
    all_shots = shots(rig, noise=QUIET)
    clean = line_of(all_shots, rig)
    all_shots[2] = said_speed(all_shots[2], factor)
    found = striker_line(all_shots, rig)
    (line,) = found.lines
    assert line.q == pytest.approx(1.0, abs=1.5e-3)
    assert line.q == pytest.approx(clean.q, rel=5e-4)
    assert [point.shot_id for point in line.points] == ["B1", "B2", "B4", "B5"]
    (said,) = [one for one in found.findings if one.check == "shot off the striker's line"]
    assert said.measured.startswith("B3 ")
    assert words in said.measured
    assert said.grave is grave


def test_of_two_shots_that_disagree_neither_is_the_odd_one() -> None:
    rig = lab()
    pair = shots(rig, 6.0, 10.0, noise=QUIET)
    pair[1] = said_speed(pair[1], 1.05)
    found = striker_line(pair, rig)
    assert len(found.lines[0].points) == 2
    assert "scatter about the calibration line" in {one.check for one in found.findings}


def test_repeats_that_scatter_as_stated_keep_every_shot() -> None:
    random = np.random.default_rng(31)
    left_out = sum(
        odd_point(list(1.0 + 0.001 * random.standard_normal(6)), [0.001] * 6) is not None for _ in range(400)
    )
    assert left_out <= 4  # one in a hundred
    assert odd_point([1.0, 1.001, 1.02, 0.999], [0.001] * 4) == pytest.approx((2, 0.02, 17.3), rel=2e-3)
