"""Checks of the pulses in their windows: quiet on a good shot, speaking on the fault."""

from __future__ import annotations

import re

import pytest

from shpb.quantity import Quantity
from shpb.reduction import ShotResult, reduce
from shpb.settings import DEFAULT, Alignment
from shpb.trust.finding import Weight
from tests.synthetic import FaceStrains, gauge, record_of, rig, steel_bar
from tests.trust.shots import faces_of, finding, good_sheet, has, run


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


def test_feet_moved_further_than_physics_leaves_open(faces: FaceStrains, good: ShotResult) -> None:
    settings = DEFAULT.replaced(alignment=Alignment.FEET)
    assert not has(good, "tuned shift")
    assert finding(run(faces, settings=settings), "tuned shift").weight.gravity <= Weight.NOTE.gravity
    record = record_of(faces, rig(), noise_v=0.002)
    # 6 cm too far: 12 us of tuning hide it from R(t), not from this check (transit 1.4 us).
    wrong = rig(transmitted_gauge=gauge("B", 0.66))
    said = finding(reduce(record, wrong, good_sheet(), settings), "tuned shift")
    assert said.weight is Weight.REJECT
    assert "without it" in said.measured


def test_a_window_that_begins_on_the_pulse(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "window start").weight is Weight.FINE
    settings = DEFAULT.replaced(transmitted_window_s=(297e-6, 500e-6))  # well into its rise
    assert finding(run(faces, settings=settings), "window start").weight is Weight.REJECT


@pytest.mark.parametrize(
    ("window", "wave", "arrival_us"),
    [
        # The front is at the incident gauge at -50 us (at the face at 150 us, 1 m at 5000 m/s before): so the
        # reflected one is there at 350 us and the second loading at -50 + 2 x 1.6 m/5000 m/s = 590 us; the
        # transmitted one is at 270 us at its gauge, and its end reflection 2 x 0.6 m/5000 m/s = 240 us later.
        ({"incident_window_s": (-80e-6, 380e-6)}, "the reflected front", 350),
        ({"reflected_window_s": (310e-6, 640e-6)}, "the second loading", 590),
        ({"transmitted_window_s": (240e-6, 560e-6)}, "the end reflection of the transmitted bar", 510),
    ],
)
def test_a_window_by_hand_over_the_next_wave(
    faces: FaceStrains, window: dict[str, tuple[float, float]], wave: str, arrival_us: float
) -> None:
    short = rig(
        incident_bar=steel_bar(length_m=Quantity(1.6)), transmitted_bar=steel_bar(length_m=Quantity(1.2))
    )
    automatic = finding(run(faces, short), "other waves")
    assert automatic.weight is Weight.FINE
    assert "second loading" in automatic.measured
    said = finding(run(faces, short, settings=DEFAULT.replaced(**window)), "other waves")
    assert said.weight is Weight.REJECT
    found = re.search(rf"past {wave} at (\d+) us", said.measured)
    assert found is not None
    assert float(found[1]) == pytest.approx(arrival_us, abs=5)  # the front is picked within the rise


def test_a_window_by_hand_up_to_the_next_wave(faces: FaceStrains) -> None:
    short = rig(incident_bar=steel_bar(length_m=Quantity(1.6)))
    settings = DEFAULT.replaced(reflected_window_s=(310e-6, 585e-6))
    assert finding(run(faces, short, settings=settings), "other waves").weight is Weight.FINE
