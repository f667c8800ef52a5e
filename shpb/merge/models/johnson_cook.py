"""Johnson-Cook: hardening, rate and temperature as three factors."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.ludwik import EXPONENTS, ludwik_columns
from shpb.merge.models.model import BestOfGrid, Fact, Model, Parameter, State


def _homologous(at: State) -> FloatArray:
    """T*: 0 at and below the reference temperature, 1 at and above melting."""
    reference, melting = at.facts["reference_temperature_k"], at.facts["melting_temperature_k"]
    return np.clip((at.temperature_k - reference) / (melting - reference), 0.0, 1.0)


def _refuses(at: State) -> str:
    melting, reference = at.facts["melting_temperature_k"], at.facts["reference_temperature_k"]
    if melting <= reference:
        return f"melting_temperature_k is {melting:g}, not above the reference temperature of {reference:g} K"
    hottest = float(at.temperature_k.max())
    return (
        f"there are points at {hottest:g} K, at or above melting at {melting:g} K"
        if hottest >= melting
        else ""
    )


def _law(p: FloatArray, at: State) -> FloatArray:
    initial, hardening, n, c, m = p
    by_rate = 1 + c * np.log(at.rate_per_s / at.facts["reference_rate_per_s"])
    return np.asarray((initial + hardening * at.plastic**n) * by_rate * (1 - _homologous(at) ** m))


def _guess(at: State, best_of: BestOfGrid) -> FloatArray:
    homologous = _homologous(at)
    decades = np.log(at.rate_per_s / at.facts["reference_rate_per_s"])

    def columns(n: float, c: float, m: float) -> FloatArray:
        factor = (1 + c * decades) * (1 - homologous**m)
        return ludwik_columns(at.plastic, n) * factor[:, None]

    best, linear = best_of(
        columns, n=EXPONENTS, c=(0.0, 0.005, 0.015, 0.04, 0.1), m=(0.5, 0.75, 1.0, 1.5, 2.5)
    )
    return np.array([*linear, best["n"], best["c"], best["m"]])


JOHNSON_COOK = Model(
    key="johnson-cook",
    name="Johnson-Cook",
    formula="s = (A + B e^n)(1 + C ln(rate/reference rate))(1 - T*^m), T* = (T - T_ref)/(T_melt - T_ref) and 0 below",
    source="G. R. Johnson, W. H. Cook, Proc. 7th Int. Symp. on Ballistics, The Hague (1983) 541-547",
    parameters=(
        Parameter(name="A", unit="Pa", lower=0.0, upper=np.inf,
                  meaning="stress at first yield, at reference rate and temperature"),
        Parameter(name="B", unit="Pa", lower=0.0, upper=np.inf, meaning="hardening at a plastic strain of 1"),
        Parameter(name="n", unit="1", lower=1e-3, upper=3.0, meaning="hardening exponent"),
        Parameter(name="C", unit="1", lower=-0.5, upper=1.0, meaning="rate coefficient", needs=("rates",),
                  usual=0.02),
        Parameter(name="m", unit="1", lower=0.05, upper=20.0, meaning="softening exponent",
                  needs=("temperatures",), held_at=1.0),
    ),
    law=_law,
    guess=_guess,
    facts=(
        Fact(name="reference_rate_per_s", unit="1/s", meaning="rate at which A and B are stated", default=1.0),
        Fact(name="reference_temperature_k", unit="K", meaning="temperature at which A and B are stated",
             default=293.15),
        Fact(name="melting_temperature_k", unit="K", meaning="melting temperature"),
    ),
    uses_rate=True,
    uses_temperature=True,
    softening_only=True,
    refuses=_refuses,
    cannot=(
        "a stress that rises with temperature",
        "softening below the reference temperature",
        "rate sensitivity or hardening that changes with temperature",
        "an upturn of rate sensitivity",
    ),
)  # fmt: skip
