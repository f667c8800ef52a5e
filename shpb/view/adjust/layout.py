"""Places on the window, as shares of it, and the axes of its panels."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

from shpb.view.ink import SMALL

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

SIZE_IN = (13.0, 7.8)
DPI = 100
_LEFT, _WIDTH = 0.055, 0.545
_RIGHT, _RIGHT_WIDTH = 0.66, 0.325
TITLE_Y, HELP_Y = 0.967, (0.034, 0.012)
TABLE_AT = (_RIGHT - 0.035, 0.437)
LETTERS = 8.0  # of the table and the help


class Panels(NamedTuple):
    """The axes."""

    incident: Axes
    transmitted: Axes
    forces: Axes
    ratio: Axes
    curve: Axes


def panels(figure: Figure) -> Panels:
    """Make the axes: voltages above, forces and R below them, the curve at the right."""
    incident = figure.add_axes((_LEFT, 0.745, _WIDTH, 0.20))
    transmitted = figure.add_axes((_LEFT, 0.545, _WIDTH, 0.17), sharex=incident)
    forces = figure.add_axes((_LEFT, 0.305, _WIDTH, 0.155))
    ratio = figure.add_axes((_LEFT, 0.115, _WIDTH, 0.155), sharex=forces)
    curve = figure.add_axes((_RIGHT, 0.525, _RIGHT_WIDTH, 0.42))
    for axes in (incident, transmitted, forces, ratio, curve):
        axes.set_autoscale_on(False)
        axes.tick_params(labelsize=SMALL)
    for axes in (incident, forces):
        axes.tick_params(labelbottom=False)
    transmitted.set_xlabel("time on the record's clock (µs)")
    forces.set_ylabel("force (kN)")
    ratio.set_ylabel("R (%)")
    ratio.set_xlabel("time since the loading front reached the specimen (µs)")
    curve.set_xlabel("true strain")
    curve.set_ylabel("true stress (MPa)")
    return Panels(incident, transmitted, forces, ratio, curve)
