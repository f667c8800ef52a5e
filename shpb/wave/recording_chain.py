"""What gauge and amplifier do to a pulse: the length of the gauge averages, the amplifier rolls off and delays.

References
----------
Averaging over the grid: H(f) = sin(pi f L/c)/(pi f L/c), elementary. Amplifier: gain of a second-order Butterworth
low-pass, 1/sqrt(1 + (f/f3)^4), and its delay at low frequency, sqrt 2/(2 pi f3) (S. Butterworth, Wireless Engineer 7
(1930) 536-541, from memory). Rise times add in squares: L/c of the gauge, 0.35/f3 of the amplifier (common practice).
"""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.rig.bar import Bar
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig

# Below this share of what was there the correction would lift noise rather than signal.
LEAST_GAIN = 0.7


def chain_gain(frequency_hz: FloatArray, gauge: Gauge, bar: Bar) -> FloatArray:
    """Share of a wave's strain that the record shows at each frequency, shape of ``frequency_hz``."""
    gain: FloatArray = np.sinc(frequency_hz * gauge.length_m / bar.wave_speed_m_s)
    if gauge.bandwidth_hz is not None:
        gain = gain / np.sqrt(1.0 + (frequency_hz / gauge.bandwidth_hz) ** 4)
    return gain


def chain_delay_s(gauge: Gauge) -> float:
    """Delay of the amplifier at low frequency [s], zero where its bandwidth is not stated."""
    return 0.0 if gauge.bandwidth_hz is None else float(np.sqrt(2) / (2 * np.pi * gauge.bandwidth_hz))


def chain_rise_s(gauge: Gauge, bar: Bar) -> float:
    """Rise time that gauge and amplifier give to a step [s]."""
    amplifier = 0.0 if gauge.bandwidth_hz is None else 0.35 / gauge.bandwidth_hz
    return float(np.hypot(gauge.length_m / bar.wave_speed_m_s, amplifier))


def why_no_chain(rig: Rig, stop_hz: float) -> str:
    """Why the recording chain cannot be undone up to ``stop_hz``; empty where it can."""
    for name, gauge, bar in (
        ("incident", rig.incident_gauge, rig.incident_bar),
        ("transmitted", rig.transmitted_gauge, rig.transmitted_bar),
    ):
        if not gauge.length_m and gauge.bandwidth_hz is None:
            return f"the rig file states neither gauge length nor bandwidth of the {name} gauge"
        left = float(chain_gain(np.array([stop_hz]), gauge, bar)[0])
        if left < LEAST_GAIN:
            return f"the {name} gauge shows only {100 * left:.0f} % at {stop_hz / 1e3:.0f} kHz, where the low-pass ends"
    return ""
