"""A page laid out by hand, in inches: places for axes, text that fits, keys above panels."""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING, Any

from shpb.view.ink import BODY, FAINT, INK, Line, Scale
from shpb.view.text import printable

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.ft2font import FT2Font
    from matplotlib.text import Text

WIDTH, HEIGHT = 11.69, 8.27  # A4 landscape
_POINTS_PER_INCH = 72.0
TICK_DOWN = 3  # matplotlib's marker of that name
_LEADING = 1.35  # line spacing by size of type


def _face(bold: bool) -> FT2Font:
    from matplotlib.font_manager import FontProperties, findfont, get_font

    return get_font(findfont(FontProperties(family="DejaVu Sans", weight="bold" if bold else "normal")))


class Page:
    """One A4 page, its origin at the lower left corner; all places in inches, sizes of type in points."""

    def __init__(self, figure: Figure) -> None:
        self.figure = figure
        self._faces = {bold: _face(bold) for bold in (False, True)}
        self._advances: dict[tuple[str, bool], float] = {}

    def safe(self, text: object) -> str:
        """An outside string on one line, with a question mark for what the page's type cannot show."""
        line = printable(text)
        if line.isascii():
            return line
        face = self._faces[False]
        return "".join(c if c.isascii() or face.get_char_index(ord(c)) else "?" for c in line)

    def axes(self, x: float, y: float, width: float, height: float) -> Axes:
        """Axes with their lower left corner at ``x``, ``y``."""
        place = (x / WIDTH, y / HEIGHT, width / WIDTH, height / HEIGHT)
        axes = self.figure.add_axes(place, axes_class=_plain_axes())
        axes.set_autoscale_on(False)  # every panel sets its limits
        return axes

    def text(self, x: float, y: float, text: str, **style: Any) -> Text:
        """A line of text with its base line at ``y``."""
        style.setdefault("verticalalignment", "baseline")
        return self.figure.text(x / WIDTH, y / HEIGHT, text, parse_math=False, **style)

    def width_of(self, text: str, size: float, *, bold: bool = False) -> float:
        """Width of a line of text [in], from the advance of each letter without kerning."""
        return sum(self._advance(letter, bold) for letter in text) * size / _POINTS_PER_INCH

    def _advance(self, letter: str, bold: bool) -> float:
        """Advance of one letter by the size of type."""
        known = self._advances.get((letter, bold))
        if known is None:
            face = self._faces[bold]
            face.set_size(_POINTS_PER_INCH, _POINTS_PER_INCH)
            advance = face.load_char(ord(letter)).linearHoriAdvance / 65536  # 16.16 fixed point
            known = self._advances[letter, bold] = advance / _POINTS_PER_INCH
        return known

    def fitted(self, text: str, size: float, width: float, *, bold: bool = False) -> str:
        """Cut a line to ``width``, with an ellipsis where something is left out."""
        if self.width_of(text, size, bold=bold) <= width:
            return text
        low, high = 0, len(text)
        while low < high:
            middle = (low + high + 1) // 2
            if self.width_of(text[:middle].rstrip() + "…", size, bold=bold) <= width:
                low = middle
            else:
                high = middle - 1
        return text[:low].rstrip() + "…"

    def wrapped(self, text: str, size: float, width: float) -> list[str]:
        """Break text at spaces into lines no wider than ``width``."""
        lines: list[str] = []
        space = self.width_of(" ", size)
        used = 0.0
        for word in text.split(" "):
            own = self.width_of(word, size)
            if lines and used + space + own <= width:
                lines[-1] += " " + word
                used += space + own
            else:
                lines.append(word if own <= width else self.fitted(word, size, width))
                used = min(own, width)
        return lines

    def paragraph(
        self, x: float, y: float, text: str, *, width: float, most: int, size: float = BODY
    ) -> float:
        """Set wrapped text from base line ``y`` down, at most ``most`` lines; return the next base line."""
        lines = self.wrapped(text, size, width)
        if len(lines) > most:
            lines = [*lines[: most - 1], self.fitted(" ".join(lines[most - 1 :]), size, width)]
        leading = _LEADING * size / _POINTS_PER_INCH
        for number, line in enumerate(lines):
            self.text(x, y - number * leading, line, fontsize=size)
        return y - len(lines) * leading

    def key(self, x: float, y: float, heading: str, lines: tuple[Line, ...], size: float = BODY) -> float:
        """Heading in bold, then a sample of each line with its name; return where the key ends."""
        from matplotlib.lines import Line2D

        if heading:
            self.text(x, y, heading, fontsize=size + 0.5, fontweight="bold")
            x += self.width_of(heading, size + 0.5, bold=True) + 0.18
        for line in lines:
            height = (y + 0.3 * size / _POINTS_PER_INCH) / HEIGHT
            sample = Line2D(
                [x / WIDTH, (x + 0.34) / WIDTH],
                [height, height],
                transform=self.figure.transFigure,
                **line.style,
            )
            self.figure.add_artist(sample)
            self.text(x + 0.39, y, line.name, fontsize=size)
            x += 0.39 + self.width_of(line.name, size) + 0.16
        return x

    def rule(self, x: float, y: float, width: float) -> None:
        """A thin level line."""
        from matplotlib.lines import Line2D

        self.figure.add_artist(
            Line2D(
                [x / WIDTH, (x + width) / WIDTH],
                [y / HEIGHT, y / HEIGHT],
                transform=self.figure.transFigure,
                color=FAINT,
                linewidth=0.5,
            )
        )


@cache
def _plain_axes() -> type[Axes]:
    """Axes that never have a grid.

    Setting up axes switches the grid off by making a first tick on every axis, major and minor, which is a
    sixth of all that drawing the page costs.
    """
    from matplotlib.axes import Axes as UsualAxes

    class PlainAxes(UsualAxes):
        def grid(
            self, visible: object = None, which: object = "major", axis: object = "both", **style: Any
        ) -> None:
            """Do nothing: there is none to switch off."""

    return PlainAxes


def width_in(axes: Axes) -> float:
    """Width of axes [in]."""
    return float(axes.get_position().width) * WIDTH


def frame(axes: Axes, x: Scale, y: Scale, x_label: str, y_label: str) -> None:
    """Set limits, ticks and labels; without an ``x_label`` the ticks stand without numbers.

    All of it is set rather than searched for, which is what costs most in drawing; labels at fixed
    distances also line up from panel to panel.
    """
    axes.set_xlim(x.low, x.high)
    axes.set_ylim(y.low, y.high)
    axes.set_yticks(y.ticks, y.labels)
    if not x_label:
        # Marks alone, all in one line: a tick of matplotlib's holds three lines and two texts.
        axes.set_xticks([])
        axes.plot(
            x.ticks, [0.0] * len(x.ticks), label="_marks", linestyle="none", marker=TICK_DOWN, markersize=2.5,
            markeredgewidth=0.6, color=INK, clip_on=False, transform=axes.get_xaxis_transform(),
        )  # fmt: skip
    else:
        axes.set_xticks(x.ticks, x.labels)
        axes.set_xlabel(x_label, parse_math=False, verticalalignment="baseline")
        axes.xaxis.set_label_coords(0.5, -0.34 / (axes.get_position().height * HEIGHT))
    axes.set_ylabel(y_label, parse_math=False, verticalalignment="baseline")
    axes.yaxis.set_label_coords(-0.42 / width_in(axes), 0.5)
