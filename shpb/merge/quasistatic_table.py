"""From the columns of a quasi-static table to one engineering curve, loading positive, checked."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from shpb.arrays import FloatArray
from shpb.merge.quasistatic_facts import Facts
from shpb.merge.table_columns import (
    DISPLACEMENT,
    ENG_STRAIN,
    ENG_STRESS,
    FORCE,
    PLASTIC_STRAIN,
    TIME,
    TRUE_STRAIN,
    TRUE_STRESS,
    Measure,
)  # fmt: skip
from shpb.merge.text_table import TextTable
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind
from shpb.rig.mistakes import Collector

LEAST_READINGS = 5
_LARGEST_STRAIN = 3.0  # a fraction above it is a percentage
_LARGEST_STRESS_PA = 50e9
_STEP_BACK = 1e-3  # of the range of strain: what is more is unloading, not noise
_SAME = 0.02  # by which two statements of one quantity may differ

# In the order in which they are taken: whoever states true values may know more than a constant volume.
_STRAINS = (TRUE_STRAIN, ENG_STRAIN, PLASTIC_STRAIN, DISPLACEMENT)
_STRESSES = (TRUE_STRESS, ENG_STRESS, FORCE)


@dataclass(slots=True)
class Curve:
    """Engineering strain and stress [Pa], or true plastic strain and true stress; shape (samples,)."""

    strain: FloatArray
    stress_pa: FloatArray
    plastic: bool
    time_s: FloatArray | None
    columns: tuple[str, ...]
    remarks: list[str] = field(default_factory=list)
    beside_displacement: bool = False  # a displacement stands in the table too, and was not used


def curve_of(table: TextTable, facts: Facts, area: Quantity | None, seen: Collector) -> Curve | None:
    """Check the columns and turn them into one curve; None where a mistake, noted in ``seen``, forbids it."""
    before = len(seen.mistakes)
    given = {column.measure for column in table.columns if column.measure is not None}
    _need_columns(given, facts, area, seen, complained=before > 0)
    if not table.values:
        return None
    if table.lines.size < LEAST_READINGS:
        count = table.lines.size
        seen.add(
            f"line {table.lines[0]}", f"{count} row{'s' if count != 1 else ''} of numbers",
            f"at least {LEAST_READINGS} readings of a curve", "Export the whole test",
        )  # fmt: skip
        return None
    values = _loading_positive(table, seen)
    for measure in given & set(_STRAINS):
        _check_strain(values[0][measure], measure, table, facts, seen)
    for measure in given & set(_STRESSES):
        _check_stress(values[0][measure], measure, table, seen)
    _check_times(table, seen)
    if seen.mistakes:  # whatever is wrong, in the facts too, the columns cannot be put together without it
        return None
    curve = _as_curve(values[0], table, facts, area, seen)
    curve.remarks[:0] = values[1]
    return None if seen.mistakes else curve


def _need_columns(
    given: set[Measure], facts: Facts, area: Quantity | None, seen: Collector, *, complained: bool
) -> None:
    # A misspelt column is told already; that its quantity is missing then follows from it.
    if not given & set(_STRAINS) and not complained:
        seen.add(
            "the table", "no column of strains", "eng_strain, true_strain, true_plastic_strain or displacement_mm",
            "Add it, or correct the name of the column",
        )  # fmt: skip
    if not given & set(_STRESSES) and not complained:
        seen.add(
            "the table", "no column of stresses", "eng_stress_MPa, true_stress_MPa or force_kN",
            "Add it, or correct the name of the column",
        )  # fmt: skip
    if given & set(_STRAINS) == {DISPLACEMENT} and "gauge_length" not in facts.stated:
        seen.add(
            "gauge_length_mm", "nothing", "a number, because the table holds displacements",
            "Add a line above the table, for example # gauge_length_mm: 6.00",
        )  # fmt: skip
    if given & set(_STRESSES) == {FORCE} and area is None and not facts.stated & {"area", "diameter"}:
        seen.add(
            "area_mm2", "nothing", "area_mm2 or diameter_mm, because the table holds forces",
            "Add a line above the table, for example # diameter_mm: 6.00",
        )  # fmt: skip
    if PLASTIC_STRAIN in given and TRUE_STRESS not in given and given & set(_STRESSES):
        seen.add(
            "the table", "true plastic strain without true stress", "true_stress_MPa beside it",
            "Give the true stress, or the total strain",
        )  # fmt: skip


def _loading_positive(table: TextTable, seen: Collector) -> tuple[dict[Measure, FloatArray], list[str]]:
    """Turn columns that count loading negative; strain and stress must agree about it."""
    values, turned = {}, {}
    for column in table.columns:
        measure = column.measure
        if measure is None:
            continue
        numbers = table.values[measure.name]
        if measure in (*_STRAINS, *_STRESSES) and abs(numbers.min()) > abs(numbers.max()):
            turned[measure] = column.label
            numbers = -numbers
        values[measure] = numbers
    mechanical = [m for m in values if m in (*_STRAINS, *_STRESSES)]
    if turned and len(turned) < len(mechanical):
        straight = next(c.label for c in table.columns if c.measure in mechanical and c.measure not in turned)
        seen.add(
            f"column {next(iter(turned.values()))}", f"negative values, while {straight} is positive",
            "one sign for loading", "Turn the sign of one of the two columns",
        )  # fmt: skip
    remark = f"loading counted negative in the file, turned: {', '.join(turned.values())}"
    return values, [remark] if turned else []


def _check_strain(
    values: FloatArray, measure: Measure, table: TextTable, facts: Facts, seen: Collector
) -> None:
    top = int(np.argmax(values))
    percent = table.unit(measure).suffix == "percent"
    compressed = measure is ENG_STRAIN and facts.text("kind") == TestKind.COMPRESSION
    largest = 1.0 if compressed else _LARGEST_STRAIN
    if measure is not DISPLACEMENT and values[top] >= largest:
        label = table.label(measure)
        looks = values[top] >= _LARGEST_STRAIN or compressed
        shown = values[top] * (100 if percent else 1)
        mend = (
            "Check the column" if percent or not looks else f"If these are per cent, call it {label}_percent"
        )
        seen.add(
            table.at(measure, top), f"{shown:.6g}{' %' if percent else ''}",
            f"a fraction below {largest:g}", mend,
        )  # fmt: skip
    if values[top] <= 0:
        seen.add(
            f"column {table.label(measure)}", "no value above zero", "strain that rises", "Check the column"
        )
        return
    highest = np.maximum.accumulate(values)
    allowed = _STEP_BACK * float(np.ptp(values))
    back = np.flatnonzero(highest - values > allowed)
    if back.size:
        # The first line of the way back, not the one at which it became too much.
        first = int(np.flatnonzero(values[: back[0]] == highest[back[0]])[-1]) + 1
        seen.add(
            table.at(measure, first), "strain that decreases", "strain that rises from row to row",
            f"Cut the table before line {table.lines[first]} if the unloading begins there",
        )  # fmt: skip


def _check_stress(values: FloatArray, measure: Measure, table: TextTable, seen: Collector) -> None:
    top = int(np.argmax(values))
    if values[top] <= 0:
        seen.add(f"column {table.label(measure)}", "no value above zero", "loading", "Check the column")
    elif measure is not FORCE and values[top] > _LARGEST_STRESS_PA:
        seen.add(
            table.at(measure, top), f"a stress of {values[top] / 1e9:.4g} GPa",
            f"below {_LARGEST_STRESS_PA / 1e9:g} GPa", "Check the unit at the end of the column's name",
        )  # fmt: skip


def _check_times(table: TextTable, seen: Collector) -> None:
    times = table.values.get(TIME.name)
    if times is None:
        return
    bad = np.flatnonzero(np.diff(times) <= 0)
    if bad.size:
        seen.add(
            table.at(TIME, int(bad[0]) + 1), f"{times[bad[0] + 1]:.6g} s after {times[bad[0]]:.6g} s",
            "times that rise", "Correct the column, or leave it out and state the rate",
        )  # fmt: skip


def _as_curve(
    values: dict[Measure, FloatArray], table: TextTable, facts: Facts, area: Quantity | None, seen: Collector
) -> Curve:
    kind = TestKind(facts.text("kind"))
    remarks: list[str] = []
    time = values.get(TIME)
    if PLASTIC_STRAIN in values:
        columns = (table.label(PLASTIC_STRAIN), table.label(TRUE_STRESS))
        return Curve(values[PLASTIC_STRAIN], values[TRUE_STRESS], True, time, columns)
    length = facts.quantity("gauge_length")
    strains = {m: v for m, v in values.items() if m in _STRAINS}
    by_strain = {m: _engineering_strain(v, m, kind) for m, v in strains.items() if m is not DISPLACEMENT}
    if not by_strain and length is not None:
        by_strain = {DISPLACEMENT: values[DISPLACEMENT] / length}
    elif DISPLACEMENT in values:
        remarks.append(f"strain taken from {table.label(next(iter(by_strain)))}, not from the displacement")
    used = next(m for m in _STRAINS if m in by_strain)
    _require_same(by_strain, "strain", table, seen)
    strain = by_strain[used]
    by_stress = {
        m: _engineering_stress(values[m], m, strain, kind, area)
        for m in _STRESSES
        if m in values and (m is not FORCE or area is not None)
    }
    _require_same(by_stress, "stress", table, seen)
    source = next(m for m in _STRESSES if m in by_stress)
    _require_possible(strain, by_stress[source], used, source, kind, table, seen)
    columns = (table.label(used), table.label(source))
    beside = DISPLACEMENT in values and used is not DISPLACEMENT
    return Curve(strain, by_stress[source], False, time, columns, remarks, beside)


def _require_possible(
    strain: FloatArray,
    stress_pa: FloatArray,
    used: Measure,
    source: Measure,
    kind: TestKind,
    table: TextTable,
    seen: Collector,
) -> None:
    """Displacement over gauge length and force over area must come out as a strain and a stress, too."""
    row = int(np.argmax(np.abs(strain)))
    largest = 1.0 if kind is TestKind.COMPRESSION else _LARGEST_STRAIN
    if abs(strain[row]) >= largest:
        seen.add(
            table.at(used, row),
            f"a strain of {strain[row]:.4g}",
            f"below {largest:g}",
            "Check the gauge length and the unit of the displacement",
        )
    row = int(np.argmax(np.abs(stress_pa)))
    if abs(stress_pa[row]) > _LARGEST_STRESS_PA:
        seen.add(
            table.at(source, row),
            f"a stress of {stress_pa[row] / 1e9:.4g} GPa",
            f"below {_LARGEST_STRESS_PA / 1e9:g} GPa",
            "Check the area and the unit of the force",
        )


def _engineering_strain(values: FloatArray, measure: Measure, kind: TestKind) -> FloatArray:
    """Engineering strain of a true strain at constant volume; the inverse of what is done later."""
    if measure is not TRUE_STRAIN:
        return values
    return -np.expm1(-values) if kind is TestKind.COMPRESSION else np.expm1(values)


def _engineering_stress(
    values: FloatArray, measure: Measure, strain: FloatArray, kind: TestKind, area: Quantity | None
) -> FloatArray:
    if measure is FORCE:
        return values / float(area) if area is not None else values
    if measure is ENG_STRESS:
        return values
    return values / (1 - strain) if kind is TestKind.COMPRESSION else values / (1 + strain)


def _require_same(
    by_measure: dict[Measure, FloatArray], what: str, table: TextTable, seen: Collector
) -> None:
    """Two columns for one quantity must agree: else the kind of test, the area or a unit is wrong."""
    (first, reference), *others = by_measure.items()
    for measure, values in others:
        off = np.abs(values - reference)
        worst = int(np.argmax(off))
        share = float(off[worst] / np.abs(reference).max())
        if share > _SAME:
            seen.add(
                table.at(measure, worst), f"a {what} that differs by {100 * share:.3g} % from {table.label(first)}",
                "columns that agree, or one of them",
                f"Check kind, area and units, or call the one that is wrong note_{table.label(measure)}",
            )  # fmt: skip
