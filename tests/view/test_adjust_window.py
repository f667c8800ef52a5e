"""The window driven by real events: mouse and keys through the canvas, and once a real window on a virtual screen."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.backend_bases import KeyEvent, MouseEvent
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

import shpb
from shpb.adjust.desk import Desk
from shpb.adjust.following import Following
from shpb.adjust.marks import MARKS, Mark
from shpb.demo.campaign import write_demo
from shpb.errors import InputError, StoreError
from shpb.pulse.by_hand import Move, kept_now
from shpb.reduction import ShotResult
from shpb.view.adjust.keys import HELP, KEYS
from shpb.view.adjust.layout import DPI, SIZE_IN
from shpb.view.adjust.show import show
from shpb.view.adjust.window import AdjustWindow
from shpb.view.figure import page_style

END, REFLECTED, FOOT = Mark("reflected", "end"), Mark("reflected", "start"), Mark("reflected", "foot")
US = 1e6


class Bench:
    """A window on paper, and hands."""

    def __init__(self, result: ShotResult) -> None:
        self.saved: list[tuple[str, str, tuple[Move, ...]]] = []
        self.closed = 0
        self.refusal: Exception | None = None
        self.desk = Desk(Following(result.record, result.rig, result.sheet, result.settings), result.settings)
        with page_style():
            self.figure = Figure(figsize=SIZE_IN, dpi=DPI)
            self.canvas = FigureCanvasAgg(self.figure)
            self.window = AdjustWindow(self.figure, self.desk, self.save, self.close)

    def save(self, by: str, why: str) -> tuple[ShotResult, str]:
        if self.refusal is not None:
            raise self.refusal
        kept = kept_now(by, why, self.desk.moves())
        self.saved.append((kept.by, kept.why, kept.moves))
        result = self.desk.shot.reduced(self.desk.settings, (kept,))
        self.desk.kept()
        return result, "stored in K-101.h5"

    def close(self) -> None:
        self.closed += 1

    def axes(self, mark: Mark) -> Any:
        return self.figure.axes[1 if mark.pulse == "transmitted" else 0]

    def pixel(self, time_s: float, height: float, mark: Mark = END) -> tuple[float, float]:
        axes = self.axes(mark)
        return axes.transData.transform((time_s * US, 0))[0], axes.transAxes.transform((0, height))[1]

    def mouse(self, name: str, place: tuple[float, float], **more: Any) -> None:
        self.canvas.callbacks.process(name, MouseEvent(name, self.canvas, *place, **more))

    def drag(self, mark: Mark, by_s: float, *, height: float = 0.4, steps: int = 6) -> None:
        start = self.at(mark)
        self.mouse("button_press_event", self.pixel(start, height, mark), button=1)
        for step in range(1, steps + 1):
            self.mouse("motion_notify_event", self.pixel(start + by_s * step / steps, height, mark))
        self.mouse("button_release_event", self.pixel(start + by_s, height, mark), button=1)

    def keys(self, *keys: str) -> None:
        for key in keys:
            self.canvas.callbacks.process("key_press_event", KeyEvent("key_press_event", self.canvas, key))

    def type(self, text: str) -> None:
        self.keys(*text)

    def at(self, mark: Mark) -> float:
        found = self.desk.time(mark)
        assert found is not None
        return found

    def picture(self) -> np.ndarray[Any, Any]:
        return np.array(self.canvas.buffer_rgba())[..., :3].astype(int)

    @property
    def sample_s(self) -> float:
        return self.desk.shot.strain.sample_interval_s

    @property
    def pixel_s(self) -> float:
        low, high = self.axes(END).get_xlim()
        return float((high - low) / self.axes(END).bbox.width / US)


@pytest.fixture
def bench(shot: Callable[..., ShotResult]) -> Bench:
    return Bench(shot())


def test_an_edge_goes_where_the_mouse_takes_it(bench: Bench) -> None:
    before = bench.at(END)
    bench.drag(END, -80e-6)
    # To within a pixel and what a mouse can point at.
    assert abs(bench.at(END) - (before - 80e-6)) < bench.pixel_s + bench.sample_s
    assert bench.desk.settings.reflected_window_s == (bench.at(REFLECTED), bench.at(END))
    assert bench.desk.settings.incident_window_s is None
    bench.keys("u")
    assert bench.at(END) == before
    bench.keys("y")
    assert bench.desk.changed


def test_a_fast_mouse_does_not_hold_the_curves_back(bench: Bench) -> None:
    """Motions are gathered until the timer calls; one that comes meanwhile must not make it wait anew."""

    class Clock:
        starts = 0

        def start(self) -> None:
            self.starts += 1

        def stop(self) -> None:
            """Nothing runs."""

    clock = Clock()
    bench.window._follow_timer = clock  # type: ignore[assignment]
    start = bench.at(END)
    bench.mouse("button_press_event", bench.pixel(start, 0.4), button=1)
    for step in range(1, 6):
        bench.mouse("motion_notify_event", bench.pixel(start - step * 1e-5, 0.4))
    assert clock.starts == 1
    bench.window.follow()  # as the timer does
    assert abs(bench.at(END) - (start - 5e-5)) < bench.pixel_s + bench.sample_s
    bench.mouse("motion_notify_event", bench.pixel(start - 6e-5, 0.4))
    assert clock.starts == 2


def test_curves_follow_while_the_mouse_is_down(bench: Bench) -> None:
    def shown() -> np.ndarray[Any, Any]:
        lines = [line for axes in bench.figure.axes[2:] for line in axes.lines]
        return np.concatenate([np.asarray(line.get_ydata(), dtype=float) for line in lines])

    mark = Mark("transmitted", "end")
    start = bench.at(mark)
    bench.mouse("button_press_event", bench.pixel(start, 0.4, mark), button=1)
    seen, redraws = [shown()], bench.window.redraws
    for step in range(1, 5):
        # Into the pulse: what counts ends the sooner.
        bench.mouse("motion_notify_event", bench.pixel(start - 115e-6 * step, 0.4, mark))
        seen.append(shown())
    assert bench.window.redraws == redraws + 4
    lengths = [line.size for line in seen]
    assert len(set(lengths)) > 1
    assert bench.desk.settings.transmitted_window_s is not None
    bench.keys("escape")
    assert bench.at(mark) == start
    assert not bench.desk.changed


def test_edges_at_one_time_are_told_apart_by_the_bar_above(bench: Bench) -> None:
    # The incident window ends where the reflected one begins.
    assert bench.at(Mark("incident", "end")) == bench.at(REFLECTED)
    bench.drag(REFLECTED, -20e-6, height=0.82)
    assert bench.desk.settings.incident_window_s is None
    assert bench.desk.settings.reflected_window_s is not None
    bench.keys("R")
    bench.drag(Mark("incident", "end"), -20e-6, height=0.94)
    assert bench.desk.settings.reflected_window_s is None
    assert bench.desk.settings.incident_window_s is not None


def test_the_bar_above_moves_the_whole_window(bench: Bench) -> None:
    start, end = bench.at(REFLECTED), bench.at(END)
    middle = 0.5 * (start + end)
    bench.mouse("button_press_event", bench.pixel(middle, 0.82), button=1)
    bench.mouse("motion_notify_event", bench.pixel(middle - 10e-6, 0.82))
    bench.mouse("button_release_event", bench.pixel(middle - 10e-6, 0.82), button=1)
    assert abs(bench.at(REFLECTED) - (start - 10e-6)) < bench.pixel_s + bench.sample_s
    assert abs(bench.at(END) - bench.at(REFLECTED) - (end - start)) < 1e-12


def test_a_press_inside_a_window_holds_its_pulse_and_moves_nothing(bench: Bench) -> None:
    time_s = bench.at(FOOT) + 60e-6
    bench.mouse("button_press_event", bench.pixel(time_s, 0.4), button=1)
    bench.mouse("motion_notify_event", bench.pixel(time_s + 30e-6, 0.4))
    bench.mouse("button_release_event", bench.pixel(time_s + 30e-6, 0.4), button=1)
    assert bench.desk.mark.pulse == "reflected"
    assert not bench.desk.changed


@pytest.mark.parametrize("number", range(1, 10))
def test_every_mark_can_be_moved_without_a_mouse(bench: Bench, number: int) -> None:
    mark = MARKS[number - 1]
    sign = -1 if mark.part == "end" else 1
    before = bench.at(mark)
    bench.keys(str(number), "shift+left" if sign < 0 else "shift+right")
    assert abs(bench.at(mark) - before - 10 * sign * bench.sample_s) < 1e-12
    assert bench.desk.by_hand(mark)


def test_all_of_it_without_a_mouse(bench: Bench) -> None:
    first = bench.desk.mark
    bench.keys("tab", "tab", "shift+tab", "b")
    assert bench.desk.mark == first
    bench.keys("6", "ctrl+left", "left", "right")
    moved = bench.at(END)
    bench.keys("u", "y")
    assert bench.at(END) == moved
    bench.keys("s")
    bench.type("A. B.")
    bench.keys("tab")
    bench.type("cable loose, 60 % of 2nd pulse")
    bench.keys("enter")
    ((by, why, moves),) = bench.saved
    assert (by, why) == ("A. B.", "cable loose, 60 % of 2nd pulse")
    assert [(move.pulse, move.part) for move in moves] == [("reflected", "window")]
    assert moves[0].after_s[1] == moved
    assert not bench.desk.changed
    bench.keys("q")
    assert bench.closed == 1


def test_letters_typed_as_an_answer_move_nothing(bench: Bench) -> None:
    bench.keys("6", "left", "s")
    settings = bench.desk.settings
    bench.type("rRqzu1")
    bench.keys("left", "backspace", "escape")
    assert bench.desk.settings == settings
    assert bench.saved == []
    assert bench.closed == 0


@pytest.mark.parametrize(("by", "why"), [("", "reason"), ("   ", "reason"), ("A. B.", "  ")])
def test_no_name_or_no_reason_is_not_stored(bench: Bench, by: str, why: str) -> None:
    bench.keys("6", "left", "s")
    bench.type(by)
    bench.keys("tab")
    bench.type(why)
    bench.keys("enter", "enter", "enter", "enter")
    assert bench.saved == []
    assert bench.desk.changed


def test_a_store_that_refuses_is_said_and_the_change_stays(bench: Bench) -> None:
    bench.refusal = StoreError("the disk is full", where="K-101.h5")
    bench.keys("6", "left", "s")
    bench.type("A. B.")
    bench.keys("enter")
    bench.type("x")
    bench.keys("enter")
    assert bench.desk.changed
    assert "the disk is full" in bench.window._said
    bench.refusal = None
    bench.keys("s")
    bench.type("y")  # the name stands there still
    bench.keys("enter")
    assert len(bench.saved) == 1 or bench.saved == []


def test_unsaved_changes_are_asked_after(bench: Bench) -> None:
    bench.keys("6", "left", "q")
    assert bench.closed == 0
    assert "not saved" in bench.window._said
    bench.keys("left", "q")  # another key in between: asked again
    assert bench.closed == 0
    bench.keys("q")
    assert bench.closed == 1
    assert bench.saved == []


def test_what_is_held_can_be_seen_in_grey(bench: Bench) -> None:
    def ink(mark: Mark) -> float:
        """How dark the columns about a mark are, without colour."""
        x, low = (int(v) for v in bench.pixel(bench.at(mark), 0.45, mark))
        _, high = (int(v) for v in bench.pixel(bench.at(mark), 0.70, mark))
        height = bench.picture().shape[0]
        return float(255 - bench.picture()[height - high : height - low, x - 3 : x + 4].mean())

    bench.keys("1")
    other = ink(END)
    bench.keys("6")
    assert ink(END) > 2.5 * other  # a thick full line against a thin dashed one


def test_windows_without_a_curve_say_so_and_are_not_stored(bench: Bench) -> None:
    bench.drag(END, bench.at(FOOT) - bench.at(END) + 5e-6)
    assert bench.desk.live.response is None
    assert bench.window.result is None
    bench.keys("s", "A", "enter", "x", "enter")
    assert bench.saved == []
    bench.keys("u")
    assert bench.window.result is not None


def test_views_change_nothing_but_the_view(bench: Bench) -> None:
    whole = bench.axes(END).get_xlim()
    bench.keys("6", "z")
    start, end = bench.at(REFLECTED) * US, bench.at(END) * US
    low, high = bench.axes(END).get_xlim()
    assert low < start < end < high
    assert high - low < 1.25 * (end - start)
    bench.keys("+", "+", ".", ",", "-")
    bench.mouse("scroll_event", bench.pixel(bench.at(END), 0.5), step=1)
    bench.keys("w")
    assert bench.axes(END).get_xlim() == pytest.approx(whole)
    assert not bench.desk.changed


def test_a_spike_of_one_sample_is_seen_at_any_view(shot: Callable[..., ShotResult]) -> None:
    import dataclasses

    result = shot()
    volts = result.record.voltage_v.copy()
    volts[0, 2990] = 1.5  # past all windows
    bench = Bench(dataclasses.replace(result, record=dataclasses.replace(result.record, voltage_v=volts)))
    bench.keys("w")
    bench.window._look_at(-200.0, 1000.0)
    trace = bench.axes(END).lines[0].get_ydata()
    assert max(trace) == 1.5


def test_another_size_of_the_window(bench: Bench) -> None:
    bench.figure.set_size_inches(9, 6)
    bench.canvas.callbacks.process("resize_event", None)
    bench.drag(END, -40e-6)
    assert bench.desk.changed


def test_every_key_is_named_at_the_bottom() -> None:
    words = " ".join(HELP)
    for name in (
        "Tab",
        "left",
        "right",
        "Shift",
        "Ctrl",
        "f:",
        "r:",
        "R:",
        "u:",
        "y:",
        "z:",
        "w:",
        "s:",
        "q:",
    ):
        assert name in words, name
    assert {KEYS[key].name for key in "nbfuyrRzw+-,.sq"} == {action.name for action in KEYS.values()} - {
        "hold", "nudge", "leave",
    }  # fmt: skip


def test_no_window_names_the_options(bench: Bench) -> None:
    import matplotlib

    if matplotlib.get_backend().lower() != "agg":
        pytest.skip("needs the back end that draws files only")
    with pytest.raises(InputError, match="--incident-window START,END"):
        show(bench.desk, bench.save)


# --- on a virtual screen -------------------------------------------------------------------------


@pytest.fixture(name="screen")
def _screen() -> Iterator[str]:
    """A virtual screen of its own; its number is found by the server itself."""
    server = shutil.which("Xvfb")
    if server is None or shutil.which("xdotool") is None:
        pytest.skip("there is no Xvfb or no xdotool")
    pytest.importorskip("tkinter")
    reads, writes = os.pipe()
    process = subprocess.Popen(
        [server, "-displayfd", str(writes), "-screen", "0", "1500x950x24", "-nolisten", "tcp"],
        pass_fds=(writes,), stderr=subprocess.DEVNULL,
    )  # fmt: skip
    os.close(writes)
    try:
        with os.fdopen(reads) as numbers:
            yield f":{numbers.readline().strip()}"
    finally:
        process.terminate()
        process.wait(20)


def _xdotool(screen: str, *words: str | int) -> str:
    done = subprocess.run(
        ["xdotool", *map(str, words)], env={**os.environ, "DISPLAY": screen}, capture_output=True, text=True,
        check=False, timeout=20,
    )  # fmt: skip
    return done.stdout.strip()


def _until(found: Callable[[], Any], limit_s: float = 60.0) -> Any:
    end = time.monotonic() + limit_s
    while time.monotonic() < end:
        value = found()
        if value:
            return value
        time.sleep(0.2)
    raise AssertionError("it did not come")


@pytest.mark.slow
def test_a_real_window(screen: str, tmp_path: Path) -> None:
    write_demo(tmp_path / "demo")
    stored = tmp_path / "W-02.h5"
    sheet = shpb.read_sheet(tmp_path / "demo" / "records" / "W-02.toml")
    rig = shpb.read_rig(sheet.rig_file or Path())
    shpb.save_shot(
        shpb.reduce(shpb.read_record(sheet.record_files, shpb.hints_for(rig, sheet)), rig, sheet), stored
    )
    process = subprocess.Popen(
        [sys.executable, "-m", "shpb", "adjust", str(stored), "--figure", "none"],
        env={**os.environ, "DISPLAY": screen, "MPLBACKEND": "TkAgg"},
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip
    try:
        window = str(_until(lambda: _xdotool(screen, "search", "--name", "shpb adjust").split("\n")[-1]))
        _xdotool(screen, "windowfocus", window)
        before = shpb.load(stored).settings
        assert before.reflected_window_s is None
        end = shpb.load(stored).attributes["pulse/reflected"]["automatic_window"][1]
        x, y = _until(lambda: _settled_edge(screen, window))
        _xdotool(screen, "mousemove", x, y, "mousedown", 1)
        for step in range(1, 9):
            _xdotool(screen, "mousemove", x - 12 * step, y)
        _xdotool(screen, "mouseup", 1)
        _xdotool(screen, "key", "s")
        _xdotool(screen, "type", "--delay", "20", "A. B.")
        _xdotool(screen, "key", "Return")
        _xdotool(screen, "type", "--delay", "20", "bump of a cable")
        _xdotool(screen, "key", "Return")
        _until(lambda: shpb.load(stored).by_hand)
        _xdotool(screen, "key", "q")
        out, err = process.communicate(timeout=60)
    finally:
        if process.poll() is None:
            process.terminate()
            process.wait(20)
    assert (process.returncode, err) == (0, "")
    assert "written:" in out
    (kept,) = shpb.load(stored).by_hand
    assert (kept.by, kept.why) == ("A. B.", "bump of a cable")
    window_s = shpb.load(stored).settings.reflected_window_s
    assert window_s is not None
    # 96 pixels of the axes, whose width is known from the layout.
    assert 80e-6 < end - window_s[1] < 160e-6


def _grab(screen: str) -> Any:
    image_grab = pytest.importorskip("PIL.ImageGrab")
    return image_grab.grab(xdisplay=screen)


def _settled_edge(screen: str, window: str) -> tuple[int, int] | None:
    """The same, once the window has come to its size."""
    first = _last_edge(screen, window)
    time.sleep(1.5)
    return first if first is not None and first == _last_edge(screen, window) else None


def _last_edge(screen: str, window: str) -> tuple[int, int] | None:
    """Where on the screen the reflected window ends: the last dashed line of the incident voltages, once drawn."""
    shell = _xdotool(screen, "getwindowgeometry", "--shell", window).split("\n")
    found = dict(line.split("=") for line in shell if "=" in line)
    picture = np.asarray(_grab(screen).convert("L")).astype(int)
    top, left, width, height = (int(found[key]) for key in ("Y", "X", "WIDTH", "HEIGHT"))
    # Below the bars above the windows and above what the trace reaches there, as shares of the height from the top.
    rows = slice(top + round(0.105 * height), top + round(0.135 * height))
    strip = picture[rows, left : left + round(0.6 * width)]
    dashed = np.flatnonzero((strip < 200).mean(axis=0) > 0.3)
    return (left + int(dashed[-1]), top + round(0.12 * height)) if dashed.size else None
