"""The figures of a stored merge: mean curves, stress over rate and over temperature, what a law leaves over."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.view.ink import BAND, DARK, DASH_DOT, DOTS, FAINT, INK, MIDDLE, Line, Scale, envelope, scale
from shpb.view.merge_words import rate_text
from shpb.view.report.html import Markup
from shpb.view.report.merge_stored import Material
from shpb.view.report.svg import Sketch, figure
from shpb.view.text import rounded

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_POINTS = 300
_MOST_GROUPS = 8  # shapes that a reader can tell apart
_BAR = "bar"
_SLOW_BAND = "#f0d8c8"
_DASHES: tuple[tuple[float, ...], ...] = ((), (5.0, 1.6), DASH_DOT, (2.6, 1.2), (9.0, 1.8), DOTS)
_SHAPES = ("o", "s", "^", "D", "v", "P", "X", "*")


class Mark(NamedTuple):
    """A marker and its name."""

    name: str
    style: dict[str, Any]


def _mark(name: str, place: int) -> Mark:
    """Shapes in turn, every second one open, so that a grey print tells them apart."""
    colour = (DARK, MIDDLE)[place % 2]
    face = "white" if place % 2 else colour
    return Mark(
        name,
        {
            "linestyle": "none",
            "marker": _SHAPES[place % len(_SHAPES)],
            "markersize": 4.2,
            "markeredgewidth": 0.9,
            "markeredgecolor": colour,
            "markerfacecolor": face,
        },
    )


def material_figures(material: Material) -> list[Markup]:
    """All figures of a material, in the order in which a page shows them."""
    found = [_flow_curves(material, n, group) for n, group in enumerate(material.temperature_groups())]
    if material.strain is not None:
        found += [_over_rate(material, material.strain), _over_temperature(material, material.strain)]
    if material.laws:
        found.append(_left_over(material, material.laws[0]))
    return found


def _prefix(material: Material, name: str) -> str:
    return f"m{material.number}-{name}"


def _kelvin(material: Material, group: Sequence[int]) -> str:
    values = [float(material.conditions[i]["temperature"]) for i in group]
    return " to ".join(dict.fromkeys(f"{value:.0f}" for value in (min(values), max(values))))


def _flow_curves(material: Material, number: int, group: Sequence[int]) -> Markup:
    ordered = sorted(group, key=lambda i: float(material.conditions[i]["mean_rate"]))
    looks, counts = {}, {True: 0, False: 0}
    for i in ordered:
        one = material.conditions[i]
        bar = str(one["range"]) == _BAR
        dashes = _DASHES[counts[bar] % len(_DASHES)]
        counts[bar] += 1
        name = f"{rate_text(float(one['mean_rate']))} /s"
        looks[i] = Line(name, DARK if bar else MIDDLE, dashes, 1.5 if bar else 1.0)

    def draw() -> Sketch:
        sketch = Sketch(2.6, list(looks.values()))
        axes = sketch.panel()
        highest, far = 1.0, 1e-3
        for i in ordered:
            strain = material[f"conditions/{i}/plastic_strain"]
            stress, u = (
                1e-6 * material[f"conditions/{i}/{n}"] for n in ("true_stress", "true_stress_errors")
            )
            known = np.isfinite(stress)
            strain, stress, u = strain[known], stress[known], u[known]
            if strain.size < 2:
                continue
            picked = envelope(stress, _POINTS)
            tint = BAND if looks[i].colour == DARK else _SLOW_BAND
            low, high = (stress + sign * 2 * np.nan_to_num(u) for sign in (-1, 1))
            axes.fill_between(strain[picked], low[picked], high[picked], color=tint, linewidth=0, zorder=0.5)
            axes.plot(strain[picked], stress[picked], **looks[i].style)
            highest, far = max(highest, float(high.max())), max(far, float(strain.max()))
        frames = scale(0.0, 1.04 * far, 5), scale(0.0, 1.06 * highest, 6)
        sketch.frame(axes, *frames, "true plastic strain", "true stress (MPa)")
        return sketch

    kelvin = _kelvin(material, group)
    slow = [looks[i].name for i in ordered if looks[i].colour == MIDDLE]
    fast = [looks[i].name for i in ordered if looks[i].colour == DARK]
    said = [
        f"bars (broad lines) at {', '.join(fast)}" if fast else "",
        f"quasi-static (thin lines) at {', '.join(slow)}" if slow else "",
    ]
    words = f"Mean curves, {' and '.join(filter(None, said))}; bands: k = 2, about 95 %."
    return figure(
        draw,
        prefix=_prefix(material, f"curves{number}"),
        title=f"{material.name}: flow curves at {kelvin} K",
        description=words,
    )


class _Points(NamedTuple):
    """Points of the merged table at one strain: condition, rate [1/s], temperature [K], stress and u [MPa]."""

    condition: FloatArray
    rate: FloatArray
    kelvin: FloatArray
    stress: FloatArray
    u: FloatArray


def _points(material: Material, strain: float) -> _Points:
    here = np.flatnonzero(material["table/plastic_strain"] == strain)
    names = (("condition", 1), ("rate", 1), ("temperature", 1), ("stress", 1e-6), ("u_stress", 1e-6))
    return _Points(*(factor * material[f"table/{name}"][here] for name, factor in names))


def _draw_bars(axes: Axes, x: FloatArray, points: _Points, here: Sequence[int]) -> None:
    for i in here:
        ends = [points.stress[i] - 2 * points.u[i], points.stress[i] + 2 * points.u[i]]
        axes.plot([x[i], x[i]], ends, color=INK, linewidth=0.8)


def _rows_of(points: _Points, group: Sequence[int]) -> list[int]:
    return [i for i, number in enumerate(points.condition.astype(int).tolist()) if number in group]


def _stress_scale(points: _Points) -> Scale:
    low, high = float((points.stress - 2 * points.u).min()), float((points.stress + 2 * points.u).max())
    room = max(high - low, 1e-6)
    return scale(max(low - 0.08 * room, 0.0), high + 0.08 * room, 6)


def _over_rate(material: Material, strain: float) -> Markup:
    points = _points(material, strain)
    groups = [one for one in material.temperature_groups() if _rows_of(points, one)][:_MOST_GROUPS]
    marks = [_mark(f"{_kelvin(material, group)} K", place) for place, group in enumerate(groups)]
    decades = np.log10(points.rate)

    def draw() -> Sketch:
        sketch = Sketch(2.6, marks)
        axes = sketch.panel()
        for mark, group in zip(marks, groups, strict=True):
            here = _rows_of(points, group)
            _draw_bars(axes, decades, points, here)
            axes.plot(decades[here], points.stress[here], **mark.style)
        sketch.frame(
            axes, _decade_scale(decades), _stress_scale(points), "true strain rate (1/s)", "true stress (MPa)"
        )
        return sketch

    said = []
    for group in groups:
        here = sorted(_rows_of(points, group), key=lambda i: points.rate[i])
        ends = dict.fromkeys((here[0], here[-1]))
        values = " to ".join(
            f"{rounded(points.stress[i])} MPa at {rate_text(points.rate[i])} /s" for i in ends
        )
        said.append(f"{_kelvin(material, group)} K: {values}")
    return figure(
        draw,
        prefix=_prefix(material, "rate"),
        title=f"{material.name}: stress over rate at plastic strain {strain:g}",
        description=f"{'; '.join(said)}. Bars: k = 2.",
    )


def _decade_scale(decades: FloatArray) -> Scale:
    """A scale of decades whose ticks are read as rates."""
    low, high = float(decades.min()) - 0.3, float(decades.max()) + 0.3
    whole = np.arange(np.ceil(low), np.floor(high) + 1)
    step = max(-(-whole.size // 6), 1)
    return _Decades(low, high, tuple(whole[::step].tolist()))


class _Decades(Scale):
    @property
    def labels(self) -> tuple[str, ...]:
        """Powers of ten, written out."""
        return tuple(rate_text(10.0**tick) if -4 <= tick < 6 else f"1e{tick:.0f}" for tick in self.ticks)


def _over_temperature(material: Material, strain: float) -> Markup:
    points = _points(material, strain)
    groups = [one for one in material.rate_groups() if len(_rows_of(points, one)) > 0][:_MOST_GROUPS]

    def name(group: Sequence[int]) -> str:
        rates = [float(material.conditions[i]["mean_rate"]) for i in group]
        return f"{' to '.join(dict.fromkeys(map(rate_text, (min(rates), max(rates)))))} /s"

    marks = [_mark(name(group), place) for place, group in enumerate(groups)]

    def draw() -> Sketch:
        sketch = Sketch(2.6, marks)
        axes = sketch.panel()
        for mark, group in zip(marks, groups, strict=True):
            here = sorted(_rows_of(points, group), key=lambda i: points.kelvin[i])
            axes.plot(points.kelvin[here], points.stress[here], color=FAINT, linewidth=0.7)
            _draw_bars(axes, points.kelvin, points, here)
            axes.plot(points.kelvin[here], points.stress[here], **mark.style)
        low, high = float(points.kelvin.min()), float(points.kelvin.max())
        room = max(high - low, 20.0)
        x_scale = scale(low - 0.06 * room, high + 0.06 * room, 6)
        sketch.frame(axes, x_scale, _stress_scale(points), "temperature (K)", "true stress (MPa)")
        return sketch

    said = []
    for mark, group in zip(marks, groups, strict=True):
        here = sorted(_rows_of(points, group), key=lambda i: points.kelvin[i])
        ends = dict.fromkeys((here[0], here[-1]))
        values = " to ".join(f"{rounded(points.stress[i])} MPa at {points.kelvin[i]:.0f} K" for i in ends)
        said.append(f"{mark.name}: {values}")
    return figure(
        draw,
        prefix=_prefix(material, "temperature"),
        title=f"{material.name}: stress over temperature at plastic strain {strain:g}",
        description=f"{'; '.join(said)}. Bars: k = 2.",
    )


def _left_over(material: Material, key: str) -> Markup:
    base = f"laws/{key}/points"
    rate = np.log10(material[f"{base}/rate"])
    left = 100 * (material[f"{base}/stress"] / material[f"{base}/law_stress"] - 1)
    groups = [g for g in material.temperature_groups() if np.isin(material[f"{base}/condition"], g).any()]
    groups = groups[:_MOST_GROUPS]
    marks = [_mark(f"{_kelvin(material, group)} K", place) for place, group in enumerate(groups)]

    def draw() -> Sketch:
        sketch = Sketch(2.6, marks)
        axes = sketch.panel()
        axes.axhline(0.0, color=FAINT, linewidth=0.8)
        for mark, group in zip(marks, groups, strict=True):
            here = np.isin(material[f"{base}/condition"], group)
            axes.plot(rate[here], left[here], **mark.style)
        far = max(1.1 * float(np.abs(left).max()), 0.1)
        y_scale = scale(-far, far, 5)
        sketch.frame(axes, _decade_scale(rate), y_scale, "true strain rate (1/s)", "measured less law (%)")
        return sketch

    name = str(material.facts(f"laws/{key}")["name"])
    words = (
        f"{left.size} points; root mean square {rounded(float(np.sqrt((left**2).mean())), 2)} %, greatest "
        f"{rounded(float(np.abs(left).max()), 2)} % of the law's stress."
    )
    return figure(
        draw,
        prefix=_prefix(material, "law"),
        title=f"{material.name}: what {name} leaves over",
        description=words,
    )
