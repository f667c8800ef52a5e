"""The one-page figure: what is drawn, what is written, and that nothing overlaps or is interpreted."""

from __future__ import annotations

import itertools
import os
import subprocess
import sys
import xml.etree.ElementTree as ET
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure

from shpb.errors import InputError, StoreError
from shpb.reduction import ShotResult
from shpb.response.equilibrium import R_DEFINITION
from shpb.view import ink
from shpb.view.figure import save_figure, shot_figure


@pytest.fixture(scope="module")
def figures(shots: dict[str, ShotResult]) -> dict[str, Figure]:
    drawn = {sort: shot_figure(result) for sort, result in shots.items()}
    for figure in drawn.values():
        FigureCanvasAgg(figure).draw()
    return drawn


def _lines(figure: Figure, y_label: str) -> dict[str, Any]:
    axes = next(a for a in figure.axes if a.get_ylabel().startswith(y_label))
    return {line.get_label(): line for line in axes.lines if line.get_label() != "_marks"}


def _texts(figure: Figure) -> list[Any]:
    found = [*figure.texts]
    for axes in figure.axes:
        found += [*axes.texts, axes.xaxis.label, axes.yaxis.label, *axes.get_yticklabels()]
        found += axes.get_xticklabels()
    return [text for text in found if text.get_text().strip() and text.get_visible()]


def _words(figure: Figure) -> str:
    return " ".join(text.get_text().replace("\u00a0", " ") for text in _texts(figure))


# --- what is drawn ---------------------------------------------------------------------------------


def test_every_axis_names_its_quantity_and_unit(figures: dict[str, Figure]) -> None:
    labels = [axes.get_ylabel() for axes in figures["good"].axes]
    assert labels == [
        "incident (V)", "transm. (mV)", "strain (microstrain)", "force (kN)", "R (%)", "true stress (MPa)",
        "strain rate (1/s)",
    ]  # fmt: skip
    below = [axes.get_xlabel() for axes in figures["good"].axes if axes.get_xlabel()]
    assert below == [
        "time on the record's clock (µs)",
        "time since the loading front reached the specimen (µs)",
        "true strain",
    ]


def test_the_curves_drawn_are_those_of_the_result(
    shots: dict[str, ShotResult], figures: dict[str, Figure]
) -> None:
    response = shots["good"].response
    assert response.span is not None
    part = slice(*response.span)
    lines = _lines(figures["good"], "true stress")
    for name, curve in (("one-wave (put forward)", response.one_wave), ("three-wave", response.three_wave)):
        np.testing.assert_allclose(lines[name].get_xdata(), curve.true_strain[part], rtol=1e-12)
        np.testing.assert_allclose(lines[name].get_ydata(), curve.true_stress_pa[part] / 1e6, rtol=1e-12)
    rates = _lines(figures["good"], "strain rate")
    np.testing.assert_allclose(rates["three-wave"].get_ydata(), response.three_wave.strain_rate_per_s[part])
    np.testing.assert_allclose(rates["mean"].get_ydata(), response.rate.mean_per_s)


def test_forces_pulses_and_r_are_those_of_the_result(
    shots: dict[str, ShotResult], figures: dict[str, Figure]
) -> None:
    response, faces = shots["good"].response, shots["good"].faces
    for panel, name, values in (
        ("force", "F_in", response.motion.force_in_n / 1e3),
        ("force", "F_out", response.motion.force_out_n / 1e3),
        ("R (", "R", response.equilibrium.ratio * 100),
        ("R (", "measurement floor", response.equilibrium.floor * 100),
        ("strain (", "incident", faces.incident.strain * 1e6),
        ("strain (", "reflected", faces.reflected.strain * 1e6),
        ("strain (", "transmitted", faces.transmitted.strain * 1e6),
    ):
        line = _lines(figures["good"], panel)[name]
        expected = np.interp(line.get_xdata(), response.time_s * 1e6, values)
        np.testing.assert_allclose(line.get_ydata(), expected, rtol=1e-9, atol=1e-9)
        assert line.get_xdata()[-1] > 150  # us: the loading of 140 us and what follows
    limit = _lines(figures["good"], "R (")["limit"]
    assert set(limit.get_ydata()) == {5.0}


def test_voltages_are_as_acquired_with_their_windows(
    shots: dict[str, ShotResult], figures: dict[str, Figure]
) -> None:
    result = shots["good"]
    line = _lines(figures["good"], "incident")["incident"]
    record_us = result.record.time_s * 1e6
    np.testing.assert_allclose(
        line.get_ydata(), np.interp(line.get_xdata(), record_us, result.record.voltage_v[0]), atol=1e-9
    )
    edges = {
        round(float(x), 6) for a in figures["good"].axes[:2] for line in a.lines for x in line.get_xdata()[:1]
    }
    for pulse in result.pulses:
        assert round(pulse.window_s[0] * 1e6, 6) in edges
        assert pulse.foot is not None
        assert round(pulse.foot.time_s * 1e6, 6) in edges
        assert f"{pulse.name}, foot {pulse.foot.time_s * 1e6:.1f} µs" in _words(figures["good"])


def test_what_counts_is_in_ink_and_the_rest_in_grey(figures: dict[str, Figure]) -> None:
    good, bad = _lines(figures["good"], "true stress"), _lines(figures["not in equilibrium"], "true stress")
    assert good["one-wave (put forward)"].get_color() == ink.DARK
    assert good["three-wave, not counting"].get_color() == ink.FAINT
    assert all(line.get_color() == ink.FAINT for line in bad.values())
    assert "no part of this curve counts" in _words(figures["not in equilibrium"])
    assert "no part" not in _words(figures["good"])
    assert "flow stress" in good
    assert "flow stress" not in bad


def test_r_without_tuning_stands_beside_tuned_r(figures: dict[str, Figure]) -> None:
    assert _lines(figures["feet"], "R (")["R, feet not moved"].get_color() == ink.FAINT
    assert "R, feet not moved" not in _lines(figures["good"], "R (")


def test_verdict_low_pass_and_definition_of_r_stand_on_every_page(
    figures: dict[str, Figure], shots: dict[str, ShotResult], sort: str
) -> None:
    words = _words(figures[sort])
    assert shots[sort].verdict.value.upper() in words
    assert "low-pass 117.0 kHz (half height, f a/c0 = 0.234)" in words
    assert R_DEFINITION.replace(" - ", " − ") in words


def test_the_gravest_finding_stands_with_what_to_do(figures: dict[str, Figure]) -> None:
    words = _words(figures["not in equilibrium"])
    assert "force equilibrium: not reached" in words
    assert "Use a pulse shaper" in words


# --- legibility ------------------------------------------------------------------------------------


def test_no_words_overlap_leave_the_page_or_are_too_small(figures: dict[str, Figure], sort: str) -> None:
    figure = figures[sort]
    renderer = FigureCanvasAgg(figure).get_renderer()
    boxes = [(text.get_text(), text.get_window_extent(renderer)) for text in _texts(figure)]
    page = figure.bbox
    for words, box in boxes:
        assert min(box.x0 - page.x0, page.x1 - box.x1, box.y0 - page.y0, page.y1 - box.y1) >= 0, words
    for (first, a), (second, b) in itertools.combinations(boxes, 2):
        apart = a.x1 <= b.x0 + 1 or b.x1 <= a.x0 + 1 or a.y1 <= b.y0 + 2 or b.y1 <= a.y0 + 2
        assert apart, (first, second)
    assert min(text.get_fontsize() for text in _texts(figure)) >= 7.0  # pt, on A4


def _linear(colour: str) -> np.ndarray:
    """sRGB to linear light, IEC 61966-2-1."""
    c = np.array(to_rgb(colour))
    return np.where(c <= 0.04045, c / 12.92, ((c + 0.055) / 1.055) ** 2.4)


def _lightness(linear: np.ndarray) -> float:
    """CIE 1976 lightness L* of linear sRGB (CIE 15; luminance weights of IEC 61966-2-1)."""
    y = float(np.clip(linear, 0, 1) @ [0.2126, 0.7152, 0.0722])
    return 116 * y ** (1 / 3) - 16 if y > 0.008856 else 903.3 * y


# Deuteranopia and protanopia: G. M. Machado, M. M. Oliveira, L. A. F. Fernandes, IEEE Trans. Vis. Comput.
# Graph. 15 (2009) 1291-1298, severity 1.0 (matrices from memory).
SEEN_AS = {
    "full colour": np.eye(3),
    "no green": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]
    ),
    "no red": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]
    ),
}


@pytest.mark.parametrize("sight", list(SEEN_AS))
def test_the_three_colours_differ_in_lightness_and_stand_out_from_paper(sight: str) -> None:
    lightness = [_lightness(SEEN_AS[sight] @ _linear(c)) for c in (ink.DARK, ink.MIDDLE, ink.LIGHT)]
    # About 10 steps of L* are told apart at a glance even in thin lines (common practice).
    assert np.diff(lightness).min() > 10, lightness
    assert max(lightness) < 65, lightness  # contrast of 3 to 1 on white is L* 61.7 for a grey


def test_lines_that_meet_have_styles_of_their_own(figures: dict[str, Figure]) -> None:
    for panel in ("strain (", "force", "R ("):
        styles = [line._dash_pattern for line in _lines(figures["feet"], panel).values()]
        assert len({str(style) for style in styles}) >= min(len(styles), 3)


def test_an_envelope_keeps_a_single_spike() -> None:
    rng = np.random.default_rng(3)
    values = rng.normal(size=100_000) * 1e-3
    values[54_321], values[77_777] = 1.0, -1.0
    picked = ink.envelope(values)
    assert picked.size <= ink.POINTS
    assert {0, 54_321, 77_777, 99_999} <= set(picked.tolist())
    assert (np.diff(picked) > 0).all()
    assert ink.envelope(values[:1500]).size == 1500
    for size in (1501, 1502, 2999, 3001, 10_007):
        assert ink.envelope(values[:size]).size <= ink.POINTS


@pytest.mark.parametrize(
    ("low", "high", "about", "labels"),
    [
        (-20.0, 206.0, 8, ("0", "50", "100", "150", "200")),
        (-0.03, 0.31, 6, ("0.0", "0.1", "0.2", "0.3")),
        (-3.87, 4.29, 4, ("-2", "0", "2", "4")),
        (0.0, 0.0, 5, ("-1.0", "-0.5", "0.0", "0.5", "1.0")),
    ],
)
def test_ticks_stand_at_round_numbers(low: float, high: float, about: int, labels: tuple[str, ...]) -> None:
    assert ink.scale(low, high, about).labels == labels


def test_there_are_never_fewer_than_two_ticks() -> None:
    rng = np.random.default_rng(5)
    for low, width in zip(rng.normal(size=300) * 10, 10 ** rng.uniform(-4, 5, 300), strict=True):
        ticks = ink.scale(low, low + width, 4).ticks
        assert 2 <= len(ticks) <= 6
        assert ticks[0] >= low - 1e-9 * width
        assert ticks[-1] <= low + width * (1 + 1e-9)


# --- names from outside ----------------------------------------------------------------------------


def test_names_are_drawn_letter_by_letter(figures: dict[str, Figure]) -> None:
    assert r"a$x^2$ [/x] \x1b[2J\x1b[31m \u202e <b>&amp;" in _words(figures["nasty names"])
    assert not any(text.get_parse_math() for text in _texts(figures["nasty names"]))


def test_an_odd_dollar_or_a_strange_script_draws_all_the_same(shot: Any, tmp_path: Path) -> None:
    # An unpaired $ is a syntax error to a formula parser; the page's type has no such letters.
    save_figure(shot(name="$\\frac{ 漢字 \ud800"), tmp_path / "a.png")
    assert "$\\frac{ ?? \\ud800" in _words(shot_figure(shot(name="$\\frac{ 漢字 \ud800")))


# --- what is written -------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("suffix", "magic"), [(".png", b"\x89PNG\r\n\x1a\n"), (".pdf", b"%PDF-"), (".SVG", b"<?xml")]
)
def test_three_formats_by_suffix_and_the_same_bytes_each_time(
    shots: dict[str, ShotResult], tmp_path: Path, suffix: str, magic: bytes
) -> None:
    first, second = tmp_path / f"a{suffix}", tmp_path / f"b{suffix}"
    assert save_figure(shots["nasty names"], first) == first
    save_figure(shots["nasty names"], second)
    content = first.read_bytes()
    assert content.startswith(magic)
    assert content == second.read_bytes()
    assert sorted(p.name for p in tmp_path.iterdir()) == sorted([first.name, second.name])


def test_png_is_one_a4_page(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    content = save_figure(shots["good"], tmp_path / "a.png").read_bytes()
    width, height = (int.from_bytes(content[k : k + 4], "big") for k in (16, 20))
    # ISO 216: A4 is 210 mm by 297 mm.
    assert width / height == pytest.approx(297 / 210, rel=2e-3)
    assert width >= 1200


def test_svg_is_sound_and_its_text_is_text(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    path = save_figure(shots["nasty names"], tmp_path / "a.svg")
    root = ET.fromstring(path.read_bytes())
    words = " ".join("".join(node.itertext()) for node in root.iter("{http://www.w3.org/2000/svg}text"))
    assert "true stress (MPa)" in words
    assert r"a$x^2$ [/x] \x1b[2J" in words
    assert "<b>&amp;" in words
    assert not [node for node in root.iter() if "date" in node.tag.lower()]


@pytest.mark.parametrize("name", ["a.jpg", "figure", "a.png.txt"])
def test_another_suffix_is_refused(shots: dict[str, ShotResult], tmp_path: Path, name: str) -> None:
    with pytest.raises(InputError, match=r"end in \.png, \.pdf or \.svg"):
        save_figure(shots["good"], tmp_path / name)
    assert not list(tmp_path.iterdir())


def test_a_folder_is_made_and_a_file_in_its_place_is_an_error_in_words(
    shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    assert save_figure(shots["good"], tmp_path / "none" / "a.png").exists()
    (tmp_path / "file").write_text("in the way")
    with pytest.raises(StoreError, match="Check free space and permission of the folder"):
        save_figure(shots["good"], tmp_path / "file" / "a.png")


def test_a_failure_leaves_the_old_figure_and_nothing_else(
    shots: dict[str, ShotResult], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "a.png"
    path.write_bytes(b"old")

    def refuse(*_: object) -> None:
        raise PermissionError(13, "held open")

    monkeypatch.setattr(os, "replace", refuse)
    with pytest.raises(StoreError, match="held open"):
        save_figure(shots["good"], path)
    assert [p.name for p in tmp_path.iterdir()] == ["a.png"]
    assert path.read_bytes() == b"old"


def test_the_users_own_style_neither_matters_nor_is_changed(
    shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    plain = save_figure(shots["good"], tmp_path / "plain.svg").read_bytes()
    backend = mpl.rcParams._get("backend") if hasattr(mpl.rcParams, "_get") else None
    with mpl.rc_context(
        {"axes.grid": True, "font.size": 20, "axes.facecolor": "black", "svg.fonttype": "path"}
    ):
        styled = save_figure(shots["good"], tmp_path / "styled.svg").read_bytes()
        assert mpl.rcParams["font.size"] == 20
        assert mpl.rcParams["axes.grid"]
    assert styled == plain
    if backend is not None:
        assert mpl.rcParams._get("backend") == backend


def _modules_after(code: str) -> set[str]:
    done = subprocess.run(
        [sys.executable, "-c", f"{code}\nimport sys; print(*sys.modules)"],
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    return set(done.stdout.split())


def test_a_figure_needs_no_interactive_state() -> None:
    loaded = _modules_after(
        "import io; import shpb.view.figure as f; from matplotlib.figure import Figure\n"
        "from shpb.view.page import Page\n"
        "with f.page_style():\n"
        "    g = Figure(); Page(g).text(1, 1, 'x'); g.savefig(io.BytesIO(), format='png')"
    )
    assert "matplotlib.figure" in loaded
    assert "matplotlib.pyplot" not in loaded


def test_the_text_needs_neither_matplotlib_nor_rich() -> None:
    loaded = _modules_after("import shpb.view.terminal")
    assert "shpb.view.summary" in loaded
    roots = {name.split(".")[0] for name in loaded}
    assert not roots & {"matplotlib", "rich", "h5py"}


def test_importing_the_figure_module_loads_no_matplotlib() -> None:
    assert "matplotlib" not in _modules_after("import shpb.view.figure")
