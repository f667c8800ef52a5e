"""Hollomon: power hardening from zero."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.model import BestOfGrid, Model, Parameter, State


def _law(p: FloatArray, at: State) -> FloatArray:
    factor, n = p
    return np.asarray(factor * at.plastic**n)


def _guess(at: State, best_of: BestOfGrid) -> FloatArray:
    best, linear = best_of(lambda n: (at.plastic**n)[:, None], n=(0.02, 0.05, 0.1, 0.2, 0.3, 0.5, 0.8))
    return np.array([*linear, best["n"]])


HOLLOMON = Model(
    key="hollomon",
    name="Hollomon",
    formula="s = K e^n",
    source="J. H. Hollomon, Trans. AIME 162 (1945) 268-290",
    parameters=(
        Parameter(name="K", unit="Pa", lower=0.0, upper=np.inf, meaning="stress at a plastic strain of 1"),
        Parameter(name="n", unit="1", lower=1e-3, upper=3.0, meaning="hardening exponent"),
    ),
    law=_law,
    guess=_guess,
    uses_rate=False,
    uses_temperature=False,
    cannot=("strain rate and temperature", "a yield stress: the law starts from zero", "a saturating stress"),
)
