"""Every key of the rig file and the shot sheet, in one place (the settings: :mod:`shpb.rig.setting_keys`).

The ranges catch wrong units and slips of the keyboard. They are common practice, wide enough for
miniature bars, polymer bars and large concrete bars; no standard gives them.
"""

from __future__ import annotations

from shpb.rig.gauge import Arrangement, TestKind
from shpb.rig.key import Key, Kind, OneOf, Table, Unit
from shpb.rig.setting_keys import LIMIT_KEYS, SETTING_KEYS

MM = Unit("mm", "mm", 1e-3)
M = Unit("m", "m")
CM = Unit("cm", "cm", 1e-2)
MICRON = Unit("um", "µm", 1e-6)
GPA = Unit("GPa", "GPa", 1e9)
MPA = Unit("MPa", "MPa", 1e6)
PA = Unit("Pa", "Pa")
KG_M3 = Unit("kg_m3", "kg/m³")
G_CM3 = Unit("g_cm3", "g/cm³", 1e3)
M_S = Unit("m_s", "m/s")
MM_US = Unit("mm_us", "mm/µs (km/s)", 1e3)
VOLT = Unit("V", "V")
MILLIVOLT = Unit("mV", "mV", 1e-3)
OHM = Unit("ohm", "ohm")
KILOHM = Unit("kohm", "kilohm", 1e3)
KHZ = Unit("kHz", "kHz", 1e3)
HZ = Unit("Hz", "Hz")
MHZ = Unit("MHz", "MHz", 1e6)
MICROSECOND = Unit("us", "µs", 1e-6)
SECOND = Unit("s", "s")
CELSIUS = Unit("C", "°C", 1.0, 273.15)
KELVIN = Unit("K", "K")
PER_KELVIN = Unit("per_K", "1/K")
GRAM = Unit("g", "g", 1e-3)
KILOGRAM = Unit("kg", "kg")
SPECIFIC_HEAT = Unit("J_kg_K", "J/(kg K)")
SPECIFIC_HEAT_G = Unit("J_g_K", "J/(g K)", 1e3)

LENGTHS = (MM, M, CM, MICRON)


def _length(stem: str, meaning: str, example: str, low: float, high: float, **more: object) -> Key:
    return Key(
        stem=stem, kind=Kind.QUANTITY, meaning=meaning, example=example, units=(MM, M),
        low=low, high=high, slips=LENGTHS, **more,  # type: ignore[arg-type]
    )  # fmt: skip


def _density(example: str, low: float, *, required: bool, default: str = "") -> Key:
    return Key(
        stem="density", kind=Kind.QUANTITY, meaning="Density", example=example, units=(KG_M3, G_CM3),
        low=low, high=25000, required=required, default=default,
    )  # fmt: skip


def _modulus(meaning: str, example: str, low: float, *, default: str = "") -> Key:
    return Key(
        stem="young_modulus", kind=Kind.QUANTITY, meaning=meaning, example=example, units=(GPA, MPA),
        low=low, high=1300, slips=(MPA, GPA, PA), default=default,
    )  # fmt: skip


def _wave_speed(meaning: str, example: str, *, default: str = "") -> Key:
    return Key(
        stem="wave_speed", kind=Kind.QUANTITY, meaning=meaning, example=example, units=(M_S,),
        low=300, high=15000, slips=(MM_US,), default=default,
    )  # fmt: skip


def _poisson(meaning: str, *, required: bool) -> Key:
    return Key(
        stem="poisson_ratio", kind=Kind.QUANTITY, meaning=meaning, example="0.30", low=0, high=0.49,
        required=required, mend="Metals lie near 0.3; a value near 0.5 would be rubber",
    )  # fmt: skip


def _text(stem: str, meaning: str, example: str, *, required: bool = False, default: str = "") -> Key:
    return Key(
        stem=stem, kind=Kind.TEXT, meaning=meaning, example=f'"{example}"', required=required, default=default
    )


RIG_KEYS = (
    _text("name", "Name of the rig, as it shall stand in reports", "Bar bench 2, 19 mm", required=True),
    Key(
        stem="calibration_date",
        kind=Kind.DATE,
        meaning="Day of the calibration that these values hold for",
        example="2024-03-11",
    ),
    Key(
        stem="calibration",
        kind=Kind.FILE,
        meaning="The calibration in force, seen from the folder of this file: its values stand in place of those "
        "here. shpb calibrate writes it",
        example='"rig_2024-03-11.toml"',
        default="the values of this file",
    ),
    _text("remarks", "Anything a reader of the results should know", "Gauges renewed after shot 212"),
)

BAR_KEYS = (
    _text("material", "Material of the bar", "maraging steel", required=True),
    _length("diameter", "Diameter of the bar", "19.0", 0.5, 200, required=True),
    _length("length", "Length of the bar", "1800", 50, 50000, required=True),
    _density("8000", 300, required=True),
    _wave_speed(
        "One-dimensional wave speed c0 of the bar, measured; rules over a modulus that is stated too",
        "{ value = 4905, u = 5, origin = \"echoes in the free bar\" }",
        default="from young_modulus and density",
    ),
    _modulus(
        "Young's modulus; a handbook value is uncertain by 1 to 3 %", "192.5", 0.1,
        default="from wave_speed and density",
    ),
    _poisson("Poisson's ratio, for the dispersion and for Poisson arms", required=True),
    Key(
        stem="yield_strength", kind=Kind.QUANTITY,
        meaning="Stress that the bar must stay below; without it no check of the bar's own yielding",
        example="1800", units=(MPA, GPA), low=1, high=10000, slips=(GPA, PA),
    ),
    Key(
        stem="modulus_temperature_coefficient", kind=Kind.QUANTITY, units=(PER_KELVIN,), low=-0.02, high=0.02,
        example="-3.5e-4", mend="Steels lie between -2.5e-4 and -5e-4 per kelvin",
        meaning="Relative change of Young's modulus with temperature, dE/dT/E; for shots with hot or cold bar ends",
    ),
)  # fmt: skip


def _gauge_keys(channel: str, to_specimen: str) -> tuple[Key, ...]:
    return (
        _length(
            "to_specimen", "Distance from the middle of the gauge to the specimen face of the bar",
            to_specimen, 1, 50000, required=True,
        ),
        Key(
            stem="channel", kind=Kind.CHANNELS, required=True, example=f'"{channel}"',
            meaning="Scope channel, by the name in the record or by position (1 is the first voltage "
            "column); two in a list where each side of the bar has a channel of its own",
        ),
        Key(
            stem="arrangement", kind=Kind.CHOICE, required=True, example='"half-opposite"',
            choices=tuple(Arrangement),
            meaning="Active gauges in the bridge: one (quarter); two along the bar on opposite sides, in "
            "opposite arms, which cancels bending (half-opposite); one along and one across (half-poisson); "
            "two along and two across (full-poisson); four fully active arms (full). With two channels: "
            "of each side",
        ),
        Key(
            stem="gauge_factor", kind=Kind.QUANTITY, required=True, low=0.5, high=180,
            example="{ value = 2.08, u_percent = 0.5 }", meaning="Gauge factor k, from the gauge packet",
            mend="Metal foil lies near 2.1, semiconductors between 45 and 180",
        ),
        Key(
            stem="excitation", kind=Kind.QUANTITY, required=True, example="5.0", units=(VOLT,),
            low=0.1, high=100, slips=(MILLIVOLT,), meaning="Supply voltage of the bridge",
        ),
        Key(
            stem="gain", kind=Kind.QUANTITY, example="500", low=1e-3, high=1e6, required=True,
            meaning="Voltage gain between bridge and scope, all amplifiers together; 1 without an amplifier",
            mend="Without an amplifier the gain is 1",
        ),
        Key(
            stem="voltage_under_compression", kind=Kind.CHOICE, choices=("negative", "positive"),
            example='"negative"', meaning="Sign of the recorded voltage while this bar is compressed",
        ),
        Key(
            stem="voltage_under_tension", kind=Kind.CHOICE, choices=("negative", "positive"),
            example='"positive"', meaning="The same, said for tension",
        ),
        Key(
            stem="output_proportional_to_strain", kind=Kind.SWITCH, example="false", default="false",
            meaning="true for a bridge amplifier whose output is proportional to the strain by construction; "
            "false for a plain bridge, whose slight curvature is then taken out exactly",
        ),
        _length("gauge_length", "Length of the gauge grid along the bar", "2.0", 0, 100, default="0"),
        Key(
            stem="resistance", kind=Kind.QUANTITY, example="350", units=(OHM,), low=10, high=20000,
            slips=(KILOHM,), meaning="Resistance of one gauge",
        ),
        Key(
            stem="lead_resistance", kind=Kind.QUANTITY, example="0.2", units=(OHM,), low=0, high=200,
            default="0",
            meaning="Resistance of the lead wires in series with one gauge; needs resistance_ohm too",
        ),
        Key(
            stem="bandwidth", kind=Kind.QUANTITY, example="500", units=(KHZ, MHZ, HZ), low=1, high=1e6,
            slips=(MHZ, HZ), meaning="Bandwidth of the amplifier (-3 dB)",
        ),
        Key(
            stem="scope_range", kind=Kind.LIMITS, example="5.0", units=(VOLT, MILLIVOLT), low=-1000,
            high=1000,
            meaning="Range of the scope channel: 5.0 means -5 V to +5 V; or [-2, 8]",
        ),
        Key(
            stem="scope_bits", kind=Kind.INTEGER, example="12", low=4, high=32,
            meaning="Bits of the scope or digitiser",
        ),
    )  # fmt: skip


STRIKER_KEYS = (
    _length("length", "Length of the striker", "300", 5, 10000, required=True),
    _length("diameter", "Diameter of the striker", "19.0", 0.5, 200, default="as the incident bar"),
    _text(
        "material", "Material of the striker; if it is not that of the incident bar, density and wave speed "
        "(or modulus) must stand too", "maraging steel", default="as the incident bar",
    ),
    _density("8000", 300, required=False, default="as the incident bar"),
    _wave_speed("Wave speed of the striker", "4905", default="as the incident bar"),
    _modulus("Young's modulus of the striker, in place of its wave speed", "192.5", 0.1),
    _text("shaper", "Pulse shaper in front of the striker: material and size, in words", "copper 8 x 1 mm"),
)  # fmt: skip

HINT_KEYS = (
    Key(
        stem="sample_interval", kind=Kind.NUMBER, example="0.2", units=(MICROSECOND, SECOND), low=1e-5,
        high=1000, meaning="Time between two samples", default="the record says it",
    ),
    Key(
        stem="trigger_offset", kind=Kind.NUMBER, example="-150.0", units=(MICROSECOND, SECOND),
        meaning="Time of the first sample on the record's own clock; negative before the trigger",
        default="the record says it",
    ),
    Key(
        stem="time_unit", kind=Kind.CHOICE, example='"us"', choices=("s", "ms", "us", "ns"),
        aliases=(("µs", "us"), ("μs", "us")), meaning="Unit of the time column", default="the record says it",
    ),
    Key(
        stem="voltage_unit", kind=Kind.CHOICE, example='"V"', choices=("V", "mV", "uV"),
        aliases=(("µV", "uV"), ("μV", "uV")), meaning="Unit of the voltage columns",
        default="the record says it",
    ),
    Key(
        stem="volts_per_code", kind=Kind.NUMBER_OR_NUMBERS, example="0.00244140625", units=(Unit("", "V"),),
        low=1e-12, high=1000,
        meaning="Volts per step, for records of whole-number codes; one for all channels or a list",
    ),
    Key(
        stem="channel_names", kind=Kind.TEXTS, example='["CH1", "CH2"]',
        meaning="Names of the voltage columns in their order, for records without them",
    ),
)  # fmt: skip


def _face_temperature(side: str) -> Key:
    return Key(
        stem=f"{side}_face_temperature", kind=Kind.QUANTITY, units=(CELSIUS, KELVIN), low=-272.15, high=3500,
        example="110", meaning=f"Temperature of the {side} bar's face at the start of a hot or cold test",
    )  # fmt: skip


SHOT_KEYS = (
    Key(
        stem="id", kind=Kind.IDENTIFIER, required=True, example='"CU-017"', column="shot_id",
        meaning="Number or name of the shot; results are filed under it",
    ),
    Key(
        stem="kind", kind=Kind.CHOICE, required=True, example='"compression"', choices=tuple(TestKind),
        meaning="What the bars do to the specimen",
    ),
    Key(
        stem="record", kind=Kind.FILES, example='"CU-017.csv"',
        meaning="The record, seen from the folder of this file; a list where each channel has its own file",
        default="named elsewhere",
    ),
    Key(
        stem="rig", kind=Kind.FILE, example='"rig.toml"',
        meaning="The rig file, seen from the folder of this file", default="named elsewhere",
    ),
    Key(stem="date", kind=Kind.DATE, example="2024-05-17", meaning="Day of the shot"),
    _text("operator", "Who fired the shot", "first shift"),
    Key(
        stem="striker_speed", kind=Kind.QUANTITY, units=(M_S,), low=0.1, high=1000, example="14.2",
        slips=(MM_US, Unit("mm_s", "mm/s", 1e-3)),
        meaning="Speed of the striker at impact; gives a check of the whole strain calibration",
    ),
    Key(
        stem="temperature", kind=Kind.QUANTITY, units=(CELSIUS, KELVIN), low=-272.15, high=3500, example="21",
        meaning="Temperature of the specimen at the start of the test", default="20 °C",
        mend="Nothing is colder than -273.15 °C (0 K)",
    ),
    _face_temperature("incident"),
    _face_temperature("transmitted"),
    _length(
        "heated_length", "Length of the hot or cold end of each bar, from the specimen face to where the bar is "
        "as the room is", "80", 0.1, 50000,
    ),
    _text("remarks", "Anything to be kept with the result", "Contact of the bars checked"),
)  # fmt: skip

SPECIMEN_KEYS = (
    _text("material", "Material of the specimen, the same wording in all shots of a series", "copper C1",
          required=True),
    _length("diameter", "Diameter before the shot", "{ value = 10.02, u = 0.005, origin = \"micrometer\" }",
            0.1, 200, required=True),
    _length("length", "Length before the shot", "{ value = 6.01, u = 0.005, origin = \"micrometer\" }",
            0.1, 1000, required=True),
    _length("length_after", "Length after the shot; gives a check of the integrated strain", "4.93",
            0.05, 1000),
    _modulus("Young's modulus, quasi-static or handbook; an input, never taken from the shot", "118", 1e-4),
    _density("8940", 10, required=False),
    Key(
        stem="mass", kind=Kind.QUANTITY, units=(GRAM, KILOGRAM), low=1e-4, high=50000, example="4.236",
        meaning="Mass before the shot, weighed; gives a check of diameter, length and density",
    ),
    _poisson("Poisson's ratio, for the radial inertia", required=False),
    Key(
        stem="heat_capacity", kind=Kind.QUANTITY, units=(SPECIFIC_HEAT,), low=50, high=10000, example="385",
        slips=(SPECIFIC_HEAT_G,), meaning="Specific heat capacity, for the heating by plastic work",
    ),
    Key(
        stem="heat_share", kind=Kind.QUANTITY, low=0, high=1, example="0.9", default="0.9",
        meaning="Share of the plastic work that becomes heat (Taylor & Quinney)",
    ),
    Key(
        stem="stress_slope", kind=Kind.QUANTITY, units=(PER_KELVIN,), low=-0.02, high=0.02, example="-0.0006",
        meaning="Relative change of the flow stress with temperature, negative where heat softens: gives the "
        "isothermal stress",
    ),
    Key(
        stem="melting_temperature", kind=Kind.QUANTITY, units=(CELSIUS, KELVIN), low=-100, high=4000, example="1083",
        meaning="Melting temperature, with softening_exponent in place of stress_slope: thermal factor 1 - T*^m "
        "of Johnson & Cook",
    ),
    Key(
        stem="softening_exponent", kind=Kind.QUANTITY, low=0.05, high=10, example="1.09",
        meaning="Exponent m of that factor; its reference temperature is 20 °C",
    ),
    _text("lubricant", "What lies between specimen and bars", "molybdenum disulphide grease"),
    Key(
        stem="friction_coefficient", kind=Kind.QUANTITY, low=0, high=0.5, example="0.05",
        meaning="Coulomb coefficient between specimen and bar faces, measured or from ring tests",
        mend="Good grease is near 0.05, dry steel near 0.15",
    ),
)  # fmt: skip

POLARITY = OneOf(
    stems=("voltage_under_compression", "voltage_under_tension"),
    exactly=True,
    mend="Press on the bar by hand or look at an old shot: say which sign the voltage has then",
)
BAR_SPEED = OneOf(
    stems=("wave_speed", "young_modulus"),
    exactly=False,
    mend="Give the measured wave speed, or else Young's modulus",
)

HINTS = Table(
    name="record", keys=HINT_KEYS, required=False,
    meaning="What the record file leaves unsaid. What both say must agree",
)  # fmt: skip


def _more_gauges() -> tuple[Table, ...]:
    """Further stations on either bar, up to four: for calibration and for pulses that overlap at every one of them."""
    return tuple(
        Table(
            name=f"{side}_gauge_{number}",
            keys=_gauge_keys(f"CH{number + 2}", "300"), one_of=(POLARITY,), required=False, in_forms=False,
            meaning=f"Gauge station {number} on the {side} bar",
        )
        for side in ("incident", "transmitted")
        for number in (2, 3, 4)
    )  # fmt: skip


RIG_FILE = (
    Table(name="rig", meaning="The rig as a whole", keys=RIG_KEYS),
    Table(
        name="incident_bar", meaning="The bar that the striker hits", keys=BAR_KEYS, one_of=(BAR_SPEED,)
    ),
    Table(
        name="transmitted_bar", meaning="The bar behind the specimen", keys=BAR_KEYS, one_of=(BAR_SPEED,)
    ),
    Table(
        name="incident_gauge", meaning="The gauge station on the incident bar",
        keys=_gauge_keys("CH1", "900"), one_of=(POLARITY,),
    ),
    Table(
        name="transmitted_gauge", meaning="The gauge station on the transmitted bar",
        keys=_gauge_keys("CH2", "600"), one_of=(POLARITY,),
    ),
    *_more_gauges(),
    Table(name="striker", meaning="The striker", keys=STRIKER_KEYS, required=False),
    HINTS,
    Table(
        name="settings", keys=SETTING_KEYS, required=False,
        meaning="Choices of the reduction that hold for every shot of this rig",
    ),
    Table(
        name="limits", keys=LIMIT_KEYS, required=False,
        meaning="Limits that this lab sets in place of the usual ones. A share is a fraction: 0.05 is 5 %",
    ),
)  # fmt: skip

SHEET_FILE = (
    Table(name="shot", meaning="The shot", keys=SHOT_KEYS),
    Table(name="specimen", meaning="The specimen, a solid cylinder", keys=SPECIMEN_KEYS),
    HINTS,
    Table(
        name="settings", keys=SETTING_KEYS, required=False,
        meaning="Choices of the reduction for this shot alone; they rule over those of the rig file",
    ),
    Table(
        name="limits", keys=LIMIT_KEYS, required=False,
        meaning="Limits of the checks for this shot alone; they rule over those of the rig file",
    ),
)  # fmt: skip
