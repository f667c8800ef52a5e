"""Panels of a merge: where they stand, axes of stress and of log10 rate, error bars, labels beside a panel."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.view.ink import FAINT, SMALL, Scale, scale
from shpb.view.merge_labels import power_of_ten, rate_words
from shpb.view.merge_pages import BOTTOM, COVERAGE, LEFT, RIGHT, TOP
from shpb.view.page import HEIGHT, WIDTH, Page

if TYPE_CHECKING:
    from matplotlib.axes import Axes


LABEL_STEP = 0.135  # from label to label beside a panel [in]
_SAMPLE = 0.26  # length of the piece of line of a label [in]
_GAP = 0.05  # between that and the words [in]
_APART = 0.08  # between the words and what follows at their right [in]


class Beside(NamedTuple):
    """One label beside a panel, wanted at ``y`` [axis units]; ``x`` is where its line ends."""

    y: float
    words: str
    line: dict[str, Any]
    x: float | None = None


class Grid(NamedTuple):
    """Panels side by side on a page: width and height of each [in], and their lower left corners."""

    width: float
    height: float
    corners: list[tuple[float, float]]


def panel_grid(count: int, most_across: int, beside_in: float) -> Grid:
    """Room for ``count`` panels with headings, axis labels and ``beside_in`` for labels at their right."""
    across = min(count, most_across if count > 4 else 2)
    down = -(-count // across)
    cell_w, cell_h = (RIGHT - LEFT) / across, (TOP - BOTTOM + 0.1) / down
    width, height = cell_w - 0.52 - beside_in - 0.05, cell_h - 0.66
    corners = [
        (LEFT + 0.52 + (k % across) * cell_w, TOP - (k // across + 1) * cell_h + 0.46) for k in range(count)
    ]
    return Grid(width, height, corners)


def decades(rates_per_s: Sequence[float] | FloatArray) -> tuple[Scale, tuple[str, ...]]:
    """Axis of log10(rate/(1/s)) that holds all rates, and the words of its ticks."""
    logs = np.log10(np.asarray(rates_per_s, dtype=float))
    room = max(0.06 * float(np.ptp(logs)), 0.12)
    low, high = float(logs.min()) - room, float(logs.max()) + room
    whole = np.arange(np.ceil(low), np.floor(high) + 1)
    if whole.size >= 3 or (whole.size == 2 and high - low > 1.5):
        ticks = whole[:: -(-whole.size // 8)]
        return Scale(low, high, tuple(ticks.tolist())), tuple(power_of_ten(int(t)) for t in ticks)
    parts = np.array([1, 2, 5] if high - low > 0.45 else [1, 1.5, 2, 3, 4, 5, 6, 7, 8, 9])
    values = (10.0 ** np.arange(np.floor(low), np.ceil(high) + 1)[:, None] * parts).ravel()
    values = values[(values >= 10**low) & (values <= 10**high)]
    words = tuple(rate_words(float(v)).removesuffix(" /s") for v in values)
    return Scale(low, high, tuple(np.log10(values).tolist())), words


def stress_scale(values_mpa: Sequence[float] | FloatArray, about: int = 6) -> Scale:
    """Axis of stresses with a little room above and below."""
    low, high = float(np.min(values_mpa)), float(np.max(values_mpa))
    room = max(0.07 * (high - low), 0.01 * abs(high), 1e-9)
    return scale(max(low - room, 0.0), high + room, about)


def error_bars(
    axes: Axes, x: FloatArray, y: FloatArray, own: FloatArray, both: FloatArray, colour: str
) -> None:
    """Own uncertainty as a thick bar, with what a rig or machine shares as a thin one with caps; k = 2."""
    axes.errorbar(x, y, yerr=COVERAGE * both, label="_both", fmt="none", ecolor=colour, elinewidth=0.6, capsize=3.0,
                  capthick=0.6, zorder=2.5)  # fmt: skip
    axes.errorbar(
        x, y, yerr=COVERAGE * own, label="_own", fmt="none", ecolor=colour, elinewidth=1.6, zorder=2.6
    )


def beside(page: Page, axes: Axes, labels: Sequence[Beside], width: float) -> None:
    """Labels to the right of a panel, each as near its line as the others allow, with a piece of the line."""
    from matplotlib.lines import Line2D

    box = axes.get_position()
    right, bottom, height = box.x1 * WIDTH, box.y0 * HEIGHT, box.height * HEIGHT
    low, high = axes.get_ylim()
    wanted = [bottom + (one.y - low) / (high - low) * height for one in labels]
    across = page.figure.transFigure
    for one, at, y in zip(labels, wanted, spread(wanted, LABEL_STEP, bottom, bottom + height), strict=True):
        x = right + 0.16
        if one.x is not None:
            axes.plot([one.x, axes.get_xlim()[1]], [one.y, one.y], label="_to label", color=FAINT, linewidth=0.4,
                      zorder=0.6)  # fmt: skip
        for xs, ys, style in (
            ((right, x - 0.03), (at, y), {"color": FAINT, "linewidth": 0.4}),
            ((x, x + _SAMPLE), (y, y), one.line),
        ):
            page.figure.add_artist(
                Line2D([v / WIDTH for v in xs], [v / HEIGHT for v in ys], transform=across, **style)
            )
        start = x + _SAMPLE + _GAP
        words = page.fitted(one.words, SMALL, right + width - start - _APART)
        page.text(start, y - 0.3 * SMALL / 72, words, fontsize=SMALL)


def spread(wanted: Sequence[float], step: float, low: float, high: float) -> list[float]:
    """Places at least ``step`` apart between ``low`` and ``high``, as near the wanted ones as can be.

    Least squares under an order: pools of neighbours that would collide move together (pool adjacent violators,
    M. Ayer et al., Ann. Math. Stat. 26 (1955) 641-647). Where there is no room for all, they run over the lower end.
    """
    order = np.argsort(wanted, kind="stable")
    pools: list[list[float]] = []  # mean, size
    for place, i in enumerate(order):
        pools.append([wanted[i] - place * step, 1.0])
        while len(pools) > 1 and pools[-2][0] >= pools[-1][0]:
            mean, size = pools.pop()
            pools[-1] = [
                (pools[-1][0] * pools[-1][1] + mean * size) / (pools[-1][1] + size),
                pools[-1][1] + size,
            ]
    flat = np.concatenate([np.full(int(size), mean) for mean, size in pools]) if pools else np.empty(0)
    flat = np.minimum(np.maximum(flat, low), high - (len(wanted) - 1) * step)
    found = np.empty(len(wanted))
    found[order] = flat + step * np.arange(len(wanted))
    return [float(v) for v in found]
