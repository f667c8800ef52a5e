"""From the passages of a session to one fit: what is known beforehand, which distances hold, one bar stock or two."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import NamedTuple

import numpy as np

from shpb.calibrate.bars.carried import Problem, Shot
from shpb.calibrate.bars.constants_words import position_finding, stock_finding
from shpb.calibrate.bars.passages import ShotPassages, passages_of
from shpb.calibrate.bars.phase_fit import Fitted, fit
from shpb.calibrate.bars.ways import bar_of
from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.session import FiredShot, ShotKind, of_kind
from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.rig.bar import one_stock
from shpb.rig.rig import SIDES, Rig

APART = 2.5  # joint standard uncertainties: beyond that two values are two values
ASSUMED_LENGTH = (
    0.001  # relative, of a length or distance whose uncertainty nobody has stated (common practice)
)
_LEAST_U_LENGTH = 1e-5  # m: nothing in a laboratory is known better
_LEAST_U_POISSON = 0.015  # less well known than this it was not measured
_U_OWN_POSITION = 2.0  # what the travel times say of a distance, by what is stated of it


class Known(NamedTuple):
    """What the shots show before anything is fitted."""

    shots: tuple[ShotPassages, ...]
    start: dict[str, float]
    priors: dict[str, tuple[float, float]]
    lengths: tuple[str, ...]  # that ways are made of
    remarks: list[str]


def gathered(fired: Sequence[FiredShot], rig: Rig) -> Known:
    """Passages of all shots that say something of a wave speed; errors as :func:`passages_of` has them."""
    apart, together = of_kind(fired, ShotKind.BARS_APART), of_kind(fired, ShotKind.BARS_TOGETHER)
    if not (apart or together):
        raise InputError(
            "no shot shows a wave speed",
            where="calibration session",
            mend="Strike a bar alone, free at its other end, and name the shot bars-apart",
        )
    shots: list[ShotPassages] = []
    factors: dict[str, list[float]] = {side: [] for side in SIDES}
    remarks: list[str] = []
    for one in apart:
        found, factor = passages_of(one, rig)
        shots.append(found)
        factors[one.shot.bar].append(factor)
    missing = [side for side in SIDES if not factors[side]]
    # Bars that were struck alone know their own speed better than through a contact.
    for one in together if missing else ():
        try:
            found, factor = passages_of(one, rig)
        except InputError as error:
            if not (apart or shots) and one is together[-1]:
                raise
            remarks.append(f"shot {one.shot_id} says nothing of wave speeds: {error.what}")
            continue
        shots.append(found)
        for side in missing:
            factors[side].append(factor)
    start: dict[str, float] = {}
    for side in SIDES:
        bar, factor = bar_of(rig, side), float(np.median(factors[side] or [1.0]))
        start |= {f"c {side}": float(bar.wave_speed_m_s) * factor, f"nu {side}": float(bar.poisson_ratio)}
    lengths = {name for shot in shots for one in shot.passages for _, name, _ in one.way.terms}
    return Known(tuple(shots), start, _stated_lengths(rig), tuple(sorted(lengths)), remarks)


def _stated_lengths(rig: Rig) -> dict[str, tuple[float, float]]:
    stated: dict[str, Quantity] = {side: bar_of(rig, side).length_m for side in SIDES}
    stated |= {name: gauge.to_specimen_m for name, gauge in rig.gauges.items()}
    return {
        name: (
            float(value),
            ASSUMED_LENGTH * float(value) if value.u is None else max(value.u, _LEAST_U_LENGTH),
        )
        for name, value in stated.items()
    }


def positioned(
    known: Known, shots: Sequence[Shot], rig: Rig
) -> tuple[Problem, Fitted, list[CalibrationFinding]]:
    """Fit; where the record proves a distance wrong, the worst first, forget what is stated of it and fit again."""
    same = one_stock(rig.incident_bar, rig.transmitted_bar)
    priors = dict(known.priors)
    found: list[CalibrationFinding] = []
    while True:
        problem = Problem(rig=rig, shots=known.shots, tied=same, priors=priors, start=known.start)
        if same and all(_shown_alone(known.shots, side) for side in SIDES):
            # Whether they are one stock is seen later.
            problem = replace(problem, tied=False)
        fitted = fit(problem, shots)
        worst, name = APART, ""
        for station in rig.gauges:
            own = own_position(station, fitted, priors)
            if own is not None:
                away = abs(own[0] - priors[station][0]) / np.hypot(own[1], priors[station][1])
                worst, name = max((worst, name), (float(away), station))
        if not name:
            return problem, fitted, found
        measured, u = own_position(name, fitted, priors) or (0.0, 0.0)
        found.append(position_finding(name, rig.gauges[name].to_specimen_m, measured, u, APART))
        del priors[name]


def _shown_alone(shots: Sequence[ShotPassages], side: str) -> bool:
    """Whether the pulse passed twice through a bar without anything of the other one between."""
    other = SIDES[1 - SIDES.index(side)]
    for shot in shots:
        beside = [tuple(term for term in one.way.terms if term[0] == other) for one in shot.passages if
                  any(term[0] == side for term in one.way.terms)]  # fmt: skip
        if len(beside) > len(set(beside)):
            return True
    return False


def own_position(
    station: str, fitted: Fitted, priors: Mapping[str, tuple[float, float]]
) -> tuple[float, float] | None:
    """What travel times alone say of a distance, and its standard uncertainty; None where that is too little.

    The fit is the mean of this and of what is stated, weighted by their variances.
    """
    name = f"m {station}"
    if station not in priors or name not in fitted.names:
        return None
    stated, u_stated = priors[station]
    at = fitted.names.index(name)
    variance = float(fitted.covariance[at, at])
    weight = 1 / variance - 1 / u_stated**2
    if weight <= (_U_OWN_POSITION * u_stated) ** -2:
        return None
    own = (fitted.values[name] / variance - stated / u_stated**2) / weight
    return float(own), float(weight**-0.5)


def tied_or_not(
    problem: Problem, fitted: Fitted, shots: Sequence[Shot]
) -> tuple[Problem, Fitted, list[CalibrationFinding]]:
    """Give bars of one stock one wave speed, unless the records tell them apart."""
    rig = problem.rig
    if (
        problem.tied
        or not one_stock(rig.incident_bar, rig.transmitted_bar)
        or len(problem.sides) < len(SIDES)
    ):
        return problem, fitted, []
    speeds = tuple(fitted.values[f"c {side}"] for side in SIDES)
    at = [fitted.names.index(f"c {side}") for side in SIDES]
    part = fitted.covariance[np.ix_(at, at)]
    u = float(np.sqrt(part[0, 0] + part[1, 1] - 2 * part[0, 1]))
    if abs(speeds[0] - speeds[1]) > APART * u:
        return problem, fitted, [stock_finding(rig, (speeds[0], speeds[1]), u, APART)]
    tied = replace(problem, tied=True)
    return tied, fit(tied, shots), []


def with_poisson(problem: Problem, fitted: Fitted, shots: Sequence[Shot]) -> tuple[Problem, Fitted]:
    """Hold Poisson's ratios fast that the band does not determine, and fit again."""
    u = dict(zip(fitted.names, np.sqrt(np.diag(fitted.covariance)), strict=True))
    poor = frozenset(name for name in fitted.names if name.startswith("nu ") and u[name] > _LEAST_U_POISSON)
    if not poor:
        return problem, fitted
    held = replace(problem, held=poor)
    return held, fit(held, shots)
