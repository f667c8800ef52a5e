"""A shot on its way into the merge: only what counts, without the bar faces' share, with its errors told apart."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.merge.from_shot import StoredCurve, from_shot, why_left_out
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind
from tests.synthetic import copper, rig, sheet

E = 120e9


def stored(**changes: object) -> StoredCurve:
    """A bar curve of 300 MPa + 500 MPa of true plastic strain at 2000 /s engineering, sampled every 0.2 us."""
    time = np.arange(0.0, 110e-6, 2e-7)
    strain = 2000.0 * time
    true = -np.log1p(-strain)
    # s = 300 MPa + 500 MPa (e - s/E) in true values.
    stress = (300e6 + 500e6 * true) / (1 + 500e6 / E)
    indentation = np.full(time.size, 0.0015)
    values: dict[str, object] = {
        "rig": rig(),
        "sheet": sheet(copper()),
        "verdict": "accept",
        "reasons": (),
        "strain": strain + indentation,
        "stress_pa": stress / (1 - strain),
        "rate_per_s": np.full(time.size, 2000.0),
        "span": (60, 500),
        "indentation": indentation,
        "indentation_out": False,
        "heating_k": 100.0 * strain,
        "u_pa": 0.013 * stress,
        "u_shared_pa": 0.005 * stress,
        "origin": "X-1.h5",
        "sha256": "ab" * 32,
    }
    return StoredCurve(**{**values, **changes})  # type: ignore[arg-type]


def test_the_law_comes_back_without_the_faces() -> None:
    curve = from_shot(stored())
    # The true stress is on the area that the bars' strain says: 0.0015 of it goes with the indentation.
    np.testing.assert_allclose(curve.stress_pa, 300e6 + 500e6 * curve.plastic_strain, rtol=1e-9)
    assert curve.temperature_rise_k is not None
    at = curve.at(0.1)
    assert at is not None
    assert at.stress_pa == pytest.approx(350e6, rel=1e-6)
    # 0.1 plastic + 350/120000: engineering strain 1 - exp(-0.1029), 100 K a unit of strain.
    assert at.temperature_rise_k == pytest.approx(100 * (1 - np.exp(-0.1 - 350e6 / E)), rel=1e-4)
    assert at.rate_per_s == pytest.approx(2000 * np.exp(0.1 + 350e6 / E), rel=1e-4)


def test_left_in_the_strain_is_too_large_by_the_faces() -> None:
    with_, without = from_shot(stored(), indentation_out=False), from_shot(stored())
    assert with_.plastic_strain[0] - without.plastic_strain[0] == pytest.approx(0.0015, rel=0.05)
    assert "taken out" in without.remarks[0]
    already = from_shot(stored(strain=stored().strain - stored().indentation, indentation_out=True))
    np.testing.assert_allclose(already.plastic_strain, without.plastic_strain, atol=1e-12)
    back = from_shot(
        stored(strain=stored().strain - stored().indentation, indentation_out=True), indentation_out=False
    )
    np.testing.assert_allclose(back.plastic_strain, with_.plastic_strain, atol=1e-12)


def test_nothing_outside_the_span_is_used() -> None:
    shot = stored(span=(200, 300))
    curve = from_shot(shot)
    true = -np.log1p(-(shot.strain - shot.indentation))
    plastic = true - shot.stress_pa * np.exp(-true) / E
    assert plastic[200] - 1e-9 < curve.plastic_strain[0] < plastic[201] + 1e-9
    assert plastic[298] - 5e-4 < curve.plastic_strain[-1] <= plastic[299] + 1e-9
    assert curve.span == (curve.plastic_strain[0], curve.plastic_strain[-1])


def test_own_and_shared_uncertainty_are_kept_apart() -> None:
    curve = from_shot(stored())
    np.testing.assert_allclose(curve.u_own_pa / curve.stress_pa, 0.012, rtol=5e-3)
    assert curve.u_shared == pytest.approx(0.005, rel=5e-3)
    assert curve.shared_group == rig().name


@pytest.mark.parametrize(
    ("changes", "why"),
    [
        ({"verdict": "reject", "reasons": ("overlap", "closure")}, "rejected: overlap, closure"),
        ({"span": None}, "nothing of it counts"),
        ({"sheet": sheet(copper(young_modulus_pa=None))}, "states no young_modulus"),
    ],
)
def test_what_stays_out_says_why(changes: dict[str, object], why: str) -> None:
    shot = stored(**changes)
    assert why in why_left_out(shot)
    with pytest.raises(InputError, match=why.split(":", maxsplit=1)[0]):
        from_shot(shot)


def test_tension() -> None:
    shot = stored(indentation=np.zeros(stored().strain.size))
    pulled = dataclasses.replace(shot, sheet=dataclasses.replace(shot.sheet, kind=TestKind.TENSION))
    curve = from_shot(pulled)
    true = np.log1p(shot.strain)
    assert curve.plastic_strain[-1] == pytest.approx(
        true[499] - shot.stress_pa[499] * (1 + shot.strain[499]) / E, abs=5e-4
    )


def test_noise_does_not_turn_the_strain_round() -> None:
    rng = np.random.default_rng(4)
    shot = stored()
    noisy = from_shot(
        dataclasses.replace(shot, strain=shot.strain + 2e-4 * rng.standard_normal(shot.strain.size))
    )
    assert np.all(np.diff(noisy.plastic_strain) > 0)
    assert noisy.plastic_strain.size > 200


def test_too_short_a_span_is_refused() -> None:
    with pytest.raises(InputError, match="points only"):
        from_shot(stored(span=(60, 63)))


def test_a_hot_specimen_keeps_its_temperature() -> None:
    hot = dataclasses.replace(
        stored(), sheet=dataclasses.replace(sheet(copper()), temperature_k=Quantity(673.15))
    )
    assert from_shot(hot).temperature_k == 673.15
