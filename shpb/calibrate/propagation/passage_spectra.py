"""Slowness over frequency from two passages of one pulse, frequency by frequency, with uncertainty and coherence.

References
----------
J. S. Bendat, A. G. Piersol, Random Data (1986), chapter 9: the H1 estimate, and var|H|/|H|^2 = (1 - g^2)/(2 n g^2) with
the coherence g^2 (from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np

from shpb.arrays import BoolArray, ComplexArray, FloatArray
from shpb.calibrate.propagation.passage_pairs import PassagePair, Passages, soft_end
from shpb.calibrate.propagation.smooth_spectrum import smoothed
from shpb.errors import InputError
from shpb.rig.bar import Bar

# The band ends where the second passage, averaged over a few bins, is less than this many times its noise, or where
# the coherence is below this (common practice).
LEAST_SIGNAL = 5.0
LEAST_COHERENCE = 0.9
# Beyond f a/c = 0.28 the surface strain of the first mode fades out (its zero is near 0.297).
MOST_FA_C = 0.28
_LEAST_BINS = 8
_NEIGHBOURS = 3  # bins to either side that signal and coherence are averaged over


class Points(NamedTuple):
    """xi/(i w) at the frequencies of one set of passages, shape (bins,)."""

    frequency_hz: FloatArray
    slowness_s_m: ComplexArray
    u_slowness_s_m: FloatArray  # of real and imaginary part alike
    coherence: FloatArray
    passages: Passages
    shots: tuple[str, ...]
    ends_by: str


def points_of(pairs: Sequence[PassagePair], bar: Bar) -> Points:
    """Slowness over frequency from the pairs of one way."""
    passages = pairs[0].passages
    samples = min(pair.samples for pair in pairs)
    # Bins of the window's own length: noise is independent from one to the next.
    frequency: FloatArray = np.fft.rfftfreq(samples, passages.interval_s).astype(np.float64, copy=False)[1:]
    frequency = frequency[: int(np.searchsorted(frequency, MOST_FA_C / bar.radius_time_s))]
    omega = 2 * np.pi * frequency
    delay = pairs[0].delay_s
    first, second = np.empty((2, len(pairs), frequency.size), dtype=np.complex128)
    for n, pair in enumerate(pairs):
        a, b = (np.fft.rfft(one)[1 : frequency.size + 1] for one in pair.cut(samples))
        first[n], second[n] = a, b * np.exp(-1j * omega * (pair.delay_s - delay))
    noise = [_noise_power(pairs, n, samples, frequency.size) for n in (0, 1)]
    power = (np.abs(first) ** 2).sum(axis=0), (np.abs(second) ** 2).sum(axis=0)
    # Noise in the first passage makes its power, and so the loss, too great: it is known and taken off.
    clean = np.maximum(power[0] - noise[0], 0.1 * power[0])
    transfer = (np.conj(first) * second).sum(axis=0) / clean
    # Of ln|H| and of the phase alike: both passages' noise by their own power, in the mean of the shots.
    u_log = np.sqrt(0.5 * (noise[0] / power[0] + noise[1] / power[1]) / len(pairs))
    residual = _unwrapped(np.angle(transfer), u_log)
    log = np.log(np.abs(transfer)) + 1j * residual
    coherence, by_noise = _coherence(first, second, noise, smoothed(frequency, log, u_log, frequency).values)
    end, why = _band_end(power, noise, coherence, frequency, passages)
    if len(pairs) > 1:
        # One factor for all frequencies: what the shots do not repeat beyond their noise.
        beyond = float(np.median(((1 - coherence) / by_noise)[:end]))
        u_log = u_log * np.sqrt(max(beyond, 1.0))
    xi = -(log - 1j * omega * delay) / passages.path_m
    part = slice(0, end)
    return Points(
        frequency[part],
        (xi / (1j * omega))[part],
        (u_log / (omega * passages.path_m))[part],
        coherence[part],
        passages,
        tuple(pair.shot_id for pair in pairs),
        why,
    )


def _noise_power(pairs: Sequence[PassagePair], which: int, samples: int, bins: int) -> FloatArray:
    """Expected |N|^2 summed over the shots: white noise, and what is not known of the zero line's slope."""
    window = float((soft_end(samples) ** 2).sum())
    # A ramp of unit slope has the spectrum n^2/(2 pi k) at bin k.
    ramp = (samples**2 / (2 * np.pi * np.arange(1.0, bins + 1.0))) ** 2
    total: FloatArray = np.full(bins, 1e-300)
    for pair in pairs:
        total = total + window * pair.noise[which] ** 2 + ramp * pair.u_slope[which] ** 2
    return total


def _unwrapped(phase: FloatArray, u: FloatArray) -> FloatArray:
    """Phase without its jumps, from low frequency up, each bin nearest to the mean of the well-known ones before it."""
    out = phase.copy()
    for k in range(1, out.size):
        before = slice(max(k - _NEIGHBOURS, 0), k)
        expected = np.average(out[before], weights=1 / u[before] ** 2)
        out[k] -= 2 * np.pi * np.round((out[k] - expected) / (2 * np.pi))
    return out


def _running(values: Any) -> Any:
    """Mean over a few bins; the ends average what there is."""
    kernel = np.ones(2 * _NEIGHBOURS + 1)
    return np.convolve(values, kernel, "same") / np.convolve(np.ones(values.size), kernel, "same")


def _coherence(
    first: ComplexArray, second: ComplexArray, noise: list[FloatArray], log: ComplexArray
) -> tuple[FloatArray, FloatArray]:
    """Coherence of both passages over the shots and a few bins, and what noise alone would leave of 1 less it.

    ``log`` is what smoothly lies between them; it is taken out first, and bins count by the signal that they have
    beside their neighbours.
    """
    predicted = first * np.exp(log)
    power = (np.abs(predicted) ** 2).sum(axis=0)
    level = _running(power)
    cross = _running((np.conj(predicted) * second).sum(axis=0) / level)
    both = _running(power / level) * _running((np.abs(second) ** 2).sum(axis=0) / level)
    lost = _running((noise[0] * np.abs(np.exp(log)) ** 2 + noise[1]) / level) / _running(power / level)
    return np.minimum(np.abs(cross) ** 2 / both, 1.0), lost


def _band_end(
    power: tuple[FloatArray, FloatArray],
    noise: list[FloatArray],
    coherence: FloatArray,
    frequency_hz: FloatArray,
    passages: Passages,
) -> tuple[int, str]:
    """Bins up to the first one where signal or coherence is too poor, and which it is."""
    poor = np.zeros(frequency_hz.size, dtype=bool)
    for one, other in zip(power, noise, strict=True):
        poor |= _running(one) < LEAST_SIGNAL**2 * _running(other)
    loose: BoolArray = coherence < LEAST_COHERENCE
    bad = np.flatnonzero(poor | loose)
    end = int(bad[0]) if bad.size else frequency_hz.size
    if end < _LEAST_BINS:
        raise InputError(
            f"only {end} frequencies stand above the noise, up to {frequency_hz[max(end - 1, 0)] / 1e3:.3g} kHz",
            where=f"propagation, {passages.words}",
            mend="Use a shorter striker or a harder front (no shaper), more gain, or several shots",
        )
    if not bad.size:
        return end, f"the surface strain of the first mode fades out beyond f a/c = {MOST_FA_C:g}"
    return end, "the signal drowns in noise" if poor[end] else f"coherence falls below {LEAST_COHERENCE:g}"
