"""The strain side of the figure: the curve and the strain rate, in grey where nothing counts."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from shpb.arrays import FloatArray
from shpb.reduction import ShotResult
from shpb.settings import Analysis
from shpb.view.ink import BAND, DARK, DASHES, DOTS, FAINT, INK, MIDDLE, SMALL, Line, Scale, envelope, scale
from shpb.view.page import frame

if TYPE_CHECKING:
    from matplotlib.axes import Axes

NOT_COUNTING = Line("not counted", FAINT, (), 0.8)
ANALYSES = (Line("one-wave", DARK), Line("three-wave", MIDDLE, DASHES))


def analysis_lines(result: ShotResult) -> tuple[Line, ...]:
    """One-wave and three-wave, the one put forward in a broader line, and the grey of what does not count."""
    first = result.response.analysis is Analysis.ONE_WAVE
    chosen = (first, not first)
    looks = tuple(
        Line(look.name + (" (put forward)" if put else ""), look.colour, look.dashes, 1.5 if put else 1.0)
        for look, put in zip(ANALYSES, chosen, strict=True)
    )
    return (*looks, NOT_COUNTING)


def strain_scale(result: ShotResult) -> Scale:
    """The common strain axis of curve and rate."""
    part = _drawn(result)
    response = result.response
    highest = max(float(curve.true_strain[part].max()) for curve in (response.one_wave, response.three_wave))
    highest = max(highest, 1e-4)
    return scale(-0.03 * highest, 1.12 * highest, 6)


def draw_curve(axes: Axes, result: ShotResult) -> None:
    """True stress against true strain: in ink where it counts, in grey before and after."""
    response = result.response
    part = _drawn(result)
    curves = (response.one_wave, response.three_wave)
    stresses = [(curve.true_strain, curve.true_stress_pa * 1e-6) for curve in curves]
    _draw_band(axes, result)
    _draw_counting(axes, result, stresses)
    highest = max(float(stress[part].max()) for _, stress in stresses)
    lowest = min(0.0, *(float(stress[part].min()) for _, stress in stresses))
    room = max(highest - lowest, 1e-6)
    _draw_flow(axes, result)
    if response.span is None:
        axes.text(0.5, 0.12, "no part of this curve counts", fontsize=10, fontweight="bold", parse_math=False,
                  transform=axes.transAxes, horizontalalignment="center",
                  bbox={"facecolor": "white", "edgecolor": INK, "linewidth": 0.7, "pad": 4})  # fmt: skip
    frame(axes, strain_scale(result), scale(lowest - 0.03 * room, highest + 0.06 * room, 6), "",
           "true stress (MPa)")  # fmt: skip


def _draw_band(axes: Axes, result: ShotResult) -> None:
    """Interval of about 95 % of the curve put forward where it counts: by the draws, else k = 2."""
    response, draws = result.response, result.draws
    if response.span is None:
        return
    index = np.arange(*response.span)[:: max((response.span[1] - response.span[0]) // 200, 1)]
    curve = response.curve
    strain = np.maximum.accumulate(curve.true_strain[index])
    if draws is None:
        low, high = result.budget.interval("true_stress", curve.true_stress_pa)
        said = "band: stress, k = 2"
    else:
        low, high = draws.of("low", "true_stress"), draws.of("high", "true_stress")
        said = f"band: stress, {100 * draws.probability:.0f} % of {draws.draws} draws"
    axes.fill_between(strain, 1e-6 * low[index], 1e-6 * high[index], color=BAND, linewidth=0, zorder=0.5)
    axes.text(0.05, 0.94, said, fontsize=SMALL, parse_math=False, transform=axes.transAxes)


def draw_rate(axes: Axes, result: ShotResult) -> None:
    """Engineering strain rate against true strain, with the mean over what counts."""
    response = result.response
    part = _drawn(result)
    rates = [
        (curve.true_strain, curve.strain_rate_per_s) for curve in (response.one_wave, response.three_wave)
    ]
    _draw_counting(axes, result, rates)
    ends = response.curve.true_strain[[*(response.span or response.loading)] - np.array([0, 1])]
    mean = response.rate.mean_per_s
    axes.plot(ends, [mean, mean], label="mean", color=INK, linewidth=0.9, linestyle=(0, DOTS))
    highest = max(float(rate[part].max()) for _, rate in rates)
    frame(axes, strain_scale(result), scale(-0.04 * highest, 1.12 * highest, 4), "true strain",
           "strain rate (1/s)")  # fmt: skip


def _drawn(result: ShotResult) -> slice:
    """Samples of the curve that are drawn: the loading and a third of its length after it."""
    first, last = result.response.loading
    return slice(first, min(last + (last - first) // 3, result.response.time_s.size))


def _draw_counting(axes: Axes, result: ShotResult, pairs: list[tuple[FloatArray, FloatArray]]) -> None:
    part, span = _drawn(result), result.response.span
    looks = analysis_lines(result)[:2]
    pieces: list[tuple[slice, bool]] = [(part, False)] if span is None else [
        (slice(part.start, span[0] + 1), False), (slice(span[1] - 1, part.stop), False), (slice(*span), True)
    ]  # fmt: skip
    for piece, counts in pieces:
        for (x, y), look in zip(pairs, looks, strict=True):
            if piece.stop - piece.start < 2:
                continue
            picked = piece.start + envelope(y[piece])
            style = look if counts else look.greyed()
            axes.plot(x[picked], y[picked], label=look.name if counts else f"{look.name}, not counting",
                      **style.style)  # fmt: skip


def _draw_flow(axes: Axes, result: ShotResult) -> None:
    """Flow stresses read off the curve put forward, each with its value below."""
    modulus = result.sheet.specimen.young_modulus_pa
    known = [flow for flow in result.response.flow if flow.stress_pa is not None]
    if not known:
        return
    x = [
        f.at_strain + (f.stress_pa / modulus if f.plastic and modulus and f.stress_pa else 0.0) for f in known
    ]
    y = [f.stress_pa * 1e-6 for f in known if f.stress_pa is not None]
    axes.plot(
        x, y, label="flow stress", linestyle="none", marker="o", markersize=4.5, markerfacecolor="white",
        markeredgecolor=INK, markeredgewidth=0.9, zorder=5,
    )  # fmt: skip
    for strain, stress in zip(x, y, strict=True):
        axes.annotate(
            f"{stress:.0f}", (strain, stress), (0, -11), textcoords="offset points", fontsize=SMALL,
            horizontalalignment="center", verticalalignment="top", parse_math=False,
        )  # fmt: skip
    kind = "plastic strain" if known[0].plastic else "total strain"
    listed = ", ".join(f"{f.at_strain:g}" for f in known)
    axes.text(0.09, 0.05, f"circles: flow stress (MPa) at true {kind} {listed}", fontsize=SMALL,
              parse_math=False, transform=axes.transAxes)  # fmt: skip
