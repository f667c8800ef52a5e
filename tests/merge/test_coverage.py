"""How often 95 % intervals of the merge hold the truth: over light campaigns of curves with their errors drawn."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pytest

from shpb.arrays import FloatArray
from shpb.demo.materials import WRENMOOR
from shpb.demo.planted import planted_johnson_cook
from shpb.merge.fit import fit_model
from shpb.merge.flow_table import flow_points, flow_rows
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.merge.models.registry import model_named
from shpb.merge.repeats import average_repeats, group_repeats
from shpb.merge.sensitivity import rate_point, sensitivities_by_range
from shpb.rig.gauge import TestKind

pytestmark = pytest.mark.slow

CAMPAIGNS = 120
COLD = 293.15
U_OWN, U_SHARED = 0.006, 0.005
STRAINS = (0.02, 0.05, 0.10, 0.15)
GRID = np.linspace(0.01, 0.20, 39)
# (rate, temperature, repeats)
CONDITIONS = (
    *((rate, kelvin, 1) for rate in (1e-3, 1e-1) for kelvin in (COLD, 473.15, 673.15)),
    (800.0, COLD, 2), (2800.0, COLD, 2), (1600.0, COLD, 1), (1600.0, 473.15, 1), (1600.0, 673.15, 1),
)  # fmt: skip

LAW = model_named("johnson-cook").with_facts(melting_temperature_k=1350.0)
PLANTED = np.array(list(planted_johnson_cook(WRENMOOR).values()))


class Held(NamedTuple):
    """Which intervals hold the truth, and the errors over their standard uncertainties."""

    parameters: FloatArray
    errors: FloatArray
    exponent: bool


def stress_pa(rate: float, kelvin: float, strain: FloatArray = GRID) -> FloatArray:
    return LAW.stress_pa(PLANTED, strain, rate, kelvin)


def curves(random: np.random.Generator, along: float) -> list[MaterialCurve]:
    """Curves of one campaign. ``along`` is the part of the own variance that moves a whole curve."""
    off = {group: U_SHARED * random.standard_normal() for group in ("rig", "machine")}
    found = []
    for rate, kelvin, repeats in CONDITIONS:
        group = "rig" if rate > 10 else "machine"
        for number in range(repeats):
            own = np.sqrt(along) * random.standard_normal()
            own = own + np.sqrt(1 - along) * random.standard_normal(GRID.size)
            true = stress_pa(rate, kelvin)
            found.append(
                MaterialCurve(
                    plastic_strain=GRID,
                    stress_pa=true * (1 + U_OWN * own + off[group]),
                    rate_per_s=np.full(GRID.size, rate),
                    temperature_k=kelvin,
                    u_own_pa=U_OWN * true,
                    u_shared=U_SHARED,
                    shared_group=group,
                    span=(0.01, 0.20),
                    range=RateRange.BAR if rate > 10 else RateRange.QUASI_STATIC,
                    material=WRENMOOR.name,
                    kind=TestKind.COMPRESSION,
                    origin=f"{rate:g} {kelvin:g} {number}",
                )
            )
    return found


def merged_once(seed: int, along: float) -> Held:
    conditions = [
        average_repeats(group) for group in group_repeats(curves(np.random.default_rng(seed), along))
    ]
    fit = fit_model(LAW, flow_points(flow_rows(conditions, STRAINS), conditions, None), leave_out=False)
    points = [
        point for one in conditions
        if abs(one.temperature_k - COLD) < 5 and (point := rate_point(one, 0.10)) is not None
    ]  # fmt: skip
    found = sensitivities_by_range(points).all
    assert found is not None
    rates = np.array([point.rate_per_s for point in points])
    true = np.array([stress_pa(rate, COLD, np.array([0.10]))[0] for rate in rates])
    slope = np.polyfit(np.log(rates), np.log(true), 1)[0]
    low, high = np.array([(one.low, one.high) for one in fit.estimates], dtype=float).T
    u = np.array([one.u for one in fit.estimates], dtype=float)
    return Held(
        parameters=(low <= PLANTED) & (high >= PLANTED),
        errors=(fit.parameters - PLANTED) / u,
        exponent=bool(found.exponent.interval[0] <= slope <= found.exponent.interval[1]),
    )


def test_the_intervals_hold_what_they_claim() -> None:
    # Own errors go along the curve, as a wrong diameter or temperature makes them: 90 % of their variance. Taken for
    # errors of single points they would leave C and m with half their uncertainty, and 63 to 72 % of coverage.
    held = [merged_once(seed, 0.9) for seed in range(CAMPAIGNS)]
    share = np.mean([one.parameters for one in held], axis=0)
    assert ((share >= 0.90) & (share <= 0.99)).all(), share
    assert 0.90 <= np.mean([one.exponent for one in held]) <= 0.99
    spread = np.std([one.errors for one in held], axis=0)
    assert ((spread > 0.8) & (spread < 1.2)).all(), spread
    # No bias: the mean of 120 has a standard deviation of 0.09.
    assert np.abs(np.mean([one.errors for one in held], axis=0)).max() < 0.35


def test_errors_that_move_the_whole_curve_are_covered_too() -> None:
    held = [merged_once(seed, 1.0) for seed in range(1000, 1000 + CAMPAIGNS // 2)]
    share = np.mean([one.parameters for one in held], axis=0)
    assert (share >= 0.85).all(), share  # 95 % of 60, less three standard deviations of the count
