"""Records of known truth, written as text by code that shares nothing with the readers."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from shpb.arrays import FloatArray

INTERVAL_S = 2e-7
START_S = -2e-5


@dataclass(frozen=True)
class Truth:
    """Voltages [V], shape (channels, samples), and the clock they are on."""

    voltage_v: FloatArray
    interval_s: float = INTERVAL_S
    start_s: float = START_S

    @property
    def samples(self) -> int:
        return int(self.voltage_v.shape[1])

    @property
    def time_s(self) -> FloatArray:
        return self.start_s + self.interval_s * np.arange(self.samples)


def truth(samples: int = 400, channels: int = 2, seed: int = 1) -> Truth:
    """Noise of half a volt: no two channels alike, no two samples alike."""
    return Truth(np.random.default_rng(seed).normal(0.0, 0.5, (channels, samples)))


def rows(
    time: Iterable[float] | None,
    columns: Sequence[Sequence[float]] | FloatArray,
    *,
    sep: str = ",",
    decimal: str = ".",
    end: str = "\n",
    tail: str = "",
    time_format: Callable[[float], str] = "{:.9e}".format,
    value_format: Callable[[float], str] = "{:.9e}".format,
) -> str:
    """Write one line a sample."""
    stamps = None if time is None else list(time)
    lines = []
    for i in range(len(columns[0])):
        cells = [] if stamps is None else [time_format(float(stamps[i]))]
        cells += [value_format(float(column[i])) for column in columns]
        lines.append(sep.join(cell.replace(".", decimal) for cell in cells) + tail)
    return end.join(lines) + end


def write(path: Path, text: str | bytes, encoding: str = "utf-8") -> Path:
    path.write_bytes(text if isinstance(text, bytes) else text.encode(encoding))
    return path
