"""Small figures as inline SVG: text stays text, identifiers of one figure never meet those of another.

A figure is drawn for a column of a page: about 90 mm on paper, 290 px on a small screen, where its letters
still read. What a figure shows, its title and description say in words and numbers.
"""

from __future__ import annotations

import io
import re
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any, Protocol

from shpb.view.figure import page_style
from shpb.view.ink import Scale
from shpb.view.report.html import Markup, element

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

WIDTH = 3.6  # in
POINTS = 800  # most points of one line
LETTERS = 8.0  # pt
_LEFT, _RIGHT, _BOTTOM, _TOP = 0.62, 0.12, 0.42, 0.08
_KEY_LINE = 0.17  # in
_WIDE_LETTER = 0.60  # width of a letter by the size of type, a little more than the mean
_STYLE: dict[Any, Any] = {
    "font.size": LETTERS,
    "axes.labelsize": LETTERS,
    "xtick.labelsize": LETTERS,
    "ytick.labelsize": LETTERS,
}
_ROOT = re.compile(r"<svg\b[^>]*?viewBox=\"([^\"]*)\"[^>]*>", re.S)
_DROPPED = re.compile(r"<!--.*?-->|<metadata>.*?</metadata>|<style[^>]*>.*?</style>", re.S)
_PATH = re.compile(r' d="[^"]*"')
_DECIMALS = re.compile(r"\d+\.\d{3,}")
_IDENTITY = re.compile(r'(\bid="|url\(#|xlink:href="#)')


class Entry(Protocol):
    """An entry of a key: words and the look of a line or a marker."""

    @property
    def name(self) -> str:
        """Its words."""

    @property
    def style(self) -> dict[str, Any]:
        """Keyword arguments of the line."""


class Sketch:
    """One small figure: a key above, panels below each other, all placed in inches."""

    def __init__(self, height: float, key: Sequence[Entry] = ()) -> None:
        from matplotlib.figure import Figure

        self.figure: Figure = Figure(figsize=(WIDTH, height))
        self.height = height
        self._rows = self._laid_key(key)
        self.top = _TOP + _KEY_LINE * len(self._rows)
        self._draw_key()

    def panel(self, of: int = 1, number: int = 0) -> Axes:
        """Axes: the ``number``-th of ``of`` equal panels from the top."""
        gap = 0.12
        room = (self.height - self.top - _BOTTOM - gap * (of - 1)) / of
        bottom = self.height - self.top - room * (number + 1) - gap * number
        place = (_LEFT / WIDTH, bottom / self.height, (WIDTH - _LEFT - _RIGHT) / WIDTH, room / self.height)
        axes = self.figure.add_axes(place)
        axes.set_autoscale_on(False)
        return axes

    def frame(self, axes: Axes, x: Scale, y: Scale, x_label: str, y_label: str) -> None:
        """Limits, ticks and labels; without an ``x_label`` the ticks stand without numbers."""
        axes.set_xlim(x.low, x.high)
        axes.set_ylim(y.low, y.high)
        axes.set_yticks(y.ticks, y.labels)
        axes.set_xticks(x.ticks, x.labels if x_label else [""] * len(x.ticks))
        place = axes.get_position()
        if x_label:
            axes.set_xlabel(x_label)
            axes.xaxis.set_label_coords(0.5, -0.26 / (place.height * self.height))
        axes.set_ylabel(y_label)
        axes.yaxis.set_label_coords(-0.44 / (place.width * WIDTH), 0.5)

    def _laid_key(self, key: Sequence[Entry]) -> list[list[tuple[float, Entry]]]:
        """The entries of the key in rows, each with its left end."""
        rows: list[list[tuple[float, Entry]]] = []
        x = WIDTH
        for line in key:
            width = 0.38 + len(line.name) * _WIDE_LETTER * LETTERS / 72
            if x + width > WIDTH - _RIGHT:
                rows.append([])
                x = _LEFT
            rows[-1].append((x, line))
            x += width + 0.1
        return rows

    def _draw_key(self) -> None:
        from matplotlib.lines import Line2D

        across = self.figure.transFigure
        for number, entries in enumerate(self._rows):
            y = self.height - _TOP - _KEY_LINE * (number + 0.45)
            for x, line in entries:
                ends = [x / WIDTH, (x + 0.15) / WIDTH, (x + 0.3) / WIDTH]
                look = {"markevery": [1], **line.style}
                self.figure.add_artist(Line2D(ends, [y / self.height] * 3, transform=across, **look))
                self.figure.text(
                    (x + 0.35) / WIDTH,
                    y / self.height,
                    line.name,
                    fontsize=LETTERS,
                    verticalalignment="center",
                )


def figure(draw: Callable[[], Sketch], *, prefix: str, title: str, description: str) -> Markup:
    """Draw a figure and return it with its caption.

    Parameters
    ----------
    draw : callable
        Draws; called with the page's own style.
    prefix : str
        Begins every identifier of this figure; different for each figure of a page.
    title, description : str
        What it shows, in words, and with its numbers: the text that stands for the figure.

    Returns
    -------
    Markup
        A ``figure`` element; the same drawing gives the same bytes.
    """
    import matplotlib

    with page_style(), matplotlib.rc_context(_STYLE):
        content = io.StringIO()
        draw().figure.savefig(
            content, format="svg", metadata={"Date": None, "Creator": None, "Format": None, "Type": None}
        )
    svg = inlined(content.getvalue(), prefix, title, description)
    caption = element("figcaption", element("strong", title), description)
    return element("figure", svg, caption)


def inlined(text: str, prefix: str, title: str, description: str) -> Markup:
    """An SVG file as an element of a page: no head, no outside names, identifiers prefixed, and words for it."""
    root = _ROOT.search(text)
    if root is None:  # matplotlib always writes one
        raise ValueError("there is no svg element with a viewBox")
    inside = _DROPPED.sub("", text[root.end() : text.rindex("</svg>")])
    inside = _PATH.sub(lambda path: _DECIMALS.sub(lambda n: f"{float(n[0]):.2f}", path[0]), inside)
    inside = _IDENTITY.sub(lambda start: f"{start[0]}{prefix}-", inside).replace("xlink:href", "href")
    inside = inside.replace("<defs>\n  \n </defs>", "").replace(
        "'DejaVu Sans'", "'DejaVu Sans', Verdana, sans-serif"
    )
    words = element("title", title, id=f"{prefix}-title") + element("desc", description, id=f"{prefix}-words")
    return element(
        "svg", Markup(words), Markup(inside), viewBox=root[1], role="img",
        aria_labelledby=f"{prefix}-title {prefix}-words",
    )  # fmt: skip
