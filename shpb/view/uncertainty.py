"""The uncertainty of a shot in words: at mid-span, by the linear budget and by the draws, and the ranked budget."""

from __future__ import annotations

from typing import TYPE_CHECKING

from shpb.arrays import FloatArray
from shpb.reduction import ShotResult
from shpb.settings import Analysis, Correction
from shpb.trust.budget import ALL_OUTPUTS, COVERAGE_FACTOR, Contribution
from shpb.view.text import rounded, wrapped

if TYPE_CHECKING:
    from shpb.trust.draws import Draws

_WIDE = 80  # columns from which a source takes one line
_LEAST_SHARE = 0.0005  # of the variance, below which a line of the table says 0.0


def wave_of(result: ShotResult) -> str:
    """Ending of the outputs of the analysis put forward."""
    return "1w" if result.response.analysis is Analysis.ONE_WAVE else "3w"


def mid_span(result: ShotResult) -> int:
    """The sample in the middle of what counts, or of the loading where nothing does."""
    span = result.response.span or result.response.loading
    return (span[0] + span[1]) // 2


def put_forward(result: ShotResult) -> tuple[tuple[str, str, FloatArray], ...]:
    """Word, output and values of engineering stress, strain and rate of the analysis put forward."""
    wave, curve = wave_of(result), result.response.curve
    return (
        ("stress", f"stress_{wave}", curve.stress_pa),
        ("strain", f"strain_{wave}", curve.strain),
        ("rate", f"strain_rate_{wave}", curve.strain_rate_per_s),
    )


def budget_lines(result: ShotResult, width: int, label: int) -> list[str]:
    """Standard uncertainties at the middle of what counts, what they come from, and R by all sources."""
    response, budget, middle = result.response, result.budget, mid_span(result)
    said = []
    for word, name, values in put_forward(result):
        share = budget.u_of(name)[middle] / max(abs(float(values[middle])), 1e-300)
        said.append(f"{word} {100 * share:.1f} %")
    lines = wrapped(
        f"standard, at mid-span: {', '.join(said)} (engineering, {response.analysis.value}; times "
        f"{COVERAGE_FACTOR:g} for about 95 %)",
        width,
        "Uncertainty".ljust(label),
    )
    column = ALL_OUTPUTS.index(f"stress_{wave_of(result)}")
    greatest = sorted(budget.contributions, key=lambda line: -line.share[column])[:3]
    shares = ", ".join(
        f"{line.source} {100 * line.share[column]:.0f} %{' (assumed)' if line.assumed else ''}"
        for line in greatest
    )
    lines += wrapped(f"of the variance of stress: {shares}", width, " " * label)
    left = [
        f"{report.correction.value} {report.brief}"
        for report in response.corrections
        if report.correction in (Correction.INERTIA, Correction.FRICTION)
        and report.brief
        and not report.applied
    ]
    if left:
        lines += wrapped(f"not in it, because left in the curve: {', '.join(left)}", width, " " * label)
    low, high = budget.interval("force_difference", response.equilibrium.ratio)
    ratio = response.equilibrium.ratio[middle]
    return lines + wrapped(
        f"R at mid-span {100 * ratio:.1f} %, u {100 * budget.u_force_difference[middle]:.1f} % by all sources, "
        f"so {100 * low[middle]:.1f} to {100 * high[middle]:.1f} % (about 95 %)",
        width,
        " " * label,
    )


def draw_lines(result: ShotResult, width: int, label: int) -> list[str]:
    """Standard uncertainties by the draws beside the linear ones; nothing where there are no draws."""
    draws, middle = result.draws, mid_span(result)
    if draws is None:
        return []
    said = []
    for word, name, values in put_forward(result):
        value = max(abs(float(values[middle])), 1e-300)
        u, linear = float(draws.of("u", name)[middle]), float(result.budget.u_of(name)[middle])
        ratio = rounded(u / max(linear, 1e-300))
        said.append(f"{word} {100 * u / value:.2f} % (linear {100 * linear / value:.2f} %, ratio {ratio})")
    lines = wrapped(
        f"{_count(draws)}, standard uncertainty at mid-span: {', '.join(said)}", width, "Draws".ljust(label)
    )
    low, high = draws.of("low", "equilibrium_ratio"), draws.of("high", "equilibrium_ratio")
    flow = ", ".join(
        f"{point.low_pa / 1e6:.0f} to {point.high_pa / 1e6:.0f} MPa at {point.at_strain:g}"
        for point in draws.flow
    )
    words = f"95 % intervals: R at mid-span {100 * low[middle]:.1f} to {100 * high[middle]:.1f} %"
    return lines + wrapped(words + (f"; flow stress {flow}" if flow else ""), width, " " * label)


def _count(draws: Draws) -> str:
    settled = {None: "", True: ", settled", False: ", not settled at the limit of draws"}[draws.settled]
    return f"{draws.draws} draws from seed {draws.seed}{settled}"


def budget_table(result: ShotResult, width: int) -> list[str]:
    """Every source, ranked by its greatest share of the variance of stress, strain, rate or R, and whose it is."""
    columns = [ALL_OUTPUTS.index(name) for _, name, _ in put_forward(result)]
    columns.append(ALL_OUTPUTS.index("force_difference"))
    heads = ("stress", "strain", "rate", "R")
    # On a narrow screen a line holds the name, the next one the rest.
    wide = width >= _WIDE
    source, before = ("Source of uncertainty".ljust(31), "") if wide else ("", "  ")
    lines = [] if wide else ["Source of uncertainty"]
    lines += [
        f"{before}{source}{'whose':<8}{'stated':<9}" + "".join(f"{head:>7}" for head in heads),
        f"{before}{'share of the variance (%)':<{len(source)}}" if wide else "  shares of the variance in %",
    ]

    def greatest(line: Contribution) -> float:
        return max(abs(line.share[column]) for column in columns)

    ranked = sorted(result.budget.contributions, key=lambda line: -greatest(line))
    for line in ranked:
        if greatest(line) < _LEAST_SHARE:
            continue
        shares = "".join(f"{_percent(line.share[column]):>7}" for column in columns)
        whose = "rig's" if line.shared else "shot's"
        said = f"{whose:<8}{'assumed' if line.assumed else '':<9}{shares}"
        lines += [f"{line.source:<31}{said}"] if wide else [line.source, f"  {said}"]
        if line.note:
            lines += wrapped(f"({line.note})", width, "  ")
    small = ", ".join(line.source for line in ranked if greatest(line) < _LEAST_SHARE)
    return lines + (
        wrapped(f"less than {100 * _LEAST_SHARE:g} % each: {small}", width, "", "  ") if small else []
    )


def _percent(share: float) -> str:
    return "0" if abs(share) < _LEAST_SHARE else f"{100 * share:.1f}"
