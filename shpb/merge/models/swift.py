"""Swift: power hardening of a material that was strained before."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.model import BestOfGrid, Model, Parameter, State


def _law(p: FloatArray, at: State) -> FloatArray:
    factor, before, n = p
    return np.asarray(factor * (before + at.plastic) ** n)


def _guess(at: State, best_of: BestOfGrid) -> FloatArray:
    best, linear = best_of(
        lambda before, n: ((before + at.plastic) ** n)[:, None],
        before=(1e-4, 1e-3, 3e-3, 0.01, 0.03, 0.1, 0.3),
        n=(0.05, 0.1, 0.2, 0.3, 0.5, 0.8),
    )
    return np.array([*linear, best["before"], best["n"]])


SWIFT = Model(
    key="swift",
    name="Swift",
    formula="s = K (e_0 + e)^n",
    source="H. W. Swift, J. Mech. Phys. Solids 1 (1952) 1-18",
    parameters=(
        Parameter(name="K", unit="Pa", lower=0.0, upper=np.inf, meaning="stress at e_0 + e = 1"),
        Parameter(
            name="e_0", unit="1", lower=1e-7, upper=2.0, meaning="strain before the test", by_ratio=True
        ),
        Parameter(name="n", unit="1", lower=1e-3, upper=3.0, meaning="hardening exponent"),
    ),
    law=_law,
    guess=_guess,
    uses_rate=False,
    uses_temperature=False,
    cannot=("strain rate and temperature", "a saturating stress"),
)
