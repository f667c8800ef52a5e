"""Panels of a calibration's page: phase speed over frequency, the striker's line, the sources of a sensitivity."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from shpb.calibrate.bars.bar_constants import BarFit
from shpb.calibrate.propagation.complex_propagation import MeasuredPropagation
from shpb.calibrate.sensitivity.reconcile import Reconciled, SourceLine
from shpb.calibrate.sensitivity.striker_line import StrikerLine
from shpb.view.calibrated import short_name
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.ink import BAND, BODY, DARK, DASHES, FAINT, INK, MIDDLE, SMALL, Scale, scale
from shpb.view.page import Page, frame

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Place = tuple[float, float, float, float]  # left, bottom, width, height of the whole panel [in]
_K = 2.0


def _titled(page: Page, place: Place, title: str, said: str, *, below: float = 0.42) -> Place:
    """Set title and a line of text; what is left for the axes."""
    x, y, width, height = place
    top = y + height
    page.text(x, top - 0.14, page.fitted(page.safe(title), BODY + 0.5, width, bold=True), fontsize=BODY + 0.5,
              fontweight="bold")  # fmt: skip
    page.paragraph(x, top - 0.28, page.safe(said), width=width, most=2, size=SMALL)
    return x + 0.52, y + below, width - 0.55, height - 0.50 - below


def _padded(values: Sequence[float] | np.ndarray, share: float = 0.08, about: int = 5) -> Scale:
    low, high = float(np.min(values)), float(np.max(values))
    room = share * (high - low) or abs(high) * share or 1.0
    return scale(low - room, high + room, about)


# --- the striker's line ---------------------------------------------------------------------------------------------


def line_panel(page: Page, line: StrikerLine, place: Place) -> None:
    """Stated strain over the expected one above, what is left of the line below."""
    name = line.station.replace("_", " ")
    tests = line.tests
    said = f"q {line.q:.4f}, u {100 * line.u_q / line.q:.2f} %"
    if line.momentum is not None:
        said += f"; by momentum {line.momentum.value:.4f}, u {100 * line.u_momentum:.2f} %"
    if tests.intercept is not None and tests.u_intercept is not None:
        said += f"; intercept {1e6 * tests.intercept:+.1f} microstrain, u {1e6 * tests.u_intercept:.1f}"
    x, y, width, height = _titled(page, place, f"Striker line, {name}", said)
    low = 0.36 * height
    above = page.axes(x, y + low + 0.12, width, height - low - 0.12)
    below = page.axes(x, y, width, low - 0.12)
    expected = np.array([point.expected for point in line.points]) * 1e6
    stated = np.array([point.stated for point in line.points]) * 1e6
    across = scale(0.0, float(expected.max()) * 1.08, 6)
    frame(above, across, scale(0.0, float(stated.max()) * 1.1, 5), "", "by gauge, microstrain")
    above.plot(across.low + (across.high - across.low) * np.array([0, 1]), np.array([across.low, across.high]) / line.q,
               color=DARK, linewidth=1.0)  # fmt: skip
    above.plot(expected, stated, linestyle="none", marker="o", markersize=4, color=DARK)
    left = 100 * np.asarray(tests.residuals)
    u = 100 * _K * np.array([point.u_stated / point.expected for point in line.points])
    reach = 1.2 * float((np.abs(left) + u).max())
    frame(
        below,
        across,
        scale(-reach, reach, 4),
        "expected from the striker's speed, microstrain",
        "off the line, %",
    )
    below.axhline(0.0, color=FAINT, linewidth=0.6)
    below.errorbar(expected, left, yerr=u, fmt="o", color=DARK, markersize=3.5, elinewidth=0.9, capsize=2.5)


# --- sources of a sensitivity ---------------------------------------------------------------------------------------


def sources_panel(page: Page, found: Reconciled, place: Place) -> None:
    """Every source of every station as a point with its uncertainty, the reconciled value as a line."""
    stations = list(found.q)
    rows = [one for name in stations for one in found.sources if one.station == name]
    x, y, width, height = place
    said = "filled: takes part; open: left out; grey: its uncertainty is assumed. Line and band: reconciled"
    title = "q, true by stated strain per volt, % from 1"
    page.text(x, y + height - 0.14, title, fontsize=BODY + 0.5, fontweight="bold")
    page.paragraph(x, y + height - 0.28, said, width=width, most=2, size=SMALL)
    names = 0.46 * width
    count = len(rows) + len(stations)
    bottom, top = y + 0.4, y + height - 0.46
    step = min((top - bottom) / max(count, 1), 0.3)
    bottom = top - count * step
    axes = page.axes(x + names, bottom, width - names - 0.05, top - bottom)
    ends = [_off(one) + side * _K * 100 * one.u for one in rows if not one.left_out for side in (-1, 1)]
    across = _padded([*ends, 0.0], 0.05, 4)
    axes.set_xlim(across.low, across.high)
    axes.set_xticks(across.ticks, across.labels)
    axes.set_ylim(0, count)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.axvline(0.0, color=FAINT, linewidth=0.6)
    level = float(count)
    for name in stations:
        level -= 1
        mine = [one for one in rows if one.station == name]
        q, u = 100 * (float(found.q[name]) - 1), 100 * _K * float(found.q[name].u or 0.0)
        label = f"{name.replace('_', ' ')}: {q:+.2f} %, u {u / _K:.2f} %"
        page.text(x, bottom + (level + 0.35) * step, page.fitted(label, BODY, width, bold=True), fontsize=BODY,
                  fontweight="bold")  # fmt: skip
        axes.fill_between([q - u, q + u], level - len(mine), level, color=BAND, linewidth=0, zorder=0)
        axes.plot([q, q], [level - len(mine), level], color=DARK, linewidth=1.2, zorder=1)
        for one in mine:
            level -= 1
            _source(axes, one, level, across)
            text = page.fitted(page.safe(short_name(one)), SMALL, names - 0.1)
            page.text(x, bottom + (level + 0.35) * step, text, fontsize=SMALL)


def _off(one: SourceLine) -> float:
    return 100 * (one.q - 1)


def _source(axes: Axes, one: SourceLine, level: float, across: Scale) -> None:
    value, colour = _off(one), FAINT if one.assumed else INK
    if not across.low <= value <= across.high:
        edge = across.low if value < across.low else across.high
        axes.plot([edge], [level + 0.5], marker="<" if value < across.low else ">", markersize=5, color=MIDDLE,
                  clip_on=False)  # fmt: skip
        side = "left" if value < across.low else "right"
        axes.text(edge, level + 0.5, f"  {value:+.1f} %  ", fontsize=SMALL, verticalalignment="center",
                  horizontalalignment=side)  # fmt: skip
        return
    axes.errorbar(
        [value], [level + 0.5], xerr=[_K * 100 * one.u], fmt="o", color=colour, markersize=4, elinewidth=1.0,
        capsize=2.5, markerfacecolor="white" if one.left_out else colour,
    )  # fmt: skip


# --- bars -----------------------------------------------------------------------------------------------------------


def speed_panel(page: Page, one: BarFit, place: Place) -> None:
    """Phase speed between passages, frequency by frequency, and the first mode that was fitted."""
    c0, nu = one.wave_speed_m_s, one.poisson_ratio
    said = f"c0 {to_uncertainty(c0, c0.u)} m/s, u {uncertainty(c0.u)}; "
    said += (
        f"nu {to_uncertainty(nu, nu.u)}, u {uncertainty(nu.u)}; " if nu is not None else "nu not determined; "
    )
    said += f"{one.passages} passages, {one.band_hz[0] / 1e3:.3g} to {one.band_hz[1] / 1e3:.3g} kHz; "
    said += "dots: by frequency; line: first mode; dashed: c0"
    x, y, width, height = _titled(page, place, f"Phase speed, {one.bar} bar", said)
    axes = page.axes(x, y, width, height)
    f, speed = np.asarray(one.frequency_hz) / 1e3, np.asarray(one.phase_speed_m_s)
    fitted, u = np.asarray(one.fitted_m_s), _K * np.asarray(one.u_phase_speed_m_s)
    # A frequency that says little must not set the scale.
    near = u < 10 * float(np.median(u))
    vertical = _padded(np.concatenate([fitted, (speed - u)[near], (speed + u)[near], [float(c0)]]))
    frame(axes, scale(0.0, float(f.max()) * 1.03, 6), vertical, "frequency, kHz", "phase speed, m/s")
    axes.axhline(float(c0), color=FAINT, linewidth=0.8, linestyle=(0, DASHES))
    axes.errorbar(f[near], speed[near], yerr=u[near], fmt=".", color=MIDDLE, markersize=3, elinewidth=0.7)
    axes.plot(f, fitted, color=DARK, linewidth=1.1)


def propagation_panels(page: Page, one: MeasuredPropagation, place: Place) -> None:
    """Phase speed above, attenuation below, each frequency and the smooth table."""
    loss = to_uncertainty(one.loss_tangent, one.u_loss_tangent)
    said = f"loss tangent {loss}, u {uncertainty(one.u_loss_tangent)}; dots: each frequency; "
    said += "line and band: the table, k = 2"
    x, y, width, height = _titled(page, place, f"Propagation, {one.bar} bar", said)
    half = 0.5 * height
    f = np.asarray(one.frequency_hz) / 1e3
    table = np.asarray(one.table.frequency_hz) / 1e3
    across = scale(0.0, float(max(f.max(), table.max())) * 1.03, 6)
    columns = (
        ("phase speed, m/s", one.phase_speed_m_s, one.table.phase_speed_m_s, one.table.u_phase_speed_m_s),
        (
            "attenuation, Np/m",
            one.attenuation_per_m,
            one.table.attenuation_per_m,
            one.table.u_attenuation_per_m,
        ),
    )
    for number, (label, points, curve, u) in enumerate(columns):
        axes = page.axes(x, y + (1 - number) * (half + 0.06), width, half - 0.06)
        smooth, wide = np.asarray(curve), _K * np.asarray(u)
        vertical = _padded(np.concatenate([smooth - 1.5 * wide, smooth + 1.5 * wide]))
        frame(axes, across, vertical, "frequency, kHz" if number else "", label)
        axes.fill_between(table, smooth - wide, smooth + wide, color=BAND, linewidth=0)
        axes.plot(f, points, linestyle="none", marker=".", markersize=2.5, color=FAINT)
        axes.plot(table, smooth, color=DARK, linewidth=1.1)
