"""Repeats of one test held against each other: a shot that disagrees with the others is named.

Two shots are repeats where material and kind of test are the same, the temperatures within 10 K and the mean rates
within 20 %. Their flow stresses at the same strain may differ by what each shot has of its own (the parts that one rig
gives to all its shots cancel) and by the scatter of the material and of the preparation:

    |s_i - median of the others| > 2 sqrt(v_i + v_others),  v = u_own^2 + (scatter x stress)^2

with v_others = pi/2 mean(v)/n for the median of n shots (efficiency of the median of normal values, large n).

References
----------
Law of propagation and k = 2: JCGM 100:2008, 5.1.2 and 6.3.3. Condition and scatter: common practice, 2 to 5 % of flow
stress within one laboratory.
"""

from __future__ import annotations

import dataclasses
import hashlib
import math
import statistics
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from shpb.arrays import FloatArray
from shpb.response.flow import plastic_strain
from shpb.response.response import Response
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings
from shpb.trust.budget import ALL_OUTPUTS, Budget
from shpb.trust.finding import Verdict

SAME_TEMPERATURE_K = 10.0
SAME_RATE = 0.20  # of the larger of the two
COVERAGE_FACTOR = 2.0


class Reduced(Protocol):
    """What of a reduced shot the comparison looks at."""

    @property
    def sheet(self) -> ShotSheet:
        """What was tested."""

    @property
    def rig(self) -> Rig:
        """What stood in the lab."""

    @property
    def settings(self) -> Settings:
        """Choices and limits."""

    @property
    def response(self) -> Response:
        """The curves."""

    @property
    def budget(self) -> Budget:
        """Their uncertainty."""

    @property
    def verdict(self) -> Verdict:
        """Whether it counts."""


@dataclass(frozen=True, slots=True, kw_only=True)
class FlowPoint:
    """Flow stress of one shot at one strain, with what is uncertain in this shot alone and with its whole rig [Pa]."""

    strain: float
    plastic: bool  # whether ``strain`` is plastic strain
    stress_pa: float
    u_own_pa: float
    u_shared_pa: float


@dataclass(frozen=True, slots=True, kw_only=True)
class RepeatShot:
    """What of one shot its repeats are held against: small, and fit to come from another process."""

    shot_id: str
    material: str
    kind: str
    temperature_k: float
    rate_per_s: float
    rig: str  # the same for shots of one rig file
    scatter: float  # share of the flow stress that repeats scatter by
    flow: tuple[FlowPoint, ...]

    def is_repeat_of(self, other: RepeatShot) -> bool:
        """Whether both are the same test."""
        mine, its = (shot.material.strip().casefold() for shot in (self, other))
        return (
            (mine, self.kind) == (its, other.kind)
            and abs(self.temperature_k - other.temperature_k) <= SAME_TEMPERATURE_K
            and abs(self.rate_per_s - other.rate_per_s) <= SAME_RATE * max(self.rate_per_s, other.rate_per_s)
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Disagreement:
    """One shot against the median of its repeats, at the strain where they differ most for their uncertainty."""

    shot_ids: tuple[str, ...]  # one; or two where only two repeats are known and either may be wrong
    strain: float
    plastic: bool
    stress_pa: float
    others_pa: float
    allowed_pa: float

    @property
    def share(self) -> float:
        """By what share the stress differs from that of the others."""
        return self.stress_pa / self.others_pa - 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Repeats:
    """Shots of one condition, and those that disagree."""

    shots: tuple[RepeatShot, ...]
    disagreements: tuple[Disagreement, ...]
    compared: bool  # False where they have no strain in common


def repeat_shot(result: Reduced) -> RepeatShot | None:
    """What a shot gives to the comparison; None where it does not count or has no flow stress."""
    sheet, response = result.sheet, result.response
    if result.verdict is Verdict.REJECT:
        return None
    flow = _flow_points(result)
    if not flow:
        return None
    rig = hashlib.sha256(f"{result.rig.name}\n{result.rig.text}".encode()).hexdigest()[:16]
    return RepeatShot(
        shot_id=sheet.shot_id,
        material=sheet.specimen.material,
        kind=sheet.kind.value,
        temperature_k=float(sheet.temperature_k),
        rate_per_s=response.rate.mean_per_s,
        rig=rig,
        scatter=result.settings.limits.repeat_scatter,
        flow=flow,
    )


def _flow_points(result: Reduced) -> tuple[FlowPoint, ...]:
    response, budget = result.response, result.budget
    if response.span is None:
        return ()
    part, curve = slice(*response.span), response.curve
    strain, stress = curve.true_strain[part], curve.true_stress_pa[part]
    axis = np.maximum.accumulate(plastic_strain(strain, stress, result.sheet.specimen.young_modulus_pa))
    row = ALL_OUTPUTS.index("true_stress_at_strain")

    def at(values: FloatArray, where: float) -> float:
        return float(np.interp(where, axis, np.interp(response.time_s, budget.time_s, values)[part]))

    points = []
    for point in response.flow:
        if point.stress_pa is None:
            continue
        total, shared = (at(u[row], point.at_strain) for u in (budget.total, budget.shared))
        points.append(
            FlowPoint(
                strain=point.at_strain,
                plastic=point.plastic,
                stress_pa=point.stress_pa,
                u_own_pa=math.sqrt(max(total**2 - shared**2, 0.0)),
                u_shared_pa=shared,
            )
        )
    return tuple(points)


def find_repeats(shots: Iterable[RepeatShot]) -> tuple[Repeats, ...]:
    """Group shots by condition and hold the members of each group of two or more against each other.

    Groups stand in the order of their first shots; a shot joins the first group whose every member it repeats.
    """
    groups: list[list[RepeatShot]] = []
    for shot in shots:
        home = next((group for group in groups if all(shot.is_repeat_of(other) for other in group)), None)
        if home is None:
            groups.append([shot])
        else:
            home.append(shot)
    return tuple(_compared(group) for group in groups if len(group) > 1)


def _compared(group: Sequence[RepeatShot]) -> Repeats:
    """Name the shot that is furthest out, leave it aside, and look again: one bad shot shall not spoil the others."""
    left, named = list(group), list[Disagreement]()
    compared = False
    while len(left) > 1:
        against = [(shot, _worst(shot, [other for other in left if other is not shot])) for shot in left]
        known = [(shot, one) for shot, one in against if one is not None]
        compared = compared or bool(known)
        shot, worst = max(known, key=lambda pair: _excess(pair[1]), default=(None, None))
        if worst is None or _excess(worst) <= 1:
            break
        if len(left) == 2:
            # Nothing says which of two is right.
            named.append(dataclasses.replace(worst, shot_ids=tuple(one.shot_id for one in left)))
            break
        named.append(worst)
        left = [other for other in left if other is not shot]
    return Repeats(shots=tuple(group), disagreements=tuple(named), compared=compared)


def _excess(one: Disagreement) -> float:
    return abs(one.stress_pa - one.others_pa) / one.allowed_pa


def _worst(shot: RepeatShot, others: Sequence[RepeatShot]) -> Disagreement | None:
    """The point of ``shot`` that lies furthest from the median of the others; None without a common strain."""
    one_rig = all(other.rig == shot.rig for other in others)
    found: list[Disagreement] = []
    for point in shot.flow:
        there = [
            (match, other.scatter)
            for other in others
            for match in other.flow
            if (match.strain, match.plastic) == (point.strain, point.plastic)
        ]
        if not there:
            continue
        median = statistics.median(match.stress_pa for match, _ in there)
        spread = statistics.fmean(_variance(match, scatter, one_rig) for match, scatter in there)
        # One other shot is no median of many: then its own variance counts.
        efficiency = math.pi / 2 if len(there) > 1 else 1.0
        variance = _variance(point, shot.scatter, one_rig) + efficiency * spread / len(there)
        found.append(
            Disagreement(
                shot_ids=(shot.shot_id,),
                strain=point.strain,
                plastic=point.plastic,
                stress_pa=point.stress_pa,
                others_pa=median,
                allowed_pa=COVERAGE_FACTOR * math.sqrt(variance),
            )
        )
    return max(found, key=_excess, default=None)


def _variance(point: FlowPoint, scatter: float, one_rig: bool) -> float:
    shared = 0.0 if one_rig else point.u_shared_pa
    return point.u_own_pa**2 + shared**2 + (scatter * point.stress_pa) ** 2
