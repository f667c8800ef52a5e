"""What several calibration shots are wrong by together, and means of repeats that say so when they scatter.

A *term* is the relative change of a result for one standard uncertainty of something that other results share: the wave
speed of a bar, the spacing of the light gates. It stays with its name until all sources are reconciled, so that it is
neither averaged away nor counted twice.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from shpb.fitting.weighted_line import fitted
from shpb.rig.bar import one_stock
from shpb.rig.rig import Rig
from shpb.trust.sources import relative_u

Terms = dict[str, float]

# Common practice, relative: what is left of dispersion and of the gauge's place between two pulses that are compared
# (the independent simulation leaves 0.08 %), alike in every shot; and what a shot has of its own (bending, contact).
MODEL = 0.001
REPEATABILITY = 0.001
# Common practice: what bars of metal may lose in their supports and their own damping, of the amplitude [1/m].
LOSS_PER_M = 0.0002
_DENSITY, _DIAMETER, _SPEED = "density", "diameter", "wave speed"


def bar_term(rig: Rig, side: str, what: str) -> str:
    """As in the uncertainty budget: what both bars have from one stock has one name, and so cancels in their ratio.

    Bars of one stock whose wave speeds were measured apart still have one density.
    """
    of_each = {f"{bar} bar: {what}" for bar in ("incident", "transmitted")}
    tied = any({one.first, one.second} == of_each and one.coefficient == 1.0 for one in rig.correlations)
    shared = tied or one_stock(rig.incident_bar, rig.transmitted_bar)
    return f"bars: {what}" if shared else f"{side} bar: {what}"


def bar_terms(rig: Rig, side: str, *, impedance: float = 0.0, speed: float = 0.0) -> Terms:
    """Terms of a result that goes with powers of a bar's impedance Z = rho c A and of its wave speed c."""
    bar = rig.incident_bar if side == "incident" else rig.transmitted_bar
    terms = {
        bar_term(rig, side, _DENSITY): impedance * relative_u(bar.density_kg_m3, "density"),
        bar_term(rig, side, _DIAMETER): 2 * impedance * relative_u(bar.diameter_m, "bar diameter"),
        bar_term(rig, side, _SPEED): (impedance + speed) * relative_u(bar.wave_speed_m_s, "wave speed"),
    }
    return {key: value for key, value in terms.items() if value}


def added(*terms: Mapping[str, float]) -> Terms:
    """Terms of a product: what has one name adds up, with its sign."""
    total: Terms = {}
    for one in terms:
        for key, value in one.items():
            total[key] = total.get(key, 0.0) + value
    return total


def size_of(u_own: float, terms: Mapping[str, float]) -> float:
    """Standard uncertainty of one result with all its terms."""
    return float(np.sqrt(u_own**2 + sum(value**2 for value in terms.values())))


@dataclass(frozen=True, slots=True, kw_only=True)
class Mean:
    """Weighted mean of repeats.

    ``u`` follows from the stated uncertainties, made larger where the repeats contradict them (R. T. Birge, Phys. Rev.
    40 (1932) 207); ``scatter`` is the standard deviation of the repeats, 0 for one.
    """

    value: float
    u: float
    chi2: float
    freedom: int
    scatter: float
    contradicted: bool


def mean_of(values: Sequence[float], u: Sequence[float]) -> Mean:
    """Weighted mean of independent repeats with their standard uncertainties."""
    y, s = np.array(values, dtype=float), np.array(u, dtype=float)
    fit = fitted(np.ones((y.size, 1)), y, np.diag(s**2))
    # A scatter that chance explains says nothing against the stated uncertainties.
    stated = float(1.0 / np.sqrt(np.sum(1.0 / s**2)))
    return Mean(
        value=float(fit.coefficients[0]),
        u=float(np.sqrt(fit.covariance[0, 0])) if fit.contradicted else stated,
        chi2=fit.chi2,
        freedom=fit.freedom,
        scatter=float(y.std(ddof=1)) if y.size > 1 else 0.0,
        contradicted=fit.contradicted,
    )
