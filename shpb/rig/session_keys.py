"""Every key of a calibration session: what was fired on one day to calibrate one rig."""

from __future__ import annotations

import dataclasses

from shpb.rig.key import Key, Kind, Table, Unit
from shpb.rig.keys import CELSIUS, HINTS, KELVIN, KILOHM, OHM, SHOT_KEYS, STRIKER_KEYS

# The words of shpb.calibrate.session; a test holds them together. Reading a rig must not load what that stands on.
KINDS = ("bars-apart", "bars-together", "shunt")
STRUCK_BARS = ("incident", "transmitted")
ENDS = ("far", "specimen")


def _as_in_sheet(stem: str, **changes: object) -> Key:
    """A key that means what it means in a shot sheet."""
    key = next(key for key in SHOT_KEYS if key.stem == stem)
    return dataclasses.replace(key, **changes)  # type: ignore[arg-type]


def _of_striker(stem: str, meaning: str) -> Key:
    """A key of the rig file's [striker], said of the striker of one shot."""
    key = next(key for key in STRIKER_KEYS if key.stem == stem)
    return dataclasses.replace(
        key, stem=f"striker_{stem}", meaning=meaning, required=False, default="the striker of the rig file"
    )


_SESSION_KEYS = (
    _as_in_sheet(
        "date", required=True, example="2024-03-11",
        meaning="Day of the calibration shots; the values hold from then on",
    ),
    _as_in_sheet(
        "rig", required=True, default="",
        meaning="The rig file, seen from the folder of this file; a calibration that it names is left aside",
    ),
    Key(
        stem="name", kind=Kind.IDENTIFIER, example='"rig_2024-03-11"', default="rig file and date",
        meaning="Name of the calibration and of its file, cited with every result",
    ),
    Key(
        stem="holds_days", kind=Kind.INTEGER, low=1, high=36500, example="365", default="365",
        meaning="Days for which the values hold, unless a gauge, a bar or the wiring changes before",
    ),
    Key(
        stem="temperature", kind=Kind.QUANTITY, units=(CELSIUS, KELVIN), low=-100, high=400, example="21",
        meaning="Temperature of the bars",
    ),
    Key(
        stem="propagation", kind=Kind.CHOICES, choices=STRUCK_BARS, example='["incident", "transmitted"]',
        default="none",
        meaning="Bars that are not elastic (polymers): attenuation and phase speed over frequency are measured from "
        "their bars-apart shots, in place of wave speed and Poisson's ratio",
    ),
    _as_in_sheet("operator", meaning="Who fired the shots"),
    _as_in_sheet("remarks", meaning="Anything to be kept with the calibration"),
)  # fmt: skip

_SHOT_KEYS = (
    _as_in_sheet("id", example='"BT-1"', meaning="Number or name of the shot"),
    Key(
        stem="kind", kind=Kind.CHOICE, required=True, choices=KINDS, example='"bars-together"',
        meaning="bars-apart: one bar alone, free at its other end. bars-together: no specimen, the bars pressed "
        "together by hand. shunt: a resistor across an arm of a bridge, nothing is fired",
    ),
    _as_in_sheet(
        "record", required=True, default="", example='"BT-1.csv"',
        meaning="The record, seen from the folder of this file; a list where each channel has its own file",
    ),
    Key(
        stem="bar", kind=Kind.CHOICE, choices=STRUCK_BARS, example='"incident"', default="incident",
        meaning="Bars apart: the bar that was struck",
    ),
    Key(
        stem="struck_end", kind=Kind.CHOICE, choices=ENDS, example='"far"', default="far",
        meaning="Bars apart: its end that was struck, the one far from the specimen or the specimen's",
    ),
    _as_in_sheet(
        "striker_speed", example="{ value = 10.42, u = 0.02, origin = \"light gates\" }",
        meaning="Speed of the striker at impact; with it the shot tells the sensitivity of the gauges",
    ),
    _of_striker("length", "Length of the striker, where it is another than the rig file's"),
    _of_striker("diameter", "Diameter of that striker"),
    _of_striker("density", "Density of that striker"),
    _of_striker("wave_speed", "Wave speed of that striker"),
    Key(
        stem="station", kind=Kind.TEXT, example='"incident_gauge"',
        meaning="Shunt: the station whose bridge was shunted, by its table in the rig file",
    ),
    Key(
        stem="shunt", kind=Kind.QUANTITY, units=(OHM, KILOHM), low=100, high=1e9, slips=(Unit("Mohm", "megohm", 1e6),),
        example="{ value = 174650, u = 17 }", meaning="Shunt: the resistor across one arm",
    ),
    _as_in_sheet("remarks", meaning="Anything to be kept with the shot", example='"Ends cleaned"'),
)  # fmt: skip

SHOT = Table(name="shot", meaning="One shot or shunt, a [[shot]] each", keys=_SHOT_KEYS, repeated=True)
SESSION_FILE = (
    Table(name="calibration", meaning="The session as a whole", keys=_SESSION_KEYS),
    HINTS,
    SHOT,
)

EXAMPLE_SHOTS = (
    "Other kinds of shots look like this; remove the # and put in your own values.",
    """\

#[[shot]]
#id = "BA-1"
#kind = "bars-apart"
#record = "BA-1.csv"
#bar = "transmitted"
#struck_end = "specimen"

#[[shot]]
#id = "SH-1"
#kind = "shunt"
#record = "SH-1.csv"
#station = "incident_gauge"
#shunt_ohm = { value = 174650, u = 17, origin = "bridge" }
""",
)
