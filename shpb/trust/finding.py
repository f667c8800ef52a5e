"""A finding: what a check measured, its limit, where the limit comes from, what to do at the bench."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum


class Weight(StrEnum):
    """What a finding means for the verdict."""

    FINE = "fine"  # within the limit; shown in the full table only
    NOTE = "note"  # worth knowing; the shot counts
    RESTRICT = "restrict"  # counts only between two strains
    REJECT = "reject"  # does not count

    @property
    def gravity(self) -> int:
        """0 for fine, 3 for reject."""
        return list(Weight).index(self)


class Verdict(StrEnum):
    """Whether a shot counts. About data only, never about safety."""

    ACCEPT = "accept"
    RESTRICT = "restrict"
    REJECT = "reject"


@dataclass(frozen=True, slots=True, kw_only=True)
class Answer:
    """What a check function says; its name and the source of its limit are put to it by the check."""

    weight: Weight
    measured: str  # with unit
    limit: str  # with unit
    action: str = ""  # what to do at the bench


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """The answer of one check."""

    check: str
    weight: Weight
    measured: str  # with unit
    limit: str  # with unit
    source: str  # where the limit comes from
    action: str = ""  # what to do at the bench

    def __str__(self) -> str:
        text = f"{self.check}: {self.measured} (limit {self.limit})"
        return f"{text}. {self.action}" if self.action and self.weight is not Weight.FINE else text


def percent(share: float) -> str:
    """A share as text: ``2 %``, ``12.5 %``."""
    return f"{100 * share:.3g} %"


def graded(
    value: float,
    limit: float,
    reject: float | None = None,
    *,
    measured: str,
    action: str,
    show: Callable[[float], str] = percent,
    beyond: Weight = Weight.NOTE,
) -> Answer:
    """Grade a value that should be small: fine up to the limit, then a note, beyond ``reject`` a reject.

    Parameters
    ----------
    value, limit : float
        In the same unit.
    reject : float or None
        Value beyond which the shot does not count; None where ``beyond`` is the gravest.
    measured, action : str
        Texts of the finding.
    show : callable
        Turns a limit into text with its unit.
    beyond : Weight
        What a value beyond ``limit`` means.

    Examples
    --------
    >>> graded(0.03, 0.02, 0.05, measured="a tail of 3 %", action="Wait.").weight.value
    'note'
    """
    weight = Weight.FINE if value <= limit else beyond
    text = show(limit)
    if reject is not None:
        text += f", reject beyond {show(reject)}"
        weight = Weight.REJECT if value > reject else weight
    return Answer(weight=weight, measured=measured, limit=text, action=action)


def verdict_of(findings: tuple[Finding, ...]) -> Verdict:
    """The gravest finding decides."""
    weights = {finding.weight for finding in findings}
    if Weight.REJECT in weights:
        return Verdict.REJECT
    return Verdict.RESTRICT if Weight.RESTRICT in weights else Verdict.ACCEPT
