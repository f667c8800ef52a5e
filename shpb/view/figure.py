"""The one-page figure of a shot: verdict and processing, what the gauges saw, what the specimen did.

Nothing is interpreted: names from files are drawn letter by letter. The page is laid out by hand on a
figure of its own, without any interactive state of matplotlib, whose back end stays as the user has it.
"""

from __future__ import annotations

import io
from collections.abc import Callable
from contextlib import AbstractContextManager
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.errors import InputError
from shpb.reduction import ShotResult
from shpb.response.equilibrium import R_DEFINITION
from shpb.trust.finding import Verdict
from shpb.version import VERSION
from shpb.view import strain_panels, time_panels
from shpb.view.by_hand_words import by_hand_words
from shpb.view.ink import BODY, INK, RC, SMALL
from shpb.view.page import HEIGHT, WIDTH, Page
from shpb.view.text import rounded
from shpb.view.wording import calibration_words, formulas, processing_words, telling, verdict_sentence
from shpb.whole_file import whole_file

if TYPE_CHECKING:
    from matplotlib.figure import Figure

DPI = 110
_SUFFIXES = {".png": "png", ".pdf": "pdf", ".svg": "svg"}
_LEFT, _LEFT_WIDTH = 0.68, 5.12
_RIGHT, _RIGHT_WIDTH = 6.52, 4.84
_MOST_FINDINGS = 3


def shot_figure(result: ShotResult) -> Figure:
    """Draw one shot on one A4 page, landscape.

    Returns
    -------
    matplotlib.figure.Figure
        On no canvas but its own; :func:`save_figure` writes it as it is meant to be written.
    """
    from matplotlib.figure import Figure

    with page_style():
        figure = Figure(figsize=(WIDTH, HEIGHT), dpi=DPI)
        page = Page(figure)
        _header(page, result)
        _time_side(page, result)
        _strain_side(page, result)
        _findings(page, result)
        _footer(page, result)
    return figure


def save_figure(result: ShotResult, path: Path) -> Path:
    """Draw one shot and write it as PNG, PDF or SVG, by the suffix of ``path``.

    The file is written beside its place and then put there, so that no half of a figure is ever seen. The
    same result gives the same bytes.

    Returns
    -------
    Path
        ``path``.

    Raises
    ------
    InputError
        If the suffix is none of the three.
    StoreError
        If the file cannot be written.

    Examples
    --------
    >>> import shpb
    >>> shpb.save_figure(result, folder / "W-02.svg").name
    'W-02.svg'
    """
    return write_figure(lambda: shot_figure(result), Path(path))


def write_figure(draw: Callable[[], Figure], path: Path) -> Path:
    """Draw a page and write it as :func:`save_figure` does."""
    file_format = _SUFFIXES.get(path.suffix.lower())
    if file_format is None:
        raise InputError(
            f"a figure cannot be written as {path.suffix or 'a file without a suffix'!r}",
            where=str(path),
            mend="Let the name end in .png, .pdf or .svg",
        )
    # No date, so that the same shot gives the same file. PNG: the fastest compression, half the time for
    # a file a little larger.
    every: dict[str, dict[str, Any]] = {
        "png": {"pil_kwargs": {"compress_level": 1}},
        "pdf": {"metadata": {"CreationDate": None}},
        "svg": {"metadata": {"Date": None}},
    }
    options = every[file_format]
    content = io.BytesIO()
    with page_style():
        draw().savefig(content, format=file_format, dpi=DPI, **options)
    with whole_file(path) as part:
        part.write_bytes(content.getvalue())
    return path


def load_drawing() -> None:
    """Load all that a first figure would have to wait for."""
    import matplotlib.backends.backend_agg
    import matplotlib.figure  # noqa: F401

    page_style()


def page_style() -> AbstractContextManager[None]:
    """Matplotlib's own defaults with ours on top, whatever the user's style; its back end is left alone."""
    import matplotlib

    own = ("backend", "interactive", "toolbar")
    style: dict[Any, Any] = {k: v for k, v in matplotlib.rcParamsDefault.items() if not k.startswith(own)}
    return matplotlib.rc_context(style | RC)


# --- what stands where -----------------------------------------------------------------------------


def _header(page: Page, result: ShotResult) -> None:
    right = _RIGHT + _RIGHT_WIDTH
    sheet = result.sheet
    kelvin = float(sheet.temperature_k)
    test = f"{sheet.kind.value}, {kelvin:.0f} K ({kelvin - 273.15:.0f} °C)"
    width = right - 0.3
    tail = page.width_of(test, 11) + 0.25
    # The shot's name has the first claim on the line, the material takes what is left.
    name = page.fitted(page.safe(sheet.shot_id), 13, 0.6 * (width - tail), bold=True)
    page.text(0.3, 7.92, name, fontsize=13, fontweight="bold")
    used = page.width_of(name, 13, bold=True) + 0.25
    material = page.fitted(page.safe(sheet.specimen.material), 11, width - tail - used)
    page.text(0.3 + used, 7.92, material, fontsize=11)
    page.text(right, 7.92, test, fontsize=11, horizontalalignment="right")

    word = result.verdict.value.upper()
    face, ink = {
        Verdict.ACCEPT: ("white", INK),
        Verdict.RESTRICT: ("#cfcac0", INK),
        Verdict.REJECT: (INK, "white"),
    }[result.verdict]
    box = {"facecolor": face, "edgecolor": INK, "linewidth": 0.9, "boxstyle": "square,pad=0.28"}
    page.text(0.36, 7.60, word, fontsize=10, fontweight="bold", color=ink, bbox=box)
    said = 0.36 + page.width_of(word, 10, bold=True) + 0.2
    rate = result.response.rate
    sentence = f"{verdict_sentence(result)} Mean rate {rounded(rate.mean_per_s)} /s."
    page.text(said, 7.60, page.fitted(sentence, 10, right - said), fontsize=10)
    # A formula is not broken: its spaces are no places to part a line.
    formula = formulas(result)
    processing = processing_words(result).replace(formula, formula.replace(" ", "\u00a0"))
    page.paragraph(0.3, 7.36, _typeset(processing) + ".", width=right - 0.3, most=2)
    page.rule(0.3, 7.14, right - 0.3)


def _time_side(page: Page, result: ShotResult) -> None:
    x, width = _LEFT, _LEFT_WIDTH
    rig, strain, pulses = result.rig, result.strain, result.pulses
    page.key(x, 6.95, "Bridge voltages as acquired, windows shaded", ())
    time_panels.draw_voltage(
        page.axes(x, 6.09, width, 0.80), result, station=strain.incident, gauge=rig.incident_gauge,
        pulses=(pulses.incident, pulses.reflected), side="incident", last=False,
    )  # fmt: skip
    time_panels.draw_voltage(
        page.axes(x, 5.24, width, 0.80), result, station=strain.transmitted, gauge=rig.transmitted_gauge,
        pulses=(pulses.transmitted,), side="transm.", last=True,
    )  # fmt: skip
    page.key(x, 4.62, "Pulses at faces", time_panels.pulse_lines(result))
    time_panels.draw_pulses(page.axes(x, 3.36, width, 1.20), result)
    page.key(x, 3.14, "Forces at the faces", time_panels.FORCE_LINES)
    if result.response.span is not None:
        page.text(x + width, 3.14, "shaded: what counts", fontsize=BODY, horizontalalignment="right")
    time_panels.draw_forces(page.axes(x, 2.06, width, 1.02), result)
    end = page.key(x, 1.84, "Equilibrium", ())
    page.text(end, 1.84, R_DEFINITION.replace(" - ", " − "), fontsize=SMALL)
    page.key(x, 1.68, "", time_panels.ratio_lines(result), SMALL)
    time_panels.draw_ratio(page.axes(x, 0.62, width, 1.00), result)


def _strain_side(page: Page, result: ShotResult) -> None:
    x, width = _RIGHT, _RIGHT_WIDTH
    page.key(x, 6.95, "Result", strain_panels.analysis_lines(result))
    strain_panels.draw_curve(page.axes(x, 4.02, width, 2.84), result)
    rate = result.response.rate
    end = page.key(x, 3.80, "Engineering strain rate", ())
    mean, true = rounded(rate.mean_per_s), rounded(rate.mean_true_per_s)
    span = f"{rounded(rate.least_per_s)} to {rounded(rate.greatest_per_s)} /s"
    said = f"mean {mean} /s, {span}; mean true rate {true} /s"
    page.text(end, 3.80, said, fontsize=SMALL)
    strain_panels.draw_rate(page.axes(x, 2.70, width, 1.04), result)


def _findings(page: Page, result: ShotResult) -> None:
    """The gravest findings and what to do; the terminal and the file hold all of them."""
    x, y, width = _RIGHT - 0.45, 2.04, _RIGHT_WIDTH + 0.45
    said = telling(result.findings)
    if not said:
        page.text(x, y, "No check speaks against this shot.", fontsize=BODY + 0.5, fontweight="bold")
        return
    page.text(x, y, "What the checks say, and what to do", fontsize=BODY + 0.5, fontweight="bold")
    y -= 0.17
    for finding in said[:_MOST_FINDINGS]:
        word = finding.weight.value.upper()
        page.text(x, y, word, fontsize=BODY, fontweight="bold")
        text = _typeset(page.safe(f"{finding.check}: {finding.measured}. {finding.action}"))
        y = page.paragraph(x + 0.72, y, text, width=width - 0.72, most=3) - 0.03
    left = len(said) - _MOST_FINDINGS
    if left > 0:
        page.text(x + 0.72, y, f"and {left} more, not shown here", fontsize=BODY)


def _footer(page: Page, result: ShotResult) -> None:
    names = ", ".join(source.name for source in result.record.sources)
    record, version = f"record {names}" if names else "", f"shpb {VERSION}"
    parts = [record, f"rig {result.rig.name}", result.sheet.date, version]
    calibrated = calibration_words(result)
    if calibrated:
        _foot_line(page, 0.22, [f"calibration {calibrated}", version])
        parts.remove(version)
    above = 0.36 if calibrated else 0.22
    _foot_line(page, above, parts)
    moved = [_typeset(line) for line in by_hand_words(result)]
    # Two lines have room: what is too much for them stands in terminal and file.
    for number, parts in enumerate(part for part in (moved[1:], moved[:1]) if part):
        _foot_line(page, above + 0.14 * (number + 1), parts)


def _foot_line(page: Page, y: float, parts: list[str]) -> None:
    text = page.safe("; ".join(part for part in parts if part))
    page.text(
        _RIGHT + _RIGHT_WIDTH, y, page.fitted(text, SMALL, _RIGHT_WIDTH + 0.45), fontsize=SMALL, color="#555555",
        horizontalalignment="right",
    )  # fmt: skip


def _typeset(text: str) -> str:
    """The words that terminal and figure share, with the signs that a console may not have."""
    for plain, sign in ((" us", " µs"), ("<=", "≤"), ("+-", "±"), (" - ", " − ")):
        text = text.replace(plain, sign)
    return text


__all__ = ["DPI", "save_figure", "shot_figure", "write_figure"]
