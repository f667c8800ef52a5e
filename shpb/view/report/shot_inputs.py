"""What a shot was made from: processing, calibration, rig, specimen, settings, files with their hashes."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Mapping
from enum import Enum
from pathlib import Path

from shpb.limits import USUAL, key_of, limit_in_words, set_by_lab
from shpb.rig.bar import Bar
from shpb.rig.gauge import Gauge
from shpb.settings import Analysis, Dispersion
from shpb.view.by_hand_words import shift_words
from shpb.view.report.html import Column, Markup, element, pairs, paragraphs, section, table, word_for_word
from shpb.view.report.stored import ReportedShot
from shpb.view.text import rounded

_DISPERSION = {
    Dispersion.NONE: "none, shift at c0",
    Dispersion.PHASE: "by the phase of the Pochhammer-Chree first mode",
    Dispersion.FULL: "by phase and amplitude of the Pochhammer-Chree first mode",
}
_ANALYSIS = {
    Analysis.ONE_WAVE: "one-wave: stress from the force on the transmitted face, rate from the reflected pulse",
    Analysis.THREE_WAVE: "three-wave: stress from the mean force of both faces, rate from their velocities",
}
# How people read what stands in SI: ending of the name, unit, factor.
_UNITS = (
    ("_kg_m3", "kg/m³", 1.0),
    ("_j_kg_k", "J/(kg K)", 1.0),
    ("_m_s", "m/s", 1.0),
    ("_per_k", "1/K", 1.0),
    ("_per_s", "1/s", 1.0),
    ("_ohm", "ohm", 1.0),
    ("_pa", "GPa", 1e-9),
    ("_kg", "g", 1e3),
    ("_hz", "kHz", 1e-3),
    ("_m", "mm", 1e3),
    ("_k", "K", 1.0),
    ("_v", "V", 1.0),
    ("_s", "µs", 1e6),
)


def quantity_words(name: str, value: object) -> str:
    """A value with its unit, its standard uncertainty and where it came from.

    >>> from shpb.quantity import Quantity
    >>> quantity_words("diameter_m", Quantity(0.012, u=5e-6, origin="micrometer"))
    '12 mm, u 0.005 mm (micrometer)'
    """
    if isinstance(value, Enum):
        return str(value.value)
    if isinstance(value, tuple | list):
        return ", ".join(quantity_words(name, one) for one in value) or "none"
    if isinstance(value, bool) or not isinstance(value, int | float):
        return {True: "yes", False: "no"}.get(value, str(value)) if isinstance(value, bool) else str(value)
    unit, factor = next(((u, f) for end, u, f in _UNITS if name.endswith(end)), ("", 1.0))
    said = f"{value * factor:.6g} {unit}".rstrip()
    u = getattr(value, "u", None)
    origin = getattr(value, "origin", "")
    said += "" if u is None else f", u {u * factor:.2g} {unit}".rstrip()
    return said + (f" ({origin})" if origin else "")


def _name(name: str) -> str:
    """A key as words, its unit left to the value."""
    end = next((end for end, _, _ in _UNITS if name.endswith(end)), "")
    words = name.removesuffix(end).replace("_", " ")
    words = words.replace("poisson ratio", "Poisson's ratio").replace("young modulus", "Young's modulus")
    return words[:1].upper() + words[1:]


def _fields(value: object, leave_out: tuple[str, ...] = ()) -> Iterator[tuple[str, str]]:
    """Names and values of a frozen value that say something; what is itself compound is passed over."""
    for field in dataclasses.fields(value):  # type: ignore[arg-type]
        one = getattr(value, field.name)
        empty = one is None or (isinstance(one, str | tuple | Mapping) and not one)
        if field.name in leave_out or empty or dataclasses.is_dataclass(one) or isinstance(one, Mapping):
            continue
        if isinstance(one, tuple) and dataclasses.is_dataclass(one[0]):
            continue
        yield _name(field.name), quantity_words(field.name, one)


def processing_section(shot: ReportedShot) -> Markup:
    """Everything between volts and curve that a reader must know, and what was set by hand."""
    settings = shot.stored.settings

    def wave(name: str) -> float | None:
        value = shot.fact("wave", name)
        return None if value is None else float(value)

    def us(value: float | None) -> str:
        return "no foot" if value is None else f"{1e6 * value:+.2f} µs"

    rows = [
        ("Waves told apart", f"by {settings.waves.value}"),
        ("Dispersion", _DISPERSION[settings.dispersion]),
        (
            "Low-pass",
            f"{rounded(1e-3 * (wave('low_pass_cutoff') or 0.0), 4)} kHz (half height), zero phase, the same for "
            "all pulses",
        ),
        (
            "Alignment",
            "feet laid on the incident foot" if settings.alignment.value == "feet" else "travel times alone",
        ),
        (
            "Feet off travel times",
            f"reflected {us(wave('reflected_misalignment'))}, transmitted {us(wave('transmitted_misalignment'))} "
            f"(u {1e6 * (wave('u_misalignment') or 0.0):.2f} µs); moved by {us(wave('reflected_shift') or 0.0)} and "
            f"{us(wave('transmitted_shift') or 0.0)}",
        ),
        ("Curve put forward", _ANALYSIS[shot.analysis]),
        *_by_hand(shot),
    ]
    remarks = [
        *shot.stored.record.remarks,
        *([shot.stored.sheet.remarks] if shot.stored.sheet.remarks else []),
    ]
    parts: list[Markup] = [pairs("How the curve was worked out", rows)]
    if remarks:
        parts += [element("h3", "Remarks"), paragraphs(remarks)]
    return section("Processing", *parts, identity="processing")


def _by_hand(shot: ReportedShot) -> Iterator[tuple[str, str]]:
    """What was set by hand, the automatic choice beside it."""
    for name in ("incident", "reflected", "transmitted"):
        group = f"pulse/{name}"
        if not shot.fact(group, "set_by_hand"):
            continue
        ends = [
            "{:.1f} to {:.1f}".format(*(1e6 * t for t in shot.fact(group, w)))
            for w in ("window", "automatic_window")
        ]
        said = f"window {ends[0]} µs (automatic {ends[1]} µs)"
        foot, automatic = shot.fact(group, "foot"), shot.fact(group, "automatic_foot")
        if foot is not None:
            other = "none" if automatic is None else f"{1e6 * automatic:.2f} µs"
            said += f"; foot {1e6 * foot:.2f} µs (automatic {other})"
        yield f"By hand: {name} pulse", said
    for kept in shot.stored.by_hand:
        moves = "; ".join(f"{move.pulse} {move.part} {shift_words(move)}" for move in kept.moves)
        yield f"Moved by {kept.by}, {kept.at_utc[:10]}", f"{moves}. Why: {kept.why}"


def calibration_section(shot: ReportedShot) -> Markup:
    """The calibration in force, or what the rig file says of its values."""
    rig = shot.stored.rig
    calibration = getattr(rig, "calibration", None)
    checked = shot.finding("calibration date")
    rows: list[tuple[str, object]] = []
    if calibration is None:
        rows.append(("Calibration", "none named: the values are those of the rig file"))
        rows.append(("Date in the rig file", getattr(rig, "calibration_date", "") or "none stated"))
    else:
        rows.append(("Calibration", calibration.name))
        rows.append(("Date", calibration.date))
        rows.append(("Holds for", f"{calibration.holds_days} days"))
        rows.append(("Hash (sha256)", element("span", calibration.sha256, class_="hash")))
        rows += [(f"Method: {what}", how) for what, how in calibration.methods.items()]
        rows += [("Finding", one) for one in calibration.findings]
        if calibration.remarks:
            rows.append(("Remarks", calibration.remarks))
    if checked is not None:
        rows.append(("Check", checked.measured))
    rows += [("No longer as calibrated", str(one)) for one in getattr(rig, "departures", ())]
    return section("Calibration", pairs("Calibration in force", rows), identity="calibration")


def rig_section(shot: ReportedShot) -> Markup:
    """Specimen, bars, gauges and striker as they were used."""
    sheet, rig = shot.stored.sheet, shot.stored.rig
    test: list[tuple[str, str]] = [("Kind of test", sheet.kind.value)]
    test += _fields(sheet, ("shot_id", "kind", "record_files", "rig_file", "text", "source", "remarks"))
    parts: list[Markup] = [
        element("h3", "Specimen and test"),
        pairs("Specimen", _fields(sheet.specimen)),
        pairs("Test", test),
        element("h3", f"Rig: {rig.name}"),
        _side_by_side("Bars", rig.incident_bar, rig.transmitted_bar),
        _side_by_side("Gauge stations next to the specimen", rig.incident_gauge, rig.transmitted_gauge),
        *_more(shot),
    ]
    striker = getattr(rig, "striker", None)
    if striker is not None:
        parts.append(pairs("Striker", _fields(striker)))
    return section("Specimen and rig", *parts, identity="rig")


def _more(shot: ReportedShot) -> Iterator[Markup]:
    """Further stations, and bars of which the propagation was measured."""
    rig = shot.stored.rig
    for name, gauge in rig.gauges.items():
        if gauge not in (rig.incident_gauge, rig.transmitted_gauge):
            yield pairs(f"Further station: {name.replace('_', ' ')}", _fields(gauge))
    for side in ("incident", "transmitted"):
        measured = getattr(rig, f"{side}_bar").propagation
        if measured is not None:
            low, high = (1e-3 * measured.frequency_hz[end] for end in (0, -1))
            count = len(measured.frequency_hz)
            words = f"attenuation and phase speed at {count} frequencies, {low:.4g} to {high:.4g} kHz"
            yield pairs(f"Measured propagation of the {side} bar", [("From the calibration", words)])


def _side_by_side(caption: str, incident: Bar | Gauge, transmitted: Bar | Gauge) -> Markup:
    mine, its = dict(_fields(incident)), dict(_fields(transmitted))
    rows = [(name, mine.get(name, ""), its.get(name, "")) for name in {**mine, **its}]
    return table(caption, [Column("Fact"), Column("Incident side"), Column("Transmitted side")], rows)


def settings_section(shot: ReportedShot) -> Markup:
    """Every choice, and every limit with the usual one where the lab has moved it."""
    settings = shot.stored.settings
    rows = [(name, said) for name, said in _fields(settings, ("limits",))]
    moved = set_by_lab(settings.limits)
    parts: list[Markup] = [pairs("Choices of the reduction, as used", rows)]
    if moved:
        columns = [Column("Limit set by this lab"), Column("Value", True), Column("Usual", True)]
        both = [
            (key_of(name), *(limit_in_words(name, getattr(of, name)) for of in (settings.limits, USUAL)))
            for name in moved
        ]
        parts.append(table("Limits that this lab has set in place of the usual ones", columns, both))
    usual = [
        f"{key_of(field.name)} {limit_in_words(field.name, getattr(settings.limits, field.name))}"
        for field in dataclasses.fields(settings.limits)
        if field.name not in moved
    ]
    parts.append(element("p", f"Usual limits of the checks: {', '.join(usual)}.", class_="note"))
    return section("Settings", *parts, identity="settings")


def files_section(shot: ReportedShot) -> Markup:
    """Hashes of everything that went in, and the program that did it."""
    stored, root = shot.stored, shot.stored.attributes["/"]
    columns = [Column("File"), Column("What it is"), Column("Bytes", True), Column("sha256")]
    rows: list[tuple[object, ...]] = [
        (
            one.name,
            f"record, read as {one.reader}",
            one.size_bytes,
            element("span", one.sha256, class_="hash"),
        )
        for one in stored.record.sources
    ]
    name = Path(stored.path).name
    rows.append(
        (name, "shot file that this page was made from", "", element("span", shot.sha256, class_="hash"))
    )
    record = stored.record
    facts = [
        ("Record", f"{record.samples} samples in each of {len(record.channels)} channels, every "
                   f"{rounded(1e6 * record.sample_interval_s, 4)} µs"),
        ("Channels", ", ".join(record.channels)),
        ("Rig file", Path(stored.rig.source).name or "not known"),
        ("Shot sheet", Path(stored.sheet.source).name or "not known"),
        ("Reduced", f"{root.get('created_utc', 'not known')} by shpb {root.get('program_version', 'not known')}"),
        ("Format of the shot file", f"{root.get('format')} {root.get('format_version')}"),
    ]  # fmt: skip
    folded = [word_for_word("Rig file, word for word", stored.rig.text)] if stored.rig.text else []
    folded += [word_for_word("Shot sheet, word for word", stored.sheet.text)] if stored.sheet.text else []
    calibration = getattr(stored.rig, "calibration", None)
    if calibration is not None and calibration.text:
        folded.append(word_for_word("Calibration, word for word", calibration.text))
    return section(
        "Files and hashes",
        table("What went in, and what came of it", columns, rows),
        pairs("Record and program", facts),
        *folded,
        identity="files",
    )
