"""A stress that rises with temperature: found, and refused by laws that only soften."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.merge.fit import fit_model
from shpb.merge.points import FlowPoints, SharedError
from shpb.merge.rise import rise_with_temperature
from tests.merge.campaign import grid, law, planted, with_stress

JC = law("johnson-cook")


def peaked(height: float = 0.3) -> FlowPoints:
    """An ordered alloy of the scenario: strength rises to a peak at 900 K."""
    points = grid(temperatures=(293.0, 673.0, 873.0, 1073.0), heat=None)
    factor = (
        1 + height * np.exp(-(((points.temperature_k - 900) / 240) ** 2)) - (points.temperature_k / 1700) ** 2
    )
    stress = (
        (420e6 + 520e6 * points.plastic_strain**0.7) * (1 + 0.018 * np.log(points.rate_per_s / 1e-5)) * factor
    )
    return with_stress(points, stress, 0.01 * stress)


def test_a_law_that_softens_is_not_fitted_across_a_peak() -> None:
    model = JC.with_facts(melting_temperature_k=1700.0)
    with pytest.raises(
        InputError, match="can only soften.*the stress rises from .* MPa at .* K by .* MPa .u .*across_peak"
    ):
        fit_model(model, peaked(0.6))
    fit = fit_model(model, peaked(0.6), across_peak=True)
    assert "across a strength peak that Johnson-Cook cannot represent" in fit.warnings[0]


def test_rise_is_found_where_it_is_and_only_there() -> None:
    rise = rise_with_temperature(peaked(0.6))
    assert rise is not None
    assert (rise.cold_k, rise.hot_k) == (293.0, 873.0)
    assert rise.plastic_strain == (0.02, 0.3)
    points = peaked(0.6)
    a, b = (
        points.stress_pa[(points.temperature_k == t) & (points.rate_per_s == 1e-3)] for t in (293.0, 873.0)
    )
    assert rise.rise_pa / rise.cold_stress_pa == pytest.approx(np.mean(b - a) / np.mean(a), rel=1e-6)
    assert rise_with_temperature(planted(JC, grid(), 0.01, 1)) is None


def test_a_rise_within_the_uncertainty_is_no_peak() -> None:
    points = planted(JC, grid(temperatures=(293.0, 573.0)), 0.0)
    flat = points.stress_pa * np.where(points.temperature_k > 300, 1.5, 1.0)
    mean = flat.mean()
    for u, found in ((0.01, True), (0.5, False)):
        shown = rise_with_temperature(with_stress(points, flat, np.full(len(points), u * mean)))
        assert (shown is not None) == found
    # The same rise between two furnaces, each with a scale error of its own, is not significant either.
    hot = points.temperature_k > 300
    two = tuple(SharedError(name=n, relative_u=0.2, members=m) for n, m in (("a", hot), ("b", ~hot)))
    one = (SharedError(name="a", relative_u=0.2, members=np.ones(len(points), dtype=bool)),)
    sure = np.full(len(points), 0.01 * mean)
    assert rise_with_temperature(with_stress(points, flat, sure, two)) is None
    assert rise_with_temperature(with_stress(points, flat, sure, one)) is not None


def test_other_rates_are_no_rise() -> None:
    points = grid((1e-3, 1e3), (293.0, 473.0))
    chosen = (points.rate_per_s < 1) == (points.temperature_k < 300)
    stress = np.where(points.rate_per_s > 1, 400e6, 200e6)
    assert rise_with_temperature(with_stress(points, stress, 0.01 * stress).select(chosen)) is None
