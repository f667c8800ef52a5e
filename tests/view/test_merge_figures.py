"""The figures of a merge: what is drawn is what was merged, nothing overlaps, empty cases are said in words."""

from __future__ import annotations

import itertools
import re
import subprocess
import sys
import xml.etree.ElementTree as ET
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure

from shpb.errors import InputError
from shpb.merge import campaign
from shpb.merge.campaign import Merged, MergedMaterial
from shpb.merge.from_shot import LeftOut
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.merge.models.registry import model_named
from shpb.merge.repeats import RepeatSettings, average_repeats, group_repeats
from shpb.merge.settings import NO_MODELS, MergeSettings
from shpb.merge.temperature import Place
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind
from shpb.rig.sheet import Specimen
from shpb.view.merge_figures import PAGES, material_stems, merge_figure, save_merge_figures
from shpb.view.merge_labels import in_signs, plus_minus, rate_words, with_u
from shpb.view.merge_pages import TINTS, Look, looks
from shpb.view.merge_panels import decades, spread

Stress = Callable[
    [np.ndarray, float, np.ndarray], np.ndarray
]  # of plastic strain, rate [1/s], temperature [K]

NASTY = "a$x^2$ [/x] \x1b[2J <b>&amp; \u202e$"
QUASI_STATIC, BAR = RateRange.QUASI_STATIC, RateRange.BAR
DENSITY, HEAT_CAPACITY, SHARE = 2700.0, 900.0, 0.9
MELTING_K = 1350.0
M_PLANTED = -0.0123
SLOPE_K, PEAK_K = 25.0, 700.0  # of the peak per decade of rate, and where it is at 0.001 /s


def softening(strain: np.ndarray, rate: float, kelvin: np.ndarray) -> np.ndarray:
    """Johnson-Cook with invented constants (G. R. Johnson, W. H. Cook, 7th Int. Symp. on Ballistics, 1983)."""
    cold = (100e6 + 270e6 * strain**0.5) * (1 + 0.012 * np.log(rate))
    return np.asarray(cold * (1 - np.clip((kelvin - 293.15) / (MELTING_K - 293.15), 0, 1)))


def power_of_rate(strain: np.ndarray, rate: float, kelvin: np.ndarray) -> np.ndarray:
    return np.asarray((300e6 + 400e6 * strain) * rate**M_PLANTED + 0.0 * kelvin)


def with_peak(strain: np.ndarray, rate: float, kelvin: np.ndarray) -> np.ndarray:
    """A parabola over temperature whose vertex moves up with the rate."""
    vertex = PEAK_K + SLOPE_K * np.log10(rate / 1e-3)
    return np.asarray(500e6 + 300e6 * strain + 4e6 * np.log10(rate) - 1500.0 * (kelvin - vertex) ** 2)


def curve(
    law: Stress,
    rate: float,
    kelvin: float,
    name: str,
    *,
    factor: float = 1.0,
    end: float = 0.2,
    material: str = "Tarnwick 2",
    heated: bool = True,
) -> MaterialCurve:
    """A test on a law; a bar shot along its own heated path, by small steps."""
    strain = np.linspace(0.005, 0.24, 236)
    kind = BAR if rate > 10 else QUASI_STATIC
    rise = np.zeros(strain.size)
    if kind is BAR and heated:
        for k in range(1, strain.size):
            stress = float(law(strain[k : k + 1], rate, np.array([kelvin + rise[k - 1]]))[0])
            rise[k] = rise[k - 1] + SHARE / (DENSITY * HEAT_CAPACITY) * stress * (strain[k] - strain[k - 1])
    stress = factor * law(strain, rate, kelvin + rise)
    return MaterialCurve(
        plastic_strain=strain,
        stress_pa=stress,
        rate_per_s=np.full(strain.size, rate),
        temperature_k=kelvin,
        temperature_rise_k=rise if kind is BAR and heated else None,
        u_own_pa=0.004 * stress,
        u_shared=0.01 if kind is BAR else 0.006,
        shared_group="rig" if kind is BAR else "machine",
        span=(0.01, end),
        range=kind,
        material=material,
        kind=TestKind.COMPRESSION,
        origin=name,
    )


def merged_of(curves: list[MaterialCurve], **choices: Any) -> Merged:
    """Merge curves as they are, without files."""
    settings = MergeSettings(
        **{"strains": (0.02, 0.05, 0.1), "models": NO_MODELS, "leave_out": False, **choices}
    )
    specimen = Specimen(
        material="any", diameter_m=Quantity(8e-3), length_m=Quantity(6e-3), density_kg_m3=Quantity(DENSITY),
        heat_capacity_j_kg_k=Quantity(HEAT_CAPACITY), heat_share=Quantity(SHARE),
        melting_temperature_k=Quantity(MELTING_K),
    )  # fmt: skip
    groups: dict[tuple[str, str], list[Any]] = {}
    for group in group_repeats(curves, RepeatSettings()):
        mean = average_repeats(group, RepeatSettings())
        groups.setdefault((mean.material, mean.kind.value), []).append(mean)
    models = [] if settings.models == NO_MODELS else [model_named(key) for key in settings.models]
    materials = [
        campaign._material(tuple(g), [specimen], models, settings, lambda: None) for g in groups.values()
    ]
    left_out = (LeftOut(origin="bad.h5", why="rejected: clipping"),)
    return Merged(settings=settings, materials=tuple(materials), curves=tuple(curves), left_out=left_out)


def cross(
    law: Stress, rates: tuple[float, ...], kelvins: tuple[float, ...], **choices: Any
) -> list[MaterialCurve]:
    return [curve(law, r, t, f"{r:g}-{t:.0f}", **choices) for t in kelvins for r in rates]


def _softening() -> Merged:
    curves = cross(softening, (1e-3, 1e-1, 900.0, 2500.0), (293.15, 473.15, 673.15))
    curves += [
        curve(softening, 900.0, 293.15, "shorter", factor=1.003, end=0.15),
        curve(softening, 900.0, 293.15, "third", factor=0.997),
        curve(softening, 900.0, 293.15, "odd one.h5", factor=0.93),
    ]
    return merged_of(curves, models=("johnson-cook", "zerilli-armstrong-fcc", "hollomon"), leave_out=True)


def _peak() -> Merged:
    rates = (1e-3, 1e-1, 1e3)
    curves = cross(with_peak, rates, (300.0, 500.0, 600.0, 700.0, 800.0, 900.0, 1000.0), heated=False)
    curves += [curve(with_peak, 3e3, t, f"end {t:g}", heated=False) for t in (293.0, 500.0, 650.0)]
    return merged_of(curves, models=("johnson-cook", "hollomon", "mechanical-threshold"))


def _nasty() -> Merged:
    curves = [
        curve(softening, r, t, f"{NASTY}{r:g}", material=NASTY) for r in (1e-3, 1e3) for t in (293.0, 500.0)
    ]
    curves += [
        curve(softening, 1e3, 293.0, f"{NASTY} {k}", factor=f, material=NASTY)
        for k, f in enumerate((1.0, 1.0, 0.8))
    ]
    return merged_of(curves, models=("johnson-cook", "ludwik"))


def _crowded() -> Merged:
    rates = (*np.geomspace(1e-4, 1.0, 9), *np.geomspace(300, 6000, 6))
    kelvins = tuple(np.linspace(250.0, 1000.0, 10))
    strains = tuple(np.round(np.linspace(0.02, 0.18, 9), 3))
    return merged_of(cross(softening, rates, kelvins, heated=False, material="x" * 300), strains=strains)


SORTS: dict[str, Callable[[], Merged]] = {
    "softening": _softening,
    "peak": _peak,
    "nasty names": _nasty,
    "crowded": _crowded,
    "one rate": lambda: merged_of(
        cross(softening, (1e-3,), (293.0, 473.0)), models=("johnson-cook", "swift")
    ),
    "one temperature": lambda: merged_of(
        cross(power_of_rate, (1e-3, 1e-1, 900.0, 2500.0), (293.0,), heated=False),
        models=("mechanical-threshold",),
    ),
    "one test": lambda: merged_of([curve(softening, 1e3, 293.0, "only")], strains=(0.5,), models=("ludwik",)),
    "bars only": lambda: merged_of(cross(softening, (800.0, 3000.0), (293.0, 473.0))),
}


@pytest.fixture(scope="module")
def merges() -> dict[str, Merged]:
    return {sort: make() for sort, make in SORTS.items()}


@pytest.fixture(scope="module")
def figures(merges: dict[str, Merged]) -> dict[tuple[str, str], Figure]:
    drawn = {}
    for sort, merged in merges.items():
        for name in PAGES:
            figure = merge_figure(merged, merged.materials[0], name)
            FigureCanvasAgg(figure).draw()
            drawn[sort, name] = figure
    return drawn


def texts(figure: Figure) -> list[Any]:
    found = [*figure.texts]
    for axes in figure.axes:
        found += [
            *axes.texts,
            axes.xaxis.label,
            axes.yaxis.label,
            *axes.get_xticklabels(),
            *axes.get_yticklabels(),
        ]
    return [
        text
        for text in found
        if text.get_text().strip() and text.get_visible() and (text.axes is None or text.axes.axison)
    ]


def words(figure: Figure) -> str:
    return " ".join(" ".join(text.get_text() for text in figure.texts).split())


def lines(axes: Any, label: str) -> list[Any]:
    return [line for line in axes.lines if line.get_label() == label]


def panel(figure: Figure, heading: str) -> Any:
    """The axes below the heading that begins so."""
    text = next(t for t in figure.texts if t.get_text().startswith(heading) and t.get_fontweight() == "bold")
    x, y = text.get_position()
    return next(
        a for a in figure.axes if abs(a.get_position().x0 - x) < 1e-6 and 0 < y - a.get_position().y1 < 0.02
    )


# --- flow curves -----------------------------------------------------------------------------------


def test_axes_name_their_quantity_and_unit(figures: dict[tuple[str, str], Figure]) -> None:
    expected = {
        "flow_curves": {("true plastic strain", "true stress (MPa)")},
        "stress_against_rate": {("true strain rate (1/s)", "true stress (MPa)")},
        "stress_against_temperature": {
            ("temperature at the start (K)", "true stress (MPa)"),
            ("true strain rate (1/s)", "temperature of the peak (K)"),
        },
    }
    for name, labels in expected.items():
        found = {(a.get_xlabel(), a.get_ylabel()) for a in figures["peak", name].axes}
        assert found == labels
    laws = [a.get_xlabel() for a in figures["softening", "laws"].axes if a.axison]
    assert laws == ["residual (%)"] * 3


def test_flow_curves_are_the_means_with_their_own_bands(
    merges: dict[str, Merged], figures: dict[tuple[str, str], Figure]
) -> None:
    material = merges["softening"].materials[0]
    for kelvin in ("293 K", "473 K", "673 K"):
        axes = panel(figures["softening", "flow_curves"], kelvin)
        drawn = np.concatenate([line.get_xydata() for line in lines(axes, "mean")])
        members = [c for c in material.conditions if f"{c.temperature_k:.0f} K" == kelvin]
        expected = np.concatenate([np.column_stack((c.plastic_strain, c.stress_pa / 1e6)) for c in members])
        np.testing.assert_allclose(np.sort(drawn, axis=0), np.sort(expected, axis=0), rtol=1e-12)
        assert len(members) == 4
        band = np.concatenate([b.get_paths()[0].vertices for b in axes.collections])
        for condition in members:
            for sign in (-1, 1):  # k = 2: about 95 %
                edge = (condition.stress_pa[50] + sign * 2 * condition.u_own_pa[50]) / 1e6
                assert np.abs(band - [condition.plastic_strain[50], edge]).max(axis=1).min() < 1e-9


def test_where_the_mean_loses_a_repeat_is_marked(figures: dict[tuple[str, str], Figure]) -> None:
    figure = figures["softening", "flow_curves"]
    marks = lines(panel(figure, "293 K"), "_end")
    assert [float(m.get_xdata()[0]) for m in marks] == pytest.approx([0.15])  # the shorter one ends there
    assert not lines(panel(figure, "473 K"), "_end")
    said = words(figure)
    assert "900 /s, n ≤ 4" in said
    assert "2500 /s, n 1" in said
    assert "a repeat begins or ends" in said


def test_an_outlying_repeat_is_thin_named_and_inside_its_span(figures: dict[tuple[str, str], Figure]) -> None:
    figure = figures["softening", "flow_curves"]
    (line,) = lines(panel(figure, "293 K"), "outlying odd one.h5")
    strain = line.get_xdata()
    assert strain.min() >= 0.01
    assert strain.max() <= 0.2
    truth = 0.93 * softening(strain[:1], 900.0, np.array([293.15])) / 1e6
    assert line.get_ydata()[0] == pytest.approx(truth[0], rel=2e-3)
    assert line.get_linewidth() < 0.6
    assert "odd one.h5" in words(figure)
    assert "Outlying: odd one.h5 (900 /s, 293 K)." in words(figure)


def test_the_law_follows_the_planted_truth_along_its_own_path(figures: dict[tuple[str, str], Figure]) -> None:
    axes = panel(figures["softening", "flow_curves"], "473 K")
    drawn = lines(axes, "law")
    assert len(drawn) == 4
    truths = {r: curve(softening, r, 473.15, "t") for r in (1e-3, 1e-1, 900.0, 2500.0)}
    for line, truth in zip(drawn, truths.values(), strict=True):
        inside = np.isfinite(line.get_ydata())
        strain, stress = line.get_xdata()[inside], line.get_ydata()[inside]
        # Johnson-Cook fitted to itself; heating alone lowers the end of a bar curve by 0.6 %.
        np.testing.assert_allclose(
            stress, np.interp(strain, truth.plastic_strain, truth.stress_pa) / 1e6, rtol=2e-3
        )
        assert strain.min() >= 0.02 * (
            1 - 1e-9
        )  # what lies outside the fitted strains is another line, in grey
        assert strain.max() <= 0.1 * (1 + 1e-9)
    outside = lines(axes, "law, outside")
    assert len(outside) == 4
    assert np.nanmax(outside[0].get_xdata()[np.isfinite(outside[0].get_ydata())]) == pytest.approx(0.2)


def test_a_law_is_drawn_only_where_it_was_fitted(figures: dict[tuple[str, str], Figure]) -> None:
    figure = figures["peak", "flow_curves"]
    drawn = [len(lines(axes, "law")) for axes in figure.axes]
    assert sum(n > 0 for n in drawn) == 1  # a law without rate and temperature is fitted to one condition
    assert "Hollomon: fitted to 1 of 24 conditions and drawn there" in words(figure)


def test_what_does_not_fit_on_the_page_is_said(figures: dict[tuple[str, str], Figure]) -> None:
    figure = figures["crowded", "flow_curves"]
    assert len(figure.axes) == 6
    assert words(figure).count("5 more conditions not drawn") == 6
    assert re.search(r"Not drawn, with their number of conditions: 333 K \(15\), 500 K \(15\)", words(figure))
    rates = figures["crowded", "stress_against_rate"]
    assert len(rates.axes) == 6
    assert "5 of 9 plastic strains are drawn" in words(rates)
    assert re.search(r"Not drawn: 333 K, 500 K", words(rates))
    assert "7 more rates are not drawn" in words(figures["crowded", "stress_against_temperature"])


# --- stress against rate ---------------------------------------------------------------------------


def test_points_over_rate_are_the_rows_of_the_table(
    merges: dict[str, Merged], figures: dict[tuple[str, str], Figure]
) -> None:
    material = merges["softening"].materials[0]
    seen = 0
    for kelvin in (293.15, 473.15, 673.15):
        axes = panel(figures["softening", "stress_against_rate"], f"{kelvin:.0f} K")
        for strain, name in itertools.product((0.02, 0.05, 0.1), RateRange):
            rows = [
                r for r in material.rows
                if r.plastic_strain == strain and r.range is name and abs(r.temperature_k - kelvin) < 1
            ]  # fmt: skip
            (line,) = lines(axes, f"{name.value} {strain:g}")
            expected = sorted((np.log10(r.rate_per_s), r.stress_pa / 1e6) for r in rows)
            np.testing.assert_allclose(sorted(map(tuple, line.get_xydata())), expected, rtol=1e-12)
            assert line.get_marker() == ("o" if name is BAR else "s")
            seen += len(rows)
            # Bars of two standard uncertainties: own (thick) and with what is shared (thin).
            ends = {tuple(np.round(s[:, 1], 6)) for c in axes.collections for s in c.get_segments()}
            for row in rows:
                for u in (row.u_own_pa, row.u_pa):
                    assert (
                        tuple(np.round([(row.stress_pa - 2 * u) / 1e6, (row.stress_pa + 2 * u) / 1e6], 6))
                        in ends
                    )
    assert seen == len(material.rows) == 36


def test_the_line_of_m_is_the_planted_one_and_ends_with_the_tests(
    figures: dict[tuple[str, str], Figure],
) -> None:
    figure = figures["one temperature", "stress_against_rate"]
    for strain in (0.02, 0.05, 0.1):
        (line,) = lines(figure.axes[0], f"m {strain:g}")
        log, stress = line.get_xdata(), np.log10(line.get_ydata())
        assert (log[0], log[-1]) == pytest.approx((-3, np.log10(2500)))
        # A power law of the rate: its exponent everywhere.
        np.testing.assert_allclose(np.diff(stress) / np.diff(log), M_PLANTED, rtol=1e-6)
        assert f"{strain:g}: m = −0.0123 ± 0.00" in words(figure)


def test_the_gap_between_the_ranges_is_shaded(figures: dict[tuple[str, str], Figure]) -> None:
    (axes,) = figures["one temperature", "stress_against_rate"].axes
    (shade,) = axes.patches
    low, high = shade.get_x(), shade.get_x() + shade.get_width()
    assert -1 < low < -0.7  # just beyond 0.1 /s
    assert np.log10(900) - 0.3 < high < np.log10(900)
    assert not figures["bars only", "stress_against_rate"].axes[0].patches
    assert "no tests" in words(figures["one temperature", "stress_against_rate"])
    assert "no tests" not in words(figures["bars only", "stress_against_rate"])


def test_law_over_rate_is_isothermal_for_slow_and_heated_for_bars(
    figures: dict[tuple[str, str], Figure],
) -> None:
    axes = panel(figures["softening", "stress_against_rate"], "473 K")
    law = lines(axes, "law")
    assert len(law) == 6  # three strains, two ranges
    for number, strain in enumerate((0.02, 0.05, 0.1)):
        for line, rate in zip(law[2 * number : 2 * number + 2], (1e-1, 900.0), strict=True):
            where = np.argmin(np.abs(line.get_xdata() - np.log10(rate)))
            assert line.get_xdata()[where] == pytest.approx(np.log10(rate), abs=1e-6)
            truth = curve(softening, rate, 473.15, "t")
            expected = float(np.interp(strain, truth.plastic_strain, truth.stress_pa)) / 1e6
            assert line.get_ydata()[where] == pytest.approx(expected, rel=2e-3)


def test_each_axis_of_rates_has_ticks_in_plain_letters() -> None:
    assert decades([1e-4, 3e3])[1] == ("10⁻⁴", "10⁻³", "10⁻²", "10⁻¹", "10⁰", "10¹", "10²", "10³")
    assert decades([1e-6, 1e6])[1] == ("10⁻⁶", "10⁻⁴", "10⁻²", "10⁰", "10²", "10⁴", "10⁶")
    assert decades([800.0, 3000.0])[1] == ("1000", "2000")
    rng = np.random.default_rng(2)
    for low, span in zip(rng.uniform(-6, 4, 200), rng.uniform(0, 9, 200), strict=True):
        ticks, labels = decades([10**low, 10 ** (low + span)])
        assert len(labels) == len(ticks.ticks)
        assert 1 <= len(labels) <= 9
        assert all(ticks.low <= t <= ticks.high for t in ticks.ticks)


# --- stress against temperature --------------------------------------------------------------------


def test_points_over_temperature_are_the_rows_of_the_table(
    merges: dict[str, Merged], figures: dict[tuple[str, str], Figure]
) -> None:
    material = merges["softening"].materials[0]
    (axes,) = figures["softening", "stress_against_temperature"].axes
    drawn = np.concatenate(
        [
            line.get_xydata()
            for line in axes.lines
            if not line.get_label().startswith("_") and line.get_marker() in "so"
        ]
    )
    rows = [r for r in material.rows if r.plastic_strain == 0.05]  # the second of those chosen
    np.testing.assert_allclose(
        sorted(map(tuple, drawn)), sorted((r.temperature_k, r.stress_pa / 1e6) for r in rows), rtol=1e-12
    )
    assert "at true plastic strain 0.05" in words(figures["softening", "stress_against_temperature"])
    assert "No shift of a peak with the rate" in words(figures["softening", "stress_against_temperature"])


def test_peaks_are_the_planted_ones_with_their_intervals(
    merges: dict[str, Merged], figures: dict[tuple[str, str], Figure]
) -> None:
    figure = figures["peak", "stress_against_temperature"]
    material = merges["peak"].materials[0]
    axes, peaks = figure.axes
    found = sorted(float(m.get_xdata()[0]) for m in lines(axes, "peak") if m.get_marker() == "^")
    planted = [PEAK_K + SLOPE_K * d for d in (0, 2, 6)]
    assert found == pytest.approx(planted, abs=1.0)  # a parabola through three points of a parabola
    points = np.array([m.get_xydata()[0] for m in lines(peaks, "peak")])
    np.testing.assert_allclose(points, [(-3, planted[0]), (-1, planted[1]), (3, planted[2])], atol=1.0)
    (line,) = lines(peaks, "shift")
    (x0, y0), (x1, y1) = line.get_xydata()
    assert (y1 - y0) / (x1 - x0) == pytest.approx(SLOPE_K, abs=0.3)
    assert y0 == pytest.approx(planted[0], abs=1.0)
    assert material.shift is not None
    for one in lines(axes, "_peak interval"):
        low, high = one.get_xdata()
        assert low < high
        assert any(c.course and c.course.peak.interval_k == (low, high) for c in material.courses)
    assert re.search(r"line: 2[45]\.?\d* \(.* to .*\) K per decade", words(figure))


def test_a_peak_that_is_not_bracketed_is_said_and_marked_beyond_the_last_point(
    merges: dict[str, Merged], figures: dict[tuple[str, str], Figure]
) -> None:
    figure = figures["peak", "stress_against_temperature"]
    strain = merges["peak"].materials[0].courses[0].plastic_strain
    last = next(
        c for c in merges["peak"].materials[0].courses if c.rate_per_s > 2e3 and c.plastic_strain == strain
    )
    assert last.course is not None
    assert last.course.peak.place is Place.AT_END
    beyond = [m for m in lines(figure.axes[0], "peak") if m.get_marker() == ">"]
    assert len(beyond) == 1
    assert 650 < float(beyond[0].get_xdata()[0]) < 720
    assert "3000 /s" in words(figure)
    assert "at or beyond the last temperature" in words(figure)
    (mark,) = lines(figure.axes[1], "peak beyond")
    assert mark.get_xydata()[0] == pytest.approx((np.log10(3000), 650.0))


# --- laws ------------------------------------------------------------------------------------------


def test_residuals_are_those_of_the_fits(
    merges: dict[str, Merged], figures: dict[tuple[str, str], Figure]
) -> None:
    figure = figures["softening", "laws"]
    material = merges["softening"].materials[0]
    assert len(material.fits) == 3
    rows = sorted({c.condition for fit in material.fits for c in fit.conditions})
    for axes, fit in zip([a for a in figure.axes if a.axison], material.fits, strict=True):
        for label, values in (
            ("mean", [(100 * c.mean, rows.index(c.condition)) for c in fit.conditions]),
            (
                "left out",
                [
                    (100 * c.left_out_rms, rows.index(c.condition))
                    for c in fit.conditions
                    if c.left_out_rms is not None
                ],
            ),
            ("rms", [(-100 * c.rms, rows.index(c.condition)) for c in fit.conditions]),
        ):
            drawn = [tuple(line.get_xydata()[0]) for line in lines(axes, label)]
            np.testing.assert_allclose(sorted(drawn), sorted(values), rtol=1e-12)
        low, high = axes.get_xlim()
        assert all(low < x < high for line in axes.lines for x in line.get_xdata())
    assert f"left out: {100 * (material.fits[0].left_out_rms or 0):.2f} %" in words(figure)


def test_the_matrix_shows_the_correlation_of_the_best_law_in_numbers(
    merges: dict[str, Merged], figures: dict[tuple[str, str], Figure]
) -> None:
    fit = merges["softening"].materials[0].fits[0]
    assert fit.model.key == "johnson-cook"
    (axes,) = (a for a in figures["softening", "laws"].axes if not a.axison)
    cells = {tuple(map(int, t.get_position())): t for t in axes.texts}
    assert len(cells) == 25
    shown = axes.images[0].get_array()
    for (column, row), text in cells.items():
        value = float(fit.correlation[row, column])
        assert float(text.get_text().replace("−", "-")) == pytest.approx(value, abs=0.0051)
        # Numbers stand out from their cell: contrast of luminances as in WCAG 2.1, 1.4.3, 3 to 1 at least.
        paper, ink = luminance(axes.images[0].cmap(float(shown[row, column]))), luminance(text.get_color())
        assert (max(paper, ink) + 0.05) / (min(paper, ink) + 0.05) > 3
    said = words(figures["softening", "laws"])
    assert re.search(r"C = 0\.01\d+ \(0\.01\d+ to 0\.01\d+\)", said)
    assert "known: rate at which A and B are stated, 1 1/s" in said


def luminance(colour: Any) -> float:
    """Relative luminance of sRGB, IEC 61966-2-1."""
    c = np.array(to_rgb(colour))
    return float(np.where(c <= 0.04045, c / 12.92, ((c + 0.055) / 1.055) ** 2.4) @ [0.2126, 0.7152, 0.0722])


# --- empty cases -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("sort", "page", "said"),
    [
        ("one rate", "stress_against_rate", "it takes two rates at one temperature"),
        ("one rate", "stress_against_rate", "293 K: 0.001 /s; 473 K: 0.001 /s"),
        ("one temperature", "stress_against_temperature", "There is one temperature only, 293 K"),
        ("one test", "stress_against_rate", "it takes two rates at one temperature"),
        ("one test", "laws", "No law was fitted"),
        ("one temperature", "laws", "needs burgers_vector_m"),
        ("bars only", "laws", "No law was asked for"),
        ("bars only", "flow_curves", "No law was fitted, so none is drawn"),
    ],
)
def test_empty_cases_are_said_in_words(
    figures: dict[tuple[str, str], Figure], sort: str, page: str, said: str
) -> None:
    figure = figures[sort, page]
    assert said in words(figure)
    for axes in figure.axes:
        assert axes.lines or axes.images


def test_there_is_no_empty_panel(figures: dict[tuple[str, str], Figure]) -> None:
    for key, figure in figures.items():
        assert all(a.lines or a.images for a in figure.axes), key
        assert len(words(figure)) > 150, key


# --- legibility ------------------------------------------------------------------------------------


@pytest.mark.parametrize("page", list(PAGES))
@pytest.mark.parametrize("sort", list(SORTS))
def test_no_words_overlap_leave_the_page_or_are_too_small(
    figures: dict[tuple[str, str], Figure], sort: str, page: str
) -> None:
    figure = figures[sort, page]
    renderer = FigureCanvasAgg(figure).get_renderer()
    boxes = [(text.get_text(), text.get_window_extent(renderer)) for text in texts(figure)]
    paper = figure.bbox
    for said, box in boxes:
        assert min(box.x0 - paper.x0, paper.x1 - box.x1, box.y0 - paper.y0, paper.y1 - box.y1) >= 0, said
    for (first, a), (second, b) in itertools.combinations(boxes, 2):
        apart = a.x1 <= b.x0 + 1 or b.x1 <= a.x0 + 1 or a.y1 <= b.y0 + 2 or b.y1 <= a.y0 + 2
        assert apart, (first, second)
    assert min(text.get_fontsize() for text in texts(figure)) >= 7.0  # pt, on A4
    for axes in figure.axes:  # no words on the data
        for _, box in ((t.get_text(), t.get_window_extent(renderer)) for t in figure.texts):
            inner = axes.bbox
            assert box.x1 <= inner.x0 or box.x0 >= inner.x1 or box.y1 <= inner.y0 or box.y0 >= inner.y1


def test_ranges_differ_in_lightness_and_shape_and_rates_in_dashes(merges: dict[str, Merged]) -> None:
    slow, fast = Look(QUASI_STATIC, ()), Look(BAR, ())
    # About 10 steps of CIE L* are told apart at a glance (common practice); L* = 116 Y^(1/3) - 16, CIE 15.
    lightness = [116 * luminance(one.colour) ** (1 / 3) - 16 for one in (slow, fast)]
    assert lightness[0] - lightness[1] > 10
    assert slow.marker["marker"] != fast.marker["marker"]
    assert min(luminance(tint) for tint in TINTS.values()) > 0.5  # a band hides no line
    material = merges["softening"].materials[0]
    styles = looks(material)
    for kelvin in (293, 473, 673):
        here = [
            s for s, c in zip(styles, material.conditions, strict=True) if round(c.temperature_k) == kelvin
        ]
        assert len({(s.range, s.dashes) for s in here}) == len(here) == 4


def test_labels_keep_their_order_and_their_distance() -> None:
    rng = np.random.default_rng(7)
    for count in (1, 2, 5, 12):
        wanted = rng.uniform(0, 2, count)
        found = np.array(spread(wanted.tolist(), 0.15, 0.0, 2.0))
        order = np.argsort(wanted)
        assert (np.diff(found[order]) >= 0.15 - 1e-12).all()
        assert found.min() >= -1e-12
        assert found.max() <= 2 + 1e-12
    assert spread([0.2, 1.0], 0.15, 0.0, 2.0) == [0.2, 1.0]
    # Two that collide part evenly about their mean; at the edge they move inside.
    assert spread([1.0, 1.0], 0.2, 0.0, 2.0) == pytest.approx([0.9, 1.1])
    assert spread([2.0, 1.99], 0.2, 0.0, 2.0) == pytest.approx([2.0, 1.8])
    assert spread([], 0.2, 0.0, 2.0) == []


def test_numbers_have_no_false_digits() -> None:
    assert with_u(0.01213, 0.00083, (0.0104, 0.0138)) == "0.01213 (0.01040 to 0.01380)"
    assert with_u(450e3, 130e3, (290e3, np.inf), 1e-3) == "450 (290 to no upper end)"
    assert plus_minus(-0.01213, 0.00174) == "−0.0121 ± 0.0017"
    assert in_signs("-4.77e-05") == "−4.77·10⁻⁵"
    assert [rate_words(r) for r in (1642.0, 0.001, 1.2e-4, 1e-4, 0.0999999, 12345.0)] == [
        "1640 /s", "0.001 /s", "1.2·10⁻⁴ /s", "10⁻⁴ /s", "0.1 /s", "12300 /s",
    ]  # fmt: skip


# --- names and files -------------------------------------------------------------------------------


def test_names_are_drawn_letter_by_letter(figures: dict[tuple[str, str], Figure]) -> None:
    for page in PAGES:
        figure = figures["nasty names", page]
        assert r"a$x^2$ [/x] \x1b[2J <b>&amp; \u202e$" in words(figure)
        assert not any(text.get_parse_math() for text in texts(figure))
    assert r"Outlying: a$x^2$" in words(figures["nasty names", "flow_curves"])


def _named(name: str, kind: TestKind = TestKind.COMPRESSION) -> MergedMaterial:
    return MergedMaterial(
        material=name, kind=kind, conditions=(), rows=(), rates=(), courses=(), shift=None, why_no_shift="",
        points=None, fits=(), not_fitted=(),
    )  # fmt: skip


def test_file_names_are_harmless_and_differ() -> None:
    names = [
        "Wren 3",
        "wren 3",
        "Wren_3",
        "../../etc",
        "a/b",
        "a:b",
        "合金",
        "",
        "..",
        "x" * 300,
        "x" * 301,
        NASTY,
    ]
    stems = material_stems([_named(n) for n in names])
    assert len({s.casefold() for s in stems}) == len(names)
    assert all(re.fullmatch(r"[A-Za-z0-9_-][A-Za-z0-9._-]{0,99}", s) for s in stems), stems
    assert material_stems([_named("Wrenmoor 3")]) == ["Wrenmoor_3"]
    both = material_stems([_named("Al 3"), _named("Al 3", TestKind.TENSION)])
    assert both == ["Al_3_compression", "Al_3_tension"]


def test_pages_are_written_under_the_material_and_the_same_bytes_each_time(
    merges: dict[str, Merged], tmp_path: Path
) -> None:
    first = save_merge_figures(merges["bars only"], tmp_path / "a", "png")
    second = save_merge_figures(merges["bars only"], tmp_path / "b", "png")
    assert [p.name for p in first] == [f"Tarnwick_2_{page}.png" for page in PAGES]
    for one, other in zip(first, second, strict=True):
        content = one.read_bytes()
        assert content.startswith(b"\x89PNG\r\n\x1a\n")
        assert content == other.read_bytes()
        width, height = (int.from_bytes(content[k : k + 4], "big") for k in (16, 20))
        assert width / height == pytest.approx(297 / 210, rel=2e-3)  # ISO 216: A4
    assert sorted(p.name for p in (tmp_path / "a").iterdir()) == sorted(p.name for p in first)


@pytest.mark.parametrize(("kind", "sort"), [("svg", "nasty names"), ("pdf", "one test")])
def test_other_formats_are_the_same_bytes_too(
    merges: dict[str, Merged], tmp_path: Path, kind: str, sort: str
) -> None:
    first = save_merge_figures(merges[sort], tmp_path / "a", kind)
    second = save_merge_figures(merges[sort], tmp_path / "b", kind)
    assert [p.read_bytes() for p in first] == [p.read_bytes() for p in second]
    if kind == "svg":
        for path in first:
            root = ET.fromstring(path.read_bytes())
            said = " ".join("".join(n.itertext()) for n in root.iter("{http://www.w3.org/2000/svg}text"))
            assert "<b>&amp;" in said


def test_none_draws_nothing_and_an_unknown_kind_is_refused(merges: dict[str, Merged], tmp_path: Path) -> None:
    assert save_merge_figures(merges["one test"], tmp_path / "n", "none") == []
    assert not (tmp_path / "n").exists()
    with pytest.raises(InputError, match=r"end in \.png, \.pdf or \.svg"):
        save_merge_figures(merges["one test"], tmp_path, "jpg")
    assert not list(tmp_path.iterdir())


def _modules_after(code: str) -> set[str]:
    done = subprocess.run(
        [sys.executable, "-c", f"{code}\nimport sys; print(*sys.modules)"],
        capture_output=True,
        text=True,
        check=True,
    )
    return set(done.stdout.split())


def test_importing_loads_no_matplotlib_and_drawing_no_pyplot() -> None:
    assert "matplotlib" not in _modules_after("import shpb.view.merge_figures")
    code = (
        "import tempfile, pathlib\n"
        "from tests.view.test_merge_figures import curve, merged_of, softening\n"
        "from shpb.view.merge_figures import save_merge_figures\n"
        "save_merge_figures(merged_of([curve(softening, 1e3, 293.0, 'a')]), pathlib.Path(tempfile.mkdtemp()), 'png')"
    )
    loaded = _modules_after(code)
    assert "matplotlib.figure" in loaded
    assert "matplotlib.pyplot" not in loaded
