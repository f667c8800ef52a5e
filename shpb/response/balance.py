"""Work and momentum of a shot, and the strain that the bar faces give way by."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.pulse import Pulses
from shpb.response.bar_analysis import Curve, FaceMotion
from shpb.rig.bar import Bar
from shpb.rig.gauge import TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import Specimen
from shpb.wave.faces import FacePulses

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


@dataclass(frozen=True, slots=True, kw_only=True)
class Balance:
    """Integrals over the loading that must close.

    ``work_j`` is W_I - W_R - W_T at the faces, equal to the work of the face forces; the specimen's
    own is the integral of three-wave stress over strain times its volume.
    """

    incident_work_j: float
    reflected_work_j: float
    transmitted_work_j: float
    work_j: float
    specimen_work_j: float
    incident_impulse_n_s: float  # over the whole incident window
    striker_momentum_n_s: float | None


def work_balance(
    pulses: Pulses,
    faces: FacePulses,
    curve: Curve,
    rig: Rig,
    specimen: Specimen,
    loading: tuple[int, int],
    striker_speed_m_s: float | None,
) -> Balance:
    """Work and impulse from the pulses; exact for any pulse (momentum and energy identities)."""
    span = slice(*loading)
    dt = faces.interval_s

    def work(bar: Bar, strain: FloatArray) -> float:
        return float(bar.force_per_strain_n * bar.wave_speed_m_s * (strain[span] ** 2).sum() * dt)

    incident = work(rig.incident_bar, faces.incident.strain)
    reflected = work(rig.incident_bar, faces.reflected.strain)
    transmitted = work(rig.transmitted_bar, faces.transmitted.strain)
    volume = specimen.area_m2 * specimen.length_m
    own = float((curve.stress_pa[span] * curve.strain_rate_per_s[span]).sum() * dt * volume)
    # At the gauge, over its whole window: dispersion keeps the impulse, a short record cuts the faces' clock.
    impulse = float(rig.incident_bar.force_per_strain_n * pulses.incident.strain.sum() * dt)
    momentum = None
    if rig.striker is not None and striker_speed_m_s is not None:
        momentum = rig.striker.mass_kg * striker_speed_m_s
    return Balance(
        incident_work_j=incident,
        reflected_work_j=reflected,
        transmitted_work_j=transmitted,
        work_j=incident - reflected - transmitted,
        specimen_work_j=own,
        incident_impulse_n_s=impulse,
        striker_momentum_n_s=momentum,
    )


def face_indentation_m(
    force_n: FloatArray, specimen_radius_m: FloatArray, bar: Bar, *, rigid: bool = False
) -> FloatArray:
    """Mean indentation of one bar face [m], shape of ``force_n``; zero where the specimen fills the bar."""
    ratio = np.minimum(specimen_radius_m / bar.radius_m, 1.0)
    factor = np.interp(ratio, _RADIUS_RATIO, _K_RIGID if rigid else _K_UNIFORM)
    stiffness = bar.young_modulus_pa / (1 - bar.poisson_ratio**2)
    indentation: FloatArray = factor * force_n / (stiffness * specimen_radius_m)
    return indentation


def indentation_strain(
    motion: FaceMotion, curve: Curve, rig: Rig, specimen: Specimen, kind: TestKind
) -> FloatArray:
    """Engineering strain that both bar faces add by giving way, shape (samples,).

    An estimate with the specimen's current radius at constant volume, always computed and shown.
    Zero in tension, where the specimen does not press on the bar faces.
    """
    if kind is TestKind.TENSION:
        return np.zeros_like(curve.strain)
    radius = specimen.diameter_m / 2 * np.exp(0.5 * np.clip(curve.true_strain, -0.5, 3.0))
    total = face_indentation_m(motion.force_in_n, radius, rig.incident_bar) + face_indentation_m(
        motion.force_out_n, radius, rig.transmitted_bar
    )
    strain: FloatArray = total / specimen.length_m
    return strain
