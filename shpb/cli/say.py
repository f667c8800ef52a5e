"""Messages on stderr: wrapped on a terminal, one message one line through a pipe."""

from __future__ import annotations

import shutil
import sys
from typing import TextIO

_MOST = 80  # columns; longer lines tire the eye


def say(message: str, stream: TextIO | None = None) -> None:
    """Print a message with the program's name before it, outside strings made harmless.

    On a terminal its lines are broken at 80 columns, or fewer where the terminal has fewer, and what follows is
    indented; through a pipe each line stays whole, so that other programs can search it.
    """
    from shpb.view.text import printable

    stream = sys.stderr if stream is None else stream
    lines = [printable(line) for line in f"shpb: {message}".splitlines()]
    if stream.isatty():
        width = max(40, min(_MOST, shutil.get_terminal_size().columns))
        lines = [part for line in lines for part in _wrapped(line, width)]
    print("\n".join(lines), file=stream)


def _wrapped(line: str, width: int) -> list[str]:
    from shpb.view.text import wrapped

    text = line.lstrip(" ")
    indent = line[: len(line) - len(text)]
    return wrapped(text, width, indent, f"{indent}    ")
