"""Find the first front in a trace, roughly, before anything else is known about the shot."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError

_SHARE_OF_PEAK = 0.10  # a front is a lasting excursion beyond a tenth of the trace's peak
_SIGNAL_TO_NOISE = 8.0
_NOISE_SAMPLES = 10_000  # enough to know the noise to 1 %; fronts among them do no harm


class UnusableShotError(InputError):
    """The record cannot be reduced as it stands: a channel is dead, swapped or inverted, or cut short.

    ``check`` names the check that found it, as the findings of a reduced shot do.
    """

    def __init__(self, what: str, *, where: str = "", mend: str = "", check: str = "record") -> None:
        super().__init__(what, where=where, mend=mend)
        self.check = check

    def __reduce__(self) -> tuple[object, ...]:
        return _rebuild, (self.what, self.where, self.mend, self.check)


def _rebuild(what: str, where: str, mend: str, check: str) -> UnusableShotError:
    return UnusableShotError(what, where=where, mend=mend, check=check)


class Front(NamedTuple):
    """Where a trace first leaves its zero for good."""

    at: int  # first sample of the first block beyond a tenth of the peak, and clear of the noise
    sign: int  # +1 or -1
    peak: float  # largest magnitude of a block
    noise: float  # standard deviation of one sample, from the trace's differences


def moving_mean(values: FloatArray, width: int) -> FloatArray:
    """Centred mean over ``width`` samples (made odd); the ends average what there is."""
    half = min(max(width // 2, 0), (values.size - 1) // 2)
    if half == 0:
        return values.copy()
    full = 2 * half + 1
    total = np.empty(values.size + 1)
    total[0] = 0.0
    np.cumsum(values, out=total[1:])
    mean = np.empty(values.size)
    np.subtract(total[full:], total[:-full], out=mean[half : values.size - half])
    mean[half : values.size - half] /= full
    counts = np.arange(half + 1, full)
    mean[:half] = total[half + 1 : full] / counts
    mean[values.size - half :] = (total[-1] - total[values.size - full + 1 : values.size - half]) / counts[
        ::-1
    ]
    return mean


def white_noise(values: FloatArray) -> float:
    """Standard deviation of white noise on a slowly varying trace, from second differences.

    x[i] - 2 x[i+1] + x[i+2] has variance 6 sigma^2; the median of its magnitude (0.6745 standard
    deviations for a normal law) is deaf to the few samples of a front.
    """
    second = np.abs(values[2:] - 2 * values[1:-1] + values[:-2])
    if second.size == 0:
        return 0.0
    middle = second.size // 2
    return float(np.partition(second, middle)[middle] / (0.6745 * np.sqrt(6.0)))


def first_front(strain: FloatArray, sample_interval_s: float, smoothing_s: float) -> Front | None:
    """First lasting excursion of a trace, or None where it holds no signal.

    Parameters
    ----------
    strain : float array, shape (samples,)
        The trace, its first samples near zero.
    sample_interval_s : float
        Spacing [s].
    smoothing_s : float
        Length of the blocks whose means keep single spikes out [s].
    """
    width = max(round(smoothing_s / sample_interval_s), 1)
    # Means of blocks rather than a running mean: a rough place is enough, and single spikes stay out as well.
    blocks = strain[: strain.size // width * width].reshape(-1, width).mean(axis=1)
    magnitude = np.abs(blocks)
    peak = float(magnitude.max(initial=0.0))
    noise = white_noise(strain[:_NOISE_SAMPLES])
    if peak <= _SIGNAL_TO_NOISE * noise / np.sqrt(width) or peak == 0.0:
        return None
    # In a noisy trace a tenth of the peak is no more than noise: six standard deviations are.
    threshold = max(_SHARE_OF_PEAK * peak, 6.0 * noise / np.sqrt(width))
    block = int(np.argmax(magnitude > threshold))
    return Front(block * width, 1 if blocks[block] > 0 else -1, peak, noise)
