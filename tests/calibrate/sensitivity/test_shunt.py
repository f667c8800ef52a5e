"""Shunt calibration. Truth: published resistor values, the divider formula of the bridge, planted gains."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from shpb.calibrate.sensitivity.shunt import ShuntCheck, shunt, shunt_output_v, simulated_strain
from shpb.calibrate.sensitivity.step import step_in
from shpb.calibrate.session import ShotKind
from shpb.errors import InputError
from shpb.rig.rig import Rig
from tests.calibrate.fired import Q, fired, gauge, lab, renamed, shunted

STATION = "incident_gauge"


def with_gain(factor: float, rig: Rig | None = None) -> Rig:
    rig = rig or lab()
    return replace(rig, incident_gauge=replace(rig.incident_gauge, gain=Q(200.0 * factor)))


def check_of(true: Rig, *ohm: float, stated: Rig | None = None, **how: object) -> ShuntCheck:
    records = [shunted(true, f"S{n}", STATION, one, seed=n, **how) for n, one in enumerate(ohm)]  # type: ignore[arg-type]
    (check,) = shunt(records, stated or lab()).checks
    return check


# --- what a resistor simulates ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("resistance", "ohm", "microstrain"),
    [
        (120, 59_880, 1000), (120, 119_880, 500), (120, 11_880, 5000), (350, 174_650, 1000), (350, 349_650, 500),
        (350, 87_150, 2000),
    ],
)  # fmt: skip
def test_published_resistors(resistance: float, ohm: float, microstrain: float) -> None:
    # Precision resistors for k = 2.00: tables of recorder and gauge makers, named in tests/published/reference/
    # shunt_calibration.csv; R/(k (R + Rc)) is Vishay Micro-Measurements Tech Note TN-514, equation 514.7.
    station = gauge("CH1", 0.9, resistance_ohm=Q(resistance))
    assert 1e6 * simulated_strain(station, ohm) == pytest.approx(microstrain, rel=1e-6)


@pytest.mark.parametrize("ohm", [174_650.0, 17_150.0])
def test_output_is_that_of_the_divider(ohm: float) -> None:
    # Kirchhoff: one arm of four of 350 ohm is 350 || Rc, supply 5 V, gain 200.
    arm = 350 * ohm / (350 + ohm)
    volts = 200 * 5.0 * (0.5 - arm / (arm + 350))
    assert shunt_output_v(gauge("CH1", 0.9), ohm) == pytest.approx(volts, rel=1e-12)
    linear = gauge("CH1", 0.9, linear_amplifier=True)
    assert shunt_output_v(linear, ohm) == pytest.approx(200 * 5.0 * 350 / (350 + ohm) / 4, rel=1e-12)


def test_lead_wires_lower_the_gauge_factor() -> None:
    # k R/(R + R_lead) with the resistor at the amplifier, across gauge and leads: (R + R_l)^2/(k R (R + R_l + Rc)).
    station = gauge("CH1", 0.9, lead_resistance_ohm=Q(3.5))
    assert simulated_strain(station, 100_000) == pytest.approx(353.5**2 / (2.0 * 350 * 100_353.5), rel=1e-12)
    assert simulated_strain(station, 100_000) > 1.015 * simulated_strain(gauge("CH1", 0.9), 100_000)
    rig = lab(incident_gauge=station)
    found = shunt([shunted(rig, "S1", STATION, 100_000.0)], rig)
    assert found.checks[0].mean.value == pytest.approx(1.0, abs=1e-3)
    (remark,) = found.remarks
    assert "across gauge and lead wires" in remark


# --- gains ------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "how",
    [
        {"noise_v": 0.0, "hum_v": 0.0, "drift_v_per_s": 0.0},
        {},
        {"hum_v": 0.05, "drift_v_per_s": 0.5},
        {"on_s": (0.05, 2.0)},  # switched on and left on
    ],
    ids=["clean", "usual", "hum and drift", "one edge"],
)
def test_the_planted_gain_is_found(how: dict[str, object]) -> None:
    check = check_of(with_gain(1.03), 174_650.0, **how)
    (point,) = check.points
    # A step of 0.25 V; codes of 0.6 mV and the rest leave 0.1 % at most.
    assert point.gain_ratio == pytest.approx(1.03, abs=1e-3)
    assert abs(point.gain_ratio - 1.03) < 3 * point.u_own
    assert point.expected == pytest.approx(1e-3, rel=1e-9)
    on = slice(*point.on[0])
    assert np.median(point.strain[on]) == pytest.approx(1.03e-3, rel=0.02)
    # Hum and all: beyond the uncertainty of resistor and gauge nothing is claimed.
    assert point.terms[f"resistance of {STATION}"] == pytest.approx(-0.001 * 174_650 / 175_000, rel=1e-6)


def test_several_resistors_make_a_line_through_the_origin() -> None:
    check = check_of(with_gain(0.98), 349_650.0, 174_650.0, 87_150.0, 34_650.0)
    assert check.mean.value == pytest.approx(0.98, abs=5e-4)
    assert not check.mean.contradicted
    assert np.abs(check.tests.residuals).max() < 2e-3
    assert check.tests.intercept == pytest.approx(0.0, abs=3e-6)
    assert shunt([], lab()).checks == ()


def test_a_resistor_ten_times_off_is_named() -> None:
    records = [
        shunted(lab(), "S1", STATION, 17_465.0, said_ohm=174_650.0),
        shunted(lab(), "S2", STATION, 87_150.0),
        shunted(lab(), "S3", STATION, 349_650.0),
    ]
    found = shunt(records, lab())
    (said,) = found.findings
    assert said.grave
    assert "S1 (174,650 ohm) lies off most" in said.measured
    assert found.checks[0].points[0].gain_ratio == pytest.approx(10.0, rel=0.05)


def test_a_step_of_the_wrong_sign_is_a_finding() -> None:
    one = shunted(lab(), "S1", STATION, 174_650.0)
    turned = replace(one, record=replace(one.record, voltage_v=-one.record.voltage_v))
    found = shunt([turned], lab())
    assert [said.check for said in found.findings] == ["sign of the shunt"]
    assert found.checks[0].mean.value == pytest.approx(1.0, abs=1e-3)
    assert not shunt([one], lab()).findings


# --- steps ------------------------------------------------------------------------------------------------------------


def test_a_step_among_noise_hum_and_drift() -> None:
    random = np.random.default_rng(5)
    time = 40e-6 * np.arange(2500.0)
    on = (time > 0.031) & (time < 0.072)
    trace = 0.3 - 0.25 * on + 0.05 * np.sin(2 * np.pi * 60 * time + 1) + 0.4 * time
    step = step_in(trace + 0.002 * random.standard_normal(time.size), 40e-6)
    assert step is not None
    assert step.height == pytest.approx(-0.25, abs=2e-3)
    assert abs(step.height + 0.25) < 4 * step.u_height
    ((first, last),) = step.on
    assert first * 40e-6 == pytest.approx(0.031, abs=5e-4)
    assert last * 40e-6 == pytest.approx(0.072, abs=5e-4)


@pytest.mark.parametrize("seed", range(5))
def test_no_step_in_noise_hum_and_drift(seed: int) -> None:
    random = np.random.default_rng(seed)
    time = 40e-6 * np.arange(2500.0)
    trace = (
        0.05 * np.sin(2 * np.pi * 50 * time + seed) + 0.4 * time + 0.01 * random.standard_normal(time.size)
    )
    assert step_in(trace, 40e-6) is None
    assert step_in(0.01 * random.standard_normal(2500), 40e-6) is None
    assert step_in(np.zeros(2500), 40e-6) is None


# --- bad input --------------------------------------------------------------------------------------------------------


def test_no_step_in_the_record() -> None:
    one = shunted(lab(), "S1", STATION, 174_650.0, on_s=(1.0, 2.0))
    with pytest.raises(
        InputError, match=r"shot S1 \(shunt\): the record shows no step at the incident gauge"
    ):
        shunt([one], lab())


def test_the_other_bridge_was_shunted() -> None:
    one = shunted(lab(), "S1", STATION, 174_650.0)
    other = replace(one, shot=replace(one.shot, station="transmitted_gauge"))
    with pytest.raises(InputError, match="no step at the transmitted gauge"):
        shunt([other], lab())


def test_a_fired_shot_called_shunt() -> None:
    one = shunted(lab(), "S1", STATION, 174_650.0)
    pulse = replace(fired(lab(), "S1", ShotKind.BARS_TOGETHER), shot=one.shot)
    with pytest.raises(InputError, match=r"the step lasts \d+ us, as the pulse of a fired shot may"):
        shunt([pulse], lab())


def test_what_must_be_stated() -> None:
    one = shunted(lab(), "S1", STATION, 174_650.0)
    with pytest.raises(InputError, match="its resistor is not stated"):
        shunt([replace(one, shot=replace(one.shot, shunt_ohm=None))], lab())
    with pytest.raises(
        InputError, match="the rig has no station 'incident_gauge_2'. Name one of incident_gauge"
    ):
        shunt([replace(one, shot=replace(one.shot, station="incident_gauge_2"))], lab())
    bare = lab(incident_gauge=gauge("CH1", 0.9, resistance_ohm=None))
    with pytest.raises(
        InputError, match=r"resistance of the incident gauge is not stated. Add resistance_ohm"
    ):
        shunt([one], bare)
    with pytest.raises(InputError, match=r"no channel 'CH1'.*is it a record of this rig"):
        shunt([renamed(one, CH1="left")], lab())
