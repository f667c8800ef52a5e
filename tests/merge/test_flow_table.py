"""Isothermal stresses of the merged table, near a strength peak and where rates differ; correlation along a curve."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.merge.fit import fit_model
from shpb.merge.flow_table import FlowRow, isothermal
from shpb.merge.material_curve import RateRange
from shpb.merge.models.registry import model_named
from shpb.merge.points import FlowPoints

RISE = 16.0


def row(
    stress_pa: float, kelvin: float, rate: float = 1000.0, rise: float | None = RISE, condition: int = 0
) -> FlowRow:
    return FlowRow(
        condition=condition, label="", range=RateRange.QUASI_STATIC if rise is None else RateRange.BAR,
        plastic_strain=0.1, stress_pa=stress_pa, u_own_pa=2e6, u_shared_pa=1e6, shared=(), scatter_pa=None, count=1,
        rate_per_s=rate, rate_range_per_s=(rate, rate), temperature_k=kelvin, rise_k=rise,
    )  # fmt: skip


def peak_pa(kelvin: float) -> float:
    """A parabola with its top at 900 K."""
    return 700e6 - 2e3 * (kelvin - 900.0) ** 2


def test_on_a_parabola_the_isothermal_stress_is_exact() -> None:
    starts = (700.0, 860.0, 960.0, 1060.0)
    rows = isothermal(tuple(row(peak_pa(t + RISE), t) for t in starts), ())
    for one in rows:
        assert one.isothermal_pa == pytest.approx(peak_pa(one.temperature_k), rel=1e-9)
    # Over the peak the slope changes most: 2 * 2e3 Pa/K2 by half the distance of the neighbours.
    at_peak = rows[1]
    change = 2e3 * (960.0 - 700.0)
    assert at_peak.u_isothermal_pa == pytest.approx(np.hypot(at_peak.u_pa, RISE * change / 2), rel=1e-6)
    assert all(one.u_isothermal_pa > one.u_pa for one in rows)  # type: ignore[operator]


def test_the_neighbour_of_the_same_rate_tells_the_slope() -> None:
    # 3 % of rate effect between 500 and 1500 /s, which must not be taken for temperature.
    def at(rate: float, kelvin: float) -> float:
        return (400e6 - 0.2e6 * kelvin) * (1.03 if rate > 1000 else 1.0)

    for order in (1, -1):
        rows = [row(at(rate, t + RISE), t, rate) for rate in (500.0, 1500.0) for t in (300.0, 350.0, 420.0)]
        for one in isothermal(tuple(rows[::order]), ()):
            assert one.isothermal_pa == pytest.approx(at(one.rate_per_s, one.temperature_k), rel=1e-9)
            assert one.u_isothermal_pa == pytest.approx(one.u_pa, rel=1e-6)


def test_one_other_temperature_gives_a_straight_line_and_none_gives_nothing() -> None:
    rows = isothermal((row(300e6, 293.0), row(280e6, 393.0)), ())
    slope = -20e6 / 100
    assert rows[0].isothermal_pa == pytest.approx(300e6 - slope * RISE)
    assert rows[0].u_isothermal_pa == pytest.approx(np.hypot(rows[0].u_pa, slope / 2 * RISE))
    (alone,) = isothermal((row(300e6, 293.0),), ())
    assert alone.isothermal_pa is None
    assert alone.u_isothermal_pa is None
    (slow,) = isothermal((row(300e6, 293.0, rate=1e-3, rise=None),), ())
    assert slow.isothermal_pa == slow.stress_pa
    assert slow.u_isothermal_pa == slow.u_pa


def points(own_correlation: float) -> FlowPoints:
    strain = np.array([0.02, 0.05, 0.10, 0.15])
    law = model_named("hollomon")
    stress = law.stress_pa(np.array([500e6, 0.2]), strain, 1.0, 293.0)
    return FlowPoints(
        plastic_strain=strain, stress_pa=stress,
        rate_per_s=np.ones(4), temperature_k=np.full(4, 293.0), u_own_pa=0.01 * stress,
        condition=np.zeros(4, dtype=int), adiabatic=np.zeros(4, dtype=bool), own_correlation=own_correlation,
    )  # fmt: skip


def test_errors_along_the_curve_are_not_averaged_out() -> None:
    # Four independent errors of 1 % leave half of it on the level; one that all share leaves all of it.
    level = {}
    for correlation in (0.0, 0.99):
        fit = fit_model(model_named("hollomon"), points(correlation), leave_out=False)
        level[correlation] = float(fit.flow_curve(np.array([0.07]), 1.0, 293.0).u_stress_pa[0])
    stress = 500e6 * 0.07**0.2
    assert level[0.0] == pytest.approx(0.01 * stress / 2, rel=0.1)
    assert level[0.99] == pytest.approx(0.01 * stress, rel=0.02)


@pytest.mark.parametrize("value", [-0.1, 1.0, float("nan")])
def test_a_correlation_that_cannot_be_is_refused(value: float) -> None:
    with pytest.raises(InputError, match=r"own_correlation: found .*, expected 0 to below 1"):
        points(value)
