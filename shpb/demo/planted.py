"""The planted truth of the invented alloys: what a merge of their shots and slow tests should find again."""

from __future__ import annotations

import itertools
import math

import numpy as np

from shpb.arrays import FloatArray
from shpb.demo.materials import Alloy
from shpb.errors import InputError

HEAT_SHARE = 0.9  # of plastic work, in the forward model
_STEPS = 100
_Number = float | FloatArray


def planted_stress_pa(
    alloy: Alloy,
    plastic_strain: float,
    rate_per_s: _Number,
    temperature_k: _Number,
    *,
    adiabatic: bool = False,
) -> FloatArray:
    """True flow stress of an alloy's law [Pa].

    Parameters
    ----------
    plastic_strain : float
        True plastic strain.
    rate_per_s, temperature_k : float or float array
        True plastic rate [1/s]; temperature of the specimen, at the start if it is adiabatic [K]. They broadcast.
    adiabatic : bool
        Whether the specimen keeps the heat of its plastic work, as in a bar shot: by steps of Heun's rule.

    Returns
    -------
    float array
        Of the shape of rate and temperature together.
    """
    law = alloy.law
    if not adiabatic:
        return law.stress_pa(plastic_strain, rate_per_s, temperature_k)
    warming = HEAT_SHARE / (alloy.density_kg_m3 * alloy.heat_capacity_j_kg_k)
    strains = plastic_strain * np.linspace(0.0, 1.0, _STEPS + 1) ** 2  # finer where the hardening is steep
    temperature = np.asarray(temperature_k, dtype=float)
    stress = law.stress_pa(0.0, rate_per_s, temperature)
    for start, end in itertools.pairwise(strains):
        step = float(end - start)
        ahead = law.stress_pa(float(end), rate_per_s, temperature + warming * stress * step)
        temperature = temperature + warming * step * (stress + ahead) / 2
        stress = law.stress_pa(float(end), rate_per_s, temperature)
    return stress


def planted_johnson_cook(alloy: Alloy, reference_rate_per_s: float = 1.0) -> dict[str, float]:
    """Constants A, B [Pa], n, C, m of Johnson & Cook that an alloy obeys, for a reference rate.

    The law of the alloys has the logarithm ``ln(1 + r/r0)``, which is ``ln(r/r0)`` for rates far above r0; then a
    change of the reference rate takes a factor out: ``1 + C ln(r/r0) = k (1 + C/k ln(r/r1))``,
    ``k = 1 + C ln(r1/r0)``.

    Raises
    ------
    InputError
        If the alloy has a strength peak: no constants describe it then.
    """
    law = alloy.law
    if law.has_peak:
        raise InputError(
            f"{alloy.name} has a strength peak",
            where="planted truth",
            mend="Ask for an alloy that only softens",
        )
    factor = 1 + float(law.rate_coefficient) * math.log(
        reference_rate_per_s / float(law.reference_rate_per_s)
    )
    return {
        "A": float(law.initial_pa) * factor,
        "B": float(law.hardening_pa) * factor,
        "n": float(law.hardening_exponent),
        "C": float(law.rate_coefficient) / factor,
        "m": float(law.softening_exponent),
    }


def planted_peak_k(
    alloy: Alloy, plastic_strain: float, rate_per_s: float, *, adiabatic: bool = False, between_k: FloatArray
) -> float:
    """Start temperature of the highest flow stress among those given [K]."""
    stress = planted_stress_pa(alloy, plastic_strain, rate_per_s, between_k, adiabatic=adiabatic)
    return float(between_k[int(np.argmax(stress))])
