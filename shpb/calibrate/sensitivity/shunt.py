"""A resistor across one arm of a bridge: does the chain behind the gauge show the strain that it simulates?

A shunt Rc across an arm R changes it by ``x = -R/(R + Rc)``; a bridge of which that is one arm gives, exactly,
``V = V_ex G |x|/(4 + 2 x)`` whatever its other arms are. The strain it simulates is ``R/(k (R + Rc))``, by the gauge
factor that is left behind the lead wires, k R/(R + R_lead), where the resistor bridges gauge and leads at the amplifier
(R is then both). A shunt tests excitation and gain, not the gauge factor: nothing is strained.

References
----------
Vishay Micro-Measurements Tech Note TN-514, equation 514.7 (simulated strain); exact output by the divider formula.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen, require_finite
from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.sensitivity.common_terms import Mean, Terms, mean_of
from shpb.calibrate.sensitivity.line_tests import LineTests, line_tests
from shpb.calibrate.sensitivity.step import Step, step_in
from shpb.calibrate.session import FiredShot, ShotKind, of_kind
from shpb.calibrate.struck import refuse
from shpb.errors import InputError
from shpb.pulse.bridge import shunt_strain
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.trust.sources import relative_u

# Common practice, relative, where nobody has stated them: a foil gauge as packed, a resistor of the shop.
_ASSUMED = {"resistance": 0.002, "shunt": 0.001, "leads": 0.1}
# Common practice: switching contacts, self-heating and the reading of one shunt.
_OWN = 0.0002
_DOUBT = 2.5


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ShuntPoint:
    """One shunt: the strain that it simulates (``expected``) and what the rig's excitation and gain make of the record.

    Arrays of shape (samples,): the record as such a strain, positive where it looks like compression.
    """

    shot_id: str
    shunt_ohm: float
    expected: float
    stated: float
    u_own: float  # relative
    terms: Terms
    time_s: FloatArray
    strain: FloatArray
    on: tuple[tuple[int, int], ...]  # samples while it was switched on

    @property
    def gain_ratio(self) -> float:
        """True excitation and gain by the stated ones."""
        return self.stated / self.expected


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ShuntCheck:
    """All shunts of one station."""

    station: str
    points: tuple[ShuntPoint, ...]
    mean: Mean  # of the gain ratios
    tests: LineTests


@dataclass(frozen=True, slots=True, kw_only=True)
class ShuntChecks:
    """Every station that was shunted."""

    checks: tuple[ShuntCheck, ...]
    findings: tuple[CalibrationFinding, ...]
    remarks: tuple[str, ...]


def simulated_strain(gauge: Gauge, shunt_ohm: float) -> float:
    """Strain that a resistor simulates [1]: R/(k (R + Rc)) by the gauge factor behind the leads.

    Raises
    ------
    InputError
        If the gauge's resistance is not stated.
    """
    arm = _arm_ohm(gauge)
    return shunt_strain(arm, shunt_ohm, gauge.effective_gauge_factor)


def shunt_output_v(gauge: Gauge, shunt_ohm: float) -> float:
    """Voltage step that the stated excitation and gain would give [V], a magnitude."""
    arm = _arm_ohm(gauge)
    x = -arm / (arm + shunt_ohm)
    ratio = -x / 4 if gauge.linear_amplifier else -x / (4 + 2 * x)
    return float(gauge.excitation_v * gauge.gain * ratio)


def shunt(fired: Sequence[FiredShot], rig: Rig) -> ShuntChecks:
    """Compare every shunt of a session with the strain that it simulates.

    Parameters
    ----------
    fired : sequence of FiredShot
        Of any kind; only shunts are looked at.
    rig : Rig

    Raises
    ------
    InputError
        If a station is not one of the rig's, its resistance or the shunt's is not stated, a channel is missing, or the
        record shows no step.
    """
    points: dict[str, list[ShuntPoint]] = {}
    findings: list[CalibrationFinding] = []
    remarks: list[str] = []
    for one in of_kind(fired, ShotKind.SHUNT):
        point, said, noted = _point(one, rig)
        points.setdefault(one.shot.station, []).append(point)
        findings += said
        remarks += noted
    checks = tuple(_check(station, shunted) for station, shunted in points.items())
    for check in checks:
        findings += _of_line(check)
    return ShuntChecks(checks=checks, findings=tuple(findings), remarks=tuple(dict.fromkeys(remarks)))


def _arm_ohm(gauge: Gauge) -> float:
    if gauge.resistance_ohm is None:
        raise InputError(
            "the resistance of the gauge is not stated",
            where="shunt",
            mend="Add resistance_ohm to its table in the rig file",
        )
    return float(gauge.resistance_ohm + gauge.lead_resistance_ohm)


def _point(fired: FiredShot, rig: Rig) -> tuple[ShuntPoint, list[CalibrationFinding], list[str]]:
    shot, record = fired.shot, fired.record
    words = shot.station.replace("_", " ")
    gauge = rig.gauges.get(shot.station)
    if gauge is None:
        raise refuse(
            fired, f"the rig has no station {shot.station!r}", f"Name one of {', '.join(rig.gauges)}"
        )
    if shot.shunt_ohm is None or not shot.shunt_ohm > 0:
        found = "not stated" if shot.shunt_ohm is None else f"{float(shot.shunt_ohm):g} ohm"
        raise refuse(fired, f"its resistor is {found}", "State shunt_ohm, above zero")
    if gauge.resistance_ohm is None:
        raise refuse(
            fired,
            f"the resistance of the {words} is not stated",
            f"Add resistance_ohm to [{shot.station}] in the rig file",
        )
    steps = _steps(fired, gauge, words)
    _refuse_pulse(fired, rig, steps[0][1])
    output, expected = shunt_output_v(gauge, shot.shunt_ohm), simulated_strain(gauge, shot.shunt_ohm)
    ratios = [abs(step.height) / output for _, step, _ in steps]
    noise = [step.u_height / abs(step.height) for _, step, _ in steps]
    _, shown, voltage = steps[0]
    sign = float(np.sign(shown.height))
    findings, remarks = _wiring(fired, gauge, words, sign, [channel for channel, *_ in steps])
    point = ShuntPoint(
        shot_id=fired.shot_id,
        shunt_ohm=float(shot.shunt_ohm),
        expected=expected,
        stated=expected * float(np.mean(ratios)),
        u_own=float(np.hypot(np.sqrt(np.sum(np.square(noise))) / len(noise), _OWN)),
        terms=_terms(fired, gauge),
        time_s=frozen(record.time_s),
        strain=frozen((voltage - shown.zero) * (expected / output) * -gauge.tension_sign),
        on=shown.on,
    )
    return point, findings, remarks


def _steps(fired: FiredShot, gauge: Gauge, words: str) -> list[tuple[str | int, Step, FloatArray]]:
    """The step of every channel of the station that shows one."""
    found: list[tuple[str | int, Step, FloatArray]] = []
    for channel in gauge.channels:
        try:
            voltage = fired.record.channel(channel)
            require_finite(voltage, where=f"channel {channel!r}", mend="Export the record again")
        except InputError as error:
            raise refuse(
                fired, f"{error.where}: {error.what}", f"{error.mend}; is it a record of this rig?"
            ) from error
        step = step_in(voltage, fired.record.sample_interval_s)
        if step is not None:
            found.append((channel, step, voltage))
    if not found:
        raise refuse(
            fired,
            f"the record shows no step at the {words}",
            "Start the record before the resistor is switched on; check the channel and that the shunt is connected",
        )
    return found


def _refuse_pulse(fired: FiredShot, rig: Rig, step: Step) -> None:
    """What lasts no longer than a wave can between the ends of a bar may be the pulse of a fired shot."""
    bar = rig.bar_of(fired.shot.station)
    longest = max(stop - start for start, stop in step.on) * fired.record.sample_interval_s
    if longest < 2 * bar.length_m / bar.wave_speed_m_s:
        raise refuse(
            fired,
            f"the step lasts {longest * 1e6:.0f} us, as the pulse of a fired shot may",
            "Is it the record of a shunt? Leave the resistor switched on for some milliseconds",
        )


def _terms(fired: FiredShot, gauge: Gauge) -> Terms:
    """Relative change of the gain ratio by one standard uncertainty of the resistances; -R/(R + Rc) goes with R/Rc."""
    shot = fired.shot
    assert gauge.resistance_ohm is not None  # asked before
    assert shot.shunt_ohm is not None
    arm, leads = _arm_ohm(gauge), float(gauge.lead_resistance_ohm)
    rest = float(shot.shunt_ohm / (arm + shot.shunt_ohm))  # d ln x / d ln R = -d ln x / d ln Rc
    u_gauge = relative_u(gauge.resistance_ohm, "resistance", _ASSUMED) * float(gauge.resistance_ohm) / arm
    # One resistor may have served several bridges: it has one error.
    resistor = f"shunt of {float(shot.shunt_ohm):g} ohm {shot.shunt_ohm.origin}".strip()
    terms = {
        f"resistance of {shot.station}": -rest * u_gauge,
        resistor: rest * relative_u(shot.shunt_ohm, "shunt", _ASSUMED),
    }
    if leads:
        share = relative_u(gauge.lead_resistance_ohm, "leads", _ASSUMED) * leads / arm
        terms[f"leads of {shot.station}"] = -rest * share
    return terms


def _wiring(
    fired: FiredShot, gauge: Gauge, words: str, sign: float, channels: Sequence[str | int]
) -> tuple[list[CalibrationFinding], list[str]]:
    findings, remarks = [], []
    if sign == gauge.tension_sign:
        findings.append(
            CalibrationFinding(
                check="sign of the shunt",
                measured=f"the step of {fired.shot_id} at the {words} points to tension",
                limit="compression, where an active axial arm is shunted",
                action="Fine if a transverse or passive arm was shunted; else voltage_under_compression is wrong.",
            )
        )
    if gauge.resistance_ohm is not None and gauge.lead_resistance_ohm:
        share = 200 * gauge.lead_resistance_ohm / gauge.resistance_ohm
        remarks.append(
            f"the shunt of the {words} is taken across gauge and lead wires, at the amplifier; across the gauge alone "
            f"the gain would come out {share:.2g} % higher"
        )
    if len(channels) < len(gauge.channels):
        remarks.append(f"{fired.shot_id}: only channel {channels[0]!r} of the {words} shows the step")
    return findings, remarks


def _check(station: str, points: Sequence[ShuntPoint]) -> ShuntCheck:
    # The resistor's own error differs from point to point of a line: there it counts as the point's own.
    own = [
        float(np.hypot(p.u_own, sum(abs(u) for name, u in p.terms.items() if name.startswith("shunt "))))
        for p in points
    ]
    ratios = [point.gain_ratio for point in points]
    return ShuntCheck(
        station=station,
        points=tuple(points),
        mean=mean_of(ratios, [r * u for r, u in zip(ratios, own, strict=True)]),
        tests=line_tests(points, own),
    )


def _of_line(check: ShuntCheck) -> list[CalibrationFinding]:
    """Several resistors must give one gain: those that do not are not linear, or one is not what it is called."""
    if not check.mean.contradicted:
        return []
    ratios = {f"{p.shot_id} ({p.shunt_ohm:,.0f} ohm)": p.gain_ratio for p in check.points}
    middle = float(np.median(list(ratios.values())))
    worst = max(ratios, key=lambda name: abs(np.log(ratios[name] / middle)))
    said = ", ".join(f"{name} {ratio:.4g}" for name, ratio in ratios.items())
    if len(ratios) > 2:
        said += f"; {worst} lies off most"
    return [
        CalibrationFinding(
            check="linearity by shunts",
            measured=f"measured by simulated strain of the {check.station.replace('_', ' ')}: {said}",
            limit="alike within the uncertainty of the resistors",
            action="Check the resistors' values (a factor of ten is a band of colour), then the amplifier's linearity.",
            grave=check.mean.scatter > 0.02,
        )
    ]
