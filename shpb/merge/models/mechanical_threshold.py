"""Mechanical threshold stress: thermally activated glide against a threshold that hardens with strain.

    s = s_a + (S - s_a) (1 - x^(1/q))^(1/p),   x = k T ln(rate_0/rate) / (g_0 mu b^3)
    dS/de = theta_0 (1 - tanh(2 X)/tanh 2),     X = (S - s_a)/(S_s - s_a)
    ln(S_s/S_s0) = k T ln(rate/rate_0) / (g_s mu b^3)

The hardening law has a closed integral, so no steps in strain are needed: with u = 2 X, c = cosh 2, s = sinh 2,

    theta_0 e/(S_s - s_a) = G(u) - G(u at e = 0),   G(u) = -(s/2) (s u + c ln|sinh(2 - u)/c|)
"""

from __future__ import annotations

from functools import cache

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.models.model import BestOfGrid, Fact, Model, Parameter, State

_BOLTZMANN_J_K = 1.380649e-23
_S, _C = float(np.sinh(2.0)), float(np.cosh(2.0))
_NEWTON_STEPS = 2  # from a table good to 1e-4


def _integral(y: FloatArray, side: FloatArray) -> FloatArray:
    """G over y = -ln|1 - X|; ``side`` is 1 below saturation and -1 above it."""
    apart = 2 * np.exp(-y)  # |2 - u|
    return np.asarray(-0.5 * _S * (_S * (2 - side * apart) + _C * _log_sinh(apart, y)))


def _log_sinh(apart: FloatArray, y: FloatArray) -> FloatArray:
    """ln(sinh(apart)/cosh 2), exact for the smallest ``apart`` = 2 exp(-y) too."""
    small = apart < 1e-8
    value = np.log(np.sinh(np.where(small, 1.0, apart)))
    return np.asarray(np.where(small, np.log(2.0) - y, value) - np.log(_C))


@cache
def _table(side: float) -> tuple[FloatArray, FloatArray]:
    y = np.concatenate((np.linspace(-3.0, 6.0, 600), np.linspace(6.05, 40.0, 200)))
    return _integral(y, np.full_like(y, side)), y


def hardened(start: FloatArray, stretch: FloatArray) -> FloatArray:
    """X after ``stretch`` = theta_0 e/(S_s - s_a), from X = ``start`` at no strain; arrays of one shape."""
    side = np.where(start < 1, 1.0, -1.0)
    y0 = -np.log(np.maximum(np.abs(1 - start), 1e-300))
    target = _integral(y0, side) + stretch
    y = np.where(side > 0, np.interp(target, *_table(1.0)), np.interp(target, *_table(-1.0)))
    for _ in range(_NEWTON_STEPS):
        apart = 2 * np.exp(-y)
        # dG/dy = apart * |dG/du|, with apart * coth(apart) -> 1 where apart is small
        near = np.where(apart < 1e-8, 1.0, apart / np.tanh(np.maximum(apart, 1e-8)))
        slope = 0.5 * _S * (_C * near - side * _S * apart)
        y = y - (_integral(y, side) - target) / slope
    return np.asarray(np.where(stretch == 0, start, 1 - side * np.exp(-y)))


def _activation(at: State) -> FloatArray:
    """K T/(mu b^3), with mu after Varshni: mu_0 - drop/(exp(T_mu/T) - 1)."""
    facts = at.facts
    cold = facts["shear_modulus_temperature_k"] / at.temperature_k
    # 1/(exp(x) - 1), which near 0 K must not overflow
    shear = facts["shear_modulus_pa"] - facts["shear_modulus_drop_pa"] * np.exp(-cold) / -np.expm1(-cold)
    return np.asarray(_BOLTZMANN_J_K * at.temperature_k / (shear * facts["burgers_vector_m"] ** 3))


def _glide(at: State, g0: float) -> FloatArray:
    """Share of the threshold that is needed: 1 at 0 K, 0 where heat alone carries the glide."""
    wait = np.log(at.facts["attempt_rate_per_s"] / at.rate_per_s)
    x = np.clip(_activation(at) * wait / g0, 0.0, 1.0)
    return np.asarray((1 - x ** (1 / at.facts["q"])) ** (1 / at.facts["p"]))


def _refuses(at: State) -> str:
    fastest, most = float(at.rate_per_s.max()), at.facts["attempt_rate_per_s"]
    if fastest >= most:
        return f"there are points at {fastest:g} /s, at or above attempt_rate_per_s of {most:g} /s"
    return (
        ""
        if (_activation(at) > 0).all()
        else "the shear modulus, as stated, is negative at the hottest point"
    )


def _law(p: FloatArray, at: State) -> FloatArray:
    athermal, initial, theta, saturation0, g0, inverse_gs = p
    activation = _activation(at)
    saturation = saturation0 * np.exp(
        inverse_gs * activation * np.log(at.rate_per_s / at.facts["attempt_rate_per_s"])
    )
    room = saturation - athermal
    with np.errstate(divide="ignore", invalid="ignore"):
        share = hardened((initial - athermal) / room, theta * at.plastic / room)
    # Without room between athermal and saturation stress there is no threshold to speak of: no value.
    share = np.where(room > 0, share, np.nan)
    return np.asarray(athermal + room * share * _glide(at, g0))


def _guess(at: State, best_of: BestOfGrid) -> FloatArray:
    strain = at.plastic

    def columns(g0: float, share: float, speed: float) -> FloatArray:
        glide = _glide(at, g0)
        return np.column_stack(
            (np.ones_like(strain), glide * hardened(np.full_like(strain, share), speed * strain))
        )

    best, (athermal, room) = best_of(
        columns,
        g0=(0.2, 0.4, 0.8, 1.6, 3.2),
        share=(0.05, 0.2, 0.5, 0.8),
        speed=(0.5, 2.0, 6.0, 20.0),
    )
    room = max(float(room), 0.05 * float(athermal))
    return np.array(
        [athermal, athermal + best["share"] * room, best["speed"] * room, athermal + room, best["g0"], 0.05]
    )


MECHANICAL_THRESHOLD = Model(
    key="mechanical-threshold",
    name="Mechanical threshold stress",
    formula="s = s_a + (S - s_a)(1 - (k T ln(rate_0/rate)/(g_0 mu b^3))^(1/q))^(1/p), "
    "dS/de = theta_0 (1 - tanh(2 X)/tanh 2), X = (S - s_a)/(S_s - s_a), "
    "S_s = S_s0 exp(k T ln(rate/rate_0)/(g_s mu b^3))",
    source="P. S. Follansbee, U. F. Kocks, Acta Metall. 36 (1988) 81-93",
    parameters=(
        Parameter(name="s_a", unit="Pa", lower=0.0, upper=np.inf, meaning="stress that needs no thermal activation"),
        Parameter(name="S_0", unit="Pa", lower=0.0, upper=np.inf, meaning="threshold before straining"),
        Parameter(name="theta_0", unit="Pa", lower=0.0, upper=np.inf, meaning="first hardening of the threshold"),
        Parameter(name="S_s0", unit="Pa", lower=0.0, upper=np.inf, meaning="saturation threshold at rate_0"),
        Parameter(name="g_0", unit="1", lower=0.01, upper=50.0, meaning="activation energy, of mu b^3",
                  needs=("rates", "temperatures"), held_at=1.6),
        Parameter(name="inverse_g_s", unit="1", lower=0.0, upper=50.0,
                  meaning="fall of the saturation threshold with temperature and slower rate, 1/g_s",
                  needs=("rates", "temperatures"), usual=0.1),
    ),
    law=_law,
    guess=_guess,
    facts=(
        Fact(name="burgers_vector_m", unit="m", meaning="length of the Burgers vector"),
        Fact(name="shear_modulus_pa", unit="Pa", meaning="shear modulus (at 0 K if a drop is stated)"),
        Fact(name="shear_modulus_drop_pa", unit="Pa", meaning="its drop with temperature, after Varshni",
             default=0.0),
        Fact(name="shear_modulus_temperature_k", unit="K", meaning="temperature of that drop", default=200.0),
        Fact(name="attempt_rate_per_s", unit="1/s", meaning="rate of attempts, rate_0", default=1e7),
        Fact(name="p", unit="1", meaning="shape of the obstacles", default=2 / 3),
        Fact(name="q", unit="1", meaning="shape of the obstacles", default=1.0),
    ),
    uses_rate=True,
    uses_temperature=True,
    softening_only=True,
    refuses=_refuses,
    cannot=("a stress that rises with temperature", "rates at or above rate_0"),
)  # fmt: skip
