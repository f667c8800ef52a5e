"""The loading and the span of it that counts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, dot

# Common practice: a point counts only while the rate stands above a fifth of its mean.
END_OF_LOADING = 0.20
# The rate counts as steady until it finally falls below this share of its median.
_STEADY = 0.80


@dataclass(frozen=True, slots=True, kw_only=True)
class RateSummary:
    """Strain rate [1/s] over the steady part of a span: up to where it last stands above 0.8 of its median.

    ``variation`` and ``slope`` are relative to the mean. The fall at the end of the pulse is left out, because
    it says nothing about how constant the rate was.
    """

    mean_per_s: float
    mean_true_per_s: float
    median_per_s: float
    least_per_s: float
    greatest_per_s: float
    variation: float  # coefficient of variation
    slope: float  # change along the span by a straight line


def loading_span(rate_per_s: FloatArray, time_s: FloatArray, whole: int | None = None) -> tuple[int, int]:
    """First and last sample of the loading: from time zero to where the rate has fallen away.

    ``whole`` is the sample up to which all pulses are whole; a short record ends the loading there.

    The reference is the median of the rate above half its greatest value; loading ends where the
    rate falls below a fifth of it for the first time after it has passed half of it.
    """
    first = int(np.searchsorted(time_s, 0.0))
    stop = rate_per_s.size if whole is None else max(whole, first)
    rate = rate_per_s[first:stop]
    if rate.size == 0 or rate.max() <= 0:
        return first, stop
    high = rate > 0.5 * rate.max()
    reference = float(np.median(rate[high]))
    risen = int(np.argmax(rate > 0.5 * reference))
    fallen = np.flatnonzero(rate[risen:] < END_OF_LOADING * reference)
    return first, first + risen + int(fallen[0]) if fallen.size else stop


def rate_summary(rate_per_s: FloatArray, true_rate_per_s: FloatArray, span: tuple[int, int]) -> RateSummary:
    """Summarise the rate over samples ``span[0]`` to ``span[1]``."""
    steady = np.flatnonzero(
        rate_per_s[span[0] : span[1]] > _STEADY * np.median(rate_per_s[span[0] : span[1]])
    )
    span = (span[0], span[0] + int(steady[-1]) + 1) if steady.size else span
    rate = rate_per_s[span[0] : span[1]]
    mean = float(rate.mean())
    offset = np.linspace(-0.5, 0.5, rate.size)
    trend = dot(offset, rate) / dot(offset, offset) if rate.size > 1 else 0.0
    scale = abs(mean) if mean else 1.0
    return RateSummary(
        mean_per_s=mean,
        mean_true_per_s=float(true_rate_per_s[span[0] : span[1]].mean()),
        median_per_s=float(np.median(rate)),
        least_per_s=float(rate.min()),
        greatest_per_s=float(rate.max()),
        variation=float(rate.std()) / scale,
        slope=trend / scale,
    )
