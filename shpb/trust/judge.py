"""Run every check on a shot and collect the findings.

A check is a function in a module of :mod:`shpb.trust.checks`, marked with :func:`check`, that takes the
:class:`Evidence` and returns an :class:`Answer`, or None where it has nothing to look at. Checks are found by
themselves: adding one touches one file.
"""

from __future__ import annotations

import importlib
import inspect
import pkgutil
from collections.abc import Callable
from dataclasses import dataclass

from shpb.limits import LIMIT_FACTS, Limits, key_of, source_of
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Finding, Weight

# A cause is named before what follows from it: findings of equal weight stand in this order of their modules.
CAUSES_FIRST = ("recording", "calibration", "gauges", "stations", "pulses", "specimen", "forward", "response")

Ask = Callable[[Evidence], Answer | None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Check:
    """One check: a function, and what the tables say of it.

    Attributes
    ----------
    name : str
        Name of the function, with spaces.
    what : str
        What it looks at: first line of the function's docstring.
    limits : tuple of str
        Fields of Limits that it uses.
    source : str
        Method or law behind it, or where its limit comes from if it has no field.
    gravest : Weight
        The gravest that it says.
    ask : callable
        The function.
    """

    name: str
    what: str
    limits: tuple[str, ...]
    source: str
    gravest: Weight
    ask: Ask

    def __call__(self, evidence: Evidence) -> Finding | None:
        """The finding on one shot, None where there is nothing to look at."""
        answer = self.ask(evidence)
        if answer is None:
            return None
        return Finding(
            check=self.name,
            weight=answer.weight,
            measured=answer.measured,
            limit=answer.limit,
            source=self.source_with(evidence.settings.limits),
            action=answer.action,
        )

    def source_with(self, limits: Limits) -> str:
        """Method, source of every limit, and the keys that move them; says where this lab set a limit."""
        keys: dict[str, list[str]] = {}
        for name in self.limits:
            keys.setdefault(source_of(name, limits), []).append(key_of(name))
        parts = [f"{source} ([limits] {', '.join(names)})" for source, names in keys.items()]
        return "; ".join([self.source, *parts] if self.source else parts)


def check(*limits: str, gravest: Weight, source: str = "") -> Callable[[Ask], Check]:
    """Mark a function as a check.

    Parameters
    ----------
    *limits : str
        Fields of Limits that it uses.
    gravest : Weight
        The gravest that it says.
    source : str
        Method or law behind it; needed where it has no limit of its own.

    Examples
    --------
    >>> @check("overlap", gravest=Weight.REJECT)
    ... def overlap(evidence: Evidence) -> Answer | None:
    ...     '''The incident pulse must have died away before the reflected one begins.'''
    >>> overlap.name, overlap.source_with(Limits())
    ('overlap', 'common practice ([limits] overlap)')
    """
    unknown = [name for name in limits if name not in LIMIT_FACTS]
    if unknown or not (limits or source):
        raise TypeError(f"a check needs fields of Limits or a source; found {unknown or 'neither'}")

    def made(function: Ask) -> Check:
        what = (inspect.getdoc(function) or "").split("\n", 1)[0]
        name = function.__name__.replace("_", " ")
        return Check(name=name, what=what, limits=limits, source=source, gravest=gravest, ask=function)

    return made


def all_checks() -> tuple[Check, ...]:
    """Every check there is: causes first, then in the order of the file."""
    from shpb.trust import checks

    names = [module.name for module in pkgutil.iter_modules(checks.__path__)]
    rank = {name: place for place, name in enumerate(CAUSES_FIRST)}
    names.sort(key=lambda name: rank.get(name, len(rank)))
    modules = [importlib.import_module(f"{checks.__name__}.{name}") for name in names]
    return tuple(value for module in modules for value in vars(module).values() if isinstance(value, Check))


def judge(evidence: Evidence) -> tuple[Finding, ...]:
    """Findings of all checks, gravest first; of equal weight, causes before what follows from them."""
    findings = [finding for one in all_checks() if (finding := one(evidence)) is not None]
    return tuple(sorted(findings, key=lambda finding: -finding.weight.gravity))
