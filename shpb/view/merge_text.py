"""A merged campaign as plain text: what went in and what stayed out, then each material.

Words carry the meaning, not colour or glyphs; but for outside names all of it is ASCII, so that any console shows it.
"""

from __future__ import annotations

from shpb.merge.campaign import Merged, MergedMaterial
from shpb.merge.from_shot import RESTRICTED
from shpb.merge.material_curve import MaterialCurve
from shpb.merge.repeats import Repeats
from shpb.view.merge_laws import law_lines
from shpb.view.merge_rates import course_lines, sensitivity_lines, upturn_lines
from shpb.view.merge_table import detail_lines, table_lines
from shpb.view.merge_words import choices_sentence, counted, headline, plain, rate_text, span_text, title
from shpb.view.text import columns_of, padded, printable, wrapped

_LABEL = 14  # columns of the labels
_WIDEST_NAME = 24


def merge_text(merged: Merged, *, width: int = 80, full: bool = False) -> str:
    """Return a merge as text, without a line end after the last line.

    Parameters
    ----------
    merged : Merged
    width : int
        Columns that no line passes, at least 72.
    full : bool
        Whether to add every curve with its remarks, every strain, every law with its residuals.
    """
    width = max(width, 72)
    lines = wrapped(headline(merged), width, "MERGED  ")
    lines += ["", *_left_out(merged, width)]
    lines += wrapped(choices_sentence(merged) + ".", width, "Choices".ljust(_LABEL))
    if full and merged.offsets:
        lines += ["", *_offsets(merged, width)]
    for material in merged.materials:
        lines += ["", *_material(material, width, full=full)]
    return "\n".join(line.rstrip() for line in lines)


def _left_out(merged: Merged, width: int) -> list[str]:
    """Every file that stayed out, and why."""
    if not merged.left_out:
        return wrapped("nothing", width, "Left out".ljust(_LABEL))
    names = [printable(one.origin) for one in merged.left_out]
    name = min(max(map(columns_of, names)), _WIDEST_NAME)
    lines = ["Left out"]
    for shown, one in zip(names, merged.left_out, strict=True):
        lines += wrapped(plain(one.why), width, f"  {padded(shown, name)}  ")
    return lines


def _offsets(merged: Merged, width: int) -> list[str]:
    """Offset yield of every quasi-static test, or why it has none."""
    lines = [f"Offset yield of the quasi-static tests at {100 * merged.settings.offset:g} % plastic strain"]
    name = min(max(columns_of(printable(one.origin)) for one in merged.offsets), _WIDEST_NAME)
    for one in merged.offsets:
        said = f"none: {plain(one.why)}"
        if one.stress_pa is not None:
            said = f"{one.stress_pa / 1e6:.1f} MPa engineering, line with {one.slope_from}"
        lines += wrapped(said, width, f"  {padded(printable(one.origin), name)}  ")
    return lines


def _material(material: MergedMaterial, width: int, *, full: bool) -> list[str]:
    head = wrapped(title(material), width)
    lines = [*head, "=" * max(map(columns_of, head))]
    lines += _conditions(material, width, full=full)
    lines += ["", *table_lines(material, width)]
    if full:
        lines += ["", *detail_lines(material)]
    lines += ["", *sensitivity_lines(material, width, full=full)]
    lines += ["", *upturn_lines(material, width, full=full)]
    lines += ["", *course_lines(material, width, full=full)]
    return [*lines, "", *law_lines(material, width, full=full)]


def _conditions(material: MergedMaterial, width: int, *, full: bool) -> list[str]:
    tests = sum(len(condition.curves) for condition in material.conditions)
    lines = wrapped(
        f"{counted(len(material.conditions), 'condition')} of {counted(tests, 'test')}; rate: mean true rate; strain: "
        "true plastic strain that is covered",
        width,
    )
    lines.append(f"{'no':>3}  {'rate 1/s':>9} {'T K':>5} {'T C':>5}  {'n':>2}  {'by':<12}  strain and tests")
    for number, condition in enumerate(material.conditions, 1):
        lines += _condition(number, condition, width, full=full)
    return lines


def _condition(number: int, condition: Repeats, width: int, *, full: bool) -> list[str]:
    kelvin = condition.temperature_k
    head = (
        f"{number:>3}  {rate_text(condition.mean_rate_per_s):>9} {kelvin:>5.0f} {kelvin - 273.15:>5.0f}  "
        f"{len(condition.curves):>2}  {condition.range.value:<12}  "
    )
    names = ", ".join(sorted(printable(curve.origin) for curve in condition.curves))
    lines = wrapped(f"{span_text(condition)}  {names}", width, head)
    said = [one.in_words() for one in condition.outliers]
    for curve in condition.curves:
        restricted = [remark for remark in curve.remarks if remark.startswith(RESTRICTED)]
        said += [f"{curve.origin} {'; '.join(_told(curve) if full else restricted)}"] * bool(
            full or restricted
        )
    for one in said:
        lines += wrapped(plain(one), width, "       ", "         ")
    return lines


def _told(curve: MaterialCurve) -> list[str]:
    """Everything worth saying of one curve, for the full report."""
    low, high = curve.span
    own = float((curve.u_own_pa / curve.stress_pa).mean())
    shared = f", {100 * curve.u_shared:.2g} % shared ({curve.shared_group})" if curve.u_shared else ""
    return [
        f"{rate_text(curve.mean_rate_per_s)} /s, {curve.temperature_k:.1f} K, strain {low:.4f} to {high:.4f}, u "
        f"{100 * own:.2g} % its own{shared}",
        *curve.remarks,
    ]
