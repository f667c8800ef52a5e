"""Asks in the window who answers for a change and why; only what is typed, nothing taken for granted."""

from __future__ import annotations

from typing import TYPE_CHECKING

from shpb.view.adjust.cells import Cells, at_share
from shpb.view.ink import FAINT, INK, SHADE
from shpb.view.text import printable

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.figure import Figure

_QUESTIONS = ("Who answers for this change?", "Why does the program's own choice not serve?")
_WIDTH, _HEIGHT = 0.50, 0.25
_LETTERS = 70  # of an answer that are shown: its end, where one types
_LONGEST = 500


class Asking:
    """Two answers typed one after the other; ``open`` while they are asked for."""

    def __init__(self, figure: Figure) -> None:
        from matplotlib.patches import Rectangle

        self.open = False
        self.answers = ["", ""]
        self._field = 0
        self._said = ""
        x, y = 0.5 - _WIDTH / 2, 0.58 - _HEIGHT / 2

        def box(at_x: float, at_y: float, width: float, height: float) -> Rectangle:
            patch = Rectangle((at_x, at_y), width, height, transform=figure.transFigure, animated=True, zorder=20,
                              facecolor="white", edgecolor=INK)  # fmt: skip
            figure.add_artist(patch)
            return patch

        self._back = box(x, y, _WIDTH, _HEIGHT)
        self._back.set(linewidth=1.6, facecolor=SHADE)
        self._boxes = [box(x + 0.015, y + up, _WIDTH - 0.03, 0.038) for up in (0.155, 0.075)]
        self._questions = [Cells(figure, at_share(figure, x + 0.015, y + up), 9) for up in (0.222, 0.142)]
        self._typed = [
            Cells(figure, at_share(figure, x + 0.022, y + up), 9, anchor="left") for up in (0.174, 0.094)
        ]
        self._foot = Cells(figure, at_share(figure, x + 0.015, y + 0.05), 8.5, bold=True)
        for cells, question in zip(self._questions, _QUESTIONS, strict=True):
            cells.text = question

    def begin(self, by: str, why: str) -> None:
        """Ask; a name that was given before stands there already."""
        self.open, self.answers, self._said = True, [by, why], ""
        self._field = 1 if by.strip() else 0

    def key(self, key: str) -> bool:
        """Take one key; whether both answers are given and confirmed."""
        self._said = ""
        if key == "escape":
            self.open = False
        elif key in ("tab", "down", "up", "shift+tab", "iso_left_tab", "shift+iso_left_tab", "backtab"):
            self._field = 1 - self._field
        elif key == "backspace":
            self.answers[self._field] = self.answers[self._field][:-1]
        elif key in ("enter", "return"):
            return self._confirmed()
        else:
            letter = " " if key == "space" else key
            if len(letter) == 1 and letter.isprintable() and len(self.answers[self._field]) < _LONGEST:
                self.answers[self._field] += letter
        return False

    def _confirmed(self) -> bool:
        if not self.answers[self._field].strip():
            self._said = "a name is needed" if self._field == 0 else "a reason is needed, in a few words"
            return False
        if not all(answer.strip() for answer in self.answers):
            self._field = 1 - self._field
            return False
        if self._field == 0:
            self._field = 1
            return False
        self.open = False
        return True

    def update(self) -> list[Artist]:
        """What is to be drawn."""
        if not self.open:
            return []
        for number, (box, typed) in enumerate(zip(self._boxes, self._typed, strict=True)):
            here = number == self._field
            answer = printable(self.answers[number])
            shown = answer if len(answer) <= _LETTERS else "…" + answer[1 - _LETTERS :]
            box.set(linewidth=2.2 if here else 0.7, edgecolor=INK if here else FAINT)
            typed.text = shown + ("_" if here else "")
        self._foot.text = (
            self._said or "Enter: next, then save   Tab: the other line   Esc: back without saving"
        )
        return [self._back, *self._boxes, *self._questions, *self._typed, self._foot]
