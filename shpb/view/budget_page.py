"""The uncertainty budget of a shot drawn on a page: what makes stress, strain and rate uncertain, ranked.

What all shots of a rig share is hatched, what is the shot's own is solid, and both are said in words beside the bar, so
that a grey print tells as much.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from shpb.reduction import ShotResult
from shpb.trust.budget import ALL_OUTPUTS, COVERAGE_FACTOR
from shpb.version import VERSION
from shpb.view.figure import DPI, page_style, write_figure
from shpb.view.ink import BAND, BODY, DARK, INK, SMALL, scale
from shpb.view.page import HEIGHT, WIDTH, Page
from shpb.view.text import rounded
from shpb.view.uncertainty import mid_span, put_forward
from shpb.view.wording import shot_line, strain_text

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_MOST_BARS = 8
_LEFT, _RIGHT = 2.45, 0.35  # margins of the bars [in]
_TOPS = (6.70, 4.64, 2.58)  # of the three panels [in]
_PANEL = 1.60
_BAR = 0.62  # of the distance from bar to bar
_ROOM = 1.45  # of the longest bar, for the words beside it


class _Bar(NamedTuple):
    name: str
    percent: float  # of the value; negative where correlation takes away
    shared: bool | None  # None: several together
    assumed: bool


def budget_figure(result: ShotResult) -> Figure:
    """Draw the budget of one shot on one A4 page, landscape."""
    from matplotlib.figure import Figure

    with page_style():
        figure = Figure(figsize=(WIDTH, HEIGHT), dpi=DPI)
        page = Page(figure)
        _header(page, result)
        for top, (word, name, values) in zip(_TOPS, put_forward(result), strict=True):
            value = float(values[mid_span(result)])
            axes = page.axes(_LEFT, top - _PANEL, WIDTH - _LEFT - _RIGHT, _PANEL)
            bars = _bars(result, name, value)
            page.text(
                0.3, top + 0.12, _heading(result, word, name, value), fontsize=BODY + 1, fontweight="bold"
            )
            _draw(page, axes, bars, top)
        axes.set_xlabel("standard uncertainty (% of the value)", parse_math=False, labelpad=1.5)
        _footer(page, result)
    return figure


def save_budget_page(result: ShotResult, path: Path) -> Path:
    """Draw the budget and write it as PNG, PDF or SVG, as :func:`shpb.view.figure.save_figure` does."""
    return write_figure(lambda: budget_figure(result), Path(path))


def _header(page: Page, result: ShotResult) -> None:
    from matplotlib.patches import Rectangle

    response = result.response
    page.text(0.3, 7.88, "What makes this shot uncertain", fontsize=13, fontweight="bold")
    line = page.safe(shot_line(result, 40))
    page.text(WIDTH - _RIGHT, 7.88, page.fitted(line, 10, 6.5), fontsize=10, horizontalalignment="right")
    strain = float(response.curve.true_strain[mid_span(result)])
    where = "the middle of what counts" if response.span else "the middle of the loading (nothing counts)"
    page.text(
        0.3, 7.60,
        f"Standard uncertainty that each source brings at {where}, true strain {strain_text(strain)}; engineering "
        f"values, {response.analysis.value}. They add as squares; times {COVERAGE_FACTOR:g} for about 95 %.",
        fontsize=BODY + 0.5,
    )  # fmt: skip
    x = 0.3
    for shared, words in (
        (True, "hatched: the rig's, the same for all its shots"),
        (False, "solid: this shot's own"),
        (None, "white: all others together"),
    ):
        place = (x / WIDTH, 7.27 / HEIGHT)
        patch = Rectangle(
            place, 0.34 / WIDTH, 0.13 / HEIGHT, transform=page.figure.transFigure, **_look(shared)
        )
        page.figure.add_artist(patch)
        page.text(x + 0.42, 7.28, words, fontsize=BODY + 0.5)
        x += 0.42 + page.width_of(words, BODY + 0.5) + 0.35
    page.text(x, 7.28, "assumed: nobody has stated it, the size is common practice", fontsize=BODY + 0.5)
    page.rule(0.3, 7.12, WIDTH - _RIGHT - 0.3)


def _look(shared: bool | None) -> dict[str, Any]:
    if shared is None:
        return {"facecolor": "white", "edgecolor": INK, "linewidth": 0.7}
    if shared:
        return {"facecolor": BAND, "edgecolor": INK, "linewidth": 0.7, "hatch": "/////"}
    return {"facecolor": DARK, "edgecolor": INK, "linewidth": 0.7}


def _heading(result: ShotResult, word: str, name: str, value: float) -> str:
    """Value and standard uncertainty at mid-span."""
    u = float(result.budget.u_of(name)[mid_span(result)])
    factor, unit, what = {
        "stress": (1e-6, " MPa", "Stress"), "strain": (1.0, "", "Strain"), "rate": (1.0, " /s", "Strain rate"),
    }[word]  # fmt: skip
    said = f"{what} {rounded(value * factor)}{unit}, u {rounded(u * factor, 2)}{unit} = {_percent(u, value):.2f} %"
    if result.draws is None:
        return said
    drawn = float(result.draws.of("u", name)[mid_span(result)])
    return f"{said}; by {result.draws.draws} draws {_percent(drawn, value):.2f} %"


def _percent(u: float, value: float) -> float:
    return 100 * u / max(abs(value), 1e-300)


def _bars(result: ShotResult, name: str, value: float) -> list[_Bar]:
    """The greatest contributions, and one bar for the rest."""
    column = ALL_OUTPUTS.index(name)
    whole = _percent(float(result.budget.u_of(name)[mid_span(result)]), value)
    lines = sorted(result.budget.contributions, key=lambda line: -abs(line.share[column]))
    bars = [
        _Bar(
            line.source, float(np.sign(line.share[column]) * np.sqrt(abs(line.share[column]))) * whole, line.shared,
            line.assumed,
        )
        for line in lines[:_MOST_BARS]
    ]  # fmt: skip
    rest = sum(line.share[column] for line in lines[_MOST_BARS:])
    many = len(lines) - _MOST_BARS
    if many > 0:
        bars.append(_Bar(f"{many} others together", float(np.sqrt(max(rest, 0.0))) * whole, None, False))
    return bars


def _draw(page: Page, axes: Axes, bars: list[_Bar], top: float) -> None:
    count = _MOST_BARS + 1
    longest = max(1e-9, *(abs(bar.percent) for bar in bars))
    for number, bar in enumerate(bars):
        axes.barh(number, abs(bar.percent), height=_BAR, **_look(bar.shared))
        words = [f"{bar.percent:.2f} %"]
        if bar.shared is not None:
            words.append("rig's" if bar.shared else "shot's")
        words += ["assumed"] * bar.assumed + ["takes away"] * (bar.percent < 0)
        axes.annotate(
            ", ".join(words), (abs(bar.percent), number), (4, 0), textcoords="offset points", fontsize=SMALL,
            verticalalignment="center", parse_math=False,
        )  # fmt: skip
        y = top - _PANEL * (number + 0.5) / count - 0.3 * BODY / 72
        page.text(_LEFT - 0.08, y, bar.name, fontsize=BODY, horizontalalignment="right")
    axes.set_ylim(count - 0.5, -0.5)
    axes.set_yticks([])
    ticks = scale(0.0, _ROOM * longest, 8)
    axes.set_xlim(ticks.low, ticks.high)
    axes.set_xticks(ticks.ticks, ticks.labels)


def _footer(page: Page, result: ShotResult) -> None:
    notes = {
        line.source: line.note for line in result.budget.contributions if line.note and max(line.share) > 0.01
    }
    said = "; ".join(f"{source}: {note}" for source, note in notes.items())
    if said:
        page.paragraph(0.3, 0.38, page.safe(said) + ".", width=8.4, most=2, size=SMALL)
    text = page.safe(f"rig {result.rig.name}; shpb {VERSION}")
    page.text(
        WIDTH - _RIGHT, 0.22, page.fitted(text, SMALL, 2.4), fontsize=SMALL, color="#555555",
        horizontalalignment="right",
    )  # fmt: skip
