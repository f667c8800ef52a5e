"""Bars of the closed forms: E = 200 GPa, rho = 8000 kg/m3, so c0 = 5000 m/s exactly; diameter 20 mm."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from shpb.quantity import Quantity
from shpb.rig.bar import Bar, Striker
from shpb.rig.gauge import Arrangement, Gauge
from shpb.rig.rig import Rig

Q = Quantity
DATA = Path(__file__).parent / "data"


def bar(**changes: Any) -> Bar:
    values: dict[str, Any] = {
        "material": "steel",
        "diameter_m": Q(0.02),
        "length_m": Q(2.0),
        "density_kg_m3": Q(8000.0),
        "wave_speed_m_s": Q(5000.0),
        "poisson_ratio": Q(0.29),
    }
    return Bar(**{**values, **changes})


def striker(**changes: Any) -> Striker:
    values: dict[str, Any] = {
        "length_m": Q(0.3),
        "diameter_m": Q(0.02),
        "density_kg_m3": Q(8000.0),
        "wave_speed_m_s": Q(5000.0),
    }
    return Striker(**{**values, **changes})


def gauge(**changes: Any) -> Gauge:
    values: dict[str, Any] = {
        "to_specimen_m": Q(1.0),
        "channels": ("CH1",),
        "gauge_factor": Q(2.0),
        "excitation_v": Q(5.0),
        "arrangement": Arrangement.HALF_OPPOSITE,
        "scope_range_v": (-5.0, 5.0),
        "scope_bits": 12,
    }
    return Gauge(**{**values, **changes})


def rig(**changes: Any) -> Rig:
    values: dict[str, Any] = {
        "name": "closed forms",
        "incident_bar": bar(),
        "transmitted_bar": bar(),
        "incident_gauge": gauge(),
        "transmitted_gauge": gauge(channels=("CH2",), to_specimen_m=Q(0.6)),
        "striker": striker(),
    }
    return Rig(**{**values, **changes})


@pytest.fixture(scope="session")
def closed_forms() -> dict[str, Any]:
    """Closed forms of one-dimensional wave theory evaluated at 30 digits; the file's own text says how."""
    forms: dict[str, Any] = json.loads((DATA / "closed_forms.json").read_text())
    return forms
