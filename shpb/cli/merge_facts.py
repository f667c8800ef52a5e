"""Facts of the laws from the command line: ``melting_temperature_C=1083`` becomes ``melting_temperature_k``.

The names follow from the facts that the laws declare, so a new law needs nothing here.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

from shpb.errors import InputError
from shpb.rig.key import PLAIN, Unit
from shpb.rig.keys import CELSIUS, GPA, KELVIN, MPA, PA, M
from shpb.rig.mistakes import nearest

if TYPE_CHECKING:
    from shpb.merge.models.model import Fact

_NM = Unit("nm", "nm", 1e-9)
_PER_SECOND = Unit("per_s", "1/s")
# SI unit of a fact: how its name ends in the law, and the units that people may write.
_UNITS: dict[str, tuple[str, tuple[Unit, ...]]] = {
    "K": ("_k", (CELSIUS, KELVIN)),
    "Pa": ("_pa", (GPA, MPA, PA)),
    "m": ("_m", (_NM, M)),
    "1/s": ("_per_s", (_PER_SECOND,)),
}
# Its option of its own: C of the table and of Johnson-Cook refer to one rate.
_REFERENCE_RATE = "reference_rate_per_s"
_OPTION = "--fact"


def facts_from(given: Sequence[str]) -> dict[str, float]:
    """Facts in SI by the names of the laws.

    Parameters
    ----------
    given : sequence of str
        ``name_unit=value`` each.

    Raises
    ------
    InputError
        If one is no such pair, is not known, is stated twice, or is not a positive number.
    """
    known = _known()
    facts: dict[str, float] = {}
    for text in given:
        name, mark, number = (part.strip() for part in text.partition("="))
        if not mark:
            raise InputError(
                f"found {text!r}",
                where=_OPTION,
                mend=f"Write name=value, such as {_OPTION} melting_temperature_C=1083",
            )
        if name not in known:
            raise InputError(f"{name!r} is no fact of a law", where=_OPTION, mend=_meant(name, known))
        stem, unit = known[name]
        value = unit.to_si(_number(number, name))
        if not value > 0:
            raise InputError(
                f"{name} is {number}",
                where=_OPTION,
                mend="Give a positive number (temperatures above absolute zero)",
            )
        if stem in facts:
            raise InputError(f"{name} is stated twice", where=_OPTION, mend="State it once")
        facts[stem] = value
    return facts


def _number(text: str, name: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise InputError(
            f"{name} is {text!r}", where=_OPTION, mend="Give a number alone; its unit ends the name"
        )
    return value


def _meant(name: str, known: dict[str, tuple[str, Unit]]) -> str:
    if name.casefold().startswith("reference_rate"):
        return "Give --reference-rate"
    guess = nearest(name, known)
    if guess.startswith(name):  # the unit is missing: in the one that is written most
        guess = next(first for first in _first_names(known) if known[first][0] == known[guess][0])
    every = ", ".join(dict.fromkeys(_first_names(known)))
    return f"Did you mean {guess}?" if guess else f"There are {every}"


def _first_names(known: dict[str, tuple[str, Unit]]) -> list[str]:
    """One name a fact, in the unit that is written most."""
    first: dict[str, str] = {}
    for name, (stem, _) in known.items():
        first.setdefault(stem, name)
    return list(first.values())


def names_of(fact: Fact) -> list[tuple[str, Unit]]:
    """Every name of a fact with its unit."""
    ending, units = _UNITS.get(fact.unit, ("", (PLAIN,)))
    stem = fact.name.removesuffix(ending)
    return [(f"{stem}_{unit.suffix}" if unit.suffix else fact.name, unit) for unit in units]


def _known() -> dict[str, tuple[str, Unit]]:
    from shpb.merge.models.registry import all_models

    facts = {fact.name: fact for model in all_models() for fact in model.facts}
    return {
        name: (fact.name, unit)
        for fact in facts.values()
        if fact.name != _REFERENCE_RATE
        for name, unit in names_of(fact)
    }
