"""Checks of the specimen: quiet on a good shot, speaking on the fault."""

from __future__ import annotations

import math

import numpy as np
import pytest

from shpb.quantity import Quantity
from shpb.reduction import ShotResult
from shpb.rig.gauge import TestKind
from shpb.trust.finding import Weight
from tests.synthetic import FaceStrains, rig
from tests.trust.shots import finding, good_sheet, has, run, specimen_of


@pytest.mark.parametrize(
    ("factor", "weight"),
    [
        (1.0, Weight.FINE),
        (0.96, Weight.FINE),
        (0.93, Weight.NOTE),
        (1.07, Weight.NOTE),
        (0.81, Weight.REJECT),
    ],
)
def test_specimen_mass(faces: FaceStrains, factor: float, weight: Weight) -> None:
    # 8900 kg/m3 x pi/4 (10 mm)^2 x 5 mm = 3.495 g; a diameter of 9 mm read as 10 mm gives 0.81 of it.
    mass = Quantity(factor * 8900 * math.pi / 4 * 0.01**2 * 0.005)
    said = finding(run(faces, shot=good_sheet(specimen_of(mass_kg=mass))), "specimen mass")
    assert said.weight is weight
    assert "3.495 g from density and size" in said.measured


def test_no_mass_no_word(good: ShotResult) -> None:
    assert not has(good, "specimen mass")


def test_slenderness(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "slenderness").weight is Weight.FINE
    thin = good_sheet(specimen_of(length_m=Quantity(0.002)))
    assert finding(run(faces, shot=thin), "slenderness").weight is Weight.NOTE


def test_room_to_grow(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "barrelling room").weight is Weight.FINE
    # 16 mm on a 20 mm bar grows beyond 90 % of it from a true strain of 2 ln(18/16) = 0.24 on, over it from 0.45.
    wide = good_sheet(specimen_of(diameter_m=Quantity(0.016)))
    assert finding(run(faces, shot=wide), "barrelling room").weight is Weight.NOTE


def test_what_counts_ends_at_the_bars_edge(faces: FaceStrains) -> None:
    # 19 mm on 20 mm: over the edge from a true strain of 2 ln(20/19) = 0.1026 on.
    result = run(faces, shot=good_sheet(specimen_of(diameter_m=Quantity(0.019))))
    assert finding(result, "barrelling room").weight is Weight.RESTRICT
    assert result.response.strain_span is not None
    assert result.response.strain_span[1] == pytest.approx(2 * np.log(20 / 19), abs=0.003)


def test_a_specimen_wider_than_the_bar(faces: FaceStrains) -> None:
    result = run(faces, shot=good_sheet(specimen_of(diameter_m=Quantity(0.0201))))
    said = finding(result, "barrelling room")
    assert said.weight is Weight.REJECT
    assert "specimen of 20.1 mm on a bar of 20 mm" in said.measured


def test_friction_by_the_size_at_the_end_of_what_counts(faces: FaceStrains, good: ShotResult) -> None:
    said = finding(good, "friction")
    assert said.weight is Weight.FINE
    assert "0.03 (stated)" in said.measured
    # Siebel: mean pressure 1 + mu d/(3 h), at constant volume d/h = (d/h)_0 exp(3 e/2).
    response = good.response
    assert response.span is not None
    strain = float(response.three_wave.true_strain[response.span[1] - 1])
    c = 0.03 * 2.0 * math.exp(1.5 * strain)
    share = 1 - 1 / (1 + c / 3)
    assert float(said.measured.split(" %")[0]) / 100 == pytest.approx(share, abs=0.002)
    greased = specimen_of(friction_coefficient=None, lubricant="grease")
    assert (
        "0.05 (assumed with a lubricant" in finding(run(faces, shot=good_sheet(greased)), "friction").measured
    )
    dry = finding(run(faces, shot=good_sheet(specimen_of(friction_coefficient=None))), "friction")
    assert dry.weight is Weight.NOTE
    assert "0.15 (assumed dry" in dry.measured


def test_tension_has_no_friction_and_no_slenderness(faces: FaceStrains) -> None:
    from shpb.reduction import reduce
    from tests.synthetic import record_of

    record = record_of(faces, rig(), TestKind.TENSION, noise_v=0.002)
    result = reduce(record, rig(), good_sheet(kind=TestKind.TENSION))
    assert not has(result, "friction")
    assert not has(result, "slenderness")


def test_final_length(faces: FaceStrains, good: ShotResult) -> None:
    strain = good.response.three_wave.strain.max()
    for length, weight in ((0.005 * (1 - strain), Weight.FINE), (0.005 * (1 - strain + 0.04), Weight.NOTE),
                           (0.005 * (1 - strain + 0.08), Weight.REJECT)):  # fmt: skip
        shot = good_sheet(specimen_of(length_after_m=Quantity(length)))
        assert finding(run(faces, shot=shot), "final length").weight is weight


def test_a_first_slope_out_of_all_bounds(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "first slope").weight is Weight.FINE
    # A modulus of 10 GPa stated for a specimen whose curve rises far more steeply.
    soft = good_sheet(specimen_of(young_modulus_pa=Quantity(10e9)))
    assert finding(run(faces, shot=soft), "first slope").weight is Weight.REJECT
    slope = good.response.apparent_slope_pa
    assert slope is not None
    stiff = good_sheet(specimen_of(young_modulus_pa=Quantity(slope / 0.004)))
    assert finding(run(faces, shot=stiff), "first slope").weight is Weight.NOTE
