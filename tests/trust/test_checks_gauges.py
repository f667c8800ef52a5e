"""Checks of gauges and bars: quiet on a good shot, speaking on the fault."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.limits import Limits
from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.reduction import ShotResult, reduce
from shpb.settings import DEFAULT
from shpb.trust.finding import Weight
from tests.synthetic import FaceStrains, gauge, record_of, rig, steel_bar
from tests.trust.shots import finding, good_sheet, has, run, specimen_of


def test_incident_pulse_against_striker(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "incident against striker").weight is Weight.FINE
    # A gain of twice the true one halves the strain.
    record = record_of(faces, rig(), noise_v=0.002)
    wrong = rig(incident_gauge=gauge("A", 1.0, gain=Quantity(400.0)))
    said = finding(reduce(record, wrong, good_sheet()), "incident against striker")
    assert said.weight is Weight.REJECT
    assert "0.50" in said.measured or "0.49" in said.measured
    assert not has(run(faces, shot=good_sheet(striker_speed_m_s=None)), "incident against striker")


@pytest.mark.parametrize(
    ("scale", "weight"), [(1.0, Weight.FINE), (1.15, Weight.NOTE), (2.0, Weight.REJECT), (0.5, Weight.REJECT)]
)
def test_momentum_balance_of_a_gauge_out_of_scale(faces: FaceStrains, scale: float, weight: Weight) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    wrong = rig(transmitted_gauge=gauge("B", 0.6, gauge_factor=Quantity(2.1 / scale)))
    said = finding(reduce(record, wrong, good_sheet()), "momentum balance")
    assert said.weight is weight


def test_momentum_balance_counts_the_specimens_own_momentum(faces: FaceStrains) -> None:
    # In equilibrium by construction F_in = F_out, so all that is missing is the specimen's own momentum:
    # rho A L (v_in + v_out)/2 = 3.495 g at the velocities where the loading ends.
    result = run(faces)
    response, last = result.response, result.response.loading[1] - 1
    velocity = 0.5 * (response.motion.velocity_in_m_s[last] + response.motion.velocity_out_m_s[last])
    own = 8900 * np.pi / 4 * 0.01**2 * 0.005 * float(velocity)
    said = finding(result, "momentum balance").measured
    assert f"momentum of the specimen {own:.2g} N s" in said
    unknown = finding(run(faces, shot=good_sheet(specimen_of(density_kg_m3=None))), "momentum balance")
    assert "not known (no density)" in unknown.measured
    assert unknown.weight is Weight.FINE


def test_something_must_confirm_the_scale(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "absolute calibration").weight is Weight.FINE
    said = finding(run(faces, shot=good_sheet(striker_speed_m_s=None)), "absolute calibration")
    assert said.weight is Weight.NOTE


@pytest.mark.parametrize(
    ("calibrated", "fired", "weight", "says"),
    [
        ("2031-02-03", "2031-02-03", Weight.FINE, "0 days after"),
        ("2031-02-03", "2032-02-03", Weight.FINE, "365 days after"),
        ("2031-02-03", "2032-02-04", Weight.NOTE, "366 days after"),
        ("2031-02-03", "2031-02-02T10:15:00", Weight.NOTE, "1 days before"),
        ("", "2031-02-02", Weight.NOTE, "no calibration_date in the rig file"),
        ("2031-02-03", "", Weight.NOTE, "no date in the shot sheet"),
        ("2031-02-03", "17 Feb 2031", Weight.NOTE, "date in the shot sheet is no year-month-day"),
    ],
)
def test_calibration_date(faces: FaceStrains, calibrated: str, fired: str, weight: Weight, says: str) -> None:
    result = run(faces, rig(calibration_date=calibrated), good_sheet(date=fired))
    said = finding(result, "calibration date")
    assert said.weight is weight
    assert says in said.measured


def test_a_lab_that_calibrates_every_month(faces: FaceStrains) -> None:
    settings = DEFAULT.replaced(limits=Limits(calibration_days=13))
    said = finding(run(faces, settings=settings), "calibration date")  # 3 to 17 February
    assert said.weight is Weight.NOTE
    assert said.source == "set by this lab (usual: 365 days, common practice) ([limits] calibration_days)"


def test_bandwidth(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "bandwidth").weight is Weight.FINE
    # Cut-off 0.234 x 5000 m/s / 10 mm = 117 kHz. A gauge of 15 mm: sinc(117e3 x 0.015/5000) = sinc(0.351) = 0.809.
    long = rig(incident_gauge=gauge("A", 1.0, length_m=Quantity(0.015)))
    said = finding(run(faces, long), "bandwidth")
    assert said.weight is Weight.NOTE
    assert "incident station loses 19.1 %" in said.measured
    slow = rig(transmitted_gauge=gauge("B", 0.6, bandwidth_hz=Quantity(117e3)))
    said = finding(run(faces, slow), "bandwidth")  # the half-power point
    assert "transmitted station loses 29.3 %" in said.measured


def test_bar_yield(faces: FaceStrains, good: ShotResult) -> None:
    # 2e-3 x 200 GPa = 400 MPa and the ringing on it.
    assert finding(good, "bar yield").weight is Weight.FINE
    soft = rig(incident_bar=steel_bar(yield_strength_pa=Quantity(420e6)))
    assert finding(run(faces, soft), "bar yield").weight is Weight.REJECT


def test_bending(faces: FaceStrains, good: ShotResult) -> None:
    assert not has(good, "bending")
    lab = rig(incident_gauge=gauge("A1", 1.0, channels=("A1", "A2")))
    record = record_of(faces, rig(), noise_v=0.002)
    a, b = record.voltage_v
    for share, weight in ((0.05, Weight.FINE), (0.30, Weight.NOTE)):
        sides = Record(
            voltage_v=np.stack([(1 + share) * a, (1 - share) * a, b]), channels=("A1", "A2", "B"),
            sample_interval_s=record.sample_interval_s, start_s=record.start_s,
        )  # fmt: skip
        said = finding(reduce(sides, lab, good_sheet()), "bending")
        assert said.weight is weight
        percent = float(said.measured.split("bending is ")[1].split(" %")[0])
        assert percent == pytest.approx(100 * share, abs=1)
        # Each pulse that the station sees has its own.
        for pulse in ("incident", "reflected"):
            percent = float(said.measured.partition("(")[2].split(f"{pulse} ")[1].split(" %")[0])
            assert percent == pytest.approx(100 * share, abs=1)


def test_bar_temperature(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "bar temperature").weight is Weight.FINE
    for temperature, weight in ((370.0, Weight.FINE), (380.0, Weight.NOTE), (200.0, Weight.NOTE)):
        hot = good_sheet(temperature_k=Quantity(temperature))
        assert finding(run(faces, shot=hot), "bar temperature").weight is weight
        known = dataclasses.replace(
            hot,
            incident_face_temperature_k=Quantity(310.0),
            transmitted_face_temperature_k=Quantity(305.0),
        )
        assert finding(run(faces, shot=known), "bar temperature").weight is Weight.FINE
