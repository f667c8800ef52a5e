"""Stress against temperature of a merged material by rate, with minimum and peak, and the peak against the rate."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from shpb.merge.campaign import CourseAtRate, Merged, MergedMaterial, near_groups
from shpb.merge.flow_table import FlowRow
from shpb.merge.peak_shift import PeakShift
from shpb.merge.temperature import Extreme, Place
from shpb.view.ink import BODY, FAINT, INK, Scale, scale
from shpb.view.merge_labels import listed, rate_words, stress_words, with_u
from shpb.view.merge_pages import (
    BAR_KEY,
    COVERAGE,
    LEFT,
    RIGHT,
    Look,
    Sample,
    header,
    in_words,
    key,
    looks,
    note,
    range_key,
    spread_over,
)
from shpb.view.merge_panels import Beside, beside, decades, error_bars, stress_scale
from shpb.view.page import Page, frame

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_MOST_RATES = 8
_SAME_K = 3.0  # tests nearer than this are one point of a line, as they are of a course
_BESIDE = 0.98  # room for labels [in]
_PANEL_TOP, _TABLE_BOTTOM, _ROW, _BELOW_PANEL = 6.64, 0.80, 0.165, 0.68
_COLUMNS = (LEFT, LEFT + 0.95, LEFT + 3.95, LEFT + 6.95)
_HEADINGS = ("rate", "minimum", "peak", "what the points say")
_OPEN: dict[str, Any] = {
    "linestyle": "none",
    "markersize": 5.5,
    "markerfacecolor": "white",
    "markeredgewidth": 1.0,
}
_SHAPES = {"minimum": "v", "peak": "^"}
_BEYOND = {Place.AT_END: ">", Place.AT_START: "<"}


def temperature_page(page: Page, merged: Merged, material: MergedMaterial) -> None:
    """Draw the page."""
    strain = strain_of_courses(merged, material)
    courses = [c for c in material.courses if c.plastic_strain == strain]
    where = "" if strain is None else f" at true plastic strain {strain:g}"
    sentence = (
        f"Mean true stress{where} over the temperature at the start; lines only join the points of a rate. "
        "Minimum and peak are found without a law, where a rise is beyond the uncertainty."
    )
    header(page, merged, material, "stress against temperature", sentence)
    if strain is None:
        in_words(page, _why_none(material))
        return
    shown = [courses[k] for k in spread_over(len(courses), _MOST_RATES)]
    peaks = [c for c in shown if c.course is not None and c.course.rises]
    styles = looks(material)
    key(page, [*range_key(material), *BAR_KEY, *_extreme_key(shown)])
    width = 5.0 if peaks else 9.2
    table_top = _TABLE_BOTTOM + _ROW * len(shown)
    bottom = table_top + _BELOW_PANEL
    axes = page.axes(LEFT + 0.52, bottom, width, _PANEL_TOP - bottom)
    _courses(page, axes, material, shown, styles)
    if peaks:
        _peaks(page, page.axes(8.0, bottom, 3.0, _PANEL_TOP - bottom), material, peaks, styles)
    _table(page, shown, table_top)
    note(page, _note(material, strain, len(courses) - len(shown)))


def strain_of_courses(merged: Merged, material: MergedMaterial) -> float | None:
    """The plastic strain of the peak shift, else the second of those chosen that has a course; None if none has."""
    there = sorted({c.plastic_strain for c in material.courses})
    if not there:
        return None
    if material.shift is not None:
        for strain in there:
            if _rates_with_peak(material, strain) == material.shift.used:
                return strain
    second = merged.settings.strains[min(1, len(merged.settings.strains) - 1)]
    return second if second in there else there[min(1, len(there) - 1)]


def _rates_with_peak(material: MergedMaterial, strain: float) -> tuple[float, ...]:
    return tuple(
        sorted(
            c.rate_per_s
            for c in material.courses
            if c.plastic_strain == strain and c.course is not None and c.course.peak.place is Place.INSIDE
        )
    )


def _why_none(material: MergedMaterial) -> str:
    kelvin = sorted({round(c.temperature_k) for c in material.conditions})
    found = listed([f"{k} K" for k in kelvin], 8)
    if len(kelvin) == 1:
        return f"There is one temperature only, {found}: nothing can be said of how the stress depends on it."
    return (
        f"No rate has two temperatures at one of the chosen plastic strains (temperatures: {found}), so there is no "
        "course of the stress over temperature to show."
    )


def _extreme_key(courses: list[CourseAtRate]) -> list[Sample]:
    places = [
        (name, getattr(c.course, name).place)
        for c in courses
        if c.course is not None
        for name in ("peak", "minimum")
    ]
    found = [
        Sample(f"{name}, bar: its 95 % interval", {**_OPEN, "color": INK, "linestyle": "-", "linewidth": 0.8,
                                                   "marker": _SHAPES[name]})
        for name in ("peak", "minimum") if (name, Place.INSIDE) in places
    ]  # fmt: skip
    for place, words in (
        (Place.AT_END, "peak or minimum at or beyond the last temperature"),
        (Place.AT_START, "at or below the first temperature"),
    ):
        if any(one is place for _, one in places):
            found.append(Sample(words, {**_OPEN, "color": INK, "marker": _BEYOND[place]}))
    return found


# --- panels --------------------------------------------------------------------------------------------


def _rows(material: MergedMaterial, course: CourseAtRate) -> list[FlowRow]:
    found = [
        r
        for r in material.rows
        if r.condition in course.conditions and r.plastic_strain == course.plastic_strain
    ]
    return sorted(found, key=lambda row: row.temperature_k)


def _courses(
    page: Page, axes: Axes, material: MergedMaterial, courses: list[CourseAtRate], styles: list[Look]
) -> None:
    rows = [_rows(material, course) for course in courses]
    every = [row for part in rows for row in part]
    kelvin = [row.temperature_k for row in every]
    ends = [v for r in every for v in (r.stress_pa - COVERAGE * r.u_pa, r.stress_pa + COVERAGE * r.u_pa)]
    room = max(0.06 * (max(kelvin) - min(kelvin)), 5.0)
    x = scale(min(kelvin) - room, max(kelvin) + room, 8)
    frame(axes, x, stress_scale(np.array(ends) / 1e6, 8), "temperature at the start (K)", "true stress (MPa)")
    labels = []
    for course, part in zip(courses, rows, strict=True):
        look = styles[course.conditions[0]]
        t = np.array([row.temperature_k for row in part])
        s, own, both = (
            np.array([getattr(row, name) for row in part]) / 1e6 for name in ("stress_pa", "u_own_pa", "u_pa")
        )
        joined = np.array([(t[g].mean(), s[g].mean()) for g in near_groups(t.tolist(), _SAME_K)])
        axes.plot(*joined.T, label="_join", **{**look.line, "linewidth": 0.8}, zorder=2)
        error_bars(axes, t, s, own, both, look.colour)
        axes.plot(t, s, label=f"{course.rate_per_s:g}", **look.marker, zorder=3)
        if course.course is not None:
            for name in ("minimum", "peak"):
                _mark(axes, getattr(course.course, name), name, (t, s), look, 0.5 * room)
        labels.append(Beside(float(s[-1]), rate_words(course.rate_per_s), look.line, float(t[-1])))
    beside(page, axes, labels, _BESIDE)


def _mark(axes: Axes, extreme: Extreme, name: str, points: tuple[Any, Any], look: Look, aside: float) -> None:
    """Mark a minimum or a peak: with its interval where it is bracketed, beside the outermost point where not."""
    t, s = points
    style = {**_OPEN, "markeredgecolor": look.colour, "label": name, "zorder": 4}
    if extreme.temperature_k is not None and extreme.stress_pa is not None and extreme.interval_k is not None:
        low, high = extreme.interval_k
        at = extreme.stress_pa / 1e6
        axes.plot(
            [low, high], [at, at], label=f"_{name} interval", color=look.colour, linewidth=0.8, zorder=3.8
        )
        axes.plot(extreme.temperature_k, at, marker=_SHAPES[name], **style)
    elif extreme.place in _BEYOND:
        at_end = extreme.place is Place.AT_END
        place, value = (t[-1] + aside, s[-1]) if at_end else (t[0] - aside, s[0])
        axes.plot(place, value, marker=_BEYOND[extreme.place], **style)


def _peaks(
    page: Page, axes: Axes, material: MergedMaterial, courses: list[CourseAtRate], styles: list[Look]
) -> None:
    """Temperature of the peak against the rate."""
    x, words = decades([c.rate_per_s for c in courses])
    found: list[float] = []
    for course in courses:
        assert course.course is not None  # only those with a rise come here
        peak = course.course.peak
        found += [*(peak.interval_k or ()), _end_of(course)]
    y = scale(min(found) - 15.0, max(found) + 15.0, 6)
    frame(axes, x, y, "true strain rate (1/s)", "temperature of the peak (K)")
    axes.set_xticks(x.ticks, words)
    for course in courses:
        assert course.course is not None
        peak, look, log = course.course.peak, styles[course.conditions[0]], float(np.log10(course.rate_per_s))
        style = {**_OPEN, "markeredgecolor": look.colour, "zorder": 4}
        if peak.temperature_k is not None and peak.interval_k is not None:
            axes.plot([log, log], peak.interval_k, label="_peak interval", color=look.colour, linewidth=0.9)
            axes.plot(log, peak.temperature_k, label="peak", **{**style, "marker": look.marker["marker"]})
        else:
            mark = "^" if peak.place is Place.AT_END else "v"
            axes.plot(log, _end_of(course), label="peak beyond", marker=mark, **style)
    if material.shift is not None:
        _shift_line(axes, material.shift, courses, x)
    box = axes.get_position()
    left, top = box.x0 * page.figure.bbox_inches.width, box.y1 * page.figure.bbox_inches.height
    page.text(left, top + 0.07, _shift_words(material), fontsize=BODY)


def _end_of(course: CourseAtRate) -> float:
    """Temperature of the peak; where it is not bracketed the end at or beyond which it lies."""
    assert course.course is not None
    peak = course.course.peak
    if peak.temperature_k is not None:
        return peak.temperature_k
    return float(course.course.temperature_k[-1 if peak.place is Place.AT_END else 0])


def _shift_line(axes: Axes, shift: PeakShift, courses: list[CourseAtRate], x: Scale) -> None:
    """The weighted line of the peaks: through their weighted middle, over the rates that it was fitted to."""
    held = [
        (np.log10(c.rate_per_s), c.course.peak.temperature_k, c.course.peak.u_temperature_k)
        for c in courses if c.course is not None and c.course.peak.place is Place.INSIDE
    ]  # fmt: skip
    log, kelvin, u = (np.array(v, dtype=float) for v in zip(*held, strict=True))
    middle, height = np.average(log, weights=u**-2), np.average(kelvin, weights=u**-2)
    ends = np.clip(np.log10([min(shift.used), max(shift.used)]), x.low, x.high)
    line = height + shift.kelvin_per_decade.value * (ends - middle)
    axes.plot(ends, line, label="shift", color=FAINT, linewidth=1.0, zorder=1.5)


def _shift_words(material: MergedMaterial) -> str:
    if material.shift is None:
        return "no line of the peak over the rate"
    slope = material.shift.kelvin_per_decade
    return f"line: {with_u(slope.value, slope.u, slope.interval)} K per decade"


# --- words ---------------------------------------------------------------------------------------------


def _table(page: Page, courses: list[CourseAtRate], top: float) -> None:
    for x, words in zip(_COLUMNS, _HEADINGS, strict=True):
        page.text(x, top, words, fontsize=BODY, fontweight="bold")
    page.rule(LEFT, top - 0.05, RIGHT - LEFT)
    ends = [*_COLUMNS[1:], RIGHT]
    for number, course in enumerate(courses):
        y = top - (number + 1) * _ROW - 0.02
        said = course.course
        cells = [rate_words(course.rate_per_s), "", "", f"{course.why_not or 'few points'}: too few to tell"]
        if said is not None:
            cells[1:] = [_extreme_words(said.minimum), _extreme_words(said.peak), said.reason]
        for x, end, words in zip(_COLUMNS, ends, cells, strict=True):
            page.text(x, y, page.fitted(page.safe(words), BODY, end - x - 0.12), fontsize=BODY)


def _extreme_words(extreme: Extreme) -> str:
    if extreme.temperature_k is None or extreme.u_temperature_k is None or extreme.interval_k is None:
        return extreme.place.value
    kelvin = with_u(extreme.temperature_k, max(extreme.u_temperature_k, 10.0), extreme.interval_k)
    return f"{kelvin} K, {stress_words(extreme.stress_pa or 0.0)}"


def _note(material: MergedMaterial, strain: float, more: int) -> str:
    said = []
    if more > 0:
        said.append(f"{more} more rates are not drawn.")
    in_course = {i for c in material.courses if c.plastic_strain == strain for i in c.conditions}
    lone = [
        rate_words(r.rate_per_s)
        for r in material.rows
        if r.plastic_strain == strain and r.condition not in in_course
    ]
    if lone:
        said.append(f"One temperature only, not drawn: {listed(lone, 6)}.")
    if material.shift is None:
        said.append(f"No shift of a peak with the rate: {material.why_no_shift}.")
    else:
        energy = material.shift.activation_energy_j_per_mol
        said.append(
            "The peak does not move up with the rate, so there is no activation energy."
            if energy is None
            else f"Activation energy of the peak {with_u(energy.value, energy.u, energy.interval, 1e-3)} kJ/mol."
        )
    return " ".join(said)


__all__ = ["strain_of_courses", "temperature_page"]
