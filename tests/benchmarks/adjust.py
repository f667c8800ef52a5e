"""Dragging a window edge over 2 x 100,000 samples: ``python -m tests.benchmarks.adjust``.

Every motion is worked out and drawn on a canvas without a screen (restore, draw what moves, blit). What is told is the
cost of one redraw by that of one reduce() of the same record, and redraws in a second of processor time, which a busy
machine changes less than those in a second of the clock.
"""

from __future__ import annotations

import statistics
import time

from matplotlib.backend_bases import MouseEvent
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from shpb.adjust.desk import Desk
from shpb.adjust.following import Following
from shpb.adjust.marks import Mark
from shpb.errors import InputError
from shpb.reduction import ShotResult, reduce
from shpb.settings import Settings
from shpb.view.adjust.layout import DPI, SIZE_IN
from shpb.view.adjust.window import AdjustWindow
from shpb.view.figure import page_style
from tests.benchmarks.__main__ import shot
from tests.synthetic import rig, sheet

MOTIONS, STEP_S = 60, 1e-6


def _no_store(by: str, why: str) -> tuple[ShotResult, str]:
    raise InputError("nothing is stored here")


def drag(mark: Mark) -> float:
    """Processor time of one redraw while ``mark`` is dragged towards its pulse [s]."""
    record = shot(100_000, 870e-6 / 100_000)
    desk = Desk(Following(record, rig(), sheet(), Settings()), Settings())
    with page_style():
        figure = Figure(figsize=SIZE_IN, dpi=DPI)
        canvas = FigureCanvasAgg(figure)
        window = AdjustWindow(figure, desk, _no_store, lambda: None)
    axes = figure.axes[1 if mark.pulse == "transmitted" else 0]
    start = desk.time(mark) or 0.0

    def send(name: str, off_s: float, **more: int) -> None:
        x = axes.transData.transform(((start + off_s) * 1e6, 0))[0]
        y = axes.transAxes.transform((0, 0.4))[1]
        canvas.callbacks.process(name, MouseEvent(name, canvas, x, y, **more))  # type: ignore[arg-type]

    send("button_press_event", 0.0, button=1)
    send("motion_notify_event", -STEP_S)
    before, began = window.redraws, time.process_time()
    for motion in range(2, MOTIONS + 2):
        send("motion_notify_event", -STEP_S * motion)
    took = time.process_time() - began
    drawn = window.redraws - before
    if drawn != MOTIONS:
        raise RuntimeError(f"{MOTIONS} motions gave {drawn} redraws")
    return took / drawn


def main() -> None:
    record = shot(100_000, 870e-6 / 100_000)
    reduce(record, rig(), sheet(), Settings())
    times = []
    for _ in range(5):
        began = time.process_time()
        reduce(record, rig(), sheet(), Settings())
        times.append(time.process_time() - began)
    whole = statistics.median(times)
    for mark in (Mark("reflected", "end"), Mark("transmitted", "end"), Mark("incident", "start")):
        one = drag(mark)
        print(
            f"{mark.words:28} {1 / one:5.1f} redraws/s of processor time, {one / whole:.2f} of a reduce() "
            f"({1e3 * whole:.0f} ms)"
        )


if __name__ == "__main__":
    main()
