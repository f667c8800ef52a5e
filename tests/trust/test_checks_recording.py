"""Checks of the record: quiet on a good shot, speaking on the fault."""

from __future__ import annotations

import dataclasses

import numpy as np

from shpb.limits import Limits
from shpb.reduction import ShotResult, reduce
from shpb.settings import DEFAULT
from shpb.trust.finding import Verdict, Weight
from tests.synthetic import FaceStrains, copper, gauge, record_of, rig, uniform_plastic_shot
from tests.trust.shots import faces_of, finding, good_sheet, has, run


def test_clipping(good: ShotResult) -> None:
    assert finding(good, "clipping").weight is Weight.FINE
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
    # The flat top of a pulse of 100 us is shorter than 1000 samples.
    lenient = DEFAULT.replaced(limits=Limits(flat_samples=1000))
    assert finding(reduce(clipped, lab, good_sheet(), lenient), "clipping").weight is Weight.FINE


def test_samples_the_scope_marked(faces: FaceStrains, good: ShotResult) -> None:
    assert not has(good, "over range")
    lab = rig()
    record = dataclasses.replace(record_of(faces, lab), remarks=("channel 'A': 2 samples over range",))
    assert finding(reduce(record, lab, good_sheet()), "over range").weight is Weight.REJECT


def test_few_digitiser_steps(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "digitiser steps").weight is Weight.FINE
    # Transmitted pulse about 0.7 V on +-20 V and 8 bits: four steps of 0.16 V.
    lab = rig(transmitted_gauge=gauge("B", 0.6, scope_range_v=(-20.0, 20.0), scope_bits=8))
    said = finding(reduce(record_of(faces, lab, noise_v=0.004), lab, good_sheet()), "digitiser steps")
    assert said.weight is Weight.NOTE
    assert "transmitted pulse spans" in said.measured


def test_noise(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "noise").weight is Weight.FINE
    lab = rig()
    loud = reduce(record_of(faces, lab, noise_v=0.08), lab, good_sheet())
    assert finding(loud, "noise").weight is Weight.NOTE


def test_sampling_rate_too_low(good: ShotResult) -> None:
    assert finding(good, "sampling rate").weight is Weight.FINE
    slow = uniform_plastic_shot(rig(), copper(), interval_s=2.5e-6)[0]
    result = reduce(record_of(slow, rig(), noise_v=0.002), rig(), good_sheet())
    assert finding(result, "sampling rate").weight is Weight.NOTE  # 0.4 MS/s for 117 kHz


def test_zero_line_of_a_loose_gauge(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "zero line").weight is Weight.FINE
    record = record_of(faces, rig(), noise_v=0.002)
    # The incident trace steps by 0.2 V (a tenth of its peak) in the middle of its pulse and stays there.
    step = np.where(record.time_s > 0, 0.2, 0.0)
    loose = dataclasses.replace(record, voltage_v=record.voltage_v + np.stack([step, 0 * step]))
    assert finding(reduce(loose, rig(), good_sheet()), "zero line").weight is Weight.REJECT


def test_a_wave_where_it_should_be_quiet(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "quiet before pulse").weight is Weight.FINE
    record = record_of(faces, rig(), noise_v=0.002)
    # 15 cm too far: the pulse is there 30 us before anything is expected, its foot in what should be quiet.
    wrong = rig(transmitted_gauge=gauge("B", 0.75))
    said = finding(reduce(record, wrong, good_sheet()), "quiet before pulse")
    assert said.weight is Weight.REJECT
    assert "transmitted" in said.measured


def test_a_trace_that_does_not_come_back(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "zero after shot").weight is Weight.FINE
    record = record_of(faces, rig(), noise_v=0.002)
    # The transmitted pulse is at its gauge about 320 us after the incident one: a step of 0.4 V in it that stays.
    late = np.where(record.time_s > 380e-6, -0.4, 0.0)
    loose = dataclasses.replace(record, voltage_v=record.voltage_v + np.stack([0 * late, late]))
    said = finding(reduce(loose, rig(), good_sheet()), "zero after shot")
    assert said.weight is Weight.NOTE
    assert "transmitted" in said.measured


def test_a_record_that_ends_in_the_loading(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "record end").weight is Weight.FINE
    # The reflected pulse runs from 350 to 450 us on the record's clock: it is cut off after 90 us.
    cut = DEFAULT.replaced(reflected_window_s=(310e-6, 440e-6))
    assert finding(run(faces, settings=cut), "record end").weight is Weight.NOTE
