"""One-, two- and three-wave analysis with each bar's own values.

With load-positive strains at the faces (I, R in the incident bar i, T in the transmitted bar t):

    F_in = E_i A_i (I + R)      F_out = E_t A_t T
    v_in = c_i (I - R)          v_out = c_t T

    stress_1w = F_out/A_s                    rate_1w = (-2 c_i R + F_out (1/Z_i - 1/Z_t))/L
    stress_2w = F_in/A_s                     rate_2w = (2 c_i I - F_out (1/Z_i + 1/Z_t))/L
    stress_3w = (F_in + F_out)/(2 A_s)       rate_3w = (v_in - v_out)/L

The one- and two-wave rates put F_in = F_out to do without I or without R; for equal bars they are the
familiar -2 c R/L and 2 c (I - T)/L. Stress and rate are engineering values. For bars with a measured propagation
table c, E and Z are complex and differ by frequency: they are in the force and velocity strains, and F_out/Z_i is
worked out in the spectrum.

Where stations tell apart the wave B that comes back in the transmitted bar, F_out = E_t A_t (T + B) and
v_out = c_t (T - B), and the rates hold F_out/Z_i - v_out in place of F_out (1/Z_i - 1/Z_t).

References
----------
H. Kolsky, Proc. Phys. Soc. B 62 (1949) 676-700; U. S. Lindholm, J. Mech. Phys. Solids 12 (1964)
317-335; G. T. Gray III, ASM Handbook 8 (2000) 462-476; W. Chen, B. Song, Split Hopkinson (Kolsky)
Bar, Springer 2011.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.rig.gauge import TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import Specimen
from shpb.wave.complex_propagation import velocity_of_one_wave_m_s
from shpb.wave.faces import FacePulses


class FaceMotion(NamedTuple):
    """Force [N] and velocity [m/s] at both faces, shape (samples,) each."""

    force_in_n: FloatArray
    force_out_n: FloatArray
    velocity_in_m_s: FloatArray
    velocity_out_m_s: FloatArray


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Curve:
    """Engineering and true response by one analysis, shape (samples,) each.

    ``strain`` and ``stress_pa`` are engineering values, positive under load; true values hold at
    constant volume and uniform deformation.
    """

    strain_rate_per_s: FloatArray
    strain: FloatArray
    stress_pa: FloatArray
    true_strain_rate_per_s: FloatArray
    true_strain: FloatArray
    true_stress_pa: FloatArray


def face_motion(faces: FacePulses, rig: Rig) -> FaceMotion:
    """Force and velocity at both specimen faces."""
    bar_i, bar_t = rig.incident_bar, rig.transmitted_bar
    incident, reflected, transmitted = faces.incident, faces.reflected, faces.transmitted
    force, velocity = transmitted.force_strain, transmitted.velocity_strain
    if faces.returning is not None:
        force, velocity = force + faces.returning.force_strain, velocity - faces.returning.velocity_strain
    return FaceMotion(
        bar_i.force_per_strain_n * (incident.force_strain + reflected.force_strain),
        bar_t.force_per_strain_n * force,
        bar_i.wave_speed_m_s * (incident.velocity_strain - reflected.velocity_strain),
        bar_t.wave_speed_m_s * velocity,
    )


def one_wave(
    faces: FacePulses,
    motion: FaceMotion,
    rig: Rig,
    specimen: Specimen,
    kind: TestKind,
    *,
    own_bars: bool = True,
) -> Curve:
    """Back-face stress; rate from the reflected pulse, equilibrium assumed.

    Without ``own_bars`` the formula for equal bars is taken, whatever they are.
    """
    velocity = -2 * rig.incident_bar.wave_speed_m_s * faces.reflected.velocity_strain
    if faces.returning is not None or (own_bars and _unlike(faces, rig)):
        velocity = velocity + _force_as_velocity_in(faces, motion, rig) - motion.velocity_out_m_s
    return curve_of(faces, velocity, motion.force_out_n, specimen, kind)


def two_wave(
    faces: FacePulses,
    motion: FaceMotion,
    rig: Rig,
    specimen: Specimen,
    kind: TestKind,
    *,
    own_bars: bool = True,
) -> Curve:
    """Front-face stress; rate from incident and transmitted pulse, equilibrium assumed; else as :func:`one_wave`."""
    bar_i = rig.incident_bar
    velocity = 2 * bar_i.wave_speed_m_s * faces.incident.velocity_strain
    if faces.returning is not None or (own_bars and _unlike(faces, rig)):
        velocity = velocity - _force_as_velocity_in(faces, motion, rig) - motion.velocity_out_m_s
    else:
        velocity = velocity - 2 / bar_i.impedance_n_s_m * motion.force_out_n
    return curve_of(faces, velocity, motion.force_in_n, specimen, kind)


def _unlike(faces: FacePulses, rig: Rig) -> bool:
    """Whether the two bars answer differently at the faces, or their impedance is not one number."""
    return (
        faces.face_impedance_ratio != 1.0
        or rig.incident_bar.propagation is not None
        or rig.transmitted_bar.propagation is not None
        or rig.incident_bar.impedance_n_s_m != rig.transmitted_bar.impedance_n_s_m
    )


def _force_as_velocity_in(faces: FacePulses, motion: FaceMotion, rig: Rig) -> FloatArray:
    """Velocity that a single wave with the force F_out would have in the incident bar's face [m/s]."""
    bar, force = rig.incident_bar, motion.force_out_n
    rigid = faces.transmitted.force_strain is faces.transmitted.strain  # carried without a complex impedance
    if bar.propagation is None or rigid:
        return force / (bar.impedance_n_s_m * faces.face_impedance_ratio)
    wave = velocity_of_one_wave_m_s(force, faces.interval_s, bar, faces.low_pass.stop_hz)
    return wave / faces.face_impedance_ratio


def three_wave(faces: FacePulses, motion: FaceMotion, specimen: Specimen, kind: TestKind) -> Curve:
    """Mean stress of both faces; rate from both face velocities, nothing assumed."""
    velocity = motion.velocity_in_m_s - motion.velocity_out_m_s
    return curve_of(faces, velocity, 0.5 * (motion.force_in_n + motion.force_out_n), specimen, kind)


def curve_of(
    faces: FacePulses,
    closing_velocity_m_s: FloatArray,
    force_n: FloatArray,
    specimen: Specimen,
    kind: TestKind,
) -> Curve:
    """Engineering and true curve from the closing velocity of the faces and a force."""
    rate = closing_velocity_m_s / specimen.length_m
    return curve_from(rate, integrated(rate, faces.interval_s), force_n / specimen.area_m2, kind)


def curve_from(rate_per_s: FloatArray, strain: FloatArray, stress_pa: FloatArray, kind: TestKind) -> Curve:
    """True values beside engineering ones.

    Compression e_t = -ln(1 - e), s_t = s (1 - e); tension e_t = ln(1 + e), s_t = s (1 + e).
    """
    sign = 1.0 if kind is TestKind.TENSION else -1.0
    # Where noise or a second loading would carry compression past the whole length, nothing is true.
    stretch = np.maximum(1.0 + sign * strain, 1e-3)
    return Curve(
        strain_rate_per_s=rate_per_s,
        strain=strain,
        stress_pa=stress_pa,
        true_strain_rate_per_s=rate_per_s / stretch,
        true_strain=sign * np.log(stretch),
        true_stress_pa=stress_pa * stretch,
    )


def integrated(values: FloatArray, interval_s: float) -> FloatArray:
    """Running integral by the trapezoidal rule, zero at the first sample."""
    total = np.cumsum(values)
    total -= 0.5 * (values + values[0])
    total *= interval_s
    return total
