"""Calibration shots run forwards: identities of waves in bars, and an independent simulation."""

from __future__ import annotations

import dataclasses
import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.forward.calibration_plan import CalibrationPlan, Losses
from shpb.forward.calibration_shot import (
    bars_apart,
    bars_together,
    passages_m,
    together_from_impact,
)
from shpb.forward.recording import Disturbance
from shpb.forward.shunt import shunt_record, shunted_ratio
from shpb.forward.solids import StandardLinearSolid
from shpb.pulse.bridge import shunt_strain, strain_from_voltage
from shpb.rig.gauge import Arrangement
from shpb.settings import Dispersion
from shpb.wave.pochhammer import first_mode_at_frequency
from shpb.wave.propagation import Grid, LowPass, carry_pulse
from tests.forward.conftest import Q, bar, gauge, rig, striker

DATA = Path(__file__).parents[1] / "virtual_rig" / "data"
STEP = 0.2e-6


def clock(end_s: float, step: float = STEP) -> FloatArray:
    return np.arange(-50e-6, end_s, step)


def between(time: FloatArray, start: float, end: float) -> Any:
    return (time >= start) & (time <= end)


# --- bars apart ---------------------------------------------------------------------------------------------


def test_passages_of_a_free_bar() -> None:
    # By images: a source at 0, a bar of 2 m, a station at 0.6 m from the struck end.
    assert passages_m(0.6, 2.0, 9.0) == pytest.approx([0.6, 3.4, 4.6, 7.4, 8.6])


@pytest.mark.parametrize(("specimen_end", "first"), [(False, 1.4), (True, 0.6)])
def test_passages_come_with_their_sign_and_time(specimen_end: bool, first: float) -> None:
    bars = rig(incident_gauge=gauge(to_specimen_m=Q(0.6)))
    plan = CalibrationPlan(
        rig=bars, striker_speed_m_s=10.0, striker=striker(length_m=Q(0.1)), at_specimen_end=specimen_end,
        dispersive=False,
    )  # fmt: skip
    shot = bars_apart(plan, clock(2.0e-3))
    strain = shot.strain["incident_gauge"]
    # Pulse of 40 us and 10 us of rise; e = V/(2 c0) = 1e-3 exactly, at both ends turned whole.
    for turns, way in enumerate(passages_m(first, 2.0, 8.0)):
        middle = way / 5000.0 + 25e-6
        flat = between(shot.time_s, middle - 12e-6, middle + 12e-6)
        np.testing.assert_allclose(strain[flat], (-1) ** turns * 1e-3, rtol=1e-4)
    assert not shot.strain["transmitted_gauge"].any()


def test_the_other_bar_can_be_struck() -> None:
    plan = CalibrationPlan(rig=rig(), striker_speed_m_s=10.0, bar="transmitted", at_specimen_end=True)
    shot = bars_apart(plan, clock(0.6e-3))
    assert not shot.strain["incident_gauge"].any()
    assert shot.strain["transmitted_gauge"].max() > 0.9e-3
    assert plan.from_struck_end_m("transmitted_gauge") == pytest.approx(0.6)


def test_impulse_of_every_passage_is_that_of_the_striker() -> None:
    # Momentum m V, whatever disperses: the mean of a pulse does not change on its way.
    plan = CalibrationPlan(rig=rig(), striker_speed_m_s=12.0, striker=striker(length_m=Q(0.2)))
    shot = bars_apart(plan, clock(2.2e-3))
    strain, momentum = shot.strain["incident_gauge"], 12.0 * striker(length_m=Q(0.2)).mass_kg
    assert shot.impact_n.sum() * STEP == pytest.approx(momentum, rel=1e-6)
    for turns, way in enumerate((1.0, 3.0, 5.0, 7.0)):
        inside = between(shot.time_s, way / 5000 - 60e-6, way / 5000 + 300e-6)
        impulse = strain[inside].sum() * STEP * bar().force_per_strain_n
        # Ringing of the tail beyond the window.
        assert impulse == pytest.approx((-1) ** turns * momentum, rel=2e-3)


def test_energy_goes_to_and_fro() -> None:
    # Kinetic energy m V^2/2 of a striker of the bar's own impedance goes into the bar whole: E A c0 int e^2 dt. With a
    # sharp front; a rounded one leaves a little in the striker.
    plan = CalibrationPlan(
        rig=rig(), striker_speed_m_s=12.0, striker=striker(length_m=Q(0.2)), rise_s=0.0, dispersive=False
    )
    shot = bars_apart(plan, clock(2.2e-3))
    strain, energy = shot.strain["incident_gauge"], 0.5 * striker(length_m=Q(0.2)).mass_kg * 12.0**2
    for way in (1.0, 3.0, 5.0, 7.0):
        inside = between(shot.time_s, way / 5000 - 60e-6, way / 5000 + 300e-6)
        passed = np.square(strain[inside]).sum() * STEP * bar().force_per_strain_n * 5000
        assert passed == pytest.approx(energy, rel=5e-3)  # the edge falls between two samples of 0.2 us in 80


def test_phase_between_two_passages_is_that_of_the_first_mode() -> None:
    plan = CalibrationPlan(
        rig=rig(incident_gauge=gauge(to_specimen_m=Q(0.7))), striker_speed_m_s=10.0,
        striker=striker(length_m=Q(0.1)),
    )  # fmt: skip
    shot = bars_apart(plan, clock(1.3e-3))
    strain = shot.strain["incident_gauge"]

    def spectrum(way: float) -> Any:
        inside = between(shot.time_s, way / 5000 - 40e-6, way / 5000 + 200e-6)
        return np.fft.rfft(np.where(inside, strain, 0.0), 2**15)

    frequency = np.fft.rfftfreq(2**15, STEP)
    # The pulse of 40 us has its zeros at 25, 50, ... kHz.
    band = between(frequency, 6e3, 20e3) | between(frequency, 31e3, 42e3)
    ratio = -(spectrum(2.7) / spectrum(1.3))[band]
    mode = first_mode_at_frequency(frequency[band] * 0.01 / 5000, 0.29)
    expected = np.exp(-2j * np.pi * frequency[band] * 1.4 / (5000 * mode.phase_speed))
    # One sample of 0.2 us would turn the phase at 42 kHz by 0.053 rad, a wrong sign by pi.
    assert np.abs(np.angle(ratio / expected)).max() < 0.008
    np.testing.assert_allclose(np.abs(ratio), 1.0, atol=0.008)


def test_losses_take_their_share_of_every_passage() -> None:
    losses = Losses(per_metre=0.01, per_reflection=0.02)
    plan = CalibrationPlan(rig=rig(), striker_speed_m_s=10.0, striker=striker(length_m=Q(0.1)))
    with_losses = bars_apart(dataclasses.replace(plan, losses=losses), clock(1.2e-3))
    strain, whole = with_losses.strain["incident_gauge"], bars_apart(plan, clock(1.2e-3))
    for turns, way in enumerate((1.0, 3.0, 5.0)):
        inside = between(whole.time_s, way / 5000 - 40e-6, way / 5000 + 140e-6)
        kept = strain[inside].sum() / whole.strain["incident_gauge"][inside].sum()
        # exp(-0.01 x) 0.98^n; tails of the other passages leave some 1e-4.
        assert kept == pytest.approx(np.exp(-0.01 * way) * 0.98**turns, abs=5e-4)


def test_a_second_station_sees_the_same_wave_later() -> None:
    bars = rig(
        incident_gauge=gauge(to_specimen_m=Q(1.2)),
        more_incident_gauges=(gauge(to_specimen_m=Q(0.5), channels=("CH3",)),),
    )
    plan = CalibrationPlan(rig=bars, striker_speed_m_s=10.0, dispersive=False)
    shot = bars_apart(plan, clock(0.3e-3))
    first, second = shot.strain["incident_gauge"], shot.strain["incident_gauge_2"]
    assert np.interp(200e-6, shot.time_s, second) == pytest.approx(
        np.interp(200e-6 - 0.7 / 5000, shot.time_s, first), rel=1e-4
    )


# --- bars that are not elastic ------------------------------------------------------------------------------

POLYMER = StandardLinearSolid(relaxed_pa=5.2e9, unrelaxed_pa=5.7e9, relaxation_time_s=12e-6)


def test_standard_linear_solid_at_its_limits_and_peak() -> None:
    slow, fast = POLYMER.modulus_pa(np.array([1e-3, 1e12]))
    assert slow == pytest.approx(5.2e9, rel=1e-6)
    assert fast == pytest.approx(5.7e9, rel=1e-6)
    # Loss tangent (Eu - Er)/(2 sqrt(Eu Er)) at w tau = sqrt(Er/Eu), Zener 1948 (from memory).
    at = np.array([np.sqrt(5.2 / 5.7) / (2 * np.pi * 12e-6)])
    peak = POLYMER.modulus_pa(at)[0]
    assert peak.imag / peak.real == pytest.approx(0.5e9 / (2 * np.sqrt(5.7e9 * 5.2e9)), rel=1e-9)
    assert POLYMER.attenuation_per_m(at, 1190.0)[0] > 0


def test_a_lossy_bar_attenuates_as_its_modulus_says() -> None:
    # e^(-2 xi d) = -S2/S1 of the first two passages (Bacon 1998), on a bar so thin that the section does not matter.
    rod = bar(
        diameter_m=Q(1e-4), density_kg_m3=Q(1190.0), wave_speed_m_s=Q(POLYMER.wave_speed_m_s(1190.0)),
        poisson_ratio=Q(0.36),
    )  # fmt: skip
    plan = CalibrationPlan(
        rig=rig(incident_bar=rod), striker_speed_m_s=5.0, solid=POLYMER, rise_s=30e-6,
        striker=striker(length_m=Q(0.1), diameter_m=Q(1e-4), density_kg_m3=Q(1190.0), wave_speed_m_s=Q(2100.0)),
    )  # fmt: skip
    time = clock(2.4e-3, 0.5e-6)
    strain = bars_apart(plan, time).strain["incident_gauge"]
    speed = POLYMER.wave_speed_m_s(1190.0)

    def spectrum(way: float) -> Any:
        inside = between(time, way / speed - 250e-6, way / speed + 550e-6)
        return np.fft.rfft(np.where(inside, strain, 0.0), 2**14)

    frequency = np.fft.rfftfreq(2**14, 0.5e-6)
    # The pulse of some 100 us has its first zero near 10 kHz.
    for band in (between(frequency, 2e3, 8e3), between(frequency, 12e3, 17e3)):
        ratio = -(spectrum(3.0) / spectrum(1.0))[band]
        alpha = POLYMER.attenuation_per_m(frequency[band], 1190.0)
        c = POLYMER.phase_speed_m_s(frequency[band], 1190.0)
        expected = np.exp(-2.0 * (alpha + 2j * np.pi * frequency[band] / c))
        np.testing.assert_allclose(ratio / expected, 1.0, atol=0.004)


def test_force_by_strain_is_the_complex_modulus() -> None:
    # The impulse of a passage is E_relaxed A int e dt = m V: at zero frequency the solid is relaxed.
    rod = bar(
        density_kg_m3=Q(1190.0), wave_speed_m_s=Q(POLYMER.wave_speed_m_s(1190.0)), poisson_ratio=Q(0.36)
    )
    own = striker(length_m=Q(0.1), density_kg_m3=Q(1190.0), wave_speed_m_s=rod.wave_speed_m_s)
    plan = CalibrationPlan(rig=rig(incident_bar=rod), striker_speed_m_s=5.0, striker=own, solid=POLYMER)
    time = clock(1.1e-3, 0.5e-6)
    impulse = bars_apart(plan, time).strain["incident_gauge"].sum() * 0.5e-6 * rod.force_per_strain_n
    assert impulse == pytest.approx(5.0 * own.mass_kg, rel=2e-3)


# --- bars together ------------------------------------------------------------------------------------------


def test_equal_bars_pass_the_pulse_on_whole_and_part_when_it_comes_back() -> None:
    plan = CalibrationPlan(rig=rig(), striker_speed_m_s=10.0, dispersive=False)
    shot = bars_together(plan, clock(1.6e-3))
    t = shot.time_s
    flat = between(t, 0.4e-3 + 15e-6, 0.4e-3 + 115e-6)
    np.testing.assert_allclose(shot.contact_n[flat], 1e-3 * bar().force_per_strain_n, rtol=1e-4)
    # Nothing is reflected before the end reflection of the transmitted bar comes back at 1.2 ms.
    before = between(t, 0.4e-3, 1.15e-3)
    assert np.abs(shot.contact_n - shot.arriving_n)[before].max() < 1e-4 * shot.arriving_n.max()
    # The contact bears no tension: it comes back to a free end, and the bars part at V = 2 x 5 m/s in 120 us.
    assert shot.contact_n.min() == 0.0
    assert shot.gap_m[between(t, 1.15e-3, 1.19e-3)].max() < 1e-9
    assert shot.gap_m[between(t, 1.35e-3, 1.4e-3)] == pytest.approx(10.0 * 120e-6, rel=1e-3)
    moved = np.cumsum(shot.velocity_out_m_s - shot.velocity_in_m_s) * STEP
    np.testing.assert_allclose(shot.gap_m, moved, atol=1e-4 * shot.gap_m.max())


@pytest.mark.parametrize("ratio", [0.5, 2.0])
def test_unequal_bars_share_the_pulse_by_their_impedances(ratio: float) -> None:
    # F_t = F_i 2 Z2/(Z1 + Z2), F_r = F_i (Z2 - Z1)/(Z1 + Z2) while they are pressed together.
    other = bar(diameter_m=Q(0.02 * np.sqrt(ratio)))
    plan = CalibrationPlan(rig=rig(transmitted_bar=other), striker_speed_m_s=10.0, dispersive=False)
    shot = bars_together(plan, clock(0.75e-3))
    flat = between(shot.time_s, 0.4e-3 + 15e-6, 0.4e-3 + 110e-6)
    whole = 1e-3 * bar().force_per_strain_n
    np.testing.assert_allclose(shot.contact_n[flat], whole * 2 * ratio / (1 + ratio), rtol=2e-4)
    seen = between(shot.time_s, 0.6e-3 + 15e-6, 0.6e-3 + 110e-6)
    np.testing.assert_allclose(
        shot.strain["incident_gauge"][seen], 1e-3 * (ratio - 1) / (1 + ratio), rtol=2e-3
    )
    passed = between(shot.time_s, 0.52e-3 + 15e-6, 0.52e-3 + 110e-6)
    np.testing.assert_allclose(shot.strain["transmitted_gauge"][passed], 1e-3 * 2 / (1 + ratio), rtol=2e-4)


@pytest.mark.parametrize("ratio", [0.5, 1.0, 1.6])
@pytest.mark.parametrize("dispersive", [False, True])
def test_energy_and_momentum_at_the_contact(ratio: float, dispersive: bool) -> None:
    """What comes to the contact leaves it, bars parting and meeting again in it: the contact takes no energy."""
    other = bar(diameter_m=Q(0.02 * np.sqrt(ratio)), length_m=Q(1.5))
    plan = CalibrationPlan(rig=rig(transmitted_bar=other), striker_speed_m_s=10.0, dispersive=dispersive)
    shot = bars_together(plan, clock(2.5e-3))
    z_in, z_out = bar().impedance_n_s_m, other.impedance_n_s_m
    reflected, transmitted = shot.contact_n - shot.arriving_n, shot.contact_n - shot.returning_n
    brought = np.sum(shot.arriving_n**2) / z_in + np.sum(shot.returning_n**2) / z_out
    taken = np.sum(reflected**2) / z_in + np.sum(transmitted**2) / z_out
    assert taken == pytest.approx(brought, rel=1e-3)
    assert shot.gap_m.max() > 1e-4
    assert shot.gap_m.min() == 0.0
    # While they are pressed together the faces move as one.
    pressed = shot.contact_n > 0.01 * shot.contact_n.max()
    assert np.abs(shot.velocity_in_m_s - shot.velocity_out_m_s)[pressed].max() < 1e-9 * 10.0
    # m V is in the bars: what has been pushed into the transmitted bar and what is left in the other.
    into = shot.contact_n.sum() * STEP
    assert 0 < into <= 2 * 10.0 * striker().mass_kg


def test_a_gap_closes_again_where_the_transmitted_bar_is_caught() -> None:
    """The incident bar, thicker, follows and hits the other a second time."""
    other = bar(diameter_m=Q(0.02 * np.sqrt(0.5)), length_m=Q(1.0))
    plan = CalibrationPlan(rig=rig(transmitted_bar=other), striker_speed_m_s=10.0, dispersive=False)
    shot = bars_together(plan, clock(6e-3, 0.5e-6))
    open_ = shot.gap_m > 0
    closing = np.flatnonzero(open_[:-1] & ~open_[1:])
    assert closing.size >= 1
    assert shot.contact_n[closing[-1] + 1 :].max() > 0


def test_dispersion_passes_a_contact_of_equal_bars_unseen() -> None:
    # Two bars of 2 m in contact are one of 4 m while they are pressed together: the same strain 2.6 m from the impact.
    long = rig(incident_bar=bar(length_m=Q(4.0)), incident_gauge=gauge(to_specimen_m=Q(1.4)))
    one = bars_apart(CalibrationPlan(rig=long, striker_speed_m_s=10.0, rise_s=20e-6), clock(0.75e-3))
    two = bars_together(CalibrationPlan(rig=rig(), striker_speed_m_s=10.0, rise_s=20e-6), clock(0.75e-3))
    pressed = between(one.time_s, 0.5e-3, 0.52e-3 + 125e-6)
    misfit = (two.strain["transmitted_gauge"] - one.strain["incident_gauge"])[pressed]
    assert np.sqrt(np.mean(misfit**2)) < 2e-4 * 1e-3


# --- against the simulation ---------------------------------------------------------------------------------


class Simulated:
    """A shot of the simulation: rig, clean strains on their clock, compression positive."""

    def __init__(self, case: str) -> None:
        facts = json.loads((DATA / case / "facts.json").read_text())
        table = np.loadtxt(DATA / case / "record.csv", delimiter=",", skiprows=1)
        self.facts, self.time = facts, table[:, 0]
        stated = facts["bars"]
        self.c0 = (stated["E_Pa"] / stated["density_kg_m3"]) ** 0.5
        self.bar_values = {
            "diameter_m": Q(stated["diameter_m"]), "density_kg_m3": Q(stated["density_kg_m3"]),
            "wave_speed_m_s": Q(self.c0), "poisson_ratio": Q(stated["poisson"]),
        }  # fmt: skip
        self.striker = striker(
            length_m=Q(facts["striker"]["length_m"]), diameter_m=Q(facts["striker"]["diameter_m"]),
            density_kg_m3=Q(stated["density_kg_m3"]), wave_speed_m_s=Q(self.c0),
        )  # fmt: skip
        self.strain = []
        for volts, channel in zip(table[:, 1:].T, facts["channels"].values(), strict=True):
            scale = channel["gauge_factor"] * channel["excitation_V"] * channel["amplifier_gain"]
            self.strain.append(-4 * volts / (2 * scale))

    def low_passed(self, strain: FloatArray, rod: Any, distance_m: float = 0.0) -> FloatArray:
        """Below 120 kHz, f a/c0 = 0.234, carried along the bar."""
        grid = Grid(float(self.time[0]), float(self.time[1] - self.time[0]), self.time.size)
        how = Dispersion.PHASE if distance_m else Dispersion.NONE
        return carry_pulse(strain, grid.start_s, grid, distance_m, rod, LowPass(100e3), how).strain


def rms_by_peak(found: FloatArray, expected: FloatArray, inside: Any) -> float:
    return float(np.sqrt(np.mean(np.square((found - expected)[inside]))) / np.abs(expected).max())


def test_plain_bar_from_the_striker_to_both_stations() -> None:
    """From the striker's speed alone: a free bar, front and plateau at 0.8 and 2.0 m from the impact."""
    sim = Simulated("plain-bar")
    ways = [one["distance_from_impact_end_m"] for one in sim.facts["channels"].values()]
    rod = bar(length_m=Q(sim.facts["bars"]["length_m"]), **sim.bar_values)
    near, far = (gauge(to_specimen_m=Q(rod.length_m - way), length_m=Q(0.002)) for way in ways)
    bars = rig(incident_bar=rod, incident_gauge=near, more_incident_gauges=(far,))
    speed = sim.facts["striker"]["velocity_m_s"]
    plan = CalibrationPlan(rig=bars, striker_speed_m_s=speed, striker=sim.striker, rise_s=0.0)
    shot = bars_apart(plan, np.arange(-20e-6, sim.time[-1] + 1e-7, STEP))
    for way, name, simulated in zip(ways, shot.strain, sim.strain, strict=False):
        mine = np.interp(sim.time, shot.time_s, shot.strain[name])
        found, expected = (sim.low_passed(strain, rod) for strain in (mine, simulated))
        # Until the striker lets go (2 x 0.2 m/c0 = 78 us); its release wave is rounded by its own dispersion.
        inside = between(sim.time, 0.0, way / sim.c0 + 70e-6)
        assert rms_by_peak(found, expected, inside) < 0.005
        flat = between(sim.time, way / sim.c0 + 25e-6, way / sim.c0 + 65e-6)
        assert found[flat].mean() == pytest.approx(expected[flat].mean(), rel=1e-3)


@pytest.fixture(scope="module")
def together() -> tuple[Simulated, CalibrationPlan]:
    sim = Simulated("bars-together")
    stated, channels = sim.facts["bars"], sim.facts["channels"]
    first, second = (
        bar(length_m=Q(stated[f"{side}_length_m"]), **sim.bar_values) for side in ("incident", "transmitted")
    )
    x_i, x_t = (channels[side]["distance_to_specimen_face_m"] for side in ("incident", "transmitted"))
    bars = rig(
        incident_bar=first, transmitted_bar=second,
        incident_gauge=gauge(to_specimen_m=Q(x_i), length_m=Q(0.002)),
        transmitted_gauge=gauge(to_specimen_m=Q(x_t), channels=("CH2",), length_m=Q(0.002)),
    )  # fmt: skip
    speed = sim.facts["striker"]["velocity_m_s"]
    return sim, CalibrationPlan(rig=bars, striker_speed_m_s=speed, striker=sim.striker, rise_s=0.0)


def test_bars_together_from_the_striker_alone(together: tuple[Simulated, CalibrationPlan]) -> None:
    """Front and plateau at both gauges. What the plateau lacks of V/(2 c0) is dispersion: the model lacks it too."""
    sim, plan = together
    shot = bars_together(plan, np.arange(-20e-6, sim.time[-1] + 1e-7, STEP))
    for way, name, simulated in zip((1.0, 2.6), shot.strain, sim.strain, strict=True):
        mine = np.interp(sim.time, shot.time_s, shot.strain[name])
        found, expected = (sim.low_passed(strain, plan.rig.bar_of(name)) for strain in (mine, simulated))
        assert rms_by_peak(found, expected, between(sim.time, 0.0, way / sim.c0 + 120e-6)) < 0.005
        flat = between(sim.time, way / sim.c0 + 40e-6, way / sim.c0 + 105e-6)
        assert found[flat].mean() == pytest.approx(expected[flat].mean(), rel=5e-4)


def test_bars_together_from_the_simulated_incident_wave(together: tuple[Simulated, CalibrationPlan]) -> None:
    """The simulated incident pulse, brought to the impact end as a force, run through bars and contact."""
    sim, plan = together
    clock_s = np.arange(-20e-6, sim.time[-1] + 1e-7, STEP)
    pulse = np.where(sim.time < 0.5e-3, sim.strain[0], 0.0)
    grid = Grid(float(clock_s[0]), STEP, clock_s.size)
    rod = plan.rig.incident_bar
    start = float(sim.time[0])
    at_impact = carry_pulse(pulse, start, grid, -1.0, rod, LowPass(190e3), Dispersion.FULL).force_strain
    shot = together_from_impact(plan, clock_s, at_impact * rod.force_per_strain_n)
    for name, simulated in zip(shot.strain, sim.strain, strict=True):
        mine = np.interp(sim.time, clock_s, shot.strain[name])
        found, expected = (sim.low_passed(strain, plan.rig.bar_of(name)) for strain in (mine, simulated))
        # While they are pressed together, and until the reflected wave of the parting comes to the gauge: 0.06 %.
        assert rms_by_peak(found, expected, between(sim.time, 0.0, 700e-6)) < 0.001
        # After it, the wave that the parting sends back: 9 % of the peak in the simulation.
        late = between(sim.time, 700e-6, 930e-6)
        if name == "incident_gauge":
            assert rms_by_peak(found, expected, late) < 0.006
            assert found[late].min() == pytest.approx(expected[late].min(), rel=0.05)


# --- shunt --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("resistance", "shunt", "strain"), [(120.0, 59_880.0, 1e-3), (350.0, 349_650.0, 5e-4)]
)
def test_a_shunt_looks_like_the_published_strain(resistance: float, shunt: float, strain: float) -> None:
    # Vishay TN-514 (values from memory), k = 2.00: 120 ohm by 59,880 ohm is 1000 um/m, 350 ohm by 349,650 ohm 500 um/m.
    one = gauge(arrangement=Arrangement.QUARTER, resistance_ohm=Q(resistance))
    volts = np.array([shunted_ratio(one, shunt) * 5.0])
    # A quarter bridge whose one arm changes is just what its gauge does.
    assert strain_from_voltage(volts, one, 0.3)[0] == pytest.approx(-strain, rel=1e-4)
    assert shunt_strain(resistance, shunt, 2.0) == pytest.approx(strain, rel=1e-4)


def test_a_shunt_record_steps_by_what_the_bridge_says() -> None:
    one = gauge(resistance_ohm=Q(350.0), gain=Q(200.0), tension_sign=-1)
    time = np.arange(5000) * 2e-5
    noise = Disturbance(white_rms_v=0.005, offset_v=0.03)
    random = np.random.default_rng(1)
    volts = shunt_record(one, 100_000.0, time, (0.03, 0.07), disturbance=noise, random=random).voltage_v
    on = between(time, 0.031, 0.069)
    x = 350.0 / 100_350.0
    expected = x / (4 - 2 * x) * 5.0 * 200.0  # compression, positive with this wiring
    assert volts[on].mean() - volts[time < 0.029].mean() == pytest.approx(expected, abs=5e-4)
    assert volts[time > 0.071].mean() == pytest.approx(0.03, abs=5e-4)


# --- refusals -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"striker": striker(length_m=Q(2.5))}, "still pushes"),
        ({"rig": rig(striker=None)}, "there is no striker"),
        ({"bar": "transmitted"}, "struck at the far end of the incident one"),
        ({"at_specimen_end": True}, "struck at the far end of the incident one"),
        ({"solid": POLYMER}, "elastic bars"),
    ],
)
def test_what_cannot_be_run_is_refused(changes: dict[str, Any], message: str) -> None:
    plan = dataclasses.replace(CalibrationPlan(rig=rig(), striker_speed_m_s=10.0), **changes)
    with pytest.raises(InputError, match=message):
        bars_together(plan, clock(1.5e-3))


def test_a_bar_that_is_not_there_is_refused() -> None:
    with pytest.raises(InputError, match="there is no 'middle' bar"):
        bars_apart(CalibrationPlan(rig=rig(), striker_speed_m_s=10.0, bar="middle"), clock(1e-3))


def test_a_clock_that_begins_too_late_is_refused() -> None:
    plan = CalibrationPlan(rig=rig(), striker_speed_m_s=10.0)
    with pytest.raises(InputError, match="begins 10 us after the impact"):
        bars_apart(plan, np.arange(10e-6, 1e-3, STEP))


def test_a_shunt_without_its_resistances_is_refused() -> None:
    with pytest.raises(InputError, match="State both"):
        shunted_ratio(gauge(), 100e3)
    with pytest.raises(InputError, match="no scope range"):
        shunt_record(
            gauge(resistance_ohm=Q(350.0), scope_range_v=None), 1e5, np.arange(100.0), (0, 1),
            disturbance=Disturbance(), random=np.random.default_rng(0),
        )  # fmt: skip


def test_a_solid_with_impossible_moduli_is_refused() -> None:
    with pytest.raises(InputError, match="standard linear solid"):
        StandardLinearSolid(relaxed_pa=5e9, unrelaxed_pa=4e9, relaxation_time_s=1e-5)
