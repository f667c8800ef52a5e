"""Cowper-Symonds: a power of the rate on a static curve, after Ludwik or after Voce."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.ludwik import EXPONENTS, LUDWIK, ludwik_columns
from shpb.merge.models.model import BestOfGrid, Model, Parameter, State
from shpb.merge.models.voce import CHARACTERISTIC_STRAINS, VOCE, voce_columns

_RATES = (1e0, 1e2, 1e3, 1e4, 1e6, 1e8)
_EXPONENTS = (1.0, 2.0, 3.0, 5.0, 8.0, 12.0)

_RATE_PARAMETERS = (
    Parameter(name="D", unit="1/s", lower=1e-6, upper=1e15, meaning="rate at which the static stress is doubled",
              needs=("rates",), held_at=1e15, by_ratio=True),
    Parameter(name="q", unit="1", lower=0.5, upper=60.0, meaning="rate exponent", needs=("rates",), held_at=1.0),
)  # fmt: skip
_SOURCE = "G. R. Cowper, P. S. Symonds, Brown University, Division of Applied Mathematics report 28 (1957)"
_CANNOT = ("temperature", "a stress that falls with rate")


def _factor(rate: FloatArray, doubling: float, q: float) -> FloatArray:
    return np.asarray(1 + (rate / doubling) ** (1 / q))


def _on(static: Model) -> Model:
    """Cowper-Symonds on the static curve of another law."""

    def law(p: FloatArray, at: State) -> FloatArray:
        return static.law(p[:-2], at) * _factor(at.rate_per_s, p[-2], p[-1])

    def guess(at: State, best_of: BestOfGrid) -> FloatArray:
        strain, rate = at.plastic, at.rate_per_s
        of, shapes = (
            (ludwik_columns, EXPONENTS) if static is LUDWIK else (voce_columns, CHARACTERISTIC_STRAINS)
        )

        def columns(shape: float, doubling: float, q: float) -> FloatArray:
            return of(strain, shape) * _factor(rate, doubling, q)[:, None]

        best, linear = best_of(columns, shape=shapes, doubling=_RATES, q=_EXPONENTS)
        return np.array([*linear, *best.values()])

    return Model(
        key=f"cowper-symonds-{static.key}",
        name=f"Cowper-Symonds on {static.name}",
        formula=f"s = static (1 + (rate/D)^(1/q)), static after {static.name}: {static.formula[4:]}",
        source=f"{_SOURCE}; static curve: {static.source}",
        parameters=(*static.parameters, *_RATE_PARAMETERS),
        law=law,
        guess=guess,
        uses_rate=True,
        uses_temperature=False,
        cannot=_CANNOT,
    )


COWPER_SYMONDS_LUDWIK = _on(LUDWIK)
COWPER_SYMONDS_VOCE = _on(VOCE)
