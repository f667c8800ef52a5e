"""Every fact that stands above a quasi-static table, or in the TOML file of the same name beside it."""

from __future__ import annotations

from shpb.merge.table_columns import MM_PER_KN, PERCENT
from shpb.rig.gauge import TestKind
from shpb.rig.key import Key, Kind, Table, Unit
from shpb.rig.keys import CELSIUS, GPA, KELVIN, LENGTHS, MM, MPA, PA, M

PER_SECOND = Unit("per_s", "1/s")
MM2 = Unit("mm2", "mm²", 1e-6)
CM2 = Unit("cm2", "cm²", 1e-4)
M2 = Unit("m2", "m²")

RATE_HELD = ("true", "engineering")


def _text(stem: str, meaning: str, example: str, *, required: bool = False, kind: Kind = Kind.TEXT) -> Key:
    return Key(stem=stem, kind=kind, meaning=meaning, example=f'"{example}"', required=required)


_FACTS = (
    _text("material", "Material, word for word as on the shot sheets", "Wrenmoor 3", required=True),
    Key(
        stem="kind", kind=Kind.CHOICE, meaning="What the machine did to the specimen",
        example='"compression"', choices=tuple(TestKind), required=True,
    ),
    Key(
        stem="rate", kind=Kind.QUANTITY, units=(PER_SECOND,), low=1e-9, high=1000, example="1e-3", required=True,
        meaning="Strain rate; may be left out where the table has a column of times",
    ),
    Key(
        stem="rate_held", kind=Kind.CHOICE, choices=RATE_HELD, example='"engineering"', default="true",
        meaning="Which rate that is: of the true strain, or of the engineering strain (constant crosshead speed)",
    ),
    Key(
        stem="temperature", kind=Kind.QUANTITY, units=(CELSIUS, KELVIN), low=-273, high=3000, example="20",
        required=True, meaning="Temperature of the specimen",
    ),
    Key(
        stem="young_modulus", kind=Kind.QUANTITY, units=(GPA, MPA), low=1e-4, high=1300, slips=(MPA, GPA, PA),
        example="118", meaning="True Young's modulus at this temperature, for the plastic strain; never the slope "
        "of this very curve",
    ),
    Key(
        stem="gauge_length", kind=Kind.QUANTITY, units=(MM, M), low=0.2, high=1000, slips=LENGTHS, example="6.00",
        meaning="Length to which displacements refer",
    ),
    Key(
        stem="area", kind=Kind.QUANTITY, units=(MM2, CM2, M2), low=0.01, high=1e5, slips=(M2,), example="28.27",
        meaning="Area of the section before the test",
    ),
    Key(
        stem="diameter", kind=Kind.QUANTITY, units=(MM, M), low=0.2, high=400, slips=LENGTHS, example="6.00",
        meaning="Diameter of a round section before the test, in place of its area",
    ),
    Key(
        stem="compliance", kind=Kind.QUANTITY, units=(MM_PER_KN,), low=1e-6, high=10, example="0.012",
        meaning="Compliance of machine, grips and platens, where one number will do",
    ),
    Key(
        stem="compliance_curve", kind=Kind.FILE, example='"machine_2.csv"',
        meaning="Table of displacement against load of the machine itself",
    ),
    Key(
        stem="blank_run", kind=Kind.FILE, example='"blank_run_2.csv"',
        meaning="Record of the platens against each other without a specimen",
    ),
    Key(
        stem="slope_correction", kind=Kind.SWITCH, example="true", default="false",
        meaning="Take out of the strain what makes the elastic slope of the curve too low",
    ),
    _text("machine", "Name of the testing machine; tests on one machine share its errors", "Machine 2"),
    Key(
        stem="stress_u", kind=Kind.NUMBER, units=(PERCENT,), low=0.001, high=50, example="0.5",
        meaning="Standard uncertainty of the stress that is this test's own: area, reading",
    ),
    Key(
        stem="stress_u_shared", kind=Kind.NUMBER, units=(PERCENT,), low=0, high=50, example="0.5",
        meaning="Standard uncertainty of the stress that all tests on the machine share: load cell",
    ),
    _text("specimen_id", "What the specimen was called", "W-qs-04"),
    _text("test", "The test in words", "compression, extensometer on the specimen"),
    _text("operator", "Who ran it", "R. Vane"),
    Key(stem="date", kind=Kind.DATE, meaning="Day of the test", example="2024-03-18"),
    _text("remarks", "Anything a reader should know", "second loading"),
)  # fmt: skip

FACT_TABLE = Table(
    name="test",
    meaning="Facts of a quasi-static test, as `# key: value` lines or in a TOML file",
    keys=_FACTS,
)

# Names that mean the same as a key.
ALSO_CALLED = {"strain_rate_per_s": "rate_per_s", "sample": "specimen_id", "specimen": "specimen_id"}
