"""Run every check on a shot and collect the findings.

A check is a function in a module of :mod:`shpb.trust.checks`, marked with :func:`check`, that takes
the :class:`Evidence` and returns a :class:`Finding`, or None where it has nothing to look at. Modules are
found by themselves: adding a check touches one file.
"""

from __future__ import annotations

import importlib
import pkgutil
from collections.abc import Callable

from shpb.trust.evidence import Evidence
from shpb.trust.finding import Finding, Weight

Check = Callable[[Evidence], Finding | None]

_ORDER = {Weight.REJECT: 0, Weight.RESTRICT: 1, Weight.NOTE: 2, Weight.FINE: 3}


def check(function: Check) -> Check:
    """Mark a function as a check; its name, with spaces, is the check's name."""
    function.is_check = True  # type: ignore[attr-defined]
    return function


def check_name(function: Check) -> str:
    """Name under which a check reports."""
    return function.__name__.replace("_", " ")


def all_checks() -> tuple[Check, ...]:
    """Every check there is, by module and in the order of the file."""
    from shpb.trust import checks

    found: list[Check] = []
    for module_info in pkgutil.iter_modules(checks.__path__):
        module = importlib.import_module(f"{checks.__name__}.{module_info.name}")
        found += [value for value in vars(module).values() if getattr(value, "is_check", False)]
    return tuple(found)


def judge(evidence: Evidence) -> tuple[Finding, ...]:
    """Findings of all checks, gravest first."""
    findings = (function(evidence) for function in all_checks())
    return tuple(sorted((f for f in findings if f is not None), key=lambda f: _ORDER[f.weight]))
