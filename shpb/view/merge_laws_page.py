"""Fitted laws of a merged material: what each leaves over by condition, and how the best law's parameters correlate."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from shpb.merge.campaign import Merged, MergedMaterial, NotFitted
from shpb.merge.model_fit import ConditionResidual, ModelFit, ParameterEstimate, Standing
from shpb.view.ink import BODY, DARK, FAINT, INK, SHADE, SMALL, scale
from shpb.view.merge_labels import listed, rate_words, with_u
from shpb.view.merge_pages import (
    LEFT,
    RIGHT,
    Look,
    Sample,
    best_fit,
    header,
    in_words,
    key,
    note,
    range_key,
    spread_over,
)
from shpb.view.page import Page, frame
from shpb.view.text import rounded

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.colors import Colormap

_MOST_LAWS, _MOST_ROWS = 4, 32
_TOP, _BOTTOM = 6.22, 1.22  # of the panels of residuals [in]
_NAMES, _RESIDUALS_RIGHT = 1.25, 7.25  # where the panels begin and end [in]
_TALLEST, _WIDEST, _PANEL_GAP = 0.30, 2.4, 0.16  # row of a condition, panel, between panels [in]
_MATRIX, _CELL = 7.95, 0.46  # [in]
_NOT_ASKED = "not asked for"  # why no condition was left out where nobody wanted it
_LEFT_OUT: dict[str, Any] = {
    "color": INK,
    "linestyle": "none",
    "marker": "x",
    "markersize": 4.0,
    "markeredgewidth": 0.9,
}
_RMS: dict[str, Any] = {"color": INK, "linewidth": 0.8}


def laws_page(page: Page, merged: Merged, material: MergedMaterial) -> None:
    """Draw the page."""
    sentence = (
        "What each fitted law leaves over by condition: measured less law, relative to the law. Of laws with as many "
        "conditions the lowest AICc is the best. Two parameters with a correlation near +1 or −1 the points tell only "
        "together."
    )
    header(page, merged, material, "laws", sentence)
    best = best_fit(material)
    if best is None:
        _no_law(page, material)
        return
    means = [sample._replace(words=f"{sample.words}: mean residual") for sample in range_key(material)]
    predicted = Sample("root mean square when left out and predicted", _LEFT_OUT)
    key(page, [*means, Sample("± root mean square", _RMS), predicted])
    _residuals(page, material)
    bottom = _matrix(page, best)
    _estimates(page, best, bottom)
    note(page, _note(material, best), most=5)


# --- residuals -----------------------------------------------------------------------------------------


def _residuals(page: Page, material: MergedMaterial) -> None:
    fits = material.fits[:_MOST_LAWS]
    # Laws that know no temperature are fitted to fewer conditions than the others.
    named = {one.condition: one for fit in reversed(fits) for one in fit.conditions}
    every = sorted(named)
    chosen = [every[k] for k in spread_over(len(every), _MOST_ROWS)]
    height = min((_TOP - _BOTTOM) / len(chosen), _TALLEST)
    left = LEFT + _NAMES
    width = min((_RESIDUALS_RIGHT - left + _PANEL_GAP) / len(fits) - _PANEL_GAP, _WIDEST)
    for number, condition in enumerate(chosen):
        one = named[condition]
        y = _TOP - (number + 0.5) * height - 0.3 * SMALL / 72
        words = f"{rate_words(one.rate_per_s)}, {one.temperature_k:.0f} K"
        page.text(left - 0.08, y, words, fontsize=SMALL, horizontalalignment="right")
    for place, fit in enumerate(fits):
        x = left + place * (width + _PANEL_GAP)
        axes = page.axes(x, _TOP - height * len(chosen), width, height * len(chosen))
        _draw_residuals(axes, material, [one for one in fit.conditions if one.condition in chosen], chosen)
        _law_heading(page, fit, x, width)


def _law_heading(page: Page, fit: ModelFit, x: float, width: float) -> None:
    """Name of a law above its panel, and how well it does."""
    count = len(fit.points.conditions)
    words = (_left_out_words(fit), _aicc_words(fit), f"{count} condition{'s' * (count != 1)} fitted")
    for number, said in enumerate(reversed(words)):
        page.text(x, _TOP + 0.07 + 0.13 * number, page.fitted(said, SMALL, width), fontsize=SMALL)
    # Bold letters are broader by about an eighth.
    name = page.wrapped(page.safe(fit.model.name), BODY, 0.87 * width)[:2]
    for number, line in enumerate(reversed(name)):
        page.text(x, _TOP + 0.48 + 0.14 * number, line, fontsize=BODY, fontweight="bold")


def _left_out_words(fit: ModelFit) -> str:
    return "left out: not known" if fit.left_out_rms is None else f"left out: {100 * fit.left_out_rms:.2f} %"


def _aicc_words(fit: ModelFit) -> str:
    return "AICc: not known" if fit.aicc is None else f"AICc {fit.aicc:.1f}".replace("-", "−")


def _draw_residuals(
    axes: Axes, material: MergedMaterial, found: list[ConditionResidual], chosen: list[int]
) -> None:
    """A row for each condition: the mean, the root mean square to both sides, and that of its prediction."""
    largest = 100 * max(max(one.rms, abs(one.mean), one.left_out_rms or 0.0) for one in found)
    largest = max(largest, 1e-3)
    for number in range(0, len(chosen), 2):
        axes.axhspan(number - 0.5, number + 0.5, color=SHADE, linewidth=0, zorder=0)
    x = scale(-1.12 * largest, 1.12 * largest, 5 if axes.get_position().width > 0.12 else 3)
    frame(axes, x, scale(-0.5, len(chosen) - 0.5, 2), "residual (%)", "")
    axes.set_ylim(len(chosen) - 0.5, -0.5)
    axes.set_yticks([])
    axes.plot([0.0, 0.0], [-0.5, len(chosen) - 0.5], label="_zero", color=FAINT, linewidth=0.6, zorder=1)
    for one in found:
        row = chosen.index(one.condition)
        look = Look(material.conditions[one.condition].range, ())
        axes.plot([-100 * one.rms, 100 * one.rms], [row, row], label="rms", zorder=2, **_RMS)
        axes.plot(100 * one.mean, row, label="mean", zorder=3, **look.marker)
        if one.left_out_rms is not None:
            axes.plot(100 * one.left_out_rms, row, label="left out", zorder=2.5, **_LEFT_OUT)


# --- parameters ----------------------------------------------------------------------------------------


def _matrix(page: Page, fit: ModelFit) -> float:
    """Correlation of the fitted parameters, numbers in the cells; return where it ends below [in]."""
    page.text(_MATRIX, _TOP + 0.28, page.fitted(f"{fit.model.name}: correlation", BODY, 3.4, bold=True),
              fontsize=BODY, fontweight="bold")  # fmt: skip
    fitted = [k for k, one in enumerate(fit.estimates) if one.standing is Standing.FITTED]
    if len(fitted) < 2:
        page.text(_MATRIX, _TOP - 0.1, "fewer than two parameters are fitted", fontsize=BODY)
        return _TOP - 0.3
    names = [fit.estimates[k].name for k in fitted]
    beside = max(page.width_of(name, BODY) for name in names) + 0.1
    cell = min(_CELL, (RIGHT - _MATRIX - beside) / len(fitted))
    size = cell * len(fitted)
    axes = page.axes(_MATRIX + beside, _TOP - 0.02 - size, size, size)
    correlation = fit.correlation[np.ix_(fitted, fitted)]
    axes.set_xlim(-0.5, len(fitted) - 0.5)
    axes.set_ylim(len(fitted) - 0.5, -0.5)
    axes.set_xticks([])
    axes.set_yticks([])
    axes.set_axis_off()
    axes.imshow(
        np.abs(correlation), cmap=_greys(), vmin=0.0, vmax=1.0, aspect="auto", interpolation="nearest"
    )
    for row, column in np.ndindex(correlation.shape):
        value = float(correlation[row, column])
        said = "1" if row == column else f"{round(value, 2) + 0.0:+.2f}".replace("-", "−")
        axes.text(column, row, said, fontsize=SMALL, horizontalalignment="center", verticalalignment="center",
                  parse_math=False, color="white" if abs(value) > 0.45 else INK)  # fmt: skip
    for k, name in enumerate(names):
        y = _TOP - 0.02 - (k + 0.5) * cell - 0.3 * BODY / 72
        page.text(_MATRIX + beside - 0.06, y, name, fontsize=BODY, horizontalalignment="right")
        page.text(
            _MATRIX + beside + (k + 0.5) * cell,
            _TOP + 0.05,
            name,
            fontsize=BODY,
            horizontalalignment="center",
        )
    return _TOP - size - 0.02


def _greys() -> Colormap:
    """From white for no correlation to the page's dark for a full one."""
    from matplotlib.colors import LinearSegmentedColormap

    return LinearSegmentedColormap.from_list("correlation", ["white", DARK])


def _estimates(page: Page, fit: ModelFit, top: float) -> None:
    """Every parameter with its interval, or why it has none, and what the law takes as known."""
    y = top - 0.25
    page.text(_MATRIX, y, "parameters with their 95 % intervals", fontsize=BODY, fontweight="bold")
    y -= 0.16
    for one in fit.estimates:
        y = page.paragraph(_MATRIX, y, page.safe(_estimate_words(one)), width=RIGHT - _MATRIX, most=2)
    facts = fit.model.known_facts()
    for fact in fit.model.facts:
        said = f"known: {fact.meaning}, {facts[fact.name]:g} {fact.unit}"
        y = page.paragraph(_MATRIX, y, page.safe(said), width=RIGHT - _MATRIX, most=2)


def _estimate_words(one: ParameterEstimate) -> str:
    factor, unit = (1e-6, " MPa") if one.unit == "Pa" else (1.0, "" if one.unit == "1" else f" {one.unit}")
    if one.value is None:
        return f"{one.name}: not determined: {one.reason}"
    if one.standing is Standing.FIXED:
        return f"{one.name} = {rounded(one.value * factor)}{unit}, {one.reason}"
    if one.u is None or one.low is None or one.high is None:
        return f"{one.name}: {one.reason}"
    return f"{one.name} = {with_u(one.value, one.u, (one.low, one.high), factor)}{unit}"


# --- words ---------------------------------------------------------------------------------------------


def _first_sentence(one: NotFitted) -> str:
    """Why a law was not fitted, without its own name, so that laws with one reason can be said together."""
    why = one.why.removeprefix("points: ").removeprefix(f"{one.model.key}: ")
    return why.replace(one.model.name, "the law").split(". ")[0].rstrip(".")


def _not_fitted(material: MergedMaterial) -> list[str]:
    by_reason: dict[str, list[str]] = {}
    for one in material.not_fitted:
        by_reason.setdefault(_first_sentence(one), []).append(one.model.name)
    return [f"{', '.join(names)}: {why}" for why, names in by_reason.items()]


def _no_law(page: Page, material: MergedMaterial) -> None:
    reasons = _not_fitted(material)
    if not reasons:
        in_words(page, "No law was asked for.")
        return
    y = 6.6
    page.text(1.2, y, "No law was fitted, so there are no residuals and no parameters to show.", fontsize=10)
    y -= 0.3
    for reason in reasons:
        y = page.paragraph(1.2, y, page.safe(reason) + ".", width=9.2, most=3, size=BODY + 1) - 0.08
        if y < 1.0:
            break


def _note(material: MergedMaterial, best: ModelFit) -> str:
    said = []
    if len(best.conditions) > _MOST_ROWS:
        said.append(f"{len(best.conditions) - _MOST_ROWS} more conditions are not drawn.")
    if len(material.fits) > _MOST_LAWS:
        said.append(f"Fitted, not drawn: {listed([f.model.name for f in material.fits[_MOST_LAWS:]])}.")
    alone = {one.left_out_reason for one in best.conditions if one.left_out_reason} - {_NOT_ASKED}
    if alone:
        said.append(f"{best.model.name}, not left out: {'; '.join(sorted(alone))}.")
    # What is said of a parameter alone stands beside it already.
    beside = {f"{one.name}: {one.reason}" for one in best.estimates}
    warnings = [warning for warning in best.warnings if warning not in beside]
    said += [f"{best.model.name}: {warning}." for warning in warnings[:2]]
    reasons = _not_fitted(material)
    if reasons:
        said.append(f"Not fitted: {'; '.join(reasons)}.")
    return " ".join(said)


__all__ = ["laws_page"]
