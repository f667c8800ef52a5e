"""Limits of the checks: each with its default, meaning, range and the source of the default.

A lab moves a limit by its key in the table ``[limits]`` of the rig file or of a shot sheet. The class
below is the one table of them: keys, forms, documentation and the source beside every finding follow from it.
"""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass
from typing import Any

from shpb.errors import InputError

COMMON = "common practice"


@dataclass(frozen=True, slots=True)
class LimitFact:
    """What the name and the default of a limit cannot tell; the range is in SI."""

    meaning: str
    low: float
    high: float
    source: str  # of the default
    unit: str  # in which people read it: "%" for a share, "us", "K", "days", or empty


def _limit(
    default: float, low: float, high: float, meaning: str, *, unit: str = "%", source: str = COMMON
) -> Any:
    fact = LimitFact(meaning, low, high, source, unit)
    return dataclasses.field(default=default, metadata={"fact": fact})


@dataclass(frozen=True, slots=True, kw_only=True)
class Limits:
    """Beyond these a check speaks. A share is a fraction: 0.05 is 5 %.

    Raises
    ------
    InputError
        If a limit is no finite number or lies outside its range.

    Examples
    --------
    >>> Limits().replaced(overlap=0.03).overlap
    0.03
    """

    # The record.
    clipped_samples: int = _limit(
        3, 2, 1000, "Consecutive samples at the rail of the scope's range that count as clipped", unit=""
    )
    flat_samples: int = _limit(
        8, 3, 1000, "The same where the rig file states no scope range: samples at one extreme value", unit=""
    )
    least_codes: int = _limit(64, 1, 1e6, "Digitiser steps that a pulse must span at least", unit="")
    noise: float = _limit(
        0.02, 1e-5, 1, "Largest noise of a pulse after the low-pass, as a share of its peak"
    )
    oversampling: float = _limit(
        5.0, 2, 1000, "Sampling rate that is wanted, in multiples of the low-pass's cut-off", unit=""
    )
    zero_line: float = _limit(
        0.01,
        1e-4,
        1,
        "Largest shift of the incident gauge's zero across its pulse beyond drift, share of the peak",
    )
    quiet: float = _limit(
        0.02, 1e-4, 1, "Largest unrest before a pulse beyond white noise, as a share of its peak"
    )
    zero_after: float = _limit(
        0.10, 1e-3, 1, "Largest distance from zero after a pulse, as a share of its peak"
    )
    # The gauges and bars.
    calibration_days: int = _limit(
        365, 1, 36500, "Longest time from the calibration of the rig to the shot", unit="days"
    )
    bandwidth_loss: float = _limit(
        0.05,
        1e-4,
        1,
        "Largest share that gauge length and amplifier may take from a wave at the low-pass's cut-off",
    )
    striker: float = _limit(
        0.05,
        1e-3,
        1,
        "Largest difference between impulse of the incident pulse and momentum of the striker, as a share",
    )
    striker_rebound: float = _limit(
        0.10,
        1e-3,
        1,
        "Impulse that the striker's rebound from a pulse shaper may add, as a share of its momentum",
    )
    momentum: float = _limit(
        0.05,
        1e-3,
        1,
        "Largest part of the impulse of F_in that neither F_out nor the specimen's momentum takes up",
    )
    bar_yield: float = _limit(0.9, 0.01, 1, "Largest stress in a bar, as a share of its yield strength")
    bending: float = _limit(0.10, 1e-3, 10, "Largest bending strain, as a share of the axial strain")
    bar_temperature_k: float = _limit(
        80.0,
        1,
        3000,
        "Difference of the specimen from 20 °C beyond which the bar faces' temperature matters",
        unit="K",
    )
    # The pulses.
    overlap: float = _limit(
        0.02, 1e-4, 1, "Largest tail of the incident pulse under the reflected one, as a share of its peak"
    )
    window_start: float = _limit(
        0.05, 1e-3, 1, "Largest level of a pulse where its window begins, as a share of its peak"
    )
    misalignment_s: float = _limit(
        3e-6,
        1e-8,
        1e-3,
        "Largest difference between a foot and where distances and wave speed put it",
        unit="us",
    )
    misalignment_rise: float = _limit(
        0.25, 1e-3, 10, "What is added to it for pulses of different shape, as a share of the incident rise"
    )
    misalignment_transit_s: float = _limit(
        2e-6, 1e-8, 1e-3, "What is added to it where the specimen's own transit time is not known", unit="us"
    )
    # The specimen.
    specimen_mass: float = _limit(
        0.05,
        1e-4,
        1,
        "Largest difference between the specimen's mass and its density times volume, as a share",
    )
    least_slenderness: float = _limit(
        0.25, 0.01, 10, "Least length by diameter of the specimen", unit="",
        source="common practice; Davies & Hunter 1963 for least inertia",
    )  # fmt: skip
    greatest_slenderness: float = _limit(
        1.2, 0.05, 100, "Greatest length by diameter of the specimen", unit=""
    )
    barrelling: float = _limit(
        0.9, 0.1, 1, "Largest diameter that the specimen may grow to, as a share of the bar's"
    )
    friction: float = _limit(0.05, 1e-3, 1, "Largest share of the stress that friction at the faces may be")
    final_length: float = _limit(
        0.02,
        1e-4,
        1,
        "Largest difference between the strain from the bars and from the final length",
        unit="",
    )
    least_first_slope: float = _limit(
        0.005, 1e-4, 1, "Least first slope of the curve, as a share of the stated modulus",
        source="common practice: soft metals that yield at once show 1 to 10 %",
    )  # fmt: skip
    greatest_first_slope: float = _limit(
        1.0, 0.05, 10, "Greatest first slope of the curve, as a share of the stated modulus",
        source="common practice: 10 to 50 % on metals, bar faces give way",
    )  # fmt: skip
    # The response.
    equilibrium: float = _limit(
        0.05, 1e-4, 1, "Largest |R(t)| that counts as force equilibrium", source="Ravichandran & Subhash 1994"
    )
    late_strain: float = _limit(
        0.03, 1e-4, 1, "Strain beyond which equilibrium counts as reached late", unit=""
    )
    reverberations: float = _limit(
        math.pi, 0.5, 100, "Elastic transits of the specimen that equilibrium needs", unit="",
        source="Davies & Hunter 1963",
    )  # fmt: skip
    rate_variation: float = _limit(
        0.10, 1e-3, 10, "Largest variation of the strain rate (standard deviation over mean)"
    )
    analyses: float = _limit(
        0.03, 1e-3, 1, "Largest difference of the strains by one-wave and three-wave analysis, as a share"
    )
    work: float = _limit(
        0.05, 1e-3, 1, "Largest difference between work at the faces and work in the specimen, as a share"
    )
    closure: float = _limit(
        2.0, 0.5, 100, "Largest misfit of a pulse with its forward run, in standard uncertainties", unit="u",
        source="JCGM 100:2008, 6.2: k = 2 for about 95 %",
    )  # fmt: skip
    inertia: float = _limit(0.03, 1e-3, 1, "Largest share of the flow stress that inertia may be")
    repeat_scatter: float = _limit(
        0.02, 1e-3, 1, "Scatter of the flow stress between repeats beyond what is measured, as a share"
    )

    def __post_init__(self) -> None:
        for name, fact in LIMIT_FACTS.items():
            number = getattr(self, name)
            usable = isinstance(number, int | float) and not isinstance(number, bool)
            if not (usable and math.isfinite(number) and fact.low <= number <= fact.high):
                raise InputError(
                    f"found {number!r}",
                    where=f"limits.{name}",
                    mend=f"Give a number from {fact.low:g} to {fact.high:g}",
                )

    def require_order(self) -> None:
        """Refuse a lower limit above the upper one; apart from each other both may be sound.

        Raises
        ------
        InputError
            Naming the lower limit.
        """
        for name in ("slenderness", "first_slope"):
            least, greatest = (getattr(self, f"{end}_{name}") for end in ("least", "greatest"))
            if least >= greatest:
                raise InputError(
                    f"found {least:g}, not below greatest_{name} = {greatest:g}",
                    where=f"limits.least_{name}",
                    mend="Give the lower limit first",
                )

    def replaced(self, **changes: float) -> Limits:
        """Return a copy with the given limits changed."""
        return dataclasses.replace(self, **changes)  # type: ignore[arg-type]


LIMIT_FACTS: dict[str, LimitFact] = {
    field.name: field.metadata["fact"] for field in dataclasses.fields(Limits)
}
USUAL = Limits()


def limit_in_words(name: str, value: float) -> str:
    """A value of the limit ``name`` in the unit that people read: ``2 %``, ``3 us``.

    Examples
    --------
    >>> limit_in_words("overlap", 0.025)
    '2.5 %'
    """
    unit = LIMIT_FACTS[name].unit
    factor = {"%": 100.0, "us": 1e6}.get(unit, 1.0)
    return f"{factor * value:.3g} {unit}".strip()


def key_of(name: str) -> str:
    """The key of the limit ``name`` as it stands in [limits], without its unit."""
    return name.removesuffix("_s").removesuffix("_k")


def set_by_lab(limits: Limits) -> tuple[str, ...]:
    """Names of the limits that are not the usual ones."""
    return tuple(name for name in LIMIT_FACTS if getattr(limits, name) != getattr(USUAL, name))


def source_of(name: str, limits: Limits) -> str:
    """Where the limit ``name`` comes from: its published source, common practice, or this lab.

    Examples
    --------
    >>> source_of("overlap", USUAL)
    'common practice'
    >>> source_of("overlap", USUAL.replaced(overlap=0.03))
    'set by this lab (usual: 2 %, common practice)'
    """
    source = LIMIT_FACTS[name].source
    if getattr(limits, name) == getattr(USUAL, name):
        return source
    return f"set by this lab (usual: {limit_in_words(name, getattr(USUAL, name))}, {source})"
