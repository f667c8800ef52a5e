"""Quasi-static tests in: a text table with its facts becomes a checked curve in SI, loading positive."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path

from shpb.arrays import FloatArray, frozen
from shpb.errors import FileMistakes, InputError
from shpb.merge.machine import Compliance, read_compliance
from shpb.merge.quasistatic_facts import Facts, read_facts, sidecar_of
from shpb.merge.quasistatic_keys import FACT_TABLE
from shpb.merge.quasistatic_table import Curve, curve_of
from shpb.merge.table_columns import CURVE_MEASURES, TIME
from shpb.merge.text_table import TextTable, read_table
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind
from shpb.rig.mistakes import Collector

_COMPLIANCES = ("compliance", "compliance_curve", "blank_run", "slope_correction")


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class QuasistaticTest:
    """A slow test as it was measured, in SI, loading positive; nothing is corrected yet.

    Attributes
    ----------
    strain : float array, shape (samples,)
        Engineering strain, or true plastic strain where ``plastic`` says so.
    stress_pa : float array, shape (samples,)
        Engineering stress [Pa], or true stress where ``plastic`` says so.
    plastic : bool
        Whether the table already held true plastic strain.
    time_s : float array or None
        Times of the readings [s].
    rate_per_s : Quantity or None
        Strain rate as stated; None where only the times tell.
    rate_is_engineering : bool
        Whether that is the rate of engineering strain.
    compliance : Compliance or None
        Of the machine, to be taken out of ``strain``.
    slope_correction : bool
        Whether the elastic slope shall be corrected instead.
    stress_u, stress_u_shared : float or None
        Relative standard uncertainty of stress: the test's own, and the machine's. None where not stated.
    columns : tuple of str
        Names of the columns that the curve was taken from.
    origin, sha256 : str
        Name of the table, and the hash of its bytes.
    sources : tuple of (str, str)
        Name and hash of every file that was read: the table, the TOML file beside it, the machine's curve.
    remarks : tuple of str
        What a reader should know about how the file was understood.
    """

    material: str
    kind: TestKind
    temperature_k: Quantity
    strain: FloatArray
    stress_pa: FloatArray
    plastic: bool = False
    time_s: FloatArray | None = None
    rate_per_s: Quantity | None = None
    rate_is_engineering: bool = False
    young_modulus_pa: Quantity | None = None
    gauge_length_m: Quantity | None = None
    area_m2: Quantity | None = None
    compliance: Compliance | None = None
    slope_correction: bool = False
    machine: str = ""
    stress_u: float | None = None
    stress_u_shared: float | None = None
    specimen_id: str = ""
    columns: tuple[str, ...] = ()
    origin: str = ""
    sha256: str = ""
    sources: tuple[tuple[str, str], ...] = ()
    remarks: tuple[str, ...] = ()


def read_quasistatic(path: str | Path) -> QuasistaticTest:
    """Read a quasi-static test from a text table.

    The table has one line of column names with their units (``force_kN,displacement_mm`` or
    ``eng_strain,eng_stress_MPa``, see :mod:`shpb.merge.table_columns`), separated by commas, semicolons, tabs
    or blanks, with decimal point or comma. The facts (:mod:`shpb.merge.quasistatic_keys`) stand above it as
    ``# key: value`` lines, or in a TOML file of the same name.

    Parameters
    ----------
    path : str or Path
        The table.

    Returns
    -------
    QuasistaticTest
        The curve as measured, in SI, with its facts.

    Raises
    ------
    FileMistakes
        With every mistake of table and TOML file at once: file, line or key, what was found, what was
        expected, and the mend.
    InputError
        If a file cannot be read at all.
    """
    path = Path(path)
    seen, beside = Collector(path.name), Collector(sidecar_of(path).name)
    table = read_table(path, "quasi-static table", CURVE_MEASURES, seen)
    facts = read_facts(table.facts, sidecar_of(path), seen, beside)
    _need_facts(facts, table, seen)
    area = _area(facts, seen)
    curve = curve_of(table, facts, area, seen)
    compliance = _compliance(facts, path, curve, seen)
    mistakes = [*seen.mistakes, *beside.mistakes]
    if mistakes:
        raise FileMistakes(mistakes)
    machine = [] if compliance is None or not compliance.sha256 else [(compliance.origin, compliance.sha256)]
    temperature = facts.quantity("temperature")
    assert curve is not None
    assert temperature is not None
    return QuasistaticTest(
        material=facts.text("material"),
        kind=TestKind(facts.text("kind")),
        temperature_k=temperature,
        strain=frozen(curve.strain),
        stress_pa=frozen(curve.stress_pa),
        plastic=curve.plastic,
        time_s=None if curve.time_s is None else frozen(curve.time_s),
        rate_per_s=facts.quantity("rate"),
        rate_is_engineering=facts.text("rate_held") == "engineering",
        young_modulus_pa=facts.quantity("young_modulus"),
        gauge_length_m=facts.quantity("gauge_length"),
        area_m2=area,
        compliance=compliance,
        slope_correction=bool(facts.given.get("slope_correction", False)),
        machine=facts.text("machine"),
        stress_u=facts.number("stress_u"),
        stress_u_shared=facts.number("stress_u_shared"),
        specimen_id=facts.text("specimen_id"),
        columns=curve.columns,
        origin=path.name,
        sha256=table.sha256,
        sources=((path.name, table.sha256), *facts.sources, *machine),
        remarks=(*facts.remarks, *curve.remarks),
    )


def _need_facts(facts: Facts, table: TextTable, seen: Collector) -> None:
    timed = any(column.measure is TIME for column in table.columns)
    for key in FACT_TABLE.keys:
        if not key.required or key.stem in facts.stated or (key.stem == "rate" and timed):
            continue
        seen.add(
            key.name,
            "nothing",
            key.expected(key.units[0]),
            f"Add a line above the table, for example # {key.name}: {key.example.strip(chr(34))}",
        )


def _area(facts: Facts, seen: Collector) -> Quantity | None:
    """Area of the section [m^2] from whichever was stated."""
    area, diameter = facts.quantity("area"), facts.quantity("diameter")
    if diameter is None:
        return area
    u = None if diameter.u is None else math.pi * diameter / 2 * diameter.u
    round_area = Quantity(math.pi * diameter**2 / 4, u, diameter.origin)
    if area is None:
        return round_area
    if abs(area / round_area - 1) > 0.005:
        seen.add(
            facts.where["area"], f"{area * 1e6:.4g} mm²", f"{round_area * 1e6:.4g} mm², which the diameter gives",
            "Keep the one that was measured",
        )  # fmt: skip
    return area


def _compliance(facts: Facts, path: Path, curve: Curve | None, seen: Collector) -> Compliance | None:
    """The machine's compliance, however it was stated; checks that it can be used."""
    stated = [stem for stem in _COMPLIANCES if facts.given.get(stem)]
    if len(stated) > 1:
        where = facts.where[stated[1]]
        seen.add(where, f"{' and '.join(stated)}", "one way to take out the compliance", "Keep one of them")
    if not stated:
        return None
    stem = stated[0]
    where = facts.where[stem]
    if stem != "slope_correction" and curve is not None and curve.beside_displacement:
        curve.remarks.append(f"{stem} not used: the strain was not taken from the displacement")
        return None
    if curve is not None and curve.plastic:
        seen.add(
            where,
            "a correction of plastic strain",
            "none",
            "Give the table before it was made plastic strain",
        )
        return None
    if stem == "slope_correction":
        if "young_modulus" not in facts.stated:
            seen.add(
                "young_modulus_GPa", "nothing", "the true modulus that the slope is corrected to", "Add it"
            )
        return None
    told = {mistake.key for mistake in seen.mistakes}
    for name, stems in (("gauge_length_mm", {"gauge_length"}), ("area_mm2", {"area", "diameter"})):
        if not stems & facts.stated and name not in told:
            seen.add(name, "nothing", "a number, because a compliance is stated", "Add it")
    number = facts.quantity("compliance")
    if stem == "compliance" and number is not None:
        return Compliance.of_number(float(number), number.origin or "stated number")
    try:
        return read_compliance(path.parent / facts.text(stem), blank_run=stem == "blank_run")
    except FileMistakes as error:
        seen.mistakes.extend(error.mistakes)
    except InputError as error:
        seen.add(where, f"{facts.text(stem)}: {error.what}", "a readable table", error.mend)
    return None
