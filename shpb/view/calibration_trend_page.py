"""The trend of a rig's calibrated values over time on one page: a panel for each value, with its uncertainty."""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from shpb.calibrate.history import Trend
from shpb.version import VERSION
from shpb.view.calibration_trend import shown_value
from shpb.view.figure import DPI, page_style, write_figure
from shpb.view.ink import BODY, DARK, DOTS, FAINT, INK, SMALL, Scale, scale
from shpb.view.page import HEIGHT, WIDTH, Page, frame

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_LEFT, _RIGHT, _TOP, _BOTTOM = 0.3, WIDTH - 0.35, 7.25, 0.45
_ACROSS = 3
_MOST = 12  # panels of one page
_COVERAGE = 2.0
_LONGEST_AXIS = 4  # dates that fit below a panel


def save_trend_figure(rig: str, trends: Sequence[Trend], path: Path) -> Path:
    """Draw the page and write it; the ending of ``path`` chooses png, pdf or svg."""
    return write_figure(lambda: trend_figure(rig, trends), path)


def trend_figure(rig: str, trends: Sequence[Trend]) -> Figure:
    """Draw the trends of one rig on A4, landscape; every value relative to its first."""
    from matplotlib.figure import Figure

    with page_style():
        figure = Figure(figsize=(WIDTH, HEIGHT), dpi=DPI)
        page = Page(figure)
        shown = list(trends[:_MOST])
        page.text(
            _LEFT,
            HEIGHT - 0.42,
            page.fitted(page.safe(rig), 13, 7.0, bold=True),
            fontsize=13,
            fontweight="bold",
        )
        sentence = (
            "Calibrated values over time, as change from the first calibration. Bars: k = 2, about 95 %. The first "
            "value stands above each panel. A dotted line: the rig file was changed there, so that step is no drift."
        )
        if len(trends) > _MOST:
            sentence += f" {len(trends) - _MOST} further values stand in the table only."
        page.paragraph(_LEFT, HEIGHT - 0.66, sentence, width=_RIGHT - _LEFT, most=2)
        across = min(_ACROSS, max(len(shown), 1))
        down = max(-(-len(shown) // across), 1)
        wide, high = (_RIGHT - _LEFT) / across, (_TOP - _BOTTOM) / down
        ends = _span([point.date for trend in shown for point in trend.points])
        for number, trend in enumerate(shown):
            left, bottom = _LEFT + number % across * wide, _TOP - (number // across + 1) * high
            _panel(page, trend, (left + 0.55, bottom + 0.42, wide - 0.75, high - 0.86), ends)
        page.text(_LEFT, 0.2, f"shpb {VERSION}", fontsize=SMALL, color=FAINT)
    return figure


def _day(date: str) -> int:
    return datetime.date.fromisoformat(date).toordinal()


def _span(dates: Sequence[str]) -> tuple[float, float]:
    """First and last day of all panels with room for the words at either end."""
    days = [_day(date) for date in dates] or [1]
    room = max(0.12 * (max(days) - min(days)), 20.0)
    return min(days) - room, max(days) + room


def _panel(
    page: Page, trend: Trend, place: tuple[float, float, float, float], ends: tuple[float, float]
) -> None:
    axes = page.axes(*place)
    x, y, width, height = place
    first = trend.points[0].value
    in_mm = trend.unit == "m"
    factor = 1e3 if in_mm else 100.0 / float(first)
    days = np.array([_day(point.date) for point in trend.points], dtype=float)
    change = np.array([(point.value - first) * factor for point in trend.points])
    bars = np.array([_COVERAGE * (point.value.u or 0.0) * abs(factor) for point in trend.points])
    reach = max(float(np.abs(change).max() + bars.max()) * 1.15, 1e-9)
    low, high = min(float((change - bars).min()), 0.0) * 1.15, max(float((change + bars).max()), 0.0) * 1.15
    vertical = scale(low or -reach, high or reach, 5)
    label = "change, mm" if in_mm else "change, %"
    frame(axes, _dates(sorted({point.date for point in trend.points}), ends), vertical, " ", label)
    axes.axhline(0.0, color=FAINT, linewidth=0.6, zorder=1)
    axes.plot(days, change, color=DARK, linewidth=0.8, zorder=2)
    axes.errorbar(
        days, change, yerr=bars, fmt="o", color=DARK, markersize=4, elinewidth=1.0, capsize=3.0, zorder=3
    )
    for step in trend.drifts:
        if step.changed:
            middle = 0.5 * (_day(step.earlier.date) + _day(step.later.date))
            axes.axvline(middle, color=INK, linewidth=0.9, linestyle=(0, DOTS), zorder=1)
    value, u, unit = shown_value(trend, first)
    page.text(x - 0.45, y + height + 0.20, page.fitted(page.safe(trend.name), BODY + 0.5, width + 0.45, bold=True),
              fontsize=BODY + 0.5, fontweight="bold")  # fmt: skip
    said = f"first {value} {unit}".rstrip() + f", u {u}"
    changed = [", ".join(step.changed) for step in trend.drifts if step.changed]
    if changed:
        said += "; changed: " + "; ".join(changed)
    page.text(x - 0.45, y + height + 0.06, page.fitted(page.safe(said), SMALL, width + 0.45), fontsize=SMALL)


class _Dates(Scale):
    """Days as ticks, dates as their labels."""

    @property
    def labels(self) -> tuple[str, ...]:
        return tuple(datetime.date.fromordinal(round(tick)).isoformat() for tick in self.ticks)


def _dates(dates: Sequence[str], ends: tuple[float, float]) -> Scale:
    """The days of calibration as ticks, thinned to what fits."""
    every = -(-len(dates) // _LONGEST_AXIS)
    kept = [dates[k] for k in range(len(dates) - 1, -1, -every)][::-1]
    return _Dates(ends[0], ends[1], tuple(float(_day(date)) for date in kept))
