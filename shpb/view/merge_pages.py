"""What the pages of a merge share: header, key and notes, how each rate looks, which conditions stand together.

Quasi-static tests and bar shots differ in shape and lightness as well as in colour, and every line is named beside its
panel, so that a grey print tells as much.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np

from shpb.merge.campaign import Merged, MergedMaterial, near_groups
from shpb.merge.material_curve import RateRange
from shpb.merge.model_fit import ModelFit
from shpb.merge.repeats import Repeats
from shpb.version import VERSION
from shpb.view.ink import BODY, DARK, DASH_DOT, DOTS, INK, MIDDLE, SMALL
from shpb.view.page import HEIGHT, WIDTH, Page

LEFT, RIGHT = 0.3, WIDTH - 0.35  # text margins [in]
TOP, BOTTOM = 6.80, 0.62  # of the part below the header [in]
_KEY = 7.18  # first line of the key [in]
_ONE_RATE = 0.15  # decades within which rates have one look
COVERAGE = 2.0  # standard uncertainties in every bar and band: about 95 %
_DASHES: tuple[tuple[float, ...], ...] = ((), (5.0, 1.6), DASH_DOT, (2.6, 1.2), (9.0, 1.8))
TINTS = {RateRange.QUASI_STATIC: "#ecc9b4", RateRange.BAR: "#b9c6e6"}
SHAPES = {RateRange.QUASI_STATIC: "s", RateRange.BAR: "o"}
WORDS = {RateRange.QUASI_STATIC: "quasi-static", RateRange.BAR: "bar"}
LAW_LINE: dict[str, Any] = {"color": INK, "linestyle": (0, DOTS), "linewidth": 1.3}


class Sample(NamedTuple):
    """One entry of a key: words, and how a line, a marker or a band of that kind looks."""

    words: str
    line: dict[str, Any] | None = None
    band: str = ""


@dataclass(frozen=True, slots=True)
class Look:
    """How the curves of one rate look, on every page and in every panel."""

    range: RateRange
    dashes: tuple[float, ...]

    @property
    def colour(self) -> str:
        """Dark for bars, middle for quasi-static tests."""
        return DARK if self.range is RateRange.BAR else MIDDLE

    @property
    def line(self) -> dict[str, Any]:
        """Keyword arguments of the line of a mean."""
        pattern = (0, self.dashes) if self.dashes else "-"
        return {"color": self.colour, "linestyle": pattern, "linewidth": 1.2}

    @property
    def marker(self) -> dict[str, Any]:
        """Keyword arguments of points: filled circles for bars, open squares for quasi-static tests."""
        return {
            "linestyle": "none",
            "marker": SHAPES[self.range],
            "markersize": 3.2,
            "markeredgewidth": 0.9,
            "markeredgecolor": self.colour,
            "markerfacecolor": self.colour if self.range is RateRange.BAR else "white",
        }


_CAPPED = [(-0.5, -1.0), (0.5, -1.0), (0.0, -1.0), (0.0, 1.0), (-0.5, 1.0), (0.5, 1.0)]  # one stroke
BAR_KEY = (
    Sample("thick bar: own uncertainty, k = 2", {"color": INK, "linewidth": 0.0, "marker": "|", "markersize": 8.0,
                                                 "markeredgewidth": 1.8}),
    Sample("thin bar with caps: with what a rig or machine shares, k = 2",
           {"color": INK, "linewidth": 0.0, "marker": _CAPPED, "markersize": 8.0, "markeredgewidth": 0.6,
            "markerfacecolor": "none"}),
)  # fmt: skip


def best_fit(material: MergedMaterial) -> ModelFit | None:
    """The law put first: fitted to most points, of these the one with the lowest corrected Akaike criterion."""
    return material.fits[0] if material.fits else None


def fitted_to(fit: ModelFit, number: int) -> bool:
    """Whether a condition is among those the law was fitted to."""
    return number in fit.points.conditions


def on_path(fit: ModelFit, condition: Repeats) -> bool:
    """Whether the law is asked along its heated path for this condition, as in the fit."""
    return fit.points.heat_k_m3_j is not None and condition.temperature_rise_k is not None


def temperature_groups(merged: Merged, material: MergedMaterial) -> list[list[int]]:
    """Conditions of one temperature, as the rate sensitivity takes them together."""
    return near_groups(
        [c.temperature_k for c in material.conditions], 2 * merged.settings.repeats.temperature_k
    )


def spread_over(count: int, most: int) -> list[int]:
    """At most ``most`` of ``count`` places, the first and the last among them."""
    if count <= most:
        return list(range(count))
    return sorted({round(k * (count - 1) / (most - 1)) for k in range(most)})


def looks(material: MergedMaterial) -> list[Look]:
    """The look of each condition: colour by range, dashes by the order of the rates within it."""
    found: dict[int, Look] = {}
    for name in RateRange:
        members = [i for i, c in enumerate(material.conditions) if c.range is name]
        decades = [float(np.log10(material.conditions[i].mean_rate_per_s)) for i in members]
        for order, group in enumerate(near_groups(decades, _ONE_RATE)):
            look = Look(name, _DASHES[order % len(_DASHES)])
            found |= {members[i]: look for i in group}
    return [found[i] for i in range(len(material.conditions))]


def header(page: Page, merged: Merged, material: MergedMaterial, title: str, sentence: str) -> None:
    """Material and title, what was tested, and one sentence on how to read the page."""
    curves = sum(len(c.curves) for c in material.conditions)
    many = len(material.conditions)
    test = f"{material.kind.value}; {many} condition{'s' * (many != 1)}, {curves} curve{'s' * (curves != 1)}"
    width = RIGHT - LEFT - page.width_of(test, 10) - 0.3
    title_width = page.width_of(title, 11) + 0.25
    name = page.fitted(page.safe(material.material), 13, width - title_width, bold=True)
    page.text(LEFT, 7.92, name, fontsize=13, fontweight="bold")
    page.text(LEFT + page.width_of(name, 13, bold=True) + 0.22, 7.92, title, fontsize=11)
    page.text(RIGHT, 7.92, test, fontsize=10, horizontalalignment="right")
    page.paragraph(LEFT, 7.66, page.safe(sentence), width=RIGHT - LEFT, most=2, size=BODY + 0.5)
    page.rule(LEFT, 7.40, RIGHT - LEFT)
    out = f", {len(merged.left_out)} left out" if merged.left_out else ""
    strain = "without" if merged.settings.indentation_out else "with"
    files = len(merged.used)
    foot = f"{files} file{'s' * (files != 1)} merged{out}; bar strain {strain} the bar faces' share; shpb {VERSION}"
    page.text(RIGHT, 0.2, foot, fontsize=SMALL, color="#555555", horizontalalignment="right")


def note(page: Page, text: str, most: int = 3, width: float = 7.0) -> None:
    """What is said at the foot of a page, beside its footer."""
    lines = min(len(page.wrapped(page.safe(text), SMALL, width)), most) if text else 0
    if lines:
        page.paragraph(LEFT, 0.2 + 0.132 * (lines - 1), page.safe(text), width=width, most=most, size=SMALL)


def in_words(page: Page, text: str, x: float = 2.0, y: float = 4.4, width: float = WIDTH - 4.0) -> None:
    """What is said in place of a panel that would be empty."""
    page.paragraph(x, y, page.safe(text), width=width, most=12, size=10)


def key(page: Page, samples: Sequence[Sample]) -> None:
    """A key below the header, on as many lines as it takes: a piece of line, a marker or a band, and its words."""
    from matplotlib.lines import Line2D
    from matplotlib.patches import Rectangle

    x, y = LEFT, _KEY
    across = page.figure.transFigure
    for sample in samples:
        width = 0.36 + page.width_of(sample.words, BODY)
        if x > LEFT and x + width > RIGHT:
            x, y = LEFT, y - 0.17
        middle = y + 0.3 * BODY / 72
        ends = [x / WIDTH, (x + 0.15) / WIDTH, (x + 0.30) / WIDTH]
        if sample.band:
            place = (ends[0], (middle - 0.05) / HEIGHT)
            box: dict[str, Any] = {"facecolor": sample.band, "linewidth": 0, "transform": across}
            page.figure.add_artist(Rectangle(place, 0.30 / WIDTH, 0.10 / HEIGHT, **box))
        if sample.line is not None:
            line = {"markevery": [1], **sample.line}
            page.figure.add_artist(Line2D(ends, [middle / HEIGHT] * 3, transform=across, **line))
        page.text(x + 0.36, y, page.fitted(sample.words, BODY, RIGHT - x - 0.36), fontsize=BODY)
        x += width + 0.2


def range_key(material: MergedMaterial, colour: str = "") -> list[Sample]:
    """Shapes of the ranges that there are; in one colour where colours tell something else."""
    found = []
    for name in dict.fromkeys(c.range for c in material.conditions):
        marker = Look(name, ()).marker
        if colour:
            marker["markeredgecolor"] = colour
            marker["markerfacecolor"] = colour if name is RateRange.BAR else "white"
        found.append(Sample(WORDS[name], marker))
    return found


def law_words(material: MergedMaterial, fit: ModelFit | None) -> str:
    """Which law is drawn, and where."""
    if fit is None:
        return "No law was fitted, so none is drawn."
    fitted, every = len(fit.points.conditions), len(material.conditions)
    path = ", bars along their own heated path" if any(on_path(fit, c) for c in material.conditions) else ""
    where = "all conditions" if fitted == every else f"{fitted} of {every} conditions and drawn there"
    return f"{fit.model.name}: fitted to {where}{path}; without the scale errors that rig or machine share."
