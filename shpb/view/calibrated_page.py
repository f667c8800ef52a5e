"""One page of a calibration: phase speeds, the striker's line, what every source says, and the values."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from shpb.calibrate.calibration import Calibrated
from shpb.version import VERSION
from shpb.view.calibrated import value_lines
from shpb.view.calibrated_panels import line_panel, propagation_panels, sources_panel, speed_panel
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.figure import DPI, page_style, write_figure
from shpb.view.ink import BODY, FAINT, SMALL
from shpb.view.page import HEIGHT, WIDTH, Page

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_LEFT, _RIGHT, _TOP, _BOTTOM = 0.3, WIDTH - 0.3, 7.2, 0.4
_COLUMN = (_RIGHT - _LEFT) / 3
_MOST_FINDINGS = 4
_LEADING = 0.145


def save_calibrated_figure(done: Calibrated, path: Path) -> Path:
    """Draw the page and write it; the ending of ``path`` chooses png, pdf or svg."""
    return write_figure(lambda: calibrated_figure(done), path)


def calibrated_figure(done: Calibrated) -> Figure:
    """Draw one calibration on A4, landscape: bars left, striker's line in the middle, sources and values right."""
    from matplotlib.figure import Figure

    with page_style():
        figure = Figure(figsize=(WIDTH, HEIGHT), dpi=DPI)
        page = Page(figure)
        _head(page, done)
        _bars(page, done)
        _lines(page, done)
        low = _values(page, done)
        if done.sensitivities is not None:
            right = _LEFT + 2 * _COLUMN
            sources_panel(page, done.sensitivities, (right + 0.1, low, _COLUMN - 0.1, _TOP - low))
        page.text(_LEFT, 0.16, f"shpb {VERSION}", fontsize=SMALL, color=FAINT)
    return figure


def _head(page: Page, done: Calibrated) -> None:
    calibration = done.calibration
    title = f"{page.safe(calibration.rig)}: calibration of {page.safe(calibration.date)}"
    page.text(
        _LEFT,
        HEIGHT - 0.38,
        page.fitted(title, 13, _RIGHT - _LEFT, bold=True),
        fontsize=13,
        fontweight="bold",
    )
    shots = len(done.session.shots)
    said = f"{page.safe(calibration.name)}; {shots} shots; holds {calibration.holds_days} days. "
    said += "Bars: k = 2, about 95 %. "
    if not done.findings:
        said += "Nothing contradicts anything beyond its uncertainty."
    for one in done.findings[:_MOST_FINDINGS]:
        check = page.safe(one.check)
        said += f"{'!! ' if one.grave else ''}{check[:1].upper()}{check[1:]}: {page.safe(one.measured)}. "
    if len(done.findings) > _MOST_FINDINGS:
        said += f"{len(done.findings) - _MOST_FINDINGS} more."
    page.paragraph(_LEFT, HEIGHT - 0.58, said, width=_RIGHT - _LEFT, most=3)


def _stacked(count: int) -> Sequence[tuple[float, float]]:
    """Bottom and height of so many places, one above the other, the first on top."""
    high = (_TOP - _BOTTOM) / count
    return [(_TOP - (number + 1) * high, high) for number in range(count)]


def _bars(page: Page, done: Calibrated) -> None:
    speeds = list(done.constants.bars.values()) if done.constants is not None else []
    count = len(speeds) + len(done.propagation)
    if not count:
        return
    places = iter(_stacked(max(count, 2)))
    for one in speeds:
        bottom, high = next(places)
        speed_panel(page, one, (_LEFT, bottom, _COLUMN - 0.2, high))
    for measured in done.propagation.values():
        bottom, high = next(places)
        propagation_panels(page, measured, (_LEFT, bottom, _COLUMN - 0.2, high))


def _lines(page: Page, done: Calibrated) -> None:
    lines = done.lines.lines if done.lines is not None else ()
    for line, (bottom, high) in zip(lines, _stacked(max(len(lines), 2)), strict=False):
        line_panel(page, line, (_LEFT + _COLUMN, bottom, _COLUMN - 0.2, high))


def _values(page: Page, done: Calibrated) -> float:
    """The table of values at the lower right; returns where it begins."""
    lines = value_lines(done)
    left, width = _LEFT + 2 * _COLUMN + 0.1, _COLUMN - 0.1
    tables = list(dict.fromkeys(line.table for line in lines))
    rows = len(lines) + len(tables) + 1
    top = _BOTTOM + rows * _LEADING
    ends = [left + width * share for share in (0.49, 0.68, 0.82, 1.0)]
    y = top
    for end, word in zip(ends, ("stated", "measured", "u", "change"), strict=True):
        page.text(end, y, word, fontsize=SMALL, horizontalalignment="right", color=FAINT)
    table = ""
    for line in lines:
        if line.table != table:
            table = line.table
            y -= _LEADING
            page.text(left, y, table.replace("_", " "), fontsize=BODY, fontweight="bold")
        y -= _LEADING
        measured, stated = line.measured.scaled(line.factor), line.stated.scaled(line.factor)
        name = f"{line.what}, {line.unit}" if line.unit else line.what
        page.text(left + 0.1, y, name, fontsize=BODY)
        cells = (
            to_uncertainty(stated, measured.u),
            to_uncertainty(measured, measured.u),
            uncertainty(measured.u),
            f"{100 * line.change:+.2f} %",
        )
        for end, cell in zip(ends, cells, strict=True):
            page.text(end, y, cell, fontsize=BODY, horizontalalignment="right")
    return top + 0.3
