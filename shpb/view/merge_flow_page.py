"""Flow curves of a merged material: a panel for each temperature, with bands, repeats and the best law."""

from __future__ import annotations

import itertools
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.merge.campaign import Merged, MergedMaterial
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.merge.model_fit import FlowCurve, ModelFit
from shpb.merge.repeats import Repeats
from shpb.view.ink import BODY, FAINT, INK, Scale, scale
from shpb.view.merge_labels import kelvin_words, listed, rate_words
from shpb.view.merge_pages import (
    COVERAGE,
    LAW_LINE,
    TINTS,
    Look,
    Sample,
    best_fit,
    fitted_to,
    header,
    key,
    law_words,
    looks,
    note,
    on_path,
    spread_over,
    temperature_groups,
)
from shpb.view.merge_panels import LABEL_STEP, Beside, beside, panel_grid, stress_scale
from shpb.view.page import Page, frame

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_MOST_PANELS, _MOST_CURVES, _MOST_OUTLIERS = 6, 10, 3
_BESIDE = 1.28  # room for labels [in]
_WIDE = 0.08  # of the stress
_BEGINNING, _LEAST = (
    0.04,
    0.8,
)  # of the strain of a curve, and how far below what follows its first stress is shown
_GAP = 1.5  # steps of the grid beyond which a mean is broken


class _Panel(NamedTuple):
    """Conditions of one temperature: those drawn, and how many are not."""

    drawn: list[int]
    more: int


def flow_page(page: Page, merged: Merged, material: MergedMaterial) -> None:
    """Draw the page."""
    fit = best_fit(material)
    sentence = (
        "Mean of the repeats of each condition (n: how many) where they are valid. Dashes tell the rates of one range, "
        "slowest first; every line is named beside its panel by its mean rate. Each panel has a stress axis of its own."
    )
    header(page, merged, material, "flow curves", sentence)
    key(page, _key(material, fit))
    groups = temperature_groups(merged, material)
    shown = spread_over(len(groups), _MOST_PANELS)
    grid = panel_grid(len(shown), 3, _BESIDE)
    room = int(grid.height / LABEL_STEP)
    panels = [_chosen(material, groups[k], min(room, _MOST_CURVES)) for k in shown]
    styles = looks(material)
    strain = _strain_scale(material, [i for panel in panels for i in panel.drawn])
    for (left, bottom), panel in zip(grid.corners, panels, strict=True):
        axes = page.axes(left, bottom, grid.width, grid.height)
        kelvin = float(np.mean([material.conditions[i].temperature_k for i in panel.drawn]))
        heading = kelvin_words(kelvin) + (f", {panel.more} more conditions not drawn" if panel.more else "")
        page.text(left, bottom + grid.height + 0.07, heading, fontsize=BODY + 0.5, fontweight="bold")
        _panel(page, axes, material, panel, styles, fit, strain, room)
    note(page, _note(material, fit, [g for k, g in enumerate(groups) if k not in shown]))


def _chosen(material: MergedMaterial, group: list[int], most: int) -> _Panel:
    """At most ``most`` conditions of a temperature, spread over their rates."""
    by_rate = sorted(group, key=lambda i: material.conditions[i].mean_rate_per_s)
    drawn = [by_rate[k] for k in spread_over(len(by_rate), most)]
    return _Panel(drawn, len(group) - len(drawn))


def _key(material: MergedMaterial, fit: ModelFit | None) -> list[Sample]:
    present = dict.fromkeys(c.range for c in material.conditions)
    words = {RateRange.BAR: "bar", RateRange.QUASI_STATIC: "quasi-static"}
    found = [
        Sample(f"{words[name]}, band: own uncertainty of the mean, k = 2", Look(name, ()).line, TINTS[name])
        for name in present
    ]
    if any(np.ptp(c.count) for c in material.conditions):
        found.append(Sample("a repeat begins or ends", _end_mark(INK)))
    if any(c.outliers for c in material.conditions):
        found.append(Sample("outlying repeat, in the mean all the same", {"color": INK, "linewidth": 0.5}))
    if fit is not None:
        found.append(Sample(f"{fit.model.name}, grey outside its points", LAW_LINE))
    return found


def _end_mark(colour: str) -> dict[str, Any]:
    return {"color": colour, "linestyle": "none", "marker": "|", "markersize": 6.0, "markeredgewidth": 1.0}


def _strain_scale(material: MergedMaterial, drawn: list[int]) -> Scale:
    """Axis of plastic strain that all panels share."""
    return scale(0.0, 1.03 * max(float(material.conditions[i].plastic_strain[-1]) for i in drawn), 5)


def _stress_scale(material: MergedMaterial, drawn: list[int]) -> Scale:
    """Axis of stress that holds the means with their bands, and outlying repeats.

    Where a curve begins steeply, its first points and their wide band do not set the axis.
    """
    ends = []
    for condition in (material.conditions[i] for i in drawn):
        curves = [(condition.plastic_strain, condition.stress_pa)]
        curves += [(plastic, stress) for _, stress, plastic in _outlying(condition)]
        for strain, stress in curves:
            later = float(stress[strain >= strain[0] + _BEGINNING * (strain[-1] - strain[0])].min())
            ends += [max(float(stress.min()), _LEAST * later), float(stress.max())]
        half = np.minimum(COVERAGE * condition.u_own_pa, _WIDE * condition.stress_pa)
        ends.append(float((condition.stress_pa + half).max()))
    return stress_scale(np.array(ends) / 1e6)


def _panel(
    page: Page,
    axes: Axes,
    material: MergedMaterial,
    panel: _Panel,
    styles: list[Look],
    fit: ModelFit | None,
    strain: Scale,
    room: int,
) -> None:
    labels: list[Beside] = []
    named = 0
    frame(axes, strain, _stress_scale(material, panel.drawn), "true plastic strain", "true stress (MPa)")
    for i in panel.drawn:
        condition, look = material.conditions[i], styles[i]
        _draw_mean(axes, condition, look)
        if fit is not None and fitted_to(fit, i):
            _draw_law(axes, condition, fit)
        labels.append(
            Beside(
                float(condition.stress_pa[-1]) / 1e6,
                f"{rate_words(condition.mean_rate_per_s)}, {_counts(condition)}",
                look.line,
                float(condition.plastic_strain[-1]),
            )
        )
        for curve, stress, plastic in _outlying(condition):
            axes.plot(
                plastic, stress / 1e6, label=f"outlying {curve.origin}", color=look.colour, linewidth=0.5
            )
            if named < _MOST_OUTLIERS and len(panel.drawn) + named < room:
                thin = {"color": look.colour, "linewidth": 0.5}
                words = page.safe(curve.origin)
                labels.append(Beside(float(stress[-1]) / 1e6, words, thin, float(plastic[-1])))
                named += 1
    beside(page, axes, labels, _BESIDE)


def _counts(condition: Repeats) -> str:
    """How many repeats: "n 3", "n ≤ 3" where fewer are valid in places."""
    most = int(condition.count.max())
    return f"n {most}" if int(condition.count.min()) == most else f"n ≤ {most}"


def pieces(condition: Repeats) -> list[slice]:
    """Parts of the grid over which the same number of repeats is averaged without a gap."""
    strain = condition.plastic_strain
    if strain.size < 2:
        return [slice(0, strain.size)]
    step = float(np.median(np.diff(strain)))
    breaks = np.flatnonzero((np.diff(condition.count) != 0) | (np.diff(strain) > _GAP * step)) + 1
    ends = [0, *map(int, breaks), strain.size]
    return [slice(a, b) for a, b in itertools.pairwise(ends)]


def _draw_mean(axes: Axes, condition: Repeats, look: Look) -> None:
    strain, stress = condition.plastic_strain, condition.stress_pa / 1e6
    half = COVERAGE * condition.u_own_pa / 1e6
    parts = pieces(condition)
    for number, part in enumerate(parts):
        axes.fill_between(strain[part], (stress - half)[part], (stress + half)[part], color=TINTS[look.range],
                          linewidth=0, alpha=0.75, zorder=0.5)  # fmt: skip
        lone: dict[str, Any] = {"marker": "o", "markersize": 2.5} if part.stop - part.start == 1 else {}
        axes.plot(strain[part], stress[part], label="mean", **look.line, **lone, zorder=3)
        if number + 1 < len(parts):
            last = part.stop - 1
            axes.plot(strain[last], stress[last], label="_end", **_end_mark(look.colour), zorder=3.2)


def law_along(fit: ModelFit, condition: Repeats, strain: FloatArray) -> FlowCurve | None:
    """The law at the mean rate of a condition, on the path on which it was fitted; None where it has no value."""
    try:
        return fit.flow_curve(
            strain, condition.mean_rate_per_s, condition.temperature_k, adiabatic=on_path(fit, condition)
        )
    except InputError:
        return None


def _draw_law(axes: Axes, condition: Repeats, fit: ModelFit) -> None:
    ends = condition.plastic_strain[[0, -1]]
    curve = law_along(fit, condition, np.linspace(max(float(ends[0]), 0.0), float(ends[1]), 40))
    if curve is None:
        return
    outside = curve.extrapolated
    near = outside.copy()  # and the next point, so that the pieces join
    near[1:] |= outside[:-1]
    near[:-1] |= outside[1:]
    for part, colour, name in ((near, FAINT, "law, outside"), (~outside, INK, "law")):
        if part.any():
            values = np.where(part, curve.stress_pa / 1e6, np.nan)
            axes.plot(curve.plastic_strain, values, label=name, **{**LAW_LINE, "color": colour}, zorder=3.4)


def _outlying(condition: Repeats) -> list[tuple[MaterialCurve, FloatArray, FloatArray]]:
    """Outlying repeats with stress [Pa] and plastic strain inside their spans."""
    names = {name for one in condition.outliers for name in (one.origins or (one.origin,))}
    found = []
    for curve in condition.curves:
        if curve.origin in names:
            inside = (curve.plastic_strain >= curve.span[0]) & (curve.plastic_strain <= curve.span[1])
            if inside.any():
                found.append((curve, curve.stress_pa[inside], curve.plastic_strain[inside]))
    return found


def _note(material: MergedMaterial, fit: ModelFit | None, hidden: list[list[int]]) -> str:
    said = [law_words(material, fit)]
    odd = [
        f"{curve.origin} ({rate_words(condition.mean_rate_per_s)}, {condition.temperature_k:.0f} K)"
        for condition in material.conditions
        for curve, _, _ in _outlying(condition)
    ]
    if odd:
        said.append(f"Outlying: {listed(odd, 4)}.")
    if hidden:
        kelvin = [
            f"{np.mean([material.conditions[i].temperature_k for i in g]):.0f} K ({len(g)})" for g in hidden
        ]
        said.append(f"Not drawn, with their number of conditions: {listed(kelvin, 8)}.")
    return " ".join(said)


__all__ = ["flow_page", "law_along", "pieces"]
