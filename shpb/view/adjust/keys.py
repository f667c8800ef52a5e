"""Keys of the window and what they do, in one table. Nothing needs a mouse."""

from __future__ import annotations

from typing import NamedTuple

# Back ends name the same key differently.
_BACK_TAB = ("shift+tab", "iso_left_tab", "shift+iso_left_tab", "backtab", "shift+backtab")


class Action(NamedTuple):
    """What a key asks for, with a number where it needs one."""

    name: str
    number: int = 0


KEYS: dict[str, Action] = {
    "tab": Action("next", 1),
    "n": Action("next", 1),
    **dict.fromkeys((*_BACK_TAB, "b"), Action("next", -1)),
    **{str(number): Action("hold", number - 1) for number in range(1, 10)},
    "left": Action("nudge", -1),
    "right": Action("nudge", 1),
    "shift+left": Action("nudge", -10),
    "shift+right": Action("nudge", 10),
    "ctrl+left": Action("nudge", -100),
    "ctrl+right": Action("nudge", 100),
    "f": Action("foot"),
    "u": Action("undo"),
    "ctrl+z": Action("undo"),
    "y": Action("redo"),
    "ctrl+y": Action("redo"),
    "r": Action("reset"),
    "R": Action("reset all"),
    "shift+r": Action("reset all"),
    "z": Action("zoom to pulse"),
    "w": Action("zoom out"),
    "+": Action("zoom", 1),
    "=": Action("zoom", 1),
    "-": Action("zoom", -1),
    ",": Action("pan", -1),
    ".": Action("pan", 1),
    "s": Action("save"),
    "ctrl+s": Action("save"),
    "q": Action("close"),
    "ctrl+q": Action("close"),
    "escape": Action("leave"),
}

HELP = (
    "1 to 9, Tab: hold a mark   left, right: move it one sample, Shift: ten, Ctrl: a hundred   "
    "u: undo  y: redo   f: set a foot where there is none   r: pulse back to the program  R: all",
    "z: zoom to the pulse  w: all of it  + -: closer, wider  comma, point: earlier, later   "
    "s: save  q: close   mouse: drag a mark, or the bar above a window; wheel: closer, wider",
)
