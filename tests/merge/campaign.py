"""Campaigns with planted constants: every law on one grid of rates, temperatures and strains."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.adiabatic import PathsOfPoints
from shpb.merge.models.model import Model
from shpb.merge.models.registry import model_named
from shpb.merge.points import FlowPoints, SharedError

HEAT = 0.9 / (8960 * 383)  # copper, K m3/J

# Constants of the right size for each law; Johnson-Cook, Zerilli-Armstrong and mechanical threshold remind of copper
# and iron, the others are invented.
PLANTED: dict[str, tuple[float, ...]] = {
    "johnson-cook": (90e6, 292e6, 0.31, 0.025, 1.09),
    "ludwik": (120e6, 350e6, 0.45),
    "hollomon": (530e6, 0.21),
    "swift": (600e6, 0.008, 0.22),
    "voce": (420e6, 110e6, 0.12),
    "cowper-symonds-ludwik": (200e6, 300e6, 0.4, 6500.0, 4.0),
    "cowper-symonds-voce": (420e6, 210e6, 0.1, 40.4, 5.0),
    "zerilli-armstrong-fcc": (65e6, 890e6, 0.0028, 0.000115),
    "zerilli-armstrong-bcc": (30e6, 1033e6, 0.00698, 0.000415, 266e6, 0.289),
    "mechanical-threshold": (40e6, 60e6, 2500e6, 700e6, 1.6, 0.2),
}
FACTS: dict[str, dict[str, float]] = {
    "johnson-cook": {"melting_temperature_k": 1356.0, "reference_temperature_k": 293.0},
    "mechanical-threshold": {"burgers_vector_m": 0.256e-9, "shear_modulus_pa": 42.3e9},
}
STRAINS = np.linspace(0.02, 0.3, 7)


def law(key: str) -> Model:
    return model_named(key).with_facts(**FACTS.get(key, {}))


def grid(
    rates: Sequence[float] = (1e-3, 1e-1, 1.2e3, 3e3),
    temperatures: Sequence[float] = (293.0, 473.0, 673.0),
    strains: FloatArray = STRAINS,
    heat: float | None = HEAT,
) -> FlowPoints:
    """Points without a law: every condition of rate and temperature, adiabatic above 10 /s; stress comes later."""
    conditions = [(rate, start) for start in temperatures for rate in rates]
    size, count = strains.size, len(conditions)
    rate, start = np.repeat(np.array(conditions), size, axis=0).T
    return FlowPoints(
        plastic_strain=np.tile(strains, count),
        stress_pa=np.full(size * count, 300e6),
        rate_per_s=rate,
        temperature_k=start,
        u_own_pa=np.full(size * count, 3e6),
        condition=np.repeat(np.arange(count), size),
        adiabatic=rate > 10,
        heat_k_m3_j=heat,
    )


def with_stress(
    points: FlowPoints, stress: FloatArray, u_own: FloatArray, shared: tuple[SharedError, ...] = ()
) -> FlowPoints:
    return FlowPoints(
        plastic_strain=points.plastic_strain,
        stress_pa=stress,
        rate_per_s=points.rate_per_s,
        temperature_k=points.temperature_k,
        u_own_pa=u_own,
        condition=points.condition,
        adiabatic=points.adiabatic,
        shared=shared,
        heat_k_m3_j=points.heat_k_m3_j,
    )


def planted(
    model: Model, points: FlowPoints, noise: float = 0.0, seed: int = 0, scale_errors: bool = False
) -> FlowPoints:
    """Points on the law of ``model`` with its planted constants, plus relative noise and, if asked, scale errors.

    The scale errors are 2 % on all fast points (the rig) and 1 % on all slow ones (the machine).
    """
    random = np.random.default_rng(seed)
    true = PathsOfPoints(model, points).stress_pa(np.array(PLANTED[model.key]))
    stress = true * (1 + noise * random.standard_normal(true.size))
    shared: tuple[SharedError, ...] = ()
    if scale_errors:
        fast = points.rate_per_s > 10
        stress = stress * np.where(
            fast, 1 + 0.02 * random.standard_normal(), 1 + 0.01 * random.standard_normal()
        )
        groups = (("rig", 0.02, fast), ("machine", 0.01, ~fast))
        shared = tuple(SharedError(name=n, relative_u=u, members=m) for n, u, m in groups if m.any())
    return with_stress(points, stress, max(noise, 0.01) * true, shared)


def grid_for(model: Model) -> FlowPoints:
    """The grid that a law can be fitted to: one rate or temperature where it knows none."""
    rates = (1e-3, 1e-1, 1.2e3, 3e3) if model.uses_rate else (1e-3,)
    return grid(rates, (293.0, 473.0, 673.0) if model.uses_temperature else (293.0,))
