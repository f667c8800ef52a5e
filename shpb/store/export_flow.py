"""Flow-curve tables for a solver: plastic strain against true stress at several rates and temperatures.

A table comes from a law that was fitted in a merge, or from the measured curves of its conditions. Plastic strain
starts at 0 and rises evenly, the same for every curve; rates and temperatures rise too. A cell outside what was
measured, or what the law was fitted to, is flagged. The comments above each table say where the numbers come from.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.errors import InputError
from shpb.merge.model_fit import ModelFit
from shpb.store.export_cells import comment, csv_text
from shpb.store.export_law import stored_fit
from shpb.store.merge_read import StoredMerge
from shpb.version import VERSION

FLOW_MARK = "# shpb flow table"  # how every table begins
_STEP = 0.01  # of plastic strain, where nothing else is asked for
_MOST_ROWS, _MOST_CURVES = 10_000, 400
_NEAR_K = 10.0  # conditions nearer than this stand at one temperature


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Curve:
    """One curve of a table; arrays of shape (grid,). ``u_pa`` is NaN where it is not known."""

    rate_per_s: float
    temperature_k: float
    stress_pa: FloatArray
    u_pa: FloatArray
    rise_k: FloatArray
    extrapolated: BoolArray
    why: tuple[str, ...]  # by cell; empty where nothing is extrapolated


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FlowTable:
    """A table of one material: its curves on one grid of plastic strain, and what stands above them."""

    material: str
    kind: str
    plastic_strain: FloatArray
    curves: tuple[Curve, ...]
    about: tuple[tuple[str, object], ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Asked:
    """What a table is to hold; None takes what the merge covers.

    Attributes
    ----------
    rates_per_s, temperatures_k : tuple of float or None
        Of a law: each rate at each temperature. Measured curves have their own.
    step, most : float
        Of the grid of plastic strain: its step, and its end.
    adiabatic : bool
        Of a law: the specimen keeps the heat of its plastic work; else it stays at its temperature.
    """

    rates_per_s: tuple[float, ...] | None = None
    temperatures_k: tuple[float, ...] | None = None
    step: float = _STEP
    most: float | None = None
    adiabatic: bool = False


# --- from a law ----------------------------------------------------------------------------------------


def law_table(merge: StoredMerge, number: int, key: str, asked: Asked) -> FlowTable:
    """A table of a fitted law for the material ``number`` (from 1).

    Raises
    ------
    InputError
        If the law was not fitted, or cannot be asked there.
    """
    fit = stored_fit(merge, number, key)
    points = fit.points
    grid = _grid(asked, float(points.plastic_strain.max()))
    rates = asked.rates_per_s or _decades(float(points.rate_per_s.min()), float(points.rate_per_s.max()))
    kelvins = asked.temperatures_k or _apart(points.start_temperatures_k().tolist())
    if not fit.model.uses_rate and asked.rates_per_s is None:
        rates = (float(np.exp(np.log(points.rate_per_s).mean())),)
    if not fit.model.uses_temperature and asked.temperatures_k is None:
        kelvins = (float(np.mean(points.temperature_k)),)
    _require_few(len(rates) * len(kelvins))
    if asked.adiabatic and (points.heat_k_m3_j is None or not fit.model.uses_temperature):
        raise InputError(
            f"{key} of {merge.materials[number - 1]} has no adiabatic curves: the law does not know temperature, or "
            "the heat of the plastic work is not known",
            where="--adiabatic",
            mend="State density and heat capacity of the specimen on the shot sheets and merge again, or leave it out",
        )
    curves = tuple(
        _law_curve(fit, grid, rate, kelvin, asked.adiabatic)
        for kelvin in sorted(kelvins)
        for rate in sorted(rates)
    )
    return FlowTable(
        material=merge.materials[number - 1],
        kind=str(merge.attributes[f"materials/{number}"]["kind"]),
        plastic_strain=grid,
        curves=curves,
        about=(*_law_words(fit, asked), *_origin(merge)),
    )


def _law_curve(fit: ModelFit, grid: FloatArray, rate: float, kelvin: float, adiabatic: bool) -> Curve:
    found = fit.flow_curve(grid, rate, kelvin, adiabatic=adiabatic)
    if not np.isfinite(found.stress_pa).all():
        raise InputError(
            f"{fit.model.name} gives no stress at {rate:g} /s and {kelvin:g} K",
            where="flow table",
            mend="Ask for rates and temperatures nearer to what was tested",
        )
    said = "; ".join(found.reasons)
    return Curve(
        rate_per_s=rate,
        temperature_k=kelvin,
        stress_pa=found.stress_pa,
        u_pa=np.where(np.isfinite(found.u_stress_pa), found.u_stress_pa, np.nan),
        rise_k=found.temperature_k - kelvin,
        extrapolated=found.extrapolated,
        why=tuple(said if far else "" for far in found.extrapolated.tolist()),
    )


def _law_words(fit: ModelFit, asked: Asked) -> Iterator[tuple[str, object]]:
    points, model = fit.points, fit.model
    yield "from", f"fitted law {model.name} ({model.key})"
    yield "formula", model.formula
    yield "source of the law", model.source
    for one in fit.estimates:
        value = "not determined" if one.value is None else f"{one.value:.6g} {one.unit}"
        yield (
            f"constant {one.name}",
            value + (f" (u {one.u:.2g})" if one.u is not None else f" ({one.standing.value})"),
        )
    for name, fact in model.known_facts().items():
        yield f"taken as known, {name}", fact
    yield (
        "fitted to",
        (
            f"plastic strain {points.plastic_strain.min():.3g} to {points.plastic_strain.max():.3g}; "
            f"{_range(points.rate_per_s, '.3g')} per s; {_range(points.temperature_k, '.0f')} K"
        ),
    )
    yield "path", "adiabatic from the stated temperature" if asked.adiabatic else "isothermal"
    for warning in fit.warnings:
        yield "warning", warning


def _range(values: FloatArray, digits: str) -> str:
    """Both ends of a range, one where they are the same."""
    ends = (format(float(end), digits) for end in (values.min(), values.max()))
    return " to ".join(dict.fromkeys(ends))


def _decades(low: float, high: float) -> tuple[float, ...]:
    """Ends of a range of rates and the powers of ten between them."""
    powers = range(int(np.ceil(np.log10(low) + 0.05)), int(np.floor(np.log10(high) - 0.05)) + 1)
    return tuple(sorted({low, high, *(10.0**power for power in powers)}))


def _apart(kelvins: Sequence[float]) -> tuple[float, ...]:
    """Start temperatures, those that lie close together as their mean."""
    groups: list[list[float]] = []
    for kelvin in sorted(kelvins):
        if groups and kelvin - groups[-1][0] < _NEAR_K:
            groups[-1].append(kelvin)
        else:
            groups.append([kelvin])
    return tuple(round(float(np.mean(group)), 2) for group in groups)


# --- measured ------------------------------------------------------------------------------------------


def measured_table(merge: StoredMerge, number: int, asked: Asked) -> FlowTable:
    """A table of the measured mean curves of all conditions of the material ``number`` (from 1).

    Before its first and after its last measured strain a curve is held at the stress it has there, and flagged.

    Raises
    ------
    InputError
        If rates or temperatures were asked for, which only a law can give.
    """
    for given, option in ((asked.rates_per_s, "--rates"), (asked.temperatures_k, "--temperatures")):
        if given is not None:
            raise InputError(
                "measured curves stand at the rates and temperatures of their tests",
                where=option,
                mend="Give --law too, or leave it out",
            )
    if asked.adiabatic:
        raise InputError(
            "only a law can be asked for", where="--adiabatic", mend="Give --law too, or leave it out"
        )
    start = f"materials/{number}/conditions/"
    names = sorted(
        (n for n in merge.attributes if n.startswith(start) and n.count("/") == 3), key=_last_number
    )
    _require_few(len(names))
    ends = [float(merge[f"{name}/plastic_strain"][-1]) for name in names]
    grid = _grid(asked, max(ends))
    curves = sorted(
        (_condition_curve(merge, name, grid) for name in names),
        key=lambda c: (round(c.temperature_k), c.rate_per_s),
    )
    about: list[tuple[str, object]] = [
        ("from", "measured mean curves of the conditions"),
        (
            "path",
            "as tested: bar shots warm up, temperature_rise_K says by how much; slow tests are isothermal",
        ),
        (
            "extrapolated",
            "before the first and after the last measured strain the stress is held at what it is there",
        ),
    ]
    return FlowTable(
        material=merge.materials[number - 1],
        kind=str(merge.attributes[f"materials/{number}"]["kind"]),
        plastic_strain=grid,
        curves=tuple(curves),
        about=(*about, *_origin(merge)),
    )


def _last_number(name: str) -> int:
    return int(name.rsplit("/", 1)[1])


def _condition_curve(merge: StoredMerge, name: str, grid: FloatArray) -> Curve:
    facts = merge.attributes[name]
    strain, stress = merge[f"{name}/plastic_strain"], merge[f"{name}/true_stress"]
    known = np.isfinite(stress)
    strain, stress = strain[known], stress[known]
    u, rise = merge[f"{name}/true_stress_errors"][known], merge.arrays.get(f"{name}/temperature_rise")
    outside = (grid < strain[0] - 1e-9) | (grid > strain[-1] + 1e-9)
    said = f"measured from {strain[0]:.3g} to {strain[-1]:.3g} only"
    return Curve(
        rate_per_s=float(facts["mean_rate"]),
        temperature_k=float(facts["temperature"]),
        stress_pa=np.interp(grid, strain, stress),
        u_pa=np.where(outside, np.nan, np.interp(grid, strain, u)),
        rise_k=np.zeros(grid.size) if rise is None else np.interp(grid, strain, rise[known]),
        extrapolated=outside,
        why=tuple(said if far else "" for far in outside.tolist()),
    )


# --- common --------------------------------------------------------------------------------------------


def _grid(asked: Asked, covered: float) -> FloatArray:
    most = covered if asked.most is None else asked.most
    count = int(np.floor(most / asked.step + 1e-9))
    if not 1 <= count < _MOST_ROWS:
        raise InputError(
            f"a step of {asked.step:g} up to a plastic strain of {most:g} gives {count} steps",
            where="--strain-step",
            mend=f"Choose a step that gives 1 to {_MOST_ROWS} steps",
        )
    grid = asked.step * np.arange(count + 1)
    ends = [] if most - grid[-1] < 0.01 * asked.step else [most]
    return np.asarray([*grid.tolist(), *ends])


def _require_few(curves: int) -> None:
    if curves > _MOST_CURVES:
        raise InputError(
            f"{curves} curves",
            where="flow table",
            mend=f"Ask for fewer rates or temperatures, {_MOST_CURVES} curves at most",
        )


def _origin(merge: StoredMerge) -> Iterator[tuple[str, object]]:
    yield "merge", f"{merge.path.name}, sha256 {hashlib.sha256(merge.path.read_bytes()).hexdigest()}"
    for one in merge.used:
        yield "merged file", f"{one.name}, sha256 {one.sha256}"


_LONG = ("rate_per_s", "temperature_K", "temperature_rise_K", "plastic_strain")


def long_text(table: FlowTable, *, si: bool = False) -> str:
    """The table with one row a cell."""
    unit, factor = ("Pa", 1.0) if si else ("MPa", 1e-6)
    columns = (*_LONG, f"true_stress_{unit}", f"u_true_stress_{unit}", "extrapolated", "why_extrapolated")
    rows = (
        (
            one.rate_per_s, one.temperature_k, float(one.rise_k[i]), float(strain), factor * float(one.stress_pa[i]),
            factor * float(one.u_pa[i]), int(one.extrapolated[i]), one.why[i],
        )
        for one in table.curves
        for i, strain in enumerate(table.plastic_strain)
    )  # fmt: skip
    return csv_text(columns, rows, _comments(table, unit, "long: one row a cell, curve after curve"))


def wide_text(table: FlowTable, *, si: bool = False) -> str:
    """The table with one row a plastic strain and one column a curve; then the flags of each curve."""
    unit, factor = ("Pa", 1.0) if si else ("MPa", 1e-6)
    tags = _tags(table.curves)
    columns = [
        "plastic_strain",
        *(f"true_stress_{unit}_{tag}" for tag in tags),
        *(f"extrapolated_{tag}" for tag in tags),
    ]
    rows = (
        (
            float(strain),
            *(factor * float(one.stress_pa[i]) for one in table.curves),
            *(int(one.extrapolated[i]) for one in table.curves),
        )
        for i, strain in enumerate(table.plastic_strain)
    )
    return csv_text(
        columns, rows, _comments(table, unit, "wide: one row a plastic strain, one column a curve")
    )


def _tags(curves: Sequence[Curve]) -> list[str]:
    """What tells a curve from every other: rate and temperature, with more digits where they are needed."""
    for digits in (3, 4, 6, 9, 17):
        tags = [f"{one.rate_per_s:.{digits}g}_per_s_{one.temperature_k:.{digits + 2}g}_K" for one in curves]
        if len(set(tags)) == len(tags):
            return tags
    return [f"{tag}_{number}" for number, tag in enumerate(tags, 1)]


def _comments(table: FlowTable, unit: str, form: str) -> list[str]:
    far = sum(int(one.extrapolated.sum()) for one in table.curves)
    cells = len(table.curves) * table.plastic_strain.size
    first = (
        ("material", table.material),
        ("kind of test", f"{table.kind}; stress and strain are positive in it"),
        ("form", form),
        (
            "units",
            f"true plastic strain [1], true stress [{unit}], true rate [1/s], temperature at the start [K]",
        ),
        ("cells", f"{cells}, of which {far} are extrapolated (flag 1)"),
        ("caution", "research data of few tests, no design allowables"),
    )
    lines = [comment(label, said) for label, said in (*first, *table.about)]
    return [f"{FLOW_MARK}, written by shpb {VERSION}", *lines]


def file_stems(merge: StoredMerge) -> list[str]:
    """A part of a file name for each material: harmless on every system, and different for different ones."""
    stems: list[str] = []
    for number, name in enumerate(merge.materials, 1):
        kind = str(merge.attributes[f"materials/{number}"]["kind"])
        safe = re.sub(r"[^A-Za-z0-9._-]+", "_", name).strip("._")[:60] or "material"
        if safe != name.replace(" ", "_"):
            safe += "-" + hashlib.sha256(name.encode("utf-8", "surrogatepass")).hexdigest()[:8]
        if merge.materials.count(name) > 1:
            safe += f"_{kind}"
        if safe.casefold() in (one.casefold() for one in stems):
            safe += f"-{number}"
        stems.append(safe)
    return stems
