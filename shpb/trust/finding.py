"""A finding: what a check measured, its limit, where the limit comes from, what to do at the bench."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Weight(StrEnum):
    """What a finding means for the verdict."""

    FINE = "fine"  # within the limit; shown in the full table only
    NOTE = "note"  # worth knowing; the shot counts
    RESTRICT = "restrict"  # counts only between two strains
    REJECT = "reject"  # does not count


class Verdict(StrEnum):
    """Whether a shot counts. About data only, never about safety."""

    ACCEPT = "accept"
    RESTRICT = "restrict"
    REJECT = "reject"


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


def verdict_of(findings: tuple[Finding, ...]) -> Verdict:
    """The gravest finding decides."""
    weights = {finding.weight for finding in findings}
    if Weight.REJECT in weights:
        return Verdict.REJECT
    return Verdict.RESTRICT if Weight.RESTRICT in weights else Verdict.ACCEPT
