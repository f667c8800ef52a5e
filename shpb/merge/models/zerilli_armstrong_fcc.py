"""Zerilli-Armstrong for face-centred cubic metals: rate and temperature act on the hardening."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.model import BestOfGrid, Model, Parameter, State

SOFTENING_PER_K = (0.0, 5e-4, 1e-3, 2e-3, 4e-3, 8e-3)
RATE_PER_K = (0.0, 3e-5, 1e-4, 2e-4, 4e-4)
SOURCE = "F. J. Zerilli, R. W. Armstrong, J. Appl. Phys. 61 (1987) 1816-1825"


def thermal(at: State, c3: float, c4: float) -> FloatArray:
    """exp(-C3 T + C4 T ln rate), rate in 1/s, temperature in K."""
    return np.asarray(np.exp(at.temperature_k * (c4 * np.log(at.rate_per_s) - c3)))


def _law(p: FloatArray, at: State) -> FloatArray:
    c0, c2, c3, c4 = p
    return np.asarray(c0 + c2 * np.sqrt(at.plastic) * thermal(at, c3, c4))


def _guess(at: State, best_of: BestOfGrid) -> FloatArray:
    root = np.sqrt(at.plastic)

    def columns(c3: float, c4: float) -> FloatArray:
        return np.column_stack((np.ones_like(root), root * thermal(at, c3, c4)))

    best, linear = best_of(columns, c3=SOFTENING_PER_K, c4=RATE_PER_K)
    return np.array([*linear, best["c3"], best["c4"]])


ZERILLI_ARMSTRONG_FCC = Model(
    key="zerilli-armstrong-fcc",
    name="Zerilli-Armstrong FCC",
    formula="s = C0 + C2 e^(1/2) exp(-C3 T + C4 T ln(rate))",
    source=SOURCE,
    parameters=(
        Parameter(name="C0", unit="Pa", lower=0.0, upper=np.inf, meaning="stress that needs no thermal activation"),
        Parameter(name="C2", unit="Pa", lower=0.0, upper=np.inf,
                  meaning="hardening at a plastic strain of 1, at 0 K"),
        Parameter(name="C3", unit="1/K", lower=0.0, upper=0.1, meaning="thermal softening",
                  needs=("temperatures",), usual=3e-3),
        Parameter(name="C4", unit="1/K", lower=-0.01, upper=0.01, meaning="rate sensitivity",
                  needs=("rates",), usual=2e-4),
    ),
    law=_law,
    guess=_guess,
    uses_rate=True,
    uses_temperature=True,
    softening_only=True,
    cannot=(
        "a stress that rises to a peak with temperature",
        "a yield stress that depends on rate",
        "other hardening than e^(1/2)",
    ),
)  # fmt: skip
