"""Bridge output and shunt calibration against tables made apart from the program (reference/README.md)."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from shpb.pulse.bridge import bridge_output, shunt_strain, strain_from_voltage
from shpb.quantity import Quantity
from shpb.rig.gauge import Arrangement
from tests.synthetic import gauge

REFERENCE = Path(__file__).parent / "reference"
CONFIGS = {
    "quarter": Arrangement.QUARTER,
    "half_opposite": Arrangement.HALF_OPPOSITE,
    "half_poisson": Arrangement.HALF_POISSON,
    "full_poisson": Arrangement.FULL_POISSON,
}


def rows(name: str) -> list[dict[str, str]]:
    lines = [line for line in (REFERENCE / name).read_text().splitlines() if line and line[0] != "#"]
    return list(csv.DictReader(lines))


BRIDGES = [
    row
    for row in rows("bridge_exact_output.csv")
    if row["config"] in CONFIGS and float(row["eps_bending"]) == 0
]


@pytest.mark.parametrize("row", BRIDGES, ids=lambda row: f"{row['config']} {row['eps_axial']}")
def test_exact_output_and_inverse(row: dict[str, str]) -> None:
    station = gauge(
        "A", 1.0, arrangement=CONFIGS[row["config"]], gauge_factor=Quantity(float(row["gauge_factor"])),
        excitation_v=Quantity(float(row["Vex_V"])), gain=Quantity(1.0),
    )  # fmt: skip
    strain, nu = float(row["eps_axial"]), float(row["poisson"])
    volts = bridge_output(np.array([strain]), station, nu)
    assert volts[0] == pytest.approx(1e-3 * float(row["Vo_mV"]), rel=1e-12, abs=1e-18)
    assert strain_from_voltage(volts, station, nu)[0] == pytest.approx(strain, rel=1e-12, abs=1e-18)
    # What an amplifier that is linear by construction would make of the same bridge.
    linear = gauge(
        "A", 1.0, arrangement=station.arrangement, gauge_factor=station.gauge_factor,
        excitation_v=station.excitation_v, gain=Quantity(1.0), linear_amplifier=True,
    )  # fmt: skip
    found = strain_from_voltage(volts, linear, nu)[0]
    assert found == pytest.approx(float(row["eps_linear"]), rel=1e-10, abs=1e-18)


def test_the_table_was_read() -> None:
    assert len(BRIDGES) >= 16


def test_full_bridge_is_linear_without_help() -> None:
    station = gauge("A", 1.0, arrangement=Arrangement.FULL, gauge_factor=Quantity(2.0), gain=Quantity(1.0))
    volts = bridge_output(np.array([1e-3]), station, 0.3)
    assert volts[0] == pytest.approx(5.0 * 2.0 * 1e-3, rel=1e-14)


@pytest.mark.parametrize(
    "row", rows("shunt_calibration.csv"), ids=lambda row: f"{row['Rg_ohm']} {row['Rc_ohm']}"
)
def test_shunt_strain(row: dict[str, str]) -> None:
    # Published resistor values: Vishay TN-514; recorder makers' tables named in the file's header.
    found = shunt_strain(float(row["Rg_ohm"]), float(row["Rc_ohm"]), float(row["gauge_factor"]))
    assert found == pytest.approx(float(row["eps_shunt"]), rel=1e-12)


@pytest.mark.parametrize(
    ("resistance", "shunt", "microstrain"),
    [(120, 59_880, 1000), (120, 119_880, 500), (350, 174_650, 1000), (350, 349_650, 500)],
)
def test_shunt_values_known_by_heart(resistance: float, shunt: float, microstrain: float) -> None:
    # Precision resistors for gauge factor 2.00, from memory.
    assert 1e6 * shunt_strain(resistance, shunt, 2.0) == pytest.approx(microstrain, rel=1e-6)
