"""Stress against rate of a merged material: a panel for each temperature that has two rates, a line for each strain."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.merge.adiabatic import adiabatic_stress_pa
from shpb.merge.campaign import Merged, MergedMaterial, RateStudy
from shpb.merge.flow_table import FlowRow
from shpb.merge.material_curve import RateRange
from shpb.merge.model_fit import ModelFit
from shpb.merge.sensitivity import RangeSensitivities, RateSensitivity
from shpb.view.ink import BODY, DARK, DASH_DOT, DASHES, INK, LIGHT, MIDDLE, SHADE, SMALL, Scale
from shpb.view.merge_labels import kelvin_words, listed, plus_minus, rate_words
from shpb.view.merge_pages import (
    BAR_KEY,
    COVERAGE,
    LAW_LINE,
    Look,
    Sample,
    best_fit,
    fitted_to,
    header,
    in_words,
    key,
    law_words,
    note,
    on_path,
    range_key,
    spread_over,
    temperature_groups,
)
from shpb.view.merge_panels import Beside, beside, decades, error_bars, panel_grid, stress_scale
from shpb.view.page import Page, frame

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_MOST_PANELS, _MOST_STRAINS = 6, 5
_BESIDE = 2.08  # room for labels [in]
_COLOURS = (DARK, MIDDLE, LIGHT, DARK, MIDDLE)
_DASHES: tuple[tuple[float, ...], ...] = ((), DASHES, (), DASH_DOT, (2.6, 1.2))
_RATES = 7  # at which a law is asked in each range
_WIDE_GAP = 0.5  # decades without a test that are worth saying


class _Panel(NamedTuple):
    """One temperature: its conditions, and the studies of the strains that are drawn."""

    group: list[int]
    studies: list[RateStudy]


def rate_page(page: Page, merged: Merged, material: MergedMaterial) -> None:
    """Draw the page."""
    sentence = (
        "Mean true stress at chosen true plastic strains, which stand first at the right of each panel. "
        "m = d ln(stress)/d ln(rate), ± half its 95 % interval, is the slope of the line; it ends where the tests do."
    )
    header(page, merged, material, "stress against rate", sentence)
    panels, lone = _panels(merged, material)
    if not panels:
        in_words(page, _why_none(material, lone))
        return
    fit = best_fit(material)
    key(page, _key(material, fit, panels))
    shown = spread_over(len(panels), _MOST_PANELS)
    grid = panel_grid(len(shown), 1 if len(shown) == 1 else 2, _BESIDE)
    for (left, bottom), panel in zip(grid.corners, (panels[k] for k in shown), strict=True):
        axes = page.axes(left, bottom, grid.width, grid.height)
        kelvin = kelvin_words(float(np.mean([material.conditions[i].temperature_k for i in panel.group])))
        end = page.width_of(kelvin, BODY + 0.5, bold=True) + 0.15
        y = bottom + grid.height + 0.07
        page.text(left, y, kelvin, fontsize=BODY + 0.5, fontweight="bold")
        room = grid.width + _BESIDE - end
        page.text(left + end, y, page.fitted(_upturn_words(panel), SMALL, room), fontsize=SMALL)
        _panel(page, axes, material, panel, fit)
    note(page, _note(material, fit, lone, [panels[k] for k in range(len(panels)) if k not in shown]))


def _panels(merged: Merged, material: MergedMaterial) -> tuple[list[_Panel], list[list[int]]]:
    """Temperatures with a study, and those without."""
    panels, lone = [], []
    for group in temperature_groups(merged, material):
        kelvin = [material.conditions[i].temperature_k for i in group]
        inside = [r for r in material.rates if min(kelvin) - 1e-6 <= r.temperature_k <= max(kelvin) + 1e-6]
        if inside:
            panels.append(_Panel(group, [inside[k] for k in spread_over(len(inside), _MOST_STRAINS)]))
        else:
            lone.append(group)
    return panels, lone


def _rates_of(material: MergedMaterial, group: list[int]) -> str:
    conditions = [material.conditions[i] for i in group]
    rates = listed([rate_words(c.mean_rate_per_s) for c in conditions], 4)
    return f"{conditions[0].temperature_k:.0f} K: {rates}"


def _why_none(material: MergedMaterial, lone: list[list[int]]) -> str:
    found = "; ".join(_rates_of(material, group) for group in lone[:8])
    return (
        "There is no rate sensitivity to show: it takes two rates at one temperature, both valid at one of the chosen "
        f"plastic strains. There are {found}{'; and more temperatures' if len(lone) > 8 else ''}."
    )


def _key(material: MergedMaterial, fit: ModelFit | None, panels: list[_Panel]) -> list[Sample]:
    found = [*range_key(material, INK), *BAR_KEY, Sample("line of m", {"color": INK, "linewidth": 1.0})]
    if fit is not None:
        found.append(Sample(fit.model.name, LAW_LINE))
    if any(_gap([r for r in material.rows if r.condition in panel.group]) for panel in panels):
        found.append(Sample("no tests", None, SHADE))
    return found


def _upturn_words(panel: _Panel) -> str:
    """What is said of an upturn at high rates, strains with one answer together."""
    by_answer: dict[str, list[str]] = {}
    for study in panel.studies:
        by_answer.setdefault(study.upturn.outcome.value, []).append(f"{study.plastic_strain:g}")
    if len(by_answer) == 1:
        return f"high rates: {next(iter(by_answer))}"
    return "high rates: " + "; ".join(f"{a} at {', '.join(e)}" for a, e in by_answer.items())


def _line_of(sensitivities: RangeSensitivities) -> tuple[RateSensitivity | None, str]:
    """The sensitivity that is drawn, over all if it can be had, and what to call it."""
    for name, words in (("all", "m"), ("bar", "m (bars)"), ("quasi_static", "m (quasi-static)")):
        found: RateSensitivity | None = getattr(sensitivities, name)
        if found is not None:
            return found, words
    return None, ""


def _panel(page: Page, axes: Axes, material: MergedMaterial, panel: _Panel, fit: ModelFit | None) -> None:
    strains = [study.plastic_strain for study in panel.studies]
    rows = {
        e: [r for r in material.rows if r.condition in panel.group and r.plastic_strain == e] for e in strains
    }
    every = [row for part in rows.values() for row in part]
    ends = [v for r in every for v in (r.stress_pa - COVERAGE * r.u_pa, r.stress_pa + COVERAGE * r.u_pa)]
    x, words = decades([row.rate_per_s for row in every])
    frame(axes, x, stress_scale(np.array(ends) / 1e6, 5), "true strain rate (1/s)", "true stress (MPa)")
    axes.set_xticks(x.ticks, words)
    _shade_gap(axes, every, x)
    law = [] if fit is None else _law(material, panel, strains, fit)
    labels = []
    for number, study in enumerate(panel.studies):
        colour, dashes = _COLOURS[number], _DASHES[number]
        line = {"color": colour, "linestyle": (0, dashes) if dashes else "-", "linewidth": 1.0}
        part = rows[study.plastic_strain]
        _draw_points(axes, part, colour)
        _draw_law(axes, law, number)
        labels.append(_sensitivity(axes, study, line, part))
    beside(page, axes, labels, _BESIDE)


def _gap(rows: list[FlowRow]) -> tuple[float, float] | None:
    """Ends of the gap between the ranges in log10 rate; None where there is none worth saying."""
    slow = [np.log10(r.rate_per_s) for r in rows if r.range is RateRange.QUASI_STATIC]
    fast = [np.log10(r.rate_per_s) for r in rows if r.range is RateRange.BAR]
    if not slow or not fast or min(fast) - max(slow) < _WIDE_GAP:
        return None
    return float(max(slow)), float(min(fast))


def _shade_gap(axes: Axes, rows: list[FlowRow], x: Scale) -> None:
    """Shade the rates between the ranges at which nothing was tested."""
    gap = _gap(rows)
    if gap is not None:
        margin = 0.02 * (x.high - x.low)
        axes.axvspan(gap[0] + margin, gap[1] - margin, color=SHADE, linewidth=0, zorder=0.1)


def _draw_points(axes: Axes, rows: list[FlowRow], colour: str) -> None:
    for name in RateRange:
        part = [row for row in rows if row.range is name]
        if not part:
            continue
        x = np.log10([row.rate_per_s for row in part])
        stress, own, both = (
            np.array([getattr(row, field) for row in part]) / 1e6
            for field in ("stress_pa", "u_own_pa", "u_pa")
        )
        error_bars(axes, x, stress, own, both, colour)
        marker = {**Look(name, ()).marker, "markeredgecolor": colour}
        marker["markerfacecolor"] = colour if name is RateRange.BAR else "white"
        axes.plot(x, stress, label=f"{name.value} {part[0].plastic_strain:g}", **marker, zorder=3)


def _sensitivity(axes: Axes, study: RateStudy, line: dict[str, Any], rows: list[FlowRow]) -> Beside:
    """Draw the line of m over the rates it was fitted to; return its label."""
    found, name = _line_of(study.sensitivities)
    strain = f"{study.plastic_strain:g}"
    if found is None:
        last = max(rows, key=lambda row: row.rate_per_s)
        return Beside(
            last.stress_pa / 1e6, f"{strain}: {listed(sorted(study.sensitivities.reasons.values()), 1)}", line
        )
    logs = np.linspace(np.log10(found.rates_per_s[0]), np.log10(found.rates_per_s[1]), 30)
    stress = found.stress_pa(10**logs) / 1e6
    axes.plot(logs, stress, label=f"m {strain}", **line, zorder=2)
    low, high = found.exponent.interval
    said = plus_minus(found.exponent.value, (high - low) / 2)
    return Beside(float(stress[-1]), f"{strain}: {name} = {said}", line, float(logs[-1]))


def _law(
    material: MergedMaterial, panel: _Panel, strains: list[float], fit: ModelFit
) -> list[tuple[FloatArray, FloatArray]]:
    """The law within the tested rates of each range: log10 rates, and stress [MPa] of shape (rates, strains)."""
    found = []
    order = np.argsort(strains)
    asked = np.array(strains)[order]
    for name in RateRange:
        members = [
            material.conditions[i]
            for i in panel.group
            if material.conditions[i].range is name and fitted_to(fit, i)
        ]
        if not members:
            continue
        rates = [c.mean_rate_per_s for c in members]
        kelvin = float(np.mean([c.temperature_k for c in members]))
        heat = fit.points.heat_k_m3_j if all(on_path(fit, c) for c in members) else None
        logs = np.linspace(np.log10(min(rates)), np.log10(max(rates)), _RATES if len(members) > 1 else 1)
        try:
            stress = np.array([_at(fit, asked, float(10**log), kelvin, heat) for log in logs])
        except InputError:
            continue
        found.append((logs, stress[:, np.argsort(order)] / 1e6))
    return found


def _at(fit: ModelFit, strains: FloatArray, rate: float, kelvin: float, heat: float | None) -> FloatArray:
    if heat is None:
        return fit.model.stress_pa(fit.parameters, strains, rate, kelvin)
    return adiabatic_stress_pa(fit.model, fit.parameters, strains, rate, kelvin, heat)[0]


def _draw_law(axes: Axes, law: list[tuple[FloatArray, FloatArray]], number: int) -> None:
    for logs, stress in law:
        style = dict(LAW_LINE)
        if logs.size == 1:  # a dash where a range holds one rate
            style = {"color": INK, "linestyle": "none", "marker": "_", "markersize": 9.0}
        axes.plot(logs, stress[:, number], label="law", **style, zorder=2.2)


def _note(material: MergedMaterial, fit: ModelFit | None, lone: list[list[int]], hidden: list[_Panel]) -> str:
    said = [law_words(material, fit)]
    if lone:
        said.append(f"Without two rates: {listed([_rates_of(material, group) for group in lone], 4)}.")
    if hidden:
        kelvin = [f"{material.conditions[p.group[0]].temperature_k:.0f} K" for p in hidden]
        said.append(f"Not drawn: {listed(kelvin, 8)}.")
    most = max(len({r.plastic_strain for r in material.rates}), 0)
    if most > _MOST_STRAINS:
        said.append(f"{_MOST_STRAINS} of {most} plastic strains are drawn; the table holds all.")
    return " ".join(said)


__all__ = ["rate_page"]
