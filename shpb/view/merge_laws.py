"""The fitted laws of a merged material, as text: how well each does, its parameters, and which could not be fitted."""

from __future__ import annotations

from shpb.merge.campaign import MergedMaterial
from shpb.merge.model_fit import ModelFit, ParameterEstimate, Standing
from shpb.merge.scope import scope_words
from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.merge_words import for_people, plain, rate_text, reasons_not_fitted
from shpb.view.text import rounded, wrapped

_INDENT = "  "
_FIRST_WARNINGS = 3


def law_lines(material: MergedMaterial, width: int, *, full: bool) -> list[str]:
    """All laws in one table, the best in detail (all of them with ``full``), and why others were not fitted."""
    lines: list[str] = []
    if material.fits:
        lines += _ranking(material, width)
        for fit in material.fits if full else material.fits[:1]:
            lines += ["", *_law(fit, width, full=full)]
    if material.not_fitted:
        lines += [""] * bool(lines) + ["Laws not fitted"]
        for keys, why in reasons_not_fitted(material):
            lines += wrapped(f"{', '.join(keys)}: {why}", width, _INDENT, _INDENT * 2)
    return lines or ["Laws: none were asked for."]


def _ranking(material: MergedMaterial, width: int) -> list[str]:
    lines = wrapped(
        "Laws: AICc compares those fitted to the same points, the lowest is best; left out: error of predicting each "
        "condition from the others; scatter: about the law, in stated uncertainties (1 or less is printed as 1)",
        width,
    )
    lines.append(
        f"{_INDENT}{'law':<22} {'points':>6} {'AICc':>9} {'left out':>9} {'scatter':>8} {'warnings':>9}"
    )
    for fit in material.fits:
        aicc = "-" if fit.aicc is None else f"{fit.aicc:.1f}"
        left_out = "-" if fit.left_out_rms is None else f"{rounded(100 * fit.left_out_rms, 2)} %"
        lines.append(
            f"{_INDENT}{fit.model.key:<22} {len(fit.points):>6} {aicc:>9} {left_out:>9} {fit.scatter_factor:>8.1f} "
            f"{len(fit.warnings):>9}"
        )
    return lines


def _law(fit: ModelFit, width: int, *, full: bool) -> list[str]:
    lines = wrapped(f"{fit.model.name}, fitted to {plain(scope_words(fit))}", width)
    lines += wrapped(fit.model.formula, width, _INDENT, _INDENT * 2)
    facts = _facts(fit)
    if facts:
        lines += wrapped(f"taken as known: {facts}", width, _INDENT, _INDENT * 2)
    lines.append(f"{_INDENT}{'':<12} {'value':>10} {'unit':<5} {'u':>9}  95 % interval")
    for estimate in fit.estimates:
        lines += _parameter(estimate, width)
    if not fit.converged:
        lines += wrapped("the search did not come to its end: do not use these numbers", width, _INDENT)
    told = {f"{one.name}: {one.reason}" for one in fit.estimates}
    warnings = [warning for warning in fit.warnings if warning not in told]
    shown = warnings if full else warnings[:_FIRST_WARNINGS]
    for warning in shown:
        lines += wrapped(plain(warning), width, f"{_INDENT}! ", _INDENT * 2)
    if len(shown) < len(warnings):
        lines.append(f"{_INDENT}! and {len(warnings) - len(shown)} more (--full)")
    if full:
        lines += _fit_details(fit, width)
    return lines


def _facts(fit: ModelFit) -> str:
    """Everything that the law takes as known, so that its parameters can be used: Johnson-Cook's rate among it."""
    said = []
    for fact in fit.model.facts:
        value = fit.model.known_facts()[fact.name]
        unit, factor = for_people(fact.unit, abs(value))
        name = fact.name
        for end in ("_per_s", "_pa", "_k", "_m"):
            name = name.removesuffix(end)
        said.append(
            f"{name.replace('_', ' ')} {value * factor:.6g} {'/s' if unit == '1/s' else unit}".rstrip()
        )
    return ", ".join(said)


def _parameter(estimate: ParameterEstimate, width: int) -> list[str]:
    unit, factor = for_people(estimate.unit, 1.0)
    head = f"{_INDENT}{estimate.name:<12} "
    if estimate.u is None:
        held = "" if estimate.value is None else f" {rounded(estimate.value * factor)} {unit}".rstrip()
        # The reason of a bound says so itself.
        standing = (
            "" if estimate.standing is Standing.AT_BOUND and estimate.reason else estimate.standing.value
        )
        words = ": ".join(filter(None, (f"{standing}{held}".strip(), plain(estimate.reason))))
        return wrapped(words, width, head)
    value, u = ((estimate.value or 0.0) * factor, estimate.u * factor)
    ends = [to_uncertainty(None if end is None else end * factor, u) for end in (estimate.low, estimate.high)]
    text = f"{head}{to_uncertainty(value, u):>10} {unit:<5} {uncertainty(u):>9}  {ends[0]} to {ends[1]}"
    return wrapped_tail(text, estimate.reason, width)


def wrapped_tail(text: str, remark: str, width: int) -> list[str]:
    """A line of a table, with its remark on lines of its own."""
    return [text, *(wrapped(plain(remark), width, _INDENT * 3) if remark else [])]


def _fit_details(fit: ModelFit, width: int) -> list[str]:
    lines = wrapped(
        f"chi2 {fit.chi2:.1f} of {fit.degrees_of_freedom} degrees of freedom; condition number "
        f"{fit.condition_number:.2g}; source: {fit.model.source}",
        width,
        _INDENT,
        _INDENT * 2,
    )
    for shared in fit.shared:
        lines += wrapped(
            f"scale error of {plain(shared.name)}: {100 * shared.d:+.2f} % ({_u_words(shared.u)}, stated "
            f"{100 * shared.prior_u:.2f} %)",
            width,
            _INDENT,
            _INDENT * 2,
        )
    lines += _correlation(fit)
    lines.append(f"{_INDENT}measured less law, % of the law's stress")
    lines.append(f"{_INDENT}{'rate 1/s':>9} {'T K':>5} {'points':>6} {'mean':>6} {'rms':>6} {'left out':>8}")
    for one in fit.conditions:
        left_out = "-" if one.left_out_rms is None else f"{100 * one.left_out_rms:.2f}"
        head = (
            f"{_INDENT}{rate_text(one.rate_per_s):>9} {one.temperature_k:>5.0f} {one.points:>6} "
            f"{100 * one.mean:>+6.2f} {100 * one.rms:>6.2f} {left_out:>8}  "
        )
        lines += wrapped(plain(one.left_out_reason), width, head)
    return lines


def _u_words(u: float | None) -> str:
    return "stopped at three times its stated uncertainty" if u is None else f"u {100 * u:.2f} %"


def _correlation(fit: ModelFit) -> list[str]:
    names = fit.model.names
    lines = [f"{_INDENT}correlation {' '.join(f'{name[:7]:>7}' for name in names)}"]
    for i, name in enumerate(names):
        cells = " ".join(f"{fit.correlation[i, j]:>7.3f}" for j in range(i + 1))
        lines.append(f"{_INDENT}{name[:11]:<11} {cells}")
    return lines
