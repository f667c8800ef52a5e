"""All sources of sensitivity in one fit. Truth: drawn or planted; least squares by hand where there is one unknown."""

from __future__ import annotations

from dataclasses import replace
from typing import NamedTuple

import numpy as np
import pytest

from shpb.arrays import FloatArray
from shpb.calibrate.sensitivity.common_terms import Mean
from shpb.calibrate.sensitivity.line_tests import LineTests
from shpb.calibrate.sensitivity.reconcile import Reconciled, SourceLine, reconcile
from shpb.calibrate.sensitivity.sensitivity_ratio import SensitivityRatio, sensitivity_ratio
from shpb.calibrate.sensitivity.shunt import ShuntCheck, ShuntPoint, shunt
from shpb.calibrate.sensitivity.striker_line import StrikerLine, striker_line
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.errors import InputError
from shpb.rig.gauge import Arrangement
from shpb.rig.rig import Rig
from tests.calibrate.fired import Q, fired, gauge, lab, shunted

FIRST, SECOND = "incident_gauge", "transmitted_gauge"
NO_TESTS = LineTests(
    slope=None, u_slope=None, intercept=None, u_intercept=None, curvature=None, u_curvature=None, residuals=np.zeros(1)
)  # fmt: skip


def mean(value: float, u: float) -> Mean:
    return Mean(value=value, u=u, chi2=0.0, freedom=0, scatter=0.0, contradicted=False)


def ratio(value: float, u: float = 0.001, **terms: float) -> SensitivityRatio:
    return SensitivityRatio(
        station=SECOND, reference=FIRST, expected=1.0, mean=mean(value, u * value), terms=terms, shots=()
    )


def line(value: float, u: float = 0.001, station: str = FIRST, **terms: float) -> StrikerLine:
    return StrikerLine(
        station=station, points=(), mean=mean(value, u * value), terms=terms, tests=NO_TESTS, momentum=None,
        u_momentum=0.01, momentum_terms={},
    )  # fmt: skip


def check(*gains: float, station: str = FIRST, u: float = 0.0005, **terms: float) -> ShuntCheck:
    points = tuple(
        ShuntPoint(
            shot_id=f"S{n}", shunt_ohm=174_650.0, expected=1e-3, stated=1e-3 * gain, u_own=u, terms=terms,
            time_s=np.zeros(1), strain=np.zeros(1), on=(),
        )
        for n, gain in enumerate(gains, 1)
    )  # fmt: skip
    return ShuntCheck(station=station, points=points, mean=mean(gains[0], u), tests=NO_TESTS)


def source(found: Reconciled, name: str) -> SourceLine:
    (one,) = (one for one in found.sources if name in one.name)
    return one


def log_q(found: Reconciled) -> FloatArray:
    return np.log([float(q) for q in found.q.values()])


# --- closed forms -----------------------------------------------------------------------------------------------------


def test_one_station_is_a_weighted_mean() -> None:
    # Stated: 1 % of the gauge factor, 0.1 % of the excitation, 0.5 % of the gain; the striker says 1.008 within 0.4 %.
    found = reconcile(lab(), lines=[line(1.008, 0.004)])
    weights = np.array([1 / (0.01**2 + 0.001**2 + 0.005**2), 1 / 0.004**2])
    expected = float(np.log(1.008) * weights[1] / weights.sum())
    assert log_q(found) == pytest.approx([expected], rel=1e-9)
    (q,) = found.q.values()
    assert q.u == pytest.approx(float(q) / np.sqrt(weights.sum()), rel=1e-9)
    striker = source(found, "striker line")
    assert striker.weights[FIRST] == pytest.approx(weights[1] / weights.sum())
    assert striker.q == pytest.approx(1.008)
    # Residual of a source against all the others: its distance by the root of both variances.
    assert striker.residual == pytest.approx(np.log(1.008) / np.sqrt((1 / weights).sum()), rel=1e-9)
    assert found.determination.names == ("incident gauge factor",)
    # More strain per volt than stated means a smaller gauge factor.
    assert found.determination.values[0] == pytest.approx(2.0 * np.exp(-expected), rel=1e-12)


def test_a_shunt_tells_gain_from_gauge_factor() -> None:
    # The shunt sees 3 % too much gain, nothing else is known: ln q = -0.03, and u keeps that of the gauge factor.
    stated = lab(incident_gauge=gauge("CH1", 0.9, gain=Q(200.0, 10.0)))
    found = reconcile(stated, shunts=[check(1.03, u=0.0004)])
    assert log_q(found) == pytest.approx([-np.log(1.03)], abs=1e-4)
    assert found.q[FIRST].u == pytest.approx(0.01 / 1.03, rel=0.01)


def test_a_ratio_hands_the_striker_on() -> None:
    found = reconcile(lab(), [ratio(0.95)], [line(1.02)])
    # Stated values of 1.1 % hold the result back by a hundredth of what is left.
    assert log_q(found) == pytest.approx([np.log(1.02), np.log(1.02 * 0.95)], abs=1.5e-3)
    assert found.determination.correlation("incident gauge factor", "transmitted gauge factor") > 0.6
    per_volt = found.strain_per_volt[SECOND]
    # k 2, 5 V, gain 200, two active arms: e = 2 V/(2 5 200) = 1 mm/m for a volt.
    assert per_volt == pytest.approx(1e-3 * float(found.q[SECOND]), rel=1e-12)


def test_what_sources_share_is_not_averaged_away() -> None:
    alone = reconcile(lab(), lines=[line(1.0, 0.0002, **{"striker speed": 0.003})])
    both = reconcile(
        lab(),
        lines=[
            line(1.0, 0.0002, **{"striker speed": 0.003}),
            line(1.0, 0.0002, SECOND, **{"striker speed": 0.003}),
        ],
    )
    assert both.q[FIRST].u == pytest.approx(alone.q[FIRST].u, rel=0.05)
    # The one error s of the speed, by its own u and by what is stated of two stations: 1/u(s)^2 = 1/0.003^2 + 2/u^2.
    own, stated = 1 / 0.003**2, 2 / (0.01**2 + 0.001**2 + 0.005**2)
    assert both.q[FIRST].u == pytest.approx((own + stated) ** -0.5, rel=0.01)
    assert both.determination.correlation("incident gauge factor", "transmitted gauge factor") > 0.9
    # And its share in the result stands ready for what rests on it too: the factor falls with the speed's error.
    assert both.shared["striker speed"] == pytest.approx([-2.0 * 0.003 * own / (own + stated)] * 2, rel=0.01)


def test_further_stations_have_their_names() -> None:
    rig = lab(more_incident_gauges=(gauge("CH3", 0.5, gauge_factor=Q(2.1, 0.02)),))
    found = reconcile(rig, lines=[line(1.0), line(1.01, 0.001, "incident_gauge_2")])
    assert found.determination.names == ("incident gauge factor", "incident gauge 2 factor")
    assert found.determination.values[1] == pytest.approx(2.1 / 1.01, rel=1e-3)


def test_what_is_not_stated_is_assumed_and_said() -> None:
    bare = lab(incident_gauge=gauge("CH1", 0.9, gauge_factor=Q(2.0), gain=Q(200.0)))
    found = reconcile(bare, lines=[line(1.0)])
    (remark,) = found.determination.remarks
    assert "not stated and was assumed" in remark
    assert not reconcile(lab(), lines=[line(1.0)]).determination.remarks


# --- coverage ---------------------------------------------------------------------------------------------------------


class Drawn(NamedTuple):
    found: Reconciled
    truth: FloatArray  # ln q of both stations


def drawn(number: int) -> Drawn:
    """Every source off by draws of its own and of the shared errors, as stated."""
    random = np.random.default_rng([20310203, number])

    def off(u: float) -> float:
        return u * float(random.standard_normal())

    rig = lab()
    u_electrical = float(np.hypot(0.001, 0.005))
    factor = {name: off(0.01) for name in (FIRST, SECOND)}
    electrical = {name: off(u_electrical) for name in (FIRST, SECOND)}
    truth = {name: -(factor[name] + electrical[name]) for name in (FIRST, SECOND)}
    errors = {name: float(random.standard_normal()) for name in ("speed", "bars", "one", "other")}

    def seen(value: float, u: float, terms: dict[str, float]) -> float:
        return float(np.exp(value + off(u) + sum(size * errors[name] for name, size in terms.items())))

    of_line, of_ratio = {"speed": 0.002, "bars": -0.001}, {"bars": 0.0015}
    lines = [line(seen(truth[FIRST], 0.0008, of_line), 0.0008, **of_line)]
    ratios = [ratio(seen(truth[SECOND] - truth[FIRST], 0.0009, of_ratio), 0.0009, **of_ratio)]
    shunts = [
        check(
            *(seen(electrical[name], 0.0005, {term: 0.001}) for _ in range(2)), station=name, **{term: 0.001}
        )
        for name, term in ((FIRST, "one"), (SECOND, "other"))
    ]
    found = reconcile(rig, ratios, lines, shunts)
    return Drawn(found, np.array([truth[FIRST], truth[SECOND]]))


@pytest.mark.slow
def test_coverage_of_the_stated_intervals() -> None:
    runs = [drawn(number) for number in range(200)]
    pulls = np.array([(log_q(run.found) - run.truth) / _u(run.found) for run in runs])
    inside = np.mean(np.abs(pulls) < 1.96, axis=0)
    # 95 % of 200: one standard deviation is 1.5 %.
    assert np.all((inside > 0.90) & (inside < 0.99))
    assert pulls.std(axis=0) == pytest.approx([1.0, 1.0], abs=0.13)
    # Six degrees of freedom, and hardly a source called odd that is not.
    assert np.mean([run.found.chi2 for run in runs]) == pytest.approx(6.0, abs=0.75)
    assert {run.found.freedom for run in runs} == {6}
    assert sum(any(one.left_out for one in run.found.sources) for run in runs) <= 2
    assert (
        np.mean([run.found.birge > 1 for run in runs]) < 0.11
    )  # 5 % by chance, 1.5 % one standard deviation


def _u(found: Reconciled) -> FloatArray:
    return np.array([float(q.u or 0.0) / float(q) for q in found.q.values()])


# --- the odd one out --------------------------------------------------------------------------------------------------


def session(true: Rig, shunts: list[FiredShot] | None = None) -> list[FiredShot]:
    struck = [fired(true, f"B{n}", ShotKind.BARS_TOGETHER, v, seed=n) for n, v in enumerate((6.0, 9.0, 12.0))]
    return struck + (shunts if shunts is not None else bridges(true))


def bridges(true: Rig, *, said: float = 1.0) -> list[FiredShot]:
    """Two shunts of each bridge; those of the transmitted one called ``said`` times what they are."""
    return [
        shunted(true, f"S{station[0].upper()}{n}", station, ohm, said_ohm=ohm * factor, seed=n)
        for station, factor in ((FIRST, 1.0), (SECOND, said))
        for n, ohm in enumerate((174_650.0, 87_150.0), 1)
    ]


def reconciled(shots: list[FiredShot], stated: Rig) -> Reconciled:
    return reconcile(
        stated,
        sensitivity_ratio(shots, stated).ratios,
        striker_line(shots, stated).lines if any(one.shot.striker_speed_m_s for one in shots) else (),
        shunt(shots, stated).checks,
    )


def really(**changes: object) -> Rig:
    """Off from what is stated by what is stated of it: 1 % of the gauge factors, half of that of the gains."""
    first = {"gain": Q(201.0), "gauge_factor": Q(2.02)} | changes.pop("first", {})  # type: ignore[operator]
    second = {"gain": Q(199.0), "gauge_factor": Q(1.99)} | changes.pop("second", {})  # type: ignore[operator]
    return lab(incident_gauge=gauge("CH1", 0.9, **first), transmitted_gauge=gauge("CH2", 0.6, **second))


TRUE_Q = {FIRST: 400 / (201 * 2.02), SECOND: 400 / (199 * 1.99)}


def test_a_whole_session_gives_the_planted_sensitivities() -> None:
    found = reconciled(session(really()), lab())
    for station, true in TRUE_Q.items():
        assert found.q[station] == pytest.approx(true, rel=1.5e-3)
        assert abs(found.q[station] - true) < 2 * found.q[station].u
    factors = found.determination
    assert factors.quantity("incident gauge factor") == pytest.approx(201 * 2.02 / 200, rel=1.5e-3)
    assert factors.shots == ("SI1", "SI2", "ST1", "ST2", "B0", "B1", "B2")
    assert not found.findings
    assert found.birge == 1.0
    # The light gates rule: nobody else knows both stations as well.
    assert source(found, "striker line").weights[SECOND] > 0.8


def test_a_wrong_arrangement_is_named() -> None:
    """One of two gauges in the bridge: half the volts."""
    true = really(first={"arrangement": Arrangement.QUARTER})
    found = reconciled(session(true), lab())
    assert found.q[FIRST] == pytest.approx(2 * TRUE_Q[FIRST], rel=4e-3)
    assert found.q[SECOND] == pytest.approx(TRUE_Q[SECOND], rel=2e-3)
    (said,) = found.findings
    assert said.grave
    assert "gauge factor of the incident gauge as stated" in said.measured
    assert "a factor of two: the bridge arrangement" in said.action


def test_a_wrong_arrangement_that_only_the_ratio_sees() -> None:
    """Of the other bar the ratio may be wrong as well: both are named, nothing is left out, u grows."""
    found = reconciled(session(really(second={"arrangement": Arrangement.QUARTER})), lab())
    (said,) = found.findings
    assert said.grave
    assert "pulses of the transmitted gauge against the incident gauge says 2" in said.measured
    assert "gauge factor of the transmitted gauge as stated" in said.measured
    assert "factor of two" in said.action
    assert found.birge > 10
    assert abs(found.q[SECOND] - 2 * TRUE_Q[SECOND]) < 2 * found.q[SECOND].u


def test_a_wrong_gain_is_named() -> None:
    found = reconciled(session(really(second={"gain": Q(398.0)})), lab())
    assert found.q[SECOND] == pytest.approx(TRUE_Q[SECOND] / 2, rel=2e-3)
    (said,) = found.findings
    assert "excitation and gain of the transmitted gauge as stated" in said.measured
    assert source(found, "excitation and gain of the transmitted").left_out


def test_a_resistor_ten_times_off_takes_no_part() -> None:
    true = really()
    wrong = shunted(true, "SI1", FIRST, 17_465.0, said_ohm=174_650.0)
    found = reconciled(session(true, [wrong, *bridges(true)[2:]]), lab())
    for station, q in TRUE_Q.items():
        assert found.q[station] == pytest.approx(q, rel=1.5e-3)
    (said,) = found.findings
    assert said.measured.startswith("the shunt SI1 of the incident gauge says 90 % less strain per volt")
    assert "factor of ten" in said.action
    assert source(found, "shunt SI1").left_out
    assert source(found, "shunt SI1").weights == {}


def test_both_resistors_of_a_bridge_off_together() -> None:
    found = reconciled(session(really(), bridges(really(), said=10.0)), lab())
    (said,) = found.findings
    assert (
        "shunt ST1 of the transmitted gauge and shunt ST2 of the transmitted gauge say 90 % less"
        in said.measured
    )
    assert found.q[SECOND] == pytest.approx(TRUE_Q[SECOND], rel=1.5e-3)


def test_a_shunt_a_little_off_is_named_too() -> None:
    # Gauge factors known to 0.2 % leave no other explanation: the shunts of one bridge say 2.1 % more gain.
    stated = lab(
        incident_gauge=gauge("CH1", 0.9, gauge_factor=Q(2.0, 0.004)),
        transmitted_gauge=gauge("CH2", 0.6, gauge_factor=Q(2.0, 0.004)),
    )
    shunts = [check(1.0, 1.0, u=0.0003), check(1.021, 1.021, station=SECOND, u=0.0003)]
    found = reconcile(stated, [ratio(1.0)], [line(1.0)], shunts)
    (said,) = found.findings
    assert (
        "S1 of the transmitted gauge and shunt S2 of the transmitted gauge say 2.1 % less strain per volt"
        in said.measured
    )
    assert "resistor's value (174,650 ohm stated)" in said.action
    assert log_q(found) == pytest.approx([0.0, 0.0], abs=5e-4)


def test_a_wrong_speed_is_named() -> None:
    shots = [
        replace(one, shot=replace(one.shot, striker_speed_m_s=Q(1.06 * float(speed), 0.001 * float(speed))))
        if (speed := one.shot.striker_speed_m_s)
        else one
        for one in session(really())
    ]
    found = reconciled(shots, lab())
    (said,) = found.findings
    assert "striker line of the incident gauge says" in said.measured
    assert "speed reading" in said.action
    # What is left is known no better than the gauge factors are.
    assert found.q[FIRST].u > 0.006
    assert abs(found.q[FIRST] - TRUE_Q[FIRST]) < 2 * found.q[FIRST].u


def test_exchanged_gauges_are_named() -> None:
    """The rig file has the gauge factors of two stations the wrong way round."""
    first, second = {"gauge_factor": Q(2.18)}, {"gauge_factor": Q(2.02)}
    stated = lab(
        incident_gauge=gauge("CH1", 0.9, gauge_factor=Q(2.02, 0.006)),
        transmitted_gauge=gauge("CH2", 0.6, gauge_factor=Q(2.18, 0.006)),
    )
    true = lab(incident_gauge=gauge("CH1", 0.9, **first), transmitted_gauge=gauge("CH2", 0.6, **second))
    found = reconciled(session(true), stated)
    assert found.birge > 2
    (said,) = (one for one in found.findings if one.check == "stations exchanged")
    assert said.grave
    assert "incident gauge is as sensitive as is stated of the transmitted gauge" in said.measured


def test_sources_that_disagree_without_an_odd_one_make_u_larger() -> None:
    calm = reconcile(lab(), lines=[line(1.0, 0.004)])
    torn = reconcile(lab(), lines=[line(1.035, 0.004)])
    (said,) = torn.findings
    assert said.check == "sources of sensitivity disagree"
    assert torn.birge == pytest.approx(np.sqrt(torn.chi2), rel=1e-9)
    assert torn.q[FIRST].u / float(torn.q[FIRST]) == pytest.approx(torn.birge * calm.q[FIRST].u, rel=1e-6)
    assert "incident gauge as stated" in said.measured
    assert "striker line" in said.measured


def test_nothing_to_reconcile() -> None:
    with pytest.raises(InputError, match="nothing was measured of any station"):
        reconcile(lab())
    with pytest.raises(InputError, match=r"the striker line of incident_gauge is -1.*polarity"):
        reconcile(lab(), lines=[line(-1.0, -0.001)])
