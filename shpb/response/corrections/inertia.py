"""Radial and axial inertia of the specimen: force that accelerates it instead of deforming it.

For an incompressible disc of current radius a and height h whose faces move with v1 and v2, with the true strain
rate e' = (v1 - v2)/h and its change e'', the balance of energy and momentum gives

    (P1 + P2)/2 = s + rho h^2/12 (e'' - e'^2) + rho a^2 (e''/8 + e'^2/16)
    P1 - P2     = rho h d/dt((v1 + v2)/2)

with P1 and P2 the mean pressures on the front and the back face. To first order, with the back face at rest, this
is the correction of Davies & Hunter for Poisson's ratio 1/2.

References
----------
E. D. H. Davies, S. C. Hunter, J. Mech. Phys. Solids 11 (1963) 155-179; H. Kolsky, Proc. Phys. Soc. B 62 (1949) 676-700;
S. K. Samanta, J. Mech. Phys. Solids 19 (1971) 117-135 and D. A. Gorham, J. Phys. D 22 (1989) 1888-1893 for the terms in
the square of the rate (from memory).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.response.corrections.correction import Loading, Off, Report
from shpb.response.corrections.facts import MOST_INERTIA
from shpb.settings import Correction


class InertiaStress(NamedTuple):
    """True stress [Pa] that inertia adds to the mean pressure of each face and of both, any one shape."""

    front_pa: FloatArray
    back_pa: FloatArray
    mean_pa: FloatArray


def inertia_stress(
    density_kg_m3: float,
    radius_m: FloatArray,
    height_m: FloatArray,
    true_rate_per_s: FloatArray,
    true_rate_change_per_s2: FloatArray,
    back_acceleration_m_s2: FloatArray | float = 0.0,
) -> InertiaStress:
    """Inertia stresses of an incompressible disc; formulas at the head of the module.

    ``back_acceleration_m_s2`` is that of the back face, dv2/dt. All arrays of one shape; compression positive.
    """
    rho, a, h = density_kg_m3, radius_m, height_m
    square, change = true_rate_per_s**2, true_rate_change_per_s2
    mean = rho * h**2 / 12 * (change - square) + rho * a**2 * (change / 8 + square / 16)
    # v1 = v2 + h e' and dh/dt = -h e', so d/dt (v1 + v2)/2 = dv2/dt + h (e'' - e'^2)/2.
    half_difference = 0.5 * rho * h * (back_acceleration_m_s2 + 0.5 * h * (change - square))
    return InertiaStress(mean + half_difference, mean - half_difference, mean)


def inertia(shot: Loading) -> Report:
    """Stress that radial and axial inertia add to each analysis."""
    density = shot.specimen.density_kg_m3
    refused, off, brief, size = "", Off(), "", "not known"
    if not shot.compressed:
        refused = "the formulas hold for a solid disc under compression"
    elif density is None:
        refused = "it needs the specimen's density in the shot sheet"
    else:
        time, stretch = shot.time_s, shot.stretch
        rate = np.clip(shot.curves.three_wave.strain_rate_per_s / stretch, -1e6, 1e6)
        stress = inertia_stress(
            density,
            shot.radius_m,
            shot.height_m,
            rate,
            np.gradient(rate, time),
            np.gradient(shot.motion.velocity_out_m_s, time),
        )
        # True stress acts on the current area A0/stretch: the engineering value is the true one by the stretch.
        off = Off(0.0, stress.back_pa / stretch, stress.front_pa / stretch, stress.mean_pa / stretch)
        share = shot.share_of_stress(off.stress_1w_pa)
        size = (
            f"up to {shot.greatest(off.stress_1w_pa) / 1e6:.2f} MPa one-wave, "
            f"{shot.greatest(off.stress_3w_pa) / 1e6:.2f} MPa three-wave; {100 * share:.1f} % of the flow stress"
        )
        brief = f"{100 * share:.1f} % of stress"
        if share > MOST_INERTIA:
            refused = f"it is {100 * share:.0f} % of the flow stress"
    return Report(
        correction=Correction.INERTIA,
        brief=brief,
        size=size,
        thinned=off,
        refused=refused,
    )
