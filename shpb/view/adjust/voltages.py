"""The voltages with what can be moved on them: a bar above each window, its two edges, a line at each foot.

What is held is told by thickness, fill and a full line, not by colour. The bars of two windows on one trace stand at
different heights, so that edges at one time can still be told apart and taken.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from shpb.adjust.desk import Desk
from shpb.adjust.marks import END, FOOT, MARKS, START, Mark
from shpb.pulse.strain import StationStrain
from shpb.view.adjust.cells import Cells
from shpb.view.ink import DARK, DASHES, DOTS, FAINT, INK, MIDDLE, SHADE, SMALL, Line, envelope

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.backend_bases import MouseEvent
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D
    from matplotlib.patches import Rectangle

_US = 1e6
_TOP = {"incident": (0.895, 0.985), "reflected": (0.775, 0.865), "transmitted": (0.88, 0.985)}
_HATCH = {"incident": "////", "reflected": "\\\\\\\\", "transmitted": "////"}
_FREE = 0.34  # of the height is left above the trace for the bars
REACH_PX = 9.0  # how near a mark the mouse must be
_LOOKS = (Line("", DARK, (), 0.8), Line("", MIDDLE, DASHES, 0.8))


class Grip(NamedTuple):
    """What the mouse has taken: a mark, or with ``whole`` the window that it belongs to."""

    mark: Mark
    whole: bool = False


class VoltagePanel:
    """One gauge's voltages and the marks of its pulses."""

    def __init__(
        self, figure: Figure, axes: Axes, station: StationStrain, desk: Desk, pulses: tuple[str, ...]
    ) -> None:
        self.axes, self._desk, self._pulses = axes, desk, pulses
        self._figure = figure
        self._voltage_v = station.voltage_v
        least, greatest = float(station.voltage_v.min()), float(station.voltage_v.max())
        unit, self._factor = ("mV", 1e3) if max(abs(least), abs(greatest)) < 0.5 else ("V", 1.0)
        low, high = least * self._factor, greatest * self._factor
        room = max(high - low, 1e-9)
        axes.set_ylim(low - 0.06 * room, high + _FREE / (1 - _FREE) * 1.06 * room)
        axes.set_ylabel(f"{pulses[0]} ({unit})")
        self._traces = [
            axes.plot([], [], **look.style)[0] for _, look in zip(station.voltage_v, _LOOKS, strict=False)
        ]
        self._bars: dict[str, Rectangle] = {}
        self._names: dict[str, Cells] = {}
        self._lines: dict[Mark, Line2D] = {}
        for pulse in pulses:
            self._make(pulse)
        self._time = Cells(self._figure, self._at_held, SMALL + 1, bold=True, ground="white")

    def _make(self, pulse: str) -> None:
        from matplotlib.patches import Rectangle

        axes = self.axes
        across = axes.get_xaxis_transform()
        low, high = _TOP[pulse]
        bar = Rectangle((0, low), 1, high - low, transform=across, animated=True, edgecolor=INK, zorder=3)
        axes.add_patch(bar)
        self._bars[pulse] = bar

        def at_bar() -> tuple[float, float]:
            """Just inside the bar, or inside the axes where the bar begins before them."""
            begin = max(_us(self._desk.time(Mark(pulse, START))), axes.get_xlim()[0])
            x, y = across.transform((begin, 0.5 * (low + high))).tolist()
            return x + 6, y

        self._names[pulse] = Cells(self._figure, at_bar, SMALL, anchor="left", ground="white")
        for part in (START, FOOT, END):
            top = 1.0 if part == FOOT else high
            (line,) = axes.plot([0, 0], [0, top], transform=across, animated=True, color=INK, marker="^",
                                markersize=0, markevery=[0])  # fmt: skip
            self._lines[Mark(pulse, part)] = line

    # --- drawing --------------------------------------------------------------------------------

    def trace(self, view_us: tuple[float, float]) -> None:
        """Put the part of the record that is in view on the axes, thinned to the columns of the screen."""
        strain = self._desk.shot.strain
        start, stop = strain.index(view_us[0] / _US), strain.index(view_us[1] / _US)
        start, stop = max(start - 1, 0), min(stop + 1, strain.samples)
        columns = max(int(self.axes.bbox.width), 64)
        for line, voltage in zip(self._traces, self._voltage_v, strict=False):
            part = voltage[start:stop]
            picked = envelope(part, 2 * columns)
            line.set_data(
                (strain.start_s + strain.sample_interval_s * (start + picked)) * _US,
                part[picked] * self._factor,
            )

    def update(self, focused: bool) -> list[Artist]:
        """Put bars and marks where they stand; return what is to be drawn."""
        desk, drawn = self._desk, list[object]()
        for pulse in self._pulses:
            start, end = (_us(desk.time(Mark(pulse, part))) for part in (START, END))
            held = focused and desk.mark.pulse == pulse
            bar, name = self._bars[pulse], self._names[pulse]
            bar.set_x(start)
            bar.set_width(end - start)
            bar.set(linewidth=2.0 if held else 0.7, facecolor="#cfcac0" if held else SHADE,
                    hatch=_HATCH[pulse] if held else None)  # fmt: skip
            low, high = self.axes.get_xlim()
            name.text = pulse + (", by hand" if self._any_by_hand(pulse) else "")
            name.bold = held
            name.set_visible(start < high and end > low)
            drawn += [bar, name]
        for mark, line in self._lines.items():
            time = desk.time(mark)
            line.set_visible(time is not None)
            if time is not None:
                self._dress(line, mark, held=focused and desk.mark == mark)
                line.set_xdata([_us(time)] * 2)
                drawn.append(line)
        drawn += self._said_time(focused)
        return drawn  # type: ignore[return-value]

    def _any_by_hand(self, pulse: str) -> bool:
        return any(self._desk.by_hand(mark) for mark in MARKS if mark.pulse == pulse)

    def _dress(self, line: Line2D, mark: Mark, *, held: bool) -> None:
        dashes = DOTS if mark.part == FOOT else DASHES
        line.set_linestyle("-" if held else (0, dashes))
        line.set_linewidth(2.4 if held else 1.1)
        line.set_color(INK if held or mark.part == FOOT else FAINT)
        line.set_markersize((9 if held else 6) if mark.part == FOOT else (6 if held else 0))

    def _said_time(self, focused: bool) -> list[object]:
        mark = self._desk.mark
        time = self._desk.time(mark)
        low, high = self.axes.get_xlim()
        shown = focused and mark in self._lines and time is not None and low <= _us(time) <= high
        if not shown or time is None:
            return []
        self._time.anchor = "right" if _us(time) > low + 0.85 * (high - low) else "left"
        self._time.text = f"{_us(time):.2f} µs"
        return [self._time]

    def _at_held(self) -> tuple[float, float]:
        time = _us(self._desk.time(self._desk.mark))
        x, y = self.axes.get_xaxis_transform().transform((time, 0.09)).tolist()
        return x + (-7 if self._time.anchor == "right" else 7), y

    # --- the mouse ------------------------------------------------------------------------------

    def grip(self, event: MouseEvent) -> Grip | None:
        """What the mouse points at: a mark within reach, or the bar above a window."""
        within = event.inaxes is self.axes and event.xdata is not None
        if not within or event.xdata is None:
            return None
        height = float(self.axes.transAxes.inverted().transform((event.x, event.y))[1])
        near = []
        for mark in self._lines:
            time = self._desk.time(mark)
            if time is None:
                continue
            x = float(self.axes.transData.transform((_us(time), 0))[0])
            off = abs(x - event.x)
            if off <= REACH_PX:
                near.append((self._rank(mark, height, event.x - x), off, mark))
        if near:
            return Grip(min(near, key=lambda one: one[:2])[2])
        for pulse in self._pulses:
            low, high = _TOP[pulse]
            start, end = (_us(self._desk.time(Mark(pulse, part))) for part in (START, END))
            if low <= height <= high and start <= event.xdata <= end:
                return Grip(Mark(pulse, START), whole=True)
        return None

    def _rank(self, mark: Mark, height: float, right_of_px: float) -> int:
        """Of marks at one place: that at the height of the mouse first, else that on whose inner side it is."""
        low, high = _TOP[mark.pulse]
        if mark.part != FOOT and low <= height <= high:
            return 0
        outside = (mark.part == START and right_of_px < 0) or (mark.part == END and right_of_px > 0)
        return 2 if outside else 1

    def pulse_at(self, event: MouseEvent) -> str | None:
        """The pulse in whose window the mouse is."""
        if event.inaxes is not self.axes or event.xdata is None:
            return None
        for pulse in self._pulses:
            start, end = (_us(self._desk.time(Mark(pulse, part))) for part in (START, END))
            if start <= event.xdata <= end:
                return pulse
        return None


def _us(time_s: float | None) -> float:
    return np.nan if time_s is None else time_s * _US
