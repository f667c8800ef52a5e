"""A resistor across one arm of a gauge's bridge: what the scope then sees, nothing fired."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.forward.recording import Digitised, Disturbance, amplified, digitised
from shpb.rig.gauge import Gauge


def shunted_ratio(gauge: Gauge, shunt_ohm: float) -> float:
    """Output over supply voltage while a resistor bridges arm 1 (an active gauge), tension positive.

    Arm 1 falls from R to ``R Rc/(R + Rc)``, by the share ``x = -R/(R + Rc)``; from the divider formula
    ``r = 1/2 - 1/(2 + x)`` follows ``x/(4 + 2 x)``. With ``linear_amplifier`` it is ``x/4``. The leads of the gauge lie
    within the arm: R is the gauge and its leads. The output looks like compression.

    Raises
    ------
    InputError
        If the gauge's resistance is not stated, or a resistance is not above zero.
    """
    if gauge.resistance_ohm is None or gauge.resistance_ohm <= 0 or shunt_ohm <= 0:
        raise InputError(
            f"resistance of the gauge {gauge.resistance_ohm}, of the shunt {shunt_ohm:g} ohm",
            where="shunt",
            mend="State both, above zero",
        )
    arm = gauge.resistance_ohm + gauge.lead_resistance_ohm
    x = -arm / (arm + shunt_ohm)
    return x / 4 if gauge.linear_amplifier else x / (4 + 2 * x)


def shunt_record(
    gauge: Gauge,
    shunt_ohm: float,
    time_s: FloatArray,
    on_s: tuple[float, float],
    *,
    disturbance: Disturbance,
    random: np.random.Generator,
) -> Digitised:
    """What the scope writes while the resistor is switched on at the first time of ``on_s`` and off at the second.

    Parameters
    ----------
    gauge : Gauge
        With ``resistance_ohm``, ``scope_range_v`` and ``scope_bits``.
    shunt_ohm : float
        Resistance of the shunt [ohm].
    time_s : float array, shape (samples,)
        Evenly spaced [s].
    on_s : (float, float)
        While it is on [s].
    disturbance, random
        As for :func:`shpb.forward.recording.recorded`.

    Raises
    ------
    InputError
        As :func:`shunted_ratio`; if scope range or bits are not stated.
    """
    if gauge.scope_range_v is None or gauge.scope_bits is None:
        raise InputError(
            "the gauge has no scope range or bits",
            where="shunt",
            mend="State scope_range_V and scope_bits in the rig file",
        )
    on = (time_s >= on_s[0]) & (time_s < on_s[1])
    output = shunted_ratio(gauge, shunt_ohm) * float(gauge.excitation_v * gauge.gain)
    since = time_s - time_s[0]
    signal = gauge.tension_sign * output * on + disturbance.offset_v + disturbance.drift_v_per_s * since
    signal = signal + disturbance.hum_v * np.sin(
        2 * np.pi * disturbance.hum_hz * since + disturbance.hum_phase_rad
    )
    interval = float(since[1])
    # Where the scope is slower than the amplifier, the step is one sample wide and nothing is to be filtered.
    if gauge.bandwidth_hz is not None and gauge.bandwidth_hz < 0.5 / interval:
        signal = amplified(signal, interval, gauge.bandwidth_hz)
    signal = signal + disturbance.white_rms_v * random.standard_normal(signal.size)
    return digitised(signal, gauge.scope_range_v, gauge.scope_bits)
