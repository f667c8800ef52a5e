"""Several stored shots on one A4 page: curves, rates and R on the left, listing and differences on the right.

Every curve carries its number at its end, the number of its line in the listing, and has dashes of its own: colour
says only which material it is.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.response.equilibrium import R_DEFINITION
from shpb.version import VERSION
from shpb.view.figure import DPI, page_style, write_figure
from shpb.view.ink import (
    BODY,
    DARK,
    DASH_DOT,
    DASHES,
    DOTS,
    FAINT,
    INK,
    LIGHT,
    MIDDLE,
    SMALL,
    Scale,
    envelope,
    scale,
)
from shpb.view.page import HEIGHT, WIDTH, Page, frame
from shpb.view.report.stored import ReportedShot
from shpb.view.show_compare import Group, cell_words, compared, counts, legend_words
from shpb.view.text import rounded

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST_SHOTS = 24  # that can still be told apart
_MOST_BANDS = 6
_LEFT, _LEFT_WIDTH = 0.72, 6.15
_RIGHT, _RIGHT_END = 7.2, WIDTH - 0.3
_COLOURS = (DARK, MIDDLE, LIGHT, INK)
_TINTS = ("#c3cde6", "#ecc9b4", "#cfe3f1", "#dddddd")
_PATTERNS: tuple[tuple[float, ...], ...] = ((), DASHES, DOTS, DASH_DOT, (9.0, 1.8), (2.6, 1.2, 1.0, 1.2))
_TABLE_LEADING = 0.148
_CURVE, _RATE, _RATIO = (3.92, 3.16), (2.32, 1.18), (0.62, 1.18)  # lower edge and height [in]


class _Drawn:
    """One shot that is drawn: its number, its look, and its samples."""

    def __init__(self, number: int, shot: ReportedShot, colour: int, pattern: int) -> None:
        self.number, self.shot = number, shot
        self.colour, self.tint = _COLOURS[colour % len(_COLOURS)], _TINTS[colour % len(_TINTS)]
        self.dashes = _PATTERNS[pattern % len(_PATTERNS)]
        part = shot.span
        assert part is not None
        self.part = part
        self.strain = np.maximum.accumulate(shot["response/true_strain"][part])

    @property
    def line(self) -> dict[str, Any]:
        """Keyword arguments of its line."""
        pattern = (0, self.dashes) if self.dashes else "-"
        return {"color": self.colour, "linestyle": pattern, "linewidth": 1.1}

    def of(self, path: str) -> FloatArray:
        """An array where it counts."""
        return self.shot[path][self.part]


def compare_figure(shots: Sequence[ReportedShot]) -> Figure:
    """Draw stored shots on one page.

    Raises
    ------
    InputError
        If there are more than can be told apart.
    """
    from matplotlib.figure import Figure

    require_few(len(shots))
    with page_style():
        figure = Figure(figsize=(WIDTH, HEIGHT), dpi=DPI)
        page = Page(figure)
        drawn = _drawn(shots)
        _header(page, shots, drawn)
        if drawn:
            _curves(page, drawn)
            _rates(page, drawn)
            _ratios(page, drawn)
        else:
            page.text(
                _LEFT, 4.5, "No part of any of these shots counts: there is no curve to show.", fontsize=10
            )
        below = _listing(page, shots, drawn)
        _differences(page, compared(shots), below)
        page.text(_RIGHT_END, 0.22, f"from stored results; shpb {VERSION}", fontsize=SMALL, color="#555555",
                  horizontalalignment="right")  # fmt: skip
    return figure


def require_few(shots: int) -> None:
    """Raise InputError if a page cannot show so many shots apart."""
    if shots > MOST_SHOTS:
        raise InputError(
            f"{shots} shots, of which one page shows {MOST_SHOTS}",
            where="--figure",
            mend="Name fewer shots, such as those of one condition",
        )


def save_compare_figure(shots: Sequence[ReportedShot], path: Path) -> Path:
    """Draw stored shots and write the page as PNG, PDF or SVG, by the suffix of ``path``."""
    return write_figure(lambda: compare_figure(shots), path)


def _drawn(shots: Sequence[ReportedShot]) -> list[_Drawn]:
    """The shots that count: colour by material and kind, dashes by place among those."""
    seen: dict[tuple[str, str], int] = {}
    places: dict[int, int] = {}
    found = []
    for number, shot in enumerate(shots, 1):
        if not counts(shot):
            continue
        about = (shot.stored.sheet.specimen.material, shot.stored.sheet.kind.value)
        colour = seen.setdefault(about, len(seen))
        pattern = places[colour] = places.get(colour, -1) + 1
        found.append(_Drawn(number, shot, colour, pattern))
    return found


def _header(page: Page, shots: Sequence[ReportedShot], drawn: Sequence[_Drawn]) -> None:
    words = f"{len(shots)} shots compared"
    page.text(0.3, 7.92, words, fontsize=13, fontweight="bold")
    materials = dict.fromkeys(
        f"{s.stored.sheet.specimen.material}, {s.stored.sheet.kind.value}" for s in shots
    )
    x = 0.3 + page.width_of(words, 13, bold=True) + 0.25
    page.text(x, 7.92, page.fitted(page.safe("; ".join(materials)), 11, _RIGHT_END - x), fontsize=11)
    out = len(shots) - len(drawn)
    band = "with its interval of about 95 %" if len(drawn) <= _MOST_BANDS else "without its interval"
    said = (
        f"Each curve where it counts, {band}; its number stands at its end and in the listing. "
        + (f"{out} rejected: in the listing only. " if out else "")
        + "Colour says which material, dashes which shot."
    )
    page.paragraph(0.3, 7.62, said, width=_RIGHT_END - 0.3, most=2, size=BODY + 0.5)
    page.rule(0.3, 7.40, _RIGHT_END - 0.3)


def _axes(page: Page, place: tuple[float, float]) -> Axes:
    return page.axes(_LEFT, place[0], _LEFT_WIDTH, place[1])


def _curves(page: Page, drawn: Sequence[_Drawn]) -> None:
    page.key(_LEFT, 7.18, "True stress", ())
    axes = _axes(page, _CURVE)
    ends, highest, lowest = [], 0.0, 0.0
    for one in drawn:
        stress = 1e-6 * one.of("response/true_stress")
        band = one.shot.band()
        if len(drawn) <= _MOST_BANDS and band is not None:
            thin = slice(None, None, max(one.strain.size // 200, 1))
            low, high = 1e-6 * band[0], 1e-6 * band[1]
            axes.fill_between(
                one.strain[thin], low[thin], high[thin], color=one.tint, linewidth=0, alpha=0.6, zorder=0.5
            )
            highest = max(highest, float(high.max()))
        _line(axes, one, stress)
        ends.append((one, float(stress[-1])))
        highest, lowest = max(highest, float(stress.max())), min(lowest, float(stress.min()))
    room = max(highest - lowest, 1e-6)
    y = scale(lowest - 0.02 * room, highest + 0.05 * room, 7)
    frame(axes, _strains(drawn), y, "", "true stress (MPa)")
    _numbers(axes, ends, (y.low, y.high), _CURVE[1])


def _rates(page: Page, drawn: Sequence[_Drawn]) -> None:
    page.key(_LEFT, 3.62, "True strain rate", ())
    axes = _axes(page, _RATE)
    ends, highest = [], 0.0
    for one in drawn:
        rate = one.of("response/true_strain_rate")
        _line(axes, one, rate)
        ends.append((one, float(rate[-1])))
        highest = max(highest, float(rate.max()))
    y = scale(min(0.0, *(end for _, end in ends)), 1.08 * max(highest, 1e-6), 5)
    frame(axes, _strains(drawn), y, "", "strain rate (1/s)")
    _numbers(axes, ends, (y.low, y.high), _RATE[1])


def _ratios(page: Page, drawn: Sequence[_Drawn]) -> None:
    x = page.key(_LEFT, 1.92, "Equilibrium", ())
    page.text(x, 1.92, R_DEFINITION.replace(" - ", " − ") + "; level line: limit", fontsize=SMALL)
    axes = _axes(page, _RATIO)
    limits = sorted({float(one.shot.fact("response", "equilibrium_limit")) for one in drawn})
    top = 100 * max(
        2.0 * limits[-1], *(float(np.quantile(one.of("response/equilibrium_ratio"), 0.95)) for one in drawn)
    )
    ends = []
    for one in drawn:
        ratio = 100 * one.of("response/equilibrium_ratio")
        _line(axes, one, np.minimum(ratio, 2 * top))
        ends.append((one, min(float(ratio[-1]), top)))
    strains = _strains(drawn)
    for limit in limits:
        axes.plot([strains.low, strains.high], [100 * limit] * 2, color=FAINT, linewidth=0.7, label="limit")
    y = scale(0.0, 1.05 * top, 5)
    frame(axes, strains, y, "true strain", "R (%)")
    _numbers(axes, ends, (y.low, y.high), _RATIO[1])


def _strains(drawn: Sequence[_Drawn]) -> Scale:
    highest = max(float(one.strain[-1]) for one in drawn)
    lowest = min(0.0, *(float(one.strain[0]) for one in drawn))
    return scale(lowest - 0.02 * highest, 1.07 * highest, 8)


def _line(axes: Axes, one: _Drawn, values: FloatArray) -> None:
    picked = envelope(values)
    axes.plot(one.strain[picked], values[picked], label=one.shot.shot_id, **one.line)


def _numbers(
    axes: Axes, ends: Sequence[tuple[_Drawn, float]], limits: tuple[float, float], height: float
) -> None:
    """The number of each curve beside its end; those that would meet are moved apart, with a thin line to the end."""
    apart = 0.125 * (limits[1] - limits[0]) / height
    reach = max(float(one.strain[-1]) for one, _ in ends)
    placed: list[tuple[float, float]] = []  # strain, height
    for one, end in sorted(ends, key=lambda pair: pair[1]):
        x, y = float(one.strain[-1]), end
        while any(
            abs(x - other_x) < 0.05 * reach and abs(y - other_y) < apart for other_x, other_y in placed
        ):
            y += 0.2 * apart
        placed.append((x, y))
        axes.annotate(
            str(one.number), (x, end), (x + 0.012 * reach, y), fontsize=SMALL, color=one.colour, fontweight="bold",
            verticalalignment="center", annotation_clip=False, parse_math=False,
            arrowprops=None if abs(y - end) < 0.5 * apart else
            {"arrowstyle": "-", "linewidth": 0.4, "color": one.colour, "shrinkA": 0, "shrinkB": 0},
        )  # fmt: skip


# --- right side ----------------------------------------------------------------------------------------


def _listing(page: Page, shots: Sequence[ReportedShot], drawn: Sequence[_Drawn]) -> float:
    """The listing from the top down; returns the next base line."""
    from matplotlib.lines import Line2D

    looks = {one.number: one for one in drawn}
    y = 7.18
    columns = ((0.0, "no"), (0.62, "shot"), (1.86, "verdict"), (2.62, "1/s"), (3.08, "°C"), (3.42, "mean R"))
    for x, words in columns:
        page.text(_RIGHT + x, y, words, fontsize=BODY, fontweight="bold")
    for number, shot in enumerate(shots, 1):
        y -= _TABLE_LEADING
        kelvin = float(shot.stored.sheet.temperature_k)
        cells = (
            str(number),
            page.fitted(page.safe(shot.shot_id), BODY, 1.18),
            shot.verdict.value.upper(),
            rounded(float(shot.fact("response", "mean_strain_rate"))),
            f"{kelvin - 273.15:.0f}".replace("-", "−"),
            f"{100 * float(shot.fact('response', 'equilibrium_mean_ratio')):.1f} %",
        )
        for (x, _), words in zip(columns, cells, strict=True):
            page.text(_RIGHT + x, y, words, fontsize=BODY)
        if number in looks:
            middle = (y + 0.3 * BODY / 72) / HEIGHT
            ends = [(_RIGHT + 0.2) / WIDTH, (_RIGHT + 0.54) / WIDTH]
            page.figure.add_artist(
                Line2D(ends, [middle] * 2, transform=page.figure.transFigure, **looks[number].line)
            )
    y -= 0.16
    page.text(_RIGHT, y, "1/s: mean engineering strain rate", fontsize=SMALL)
    return y - 0.28


def _differences(page: Page, groups: Sequence[Group], y: float) -> None:
    """Stresses at equal strain, as far down as the page goes."""
    for group in groups:
        rows = len(group.shots) + 4
        if y - rows * _TABLE_LEADING < 0.4:
            page.text(
                _RIGHT,
                max(y, 0.4),
                "differences that find no room: in the text of `shpb show`",
                fontsize=SMALL,
            )
            return
        kind = "true plastic strain" if group.plastic else "total true strain"
        title = page.safe(f"{group.material}, {group.kind}: true stress at equal {kind}")
        page.text(_RIGHT, y, page.fitted(title, BODY, _RIGHT_END - _RIGHT), fontsize=BODY, fontweight="bold")
        y -= _TABLE_LEADING
        step = 0.82
        for place, strain in enumerate(group.strains):
            page.text(
                _RIGHT + 1.5 + step * place, y, f"{strain:g}", fontsize=BODY, horizontalalignment="right"
            )
        for shot_id, _, _, cells in group.shots:
            y -= _TABLE_LEADING
            page.text(_RIGHT, y, page.fitted(page.safe(shot_id), BODY, 0.85), fontsize=BODY)
            for place, cell in enumerate(cells):
                words = cell_words(cell).replace("+-", "±").replace("-", "−")
                page.text(_RIGHT + 1.5 + step * place, y, words, fontsize=BODY, horizontalalignment="right")
        y -= 0.16
        said = page.safe(legend_words(group)).replace("+-", "±")
        y = page.paragraph(_RIGHT, y, said, width=_RIGHT_END - _RIGHT, most=3, size=SMALL) - 0.14
