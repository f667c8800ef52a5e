"""How far the face of a bar gives way under a specimen that does not fill it."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.rig.bar import Bar

# Mean extra displacement of a bar face under a concentric specimen, u = K F (1 - nu^2)/(E a_s), for
# uniform pressure and for a rigid specimen, against a_s/a. Static finite elements at nu = 0.30 (the
# values move by less than 0.3 % from nu = 0.25 to 0.34); half-space limits 16/(3 pi^2) and 1/2 of
# classical elasticity. Dynamic effects (Safa & Gary, Int. J. Impact Eng. 37 (2010) 371) are not in it.
_RADIUS_RATIO = np.array([0.0, 0.05, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 1.0])
_K_UNIFORM = np.array(
    [16 / (3 * np.pi**2), 0.507454, 0.474654, 0.409413, 0.345119, 0.282308, 0.221593,
     0.163738, 0.109789, 0.061388, 0.021677, 0.007250, 0.0]
)  # fmt: skip
_K_RIGID = np.array(
    [0.5, 0.465631, 0.433608, 0.368930, 0.305282, 0.243606, 0.184841,
     0.130161, 0.081184, 0.040312, 0.011304, 0.002984, 0.0]
)  # fmt: skip


def indentation_factor(radius_ratio: FloatArray, *, rigid: bool = False) -> FloatArray:
    """K at specimen radius by bar radius, shape of ``radius_ratio``; zero where the specimen fills the bar."""
    factor: FloatArray = np.interp(radius_ratio, _RADIUS_RATIO, _K_RIGID if rigid else _K_UNIFORM)
    return factor


def face_indentation_m(
    force_n: FloatArray, specimen_radius_m: FloatArray, bar: Bar, *, rigid: bool = False
) -> FloatArray:
    """Mean indentation of one bar face [m], shape of ``force_n``; zero where the specimen fills the bar."""
    factor = indentation_factor(specimen_radius_m / bar.radius_m, rigid=rigid)
    stiffness = bar.young_modulus_pa / (1 - bar.poisson_ratio**2)
    indentation: FloatArray = factor * force_n / (stiffness * specimen_radius_m)
    return indentation
