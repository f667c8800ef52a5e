"""Bending pulse by pulse, where each side of a bar has its own channel. Truth: planted in the records."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from shpb.calibrate.sensitivity.bending import Bending, bending, bending_ratio
from shpb.calibrate.sensitivity.sensitivity_ratio import sensitivity_ratio
from shpb.calibrate.session import BarEnd, ShotKind
from shpb.limits import Limits
from shpb.rig.gauge import Arrangement, Gauge
from shpb.rig.rig import Rig
from shpb.settings import DEFAULT
from tests.calibrate.fired import NOISY, QUIET, fired, gauge, lab, shunted

APART, TOGETHER = ShotKind.BARS_APART, ShotKind.BARS_TOGETHER


def sided(first: str, distance: float) -> Gauge:
    """Two gauges on opposite sides, each with its bridge and channel."""
    one = gauge(first, distance, arrangement=Arrangement.QUARTER)
    return replace(one, channels=(f"{first}a", f"{first}b"))


def both_sides() -> Rig:
    return lab(incident_gauge=sided("I", 0.9), transmitted_gauge=sided("T", 0.6))


def ratios(found: tuple[Bending, ...]) -> dict[tuple[str, str], float]:
    return {(one.station, one.pulse): one.ratio for one in found}


def test_the_ratio_is_that_of_the_two_sides() -> None:
    # |a - b|/|a + b| of a = 1.1 and b = 0.9; half sum and half difference of which the quiet parts do not count.
    a, b = np.array([0.0, 0.1, 1.1, 1.1, 0.0]), np.array([0.0, 0.5, 0.9, 0.9, 0.3])
    assert bending_ratio((a + b) / 2, (a - b) / 2) == pytest.approx(0.1)
    assert bending_ratio((a + b) / 2, (b - a) / 2) == pytest.approx(0.1)


@pytest.mark.parametrize(("noise", "near"), [(QUIET, 5e-4), (NOISY, 2e-3)])
def test_each_pulse_has_its_own_ratio(noise: float, near: float) -> None:
    rig = both_sides()
    apart = bending([fired(rig, "A1", APART, bending=(0.04, 0.07), noise=noise)], rig)
    assert ratios(apart.pulses) == {
        ("incident_gauge", "incident"): pytest.approx(0.04, abs=near),
        ("incident_gauge", "reflected"): pytest.approx(0.07, abs=near),
    }
    out, back = apart.pulses
    # 10 m/s: 1000 um/m; the free end turns the pulse round.
    assert out.axial == pytest.approx(1e-3, rel=0.03)
    assert back.axial == pytest.approx(-1e-3, rel=0.03)
    together = bending([fired(rig, "B1", TOGETHER, bending=(0.04, 0.07), noise=noise)], rig)
    # Nothing comes back of the contact, so there is no reflected pulse to be bent.
    assert ratios(together.pulses) == {
        ("incident_gauge", "incident"): pytest.approx(0.04, abs=near),
        ("transmitted_gauge", "transmitted"): pytest.approx(0.07, abs=near),
    }
    assert not apart.findings
    assert not together.findings


def test_pulses_beyond_the_limit_are_named() -> None:
    rig = both_sides()
    one = fired(rig, "A1", APART, bar="transmitted", struck_end=BarEnd.SPECIMEN, bending=(0.04, 0.15))
    found = bending([one], rig)
    (said,) = found.findings
    assert said.measured.startswith(
        "A1: bending is 15.0 % of the axial strain in the reflected pulse at the transmitted"
    )
    assert said.limit == "10 %"
    strict = replace(DEFAULT, limits=replace(Limits(), bending=0.03))
    assert len(bending([one], rig, strict).findings) == 2


def test_arrays_of_a_pulse_are_those_of_the_record() -> None:
    rig = both_sides()
    one = fired(rig, "A1", APART, bending=(0.05, 0.05), noise=QUIET)
    pulse, _ = bending([one], rig).pulses
    assert pulse.time_s.shape == pulse.axial_strain.shape == pulse.bending_strain.shape
    at = np.searchsorted(one.record.time_s, pulse.time_s[100] - 1e-9)
    assert one.record.time_s[at] == pytest.approx(pulse.time_s[100], abs=1e-12)
    loud = np.abs(pulse.axial_strain) > 0.9e-3
    # Side a is the one that sees more.
    assert np.median(pulse.bending_strain[loud] / pulse.axial_strain[loud]) == pytest.approx(0.05, abs=1e-3)


def test_axial_strain_is_not_touched_by_bending() -> None:
    rig = both_sides()
    straight, bent = (
        sensitivity_ratio([fired(rig, "B1", TOGETHER, bending=(b, b), noise=QUIET)], rig).ratios[0]
        for b in (0.0, 0.2)
    )
    # What is left is the second order of the quarter bridges' non-linearity.
    assert bent.ratio == pytest.approx(straight.ratio, abs=1e-4)


def test_one_channel_says_nothing_of_bending() -> None:
    shots = [fired(lab(), "B1", TOGETHER), shunted(lab(), "S1", "incident_gauge", 174_650.0)]
    found = bending(shots, lab())
    assert found.pulses == ()
    assert found.findings == ()
