"""A stored merge as plain text, its numbers as they stand in the file: conditions, stresses, rate sensitivity, laws."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np

from shpb.view.digits import to_uncertainty, uncertainty
from shpb.view.merge_words import counted, for_people, plain, rate_text, why_in_words
from shpb.view.report.merge_stored import Material, Merge, materials_of
from shpb.view.text import NOT_KNOWN, columns_of, fitted, padded, printable, rounded, wrapped

_LABEL = 14
_TESTS = {"quasi_static": "quasi-static", "bar": "bars", "all": "all"}
_MOST_STRAINS = 5  # that 80 columns hold


def stored_merge_text(merge: Merge, *, width: int = 80, full: bool = False) -> str:
    """Return a stored merge as text.

    Parameters
    ----------
    merge : Merge
        As read back from its file.
    width : int
        Columns that no line passes, at least 72.
    full : bool
        Whether to add every law and the files by name, not only the law that is put first.
    """
    width = max(width, 72)
    root = merge.attributes["/"]
    names = ", ".join(dict.fromkeys(printable(name) for name in merge.materials))
    head = f"{names}: {counted(len(merge.used), 'file')} merged, {len(merge.left_out)} left out."
    lines = wrapped(head, width, "MERGED  ")
    made = f"{root.get('created_utc', NOT_KNOWN)} by shpb {root.get('program_version', NOT_KNOWN)}"
    lines += ["", *wrapped(made, width, "Made".ljust(_LABEL))]
    strain = "taken out of" if merge.settings.indentation_out else "left in"
    choices = f"bar faces' indentation {strain} the strain of the bars; C at {merge.settings.reference_rate_per_s:g} /s"
    lines += wrapped(choices, width, "Choices".ljust(_LABEL))
    for number, one in enumerate(merge.left_out):
        said = f"{printable(one.origin)}: {plain(one.why)}"
        lines += wrapped(said, width, ("" if number else "Left out").ljust(_LABEL))
    for material in materials_of(merge):
        lines += ["", *_material(material, width, full)]
    if full:
        lines += ["", "Files that were merged"]
        lines += [f"  {fitted(printable(one.place or one.name), width - 2)}" for one in merge.used]
    return "\n".join(line.rstrip() for line in lines)


def _material(material: Material, width: int, full: bool) -> Iterator[str]:
    head = fitted(printable(f"{material.name}, {material.kind}"), width)
    yield head
    yield "=" * columns_of(head)
    yield from _stresses(material, width)
    yield ""
    yield from _sensitivities(material, width)
    laws = material.laws if full else material.laws[:1]
    for key in laws:
        yield ""
        yield from _law(material, key, width)
    others = len(material.laws) - len(laws)
    if others:
        yield f"{counted(others, 'more law')} in the file: --full shows all."
    if not material.laws:
        yield ""
        reasons = zip(
            material.words("laws_not_fitted/key"), material.words("laws_not_fitted/why"), strict=True
        )
        said = "; ".join(f"{key}: {plain(why_in_words(key, why))}" for key, why in reasons)
        yield from wrapped(f"No law was fitted. {said}", width)


def _stresses(material: Material, width: int) -> Iterator[str]:
    """Conditions, each with its stresses."""
    strains = sorted(set(material.column("table/plastic_strain").tolist()))[:_MOST_STRAINS]
    cells: dict[tuple[int, float], str] = {}
    columns = (
        material.column(f"table/{name}").tolist()
        for name in ("condition", "plastic_strain", "stress", "u_stress")
    )
    for condition, strain, stress, u in zip(*columns, strict=True):
        wide = 2e-6 * u
        cells[int(condition), strain] = f"{to_uncertainty(1e-6 * stress, wide)}+-{uncertainty(wide)}"
    yield from wrapped("True stress (MPa) at true plastic strain, +- with k = 2; rate: mean true rate", width)
    yield f"{'no':>3} {'rate 1/s':>9} {'T K':>5} {'n':>3}" + "".join(f"{strain:>11g}" for strain in strains)
    for number, one in enumerate(material.conditions):
        rate, kelvin = rate_text(float(one["mean_rate"])), float(one["temperature"])
        head = f"{number + 1:>3} {rate:>9} {kelvin:>5.0f} {len(one['files']):>3}"
        yield head + "".join(f"{cells.get((number, strain), '-'):>11}" for strain in strains)
    for number, one in enumerate(material.conditions, 1):
        for said in one["outlying"]:
            yield from wrapped(f"condition {number}: {plain(str(said))}", width, "  ")


def _sensitivities(material: Material, width: int) -> Iterator[str]:
    strain = material.strain
    if strain is None:
        return
    group = "rate_sensitivity"
    here = np.flatnonzero(material.column(f"{group}/plastic_strain") == strain).tolist()
    if not here:
        yield "Rate sensitivity: no temperature has tests at two rates."
        return
    yield from wrapped(
        f"Rate sensitivity m = d ln(stress)/d ln(rate) at plastic strain {strain:g}, 95 % interval", width
    )
    yield f"{'T K':>5}  {'tests':<13}{'m':>9} {'u':>9}  interval"
    for place in here:
        tests = material.words(f"{group}/tests")[place]
        head = f"{material[f'{group}/temperature'][place]:>5.0f}  {_TESTS.get(tests, tests):<13}"
        m, u, low, high = (
            float(material[f"{group}/{start}m"][place]) for start in ("", "u_", "low_", "high_")
        )
        if not math.isfinite(m):
            yield from wrapped(f"not known: {plain(material.words(f'{group}/why_not')[place])}", width, head)
            continue
        ends = [to_uncertainty(end, u) if math.isfinite(end) else "no end" for end in (low, high)]
        yield f"{head}{to_uncertainty(m, u):>9} {uncertainty(u):>9}  {ends[0]} to {ends[1]}"


def _law(material: Material, key: str, width: int) -> Iterator[str]:
    facts, base = material.facts(f"laws/{key}"), f"laws/{key}"
    rates, kelvin = (material[f"{base}/points/{name}"] for name in ("rate", "start_temperature"))
    ends = " to ".join(dict.fromkeys(rate_text(float(end)) for end in (rates.min(), rates.max())))
    kelvins = " to ".join(dict.fromkeys(f"{end:.0f}" for end in (kelvin.min(), kelvin.max())))
    yield from wrapped(
        f"{facts['name']}, fitted to {counted(rates.size, 'point')}, {ends} /s, {kelvins} K", width
    )
    yield from wrapped(str(facts["formula"]), width, "  ", "    ")
    known = [
        f"{name.replace('_', ' ')} {value:.6g}" for name, value in material.facts(f"{base}/facts").items()
    ]
    if known:
        yield from wrapped(f"taken as known: {', '.join(known)}", width, "  ", "    ")
    yield f"  {'':<8}{'value':>13} {'unit':<6}{'u':>9}  95 % interval"
    for place, name in enumerate(material.words(f"{base}/parameters/name")):
        yield from _parameter(material, f"{base}/parameters", place, name, width)
    for warning in _warnings(facts):
        yield from wrapped(plain(warning), width, "  mind: ", "    ")


def _warnings(facts: Any) -> list[str]:
    said = [str(one) for one in facts["warnings"]]
    if not facts["converged"]:
        said.insert(0, "the search did not come to its end: do not use these numbers")
    return said


def _parameter(material: Material, base: str, place: int, name: str, width: int) -> list[str]:
    unit, factor = for_people(material.words(f"{base}/unit")[place], 1.0)
    value, u, low, high = (
        factor * float(material[f"{base}/{which}"][place]) for which in ("value", "u", "low", "high")
    )
    label = padded(printable(name), 8)
    if not math.isfinite(u):
        standing = material.words(f"{base}/standing")[place]
        held = rounded(value) if math.isfinite(value) else "-"
        reason = plain(material.words(f"{base}/reason")[place])
        return wrapped(f"{standing}{': ' if reason else ''}{reason}", width, f"  {label}{held:>13} {unit:<6}")
    ends = [to_uncertainty(end, u) if math.isfinite(end) else "no end" for end in (low, high)]
    return [f"  {label}{to_uncertainty(value, u):>13} {unit:<6}{uncertainty(u):>9}  {ends[0]} to {ends[1]}"]


def stored_merge_json(merge: Merge, file: str) -> dict[str, Any]:
    """The same for other programs: conditions, merged table and constants; lists of equal length by column."""

    def columns(base: str, group: str) -> dict[str, Any]:
        start = f"{base}/{group}/"
        held: dict[str, Any] = {
            name[len(start) :]: [one if math.isfinite(one) else None for one in values.tolist()]
            for name, values in merge.arrays.items()
            if name.startswith(start) and "/" not in name[len(start) :]
        }
        return held | {
            name[len(start) :]: list(values)
            for name, values in merge.texts.items()
            if name.startswith(start) and "/" not in name[len(start) :]
        }

    materials = []
    for one in materials_of(merge):
        base = f"materials/{one.number}"
        materials.append(
            {
                "material": one.name,
                "kind": one.kind,
                "conditions": [
                    {
                        "mean_rate_per_s": float(held["mean_rate"]),
                        "temperature_k": float(held["temperature"]),
                        "range": str(held["range"]),
                        "files": [str(name) for name in held["files"]],
                    }
                    for held in one.conditions
                ],
                "table": columns(base, "table"),
                "rate_sensitivity": columns(base, "rate_sensitivity"),
                "laws": {
                    key: {
                        "name": str(one.facts(f"laws/{key}")["name"]),
                        "formula": str(one.facts(f"laws/{key}")["formula"]),
                        "facts": {
                            name: float(value) for name, value in one.facts(f"laws/{key}/facts").items()
                        },
                        "parameters": columns(base, f"laws/{key}/parameters"),
                        "warnings": _warnings(one.facts(f"laws/{key}")),
                    }
                    for key in one.laws
                },
            }
        )
    root = merge.attributes["/"]
    return {
        "file": file,
        "created_utc": root.get("created_utc"),
        "written_by": root.get("program_version"),
        "files": [{"name": one.name, "sha256": one.sha256, "place": one.place} for one in merge.used],
        "left_out": [{"file": one.origin, "why": one.why} for one in merge.left_out],
        "materials": materials,
    }
