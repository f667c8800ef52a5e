"""Sensitivities from bars together. Truth: the simulation in data/README.md, whose gauges are exact: q = 1."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.calibrate.sensitivity.impact import impact_of
from shpb.calibrate.sensitivity.line_point import line_point
from shpb.calibrate.sensitivity.pulses_of import cut_pulses
from shpb.calibrate.sensitivity.reconcile import reconcile
from shpb.calibrate.sensitivity.sensitivity_ratio import sensitivity_ratio
from shpb.calibrate.sensitivity.striker_line import striker_line
from shpb.calibrate.session import CalibrationShot, FiredShot, ShotKind
from shpb.quantity import Quantity
from shpb.rig.bar import Striker
from shpb.rig.rig import Rig
from shpb.wave.propagation import Grid, LowPass
from tests.virtual_rig.conftest import DATA, VirtualShot, _bar, _gauge, _record, load_shot

Array = NDArray[np.float64]


def fired(shot: VirtualShot, speed_m_s: float = 10.0) -> FiredShot:
    said = CalibrationShot(
        shot_id="BT-1",
        kind=ShotKind.BARS_TOGETHER,
        record_files=(),
        striker_speed_m_s=Quantity(speed_m_s, 0.001 * speed_m_s, "light gates"),
    )
    return FiredShot(shot=said, record=shot.record)


def is_clean(shot: VirtualShot) -> bool:
    return abs(shot.record.voltage_v[0, 0]) < 1e-6


def test_both_stations_are_alike(together: VirtualShot) -> None:
    seen = sensitivity_ratio([fired(together)], together.rig)
    (ratio,), (contact,) = seen.ratios, seen.reflections
    assert ratio.ratio == pytest.approx(1.0, abs=3e-4 if is_clean(together) else 8e-4)
    assert abs(ratio.shots[0].delay_s) < 40e-9  # a fifth of a sample
    # Transmitted against incident: 0.08 % by a plain shift of the first mode.
    assert ratio.shots[0].rms < (8e-4 if is_clean(together) else 2.5e-3)
    assert abs(contact.share) < 1.5e-3
    assert not seen.findings


def test_the_striker_gives_the_sensitivity(together: VirtualShot) -> None:
    found = striker_line([fired(together)], together.rig)
    (line,) = found.lines
    assert line.q == pytest.approx(1.0, abs=5e-4 if is_clean(together) else 1e-3)
    assert line.points[0].flatness < (5e-4 if is_clean(together) else 3e-3)
    # The striker rebounds: the integral is half a per cent more than its momentum, and its u says so.
    assert line.momentum is not None
    assert line.momentum.value == pytest.approx(0.995, abs=1.5e-3)
    assert abs(line.momentum.value - 1.0) < 2 * line.u_momentum
    assert not found.findings


def test_reconciled(together: VirtualShot) -> None:
    one = [fired(together)]
    ratios, lines = sensitivity_ratio(one, together.rig).ratios, striker_line(one, together.rig).lines
    found = reconcile(together.rig, ratios, lines)
    for q in found.q.values():
        assert q == pytest.approx(1.0, abs=1e-3)
        assert q.u is not None
        assert abs(q - 1.0) < q.u < 0.004
    assert found.determination.correlation("incident gauge factor", "transmitted gauge factor") > 0.5
    assert not found.findings


@pytest.mark.parametrize("factor", [0.5, 1.03])
def test_a_wrong_gain_comes_out_as_such(together: VirtualShot, factor: float) -> None:
    gauge = together.rig.transmitted_gauge
    wrong = replace(together.rig, transmitted_gauge=replace(gauge, gain=Quantity(float(gauge.gain) * factor)))
    (ratio,) = sensitivity_ratio([fired(together)], wrong).ratios
    # Half the gain stated: the stated strain is twice the true one.
    assert ratio.ratio == pytest.approx(factor, rel=1e-3)


@pytest.mark.parametrize("file", ["record.csv", "record_noisy.csv"])
def test_two_stations_of_one_bar(file: str) -> None:
    """Plain bar of 3 m: both stations see one pulse; the record ends before the free end has sent it back."""
    facts = json.loads((DATA / "plain-bar" / "facts.json").read_text())
    bar, length = _bar(facts["bars"], facts["bars"]["length_m"]), facts["bars"]["length_m"]
    stations = [
        _gauge(channel, f"{name}_V", length - channel["distance_from_impact_end_m"])
        for name, channel in facts["channels"].items()
    ]
    striker = Striker(
        length_m=Quantity(facts["striker"]["length_m"]), diameter_m=bar.diameter_m, density_kg_m3=bar.density_kg_m3,
        wave_speed_m_s=bar.wave_speed_m_s,
    )  # fmt: skip
    rig = Rig(
        name="plain bar", incident_bar=bar, transmitted_bar=bar, incident_gauge=stations[0],
        more_incident_gauges=(stations[1],), transmitted_gauge=replace(stations[1], channels=("none",)),
        striker=striker,
    )  # fmt: skip
    speed = Quantity(facts["striker"]["velocity_m_s"], 0.008)
    said = CalibrationShot(shot_id="BA-1", kind=ShotKind.BARS_APART, record_files=(), striker_speed_m_s=speed)
    one = FiredShot(shot=said, record=_record(DATA / "plain-bar" / file))
    seen = sensitivity_ratio([one], rig)
    (ratio,) = seen.ratios
    # 1.2 m apart; station A carried to B is good to 0.05 % of the peak.
    assert ratio.ratio == pytest.approx(1.0, abs=5e-4)
    assert abs(ratio.shots[0].delay_s) < 40e-9
    assert [finding.check for finding in seen.findings] == ["free end"]
    lines = striker_line([one], rig).lines
    assert [line.station for line in lines] == ["incident_gauge", "incident_gauge_2"]
    for line in lines:
        assert line.q == pytest.approx(1.0, abs=1e-3)


@pytest.mark.parametrize("cutoff_hz", [120e3, 60e3, 30e3, 20e3, 12e3])
def test_the_low_pass_does_not_matter(cutoff_hz: float) -> None:
    """A pulse of 136 us: with a rectangle's own loss taken out even 12 kHz, a period and a half, give q = 1."""
    together = load_shot("bars-together", noisy=False)
    one = fired(together)
    pulse = cut_pulses(one, together.rig, ["incident_gauge"])["incident_gauge"][0]
    point = line_point(one, together.rig, pulse, impact_of(one, together.rig), LowPass(cutoff_hz))
    assert point.q == pytest.approx(1.0, abs=8e-4)


def plateau(shot: VirtualShot, distance_m: float, cutoff_hz: float) -> Array:
    """Strain of the first pulse at another place of the incident bar, by V/(2 c0), between its half heights."""
    one = fired(shot)
    pulse = cut_pulses(one, shot.rig, ["incident_gauge"])["incident_gauge"][0]
    bar = shot.rig.incident_bar
    start = pulse.arrival_s + distance_m / bar.wave_speed_m_s - 40e-6
    grid = Grid(start, pulse.interval_s, int(240e-6 / pulse.interval_s))
    strain = pulse.carried(bar, grid, distance_m, LowPass(cutoff_hz)).force_strain
    share = strain / impact_of(one, shot.rig).strain
    loud = np.flatnonzero(share > 0.5)
    return np.asarray(share[loud[0] : loud[-1] + 1])


def windows(share: Array) -> Array:
    """Means over all stretches of a third to two thirds of a plateau that keep from its ends."""
    means = []
    for length in np.arange(0.34, 0.67, 0.04):
        for first in np.arange(0.15, 0.86 - length, 0.02):
            means.append(share[int(first * share.size) : int((first + length) * share.size)].mean())
    return np.array(means)


def test_what_the_plateau_lacks_is_dispersion() -> None:
    """0.998 of V/(2 c0) is one of many: as the stretch is chosen, until the front's ringing is carried back."""
    together = load_shot("bars-together", noisy=False)
    x = float(together.rig.incident_gauge.to_specimen_m)
    to_struck_end = -(float(together.rig.incident_bar.length_m) - x)
    at_specimen, at_gauge, struck = (plateau(together, d, 120e3) for d in (x, 0.0, to_struck_end))
    middle = slice(struck.size // 5, -(struck.size // 5))
    assert at_specimen[middle].std() > 0.03
    assert at_gauge[middle].std() > 0.015
    assert struck[middle].std() < 0.0005
    assert windows(at_specimen).min() < 0.996
    assert windows(at_specimen).max() > 1.004
    assert windows(at_gauge).min() < 0.998
    assert windows(struck) == pytest.approx(1.0, abs=3e-4)
    # Rounded fronts reach into the middle 60 % only where the low-pass is slow.
    assert plateau(together, to_struck_end, 60e3)[middle].mean() == pytest.approx(1.0, abs=5e-4)
    slow = plateau(together, to_struck_end, 30e3)
    assert slow[slow.size // 5 : -(slow.size // 5)].mean() == pytest.approx(0.997, abs=1e-3)
