"""Two stations that see one pulse. Truth: planted sensitivities in records of the forward model, waves at a step."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from shpb.calibrate.sensitivity.common_terms import mean_of
from shpb.calibrate.sensitivity.pulses_of import cut_pulses
from shpb.calibrate.sensitivity.sensitivity_ratio import Compared, sensitivity_ratio
from shpb.calibrate.session import BarEnd, ShotKind
from shpb.calibrate.struck import passages_s, require_own_records, struck_station
from shpb.errors import InputError
from shpb.forward.calibration_plan import Losses
from shpb.rig.rig import Rig
from tests.calibrate.fired import NOISY, QUIET, Q, bar, fired, gauge, lab, renamed, shot, striker, with_q

APART, TOGETHER = ShotKind.BARS_APART, ShotKind.BARS_TOGETHER
TRUE = {"incident_gauge": 1.02, "transmitted_gauge": 0.97}


def together(rig: Rig, *speeds: float, noise: float = NOISY, **q: float) -> Compared:
    true = with_q(rig, **(q or TRUE))
    shots = [fired(true, f"B{n}", TOGETHER, v, noise=noise, seed=n) for n, v in enumerate(speeds or (10.0,))]
    return sensitivity_ratio(shots, rig)


# --- bars together ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("noise", "near"), [(QUIET, 3e-4), (NOISY, 1e-3)])
def test_ratio_of_two_stations(noise: float, near: float) -> None:
    (found,) = together(lab(), noise=noise).ratios
    assert (found.station, found.reference) == ("transmitted_gauge", "incident_gauge")
    # A ratio turned round would be 10 % off; model and noise leave 0.03 and 0.1 %.
    assert found.ratio == pytest.approx(0.97 / 1.02, rel=near)
    assert abs(found.ratio - 0.97 / 1.02) < 2 * found.u_ratio < 0.004
    (one,) = found.shots
    assert abs(one.delay_s) < 50e-9
    assert one.rms < (0.001 if noise == QUIET else 0.004)


def test_nothing_comes_back_of_equal_bars() -> None:
    seen = together(lab())
    (contact,) = seen.reflections
    assert contact.expected == 0.0
    assert abs(contact.share) < 0.003
    assert contact.largest < 0.02
    assert not seen.findings


@pytest.mark.parametrize(
    "other",
    [
        bar(material="aluminium", density_kg_m3=Q(2800.0, 2.0), wave_speed_m_s=Q(5050.0, 1.0), length_m=Q(1.6)),
        bar(diameter_m=Q(0.025, 5e-6), length_m=Q(1.6)),
    ],
)  # fmt: skip
def test_unequal_bars_share_the_pulse_as_a_step_of_impedance_does(other: object) -> None:
    # Graff, Wave Motion in Elastic Solids (1975), section 2.4 (from memory): F_t = F_i 2 Z_t/(Z_i + Z_t).
    rig = lab(transmitted_bar=other)
    seen = together(rig, noise=QUIET)
    (found,), (contact,) = seen.ratios, seen.reflections
    a, b = rig.incident_bar, rig.transmitted_bar
    z_a, z_b = (one.density_kg_m3 * one.wave_speed_m_s * one.diameter_m**2 for one in (a, b))
    # Strain of the one wave by that of the other: force by E A.
    force = 2 * z_b / (z_a + z_b)
    stiffness = (b.density_kg_m3 * b.wave_speed_m_s**2 * b.diameter_m**2) / (
        a.density_kg_m3 * a.wave_speed_m_s**2 * a.diameter_m**2
    )
    assert found.expected == pytest.approx(force / stiffness, rel=1e-9)
    assert found.ratio == pytest.approx(0.97 / 1.02, rel=1e-3)
    assert contact.expected == pytest.approx((z_b - z_a) / (z_b + z_a), rel=1e-9)
    assert contact.share == pytest.approx(contact.expected, abs=0.002)
    assert not seen.findings
    # The sizes of both bars are in the ratio: they are said.
    assert found.terms["transmitted bar: diameter"] != 0.0
    assert found.terms["incident bar: density"] == pytest.approx(z_b / (z_a + z_b) * 0.0005, rel=1e-6)


def test_bars_stated_equal_that_are_not_are_a_finding() -> None:
    true = lab(transmitted_bar=bar(diameter_m=Q(0.0215), length_m=Q(1.6)))
    seen = sensitivity_ratio([fired(true, "B1", TOGETHER)], lab())
    (said,) = (one for one in seen.findings if one.check == "reflection at the contact")
    # (1.075^2 - 1)/(1.075^2 + 1) = 7.2 %
    assert "7.2 % of the pulse of B1" in said.measured
    assert not said.grave


def test_a_weighted_mean_of_numbers() -> None:
    agreed = mean_of([1.0, 1.2], [0.1, 0.2])  # weights 100 and 25
    assert agreed.value == pytest.approx(1.04)
    assert agreed.u == pytest.approx(125**-0.5)
    assert not agreed.contradicted
    torn = mean_of([1.0, 2.2], [0.1, 0.2])
    # Residuals of -0.24 and 0.96: chi2 = 2.4^2 + 4.8^2 = 28.8 for one degree of freedom (Birge).
    assert torn.value == pytest.approx(1.24)
    assert torn.u == pytest.approx((28.8 / 125) ** 0.5)
    assert torn.contradicted


def test_repeats_are_one_mean_and_their_scatter_counts() -> None:
    (five,) = together(lab(), 5.0, 7.0, 9.0, 11.0, 12.0).ratios
    assert len(five.shots) == 5
    assert five.ratio == pytest.approx(0.97 / 1.02, rel=5e-4)
    (one,) = together(lab(), 9.0).ratios
    assert five.u_own < 0.6 * one.u_own
    assert five.u_ratio > 0.001  # what is alike in all shots is not averaged away


def test_one_shot_that_differs_is_named() -> None:
    shots = [fired(lab(), f"B{n}", TOGETHER, seed=n) for n in range(4)]
    odd = fired(with_q(lab(), transmitted_gauge=1.03), "B9", TOGETHER, seed=9)
    seen = sensitivity_ratio([*shots, odd], lab())
    (said,) = (one for one in seen.findings if one.check == "repeats of the sensitivity ratio")
    assert "most in B9" in said.measured
    (found,) = seen.ratios
    assert found.u_own > 0.004  # scatter of 1.3 % by the root of five


# --- bars apart -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("side", "end"), [("incident", BarEnd.FAR), ("transmitted", BarEnd.SPECIMEN)])
def test_a_free_end_returns_the_pulse_as_tension(side: str, end: BarEnd) -> None:
    seen = sensitivity_ratio([fired(lab(), "A1", APART, bar=side, struck_end=end)], lab())
    (free,) = seen.free_ends
    assert free.station == f"{side}_gauge"
    assert free.ratio == pytest.approx(-1.0, abs=0.002)
    assert free.u_ratio < 0.003
    assert free.comparison.rms < 0.006
    assert not seen.findings
    assert not seen.ratios


def test_losses_at_a_free_end_are_seen() -> None:
    true_losses = Losses(per_reflection=0.04)
    seen = sensitivity_ratio([fired(lab(), "A1", APART, losses=true_losses)], lab())
    (free,) = seen.free_ends
    assert free.ratio == pytest.approx(-0.96, abs=0.002)
    assert [one.check for one in seen.findings] == ["free end"]


def test_further_stations_of_a_bar_are_compared_too() -> None:
    rig = lab(more_incident_gauges=(gauge("CH3", 0.55),))
    true = with_q(rig, **TRUE)
    true = replace(true, more_incident_gauges=(gauge("CH3", 0.55, gauge_factor=Q(2.0 / 1.05)),))
    seen = sensitivity_ratio([fired(true, "A1", APART), fired(true, "B1", TOGETHER, samples=3000)], rig)
    by_station = {one.station: one for one in seen.ratios}
    assert by_station["transmitted_gauge"].ratio == pytest.approx(0.97 / 1.02, rel=1.5e-3)
    second = by_station["incident_gauge_2"]
    assert second.ratio == pytest.approx(1.05 / 1.02, rel=1.5e-3)
    assert [one.shot_id for one in second.shots] == ["B1", "A1"]


# --- what is no such shot ---------------------------------------------------------------------------------------------


def test_bars_together_called_apart() -> None:
    one = fired(lab(), "B1", TOGETHER)
    with pytest.raises(
        InputError, match=r"shot B1 \(bars-apart\): the transmitted gauge sees .* say bars-together"
    ):
        sensitivity_ratio([replace(one, shot=shot("B1", APART, 10.0))], lab())


def test_bars_together_called_apart_where_the_other_bar_is_not_recorded() -> None:
    one = fired(lab(), "B1", TOGETHER)
    alone = replace(one.record, voltage_v=one.record.voltage_v[:1], channels=("CH1",))
    with pytest.raises(InputError, match="free end returns .* not -100 %.*Was the other bar in contact"):
        sensitivity_ratio([replace(one, shot=shot("B1", APART, 10.0), record=alone)], lab())


def test_bars_apart_called_together() -> None:
    one = fired(lab(), "A1", APART)
    with pytest.raises(InputError, match=r"transmitted gauge shows no pulse.*Then say bars-apart"):
        sensitivity_ratio([replace(one, shot=shot("A1", TOGETHER, 10.0))], lab())


def test_swapped_channels() -> None:
    one = renamed(fired(lab(), "B1", TOGETHER), CH1="CH2", CH2="CH1")
    with pytest.raises(
        InputError, match="transmitted gauge sees a pulse .* before it can have come.*channels swapped"
    ):
        sensitivity_ratio([one], lab())
    # Asked of one station alone it shows too.
    with pytest.raises(InputError, match="channels swapped"):
        cut_pulses(one, lab(), ["incident_gauge"])
    apart = renamed(fired(lab(), "A1", APART), CH1="CH2", CH2="CH1")
    with pytest.raises(InputError, match="incident gauge shows no pulse above its noise"):
        sensitivity_ratio([apart], lab())


def test_inverted_polarity() -> None:
    one = fired(lab(), "B1", TOGETHER)
    for name, factors in (("incident", (-1.0, 1.0)), ("transmitted", (1.0, -1.0))):
        turned = replace(one.record, voltage_v=one.record.voltage_v * np.array(factors)[:, None])
        with pytest.raises(
            InputError, match=f"first pulse at the {name} gauge is tension: the polarity is inverted"
        ):
            sensitivity_ratio([replace(one, record=turned)], lab())


def test_the_wrong_end_named() -> None:
    one = fired(lab(), "A1", APART, bar="transmitted", struck_end=BarEnd.SPECIMEN)
    wrong = replace(one, shot=replace(one.shot, struck_end=BarEnd.FAR))
    with pytest.raises(InputError, match=r"not -100 %.*check which bar and end were struck"):
        sensitivity_ratio([wrong], lab())


def test_a_record_of_another_rig() -> None:
    one = renamed(fired(lab(), "B1", TOGETHER), CH1="left", CH2="right")
    with pytest.raises(
        InputError, match=r"shot B1, incident gauge: .*no channel 'CH1'.*is it a record of this rig"
    ):
        sensitivity_ratio([one], lab())


def test_a_pulse_longer_than_the_station_allows() -> None:
    rig = lab(striker=striker(length_m=Q(0.95)))
    with pytest.raises(InputError, match=r"has not passed the incident gauge .*Take a shorter striker"):
        sensitivity_ratio([fired(rig, "B1", TOGETHER)], rig)


def test_records_that_end_too_soon() -> None:
    with pytest.raises(
        InputError, match=r"record ends \d+ us before the pulse comes to the transmitted gauge"
    ):
        sensitivity_ratio([fired(lab(), "B1", TOGETHER, samples=1000)], lab())
    # 0.5 us a sample, the front at 250 us, a pulse of 100 us.
    with pytest.raises(InputError, match="record ends while the pulse passes the incident gauge"):
        sensitivity_ratio([fired(lab(), "A1", APART, samples=680)], lab())


def test_what_a_short_record_still_says() -> None:
    rig = lab(more_incident_gauges=(gauge("CH3", 0.55),))
    # The pulse comes back to the first station after 2 x 0.9 m/c0 = 360 us, to the second after 220 us.
    seen = sensitivity_ratio([fired(rig, "A1", APART, samples=1420)], rig)
    assert [one.station for one in seen.free_ends] == ["incident_gauge_2"]
    (pair,) = seen.ratios
    assert pair.ratio == pytest.approx(1.0, abs=1e-3)
    (said,) = seen.findings
    assert said.check == "free end"
    assert "the record of A1 ends before the pulse is back at the incident gauge" in said.measured
    # Bars together: the transmitted pulse passes 300 us after the incident one, a reflected one would after 360 us.
    seen = sensitivity_ratio([fired(lab(), "B1", TOGETHER, samples=1380)], lab())
    assert seen.reflections == ()
    assert seen.ratios[0].ratio == pytest.approx(1.0, abs=1e-3)
    assert [one.check for one in seen.findings] == ["reflection at the contact"]


def test_a_record_that_begins_on_the_pulse() -> None:
    one = fired(lab(), "B1", TOGETHER)
    late = replace(one.record, voltage_v=one.record.voltage_v[:, 500:], start_s=0.0)
    with pytest.raises(InputError, match="begins on the pulse at the incident gauge"):
        sensitivity_ratio([replace(one, record=late)], lab())


def test_one_record_used_twice() -> None:
    one = fired(lab(), "B1", TOGETHER)
    twin = replace(one, shot=shot("B2", TOGETHER, 12.0))
    with pytest.raises(InputError, match=r"shot B2: its record B1.csv is that of shot B1, byte for byte"):
        require_own_records([one, twin])
    require_own_records([one, fired(lab(), "B2", TOGETHER, seed=2)])


# --- geometry ---------------------------------------------------------------------------------------------------------


def test_passages_of_a_shot() -> None:
    # By images; c0 = 5000 m/s: 0.2 ms a metre. Bars of 1.8 and 1.6 m, stations 0.9 and 0.6 m from the specimen.
    rig = lab()
    apart = shot("A", APART, bar="transmitted", struck_end=BarEnd.SPECIMEN)
    ways = [0.6, 2.6, 3.8, 5.8]
    assert passages_s(apart, rig, "transmitted_gauge") == pytest.approx([0.2e-3 * way for way in ways])
    assert passages_s(apart, rig, "incident_gauge") == ()
    both = shot("B", TOGETHER)
    ways = [1.8 + 0.6, 1.8 + 3.2 - 0.6, 3 * 1.8 + 0.6]
    assert passages_s(both, rig, "transmitted_gauge") == pytest.approx([0.2e-3 * way for way in ways])
    assert passages_s(both, rig, "incident_gauge")[:2] == pytest.approx([0.18e-3, 0.54e-3])
    assert struck_station(both, rig) == "incident_gauge"
