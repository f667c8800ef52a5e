from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.merge.repeats import Between, RepeatSettings, average_repeats, group_repeats

from .curves import material_curve

STRAIN = np.linspace(0.0, 0.4, 401)


def law(factor: float = 1.0) -> np.ndarray:
    return factor * (200e6 + 300e6 * np.sqrt(STRAIN))


def test_mean_count_and_scatter_of_curves_with_different_ends() -> None:
    a = material_curve(law(1.0), span=(0.01, 0.10), origin="a")
    b = material_curve(law(1.02), span=(0.02, 0.15), origin="b")
    c = material_curve(law(1.04), span=(0.03, 0.20), origin="c")
    mean = average_repeats([a, b, c])
    base = 200e6 + 300e6 * np.sqrt(mean.plastic_strain)
    e = mean.plastic_strain
    np.testing.assert_allclose(e, np.arange(10, 201) * 1e-3, rtol=1e-12)
    expected_count = (e <= 0.1) * 1 + ((e >= 0.02) & (e <= 0.15)) * 1 + (e >= 0.03) * 1
    assert mean.count.tolist() == expected_count.tolist()
    all_three = (e >= 0.03) & (e <= 0.10)
    assert mean.common.tolist() == all_three.tolist()
    assert mean.common_span == (pytest.approx(0.03), pytest.approx(0.10))
    # The curves' own points lie on the grid: exact.
    np.testing.assert_allclose(mean.stress_pa[all_three], 1.02 * base[all_three], rtol=1e-12)
    np.testing.assert_allclose(mean.scatter_pa[all_three], 0.02 * base[all_three], rtol=1e-9)
    # The jump where the lowest curve ends is the truth of the mean, and shown by the count.
    two = (e > 0.1) & (e <= 0.15)
    np.testing.assert_allclose(mean.stress_pa[two], 1.03 * base[two], rtol=1e-12)
    alone = e > 0.15
    np.testing.assert_allclose(mean.stress_pa[alone], 1.04 * base[alone], rtol=1e-12)
    assert np.isnan(mean.scatter_pa[alone]).all()
    assert np.isfinite(mean.u_own_pa).all()


def test_never_beyond_a_valid_span() -> None:
    # What lies outside the spans is absurd, and must not be seen.
    wild = law()
    wild[STRAIN > 0.1] = 9e9
    curve = material_curve(wild, span=(0.01, 0.0999))
    mean = average_repeats([curve, material_curve(law(), span=(0.05, 0.2))])
    assert mean.stress_pa.max() < 400e6


def test_a_gap_between_spans_stays_one() -> None:
    mean = average_repeats(
        [material_curve(law(), span=(0.01, 0.02)), material_curve(law(), span=(0.1, 0.12))]
    )
    assert not ((mean.plastic_strain > 0.021) & (mean.plastic_strain < 0.099)).any()
    assert not mean.common.any()
    assert mean.common_span is None
    assert mean.outliers == ()


def test_own_part_falls_with_the_number_and_the_shared_part_does_not() -> None:
    curves = [
        material_curve(law(), u_own=0.02, u_shared=0.01, group="Machine 1", origin=str(i)) for i in range(4)
    ]
    mean = average_repeats(curves)
    np.testing.assert_allclose(mean.u_own_pa, 0.01 * mean.stress_pa, rtol=1e-12)
    np.testing.assert_allclose(mean.shared["Machine 1"], 0.01, rtol=1e-12)
    np.testing.assert_allclose(mean.u_pa(), np.sqrt(2) * 0.01 * mean.stress_pa, rtol=1e-12)
    # Of two rigs each error moves half the curves: 1 %/2 each.
    two = average_repeats(
        [*curves[:2], *(dataclasses.replace(c, shared_group="Machine 2") for c in curves[2:])]
    )
    np.testing.assert_allclose(two.shared["Machine 1"], 0.005, rtol=1e-12)
    np.testing.assert_allclose(two.shared["Machine 2"], 0.005, rtol=1e-12)


def test_a_scatter_that_is_larger_than_stated_counts() -> None:
    curves = [material_curve(law(f), u_own=0.001) for f in (0.97, 1.0, 1.03)]
    mean = average_repeats(curves)
    np.testing.assert_allclose(mean.u_own_pa, 0.03 * law()[10:201] / np.sqrt(3), rtol=1e-9)


def test_seeded_noise_averages_out() -> None:
    random = np.random.default_rng(6)
    curves = [
        material_curve(law() + 5e6 * random.standard_normal(STRAIN.size), u_own=0.01, origin=str(i))
        for i in range(8)
    ]
    mean = average_repeats(curves)
    off = mean.stress_pa - (200e6 + 300e6 * np.sqrt(mean.plastic_strain))
    # 5 MPa / sqrt(8) = 1.77 MPa; 191 points.
    assert off.std() == pytest.approx(1.77e6, rel=0.2)
    assert mean.scatter_pa.mean() == pytest.approx(5e6 * 0.965, rel=0.06)  # c4(8) = 0.965
    assert mean.outliers == ()


def test_one_curve() -> None:
    mean = average_repeats([material_curve(law(), u_own=0.02, rise_k=50.0)])
    assert (mean.count == 1).all()
    assert mean.common.all()
    np.testing.assert_allclose(mean.u_own_pa, 0.02 * mean.stress_pa)
    assert np.isnan(mean.scatter_pa).all()
    assert mean.outliers == ()
    assert mean.temperature_rise_k is not None
    np.testing.assert_allclose(mean.temperature_rise_k, 50 * mean.plastic_strain)


def test_a_planted_outlier_is_named_and_kept() -> None:
    random = np.random.default_rng(1)
    factors = [1.0, 1.006, 1.10, 0.994]
    curves = [
        material_curve(law(f) + 1e6 * random.standard_normal(STRAIN.size), u_own=0.01, origin=f"W-{i}")
        for i, f in enumerate(factors)
    ]
    mean = average_repeats(curves)
    (found,) = mean.outliers
    assert found.origin == "W-2"
    assert found.difference == pytest.approx(0.10, abs=0.005)
    assert "W-2 differs from the other repeats by +10" in found.in_words()
    assert "in the mean all the same" in found.in_words()
    np.testing.assert_allclose(
        mean.stress_pa / (200e6 + 300e6 * np.sqrt(mean.plastic_strain)), np.mean(factors), rtol=0.01
    )


def test_a_repeat_that_crosses_the_others_stands_out_too() -> None:
    tilted = law() * (1 + 1.2 * (STRAIN - 0.105))  # 0 on average, +-11 % at the ends
    curves = [material_curve(law(), u_own=0.01, origin=n) for n in "abc"] + [
        material_curve(tilted, origin="tilted")
    ]
    assert [o.origin for o in average_repeats(curves).outliers] == ["tilted"]


def test_two_repeats_only_disagree() -> None:
    near = [material_curve(law(1.0), origin="a"), material_curve(law(1.02), origin="b")]
    assert average_repeats(near).outliers == ()
    (found,) = average_repeats([near[0], material_curve(law(1.1), origin="c")]).outliers
    assert found.origin == ""
    assert found.in_words().startswith("a and c disagree by 9.1 %")


def test_two_rigs_may_differ_by_what_they_share() -> None:
    ours = [material_curve(law(), u_own=0.01, u_shared=0.03, group="one", origin=n) for n in "ab"]
    other = material_curve(law(1.06), u_own=0.01, u_shared=0.03, group="two", origin="c")
    assert average_repeats([*ours, other]).outliers == ()
    same_rig = dataclasses.replace(other, shared_group="one")
    assert [o.origin for o in average_repeats([*ours, same_rig]).outliers] == ["c"]


def test_false_alarms_are_rare() -> None:
    random = np.random.default_rng(9)
    named = 0
    for _ in range(150):
        curves = [material_curve(law(1 + 0.01 * random.standard_normal()), u_own=0.01) for _ in range(4)]
        named += len(average_repeats(curves).outliers)
    # 600 comparisons at three standard uncertainties: 0.3 % each were they independent and normal.
    assert named <= 12


@pytest.mark.parametrize("between", list(Between))
def test_resampling_between_coarse_points(between: Between) -> None:
    strain = np.linspace(0, 0.4, 9)
    curve = dataclasses.replace(
        material_curve(points=9), plastic_strain=strain, stress_pa=300e6 + 1e9 * strain, span=(0.01, 0.35)
    )
    mean = average_repeats([curve], RepeatSettings(between=between, step=0.01))
    np.testing.assert_allclose(mean.stress_pa, 300e6 + 1e9 * mean.plastic_strain, rtol=1e-12)


def test_conditions() -> None:
    def slow(rate: float, kelvin: float, name: str, material: str = "W") -> MaterialCurve:
        return material_curve(rate=rate, temperature_k=kelvin, origin=name, material=material)

    def fast(rate: float, kelvin: float, name: str) -> MaterialCurve:
        return material_curve(rate=rate, temperature_k=kelvin, origin=name, material="W", range=RateRange.BAR)

    curves = [
        slow(1e-3, 293, "a"), slow(1.4e-3, 297, "b"), slow(1e-4, 293, "c"), slow(1e-3, 473, "d"),
        slow(1e-3, 293, "e", "H"), fast(1000, 293, "f"), fast(1150, 296, "g"), fast(1600, 293, "h"),
    ]  # fmt: skip
    random = np.random.default_rng(0)
    for _ in range(5):
        groups = group_repeats([curves[i] for i in random.permutation(len(curves))])
        names = ["".join(c.origin for c in group) for group in groups]
        assert names == ["e", "c", "ab", "d", "fg", "h"]
    wide = group_repeats(curves, RepeatSettings(bar_rate=0.7, temperature_k=200))
    assert "fgh" in ["".join(c.origin for c in group) for group in wide]


def test_three_nominal_rates_a_decade_apart_never_join() -> None:
    rates = np.geomspace(1e-4, 1e-1, 4)
    assert len(group_repeats([material_curve(rate=r, origin=f"{r}") for r in rates])) == 4


def test_refusals() -> None:
    with pytest.raises(InputError, match="no curve"):
        average_repeats([])
    with pytest.raises(InputError, match="curves of different material: Wrenmoor 3, H"):
        average_repeats([material_curve(), material_curve(material="H")])
    with pytest.raises(InputError, match="curves of different range"):
        average_repeats([material_curve(), material_curve(range=RateRange.BAR)])
    with pytest.raises(InputError, match="count over less than one step of plastic strain, 0.1"):
        average_repeats([material_curve(span=(0.01, 0.05))], RepeatSettings(step=0.1))
    with pytest.raises(InputError, match="Choose a larger step"):
        average_repeats([material_curve()], RepeatSettings(step=1e-9))
    with pytest.raises(InputError, match="settings.step"):
        RepeatSettings(step=0.0)
