"""Reading a shot sheet: the shot and the specimen, and whether they can stand in the rig."""

from __future__ import annotations

import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from shpb.errors import FileMistakes, Mistake
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind
from shpb.rig.keys import SHEET_FILE
from shpb.rig.mistakes import Collector
from shpb.rig.overrides import hints_in, overrides_in
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet, Specimen
from shpb.rig.tables import Values, read_tables
from shpb.rig.text_file import read_text, toml_tables


def read_sheet(path: str | Path) -> ShotSheet:
    """Read and check a shot sheet.

    Parameters
    ----------
    path : str or Path
        The TOML file; ``calibration/README.md`` lists its keys. Record and rig files are
        taken as seen from its folder.

    Returns
    -------
    ShotSheet
        In SI; ``text`` holds the file word for word.

    Raises
    ------
    FileMistakes
        With all mistakes of the file at once.
    InputError
        If the file cannot be read or is no TOML.

    Examples
    --------
    >>> import shpb
    >>> shpb.read_sheet(folder / "records" / "W-02.toml").shot_id
    'W-02'
    """
    path = Path(path)
    return sheet_from_text(read_text(path, "shot sheet"), str(path), path.parent)


def sheet_from_text(text: str, name: str, folder: str | Path) -> ShotSheet:
    """Return the sheet that the text of a shot sheet describes.

    Parameters
    ----------
    text : str
        The TOML text, for example as stored with a result.
    name : str
        What messages call it.
    folder : str or Path
        Where its record and rig files are looked for.

    Raises
    ------
    FileMistakes, InputError
        As :func:`read_sheet`.
    """
    seen = Collector(name)
    sheet = sheet_from_document(toml_tables(text, name), text, Path(folder), seen)
    seen.finish()
    assert sheet is not None  # None always comes with a mistake
    return sheet


def sheet_from_document(
    document: Mapping[str, Any], text: str, folder: Path, seen: Collector, source: str = ""
) -> ShotSheet | None:
    """Return the sheet that parsed tables describe, None where mistakes (noted in ``seen``) prevent it."""
    before = len(seen.mistakes)
    tables = read_tables(document, SHEET_FILE, seen)
    shot, specimen = tables["shot"], tables["specimen"]
    overrides = overrides_in(tables, seen)
    if shot.has("kind"):
        _check_length_after(TestKind(shot.given["kind"]), specimen, seen)
    complete = shot.has("id", "kind") and specimen.has("material", "diameter", "length")
    if len(seen.mistakes) > before or not complete:
        return None
    rig_file = shot.given.get("rig")
    return ShotSheet(
        shot_id=shot.given["id"],
        kind=TestKind(shot.given["kind"]),
        specimen=_specimen(specimen.given),
        temperature_k=shot.given.get("temperature", Quantity(293.15)),
        incident_face_temperature_k=shot.given.get("incident_face_temperature"),
        transmitted_face_temperature_k=shot.given.get("transmitted_face_temperature"),
        heated_length_m=shot.given.get("heated_length"),
        striker_speed_m_s=shot.given.get("striker_speed"),
        date=shot.text("date"),
        operator=shot.text("operator"),
        remarks=shot.text("remarks"),
        record_files=tuple(folder / file for file in shot.given.get("record", ())),
        rig_file=None if rig_file is None else folder / rig_file,
        record=hints_in(tables["record"]),
        overrides=overrides,
        text=text,
        source=source or seen.file,
    )


def _specimen(given: Mapping[str, Any]) -> Specimen:
    return Specimen(
        material=given["material"],
        diameter_m=given["diameter"],
        length_m=given["length"],
        length_after_m=given.get("length_after"),
        young_modulus_pa=given.get("young_modulus"),
        density_kg_m3=given.get("density"),
        mass_kg=given.get("mass"),
        poisson_ratio=given.get("poisson_ratio"),
        heat_capacity_j_kg_k=given.get("heat_capacity"),
        heat_share=given.get("heat_share"),
        stress_slope_per_k=given.get("stress_slope"),
        melting_temperature_k=given.get("melting_temperature"),
        softening_exponent=given.get("softening_exponent"),
        lubricant=given.get("lubricant", ""),
        friction_coefficient=given.get("friction_coefficient"),
    )


def _check_length_after(kind: TestKind, specimen: Values, seen: Collector) -> None:
    before, after = specimen.quantity("length"), specimen.quantity("length_after")
    if before is None or after is None:
        return
    # An elastic shot leaves the length as it was: three standard uncertainties of the readings are granted.
    margin = 3 * math.hypot(before.u or 0.0, after.u or 0.0)
    growth = after - before
    wrong = growth > margin if kind is TestKind.COMPRESSION else -growth > margin
    if wrong:
        change = "longer" if growth > 0 else "shorter"
        seen.add(
            specimen.key("length_after"),
            f"{1e3 * after:.6g} mm after a length of {1e3 * before:.6g} mm: {change} after {kind}",
            "a specimen that is shorter after compression, longer after tension",
            "Check the two readings, and the kind of test",
        )


def check_sheet_fits_rig(sheet: ShotSheet, rig: Rig) -> None:
    """Refuse a specimen that cannot stand between the bars of the rig.

    Raises
    ------
    FileMistakes
        If the specimen is wider than a bar, or longer than one.
    """
    found: list[Mistake] = []
    where, specimen = sheet.source or f"shot {sheet.shot_id}", sheet.specimen
    for side, bar in (("incident", rig.incident_bar), ("transmitted", rig.transmitted_bar)):
        for word, key, size, limit in (
            ("wide", "diameter", specimen.diameter_m, bar.diameter_m),
            ("long", "length", specimen.length_m, bar.length_m),
        ):
            if size > limit:
                found.append(
                    Mistake(
                        where,
                        f"specimen {key}",
                        f"a specimen {1e3 * size:.6g} mm {word}",
                        f"at most the {1e3 * limit:.6g} mm of the {side} bar",
                        f"Check the {key} of the specimen and of the bar, and their units",
                    )
                )
    if found:
        raise FileMistakes(found)
