"""The force that the striker puts into the incident bar, with and without a pulse shaper.

References
----------
Impact of unequal bars: W. Johnson, Impact Strength of Materials (1972), chapter 1 (from memory). Shaper:
S. Nemat-Nasser, J. B. Isaacs, J. E. Starrett, Proc. R. Soc. A 435 (1991) 371-391; D. J. Frew,
M. J. Forrestal, W. Chen, Exp. Mech. 42 (2002) 93-106. The shaper's constants here are invented, not those of a
published copper.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.rig.bar import Bar, Striker


@dataclass(frozen=True, slots=True, kw_only=True)
class Shaper:
    """A soft disc between striker and bar; nominal strain e, stress ``s0 e^n/(1 - e^m)``."""

    diameter_m: float
    thickness_m: float
    stress_pa: float  # s0
    exponent: float = 0.15  # n
    stiffening_exponent: float = 4.0  # m

    @property
    def area_m2(self) -> float:
        """Area before the impact [m^2]."""
        return math.pi * self.diameter_m**2 / 4

    def force_n(self, strain: float) -> float:
        """Force at nominal strain ``strain``, at constant volume [N]."""
        if strain <= 0.0:
            return 0.0
        solid = min(strain, 0.98)
        stress = self.stress_pa * solid**self.exponent / (1.0 - solid**self.stiffening_exponent)
        return float(stress * self.area_m2 / (1.0 - solid))


def staircase(striker: Striker, bar: Bar, speed_m_s: float) -> tuple[float, float, float]:
    """Return first force [N], ratio of each step to the one before, duration of a step [s].

    ``F0 = V Zs Zb/(Zs + Zb)``; a striker of higher impedance than the bar pushes on with
    ``(Zs - Zb)/(Zs + Zb)`` of the force every 2 L/c; any other lets go after the first 2 L/c (ratio 0).
    """
    z_striker, z_bar = striker.impedance_n_s_m, bar.impedance_n_s_m
    first = speed_m_s * z_striker * z_bar / (z_striker + z_bar)
    ratio = (z_striker - z_bar) / (z_striker + z_bar)
    # Impedances of the same material and diameter differ by rounding: that is no second step.
    return first, max(ratio, 0.0) if ratio > 1e-9 else 0.0, striker.pulse_duration_s


def impact_force(
    striker: Striker, bar: Bar, speed_m_s: float, time_s: FloatArray, rise_s: float
) -> FloatArray:
    """Force at the impact end of the bar, striker on bare bar.

    Each step of the staircase is rounded to ``sin^2`` over ``rise_s``: the faces are never quite
    parallel nor flat, and touch over several microseconds (common practice; the form is our own).
    The rounding leaves the impulse as it is.

    Parameters
    ----------
    striker, bar : Striker, Bar
    speed_m_s : float
        Speed of the striker at impact [m/s].
    time_s : float array, shape (samples,)
        Zero at first contact [s].
    rise_s : float
        Duration of the rise, zero for a sharp step [s].

    Returns
    -------
    float array, shape (samples,)
        Force, compression positive [N].
    """
    if speed_m_s < 0 or rise_s < 0:
        raise InputError(
            f"striker speed {speed_m_s:g} m/s, rise {rise_s:g} s", where="impact", mend="Give positive values"
        )
    first, ratio, duration = staircase(striker, bar, speed_m_s)
    force = first * _step(time_s, rise_s)
    level, start = first, duration
    while level > 1e-6 * first and start < time_s[-1]:
        force -= level * (1.0 - ratio) * _step(time_s - start, rise_s)
        level, start = level * ratio, start + duration
    return force


def shaped_impact_force(
    striker: Striker, bar: Bar, speed_m_s: float, time_s: FloatArray, *, shaper: Shaper
) -> FloatArray:
    """Force at the impact end of the bar with a pulse shaper in front of it.

    ``h e' = V - F/Zb - (F + 2 sum_j F(t - j T))/Zs`` with T = 2 L/c of the striker: the sum holds the
    echoes from the striker's free end. Loading, F is the shaper's own force; once the faces would part
    faster than it can follow, the flattened disc is rigid and F is what closes them at zero speed.

    Parameters are those of :func:`impact_force`; ``time_s`` is evenly spaced.
    """
    z_striker, z_bar = striker.impedance_n_s_m, bar.impedance_n_s_m
    together = z_striker * z_bar / (z_striker + z_bar)
    echo = striker.pulse_duration_s
    per_echo = max(64, math.ceil(echo / 5e-8))
    step = echo / per_echo
    steps = max(2, math.ceil(time_s[-1] / step) + 1)
    force = np.zeros(steps)
    strain = 0.0
    for n in range(1, steps):
        echoes = 2.0 * float(force[n - per_echo :: -per_echo].sum()) if n >= per_echo else 0.0
        drive = speed_m_s - echoes / z_striker  # closing speed at no force
        rigid = drive * together
        # Heun's step in the shaper's strain.
        slow = max(drive - shaper.force_n(strain) / together, 0.0) / shaper.thickness_m
        ahead = max(drive - shaper.force_n(strain + slow * step) / together, 0.0) / shaper.thickness_m
        strain += 0.5 * (slow + ahead) * step
        force[n] = max(min(shaper.force_n(strain), rigid), 0.0)
        if force[n] == 0.0 and n > per_echo:
            break  # the striker has let go
    return np.interp(time_s, step * np.arange(steps), force, left=0.0, right=0.0)


def limited_by_yield(force_n: FloatArray, bar: Bar, hardening: float = 0.02) -> FloatArray:
    """Force that an overloaded bar still carries on: flat above its yield strength.

    What exceeds ``yield_strength_pa`` times the area stays behind in the upset end of the bar but for
    the share ``hardening``. A plain cap, not a plastic wave: it shows what a record then looks like.
    """
    if bar.yield_strength_pa is None:
        return force_n
    limit = bar.yield_strength_pa * bar.area_m2
    return np.where(force_n > limit, limit + hardening * (force_n - limit), force_n)


def _step(time_s: FloatArray, rise_s: float) -> FloatArray:
    """0 before time zero, 1 after ``rise_s``, sin^2 between; one half at the jump of a sharp step."""
    if rise_s == 0.0:
        return np.heaviside(time_s, 0.5)
    return np.sin(0.5 * np.pi * np.clip(time_s / rise_s, 0.0, 1.0)) ** 2
