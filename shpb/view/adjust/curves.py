"""What follows from the windows: forces at the faces, R(t), and the curves of one- and three-wave analysis."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import numpy as np

from shpb.adjust.following import Live
from shpb.arrays import FloatArray
from shpb.response.response import Response
from shpb.settings import Analysis
from shpb.view.adjust.layout import Panels
from shpb.view.ink import DARK, DASHES, INK, MIDDLE, SMALL, envelope
from shpb.view.strain_panels import ANALYSES
from shpb.view.text import fitted, printable, wrapped
from shpb.view.time_panels import FLOOR, FORCE_LINES, LIMIT, RATIO

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D

_US = 1e6
_POINTS = 400  # of a line that is drawn again and again


class CurvePanels:
    """Lines that follow the hand; their axes keep their limits until the hand lets go."""

    def __init__(self, panels: Panels) -> None:
        self._panels = panels
        self._forces = [_line(panels.forces, look.style, look.name) for look in FORCE_LINES]
        self._ratio = _line(panels.ratio, RATIO.style, RATIO.name)
        self._floor = _line(panels.ratio, FLOOR.style, FLOOR.name)
        self._counts = _line(panels.ratio, {"color": INK, "linewidth": 4.0}, "counts")
        self._thin = [_line(panels.curve, {**look.style, "linewidth": 0.9}, look.name) for look in ANALYSES]
        self._thick = [_line(panels.curve, {**look.style, "linewidth": 2.2}, "counts") for look in ANALYSES]
        self._problem = panels.curve.text(
            0.5, 0.5, "", transform=panels.curve.transAxes, animated=True, horizontalalignment="center",
            verticalalignment="center", fontsize=9, bbox={"facecolor": "white", "edgecolor": INK, "pad": 6},
        )  # fmt: skip
        self._limit = panels.ratio.axhline(0.0, **LIMIT.style)
        _key(panels.forces, [(look.name, look.style) for look in FORCE_LINES])
        _key(panels.ratio, [("R", RATIO.style), ("measurement floor", FLOOR.style), ("limit", LIMIT.style),
                            ("counts", {"color": INK, "linewidth": 4.0})])  # fmt: skip
        _key(panels.curve, [("one-wave", {"color": DARK}), ("three-wave", {"color": MIDDLE, "linestyle": (0, DASHES)}),
                            ("broad: counts", {"color": INK, "linewidth": 2.2})], place="lower right")  # fmt: skip

    def fit(self, live: Live) -> None:
        """Set the limits of the axes to what stands now."""
        response = live.response
        if response is None:
            return
        end = float(response.time_s[response.loading[1] - 1])
        low_s, high_s = (
            max(float(response.time_s[0]), -0.05 * end),
            min(float(response.time_s[-1]), 1.3 * end),
        )
        self._panels.forces.set_xlim(low_s * _US, high_s * _US)
        shown = _shown(response)
        forces = np.concatenate([force[shown] for force in response.motion[:2]]) * 1e-3
        _set_y(self._panels.forces, forces, 0.25)
        limit = 100 * response.equilibrium.limit
        loading = response.equilibrium.ratio[slice(*response.loading)]
        top = 100 * float(np.clip(1.3 * np.quantile(loading, 0.75), 5 * limit / 100, 2.1))
        self._panels.ratio.set_ylim(-0.06 * top, top)
        self._limit.set_ydata([limit, limit])
        curves = (response.one_wave, response.three_wave)
        strain = max(float(curve.true_strain[shown].max()) for curve in curves)
        self._panels.curve.set_xlim(-0.03 * strain, 1.1 * max(strain, 1e-4))
        _set_y(self._panels.curve, np.concatenate([c.true_stress_pa[shown] for c in curves]) * 1e-6, 0.08)

    def update(self, live: Live) -> list[Artist]:
        """Lay the lines anew; return what is to be drawn."""
        response = live.response
        if response is None:
            words = wrapped(fitted(printable(live.problem), 320), 44)
            self._problem.set_text("\n".join(["no curve from these windows:", *words]))
            return [self._problem]
        shown, span = _shown(response), response.span
        time_us = response.time_s * _US
        for line, force in zip(self._forces, response.motion[:2], strict=True):
            _lay(line, time_us[shown], force[shown] * 1e-3)
        ratio = response.equilibrium
        _lay(self._ratio, time_us[shown], 100 * ratio.ratio[shown])
        _lay(self._floor, time_us[shown], 100 * ratio.floor[shown])
        counts = [] if span is None else [time_us[span[0]], time_us[span[1] - 1]]
        low = self._panels.ratio.get_ylim()[0]
        self._counts.set_data(counts, [0.4 * low] * len(counts))
        curves = (response.one_wave, response.three_wave)
        first = response.analysis is Analysis.ONE_WAVE
        for thin, thick, curve, forward in zip(
            self._thin, self._thick, curves, (first, not first), strict=True
        ):
            _lay(thin, curve.true_strain[shown], curve.true_stress_pa[shown] * 1e-6)
            part = slice(0, 0) if span is None or not forward else slice(*span)
            _lay(thick, curve.true_strain[part], curve.true_stress_pa[part] * 1e-6)
        return [*self._forces, self._ratio, self._floor, self._counts, *self._thin, *self._thick]


def _shown(response: Response) -> slice:
    first, last = response.loading
    return slice(max(first - 40, 0), min(last + (last - first) // 3, response.time_s.size))


def _line(axes: Axes, style: dict[str, object], name: str) -> Line2D:
    (line,) = axes.plot([], [], animated=True, label=name, **style)  # type: ignore[arg-type]
    return line


def _lay(line: Line2D, x: FloatArray, y: FloatArray) -> None:
    picked = envelope(y, _POINTS) if y.size > _POINTS else slice(None)
    line.set_data(x[picked], y[picked])


def _set_y(axes: Axes, values: FloatArray, above: float) -> None:
    low, high = min(float(values.min()), 0.0), float(values.max())
    room = max(high - low, 1e-9)
    axes.set_ylim(low - 0.06 * room, high + above * room)


def _key(
    axes: Axes,
    entries: list[tuple[str, dict[str, object]]],
    place: Literal["upper right", "lower right"] = "upper right",
) -> None:
    from matplotlib.lines import Line2D

    lines = [Line2D([], [], **style) for _, style in entries]  # type: ignore[arg-type]
    axes.legend(lines, [name for name, _ in entries], loc=place, fontsize=SMALL, frameon=False, handlelength=3.2,
                ncols=len(entries) if place == "upper right" else 1, borderaxespad=0.2)  # fmt: skip
