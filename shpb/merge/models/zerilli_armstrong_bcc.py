"""Zerilli-Armstrong for body-centred cubic metals: rate and temperature act on the yield stress."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.ludwik import EXPONENTS
from shpb.merge.models.model import BestOfGrid, Model, Parameter, State
from shpb.merge.models.zerilli_armstrong_fcc import RATE_PER_K, SOFTENING_PER_K, SOURCE, thermal


def _law(p: FloatArray, at: State) -> FloatArray:
    c0, c1, c3, c4, c5, n = p
    return np.asarray(c0 + c1 * thermal(at, c3, c4) + c5 * at.plastic**n)


def _guess(at: State, best_of: BestOfGrid) -> FloatArray:
    strain = at.plastic

    def columns(c3: float, c4: float, n: float) -> FloatArray:
        return np.column_stack((np.ones_like(strain), thermal(at, c3, c4), strain**n))

    best, (c0, c1, c5) = best_of(columns, c3=SOFTENING_PER_K, c4=RATE_PER_K, n=EXPONENTS)
    return np.array([c0, c1, best["c3"], best["c4"], c5, best["n"]])


ZERILLI_ARMSTRONG_BCC = Model(
    key="zerilli-armstrong-bcc",
    name="Zerilli-Armstrong BCC",
    formula="s = C0 + C1 exp(-C3 T + C4 T ln(rate)) + C5 e^n",
    source=SOURCE,
    parameters=(
        Parameter(name="C0", unit="Pa", lower=0.0, upper=np.inf, meaning="stress that needs no thermal activation"),
        Parameter(name="C1", unit="Pa", lower=0.0, upper=np.inf, meaning="thermal part of the yield stress at 0 K",
                  needs=("rates", "temperatures")),
        Parameter(name="C3", unit="1/K", lower=0.0, upper=0.1, meaning="thermal softening",
                  needs=("temperatures",), usual=3e-3),
        Parameter(name="C4", unit="1/K", lower=-0.01, upper=0.01, meaning="rate sensitivity",
                  needs=("rates",), usual=2e-4),
        Parameter(name="C5", unit="Pa", lower=0.0, upper=np.inf, meaning="hardening at a plastic strain of 1"),
        Parameter(name="n", unit="1", lower=1e-3, upper=3.0, meaning="hardening exponent"),
    ),
    law=_law,
    guess=_guess,
    uses_rate=True,
    uses_temperature=True,
    softening_only=True,
    cannot=("a stress that rises with temperature", "hardening that depends on rate or temperature"),
)  # fmt: skip
