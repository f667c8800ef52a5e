"""One bar with two stations, and two bars together. Truth: the simulation described in data/README.md."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.pulse.pulses import find_pulses
from shpb.pulse.strain import gauge_strain
from shpb.record.record import Record
from shpb.rig.bar import Bar
from shpb.settings import DEFAULT, Dispersion
from shpb.wave.faces import carry_to_faces
from shpb.wave.propagation import Grid, LowPass, carry_pulse
from tests.virtual_rig.conftest import VirtualShot

PlainBar = tuple[Bar, Record, dict[str, float]]


def _station_a_at_b(plain_bar: PlainBar, dispersion: Dispersion, cutoff_hz: float) -> float:
    """Misfit of station A carried to B against B, root mean square by peak."""
    bar, record, stations = plain_bar
    grid = Grid(record.start_s, record.sample_interval_s, record.samples)
    low_pass = LowPass(cutoff_hz)
    distance = stations["station_B"] - stations["station_A"]
    a, b = record.voltage_v
    carried = carry_pulse(a, record.start_s, grid, distance, bar, low_pass, dispersion).strain
    filtered = carry_pulse(b, record.start_s, grid, 0.0, bar, low_pass, Dispersion.NONE).strain
    # The last 30 us of the record feel its end through the zero-phase filter.
    inside = slice(0, -150)
    return float(np.sqrt(np.mean((carried - filtered)[inside] ** 2)) / np.abs(filtered).max())


def test_a_carried_to_b_below_150_khz(plain_bar: PlainBar) -> None:
    # A raised cosine half down at 100 kHz passes nothing above 150 kHz.
    assert _station_a_at_b(plain_bar, Dispersion.PHASE, 100e3) < 0.0006
    # Half down at 150 kHz still holds most of what lies below.
    assert _station_a_at_b(plain_bar, Dispersion.PHASE, 150e3) < 0.0006


def test_a_rigid_shift_misses_b_by_fifty_times_as_much(plain_bar: PlainBar) -> None:
    assert _station_a_at_b(plain_bar, Dispersion.NONE, 100e3) > 0.025


def test_transmitted_against_incident_bars_together(together: VirtualShot) -> None:
    specimen = together.sheet.specimen
    strain = gauge_strain(together.record, together.rig, together.sheet.kind)
    pulses = find_pulses(strain, together.rig, specimen, DEFAULT)
    faces = carry_to_faces(pulses, together.rig, together.sheet, DEFAULT)
    incident, transmitted = faces.incident.strain, faces.transmitted.strain
    # While the bars are pressed together: later the tensile overshoot of the trailing edge parts them.
    pulse = (faces.time_s > -10e-6) & (faces.time_s < 135e-6)
    misfit = np.sqrt(np.mean((transmitted - incident)[pulse] ** 2)) / incident.max()
    clean = abs(together.record.voltage_v[0, 0]) < 1e-6
    # Noise of 0.02 V by a peak of 3.1 V, 20 % of it after the low-pass, in both: 0.2 %.
    assert misfit < (0.001 if clean else 0.004)
    # Nothing comes back from bars in contact.
    assert np.abs(faces.reflected.strain[pulse]).max() < (0.005 if clean else 0.015) * incident.max()


def test_plateau_is_half_the_striker_speed_by_c0(together: VirtualShot) -> None:
    # epsilon = V/(2 c0) for a striker of the bar's own impedance; the simulation's plateau is 0.998 of it
    # (data/README.md).
    strain = gauge_strain(together.record, together.rig, together.sheet.kind)
    pulses = find_pulses(strain, together.rig, together.sheet.specimen, DEFAULT)
    faces = carry_to_faces(pulses, together.rig, together.sheet, DEFAULT)
    # Middle of a plateau of 2 x 0.35 m/c0 = 136 us.
    plateau = faces.incident.strain[(faces.time_s > 40e-6) & (faces.time_s < 105e-6)].mean()
    assert plateau * 2 * together.c0 / 10.0 == pytest.approx(0.998, abs=0.004)
