"""What gauge and amplifier do to a pulse: the length of the gauge averages, the amplifier rolls off and delays.

Both are known transfer functions, and what they took off a pulse can be given back, but the noise is lifted along with
it. So each pulse is corrected up to the frequency to which its own spectrum stands above that of the noise; beyond it
the correction fades out, and there the rise time of the chain is the limit of what the record can show.

References
----------
Averaging over the grid: H(f) = sin(pi f L/c)/(pi f L/c), elementary. Amplifier: gain of a second-order Butterworth
low-pass, 1/sqrt(1 + (f/f3)^4), and its delay at low frequency, sqrt 2/(2 pi f3) (S. Butterworth, Wireless Engineer 7
(1930) 536-541, from memory). Rise times add in squares: L/c of the gauge, 0.35/f3 of the amplifier (common practice).
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.pulse import Pulse
from shpb.rig.bar import Bar
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.wave.propagation import fast_length

# Where less than this is left, the model of the chain is no longer good enough to divide by (common practice).
LEAST_GAIN = 0.5
# To give back a share of a component costs noise: with a gain g the error falls only where the signal is more than 1/g
# of the noise. Three times is above that wherever the gain is above LEAST_GAIN.
ABOVE_NOISE = 3.0
# The correction fades out from the last frequency that is whole to this many times it.
FADE_OUT = 1.25
# Less than this is no correction.
LEAST_LOSS = 0.002
_LOBES = 4  # the spectrum is averaged over as many bins to either side: its zeros are no lack of signal


def chain_gain(frequency_hz: FloatArray, gauge: Gauge, bar: Bar) -> FloatArray:
    """Share of a wave's strain that the record shows at each frequency, shape of ``frequency_hz``."""
    gain: FloatArray = np.sinc(frequency_hz * gauge.length_m / bar.wave_speed_m_s)
    if gauge.bandwidth_hz is not None:
        gain = gain / np.sqrt(1.0 + (frequency_hz / gauge.bandwidth_hz) ** 4)
    return gain


def chain_loss(frequency_hz: float, gauge: Gauge, bar: Bar) -> float:
    """Share of a wave's strain that the record does not show at one frequency."""
    return float(1.0 - chain_gain(np.array([frequency_hz]), gauge, bar)[0])


def chain_delay_s(gauge: Gauge) -> float:
    """Delay of the amplifier at low frequency [s], zero where its bandwidth is not stated."""
    return 0.0 if gauge.bandwidth_hz is None else float(np.sqrt(2) / (2 * np.pi * gauge.bandwidth_hz))


def chain_rise_s(gauge: Gauge, bar: Bar) -> float:
    """Rise time that gauge and amplifier give to a step [s]."""
    amplifier = 0.0 if gauge.bandwidth_hz is None else 0.35 / gauge.bandwidth_hz
    return float(np.hypot(gauge.length_m / bar.wave_speed_m_s, amplifier))


def why_not_known(rig: Rig) -> str:
    """Which gauge states neither its length nor a bandwidth, in words; empty where both state one."""
    for name, gauge in (("incident", rig.incident_gauge), ("transmitted", rig.transmitted_gauge)):
        if not gauge.length_m and gauge.bandwidth_hz is None:
            return f"the rig file states neither gauge length nor bandwidth of the {name} gauge"
    return ""


def undone_to_hz(pulse: Pulse, interval_s: float, gauge: Gauge, bar: Bar, stop_hz: float) -> float:
    """Frequency up to which what the chain took off a pulse can be given back [Hz].

    The first one at which the power of the windowed pulse, averaged over a few bins, is less than nine times that of
    white noise of the pulse's own level; or where the gain falls below ``LEAST_GAIN``; or where the low-pass ends.

    Parameters
    ----------
    pulse : Pulse
        In its window, with its noise.
    interval_s : float
        Of its samples.
    gauge, bar : Gauge, Bar
        Where it was recorded.
    stop_hz : float
        Where the low-pass ends.
    """
    samples, length = pulse.strain.size, fast_length(pulse.strain.size)
    frequency: FloatArray = np.fft.rfftfreq(length, interval_s).astype(np.float64, copy=False)
    frequency = frequency[: int(np.searchsorted(frequency, stop_hz)) + 1]
    power = np.abs(np.fft.rfft(pulse.strain, length)[: frequency.size]) ** 2
    mean = np.full(2 * _LOBES + 1, 1.0 / (2 * _LOBES + 1))
    smooth = np.convolve(np.pad(power, _LOBES, mode="edge"), mean, "valid")
    # White noise of standard deviation s over n samples: E |N(f)|^2 = n s^2, and it is in the pulse's power already.
    noise = samples * pulse.noise**2
    drowned = smooth < (1.0 + ABOVE_NOISE**2) * noise
    lost = chain_gain(frequency, gauge, bar) < LEAST_GAIN
    bad = np.flatnonzero(drowned | lost)
    return float(frequency[bad[0]]) if bad.size else stop_hz


def chain_left(frequency_hz: FloatArray, gauge: Gauge, bar: Bar, whole_to_hz: float) -> FloatArray:
    """Gain to divide by: that of the chain up to a frequency, then fading to 1, shape of ``frequency_hz``."""
    beyond = (
        np.clip((frequency_hz / whole_to_hz - 1.0) / (FADE_OUT - 1.0), 0.0, 1.0) if whole_to_hz > 0 else 1.0
    )
    share = 0.5 * (1.0 + np.cos(np.pi * beyond))
    # Where nothing of it is left the gain may be zero, and is not looked at.
    gain = np.maximum(chain_gain(frequency_hz, gauge, bar), 0.5 * LEAST_GAIN)
    left: FloatArray = 1.0 / (1.0 + share * (1.0 / gain - 1.0))
    return left


def why_no_chain(rig: Rig, undone_hz: Iterable[float]) -> str:
    """Why nothing of the recording chain can be undone; empty where something can.

    ``undone_hz`` are the frequencies of incident, reflected and transmitted pulse, see :func:`undone_to_hz`.
    """
    unknown = why_not_known(rig)
    if unknown:
        return unknown
    losses, reach = [], list(undone_hz)
    for hz, (gauge, bar) in zip(reach, stations_of_pulses(rig), strict=True):
        losses.append(chain_loss(hz, gauge, bar))
    if max(losses) < LEAST_LOSS:
        rise = max(chain_rise_s(gauge, bar) for gauge, bar in stations_of_pulses(rig))
        return (
            f"the pulses stand above their noise up to {max(reach) / 1e3:.0f} kHz, where gauge and amplifier take less "
            f"than {100 * LEAST_LOSS:g} %; beyond that their rise time of {1e6 * rise:.2f} us is the limit"
        )
    return ""


def stations_of_pulses(rig: Rig) -> tuple[tuple[Gauge, Bar], ...]:
    """Gauge and bar of incident, reflected and transmitted pulse."""
    incident = rig.incident_gauge, rig.incident_bar
    return incident, incident, (rig.transmitted_gauge, rig.transmitted_bar)
