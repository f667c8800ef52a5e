"""The columns that a quasi-static table may have: what they are called, and in which units."""

from __future__ import annotations

import re
from dataclasses import dataclass

from shpb.rig.key import PLAIN, Unit
from shpb.rig.keys import GPA, MICRON, MM, MPA, PA, SECOND, M
from shpb.rig.mistakes import nearest

NEWTON = Unit("N", "N")
KILONEWTON = Unit("kN", "kN", 1e3)
N_MM2 = Unit("N_mm2", "N/mm²", 1e6)
PERCENT = Unit("percent", "%", 1e-2)
MM_PER_KN = Unit("mm_per_kN", "mm/kN", 1e-6)
MILLISECOND = Unit("ms", "ms", 1e-3)
MINUTE = Unit("min", "min", 60.0)

NOTE_PREFIX = "note_"  # a column of the lab's own: kept out, and not complained about


@dataclass(frozen=True, slots=True)
class Measure:
    """One quantity that a column may hold, under each of its names and in each of its units."""

    name: str
    others: tuple[str, ...]  # further names that the trade uses for it
    units: tuple[Unit, ...]

    def columns(self) -> list[tuple[str, Unit]]:
        """Every accepted column name with its unit."""
        return [
            (f"{name}_{unit.suffix}" if unit.suffix else name, unit)
            for name in (self.name, *self.others)
            for unit in self.units
        ]

    @property
    def example(self) -> str:
        """The first column name, for messages."""
        return self.columns()[0][0]


_STRESS = (MPA, PA, GPA, N_MM2)
_STRAIN = (PLAIN, PERCENT)
FORCE = Measure("force", ("load",), (KILONEWTON, NEWTON))
DISPLACEMENT = Measure("displacement", ("shortening", "extension"), (MM, M, MICRON))
ENG_STRAIN = Measure("eng_strain", ("engineering_strain",), _STRAIN)
TRUE_STRAIN = Measure("true_strain", ("logarithmic_strain",), _STRAIN)
PLASTIC_STRAIN = Measure("true_plastic_strain", ("plastic_strain",), _STRAIN)
ENG_STRESS = Measure("eng_stress", ("engineering_stress",), _STRESS)
TRUE_STRESS = Measure("true_stress", (), _STRESS)
TIME = Measure("time", (), (SECOND, MILLISECOND, MINUTE))
COMPLIANCE = Measure("compliance", (), (MM_PER_KN,))

CURVE_MEASURES = (
    FORCE, DISPLACEMENT, ENG_STRAIN, TRUE_STRAIN, PLASTIC_STRAIN, ENG_STRESS, TRUE_STRESS, TIME,
)  # fmt: skip
MACHINE_MEASURES = (FORCE, DISPLACEMENT, COMPLIANCE, TIME)

# Names that could be either of two quantities: never guessed.
_EITHER = {
    "strain": "eng_strain or true_strain",
    "stress": "eng_stress_MPa or true_stress_MPa",
}
_IN_BRACKETS = re.compile(r"^(?P<name>.*?)\s*[(\[]\s*(?P<unit>[^()\[\]]*)\s*[)\]]$")
_SPELT = {"%": "percent", "µm": "um", "μm": "um", "n/mm²": "N_mm2", "n/mm2": "N_mm2", "mm/kn": "mm_per_kN"}


@dataclass(frozen=True, slots=True)
class Column:
    """What one label over the numbers means.

    ``measure`` is None where the column is left out: a note of the lab's own, or one that
    ``problem`` (found, expected, mend) says is wrong.
    """

    label: str
    measure: Measure | None = None
    unit: Unit = PLAIN
    problem: tuple[str, str, str] | None = None


def column_of(label: str, measures: tuple[Measure, ...]) -> Column:
    """Find what a label means, whatever its capitals, with the unit as its end or in brackets.

    >>> column_of("Force [kN]", CURVE_MEASURES).measure.name
    'force'
    >>> column_of("strain", CURVE_MEASURES).problem[1]
    'eng_strain or true_strain'
    """
    word = _plain(label)
    if not word or word.casefold().startswith(NOTE_PREFIX):
        return Column(label)
    known = {name.casefold(): (m, unit) for m in measures for name, unit in m.columns()}
    found = known.get(word.casefold())
    if found is not None:
        return Column(label, *found)
    return Column(label, problem=_problem(word, measures))


def _plain(label: str) -> str:
    """``Eng. strain [%]`` as ``Eng_strain_percent``."""
    name, unit = label.strip(), ""
    bracket = _IN_BRACKETS.match(name)
    if bracket:
        name, unit = bracket["name"], bracket["unit"].strip()
        unit = "" if unit in {"-", "1", "mm/mm", "m/m"} else _SPELT.get(unit.casefold(), unit)
    name = re.sub(r"[\s.]+", "_", name.strip()).strip("_")
    return f"{name}_{unit}" if unit else name


def _problem(word: str, measures: tuple[Measure, ...]) -> tuple[str, str, str]:
    stem = next((s for s in _EITHER if re.fullmatch(rf"{s}(_[a-z0-9]+)*", word.casefold())), "")
    if stem and any(m.name.endswith(stem) for m in measures):
        return (
            "a name that could be engineering or true",
            _EITHER[stem],
            "Say which it is in the column's name",
        )
    for measure in measures:
        if word.casefold() in {name.casefold() for name in (measure.name, *measure.others)}:
            names = " or ".join(f"{word}_{unit.suffix}" for unit in measure.units[:2])
            return "a column without a unit", names, "End the column's name with its unit"
    every = [name for m in measures for name, _ in m.columns()]
    guess = nearest(word, every)
    mend = (
        f"Did you mean {guess}?"
        if guess
        else f"To keep it beside the curve, call it {NOTE_PREFIX}{word[:40]}"
    )
    return "an unknown column", "one of " + ", ".join(m.example for m in measures), mend
