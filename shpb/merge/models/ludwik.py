"""Ludwik: power hardening on a yield stress."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.model import BestOfGrid, Model, Parameter, State

EXPONENTS = (0.1, 0.2, 0.3, 0.5, 0.7, 1.0)


def ludwik_columns(plastic: FloatArray, n: float) -> FloatArray:
    """Columns whose sum with weights sigma_0 and K is the stress, shape (points, 2)."""
    return np.column_stack((np.ones_like(plastic), plastic**n))


def _law(p: FloatArray, at: State) -> FloatArray:
    initial, factor, n = p
    return np.asarray(initial + factor * at.plastic**n)


def _guess(at: State, best_of: BestOfGrid) -> FloatArray:
    best, linear = best_of(lambda n: ludwik_columns(at.plastic, n), n=EXPONENTS)
    return np.array([*linear, best["n"]])


LUDWIK = Model(
    key="ludwik",
    name="Ludwik",
    formula="s = sigma_0 + K e^n",
    source="P. Ludwik, Elemente der technologischen Mechanik, Springer 1909",
    parameters=(
        Parameter(name="sigma_0", unit="Pa", lower=0.0, upper=np.inf, meaning="stress at first yield"),
        Parameter(name="K", unit="Pa", lower=0.0, upper=np.inf, meaning="hardening at a plastic strain of 1"),
        Parameter(name="n", unit="1", lower=1e-3, upper=3.0, meaning="hardening exponent"),
    ),
    law=_law,
    guess=_guess,
    uses_rate=False,
    uses_temperature=False,
    cannot=("strain rate and temperature", "a saturating stress"),
)
