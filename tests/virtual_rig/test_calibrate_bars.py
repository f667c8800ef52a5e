"""Wave speed and Poisson's ratio of simulated bars. Truth: the simulation described in data/README.md."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

from shpb.calibrate.bars.arrival_speed import arrival_wave_speed
from shpb.calibrate.bars.bar_constants import BarConstants, bar_constants
from shpb.calibrate.session import CalibrationShot, FiredShot, ShotKind
from shpb.quantity import Quantity
from shpb.rig.rig import Rig
from tests.virtual_rig.conftest import DATA, VirtualShot, _bar, _gauge, _record

POISSON = 0.285


def _shot(name: str, kind: ShotKind) -> CalibrationShot:
    return CalibrationShot(shot_id=name, kind=kind, record_files=())


def plain(*, noisy: bool) -> tuple[FiredShot, Rig]:
    """The plain bar as a rig with two stations on its incident bar, stated 1 % too fast and with 0.30."""
    facts = json.loads((DATA / "plain-bar" / "facts.json").read_text())
    length = facts["bars"]["length_m"]
    true = _bar(facts["bars"], length)
    bar = replace(
        true, wave_speed_m_s=Quantity(1.01 * float(true.wave_speed_m_s)), poisson_ratio=Quantity(0.30)
    )
    near, far = (
        _gauge(channel, name, length - channel["distance_from_impact_end_m"])
        for name, channel in facts["channels"].items()
    )
    record = _record(DATA / "plain-bar" / ("record_noisy.csv" if noisy else "record.csv"))
    record = replace(record, channels=tuple(name.removesuffix("_V") for name in record.channels))
    rig = Rig(
        name="plain-bar",
        incident_bar=bar,
        transmitted_bar=replace(bar, material="no part of it"),
        incident_gauge=near,
        more_incident_gauges=(far,),
        transmitted_gauge=replace(far, channels=("not there",)),
    )
    return FiredShot(shot=_shot("PB", ShotKind.BARS_APART), record=record), rig


def true_c0(case: str) -> float:
    return float(json.loads((DATA / case / "truth.json").read_text())["c0_m_s"])


def test_plain_bar(noisy: bool) -> None:
    fired, rig = plain(noisy=noisy)
    found = bar_constants([fired], rig)
    _holds(found, "incident", true_c0("plain-bar"))
    assert set(found.bars) == {"incident"}
    assert found.findings == ()
    curve = found.bars["incident"]
    # Each frequency by itself: the simulation's own dispersion is the first mode within 0.2 % up to 100 kHz.
    low = curve.frequency_hz < 100e3
    off = curve.phase_speed_m_s / curve.fitted_m_s - 1
    limit = 0.001 + 4 * curve.u_phase_speed_m_s / curve.fitted_m_s
    assert (np.abs(off)[low] < limit[low]).all()


def test_bars_together(together: VirtualShot) -> None:
    fired = FiredShot(shot=_shot("BT", ShotKind.BARS_TOGETHER), record=together.record)
    found = bar_constants([fired], together.rig)
    for side in ("incident", "transmitted"):
        _holds(found, side, true_c0("bars-together"))
    assert found.findings == ()


def _holds(found: BarConstants, side: str, c0: float) -> None:
    (determination,) = found.determinations
    speed = determination.quantity(f"{side} bar: wave speed")
    assert speed == pytest.approx(c0, rel=2e-4)
    # Lengths without stated uncertainty: 0.1 % each is assumed, and c0 is no better known.
    assert speed.u is not None
    assert 0.5e-3 < speed.u / c0 < 3e-3
    assert determination.quantity(f"{side} bar: Poisson's ratio") == pytest.approx(POISSON, abs=0.01)
    assert any("0.1 %" in remark for remark in found.remarks)
    assert found.bars[side].young_modulus_pa == pytest.approx(206e9, rel=5e-4)


def test_cross_correlation_is_low(noisy: bool) -> None:
    """Hard fronts over a short way: what the phase is free of."""
    fired, rig = plain(noisy=noisy)
    found = arrival_wave_speed(fired, rig)
    assert found.path_m == pytest.approx(1.2)
    assert -6e-3 < found.by_correlation_m_s / true_c0("plain-bar") - 1 < -1e-3
