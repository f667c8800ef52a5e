"""Adiabatic heating: the specimen's temperature along the curve, and the stress it would have had without it.

    T = T0 + share/(rho c_p) * integral of true stress over true plastic strain
    s_iso = s_ad * Theta(T0)/Theta(T)

Theta is the thermal factor of the flow stress: 1 + k (T - T0) with a stated slope k, or 1 - T*^m with
T* = (T - 293.15 K)/(T_melt - 293.15 K), of Johnson & Cook.

References
----------
G. I. Taylor, H. Quinney, Proc. R. Soc. A 143 (1934) 307-326; G. R. Johnson, W. H. Cook, Proc. 7th Int. Symp. Ballistics
(1983) 541-547.
"""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.response.bar_analysis import Curve
from shpb.response.corrections.correction import Loading, Off, Report
from shpb.response.corrections.facts import LEAST_RATE_PER_S
from shpb.response.flow import plastic_strain
from shpb.rig.sheet import Specimen
from shpb.settings import Correction
from shpb.wave.hot_bar import ROOM_K

USUAL_HEAT_SHARE = 0.9


def heating_k(shot: Loading, curve: Curve) -> FloatArray | None:
    """Temperature rise along a curve [K], shape (samples,); None without density and heat capacity.

    It is zero before the front and stays as it is after the loading.
    """
    specimen = shot.specimen
    if specimen.density_kg_m3 is None or specimen.heat_capacity_j_kg_k is None:
        return None
    share = USUAL_HEAT_SHARE if specimen.heat_share is None else float(specimen.heat_share)
    first, last = shot.loading
    part = slice(first, last)
    plastic = plastic_strain(curve.true_strain[part], curve.true_stress_pa[part], specimen.young_modulus_pa)
    # Plastic strain cannot go back: what looks like it is elastic, or noise.
    work = adiabatic_work_j_m3(np.maximum(np.maximum.accumulate(plastic), 0.0), curve.true_stress_pa[part])
    rise = np.zeros_like(shot.time_s)
    rise[part] = share * work / (specimen.density_kg_m3 * specimen.heat_capacity_j_kg_k)
    rise[last:] = rise[last - 1]
    return rise


def adiabatic_work_j_m3(plastic: FloatArray, true_stress_pa: FloatArray) -> FloatArray:
    """Running integral of true stress over true plastic strain [J/m^3], trapezoids, zero at the first sample."""
    steps = np.diff(plastic) * 0.5 * (true_stress_pa[1:] + true_stress_pa[:-1])
    return np.concatenate((np.zeros(1), np.cumsum(steps)))


def thermal_factor(specimen: Specimen, start_k: float, temperature_k: FloatArray) -> FloatArray | None:
    """Theta(T)/Theta(T0) of the specimen's flow stress; None where the sheet states no temperature sensitivity."""
    if specimen.stress_slope_per_k is not None:
        return np.asarray(1.0 + specimen.stress_slope_per_k * (temperature_k - start_k))
    if specimen.melting_temperature_k is None or specimen.softening_exponent is None:
        return None
    melting, exponent = specimen.melting_temperature_k, specimen.softening_exponent

    def theta(temperature: FloatArray | float) -> FloatArray:
        homologous = np.clip((np.asarray(temperature) - ROOM_K) / (melting - ROOM_K), 0.0, 1.0)
        return np.asarray(1.0 - homologous**exponent)

    return np.asarray(theta(temperature_k) / np.maximum(theta(start_k), 1e-12))


def heating(shot: Loading) -> Report:
    """Stress that adiabatic heating has taken from the specimen: switched on, the curves become isothermal."""
    start = float(shot.sheet.temperature_k)
    refused, off, brief, size = "", Off(), "", "not known"
    rise = heating_k(shot, shot.curves.three_wave)
    if rise is None:
        refused = "it needs the specimen's density and heat capacity in the shot sheet"
    else:
        greatest = shot.greatest(rise)
        brief = f"{greatest:.1f} K warmer"
        size = f"warmer by up to {greatest:.1f} K"
        melting = shot.specimen.melting_temperature_k
        melts = melting is not None and melting <= max(start + greatest, ROOM_K)
        factor = None if melts else thermal_factor(shot.specimen, start, start + rise)
        part = slice(*shot.loading)
        rate = float(np.median(shot.curves.three_wave.true_strain_rate_per_s[part]))
        if melts:
            refused = "the stated melting point is below the temperature of the specimen, or below 20 C"
        elif factor is None:
            refused = (
                "the sheet states no temperature sensitivity (stress_slope, or melting point and exponent)"
            )
        elif not 0.5 <= float(factor.min()) <= float(factor.max()) <= 2.0:
            refused = "the temperature sensitivity of the sheet changes the stress by more than half"
        else:
            off = Off(0.0, *(curve.stress_pa * (1 - 1 / factor) for curve in shot.curves))
            size += f"; isothermal stress up to {shot.greatest(off.stress_3w_pa) / 1e6:.1f} MPa away"
        if rate < LEAST_RATE_PER_S:
            refused = f"at {rate:.0f} /s heat flows out while the specimen deforms: not adiabatic"
    return Report(
        correction=Correction.HEATING,
        brief=brief,
        size=size,
        thinned=off,
        rise_k=rise,
        refused=refused,
    )
