"""Ink of the figure: colours, line styles, sizes, and how a long line is thinned without losing a spike.

Three colours that differ in lightness as well as in hue, so that they stay apart in grey print and to a
reader who sees no red or green; every line that meets another has a style of its own besides.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from shpb.arrays import FloatArray

INK = "#1a1a1a"  # text, frames
FAINT = "#8c8c8c"  # what does not count, ticks of lesser weight
SHADE = "#eeebe4"  # windows, the span that counts
BAND = "#c3cde6"  # uncertainty about a curve
DARK = "#15255c"  # CIE lightness about 17
MIDDLE = "#b0400c"  # about 42
LIGHT = "#3f95cc"  # about 59

POINTS = 1500  # most points of one line: about as many as an A4 page has pixel columns

BODY, SMALL = 7.5, 7.0  # pt; nothing on the page is smaller

# Over matplotlib's own defaults, whatever the user's own style is: the page is laid out by hand.
RC: dict[str, Any] = {
    "font.family": ["DejaVu Sans"],
    "font.size": BODY,
    "axes.labelsize": BODY,
    "axes.linewidth": 0.6,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "axes.labelpad": 2.5,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "text.color": INK,
    "text.parse_math": False,  # a $ in a name is a $
    "text.usetex": False,
    "text.hinting": "no_hinting",  # letters as wide as they are measured, at any resolution
    "lines.linewidth": 1.0,
    "lines.solid_capstyle": "butt",
    "xtick.labelsize": BODY,
    "ytick.labelsize": BODY,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.major.size": 2.5,
    "ytick.major.size": 2.5,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "svg.fonttype": "none",  # text stays text
    "svg.hashsalt": "shpb",  # the same result gives the same file
    "pdf.fonttype": 42,
}


@dataclass(frozen=True, slots=True)
class Line:
    """How one line looks and what the key above its panel calls it."""

    name: str
    colour: str
    dashes: tuple[float, ...] = ()  # on and off, in line widths; empty for a solid line
    width: float = 1.1

    @property
    def style(self) -> dict[str, Any]:
        """Keyword arguments for a matplotlib line."""
        pattern = (0, self.dashes) if self.dashes else "-"
        return {"color": self.colour, "linestyle": pattern, "linewidth": self.width}

    def greyed(self) -> Line:
        """The same line where it does not count."""
        return Line(self.name, FAINT, self.dashes, 0.8)


DASHES = (4.0, 1.6)
DOTS = (1.2, 1.4)
DASH_DOT = (5.0, 1.4, 1.2, 1.4)


@dataclass(frozen=True, slots=True)
class Scale:
    """Limits of an axis and its ticks at round numbers."""

    low: float
    high: float
    ticks: tuple[float, ...] = field(default=())

    @property
    def labels(self) -> tuple[str, ...]:
        """Tick labels, all with as many decimals as the step between them needs."""
        if len(self.ticks) < 2:
            return tuple(f"{tick:g}" for tick in self.ticks)
        decimals = max(-int(np.floor(np.log10(self.ticks[1] - self.ticks[0]) + 1e-9)), 0)
        # -0.0 would read "-0".
        return tuple(f"{tick + 0.0:.{decimals}f}" for tick in self.ticks)


def scale(low: float, high: float, about: int = 5) -> Scale:
    """Limits as given, with ticks at multiples of 1, 2 or 5 times a power of ten.

    There are at most ``about`` ticks, but never fewer than two.
    """
    if not high > low:
        low, high = low - 1.0, low + 1.0
    power = 10.0 ** np.floor(np.log10(high - low))
    ticks: tuple[float, ...] = ()
    for step in (power * np.array([10, 5, 2, 1, 0.5, 0.2, 0.1, 0.05])).tolist():
        first, last = int(np.ceil(low / step - 1e-9)), int(np.floor(high / step + 1e-9))
        if last - first + 1 > about and len(ticks) > 1:
            break
        ticks = tuple(round(k * step, 12) for k in range(first, last + 1))
    return Scale(low, high, ticks)


def envelope(values: FloatArray, points: int = POINTS) -> np.ndarray[Any, np.dtype[np.intp]]:
    """Samples that draw ``values`` with at most ``points`` points: least and greatest of every bin.

    Parameters
    ----------
    values : float array, shape (samples,)
    points : int
        At least 8.

    Returns
    -------
    int array, shape (at most ``points``,)
        Samples in rising order, first and last among them; all where there are no more than ``points``.
    """
    samples = values.size
    if samples <= points:
        return np.arange(samples)
    size = -(-samples // ((points - 4) // 2))  # samples in a bin, rounded up
    whole = samples // size * size
    table = values[:whole].reshape(-1, size)
    base = np.arange(table.shape[0]) * size
    picked = [base + table.argmin(axis=1), base + table.argmax(axis=1), [0, samples - 1]]
    if whole < samples:
        rest = values[whole:]
        picked.append([whole + int(rest.argmin()), whole + int(rest.argmax())])
    return np.unique(np.concatenate(picked))
