"""Finding the three pulses, and every way a record can be unusable."""

from __future__ import annotations

import dataclasses
import pickle

import numpy as np
import pytest

from shpb.pulse.arrivals import geometric_arrivals
from shpb.pulse.front import UnusableShotError
from shpb.pulse.pulse import Pulses
from shpb.pulse.pulses import find_pulses
from shpb.pulse.strain import gauge_strain
from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.rig.gauge import Arrangement, TestKind
from shpb.rig.rig import Rig
from shpb.settings import DEFAULT, Settings
from tests.synthetic import FaceStrains, copper, gauge, record_of, rig, uniform_plastic_shot


@pytest.fixture(scope="module")
def faces() -> FaceStrains:
    return uniform_plastic_shot(rig(), copper())[0]


def pulses_of(record: Record, lab: Rig | None = None, settings: Settings = DEFAULT) -> Pulses:
    lab = lab or rig()
    return find_pulses(gauge_strain(record, lab, TestKind.COMPRESSION), lab, copper(), settings)


def altered(record: Record, voltage_v: np.ndarray) -> Record:
    return dataclasses.replace(record, voltage_v=np.ascontiguousarray(voltage_v))


def test_arrivals_follow_from_distances_and_speeds() -> None:
    lab = rig()
    at = geometric_arrivals(1e-3, lab, copper())
    # x_i = 1 m, x_t = 0.6 m, bars of 2 m, c0 = 5000 m/s, specimen 5 mm at sqrt(120e9/8900) = 3672 m/s.
    assert at.reflected_s == pytest.approx(1e-3 + 400e-6)
    assert at.transmitted_s == pytest.approx(1e-3 + 320e-6)
    assert at.transmitted_through_specimen_s - at.transmitted_s == pytest.approx(0.005 / 3671.94, rel=1e-5)
    assert at.second_loading_s == pytest.approx(1e-3 + 800e-6)
    assert at.end_reflection_s == pytest.approx(1e-3 + 320e-6 + 560e-6)


def test_windows_hold_one_wave_each(faces: FaceStrains) -> None:
    pulses = pulses_of(record_of(faces, rig(), noise_v=0.002))
    at = pulses.arrivals
    assert pulses.incident.window_s[1] == pulses.reflected.window_s[0] < at.reflected_s
    assert pulses.reflected.window_s[1] <= at.second_loading_s
    assert pulses.transmitted.window_s[0] < at.transmitted_s < pulses.transmitted.window_s[1]
    assert not any(pulse.set_by_hand for pulse in pulses)
    # In the record the front passes the incident gauge 200 us before the face: -200 + 350 - 200 us.
    assert pulses.incident.foot is not None
    assert pulses.incident.foot.time_s == pytest.approx(-50e-6, abs=6e-6)
    assert [pulse.foot.sign for pulse in pulses if pulse.foot] == [1, -1, 1]


def test_strain_at_the_gauge_is_that_of_the_pulse(faces: FaceStrains) -> None:
    pulses = pulses_of(record_of(faces, rig(), noise_v=0.002))
    # Impulse does not disperse: the sum of each pulse is that at the face.
    interval = pulses.sample_interval_s
    for pulse, face in zip(pulses, (faces.incident, faces.reflected, faces.transmitted), strict=True):
        expected = face.sum() * (faces.time_s[1] - faces.time_s[0])
        assert pulse.strain.sum() * interval == pytest.approx(expected, rel=5e-3)


@pytest.mark.parametrize("arrangement", list(Arrangement))
@pytest.mark.parametrize("kind", list(TestKind))
@pytest.mark.parametrize("tension_sign", [1, -1])
def test_every_wiring_comes_out_loading_positive(
    faces: FaceStrains, arrangement: Arrangement, kind: TestKind, tension_sign: int
) -> None:
    lab = rig(
        incident_gauge=gauge("A", 1.0, arrangement=arrangement, tension_sign=tension_sign),
        transmitted_gauge=gauge("B", 0.6, arrangement=arrangement, tension_sign=-tension_sign),
    )
    record = record_of(faces, lab, kind)
    pulses = find_pulses(gauge_strain(record, lab, kind), lab, copper(), DEFAULT)
    assert pulses.incident.strain.max() == pytest.approx(2.0e-3, rel=0.15)
    assert pulses.transmitted.strain.max() > 4e-4
    assert pulses.reflected.strain.min() < -1e-3


def test_each_side_on_its_own_channel(faces: FaceStrains) -> None:
    lab = rig()
    record = record_of(faces, lab)
    # The axial signal on both sides, 20 % of it as bending: one side more, the other less.
    a, b = record.voltage_v
    both = Record(
        voltage_v=np.stack([1.2 * a, 0.8 * a, b]),
        sample_interval_s=record.sample_interval_s,
        start_s=record.start_s,
        channels=("A1", "A2", "B"),
    )
    sides = dataclasses.replace(lab, incident_gauge=gauge("A1", 1.0, channels=("A1", "A2")))
    strain = gauge_strain(both, sides, TestKind.COMPRESSION)
    alone = gauge_strain(record, lab, TestKind.COMPRESSION)
    # Each bridge bends its own way (k e/2 of the strain): 0.01 % of the peak is left of it.
    np.testing.assert_allclose(strain.incident.axial, alone.incident.axial, atol=3e-7)
    assert strain.incident.bending is not None
    np.testing.assert_allclose(strain.incident.bending, 0.2 * alone.incident.axial, atol=5e-6)


def test_windows_and_feet_by_hand_stand_beside_the_automatic_ones(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    own = pulses_of(record)
    settings = DEFAULT.replaced(reflected_window_s=(345e-6, 500e-6), transmitted_foot_s=275e-6)
    pulses = pulses_of(record, settings=settings)
    assert pulses.reflected.window_s == (345e-6, 500e-6)
    assert pulses.reflected.automatic_window_s == own.reflected.window_s
    assert pulses.reflected.set_by_hand
    assert not pulses.incident.set_by_hand
    assert pulses.transmitted.foot is not None
    assert pulses.transmitted.foot.time_s == 275e-6
    assert pulses.transmitted.automatic_foot == own.transmitted.foot


def test_a_tail_under_the_reflected_pulse_is_measured(faces: FaceStrains) -> None:
    assert abs(pulses_of(record_of(faces, rig(), noise_v=0.002)).tail_at_reflection) < 0.01
    longer = uniform_plastic_shot(rig(), copper(), duration_s=190e-6)[0]
    # A gauge at 0.4 m leaves only 160 us between the fronts.
    near = rig(incident_gauge=gauge("A", 0.4))
    assert pulses_of(record_of(longer, near, noise_v=0.002), near).tail_at_reflection > 0.5


# --- unusable records --------------------------------------------------------------------------


def test_swapped_channels(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    with pytest.raises(UnusableShotError, match="the channels are swapped"):
        pulses_of(altered(record, record.voltage_v[::-1]))


def test_inverted_polarity(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    with pytest.raises(UnusableShotError, match="polarity is inverted"):
        pulses_of(altered(record, -record.voltage_v))


@pytest.mark.parametrize("noise_v", [0.0, 0.002])
def test_dead_incident_channel(faces: FaceStrains, noise_v: float) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    dead = np.random.default_rng(3).normal(0, noise_v, record.samples)
    with pytest.raises(UnusableShotError, match="incident gauge: there is no pulse above the noise"):
        pulses_of(altered(record, np.stack([dead, record.voltage_v[1]])))


def test_dead_or_inverted_transmitted_channel(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    dead = np.random.default_rng(3).normal(0, 0.002, record.samples)
    with pytest.raises(UnusableShotError, match="transmitted gauge: there is no pulse above the noise"):
        pulses_of(altered(record, np.stack([record.voltage_v[0], dead])))
    with pytest.raises(
        UnusableShotError, match="transmitted gauge: the transmitted pulse comes out negative"
    ):
        pulses_of(altered(record, np.stack([record.voltage_v[0], -record.voltage_v[1]])))


def test_record_that_begins_on_the_pulse(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    late = int(152e-6 / record.sample_interval_s)
    with pytest.raises(UnusableShotError, match="no quiet time before"):
        pulses_of(altered(record, record.voltage_v[:, late:]))


def test_record_that_ends_before_the_pulses(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    early = int(500e-6 / record.sample_interval_s)
    with pytest.raises(UnusableShotError, match="the record ends at 300 us, but the reflected pulse"):
        pulses_of(altered(record, record.voltage_v[:, :early]))


def test_a_window_that_holds_nothing(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    with pytest.raises(UnusableShotError, match="window from 5000.0 to 5001.0 us holds 0 samples"):
        pulses_of(record, settings=DEFAULT.replaced(incident_window_s=(5e-3, 5.001e-3)))


def test_a_channel_that_is_not_there(faces: FaceStrains) -> None:
    lab = rig(incident_gauge=gauge("C", 1.0))
    record = record_of(faces, rig())
    with pytest.raises(Exception, match="no channel 'C'; the record has 1 'A', 2 'B'"):
        gauge_strain(record, lab, TestKind.COMPRESSION)


def test_a_nan_names_its_sample(faces: FaceStrains) -> None:
    record = record_of(faces, rig())
    volts = record.voltage_v.copy()
    volts[0, 77] = np.nan
    with pytest.raises(Exception, match="first at sample 77: 1 of"):
        gauge_strain(altered(record, volts), rig(), TestKind.COMPRESSION)


def test_the_error_survives_a_worker_process() -> None:
    error = UnusableShotError("what", where="where", mend="mend", check="polarity")
    again = pickle.loads(pickle.dumps(error))
    assert (str(again), again.check) == (str(error), "polarity")


def test_gauge_factor_of_long_leads() -> None:
    station = gauge("A", 1.0, resistance_ohm=Quantity(120.0), lead_resistance_ohm=Quantity(1.2))
    # k R/(R + R_lead): 1 % of lead resistance costs 1 % of sensitivity (circuit theory).
    assert station.effective_gauge_factor == pytest.approx(2.1 * 120 / 121.2)


def test_a_wrong_unit_is_not_called_a_wrong_polarity(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    with pytest.raises(UnusableShotError, match="Check the unit of the voltages"):
        pulses_of(altered(record, 1000 * record.voltage_v))


def test_a_foot_outside_its_window(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    with pytest.raises(
        UnusableShotError, match="transmitted foot set by hand, 9999.0 us, lies outside its window"
    ):
        pulses_of(record, settings=DEFAULT.replaced(transmitted_foot_s=9999e-6))
