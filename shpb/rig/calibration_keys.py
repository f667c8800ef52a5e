"""Every key of a calibration file, which ``shpb calibrate`` writes and a rig file names."""

from __future__ import annotations

from shpb.rig.key import Key, Kind, Table, Unit
from shpb.rig.keys import HZ, KELVIN, KG_M3, M_S, MM, OHM, VOLT, M

FORMAT, FORMAT_VERSION = "shpb-calibration", 1
BARS = ("incident_bar", "transmitted_bar")
GAUGES = tuple(
    f"{side}_gauge{number}" for side in ("incident", "transmitted") for number in ("", "_2", "_3", "_4")
)
PROPAGATION, AS_STATED = "propagation", "as_stated"  # tables within that of a bar or a gauge

_PER_M = Unit("per_m", "1/m")
_PER_VOLT = Unit("", "1/V")


def _quantity(stem: str, meaning: str, example: str, low: float, high: float, *units: Unit) -> Key:
    return Key(
        stem=stem, kind=Kind.QUANTITY, meaning=meaning, example=example, low=low, high=high,
        units=units or (Unit("", ""),),
    )  # fmt: skip


def _number(stem: str, meaning: str, *units: Unit) -> Key:
    return Key(stem=stem, kind=Kind.NUMBER, meaning=meaning, example="1.0", units=units or (Unit("", ""),))


def _text(stem: str, meaning: str, example: str, *, required: bool = False) -> Key:
    return Key(stem=stem, kind=Kind.TEXT, meaning=meaning, example=f'"{example}"', required=required)


_HEAD_KEYS = (
    _text("format", "Says what this file is", FORMAT, required=True),
    Key(
        stem="format_version", kind=Kind.INTEGER, required=True, low=1, high=1000, example=str(FORMAT_VERSION),
        meaning="Version of the format",
    ),
    _text("program_version", "Version of the program that wrote it", "1.0"),
    Key(
        stem="name", kind=Kind.IDENTIFIER, required=True, example='"bench_1_2031-02-03"',
        meaning="Name of the calibration, cited with every result that uses it",
    ),
    _text("rig", "Name of the rig, as in its rig file", "Bar bench 2, 19 mm", required=True),
    Key(stem="date", kind=Kind.DATE, required=True, example="2031-02-03", meaning="Day of the calibration shots"),
    Key(
        stem="holds_days", kind=Kind.INTEGER, required=True, low=1, high=36500, example="365",
        meaning="Days from then for which the values hold",
    ),
    _quantity("temperature", "Temperature of the bars during the shots", "294.15", 150, 700, KELVIN),
    _text("remarks", "Anything a reader should know", "Gauge renewed"),
    Key(
        stem="findings", kind=Kind.TEXTS, example='["..."]',
        meaning="What did not fit when the values were worked out",
    ),
)  # fmt: skip

_BAR_KEYS = (
    _quantity("wave_speed", "Measured one-dimensional wave speed c0", "{ value = 4871.3, u = 0.9 }", 100, 20000, M_S),
    _quantity("poisson_ratio", "Measured Poisson's ratio", "{ value = 0.296, u = 0.004 }", 0, 0.49),
)  # fmt: skip

_BAR_STATED_KEYS = (
    _text("material", "Material", "steel"),
    _number("length", "Length", M),
    _number("diameter", "Diameter", M),
    _number("density", "Density", KG_M3),
)

_GAUGE_KEYS = (
    # Of a whole chain, gain and excitation included: wider than that of a gauge.
    _quantity(
        "gauge_factor", "Gauge factor that holds the whole chain, with excitation and gain as stated",
        "{ value = 2.083, u = 0.004 }", 0.05, 2000,
    ),
    _quantity("strain_per_volt", "The same in strain per volt", "{ value = 3.2e-4, u = 6e-7 }", -1e3, 1e3, _PER_VOLT),
    _quantity(
        "to_specimen", "Distance from the middle of the gauge to the specimen face",
        "{ value = 0.8992, u = 0.0002 }", 1e-3, 50, M, MM,
    ),
)  # fmt: skip

_GAUGE_STATED_KEYS = (
    _text("arrangement", "Bridge arrangement", "half-opposite"),
    _text("channel", "Scope channel", "CH1"),
    _number("gauge_factor", "Gauge factor"),
    _number("excitation", "Bridge supply", VOLT),
    _number("gain", "Gain"),
    _number("lead_resistance", "Lead wires", OHM),
    _number("tension_sign", "Sign of the voltage under tension"),
    _number("to_specimen", "Distance to the specimen face", M),
)


def _column(stem: str, meaning: str, unit: Unit | None = None, low: float = 0.0, high: float = 1e12) -> Key:
    units = (unit,) if unit else (Unit("", ""),)
    return Key(
        stem=stem, kind=Kind.NUMBERS, meaning=meaning, example="[1.0, 2.0, 3.0, 4.0]", units=units,
        low=low, high=high, required=True,
    )  # fmt: skip


# In the order of the fields of PropagationTable.
COLUMN_KEYS = (
    _column("frequency", "Frequencies, rising", HZ),
    _column("attenuation", "Attenuation of the amplitude", _PER_M, low=-1e6),
    _column("phase_speed", "Phase speed", M_S),
    _column("u_attenuation", "Its standard uncertainty", _PER_M),
    _column("u_phase_speed", "Its standard uncertainty", M_S),
    _column("coherence", "Coherence of the passages", high=1.0),
)

RECORD_TABLE = Table(
    name="record", meaning="One record that the values were measured from", required=False,
    keys=(
        _text("shot", "Name of the shot", "BT-1", required=True),
        _text("kind", "Kind of shot", "bars-together", required=True),
        _text("file", "File name of the record", "BT-1.csv", required=True),
        _text("sha256", "Its hash", "0" * 64, required=True),
    ),
)  # fmt: skip

CALIBRATION_FILE = (
    Table(name="calibration", meaning="The calibration as a whole", keys=_HEAD_KEYS),
    *(Table(name=name, meaning="Measured of the bar", keys=_BAR_KEYS, required=False) for name in BARS),
    *(
        Table(name=f"{name}.{part}", meaning=meaning, keys=keys, required=False)
        for name in BARS
        for part, meaning, keys in (
            (AS_STATED, "The bar in the rig file that day", _BAR_STATED_KEYS),
            (PROPAGATION, "Measured propagation of a bar that is not elastic", COLUMN_KEYS),
        )
    ),
    *(Table(name=name, meaning="Measured of the station", keys=_GAUGE_KEYS, required=False) for name in GAUGES),
    *(
        Table(
            name=f"{name}.{AS_STATED}", meaning="The station in the rig file that day", keys=_GAUGE_STATED_KEYS,
            required=False,
        )
        for name in GAUGES
    ),
)  # fmt: skip
