"""Several shots as a table of plain text: one line a shot."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass

from shpb.pulse.front import UnusableShotError
from shpb.reduction import ShotResult
from shpb.trust.finding import Verdict, Weight
from shpb.trust.repeats import RepeatShot, repeat_shot
from shpb.view.repeats import repeat_lines
from shpb.view.text import padded, printable, rounded, wrapped
from shpb.view.wording import strain_text, telling

FAILED = "failed"
_USUAL_STRAIN = 0.10  # shown where several strains are known for as many shots
_WIDEST_NAME = 16


@dataclass(frozen=True, slots=True, kw_only=True)
class ListRow:
    """What one line of the table holds: small, and fit to come from another process.

    Attributes
    ----------
    verdict : str
        accept, restrict, reject, or failed where the shot could not be reduced.
    strain_span : (float, float) or None
        True strain at both ends of what counts.
    flow : tuple of (strain, plastic, stress [Pa])
        Flow stresses that are known; ``plastic`` says which strain it is.
    reasons : str
        Checks that say something, gravest first; the error where the shot could not be reduced.
    repeat : RepeatShot or None
        What its repeats are held against; None where the shot does not count.
    """

    shot_id: str
    verdict: str
    rate_per_s: float | None = None
    strain_span: tuple[float, float] | None = None
    flow: tuple[tuple[float, bool, float], ...] = ()
    reasons: str = ""
    repeat: RepeatShot | None = None


def list_row(result: ShotResult) -> ListRow:
    """The line of one reduced shot."""
    response = result.response
    # A note does not matter beside what restricts or rejects.
    said = telling(result.findings)
    grave = tuple(f for f in said if f.weight is not Weight.NOTE) or said
    return ListRow(
        shot_id=result.sheet.shot_id,
        verdict=result.verdict.value,
        rate_per_s=response.rate.mean_per_s,
        strain_span=response.strain_span,
        flow=tuple((f.at_strain, f.plastic, f.stress_pa) for f in response.flow if f.stress_pa is not None),
        reasons=", ".join(f.check for f in grave),
        repeat=repeat_shot(result),
    )


def list_row_of_error(shot_id: str, error: Exception) -> ListRow:
    """The line of a shot that could not be reduced: rejected where its record is at fault, else failed."""
    verdict = Verdict.REJECT.value if isinstance(error, UnusableShotError) else FAILED
    return ListRow(shot_id=shot_id, verdict=verdict, reasons=str(getattr(error, "what", "") or error))


def list_text(rows: Iterable[ListRow], *, width: int = 80) -> str:
    """Return the table of several shots, verdicts counted and repeats compared below it; no line passes ``width``."""
    rows = list(rows)
    if not rows:
        return "No shots."
    width = max(width, 60)
    strain = _common_strain(rows)
    name = min(max([4, *(len(printable(row.shot_id)) for row in rows)]), _WIDEST_NAME)
    at = "-" if strain is None else f"{strain:g}"
    lines = [
        f"{'':<{name}}           rate   strain that   MPa at",
        f"{'shot':<{name}} verdict    1/s   counts        {at:<6}  reasons",
    ]
    lines += [_line(row, name, strain, width) for row in rows]
    lines += ["", *_legend(rows, strain, width)]
    return "\n".join(line.rstrip() for line in lines)


def _common_strain(rows: list[ListRow]) -> float | None:
    """The strain at which most shots have a flow stress."""
    counts = Counter(strain for row in rows for strain, _, _ in row.flow)
    if not counts:
        return None
    return max(counts, key=lambda strain: (counts[strain], -abs(strain - _USUAL_STRAIN)))


def _line(row: ListRow, name: int, strain: float | None, width: int) -> str:
    rate = "" if row.rate_per_s is None else rounded(row.rate_per_s)
    span = "" if row.strain_span is None else "-".join(map(strain_text, row.strain_span))
    stress = next(((p, s) for e, p, s in row.flow if e == strain), None)
    flow = "" if stress is None else rounded(stress[1] / 1e6) + ("" if stress[0] else "*")
    head = f"{padded(printable(row.shot_id), name)} {row.verdict.upper():<8}{rate:>6}   {span:<12}{flow:>7}  "
    return head + padded(printable(row.reasons), width - len(head)) if len(head) < width else head[:width]


def _legend(rows: list[ListRow], strain: float | None, width: int) -> list[str]:
    counts = Counter(row.verdict for row in rows)
    said = ", ".join(f"{counts[v]} {v}" for v in ("accept", "restrict", "reject", FAILED) if counts[v])
    lines = wrapped(f"{len(rows)} shot{'' if len(rows) == 1 else 's'}: {said}.", width)
    lines += wrapped("rate: mean engineering strain rate; strain: true.", width)
    if strain is not None:
        lines += wrapped(f"MPa: true flow stress at true plastic strain {strain:g}.", width)
    if any(not plastic for row in rows for e, plastic, _ in row.flow if e == strain):
        lines += wrapped("* at total true strain: no Young's modulus is stated for the specimen.", width)
    return lines + repeat_lines((row.repeat for row in rows if row.repeat is not None), width)
