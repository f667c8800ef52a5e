"""The window: events in, the desk moves, and only what has changed is drawn again.

Everything that moves is drawn over a kept picture of all that does not (blitting). Motions of the mouse are gathered
until the last one is drawn, where the back end has a timer. When the hand lets go the whole reduction is done, with
uncertainty and checks, and the axes are fitted anew.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any

from shpb.adjust.desk import Desk
from shpb.adjust.marks import MARKS, pulse_of
from shpb.errors import ShpbError
from shpb.pulse.by_hand import ByHand
from shpb.reduction import ShotResult
from shpb.view.adjust.asking import Asking
from shpb.view.adjust.cells import Cells, at_share
from shpb.view.adjust.curves import CurvePanels
from shpb.view.adjust.keys import HELP, KEYS
from shpb.view.adjust.layout import HELP_Y, LETTERS, TABLE_AT, TITLE_Y, panels
from shpb.view.adjust.table import WIDE, history_text, numbers_text, table_text
from shpb.view.adjust.voltages import Grip, VoltagePanel
from shpb.view.text import fitted, printable, wrapped
from shpb.view.wording import verdict_sentence

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.backend_bases import KeyEvent, MouseEvent, TimerBase
    from matplotlib.figure import Figure
    from matplotlib.transforms import BboxBase

Save = Callable[[str, str], tuple[ShotResult, str]]

_US = 1e6
_FOLLOW_MS, _SETTLE_MS = 4, 300
_CLOSER = 0.7


class AdjustWindow:
    """Panels, marks and keys on a figure of any back end.

    Parameters
    ----------
    figure : Figure
        Empty, with its canvas.
    desk : Desk
    save : callable
        Given a name and a reason it stores what stands, and returns the result and a few words; ``ShpbError`` is shown.
    close : callable
        Closes the window.
    by, why : str
        Answers that are known already.
    history : tuple of ByHand
        What was moved before.
    """

    def __init__(
        self,
        figure: Figure,
        desk: Desk,
        save: Save,
        close: Callable[[], None],
        *,
        by: str = "",
        why: str = "",
        history: tuple[ByHand, ...] = (),
    ) -> None:
        self.figure, self.desk = figure, desk
        self._save, self._close, self._by, self._why = save, close, by, why
        self.result: ShotResult | None = None  # of the whole reduction, as it stands
        self.redraws = 0
        self._said, self._closing = history_text(history), False
        self._grip: Grip | None = None
        self._offset_s = 0.0  # from the mouse to what it holds
        self._pointed_s: float | None = None  # where the mouse was last, not yet followed
        self._picture: object = None
        self._was_asking = False
        self._panels = panels(figure)
        strain = desk.shot.strain
        self._voltages = (
            VoltagePanel(figure, self._panels.incident, strain.incident, desk, ("incident", "reflected")),
            VoltagePanel(figure, self._panels.transmitted, strain.transmitted, desk, ("transmitted",)),
        )
        self._curves = CurvePanels(self._panels)
        self._texts()
        self._asking = Asking(figure)
        self._view_us = self._whole_view_us()
        self._reduce()
        self._fit()
        self._connect()

    # --- texts ----------------------------------------------------------------------------------

    def _texts(self) -> None:
        figure, (x, y) = self.figure, TABLE_AT
        self._title = Cells(figure, at_share(figure, 0.055, TITLE_Y), 9.5, anchor="left", bold=True)
        lines = [Cells(figure, at_share(figure, 0.012, at), LETTERS, anchor="left") for at in HELP_Y]
        for cells, text in zip(lines, HELP, strict=True):
            cells.text = text
        for cells in (self._title, *lines):
            cells.set_animated(False)
            figure.add_artist(cells)
        self._table = Cells(figure, at_share(figure, x, y), LETTERS)
        self._numbers = Cells(figure, at_share(figure, x, y - 0.195), LETTERS)
        self._status = Cells(figure, at_share(figure, x, y - 0.25), LETTERS, bold=True)

    def _name(self) -> str:
        sheet = self.desk.shot.sheet
        name = f"{fitted(printable(sheet.shot_id), 30)}, {fitted(printable(sheet.specimen.material), 30)}"
        if self.result is None:
            return f"{name}: cannot be reduced with these windows"
        return f"{name}   {self.result.verdict.value.upper()}   {fitted(verdict_sentence(self.result), 110)}"

    def say(self, words: str) -> None:
        """Show a few words until the next move."""
        self._said = words
        self.show()

    # --- drawing --------------------------------------------------------------------------------

    def _artists(self) -> list[Artist]:
        desk = self.desk
        drawn: list[Artist] = []
        for panel in self._voltages:
            drawn += panel.update(focused=not self._asking.open)
        drawn += self._curves.update(desk.live)
        self._table.text = table_text(desk)
        self._numbers.text = numbers_text(desk)
        state = "changed, not saved" if desk.changed else "as stored"
        self._status.text = "\n".join([state, *wrapped(self._said, WIDE)[:3]] if self._said else [state])
        return [*drawn, self._table, self._numbers, self._status, *self._asking.update()]

    def show(self) -> None:
        """Draw what moves over the picture of what does not."""
        canvas: Any = self.figure.canvas  # those that can blit have two methods more
        if self._picture is None or not getattr(canvas, "supports_blit", False):
            canvas.draw_idle()
            return
        canvas.restore_region(self._picture)
        for artist in self._artists():
            self.figure.draw_artist(artist)
        # On to the screen only what can have changed: that costs by area.
        for box in self._moving_boxes():
            canvas.blit(box)
        self.redraws += 1

    def _moving_boxes(self) -> Sequence[BboxBase]:
        """Where on the figure something moves."""
        from matplotlib.transforms import Bbox

        if self._asking.open or self._was_asking:
            self._was_asking = self._asking.open
            return [self.figure.bbox]
        x, y = TABLE_AT
        table = Bbox([[x - 0.005, HELP_Y[0] + 0.03], [1.0, y + 0.005]]).transformed(self.figure.transFigure)
        return [axes.bbox.padded(4) for axes in self._panels] + [table]

    def _drawn(self) -> None:
        """All was drawn: keep the picture, and put what moves over it."""
        canvas: Any = self.figure.canvas
        artists = self._artists()
        if getattr(canvas, "supports_blit", False):
            self._picture = canvas.copy_from_bbox(self.figure.bbox)
        for artist in artists:
            self.figure.draw_artist(artist)
        if getattr(canvas, "supports_blit", False):
            canvas.blit(self.figure.bbox)
        self.redraws += 1

    def _fit(self) -> None:
        """Fit axes and traces to what stands and draw all of it."""
        self._panels.incident.set_xlim(*self._view_us)
        for panel in self._voltages:
            panel.trace(self._view_us)
        self._curves.fit(self.desk.live)
        self._title.text = self._name()
        self._picture = None
        self.figure.canvas.draw_idle()

    def _reduce(self) -> None:
        try:
            self.result = self.desk.shot.reduced(self.desk.settings)
        except ShpbError:
            self.result = None  # the curves say why

    def settle(self) -> None:
        """The hand has let go: the whole reduction, and all drawn anew."""
        self._reduce()
        self._fit()

    # --- views ----------------------------------------------------------------------------------

    def _whole_view_us(self) -> tuple[float, float]:
        windows = [pulse.window_s for pulse in self.desk.live.pulses]
        first, last = self._room_us()
        start, end = min(w[0] for w in windows), max(w[1] for w in windows)
        room = 0.08 * (end - start)
        return max((start - room) * _US, first), min((end + room) * _US, last)

    def _room_us(self) -> tuple[float, float]:
        """The record and a little more, so that a mark at its very end can still be taken."""
        first, last = self.desk.shot.record_s
        more = 0.01 * (last - first)
        return (first - more) * _US, (last + more) * _US

    def _look_at(self, low_us: float, high_us: float) -> None:
        first, last = self._room_us()
        width = min(max(high_us - low_us, 40 * self.desk.shot.strain.sample_interval_s * _US), last - first)
        low = min(max(0.5 * (low_us + high_us - width), first), last - width)
        self._view_us = (low, low + width)
        self._fit()

    def _zoom(self, centre_us: float, factor: float) -> None:
        low, high = self._view_us
        self._look_at(centre_us - (centre_us - low) * factor, centre_us + (high - centre_us) * factor)

    def _zoom_to_pulse(self, pulse: str) -> None:
        start, end = pulse_of(self.desk.live.pulses, pulse).window_s
        room = 0.1 * (end - start)
        self._look_at((start - room) * _US, (end + room) * _US)

    def _keep_in_view(self) -> None:
        """Where a key has moved a mark out of view, the view follows."""
        time, (low, high) = self.desk.time(self.desk.mark), self._view_us
        if time is not None and not low <= time * _US <= high:
            self._look_at(time * _US - 0.5 * (high - low), time * _US + 0.5 * (high - low))

    # --- events ---------------------------------------------------------------------------------

    def _connect(self) -> None:
        canvas = self.figure.canvas
        canvas.mpl_connect("draw_event", lambda _: self._drawn())
        canvas.mpl_connect("resize_event", lambda _: self._fit())
        canvas.mpl_connect("button_press_event", self._pressed)
        canvas.mpl_connect("motion_notify_event", self._moved)
        canvas.mpl_connect("button_release_event", self._released)
        canvas.mpl_connect("scroll_event", self._scrolled)
        canvas.mpl_connect("key_press_event", self._key)
        self._follow_timer = self._timer(_FOLLOW_MS, self.follow)
        self._settle_timer = self._timer(_SETTLE_MS, self.settle)

    def _timer(self, wait_ms: int, call: Callable[[], None]) -> TimerBase | None:
        """A timer that calls once; None where the back end has none (it then follows every single motion)."""
        from matplotlib.backend_bases import TimerBase

        timer = self.figure.canvas.new_timer(interval=wait_ms)
        if type(timer) is TimerBase:
            return None
        timer.single_shot = True
        timer.add_callback(call)
        return timer

    def _pressed(self, event: MouseEvent) -> None:
        self._closing = False
        if self._asking.open or event.button != 1:
            return
        for panel in self._voltages:
            pulse = panel.pulse_at(event)
            if event.dblclick and pulse is not None:
                self._zoom_to_pulse(pulse)
                return
            grip = panel.grip(event)
            if grip is not None and event.xdata is not None:
                self._take(grip, event.xdata / _US)
                return
            if pulse is not None and self.desk.mark.pulse != pulse:
                self.desk.select(next(mark for mark in MARKS if mark.pulse == pulse))
                self.show()
                return

    def _take(self, grip: Grip, pointed_s: float) -> None:
        desk = self.desk
        if not (grip.whole and desk.mark.pulse == grip.mark.pulse):
            desk.select(grip.mark)
        anchor = (
            pulse_of(desk.live.pulses, grip.mark.pulse).window_s[0] if grip.whole else desk.time(grip.mark)
        )
        self._grip, self._offset_s = grip, (anchor or 0.0) - pointed_s
        self._said = ""
        self.show()

    def _moved(self, event: MouseEvent) -> None:
        if self._grip is None:
            return
        # Off the axes the mouse still means the time below it.
        axes = self._panels.incident
        # A motion that comes while one waits takes its place: to wait anew each time would never end with a fast mouse.
        waits = self._pointed_s is not None
        self._pointed_s = float(axes.transData.inverted().transform((event.x, event.y))[0]) / _US
        if self._follow_timer is None:
            self.follow()
        elif not waits:
            self._follow_timer.start()

    def follow(self) -> None:
        """Take what is held to where the mouse is now, and draw it."""
        grip, pointed = self._grip, self._pointed_s
        self._pointed_s = None
        if grip is None or pointed is None:
            return
        if grip.whole:
            self.desk.slide_to(pointed + self._offset_s)
        else:
            self.desk.drag_to(pointed + self._offset_s)
        self.show()

    def _released(self, event: MouseEvent) -> None:
        if self._grip is None or event.button != 1:
            return
        if self._follow_timer is not None:
            self._follow_timer.stop()
        self.follow()
        self._grip = None
        if self.desk.let_go():
            self.settle()
        else:
            self.show()

    def _scrolled(self, event: MouseEvent) -> None:
        over = event.inaxes in (self._panels.incident, self._panels.transmitted)
        if over and event.xdata is not None and self._grip is None and not self._asking.open:
            self._zoom(event.xdata, _CLOSER if event.step > 0 else 1 / _CLOSER)

    def _key(self, event: KeyEvent) -> None:
        key = event.key or ""
        if self._asking.open:
            if self._asking.key(key):
                self._store()
            else:
                self.show()
            return
        action = KEYS.get(key)
        if action is None:
            return
        if self._grip is not None and action.name != "leave":
            return  # the mouse holds it
        if action.name != "close":
            self._closing = False
        self._do(action.name, action.number)

    # --- what keys ask for ----------------------------------------------------------------------

    def _do(self, name: str, number: int) -> None:
        desk = self.desk
        if name == "next":
            desk.next(number)
        elif name == "hold":
            desk.select(MARKS[number])
        elif name in ("zoom", "pan", "zoom to pulse", "zoom out"):
            self._view(name, number)
            return
        elif name == "save":
            self._begin_saving()
            return
        elif name == "close":
            self._leave_window()
            return
        elif name == "leave":
            self._cancel()
            return
        else:
            self._move_by_key(name, number)
            return
        self._said = ""
        self._keep_in_view()
        self.show()

    def _move_by_key(self, name: str, number: int) -> None:
        desk = self.desk
        asked: dict[str, Callable[[], bool]] = {
            "nudge": lambda: desk.nudge(number),
            "foot": desk.begin_foot,
            "undo": desk.undo,
            "redo": desk.redo,
            "reset": lambda: desk.reset(desk.mark.pulse),
            "reset all": desk.reset,
        }
        moved = asked[name]()
        self._said = "" if moved else {
            "nudge": "it cannot go further that way",
            "foot": "there is a foot already: hold it with its number and move it",
            "undo": "there is nothing to undo",
            "redo": "there is nothing to do again",
        }.get(name, "all of it is the program's own choice already")  # fmt: skip
        if name == "nudge" and desk.time(desk.mark) is None:
            self._said = "the program found no foot here: f sets one"
        if not moved:
            self.show()
            return
        self._keep_in_view()
        self.show()
        if self._settle_timer is None:
            self.settle()
        else:
            # Keys repeat: the whole reduction waits for the last of them.
            self._settle_timer.stop()
            self._settle_timer.start()

    def _view(self, name: str, number: int) -> None:
        low, high = self._view_us
        if name == "zoom out":
            self._view_us = self._whole_view_us()
            self._fit()
        elif name == "zoom to pulse":
            self._zoom_to_pulse(self.desk.mark.pulse)
        elif name == "pan":
            step = 0.25 * number * (high - low)
            self._look_at(low + step, high + step)
        else:
            time = self.desk.time(self.desk.mark)
            centre = 0.5 * (low + high) if time is None else time * _US
            self._zoom(centre, _CLOSER if number > 0 else 1 / _CLOSER)

    def _cancel(self) -> None:
        self._grip = self._pointed_s = None
        self.desk.cancel()
        self._said = ""
        self.show()

    # --- saving and leaving ---------------------------------------------------------------------

    def _begin_saving(self) -> None:
        if not self.desk.changed:
            self.say("nothing differs from what is stored")
            return
        self._reduce()
        if self.result is None:
            self.say("these windows give no curve, so there is nothing to store")
            return
        self._asking.begin(self._by, self._why)
        self.show()

    def _store(self) -> None:
        by, why = self._asking.answers
        try:
            self.result, words = self._save(by, why)
        except (ShpbError, OSError) as error:
            reason = str(error) if isinstance(error, ShpbError) else error.strerror or str(error)
            self._said = f"not stored: {printable(reason)}"
        else:
            self._by, self._why, self._said = by, "", words
        self._fit()

    def _leave_window(self) -> None:
        if self.desk.changed and not self._closing:
            self._closing = True
            self.say("changed and not saved: q once more closes without saving, s saves")
            return
        self._close()


__all__ = ["AdjustWindow", "Save"]
