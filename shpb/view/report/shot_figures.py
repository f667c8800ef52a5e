"""The figures of one stored shot, each with the words and numbers that stand for it."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING

import numpy as np

from shpb.arrays import FloatArray
from shpb.rig.gauge import Gauge
from shpb.settings import Analysis
from shpb.view.ink import (
    BAND,
    DARK,
    DASH_DOT,
    DASHES,
    DOTS,
    FAINT,
    INK,
    LIGHT,
    MIDDLE,
    SHADE,
    Line,
    Scale,
    envelope,
    scale,
)
from shpb.view.report.html import Markup
from shpb.view.report.stored import ReportedShot
from shpb.view.report.svg import LETTERS, POINTS, Sketch, figure
from shpb.view.text import rounded
from shpb.view.time_panels import FORCE_LINES, PULSE_LINES
from shpb.view.wording import strain_text

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_US = 1e6
_TIME = "time since the front reached the specimen (µs)"
_FORWARD = Line("forward run", INK, DOTS, 1.0)
_SIDES = (Line("", DARK, (), 0.8), Line("", MIDDLE, DASHES, 0.8))


def shot_figures(shot: ReportedShot) -> list[Markup]:
    """All figures, in the order in which a page shows them."""
    return [_curve(shot), _rate(shot), _ratio(shot), _forces(shot), _voltages(shot), _pulses(shot)]


# --- against strain ----------------------------------------------------------------------------------


def _lines(shot: ReportedShot) -> tuple[Line, Line]:
    """How one-wave and three-wave look; the one put forward broader."""
    one = shot.analysis is Analysis.ONE_WAVE
    return (
        Line("one-wave" + one * ", put forward", DARK, (), 1.6 if one else 1.0),
        Line("three-wave" + (not one) * ", put forward", MIDDLE, DASHES, 1.0 if one else 1.6),
    )


def _strain_pairs(shot: ReportedShot, name: str, factor: float) -> list[tuple[FloatArray, FloatArray]]:
    return [(shot[f"response/true_strain_{w}"], factor * shot[f"response/{name}_{w}"]) for w in ("1w", "3w")]


def _draw_counting(axes: Axes, shot: ReportedShot, pairs: Sequence[tuple[FloatArray, FloatArray]]) -> None:
    """Both analyses: in ink where they count, in thin grey before and after."""
    drawn, span = shot.drawn, shot.span
    pieces = [(drawn, False)]
    if span is not None:
        before, after = slice(drawn.start, span.start + 1), slice(span.stop - 1, drawn.stop)
        pieces = [(before, False), (after, False), (span, True)]
    for piece, counts in pieces:
        for (x, y), look in zip(pairs, _lines(shot), strict=True):
            if piece.stop - piece.start > 1:
                picked = piece.start + envelope(y[piece], POINTS)
                axes.plot(x[picked], y[picked], **(look if counts else look.greyed()).style)


def _curve(shot: ReportedShot) -> Markup:
    pairs, band, part = _strain_pairs(shot, "true_stress", 1e-6), shot.band(), shot.drawn

    def draw() -> Sketch:
        looks = _lines(shot) if shot.span else tuple(look.greyed() for look in _lines(shot))
        sketch = Sketch(2.55, (*looks, Line("not counted", FAINT, (), 0.8)) if shot.span else looks)
        axes = sketch.panel()
        if band is not None and shot.span is not None:
            picked = np.arange(shot.span.start, shot.span.stop)[
                :: max((shot.span.stop - shot.span.start) // 200, 1)
            ]
            strain = np.maximum.accumulate(shot["response/true_strain"][picked])
            low, high = (1e-6 * end[picked - shot.span.start] for end in band[:2])
            axes.fill_between(strain, low, high, color=BAND, linewidth=0, zorder=0.5)
        _draw_counting(axes, shot, pairs)
        _draw_flow(axes, shot)
        highest = max(float(y[part].max()) for _, y in pairs)
        lowest = min(0.0, *(float(y[part].min()) for _, y in pairs))
        room = max(highest - lowest, 1e-6)
        y_scale = scale(lowest - 0.03 * room, highest + 0.08 * room, 6)
        sketch.frame(axes, _strain_scale(shot), y_scale, "true strain", "true stress (MPa)")
        return sketch

    return figure(
        draw, prefix="curve", title="True stress against true strain", description=_curve_words(shot)
    )


def _strain_scale(shot: ReportedShot) -> Scale:
    highest = max(float(shot[f"response/true_strain_{w}"][shot.drawn].max()) for w in ("1w", "3w"))
    highest = max(highest, 1e-4)
    return scale(-0.03 * highest, 1.08 * highest, 5)


def _draw_flow(axes: Axes, shot: ReportedShot) -> None:
    modulus = shot.stored.sheet.specimen.young_modulus_pa
    for one in shot.flow():
        if one.stress_pa is not None:
            strain = one.at_strain + (one.stress_pa / modulus if modulus else 0.0)
            axes.plot(
                [strain], [1e-6 * one.stress_pa], marker="o", markersize=4.0, markerfacecolor="white",
                markeredgecolor=INK, markeredgewidth=0.9, zorder=5,
            )  # fmt: skip


def _curve_words(shot: ReportedShot) -> str:
    span, band = shot.strain_span, shot.band()
    if shot.span is None or span is None or band is None:
        greatest = 1e-6 * float(shot["response/true_stress"][shot.loading].max())
        return f"No part of this curve counts; its greatest true stress is {rounded(greatest)} MPa."
    stress = 1e-6 * shot["response/true_stress"][shot.span]
    half = 0.5e-6 * (band[1] - band[0])
    middle = half.size // 2
    return (
        f"{shot.analysis.value.capitalize()}: from {rounded(float(stress[0]))} MPa at true strain "
        f"{strain_text(span[0])} to {rounded(float(stress[-1]))} MPa at {strain_text(span[1])}. Band: {band[2]}, "
        f"± {rounded(float(half[middle]), 2)} MPa at the middle. Grey: not counted. Circles: flow stresses of the "
        "table."
    )


def _rate(shot: ReportedShot) -> Markup:
    pairs, part = _strain_pairs(shot, "strain_rate", 1.0), shot.drawn
    mean = float(shot.fact("response", "mean_strain_rate"))
    least, greatest = (float(shot.fact("response", f"{end}_strain_rate")) for end in ("least", "greatest"))

    def draw() -> Sketch:
        sketch = Sketch(2.55, (*_lines(shot), Line("mean", INK, DOTS, 1.0)))
        axes = sketch.panel()
        _draw_counting(axes, shot, pairs)
        over = shot.span or shot.loading
        ends = shot["response/true_strain"][[over.start, over.stop - 1]]
        axes.plot(ends, [mean, mean], **Line("", INK, DOTS, 1.0).style)
        highest = max(float(rate[part].max()) for _, rate in pairs)
        y_scale = scale(-0.04 * highest, 1.1 * highest, 5)
        sketch.frame(axes, _strain_scale(shot), y_scale, "true strain", "strain rate (1/s)")
        return sketch

    over = "over what counts" if shot.span else "over the whole loading"
    words = f"Mean {rounded(mean)} /s {over}, from {rounded(least)} to {rounded(greatest)} /s."
    return figure(draw, prefix="rate", title="Engineering strain rate against true strain", description=words)


# --- against time ------------------------------------------------------------------------------------


def _time_view(shot: ReportedShot) -> tuple[slice, FloatArray]:
    """The loading, a little before and a third after it: samples and their times [us]."""
    time = _US * shot["response/time"]
    end = time[shot.loading.stop - 1]
    start, stop = np.searchsorted(time, [-0.05 * end, 1.3 * end])
    part = slice(int(start), max(int(stop), int(start) + 2))
    return part, time[part]


def _shade(axes: Axes, shot: ReportedShot) -> None:
    if shot.span is not None:
        time = _US * shot["response/time"]
        axes.axvspan(time[shot.span.start], time[shot.span.stop - 1], facecolor=SHADE, edgecolor="none")


def _plot(axes: Axes, x: FloatArray, y: FloatArray, look: Line) -> None:
    picked = envelope(y, POINTS)
    axes.plot(x[picked], y[picked], **look.style)


def _ratio(shot: ReportedShot) -> Markup:
    ratio, floor = shot["response/equilibrium_ratio"], shot["trust/equilibrium_floor"]
    limit = 100 * float(shot.fact("response", "equilibrium_limit"))
    part, time = _time_view(shot)
    lines = [
        Line("R", DARK, (), 1.3),
        Line(f"limit {limit:g} %", MIDDLE, DASHES, 0.9),
        Line("measurement floor", LIGHT, DOTS, 1.4),
    ]
    untuned = "response/equilibrium_ratio_untuned"
    if shot.has(untuned):
        lines.append(Line("R, feet not moved", FAINT, DASH_DOT, 1.0))

    def draw() -> Sketch:
        sketch = Sketch(2.2, lines)
        axes = sketch.panel()
        _shade(axes, shot)
        top = 100 * float(np.clip(1.3 * np.quantile(ratio[shot.loading], 0.75), 0.04 * limit, 2.1))
        for look, values in zip(
            [lines[0], *lines[2:]], [ratio, floor, *_if_there(shot, untuned)], strict=True
        ):
            _plot(axes, time, 100 * values[part], look)
        axes.axhline(limit, **lines[1].style)
        sketch.frame(axes, scale(time[0], time[-1], 6), scale(0.0, top, 5), _TIME, "R (%)")
        return sketch

    middle = shot.middle
    low, high = (100 * float(shot[f"trust/equilibrium_ratio_{end}"][middle]) for end in ("low", "high"))
    words = (
        f"{shot.equilibrium_words()[0].upper()}{shot.equilibrium_words()[1:]}; at mid-span R is "
        f"{100 * float(ratio[middle]):.1f} % (about 95 %: {low:.1f} to {high:.1f} %), the floor "
        f"{100 * float(floor[middle]):.1f} %, the limit {limit:g} %.{' Shaded: what counts.' if shot.span else ''}"
    )
    return figure(draw, prefix="ratio", title="Force equilibrium R against time", description=words)


def _if_there(shot: ReportedShot, path: str) -> Iterable[FloatArray]:
    return [shot[path]] if shot.has(path) else []


def _forces(shot: ReportedShot) -> Markup:
    part, time = _time_view(shot)
    forces = [1e-3 * shot[f"response/force_{end}"] for end in ("in", "out")]

    def draw() -> Sketch:
        sketch = Sketch(2.2, FORCE_LINES)
        axes = sketch.panel()
        _shade(axes, shot)
        for look, force in zip(FORCE_LINES, forces, strict=True):
            _plot(axes, time, force[part], look)
        low, high = (float(end(end(f[part]) for f in forces)) for end in (min, max))
        room = max(high - low, 1e-9)
        y_scale = scale(low - 0.05 * room, high + 0.05 * room, 5)
        sketch.frame(axes, scale(time[0], time[-1], 6), y_scale, _TIME, "force (kN)")
        return sketch

    peaks = [rounded(float(force[shot.loading].max())) for force in forces]
    words = f"Greatest force while loading: {peaks[0]} kN at the incident face, {peaks[1]} kN at the transmitted face."
    return figure(draw, prefix="forces", title="Forces at both faces against time", description=words)


def _pulses(shot: ReportedShot) -> Markup:
    part, time = _time_view(shot)
    names = ("incident", "reflected", "transmitted")
    micro = [1e6 * shot[f"wave/{name}"] for name in names]
    closed = shot.has("trust/closure/time")

    def draw() -> Sketch:
        sketch = Sketch(2.6, (*PULSE_LINES, _FORWARD) if closed else PULSE_LINES)
        axes = sketch.panel()
        _shade(axes, shot)
        for look, strain in zip(PULSE_LINES, micro, strict=True):
            _plot(axes, time, strain[part], look)
        if closed:
            for name in names[1:]:
                predicted = 1e6 * shot[f"trust/closure/predicted_{name}"]
                _plot(axes, _US * shot["trust/closure/time"], predicted, _FORWARD)
        low, high = min(float(s[part].min()) for s in micro), max(float(s[part].max()) for s in micro)
        room = max(high - low, 1e-9)
        y_scale = scale(low - 0.05 * room, high + 0.05 * room, 5)
        sketch.frame(axes, scale(time[0], time[-1], 6), y_scale, _TIME, "strain (microstrain)")
        return sketch

    tops = ", ".join(
        f"{name} {rounded(float(s[part][np.abs(s[part]).argmax()]))}"
        for name, s in zip(names, micro, strict=True)
    )
    more = " Dotted: what a forward run of the curve predicts." if closed else ""
    words = f"Greatest strain in microstrain: {tops}.{more}"
    return figure(draw, prefix="pulses", title="Pulses at the specimen faces against time", description=words)


# --- the record --------------------------------------------------------------------------------------


def _voltages(shot: ReportedShot) -> Markup:
    rig = shot.stored.rig
    stations = (
        ("incident", rig.incident_gauge, ("incident", "reflected")),
        ("transmitted", rig.transmitted_gauge, ("transmitted",)),
    )

    def draw() -> Sketch:
        sketch = Sketch(2.6)
        for number, (name, gauge, pulses) in enumerate(stations):
            _draw_station(sketch, sketch.panel(2, number), shot, gauge, pulses, last=number == 1, name=name)
        return sketch

    said = []
    for name in ("incident", "reflected", "transmitted"):
        first, last = (_US * end for end in shot.fact(f"pulse/{name}", "window"))
        foot = shot.fact(f"pulse/{name}", "foot")
        at = "no foot" if foot is None else f"foot {_US * foot:.1f}"
        hand = ", set by hand" if shot.fact(f"pulse/{name}", "set_by_hand") else ""
        said.append(f"{name} {first:.1f} to {last:.1f}, {at}{hand}")
    words = f"Windows shaded, feet dotted, in µs on the record's clock: {'; '.join(said)}."
    return figure(
        draw,
        prefix="voltages",
        title="Bridge voltages as acquired, incident bar above, transmitted below",
        description=words,
    )


def _draw_station(
    sketch: Sketch,
    axes: Axes,
    shot: ReportedShot,
    gauge: Gauge,
    pulses: Sequence[str],
    *,
    last: bool,
    name: str,
) -> None:
    record = shot.stored.record
    view = _voltage_view(shot)
    start, stop = (round((t - record.start_s) / record.sample_interval_s) for t in view)
    shown = [record.channel(channel)[max(start, 0) : max(stop, 2)] for channel in gauge.channels]
    time = _US * (
        record.start_s
        + record.sample_interval_s * (max(start, 0) + np.arange(shown[0].size, dtype=np.float64))
    )
    low, high = min(float(v.min()) for v in shown), max(float(v.max()) for v in shown)
    unit, factor = ("mV", 1e3) if max(abs(low), abs(high)) < 0.5 else ("V", 1.0)
    for pulse in pulses:
        first, end = (_US * t for t in shot.fact(f"pulse/{pulse}", "window"))
        axes.axvspan(first, end, facecolor=SHADE, edgecolor=FAINT, linewidth=0.6)
        foot = shot.fact(f"pulse/{pulse}", "foot")
        at = first  # where the words begin: right of the line of the foot, which would otherwise cross them
        if foot is not None:
            axes.axvline(_US * foot, color=INK, linewidth=0.9, linestyle=(0, DOTS))
            at = max(_US * foot, first)
        words = pulse if (end - first) > 0.3 * _US * (view[1] - view[0]) else f"{pulse[:5]}."
        x = (at / _US - view[0]) / (view[1] - view[0]) + 0.01
        axes.text(x, 0.98, words, fontsize=LETTERS, transform=axes.transAxes, verticalalignment="top")
    for look, voltage in zip(_SIDES, shown, strict=False):
        _plot(axes, time, factor * voltage, look)
    room = max(high - low, 1e-9) * factor
    y_scale = scale(low * factor - 0.08 * room, high * factor + 0.35 * room, 4)
    x_label = "time on the record's clock (µs)" if last else ""
    sketch.frame(axes, scale(_US * view[0], _US * view[1], 6), y_scale, x_label, f"{name} ({unit})")


def _voltage_view(shot: ReportedShot) -> tuple[float, float]:
    """The stretch of the record that is shown [s]: the three windows and some room, inside the record."""
    windows = [shot.fact(f"pulse/{name}", "window") for name in ("incident", "reflected", "transmitted")]
    first, last = min(w[0] for w in windows), max(w[1] for w in windows)
    record = shot.stored.record
    end = record.start_s + record.samples * record.sample_interval_s
    room = last - first
    return max(first - 0.1 * room, record.start_s), min(last + 0.1 * room, end)
