"""Wheatstone bridge: the exact output for a strain, and the exact inverse.

With r = V_out/(V_ex gain), gauge factor k and x = k strain, every arrangement with one strain
obeys r = B x/(n + m x), so strain = n r/(k (B - m r)). Small strains see the bridge factor 4 B/n.

References
----------
Circuit theory of the bridge at constant voltage; the forms are those of K. Hoffmann, An
Introduction to Measurements using Strain Gages, HBM, 1989 (from memory), and of manufacturers'
notes on bridge non-linearity.
"""

from __future__ import annotations

from typing import NamedTuple

from shpb.arrays import FloatArray
from shpb.rig.gauge import Arrangement, Gauge


class BridgeForm(NamedTuple):
    """Constants of r = B x/(n + m x)."""

    n: float
    B: float
    m: float


def bridge_form(arrangement: Arrangement, poisson_ratio: float) -> BridgeForm:
    """Return the constants of an arrangement; ``poisson_ratio`` is that of the bar."""
    nu = poisson_ratio
    return {
        Arrangement.QUARTER: BridgeForm(4, 1, 2),
        Arrangement.HALF_OPPOSITE: BridgeForm(2, 1, 1),
        Arrangement.HALF_POISSON: BridgeForm(4, 1 + nu, 2 * (1 - nu)),
        Arrangement.FULL_POISSON: BridgeForm(2, 1 + nu, 1 - nu),
        Arrangement.FULL: BridgeForm(1, 1, 0),
    }[arrangement]


def bridge_output(strain: FloatArray, gauge: Gauge, poisson_ratio: float) -> FloatArray:
    """Amplified bridge voltage [V] for axial strain (tension positive), shape of ``strain``.

    The inverse of :func:`strain_from_voltage` before the loading sign is applied.
    """
    form = bridge_form(gauge.arrangement, poisson_ratio)
    x = gauge.effective_gauge_factor * strain
    ratio = form.B * x / (form.n if gauge.linear_amplifier else form.n + form.m * x)
    return gauge.tension_sign * gauge.excitation_v * gauge.gain * ratio


def strain_from_voltage(voltage_v: FloatArray, gauge: Gauge, poisson_ratio: float) -> FloatArray:
    """Axial strain at the gauge, tension positive, from amplified bridge voltage.

    ``strain = n r/(k (B - m r))``; with an amplifier that is linear by construction
    ``strain = n r/(k B)``. With one active arm the two differ by k strain/2 (0.1 % at 1e-3).

    Parameters
    ----------
    voltage_v : float array, any shape
        Amplified bridge output [V], zero already removed.
    gauge : Gauge
        Gauge factor, arrangement, excitation, gain and polarity.
    poisson_ratio : float
        Of the bar; matters where transverse gauges are active.

    Returns
    -------
    float array
        Strain [1]. A new array; the input is not changed.

    Where a voltage is NaN or infinite, so is the strain: :func:`shpb.pulse.strain.gauge_strain` looks first.
    """
    form = bridge_form(gauge.arrangement, poisson_ratio)
    strain = voltage_v * (gauge.tension_sign / (gauge.excitation_v * gauge.gain))  # r, worked on in place
    factor = form.n / gauge.effective_gauge_factor
    if gauge.linear_amplifier or form.m == 0:
        strain *= factor / form.B
        return strain
    below = strain * -form.m
    below += form.B
    strain *= factor
    strain /= below
    return strain


def shunt_strain(gauge_resistance_ohm: float, shunt_ohm: float, gauge_factor: float) -> float:
    """Strain simulated by a resistor across one arm, R/(k (R + R_shunt)) [1].

    Source: Vishay Micro-Measurements Tech Note TN-514, eq. 514.7 in the project's own symbols.
    """
    return gauge_resistance_ohm / (gauge_factor * (gauge_resistance_ohm + shunt_ohm))
