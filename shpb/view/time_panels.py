"""The time side of the figure: voltages, pulses and forces at the faces, R(t).

Every panel gets axes and draws on them; times are in us, forces in kN, strains in microstrain.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.pulse import Pulse
from shpb.pulse.strain import StationStrain
from shpb.reduction import ShotResult
from shpb.rig.gauge import Gauge
from shpb.view.ink import (
    DARK,
    DASH_DOT,
    DASHES,
    DOTS,
    FAINT,
    INK,
    LIGHT,
    MIDDLE,
    SHADE,
    SMALL,
    Line,
    envelope,
    scale,
)
from shpb.view.page import frame, width_in

if TYPE_CHECKING:
    from matplotlib.axes import Axes

PULSE_LINES = (
    Line("incident", DARK),
    Line("reflected", MIDDLE, DASHES),
    Line("transmitted", LIGHT, DASH_DOT, 1.3),
)
FORWARD = Line("forward run", INK, DOTS, 0.9)
FORCE_LINES = (Line("F_in", DARK), Line("F_out", MIDDLE, DASHES))
RATIO, FLOOR, LIMIT = (
    Line("R", DARK),
    Line("measurement floor", LIGHT, DOTS, 1.3),
    Line("limit", MIDDLE, DASHES, 0.9),
)
UNTUNED = Line("R, feet not moved", FAINT, DASH_DOT, 1.0)

_US = 1e6
_LETTER = 0.057  # in, a letter of the smallest type, a little more than the mean


def voltage_view_us(result: ShotResult) -> tuple[float, float]:
    """The stretch of the record that is shown [us]: the three windows and some room, inside the record."""
    windows = [pulse.window_s for pulse in result.pulses]
    first, last = min(w[0] for w in windows), max(w[1] for w in windows)
    room = last - first
    record = result.record
    end = record.start_s + record.samples * record.sample_interval_s
    return max(first - 0.12 * room, record.start_s) * _US, min(last + 0.25 * room, end) * _US


def draw_voltage(
    axes: Axes,
    result: ShotResult,
    *,
    station: StationStrain,
    gauge: Gauge,
    pulses: Iterable[Pulse],
    side: str,
    last: bool,
) -> None:
    """Voltages of one gauge station as acquired, with the windows and feet of its pulses."""
    view = voltage_view_us(result)
    strain = result.strain
    start, stop = strain.index(view[0] / _US), strain.index(view[1] / _US)
    shown = station.voltage_v[:, start:stop]
    unit, factor = ("mV", 1e3) if float(np.abs(shown).max()) < 0.5 else ("V", 1.0)
    low, high = float(shown.min()) * factor, float(shown.max()) * factor
    room = max(high - low, 1e-9)
    limits = scale(low - 0.10 * room, high + 0.38 * room, 3)
    for pulse in pulses:
        _draw_window(axes, pulse, view)
    looks = (Line("", DARK, (), 0.8), Line("", MIDDLE, DASHES, 0.8))
    for voltage, look in zip(shown, looks, strict=False):
        picked = envelope(voltage)
        time_us = (strain.start_s + strain.sample_interval_s * (start + picked)) * _US
        axes.plot(time_us, voltage[picked] * factor, label=side, **look.style)
    for rail in gauge.scope_range_v or ():
        if low - 0.1 * room < rail * factor < high + 0.1 * room:
            axes.axhline(rail * factor, color=INK, linewidth=0.7, linestyle=(0, DOTS))
            axes.text(0.995, rail * factor, "end of the scope's range", fontsize=SMALL, parse_math=False,
                      transform=axes.get_yaxis_transform(), horizontalalignment="right",
                      verticalalignment="bottom")  # fmt: skip
    frame(
        axes, scale(*view, 8), limits, "time on the record's clock (µs)" if last else "", f"{side} ({unit})"
    )


def _draw_window(axes: Axes, pulse: Pulse, view: tuple[float, float]) -> None:
    start, stop = (time * _US for time in pulse.window_s)
    axes.axvspan(start, stop, facecolor=SHADE, edgecolor="none")
    for edge in (start, stop):
        axes.axvline(edge, color=FAINT, linewidth=0.7)
    foot = None if pulse.foot is None else pulse.foot.time_s * _US
    begin = max(start, view[0])
    if foot is not None and begin <= foot < min(stop, view[1]):
        axes.axvline(foot, color=INK, linewidth=0.8, linestyle=(0, DOTS))
        begin = foot  # the words stand right of the line, which would otherwise cross them
    per_us = width_in(axes) / (view[1] - view[0])
    name = f"{pulse.name}, set by hand" if pulse.set_by_hand else pulse.name
    full = name if foot is None else f"{name}, foot {foot:.1f} µs"
    room = (min(stop, view[1]) - begin) * per_us - 0.06
    said = next((text for text in (full, name, pulse.name) if len(text) * _LETTER <= room), pulse.name[0])
    axes.text((begin - view[0]) / (view[1] - view[0]) + 0.008, 0.97, said, fontsize=SMALL, parse_math=False,
              transform=axes.transAxes, verticalalignment="top")  # fmt: skip


def loading_view_us(result: ShotResult) -> tuple[float, float]:
    """Times since the front that are shown [us]: the loading, a little before and a third after it."""
    response = result.response
    end = float(response.time_s[response.loading[1] - 1])
    return max(float(response.time_s[0]), -0.05 * end) * _US, min(float(response.time_s[-1]), 1.3 * end) * _US


def pulse_lines(result: ShotResult) -> tuple[Line, ...]:
    """The lines that :func:`draw_pulses` draws."""
    return PULSE_LINES if result.closure is None else (*PULSE_LINES, FORWARD)


def draw_pulses(axes: Axes, result: ShotResult) -> None:
    """The three pulses at the specimen faces, and what a forward run of the reduced curve predicts of two of them."""
    faces = result.faces
    part, time_us = _time_part(result)
    highest, lowest = 0.0, 0.0
    _shade_span(axes, result)
    for look, pulse in zip(PULSE_LINES, (faces.incident, faces.reflected, faces.transmitted), strict=True):
        micro = 1e6 * pulse.strain[part]
        picked = envelope(micro)
        axes.plot(time_us[picked], micro[picked], label=look.name, **look.style)
        highest, lowest = max(highest, float(micro.max())), min(lowest, float(micro.min()))
    closure = result.closure
    if closure is not None:
        for strain in (closure.predicted_reflected, closure.predicted_transmitted):
            axes.plot(closure.time_s * _US, 1e6 * strain, label=FORWARD.name, **FORWARD.style)
    room = highest - lowest
    frame(axes, scale(*loading_view_us(result), 8), scale(lowest - 0.05 * room, highest + 0.05 * room, 5),
           "", "strain (microstrain)")  # fmt: skip


def draw_forces(axes: Axes, result: ShotResult) -> None:
    """Force at both faces."""
    motion = result.response.motion
    part, time_us = _time_part(result)
    _shade_span(axes, result)
    highest, lowest = 0.0, 0.0
    for look, force in zip(FORCE_LINES, (motion.force_in_n, motion.force_out_n), strict=True):
        kilo = force[part] * 1e-3
        picked = envelope(kilo)
        axes.plot(time_us[picked], kilo[picked], label=look.name, **look.style)
        highest, lowest = max(highest, float(kilo.max())), min(lowest, float(kilo.min()))
    room = highest - lowest
    frame(axes, scale(*loading_view_us(result), 8), scale(lowest - 0.05 * room, highest + 0.05 * room, 4),
           "", "force (kN)")  # fmt: skip


def ratio_lines(result: ShotResult) -> tuple[Line, ...]:
    """The lines that :func:`draw_ratio` draws."""
    limit = Line(
        f"limit {100 * result.response.equilibrium.limit:g} %", LIMIT.colour, LIMIT.dashes, LIMIT.width
    )
    lines = (RATIO, limit, FLOOR)
    return lines if result.response.untuned_equilibrium is None else (*lines, UNTUNED)


def draw_ratio(axes: Axes, result: ShotResult) -> None:
    """R(t) with its limit and its floor; with moved feet also R without moving them."""
    response = result.response
    equilibrium, untuned = response.equilibrium, response.untuned_equilibrium
    part, time_us = _time_part(result)
    loading = equilibrium.ratio[slice(*response.loading)]
    # R starts at 200 %: the axis ends a little above what most of the loading shows.
    top = 100 * float(np.clip(1.3 * np.quantile(loading, 0.75), 4 * equilibrium.limit, 2.1))
    _shade_span(axes, result)
    drawn = [(RATIO, equilibrium.ratio), (FLOOR, equilibrium.floor)]
    if untuned is not None:
        drawn.insert(0, (UNTUNED, untuned.ratio))
    for look, values in drawn:
        percent = 100 * values[part]
        picked = envelope(percent)
        axes.plot(time_us[picked], percent[picked], label=look.name, **look.style)
    axes.axhline(100 * equilibrium.limit, label=LIMIT.name, **LIMIT.style)
    frame(axes, scale(*loading_view_us(result), 8), scale(0.0, top, 4),
           "time since the loading front reached the specimen (µs)", "R (%)")  # fmt: skip


def _time_part(result: ShotResult) -> tuple[slice, FloatArray]:
    time_s = result.response.time_s
    low, high = loading_view_us(result)
    start, stop = np.searchsorted(time_s, [low / _US, high / _US])
    part = slice(int(start), max(int(stop), int(start) + 2))
    return part, time_s[part] * _US


def _shade_span(axes: Axes, result: ShotResult) -> None:
    span = result.response.span
    if span is not None:
        time_s = result.response.time_s
        axes.axvspan(time_s[span[0]] * _US, time_s[span[1] - 1] * _US, facecolor=SHADE, edgecolor="none")
