"""Reading a rig file: bars, gauges, striker, and whether they can stand together."""

from __future__ import annotations

import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.rig.bar import Bar, Striker
from shpb.rig.calibration import Calibration
from shpb.rig.calibration_file import read_calibration
from shpb.rig.correlations import TABLE as CORRELATIONS
from shpb.rig.correlations import correlations_in
from shpb.rig.gauge import Arrangement, Gauge
from shpb.rig.keys import BAR_KEYS, RIG_FILE
from shpb.rig.mistakes import Collector, shown
from shpb.rig.overrides import hints_in, overrides_in
from shpb.rig.rig import Rig, station_name
from shpb.rig.tables import Values, read_tables
from shpb.rig.text_file import read_text, toml_tables
from shpb.settings import Waves

SPEED_AGREEMENT = 0.03  # handbook moduli are uncertain by 1 to 3 %, so a speed from one by half of it
_SPEED = next(key for key in BAR_KEYS if key.stem == "wave_speed")


def read_rig(path: str | Path, *, as_stated: bool = False) -> Rig:
    """Read and check a rig file, and put the calibration in force that it names.

    Parameters
    ----------
    path : str or Path
        The TOML file; ``calibration/README.md`` lists its keys.
    as_stated : bool
        Leave the calibration aside: the values of the file itself, for a new calibration.

    Returns
    -------
    Rig
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
    >>> rig = shpb.read_rig(folder / "calibration" / "bench_1.toml")
    >>> rig.incident_bar.material
    'hardened steel'
    """
    path = Path(path)
    return rig_from_text(read_text(path, "rig file"), str(path), as_stated=as_stated)


def rig_from_text(text: str, name: str, *, as_stated: bool = False) -> Rig:
    """Return the rig that the text of a rig file describes.

    Parameters
    ----------
    text : str
        The TOML text, for example as stored with a result.
    name : str
        Stands in messages; the calibration that the file names is looked for in the folder of this name.
    as_stated : bool
        As for :func:`read_rig`.

    Raises
    ------
    FileMistakes, InputError
        As :func:`read_rig`.
    """
    document = toml_tables(text, name)
    rig = rig_from_document(document, text, name)
    named = document["rig"].get("calibration")
    if as_stated or not named:
        return rig
    return rig.calibrated(_calibration_in_force(str(named).strip().replace("\\", "/"), name))


def _calibration_in_force(named: str, rig_file: str) -> Calibration:
    path = Path(rig_file).parent / named
    try:
        there = path.is_file()
    except OSError:  # a name longer than the system takes
        there = False
    if not there:
        raise InputError(
            f"there is no calibration file {named}",
            where=f"{rig_file}, rig.calibration",
            mend=f"Looked for {path}. Name the file as seen from the folder of the rig file, or remove the key to "
            "use the values that the rig file states",
        )
    return read_calibration(path)


def rig_from_document(document: Mapping[str, Any], text: str, name: str) -> Rig:
    """Return the rig that the parsed tables of a rig file state, without the calibration that it may name."""
    seen = Collector(name)
    correlations = correlations_in(document, seen)
    plain = {name: content for name, content in document.items() if name != CORRELATIONS}
    tables = read_tables(plain, RIG_FILE, seen)
    speeds = {
        side: _speed(tables[side], tables[side].quantity("density"), seen)
        for side in ("incident_bar", "transmitted_bar")
    }
    incident_bar, transmitted_bar = (_bar(tables[side], speed, seen) for side, speed in speeds.items())
    incident_gauge = _gauge(tables["incident_gauge"], seen)
    transmitted_gauge = _gauge(tables["transmitted_gauge"], seen)
    more = {side: _more_gauges(side, tables, seen) for side in ("incident", "transmitted")}
    bar_speed = speeds["incident_bar"]
    striker, striker_speed = _striker(tables["striker"], tables["incident_bar"], bar_speed, seen)
    settings = overrides_in(tables, seen)
    _check_positions(tables, seen)
    _check_channels(tables, seen)
    if not (settings.get("waves") is Waves.STATIONS and more["incident"]):
        _check_pulse_fits(tables["incident_gauge"], tables["striker"], bar_speed, striker_speed, seen)
    seen.finish()
    # No mistake means that every part was built; this only tells the type checker so.
    assert incident_bar and transmitted_bar and incident_gauge and transmitted_gauge  # noqa: PT018
    return Rig(
        name=tables["rig"].text("name"),
        incident_bar=incident_bar,
        transmitted_bar=transmitted_bar,
        incident_gauge=incident_gauge,
        transmitted_gauge=transmitted_gauge,
        more_incident_gauges=more["incident"],
        more_transmitted_gauges=more["transmitted"],
        striker=striker,
        record=hints_in(tables["record"]),
        text=text,
        settings=settings,
        correlations=correlations,
        calibration_date=tables["rig"].text("calibration_date"),
        remarks=tables["rig"].text("remarks"),
        source=name,
    )


def wave_speed_from_modulus(young_modulus_pa: Quantity, density_kg_m3: Quantity) -> Quantity:
    """Return c0 = sqrt(E/rho) with its uncertainty and an origin that says so.

    ``u(c)/c = 1/2 sqrt((u(E)/E)^2 + (u(rho)/rho)^2)``: the law of propagation (JCGM 100:2008, 5.1.2)
    for independent E and rho. Where only one of the two uncertainties is stated, it counts alone;
    where none is, the result has none.
    """
    speed = math.sqrt(young_modulus_pa / density_kg_m3)
    parts = [q.u / q for q in (young_modulus_pa, density_kg_m3) if q.u is not None]
    u = speed / 2 * math.hypot(*parts) if parts else None
    origin = "sqrt(E/rho)"
    for symbol, quantity in (("E", young_modulus_pa), ("rho", density_kg_m3)):
        if quantity.origin:
            origin += f"; {symbol}: {quantity.origin}"
    return Quantity(speed, u, origin)


def _speed(values: Values, density: Quantity | None, seen: Collector) -> Quantity | None:
    """Measured wave speed, or the one from modulus and density; both must agree."""
    measured, modulus = values.quantity("wave_speed"), values.quantity("young_modulus")
    if modulus is None or density is None:
        return measured
    derived = wave_speed_from_modulus(modulus, density)
    unit = _SPEED.units[0]
    if not _SPEED.low <= derived <= _SPEED.high:
        seen.add(
            values.key("young_modulus"),
            f"{modulus / 1e9:.6g} GPa at {density:.6g} kg/m³, which gives a wave speed of {derived:.4g} m/s",
            f"a wave speed of {_SPEED.range_text(unit)}",
            "Check modulus and density and their units",
        )
        return None
    if measured is None:
        return derived
    if abs(derived / measured - 1) > SPEED_AGREEMENT:
        seen.add(
            values.key("wave_speed"),
            f"{measured:.6g} m/s, while modulus and density give {derived:.6g} m/s "
            f"({100 * (derived / measured - 1):+.1f} %)",
            f"agreement within {100 * SPEED_AGREEMENT:g} %",
            "Remove the modulus if the wave speed was measured; else check modulus and density",
        )
    return measured


def _bar(values: Values, speed: Quantity | None, seen: Collector) -> Bar | None:
    if speed is None or not values.has("material", "diameter", "length", "density", "poisson_ratio"):
        return None
    given = values.given
    if given["diameter"] >= given["length"]:
        seen.add(
            values.key("length"),
            f"{given['length']:.6g} m on a diameter of {given['diameter']:.6g} m",
            "a bar longer than it is thick",
            "Check the units of length and diameter",
        )
    return Bar(
        material=given["material"],
        diameter_m=given["diameter"],
        length_m=given["length"],
        density_kg_m3=given["density"],
        wave_speed_m_s=speed,
        poisson_ratio=given["poisson_ratio"],
        yield_strength_pa=given.get("yield_strength"),
        stated_modulus_pa=None if values.has("wave_speed") else values.quantity("young_modulus"),
        modulus_temperature_coefficient_per_k=given.get("modulus_temperature_coefficient"),
    )


def _gauge(values: Values, seen: Collector) -> Gauge | None:
    given = values.given
    factor = values.quantity("gauge_factor")
    # Common practice: foil and wire gauges end near 6, semiconductor gauges begin near 45.
    if factor is not None and 8 < factor < 40:
        seen.add(
            values.key("gauge_factor"),
            f"{factor:.6g}",
            "near 2 (metal foil, at most 8) or 40 to 180 (semiconductor)",
            "Check the decimal point",
        )
    if given.get("lead_resistance") and "resistance" not in values.written:
        seen.add(
            f"{values.path}.resistance_ohm",
            "nothing, beside a lead resistance",
            "the resistance of the gauge in ohm",
            "Add it: the loss in the leads depends on both",
        )
    polarity = _tension_sign(given)
    if polarity is None or not values.has(
        "to_specimen", "channel", "gauge_factor", "excitation", "gain", "arrangement"
    ):
        return None
    return Gauge(
        to_specimen_m=given["to_specimen"],
        channels=given["channel"],
        gauge_factor=given["gauge_factor"],
        excitation_v=given["excitation"],
        arrangement=Arrangement(given["arrangement"]),
        gain=given["gain"],
        tension_sign=polarity,
        linear_amplifier=given.get("output_proportional_to_strain", False),
        length_m=given.get("gauge_length", Quantity(0.0)),
        resistance_ohm=given.get("resistance"),
        lead_resistance_ohm=given.get("lead_resistance", Quantity(0.0)),
        bandwidth_hz=given.get("bandwidth"),
        scope_range_v=given.get("scope_range"),
        scope_bits=given.get("scope_bits"),
    )


def _tension_sign(given: Mapping[str, Any]) -> int | None:
    if "voltage_under_tension" in given:
        return 1 if given["voltage_under_tension"] == "positive" else -1
    if "voltage_under_compression" in given:
        return -1 if given["voltage_under_compression"] == "positive" else 1
    return None


def _striker(
    values: Values, bar_values: Values, bar_speed: Quantity | None, seen: Collector
) -> tuple[Striker | None, Quantity | None]:
    """The striker and its wave speed; what is not stated is as on the incident bar."""
    if not values.stands:
        return None, None
    own_speed = values.has("wave_speed") or values.has("young_modulus")
    material, bar_material = values.text("material"), bar_values.text("material")
    other = bool(material and bar_material and material.casefold() != bar_material.casefold())
    if other and not (own_speed and values.has("density")):
        seen.add(
            values.key("material"),
            f"{shown(material)}, while the incident bar is {shown(bar_material)}",
            "density and wave speed (or modulus) of the striker too",
            "Add them, or use the same words if it is the same material",
        )
    density = values.quantity("density") or bar_values.quantity("density")
    speed = _speed(values, density, seen) if own_speed else bar_speed
    diameter = values.quantity("diameter") or bar_values.quantity("diameter")
    length = values.quantity("length")
    if length is None or density is None or speed is None or diameter is None:
        return None, speed
    striker = Striker(
        length_m=length,
        diameter_m=diameter,
        density_kg_m3=density,
        wave_speed_m_s=speed,
        shaper=values.text("shaper"),
        material=material or bar_material,
    )
    return striker, speed


def _stations(tables: Mapping[str, Values]) -> dict[str, Values]:
    """The tables of all gauge stations that stand in the file."""
    return {name: values for name, values in tables.items() if "_gauge" in name and values.stands}


def _more_gauges(side: str, tables: Mapping[str, Values], seen: Collector) -> tuple[Gauge, ...]:
    """Stations 2, 3, ... of a bar; none may be left out between."""
    first = f"{side}_gauge"
    numbers = sorted(
        int(name.removeprefix(f"{first}_")) for name in _stations(tables) if name.startswith(f"{first}_")
    )
    if numbers != list(range(2, 2 + len(numbers))):
        seen.add(
            f"[{station_name(side, numbers[-1])}]", f"stations {', '.join(map(str, (1, *numbers)))}",
            "stations numbered without a gap", "Number them 2, 3, 4; the first bears no number",
        )  # fmt: skip
    gauges = (_gauge(tables[station_name(side, number)], seen) for number in numbers)
    return tuple(gauge for gauge in gauges if gauge is not None)


def _check_positions(tables: Mapping[str, Values], seen: Collector) -> None:
    for name, gauge in _stations(tables).items():
        bar = tables[f"{name.split('_', maxsplit=1)[0]}_bar"]
        position, length = gauge.quantity("to_specimen"), bar.quantity("length")
        if position is not None and length is not None and position >= length:
            seen.add(
                gauge.key("to_specimen"),
                f"{position:.6g} m on a bar of {length:.6g} m",
                "less than the bar's length",
                "Measure from the gauge to the specimen face, not to the other end",
            )


def _check_channels(tables: Mapping[str, Values], seen: Collector) -> None:
    taken: dict[object, str] = {}
    for name, gauge in _stations(tables).items():
        for channel in gauge.given.get("channel", ()):
            if taken.setdefault(channel, name) != name:
                other = taken[channel].replace("_", " ")
                seen.add(
                    gauge.key("channel"),
                    f"{shown(channel)}, which is a channel of the {other} too",
                    "channels of its own",
                    "Name the scope channel of each gauge",
                )


def _check_pulse_fits(
    gauge: Values,
    striker: Values,
    bar_speed: Quantity | None,
    striker_speed: Quantity | None,
    seen: Collector,
) -> None:
    """The incident pulse must have passed the gauge before its reflection comes back: 2 x/c0 > 2 L/c."""
    position, length = gauge.quantity("to_specimen"), striker.quantity("length")
    if position is None or length is None or bar_speed is None or striker_speed is None:
        return
    room_s, pulse_s = 2 * position / bar_speed, 2 * length / striker_speed
    if pulse_s < room_s:
        return
    seen.add(
        striker.key("length"),
        f"a striker of {1e3 * length:.5g} mm, whose pulse lasts {1e6 * pulse_s:.4g} µs, while its "
        f"reflection is back at the incident gauge after {1e6 * room_s:.4g} µs",
        f"a striker shorter than {1e3 * striker_speed * room_s / 2:.5g} mm, or "
        f"{gauge.key('to_specimen')} above {1e3 * bar_speed * pulse_s / 2:.5g} mm",
        "Otherwise incident and reflected pulse lie on each other; leave room for the rise too. Or describe a second "
        'station ([incident_gauge_2]) and set waves = "stations" in [settings]',
    )
