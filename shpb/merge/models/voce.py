"""Voce: hardening that saturates."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.model import BestOfGrid, Model, Parameter, State

CHARACTERISTIC_STRAINS = (0.005, 0.01, 0.03, 0.06, 0.1, 0.2, 0.4, 1.0)


def voce_columns(plastic: FloatArray, strain: float) -> FloatArray:
    """Columns whose sum with weights sigma_s and sigma_0 is the stress, shape (points, 2)."""
    left = np.exp(-plastic / strain)
    return np.column_stack((1 - left, left))


def _law(p: FloatArray, at: State) -> FloatArray:
    saturation, initial, strain = p
    return np.asarray(saturation - (saturation - initial) * np.exp(-at.plastic / strain))


def _guess(at: State, best_of: BestOfGrid) -> FloatArray:
    best, linear = best_of(lambda strain: voce_columns(at.plastic, strain), strain=CHARACTERISTIC_STRAINS)
    return np.array([*linear, best["strain"]])


VOCE = Model(
    key="voce",
    name="Voce",
    formula="s = sigma_s - (sigma_s - sigma_0) exp(-e/e_c)",
    source="E. Voce, J. Inst. Metals 74 (1948) 537-562",
    parameters=(
        Parameter(
            name="sigma_s", unit="Pa", lower=0.0, upper=np.inf, meaning="stress at which hardening ends"
        ),
        Parameter(name="sigma_0", unit="Pa", lower=0.0, upper=np.inf, meaning="stress at first yield"),
        Parameter(
            name="e_c", unit="1", lower=1e-5, upper=50.0, meaning="characteristic strain", by_ratio=True
        ),
    ),
    law=_law,
    guess=_guess,
    uses_rate=False,
    uses_temperature=False,
    cannot=("strain rate and temperature", "hardening that goes on at large strain"),
)
