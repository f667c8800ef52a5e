"""Friction at the specimen's faces: the mean pressure is more than the flow stress.

    p/s = 2 (exp(C) - C - 1)/C^2,  C = mu d/h,  with the current diameter d and height h

For a small C this is 1 + C/3 (Siebel). It holds while the faces slide everywhere.

References
----------
J. L. Rand, 1967, and E. Siebel, as quoted in the literature of the upsetting test (from memory); B. Avitzur, Metal
Forming, 1968 (from memory) for the shear factor.
"""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.response.corrections.correction import Loading, Off, Report
from shpb.response.corrections.facts import MOST_FRICTION
from shpb.settings import Correction

# Coulomb coefficients where the sheet states none (common practice): with and without a lubricant.
LUBRICATED, DRY = 0.05, 0.15


def friction_factor(mu_d_by_h: FloatArray) -> FloatArray:
    """Mean pressure by flow stress after Rand for C = mu d/h, any shape."""
    c = np.asarray(mu_d_by_h, dtype=float)
    # Below 1e-3 the series 1 + C/3 + C^2/12 is exact to rounding, the quotient is not.
    safe = np.maximum(c, 1e-3)
    return np.where(c < 1e-3, 1 + c / 3 + c**2 / 12, 2 * (np.exp(safe) - safe - 1) / safe**2)


def friction_coefficient(shot: Loading) -> tuple[float, bool]:
    """Coefficient of the sheet, or what is usual; and whether the sheet states it."""
    stated = shot.specimen.friction_coefficient
    if stated is not None:
        return float(stated), True
    return (LUBRICATED if shot.specimen.lubricant else DRY), False


def friction(shot: Loading) -> Report:
    """Stress that friction adds, the same share for each analysis."""
    mu, stated = friction_coefficient(shot)
    c = np.minimum(mu * 2 * shot.radius_m / shot.height_m, 20.0)
    share = 1 - 1 / friction_factor(c)
    curves = shot.curves
    off = Off(0.0, *(share * curve.stress_pa for curve in curves)) if shot.compressed else Off()
    greatest = shot.greatest(c)
    refused = ""
    if not shot.compressed:
        refused = "the specimen does not slide on the bar faces"
    elif not stated:
        refused = "it needs friction_coefficient in the shot sheet"
    elif greatest > MOST_FRICTION or mu * np.exp(greatest) > 1 / np.sqrt(3):
        refused = f"the faces may stick: friction coefficient x diameter / length grows to {greatest:.2f}"
    return Report(
        correction=Correction.FRICTION,
        brief=f"{100 * shot.greatest(share):.1f} % of stress" if shot.compressed else "",
        size=f"up to {100 * shot.greatest(share):.1f} % of stress with a coefficient of {mu:g}"
        + ("" if stated else " (assumed)"),
        thinned=off,
        refused=refused,
    )
