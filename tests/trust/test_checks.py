"""Every check: quiet on a good shot, and speaking on the fault it is there for."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.reduction import ShotResult, reduce
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import DEFAULT, Alignment, Settings
from shpb.trust.finding import Finding, Verdict, Weight, verdict_of
from shpb.trust.judge import all_checks, check_name
from tests.synthetic import FaceStrains, copper, gauge, record_of, rig, sheet, steel_bar, uniform_plastic_shot

DT = 4e-7


def faces_of(**changes: float) -> FaceStrains:
    return uniform_plastic_shot(rig(), copper(), interval_s=DT, **changes)[0]


@pytest.fixture(scope="module")
def faces() -> FaceStrains:
    return faces_of()


def good_sheet(**changes: object) -> ShotSheet:
    values: dict[str, object] = {"striker_speed_m_s": Quantity(SPEED)}
    return sheet(copper(), **{**values, **changes})


# Pulse of 2e-3 and 100 us: impulse E A 2e-3 100 us = 12.57 N s, by the striker's mass 8000 x 0.3 x A = 0.754 kg.
SPEED = 200e9 * 2e-3 * 100e-6 / (8000 * 0.3)


def quantised(record: Record, lab: Rig) -> Record:
    low, high = lab.incident_gauge.scope_range_v or (-5.0, 5.0)
    step = (high - low) / 2 ** (lab.incident_gauge.scope_bits or 12)
    volts = np.clip(np.round(record.voltage_v / step) * step, low, high - step)
    return dataclasses.replace(record, voltage_v=volts)


def run(
    faces: FaceStrains, lab: Rig | None = None, shot: ShotSheet | None = None, settings: Settings = DEFAULT
) -> ShotResult:
    lab = lab or rig()
    return reduce(quantised(record_of(faces, lab, noise_v=0.004), lab), lab, shot or good_sheet(), settings)


def finding(result: ShotResult, name: str) -> Finding:
    return next(f for f in result.findings if f.check == name)


def test_a_good_shot_is_accepted_without_a_word(faces: FaceStrains) -> None:
    result = run(faces)
    assert result.verdict is Verdict.ACCEPT
    loud = {f.check for f in result.findings if f.weight is not Weight.FINE}
    # A flat pulse on a hardening specimen: the rate falls, which is a note and no fault.
    # It is in equilibrium by construction, sooner than waves could even out.
    assert loud <= {"rate constancy", "reverberations"}


def test_every_finding_is_complete(faces: FaceStrains) -> None:
    result = run(faces)
    names = {check_name(function) for function in all_checks()}
    assert {f.check for f in result.findings} <= names
    for f in result.findings:
        assert f.measured, f.check
        assert f.limit, f.check
        assert f.source, f.check
        assert f.action or f.weight is Weight.FINE, f.check


def test_checks_are_found_by_themselves() -> None:
    names = [check_name(function) for function in all_checks()]
    assert len(names) == len(set(names)) >= 18


def test_clipping() -> None:
    # Incident pulse of 2e-3 gives 5 x 200 x 2.1 x 1e-3 = 2.1 V; a range of 1.8 V cuts it off.
    lab = rig(incident_gauge=gauge("A", 1.0, scope_range_v=(-1.8, 1.8), scope_bits=12))
    result = run(faces_of(), lab)
    assert finding(result, "clipping").weight is Weight.REJECT
    assert "incident channel" in finding(result, "clipping").measured
    assert result.verdict is Verdict.REJECT


def test_clipping_without_a_stated_range(faces: FaceStrains) -> None:
    lab = rig(
        incident_gauge=gauge("A", 1.0, scope_range_v=None, scope_bits=None),
        transmitted_gauge=gauge("B", 0.6, scope_range_v=None, scope_bits=None),
    )
    record = record_of(faces, lab, noise_v=0.004)
    clipped = dataclasses.replace(record, voltage_v=np.maximum(record.voltage_v, -1.5))
    assert finding(reduce(clipped, lab, good_sheet()), "clipping").weight is Weight.REJECT
    assert finding(reduce(record, lab, good_sheet()), "clipping").weight is Weight.FINE


def test_few_digitiser_steps(faces: FaceStrains) -> None:
    # Transmitted pulse about 0.7 V on +-20 V and 8 bits: four steps of 0.16 V.
    lab = rig(transmitted_gauge=gauge("B", 0.6, scope_range_v=(-20.0, 20.0), scope_bits=8))
    said = finding(reduce(record_of(faces, lab, noise_v=0.004), lab, good_sheet()), "digitiser steps")
    assert said.weight is Weight.NOTE
    assert "transmitted pulse spans" in said.measured


def test_noise(faces: FaceStrains) -> None:
    lab = rig()
    loud = reduce(record_of(faces, lab, noise_v=0.08), lab, good_sheet())
    assert finding(loud, "noise").weight is Weight.NOTE


def test_sampling_rate_too_low() -> None:
    slow = uniform_plastic_shot(rig(), copper(), interval_s=2.5e-6)[0]
    result = reduce(record_of(slow, rig(), noise_v=0.002), rig(), good_sheet())
    assert finding(result, "sampling rate").weight is Weight.NOTE  # 0.4 MS/s for 117 kHz


def test_overlap() -> None:
    # 160 us between the fronts at 0.4 m, pulse of 100 us with flanks of 25 us and one of 190 us.
    lab = rig(incident_gauge=gauge("A", 0.4))
    assert finding(run(faces_of(), lab), "overlap").weight is Weight.FINE
    result = run(faces_of(duration_s=190e-6), lab)
    assert finding(result, "overlap").weight is Weight.REJECT


def test_feet_tell_a_wrong_distance(faces: FaceStrains) -> None:
    lab = rig()
    record = record_of(faces, lab, noise_v=0.002)
    # 6 cm at 5000 m/s are 12 us at the transmitted gauge; the limit is 3 us and a quarter of a rise of 20 us.
    wrong = rig(transmitted_gauge=gauge("B", 0.66))
    said = finding(reduce(record, wrong, good_sheet()), "feet")
    assert said.weight is Weight.NOTE
    assert "transmitted foot" in said.measured
    right = finding(reduce(record, lab, good_sheet()), "feet")
    assert right.weight is Weight.FINE
    # 15 cm: the pulse is there 30 us before anything is expected, and its foot in what should be quiet.
    worse = rig(transmitted_gauge=gauge("B", 0.75))
    assert finding(reduce(record, worse, good_sheet()), "quiet before pulse").weight is Weight.REJECT


def test_feet_moved_further_than_physics_leaves_open(faces: FaceStrains) -> None:
    settings = DEFAULT.replaced(alignment=Alignment.FEET)
    lab = rig()
    assert "tuned shift" not in {f.check for f in run(faces).findings}
    record = record_of(faces, lab, noise_v=0.002)
    # 6 cm too far: 12 us of tuning hide it from R(t), not from this check (transit 1.4 us).
    wrong = rig(transmitted_gauge=gauge("B", 0.66))
    said = finding(reduce(record, wrong, good_sheet(), settings), "tuned shift")
    assert said.weight is Weight.REJECT
    assert "without it" in said.measured


def test_a_window_that_begins_on_the_pulse(faces: FaceStrains) -> None:
    settings = DEFAULT.replaced(transmitted_window_s=(297e-6, 500e-6))  # well into its rise
    assert finding(run(faces, settings=settings), "window start").weight is Weight.REJECT
    assert finding(run(faces), "window start").weight is Weight.FINE


def test_incident_pulse_against_striker(faces: FaceStrains) -> None:
    assert finding(run(faces), "incident against striker").weight is Weight.FINE
    # A gain of twice the true one halves the strain.
    lab = rig()
    record = record_of(faces, lab, noise_v=0.002)
    wrong = rig(incident_gauge=gauge("A", 1.0, gain=Quantity(400.0)))
    said = finding(reduce(record, wrong, good_sheet()), "incident against striker")
    assert said.weight is Weight.REJECT
    assert "0.50" in said.measured or "0.49" in said.measured
    assert not [
        f for f in run(faces, shot=good_sheet(striker_speed_m_s=None)).findings if "striker" in f.check
    ]


def test_bar_yield(faces: FaceStrains) -> None:
    # 2e-3 x 200 GPa = 400 MPa and the ringing on it.
    assert finding(run(faces), "bar yield").weight is Weight.FINE
    soft = rig(incident_bar=steel_bar(yield_strength_pa=Quantity(420e6)))
    assert finding(run(faces, soft), "bar yield").weight is Weight.REJECT


def test_zero_line_of_a_loose_gauge(faces: FaceStrains) -> None:
    lab = rig()
    record = record_of(faces, lab, noise_v=0.002)
    # The incident trace steps by 0.2 V (a tenth of its peak) in the middle of its pulse and stays there.
    step = np.where(record.time_s > 0, 0.2, 0.0)
    loose = dataclasses.replace(record, voltage_v=record.voltage_v + np.stack([step, 0 * step]))
    result = reduce(loose, lab, good_sheet())
    assert finding(result, "zero line").weight is Weight.REJECT


def test_bending(faces: FaceStrains) -> None:
    lab = rig(incident_gauge=gauge("A1", 1.0, channels=("A1", "A2")))
    record = record_of(faces, rig(), noise_v=0.002)
    a, b = record.voltage_v
    sides = Record(
        voltage_v=np.stack([1.3 * a, 0.7 * a, b]), sample_interval_s=record.sample_interval_s,
        start_s=record.start_s, channels=("A1", "A2", "B"),
    )  # fmt: skip
    said = finding(reduce(sides, lab, good_sheet()), "bending")
    assert said.weight is Weight.NOTE
    assert "30" in said.measured or "29" in said.measured


def test_final_length(faces: FaceStrains) -> None:
    strain = run(faces).response.three_wave.strain.max()
    for length, weight in ((0.005 * (1 - strain), Weight.FINE), (0.005 * (1 - strain + 0.04), Weight.NOTE),
                           (0.005 * (1 - strain + 0.08), Weight.REJECT)):  # fmt: skip
        shot = sheet(copper(length_after_m=Quantity(length)), striker_speed_m_s=Quantity(SPEED))
        assert finding(run(faces, shot=shot), "final length").weight is weight


def test_balances_of_a_front_force_out_by_a_tenth(faces: FaceStrains) -> None:
    lab = rig()
    record = record_of(faces, lab, noise_v=0.002)
    wrong = rig(transmitted_gauge=gauge("B", 0.6, gauge_factor=Quantity(2.1 / 1.35)))
    result = reduce(record, wrong, good_sheet())
    assert finding(result, "impulse ratio").weight is Weight.NOTE
    assert "1.3" in finding(result, "impulse ratio").measured
    assert finding(result, "work balance").weight is Weight.NOTE
    assert result.verdict is Verdict.REJECT  # not in equilibrium


def test_specimen_size(faces: FaceStrains) -> None:
    thin = sheet(copper(length_m=Quantity(0.002)), striker_speed_m_s=Quantity(SPEED))
    assert finding(run(faces, shot=thin), "slenderness").weight is Weight.NOTE
    # 17.5 mm on a 20 mm bar grows beyond 90 % of it at a strain of 0.15 and more.
    wide = sheet(copper(diameter_m=Quantity(0.0175)), striker_speed_m_s=Quantity(SPEED))
    assert finding(run(faces, shot=wide), "barrelling room").weight is not Weight.FINE


def test_reverberations_are_counted_in_transits(faces: FaceStrains) -> None:
    result = run(faces)
    start = result.response.equilibrium.start
    assert start is not None
    transit = 0.005 / np.sqrt(120e9 / 8900)
    assert result.response.equilibrium.reverberations == pytest.approx(
        result.response.time_s[start] / transit
    )
    assert "transits" in finding(result, "reverberations").measured


def test_gravest_finding_decides() -> None:
    def of(*weights: Weight) -> tuple[Finding, ...]:
        return tuple(Finding(check="x", weight=w, measured="m", limit="l", source="s") for w in weights)

    assert verdict_of(()) is Verdict.ACCEPT
    assert verdict_of(of(Weight.FINE, Weight.NOTE)) is Verdict.ACCEPT
    assert verdict_of(of(Weight.NOTE, Weight.RESTRICT)) is Verdict.RESTRICT
    assert verdict_of(of(Weight.RESTRICT, Weight.REJECT)) is Verdict.REJECT


def test_something_must_confirm_the_scale(faces: FaceStrains) -> None:
    assert finding(run(faces), "absolute calibration").weight is Weight.FINE
    said = finding(run(faces, shot=good_sheet(striker_speed_m_s=None)), "absolute calibration")
    assert said.weight is Weight.NOTE


def test_a_first_slope_above_the_modulus(faces: FaceStrains) -> None:
    assert finding(run(faces), "first slope").weight is Weight.FINE
    # A modulus of 10 GPa stated for a specimen whose curve rises far more steeply.
    soft = sheet(copper(young_modulus_pa=Quantity(10e9)), striker_speed_m_s=Quantity(SPEED))
    assert finding(run(faces, shot=soft), "first slope").weight is Weight.REJECT


def test_what_counts_ends_at_the_bars_edge(faces: FaceStrains) -> None:
    # 19 mm on 20 mm: over the edge from a true strain of 2 ln(20/19) = 0.1026 on.
    wide = sheet(copper(diameter_m=Quantity(0.019)), striker_speed_m_s=Quantity(SPEED))
    result = run(faces, shot=wide)
    assert finding(result, "barrelling room").weight is Weight.RESTRICT
    assert result.response.strain_span is not None
    assert result.response.strain_span[1] == pytest.approx(2 * np.log(20 / 19), abs=0.003)


def test_samples_the_scope_marked(faces: FaceStrains) -> None:
    lab = rig()
    record = dataclasses.replace(record_of(faces, lab), remarks=("channel 'A': 2 samples over range",))
    assert finding(reduce(record, lab, good_sheet()), "over range").weight is Weight.REJECT
