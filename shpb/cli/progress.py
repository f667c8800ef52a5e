"""Progress on stderr: a bar on a terminal, a line now and then through a pipe."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

_QUIET_S = 10.0  # between two lines off a terminal


@contextmanager
def progress(total: int | None, what: str) -> Iterator[Callable[[int], None]]:
    """Give a function to call with the number of items done; ``total`` is None where nobody knows it."""
    if sys.stderr.isatty():
        with _bar(total, what) as step:
            yield step
    else:
        yield _lines(total, what)


@contextmanager
def _bar(total: int | None, what: str) -> Iterator[Callable[[int], None]]:
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(what, total=total)
        yield lambda done: bar.update(task, completed=done)


def _lines(total: int | None, what: str) -> Callable[[int], None]:
    started = said = time.monotonic()

    def step(done: int) -> None:
        nonlocal said
        now = time.monotonic()
        if now - said < _QUIET_S or done == 0:
            return
        said = now
        if total is None:
            print(f"{what}: {done} so far", file=sys.stderr, flush=True)
            return
        left = (now - started) / done * (total - done)
        print(f"{what}: {done} of {total}, about {left:.0f} s left", file=sys.stderr, flush=True)

    return step
