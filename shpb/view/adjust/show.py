"""Opens the window with whatever interactive back end matplotlib finds, and waits until it is closed."""

from __future__ import annotations

from typing import TYPE_CHECKING

from shpb.adjust.desk import Desk
from shpb.errors import InputError, ShpbError
from shpb.pulse.by_hand import ByHand
from shpb.reduction import ShotResult
from shpb.view.adjust.layout import DPI, SIZE_IN
from shpb.view.figure import page_style
from shpb.view.text import printable

if TYPE_CHECKING:
    from matplotlib.backend_bases import FigureManagerBase
    from matplotlib.figure import Figure

    from shpb.view.adjust.window import Save

_OPTIONS = (
    "Without a screen do the same with options: --incident-window START,END, --reflected-window, --transmitted-window, "
    "--incident-foot TIME, --reflected-foot, --transmitted-foot, --reset, --by NAME, --why TEXT"
)


def show(
    desk: Desk, save: Save, *, by: str = "", why: str = "", history: tuple[ByHand, ...] = ()
) -> ShotResult | None:
    """Open the window and wait until it is closed.

    Returns
    -------
    ShotResult or None
        Of what was stored last, or of the shot as it was opened; None where that gives no curve and was not mended.

    Raises
    ------
    InputError
        If matplotlib has no back end with a window here; it names the options that do the same.
    """
    import matplotlib

    from shpb.view.adjust.window import AdjustWindow

    try:
        opened = desk.shot.reduced(desk.settings)
    except ShpbError:
        opened = None  # windows that give no curve are what one opens the window for
    stored: list[ShotResult] = []

    def keep(name: str, reason: str) -> tuple[ShotResult, str]:
        result, words = save(name, reason)
        stored.append(result)
        return result, words

    with page_style(), matplotlib.rc_context({"toolbar": "None"}):
        figure = _window()
        import matplotlib.pyplot as plt

        AdjustWindow(figure, desk, keep, lambda: plt.close(figure), by=by, why=why, history=history)
        title = f"shpb adjust: {printable(desk.shot.sheet.shot_id)}"
        if figure.canvas.manager is not None:
            figure.canvas.manager.set_window_title(title)
        plt.show(block=True)
    return stored[-1] if stored else opened


def _window() -> Figure:
    """A figure in a window of its own, without the keys that matplotlib itself gives to windows."""
    import matplotlib.pyplot as plt

    try:
        figure = plt.figure(figsize=SIZE_IN, dpi=DPI)
    except (ImportError, RuntimeError) as error:
        raise _no_window(printable(error)) from error
    manager = figure.canvas.manager
    if manager is None or not _has_window(manager):
        name = plt.get_backend()
        plt.close(figure)
        raise _no_window(f"its back end here, {name}, draws files only")
    if manager.key_press_handler_id is not None:
        figure.canvas.mpl_disconnect(manager.key_press_handler_id)
    return figure


def _has_window(manager: FigureManagerBase) -> bool:
    """Whether a back end shows something and waits: one of these two is its own then."""
    from matplotlib.backend_bases import FigureManagerBase

    return any(
        getattr(type(manager), name).__func__ is not getattr(FigureManagerBase, name).__func__
        for name in ("pyplot_show", "start_main_loop")
    )


def _no_window(why: str) -> ShpbError:
    return InputError(f"matplotlib can open no window ({why})", where="shpb adjust", mend=_OPTIONS)
