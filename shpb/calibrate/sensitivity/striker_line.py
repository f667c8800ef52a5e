"""The strain that the striker's speed makes, against the strain that a station states: its absolute sensitivity.

A striker at V that meets a bar makes ``eps = V Z_s/((Z_s + Z_b) c0)``, ``V/(2 c0)`` where their impedances are equal,
until its own release wave comes back after 2 L/c. The first pulse at a station is carried back to the struck end, with
dispersion, and the mean over the middle 60 % of its first 2 L/c is laid against that; all shots go on one line. Every
shot counts whose pulse a station sees first: bars apart, and the incident bar of bars together.

What the plateau lacks of V/(2 c0). On the independent simulation of bars together (true sensitivity 1, no losses,
square faces, 120 kHz) the mean over the plateau is 0.994 to 1.006 of it at the specimen and 0.996 to 1.003 at the
gauge, as the stretch is chosen (a third to two thirds of the pulse); 0.998 is one of these. All of that is dispersion:
the front rings by up to 6 % (standard deviation) across the plateau at the specimen, 4 % at the gauge, and no stretch
averages it out. Carried back to the struck end the ringing falls to 0.02 % and the mean is 1.0000 (0.9998 with noise,
hum and drift). What rounds the fronts until they reach into the middle 60 % takes away from it: 1.000 with a low-pass
of 120 or 60 kHz, 0.997 with 30 kHz. What a low-pass makes of a rectangle of the pulse's length is known and taken out:
then it is within 0.05 % for any cut-off from 120 down to 12 kHz. Nothing is left for the contact of the faces to
explain. In bars that creep the velocity, not the force, keeps level under a striker of their own stock: it is what is
laid against V/2 there.

The momentum integral ``int eps dt = m V/(E A)`` (striker of the bar's impedance) needs no plateau, but a striker that
keeps nothing of its speed. In the same simulation the integral is 1.005 of it: the release wave in the striker is
dispersed too and the contact bears no tension, so the bar is pushed 1 us longer and the striker rebounds. It also feels
the zero line over the whole window. So the plateau is the result; the integral, with its own uncertainty, is the
cross-check.

References
----------
W. Johnson, Impact Strength of Materials (1972), chapter 1 (from memory); mean over the middle of the plateau and one
line through several speeds: common practice.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.sensitivity.common_terms import (
    LOSS_PER_M,
    MODEL,
    Mean,
    Terms,
    added,
    mean_of,
    size_of,
)
from shpb.calibrate.sensitivity.impact import Impact, impact_of
from shpb.calibrate.sensitivity.line_point import EQUAL_IMPEDANCE, NOT_FLAT, LinePoint, line_point
from shpb.calibrate.sensitivity.line_tests import LineTests, findings_of_line, line_tests, odd_point
from shpb.calibrate.sensitivity.pulses_of import cut_pulses
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.calibrate.struck import from_struck_end_m
from shpb.errors import InputError
from shpb.rig.rig import Rig
from shpb.settings import DEFAULT, Settings
from shpb.trust.sources import relative_u
from shpb.wave.faces import low_pass_of

MOMENTUM_MODEL = 0.005  # what a real striker keeps of its momentum: 0.5 % on the simulation
_DOUBT = 2.5  # standard uncertainties beyond which two ways contradict each other
_SLIP = 0.02  # so far off is no scatter: something was noted wrong
_ASSUMED_SPEED = {"striker speed": 0.005}  # common practice, where nobody has stated it


Shot = tuple[LinePoint, Impact, FiredShot]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StrikerLine:
    """Absolute sensitivity of one station.

    ``mean`` is q, the line's expected by its stated strain, through the origin; ``momentum`` the same by the integral.
    ``terms`` are relative changes of q by one standard uncertainty of what all shots share.
    """

    station: str
    points: tuple[LinePoint, ...]
    mean: Mean
    terms: Terms
    tests: LineTests
    momentum: Mean | None
    u_momentum: float  # relative, with all that it shares
    momentum_terms: Terms
    remarks: tuple[str, ...] = ()

    @property
    def q(self) -> float:
        """True by stated strain per volt."""
        return self.mean.value

    @property
    def u_own(self) -> float:
        """Relative standard uncertainty from the shots alone."""
        return self.mean.u / self.mean.value

    @property
    def u_q(self) -> float:
        """Standard uncertainty with all terms."""
        return self.q * size_of(self.u_own, self.terms)


@dataclass(frozen=True, slots=True, kw_only=True)
class StrikerLines:
    """The lines of all stations that have one."""

    lines: tuple[StrikerLine, ...]
    findings: tuple[CalibrationFinding, ...]


def striker_line(fired: Sequence[FiredShot], rig: Rig, settings: Settings = DEFAULT) -> StrikerLines:
    """Lay the stated strain of every station that sees a striker's pulse first on one line with the expected one.

    Parameters
    ----------
    fired : sequence of FiredShot
        Of any kind; shunts and shots without a striker speed are passed over.
    rig : Rig
        With measured wave speeds.
    settings : Settings
        For the low-pass, as for shots.

    Raises
    ------
    InputError
        If no shot states its striker's speed, or no striker is described.
    """
    struck = [one for one in fired if one.shot.kind is not ShotKind.SHUNT]
    with_speed = [one for one in struck if one.shot.striker_speed_m_s is not None]
    if not with_speed:
        raise InputError(
            f"none of the shots ({', '.join(one.shot_id for one in struck) or 'none was fired'}) states its "
            "striker's speed",
            where="absolute sensitivity",
            mend="State striker_speed_m_s of the shots in the session file",
        )
    low_pass = low_pass_of(rig, settings)
    points: dict[str, list[Shot]] = {}
    for one in with_speed:
        impact = impact_of(one, rig)
        own = [name for name in rig.gauges if name.startswith(one.shot.bar)]
        for name, (pulse, *_) in cut_pulses(one, rig, own).items():
            points.setdefault(name, []).append((line_point(one, rig, pulse, impact, low_pass), impact, one))
    lines: list[StrikerLine] = []
    findings: list[CalibrationFinding] = []
    for name, shots in points.items():
        findings += [_no_plateau(name, point) for point, *_ in shots if not point.usable]
        usable = [shot for shot in shots if shot[0].usable]
        if usable:
            usable, odd = _without_odd(name, usable)
            findings += odd
            line = _line(name, rig, usable)
            findings += findings_of_line(name, line.tests, line.mean)
            findings += [*_durations(line, usable), *_cross_check(line)]
            lines.append(line)
    return StrikerLines(lines=tuple(lines), findings=tuple(dict.fromkeys(findings)))


def _line(station: str, rig: Rig, shots: Sequence[Shot]) -> StrikerLine:
    points = tuple(point for point, *_ in shots)
    common, own = _u_of_shots(shots)
    ways = [from_struck_end_m(one.shot, rig, station) for *_, one in shots]
    shared = {
        "striker speed": common,
        "losses": -LOSS_PER_M * float(np.mean(ways)),
        f"model of the striker's pulse at {station}": MODEL,
    }
    # Impacts of one session are alike but for speed: the mean of their terms serves all.
    names = dict.fromkeys(name for _, impact, _ in shots for name in impact.terms)
    of_impact = {name: float(np.mean([i.terms.get(name, 0.0) for _, i, _ in shots])) for name in names}
    by_integral = [(p.momentum_q, u) for p, u in zip(points, own, strict=True) if p.momentum_q is not None]
    momentum = None
    if by_integral:
        momentum = mean_of([q for q, _ in by_integral], [q * u for q, u in by_integral])
    momentum_terms = added({"striker speed": common, "rebound": MOMENTUM_MODEL}, shots[0][1].impulse_terms)
    return StrikerLine(
        station=station,
        points=points,
        mean=mean_of([p.q for p in points], [p.q * u for p, u in zip(points, own, strict=True)]),
        terms=added(shared, of_impact),
        tests=line_tests(points, own),
        momentum=momentum,
        u_momentum=size_of(momentum.u / momentum.value if momentum else 0.0, momentum_terms),
        momentum_terms=momentum_terms,
        remarks=tuple(dict.fromkeys(remark for _, impact, _ in shots for remark in impact.remarks)),
    )


def _u_of_shots(shots: Sequence[Shot]) -> tuple[float, list[float]]:
    """Relative standard uncertainty that all speeds share, and what each shot has alone."""
    speeds = [relative_u(impact.speed_m_s, "striker speed", _ASSUMED_SPEED) for _, impact, _ in shots]
    # The spacing of the light gates is in every speed alike: the least that any shot states is taken as common.
    common = min(speeds)
    own = [
        float(np.hypot(point.u_stated / point.stated, np.sqrt(max(u**2 - common**2, 0.0))))
        for (point, *_), u in zip(shots, speeds, strict=True)
    ]
    return common, own


def _without_odd(station: str, shots: Sequence[Shot]) -> tuple[list[Shot], list[CalibrationFinding]]:
    """Leave out the one shot that all others contradict while they agree; most often its speed was noted wrong."""
    _, own = _u_of_shots(shots)
    values = [point.q for point, *_ in shots]
    odd = odd_point(values, [value * u for value, u in zip(values, own, strict=True)])
    if odd is None:
        return list(shots), []
    at, away, in_u = odd
    point, *_ = shots[at]
    size = f"lies {100 * away:+.1f} % off" if abs(away) < 1 else f"says {1 + away:.3g} times"
    finding = CalibrationFinding(
        check="shot off the striker's line",
        measured=f"{point.shot_id} {size} what the other {len(shots) - 1} shots at the "
        f"{station.replace('_', ' ')} agree on ({abs(in_u):.0f} standard uncertainties), with "
        f"{point.speed_m_s:.4g} m/s: it is left out",
        limit="3.5 standard uncertainties from all others, which agree",
        action="Look up the striker's speed of this shot, and whether striker and bar were aligned.",
        grave=abs(away) > _SLIP,
    )
    return [shot for k, shot in enumerate(shots) if k != at], [finding]


def _no_plateau(station: str, point: LinePoint) -> CalibrationFinding:
    return CalibrationFinding(
        check="plateau of the striker's pulse",
        measured=f"the pulse of {point.shot_id} at the {station.replace('_', ' ')} is not flat between "
        f"{point.plateau_s[0] * 1e6:.0f} and {point.plateau_s[1] * 1e6:.0f} us: it is left out of the line",
        limit=f"{100 * NOT_FLAT:g} % from end to end",
        action="Fire without a pulse shaper, with the striker's faces clean and square.",
    )


def _durations(line: StrikerLine, shots: Sequence[Shot]) -> list[CalibrationFinding]:
    """A pulse that does not last as long as the striker makes it comes from another striker."""
    found = []
    for point, impact, _ in shots:
        if (
            impact.impedance_ratio < 1 + EQUAL_IMPEDANCE
            and abs(point.duration_s / impact.duration_s - 1) > 0.1
        ):
            found.append(
                CalibrationFinding(
                    check="length of the striker",
                    measured=f"the pulse of {point.shot_id} lasts {point.duration_s * 1e6:.0f} us at the "
                    f"{line.station.replace('_', ' ')}, the striker as stated makes {impact.duration_s * 1e6:.0f} us",
                    limit="10 %",
                    action="Check the striker's length and material: was another striker fired?",
                )
            )
    return found


def _cross_check(line: StrikerLine) -> list[CalibrationFinding]:
    """Plateau and momentum integral must say the same, but for what they do not share."""
    if line.momentum is None:
        return []
    away = float(np.log(line.momentum.value / line.q)) if line.momentum.value > 0 else float("inf")
    apart = added(line.terms, {name: -value for name, value in line.momentum_terms.items()})
    u_away = size_of(float(np.hypot(line.u_own, line.momentum.u / line.momentum.value)), apart)
    if abs(away) <= _DOUBT * u_away:
        return []
    return [
        CalibrationFinding(
            check="plateau against momentum",
            measured=f"the momentum of the striker says {100 * np.expm1(away):+.2f} % more strain per volt at the "
            f"{line.station.replace('_', ' ')} than the plateau",
            limit=f"{100 * _DOUBT * u_away:.2g} %",
            action="Check length, diameter and density of the striker, and that the zero line is quiet; the plateau "
            "stands.",
        )
    ]
