"""Uncertainty as it is shown: words, the ranked table, the summary, the page of the budget, the band of the figure."""

from __future__ import annotations

import itertools
import json
import re
from collections.abc import Callable
from pathlib import Path

import matplotlib.image
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from shpb.reduction import ShotResult, draw_shot
from shpb.trust.budget import ALL_OUTPUTS
from shpb.view.budget_page import budget_figure, save_budget_page
from shpb.view.figure import shot_figure
from shpb.view.summary import json_text, shot_json
from shpb.view.terminal import draws_text, shot_text


@pytest.fixture(scope="module")
def drawn(shot: Callable[..., ShotResult]) -> ShotResult:
    return draw_shot(shot(noise=0.004), 400, seed=2)


def at_middle(result: ShotResult, values: np.ndarray) -> float:
    span = result.response.span or result.response.loading
    return float(values[(span[0] + span[1]) // 2])


def test_the_text_gives_u_at_mid_span_and_r_by_all_sources(shots: dict[str, ShotResult]) -> None:
    result = shots["noisy"]
    words = " ".join(shot_text(result).split())
    share = at_middle(result, result.budget.u_of("stress_1w")) / at_middle(
        result, result.response.one_wave.stress_pa
    )
    assert f"standard, at mid-span: stress {100 * share:.1f} %" in words
    assert "times 2 for about 95 %" in words
    u = at_middle(result, result.budget.u_force_difference)
    low, high = (
        at_middle(result, e)
        for e in result.budget.interval("force_difference", result.response.equilibrium.ratio)
    )
    assert f"u {100 * u:.1f} % by all sources, so {100 * low:.1f} to {100 * high:.1f} % (about 95 %)" in words
    assert "Draws" not in words
    assert draws_text(result) == ""


def test_the_draws_stand_beside_the_linear_budget(drawn: ShotResult) -> None:
    words = " ".join(draws_text(drawn).split())
    assert words.startswith("Draws 400 draws from seed 2, standard uncertainty at mid-span: stress ")
    assert drawn.draws is not None
    for word, name in (("stress", "stress_1w"), ("strain", "strain_1w"), ("rate", "strain_rate_1w")):
        found = re.search(rf"{word} ([\d.]+) % \(linear ([\d.]+) %, ratio ([\d.]+)\)", words)
        assert found, word
        u, linear = (at_middle(drawn, x) for x in (drawn.draws.of("u", name), drawn.budget.u_of(name)))
        assert float(found[3]) == pytest.approx(u / linear, rel=0.01)
        assert float(found[1]) / float(found[2]) == pytest.approx(u / linear, rel=0.02)
    first = drawn.draws.flow[0]
    assert f"{first.low_pa / 1e6:.0f} to {first.high_pa / 1e6:.0f} MPa at {first.at_strain:g}" in words
    for full in (False, True):
        text = shot_text(drawn, full=full)
        assert max(map(len, text.splitlines())) <= 80
        assert draws_text(drawn) in text


def test_the_table_ranks_every_source_and_says_whose_it_is(shots: dict[str, ShotResult]) -> None:
    result = shots["noisy"]
    text = shot_text(result, full=True)
    table = text[text.index("Source of uncertainty") : text.index("\nCheck ")]
    rows = re.findall(
        r"^(\S.*?) {2,}(rig's|shot's) +(assumed)? +([-\d.]+) +([-\d.]+) +([-\d.]+) +([-\d.]+)$", table, re.M
    )
    greatest = [max(map(float, row[3:])) for row in rows]
    assert greatest == sorted(greatest, reverse=True)
    for column in range(3, 7):
        assert sum(float(row[column]) for row in rows) == pytest.approx(100, abs=1.5)  # rounded to 0.1
    named = {row[0]: row for row in rows}
    assert named["transmitted gauge factor"][1:3] == ("rig's", "assumed")
    assert named["transmitted pulse"][1:3] == ("shot's", "")
    flat = " ".join(table.split())
    for line in result.budget.contributions:
        assert line.source in flat
    assert "shot_text" not in flat
    assert "Source of uncertainty" not in shot_text(result)


def test_the_summary_holds_budget_and_draws(drawn: ShotResult, shots: dict[str, ShotResult]) -> None:
    said = shot_json(drawn)["uncertainty"]
    assert said["coverage_factor"] == 2
    assert said["draws"]["draws"] == 400
    assert said["draws"]["seed"] == 2
    assert drawn.draws is not None
    assert said["draws"]["at_mid_span"]["u_true_stress_pa"] == at_middle(
        drawn, drawn.draws.of("u", "true_stress")
    )
    assert len(said["draws"]["flow"]) == len(drawn.draws.flow) > 0
    low, high = said["equilibrium_ratio_at_mid_span"]["interval"]
    assert 0 <= low < high <= 2
    for output in ALL_OUTPUTS:
        assert sum(line["share_of_variance"][f"of_{output}"] for line in said["budget"]) == pytest.approx(1.0)
    text = json_text(shot_json(drawn))
    assert json.loads(text)["uncertainty"]["draws"]["settled"] is None
    assert shot_json(shots["good"])["uncertainty"]["draws"] is None


def test_the_band_of_the_figure_is_that_of_the_draws(drawn: ShotResult, shots: dict[str, ShotResult]) -> None:
    def words(figure: Figure) -> str:
        return " ".join(text.get_text() for axes in figure.axes for text in axes.texts)

    assert "band: stress, k = 2" in words(shot_figure(shots["noisy"]))
    figure = shot_figure(drawn)
    assert "band: stress, 95 % of 400 draws" in words(figure)
    axes = next(a for a in figure.axes if a.get_ylabel().startswith("true stress"))
    vertices = axes.collections[0].get_paths()[0].vertices
    assert drawn.draws is not None
    span = drawn.response.span
    assert span is not None
    high = drawn.draws.of("high", "true_stress")[slice(*span)].max() / 1e6
    assert vertices[:, 1].max() == pytest.approx(high, rel=1e-3)


# --- the page of the budget


@pytest.fixture(scope="module")
def pages(shots: dict[str, ShotResult], drawn: ShotResult) -> dict[str, Figure]:
    made = {sort: budget_figure(result) for sort, result in {**shots, "drawn": drawn}.items()}
    for figure in made.values():
        FigureCanvasAgg(figure).draw()
    return made


def _texts(figure: Figure) -> list:  # type: ignore[type-arg]
    found = [*figure.texts]
    for axes in figure.axes:
        found += [*axes.texts, axes.xaxis.label, *axes.get_xticklabels()]
    return [text for text in found if text.get_text().strip()]


def test_bars_are_the_contributions(shots: dict[str, ShotResult], pages: dict[str, Figure]) -> None:
    result = shots["noisy"]
    for axes, (name, values) in zip(
        pages["noisy"].axes,
        (
            ("stress_1w", result.response.one_wave.stress_pa),
            ("strain_1w", result.response.one_wave.strain),
            ("strain_rate_1w", result.response.one_wave.strain_rate_per_s),
        ),
        strict=True,
    ):
        widths = [patch.get_width() for patch in axes.patches]
        assert widths[:-1] == sorted(widths[:-1], reverse=True)
        # They add as squares, the rest included.
        u = 100 * at_middle(result, result.budget.u_of(name)) / at_middle(result, values)
        assert np.sqrt(np.sum(np.square(widths))) == pytest.approx(u, rel=1e-6)
        column = ALL_OUTPUTS.index(name)
        first = max(result.budget.contributions, key=lambda line: line.share[column])
        assert widths[0] == pytest.approx(u * np.sqrt(first.share[column]))
        hatched = [bool(patch.get_hatch()) for patch in axes.patches[:-1]]
        said = [text.get_text() for text in axes.texts[:-1]]
        assert ["rig's" in words for words in said] == hatched
        assert ["shot's" in words for words in said] == [not one for one in hatched]


def test_nothing_overlaps_or_leaves_the_page(pages: dict[str, Figure]) -> None:
    for sort, figure in pages.items():
        width, height = figure.bbox.width, figure.bbox.height
        boxes = [(text.get_text(), text.get_window_extent()) for text in _texts(figure)]
        for words, box in boxes:
            assert box.x0 >= 0, (sort, words)
            assert box.x1 <= width, (sort, words)
            assert box.y0 >= 0, (sort, words)
            assert box.y1 <= height, (sort, words)
        for (first, a), (second, b) in itertools.combinations(boxes, 2):
            apart = a.x1 <= b.x0 + 0.5 or b.x1 <= a.x0 + 0.5 or a.y1 <= b.y0 + 1 or b.y1 <= a.y0 + 1
            assert apart, (sort, first, second)


def test_names_are_drawn_and_not_interpreted(pages: dict[str, Figure]) -> None:
    words = " ".join(text.get_text() for text in _texts(pages["nasty names"]))
    assert "a$x^2$ [/x] \\x1b[2J" in words
    assert "by 400 draws" in " ".join(text.get_text() for text in _texts(pages["drawn"]))


def test_rig_and_shot_stay_apart_in_grey(drawn: ShotResult, tmp_path: Path) -> None:
    path = save_budget_page(drawn, tmp_path / "b.png")
    grey = matplotlib.image.imread(path)[:, :, :3] @ np.array([0.2126, 0.7152, 0.0722])
    page = budget_figure(drawn)
    FigureCanvasAgg(page).draw()
    shades: dict[bool, float] = {}
    for patch in page.axes[0].patches[:-1]:
        box = patch.get_window_extent()
        rows = slice(int(grey.shape[0] - box.y1) + 2, int(grey.shape[0] - box.y0) - 2)
        part = grey[rows, int(box.x0) + 3 : max(int(box.x1) - 3, int(box.x0) + 6)]
        shades.setdefault(bool(patch.get_hatch()), float(part.mean()))
    assert shades[True] - shades[False] > 0.25  # hatched is lighter by a quarter of full white


@pytest.mark.parametrize("suffix", ["png", "pdf", "svg"])
def test_the_same_shot_gives_the_same_file(drawn: ShotResult, tmp_path: Path, suffix: str) -> None:
    first = save_budget_page(drawn, tmp_path / f"a.{suffix}").read_bytes()
    assert save_budget_page(drawn, tmp_path / f"b.{suffix}").read_bytes() == first
    assert len(first) > 5000
