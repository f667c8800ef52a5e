"""Curves of known laws, and files that hold them, for the tests of merging."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.rig.gauge import TestKind

FACTS = {
    "material": "Wrenmoor 3",
    "kind": "compression",
    "rate_per_s": "1e-3",
    "temperature_C": "20",
    "young_modulus_GPa": "118",
}


def linear_hardening(
    modulus_pa: float = 118e9, yield_pa: float = 200e6, slope_pa: float = 800e6, points: int = 600
) -> tuple[FloatArray, FloatArray]:
    """Engineering strain and stress of a sharp yield with linear hardening in engineering terms.

    The truth is in closed form: stress = yield + slope * plastic (engineering) strain.
    """
    plastic = np.concatenate((np.zeros(60), np.linspace(0, 0.2, points)))
    stress = np.concatenate((np.linspace(0, yield_pa, 61)[:-1], yield_pa + slope_pa * plastic[60:]))
    return plastic + stress / modulus_pa, stress


def write_table(
    path: Path,
    names: str,
    rows: FloatArray,
    facts: dict[str, str] | None = None,
    *,
    mark: str = ",",
    decimal: str = ".",
    number: str = "%.9g",
) -> Path:
    """Write a quasi-static table with its facts above it."""
    lines = [f"# {key}: {value}" for key, value in (FACTS if facts is None else facts).items()]
    lines.append(names)
    lines += [mark.join((number % v).replace(".", decimal) for v in row) for row in np.atleast_2d(rows)]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def material_curve(
    stress_pa: float | FloatArray = 300e6,
    *,
    span: tuple[float, float] = (0.01, 0.2),
    rate: float = 1e-3,
    temperature_k: float = 293.15,
    u_own: float = 0.01,
    u_shared: float = 0.0,
    group: str = "",
    origin: str = "a.csv",
    range: RateRange = RateRange.QUASI_STATIC,
    rise_k: float | None = None,
    material: str = "Wrenmoor 3",
    points: int = 401,
) -> MaterialCurve:
    """A curve from plastic strain 0 to 0.4; ``stress_pa`` is a number or given at each point."""
    strain = np.linspace(0.0, 0.4, points)
    stress = np.broadcast_to(np.asarray(stress_pa, dtype=np.float64), strain.shape)
    return MaterialCurve(
        plastic_strain=strain,
        stress_pa=stress,
        rate_per_s=np.full(strain.size, rate),
        temperature_k=temperature_k,
        temperature_rise_k=None if rise_k is None else rise_k * strain,
        u_own_pa=u_own * stress,
        u_shared=u_shared,
        shared_group=group,
        span=span,
        range=range,
        material=material,
        kind=TestKind.COMPRESSION,
        origin=origin,
    )
