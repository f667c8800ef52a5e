"""Text that changes thirty times a second: letters of one width, drawn once each and then copied.

Matplotlib sets every letter anew each time a text is drawn, some 0.2 ms a letter: a table of numbers would leave no
time for the curves.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np
from matplotlib.artist import Artist
from matplotlib.backends.backend_agg import RendererAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from numpy.typing import NDArray

from shpb.view.ink import INK

Bytes = NDArray[np.uint8]
Place = Callable[[], tuple[float, float]]


class Cells(Artist):
    """Lines of text in cells of one width.

    Parameters
    ----------
    figure : Figure
    place : callable
        Gives the pixel of the corner that ``anchor`` names, from the lower left of the figure.
    size : float
        Of the letters [pt].
    anchor : str
        "top left", "left" (half height) or "right".
    ground : str or None
        Colour behind the text, None for none.
    """

    def __init__(
        self,
        figure: Figure,
        place: Place,
        size: float,
        *,
        anchor: str = "top left",
        bold: bool = False,
        ground: str | None = None,
    ) -> None:
        super().__init__()
        self.set_figure(figure)
        self.set_animated(True)
        self.text = ""
        self.bold, self.anchor = bold, anchor
        self._place, self._size, self._ground = place, size, ground
        self._drawn: tuple[tuple[str, float, bool], Bytes] | None = None

    def draw(self, renderer: Any) -> None:
        """Put the text on the canvas as one picture."""
        if not self.text or not self.get_visible():
            return
        pixels = renderer.points_to_pixels(self._size)
        wanted = (self.text, round(4 * pixels) / 4, self.bold)
        if self._drawn is None or self._drawn[0] != wanted:
            self._drawn = (wanted, _picture(self.text.split("\n"), *wanted[1:], self._ground))
        picture = self._drawn[1]
        height, width = picture.shape[:2]
        x, y = self._place()
        left = x - width if self.anchor == "right" else x
        bottom = y - height if self.anchor == "top left" else y - height / 2
        context = renderer.new_gc()
        renderer.draw_image(context, round(left), round(bottom), picture)
        context.restore()


def at_share(figure: Figure, x: float, y: float) -> Place:
    """A place as shares of the figure."""
    return lambda: tuple(figure.transFigure.transform((x, y)).tolist())


def _picture(lines: list[str], pixels: float, bold: bool, ground: str | None) -> Bytes:
    """Text as RGBA, shape (height, width, 4), its rows from the bottom up as the canvas takes them."""
    wide, high, _ = _cell(pixels, bold)
    cover = np.zeros((high * len(lines), wide * max(map(len, lines))), dtype=np.uint8)
    for row, line in enumerate(lines):
        for column, letter in enumerate(line):
            if letter != " ":
                cover[row * high : (row + 1) * high, column * wide : (column + 1) * wide] = _letter(
                    letter, pixels, bold
                )
    out = np.empty((*cover.shape, 4), dtype=np.uint8)
    ink = np.array(to_rgb(INK)) * 255
    if ground is None:
        out[..., :3], out[..., 3] = ink.astype(np.uint8), cover
    else:
        share = cover[..., None] / 255.0
        out[..., :3] = share * ink + (1 - share) * np.array(to_rgb(ground)) * 255
        out[..., 3] = 255
    return np.ascontiguousarray(out[::-1])


@cache
def _cell(pixels: float, bold: bool) -> tuple[int, int, int]:
    """Width and height of a cell, and how far its base line is above its lower edge, in pixels."""
    renderer = _renderer(8, 8)
    width, _, _ = renderer.get_text_width_height_descent("0" * 20, _font(pixels, bold), False)
    return int(np.ceil(width / 20)), int(np.ceil(1.3 * pixels)), int(np.ceil(0.34 * pixels))


def _renderer(width: int, height: int) -> Any:
    """Paper of its own to draw letters on; the library does not say what types its methods take."""
    return RendererAgg(width, height, 72)  # type: ignore[no-untyped-call]


def _font(pixels: float, bold: bool) -> FontProperties:
    # At 72 dots an inch a point is a pixel.
    return FontProperties(family="DejaVu Sans Mono", size=pixels, weight="bold" if bold else "normal")


@cache
def _letter(letter: str, pixels: float, bold: bool) -> Bytes:
    """How much of each pixel of its cell a letter covers, 0 to 255, shape (height, width), from the top down."""
    wide, high, base = _cell(pixels, bold)
    renderer = _renderer(wide, high)
    renderer.draw_text(renderer.new_gc(), 0, high - base, letter, _font(pixels, bold), 0)
    cover: Bytes = np.array(renderer.buffer_rgba())[..., 3]
    return cover
