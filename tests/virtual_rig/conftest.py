"""Shots of a two-dimensional elastodynamic simulation: truth that did not come from this program."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.rig.bar import Bar, Striker
from shpb.rig.gauge import Arrangement, Gauge, TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet, Specimen

DATA = Path(__file__).parent / "data"


@dataclass(frozen=True)
class VirtualShot:
    record: Record
    rig: Rig
    sheet: ShotSheet
    truth: dict[str, NDArray[np.float64]]

    @property
    def c0(self) -> float:
        return float(self.rig.incident_bar.wave_speed_m_s)


def _bar(bars: dict[str, float], length: float) -> Bar:
    return Bar(
        material="steel",
        diameter_m=Quantity(bars["diameter_m"]),
        length_m=Quantity(length),
        density_kg_m3=Quantity(bars["density_kg_m3"]),
        wave_speed_m_s=Quantity((bars["E_Pa"] / bars["density_kg_m3"]) ** 0.5),
        poisson_ratio=Quantity(bars["poisson"]),
    )


def _gauge(channel: dict[str, float], name: str, distance: float) -> Gauge:
    return Gauge(
        to_specimen_m=Quantity(distance),
        channels=(name,),
        gauge_factor=Quantity(channel["gauge_factor"]),
        excitation_v=Quantity(channel["excitation_V"]),
        arrangement=Arrangement.HALF_OPPOSITE,
        gain=Quantity(channel["amplifier_gain"]),
        tension_sign=1,  # "voltage_sign_in_compression": "negative"
        linear_amplifier=True,  # the simulated bridge is linear
        length_m=Quantity(0.002),
        bandwidth_hz=Quantity(1e6),
        scope_range_v=tuple(channel["scope_full_scale_V"]),  # type: ignore[arg-type]
        scope_bits=12,
    )


def _record(path: Path) -> Record:
    table = np.loadtxt(path, delimiter=",", skiprows=1)
    names = path.read_text().splitlines()[0].split(",")[1:]
    interval = (table[-1, 0] - table[0, 0]) / (len(table) - 1)
    return Record(
        voltage_v=np.ascontiguousarray(table[:, 1:].T),
        sample_interval_s=float(interval),
        start_s=float(table[0, 0]),
        channels=tuple(names),
    )


def load_shot(case: str, *, noisy: bool) -> VirtualShot:
    """A simulated shot between two bars (metal-1k, bars-together)."""
    folder = DATA / case
    facts = json.loads((folder / "facts.json").read_text())
    bars, channels, striker = facts["bars"], facts["channels"], facts["striker"]
    rig = Rig(
        name=case,
        incident_bar=_bar(bars, bars["incident_length_m"]),
        transmitted_bar=_bar(bars, bars["transmitted_length_m"]),
        incident_gauge=_gauge(
            channels["incident"], "incident_V", channels["incident"]["distance_to_specimen_face_m"]
        ),
        transmitted_gauge=_gauge(
            channels["transmitted"], "transmitted_V", channels["transmitted"]["distance_to_specimen_face_m"]
        ),
        striker=Striker(
            length_m=Quantity(striker["length_m"]),
            diameter_m=Quantity(striker["diameter_m"]),
            density_kg_m3=Quantity(bars["density_kg_m3"]),
            wave_speed_m_s=Quantity((bars["E_Pa"] / bars["density_kg_m3"]) ** 0.5),
            shaper=striker["pulse_shaper"] or "",
        ),
    )
    # Bars in contact: a sliver of bar material stands in for the specimen, with no transit to speak of.
    specimen = facts["specimen"] or {
        "diameter_m": 0.02, "length_m": 1e-6, "E_Pa": bars["E_Pa"],
        "density_kg_m3": bars["density_kg_m3"], "poisson": 0.285,
    }  # fmt: skip
    sheet = ShotSheet(
        shot_id=case,
        kind=TestKind.COMPRESSION,
        specimen=Specimen(
            material="copper-like",
            diameter_m=Quantity(specimen["diameter_m"]),
            length_m=Quantity(specimen["length_m"]),
            young_modulus_pa=Quantity(specimen["E_Pa"]),
            density_kg_m3=Quantity(specimen["density_kg_m3"]),
            poisson_ratio=Quantity(specimen["poisson"]),
        ),
        striker_speed_m_s=Quantity(striker["velocity_m_s"]),
    )
    record = _record(folder / ("record_noisy.csv" if noisy else "record.csv"))
    return VirtualShot(record, rig, sheet, dict(np.load(folder / "truth.npz")))


@pytest.fixture(params=[False, True], ids=["clean", "noisy"])
def noisy(request: pytest.FixtureRequest) -> bool:
    return bool(request.param)


@pytest.fixture
def metal(noisy: bool) -> VirtualShot:
    return load_shot("metal-1k", noisy=noisy)


@pytest.fixture
def together(noisy: bool) -> VirtualShot:
    return load_shot("bars-together", noisy=noisy)


@pytest.fixture
def plain_bar() -> tuple[Bar, Record, dict[str, float]]:
    """One bar with two stations; the strains at both, and their distances from the impact end."""
    folder = DATA / "plain-bar"
    facts = json.loads((folder / "facts.json").read_text())
    stations = {name: facts["channels"][name]["distance_from_impact_end_m"] for name in facts["channels"]}
    return _bar(facts["bars"], facts["bars"]["length_m"]), _record(folder / "record.csv"), stations
