"""Wave speed, Poisson's ratio and gauge positions of elastic bars from the passages of a pulse.

Everything that a bars-apart shot shows again is the same pulse after a known way: the phases of all passages, in one
fit over the band where the signal is good (:mod:`~.phase_fit`), give c0 and, through dispersion, Poisson's
ratio. Lengths and distances take part with their stated uncertainties, so that c0 is no better known than they are;
with more passages than lengths the travel times check the distances, and correct them where the record proves them
wrong. Bars together serve for a bar that was not struck alone. A stated wave speed or Poisson's ratio takes no part.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.bars.carried import Problem, Shot
from shpb.calibrate.bars.constants_fit import (
    ASSUMED_LENGTH,
    Known,
    gathered,
    own_position,
    positioned,
    tied_or_not,
    with_poisson,
)
from shpb.calibrate.bars.constants_words import (
    findings_of_bar,
    method_in_words,
    misfit_finding,
    remarks_on_assumed,
)
from shpb.calibrate.bars.phase_fit import Fitted
from shpb.calibrate.bars.phase_speeds import PhaseSpeeds, phase_speeds
from shpb.calibrate.bars.ways import bar_of
from shpb.calibrate.determination import CalibrationFinding, Determination
from shpb.calibrate.session import FiredShot
from shpb.calibrate.struck import require_own_records
from shpb.quantity import Quantity
from shpb.rig.rig import SIDES, Rig, budget_name
from shpb.trust.sources import ASSUMED

TIME_BASE = 2e-5  # relative, of a scope (common practice)
_LEAST_U_SPEED = 0.004  # relative: less well known than this a wave speed was not measured


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class BarFit:
    """What was found of one bar, and what a figure of it needs.

    Attributes
    ----------
    bar : str
        "incident" or "transmitted".
    wave_speed_m_s : Quantity
        c0.
    poisson_ratio : Quantity or None
        None where the band was too short for it.
    young_modulus_pa : Quantity
        rho c0^2, with the uncertainty of the density.
    frequency_hz, phase_speed_m_s, u_phase_speed_m_s, fitted_m_s : float array, shape (frequencies,)
        Phase speed between the passages, each frequency by itself, its standard uncertainty by noise and misfit alone
        (lengths would move all alike), and the first mode that was fitted.
    band_hz : (float, float)
        What the fit used.
    passages : int
        Of this bar, over all shots.
    shots : tuple of str
    misfit, freedom : float, int
        Sum of weighted squares of the fit and its degrees of freedom.
    """

    bar: str
    wave_speed_m_s: Quantity
    poisson_ratio: Quantity | None
    young_modulus_pa: Quantity
    frequency_hz: FloatArray
    phase_speed_m_s: FloatArray
    u_phase_speed_m_s: FloatArray
    fitted_m_s: FloatArray
    band_hz: tuple[float, float]
    passages: int
    shots: tuple[str, ...]
    misfit: float
    freedom: int


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class BarConstants:
    """Constants of the bars of a session.

    Attributes
    ----------
    bars : mapping of str to BarFit
        By bar, "incident"; a bar that the shots say nothing of is missing.
    determinations : tuple of Determination
        One with everything that was measured and its covariance; empty where nothing was.
    findings : tuple of CalibrationFinding
    remarks : tuple of str
    """

    bars: Mapping[str, BarFit]
    determinations: tuple[Determination, ...]
    findings: tuple[CalibrationFinding, ...]
    remarks: tuple[str, ...]


def bar_constants(fired: Sequence[FiredShot], rig: Rig) -> BarConstants:
    """Find wave speeds, Poisson's ratios and distances from all shots of a session.

    Parameters
    ----------
    fired : sequence of FiredShot
        Shots of other kinds than bars-apart and bars-together are left aside.
    rig : Rig
        As its rig file states it.

    Raises
    ------
    InputError
        If there is no bars-apart or bars-together shot; if a shot is not what it is called; if no two passages of a
        bars-apart shot can be told apart; if two shots share a record.
    """
    require_own_records(fired)
    known = gathered(fired, rig)
    shots = [Shot(one, rig) for one in known.shots]
    problem, fitted, findings = positioned(known, shots, rig)
    problem, fitted, told_apart = tied_or_not(problem, fitted, shots)
    problem, fitted = with_poisson(problem, fitted, shots)
    findings += told_apart + misfit_finding(fitted.misfit, fitted.chi2, fitted.freedom, known.shots)
    remarks = [*known.remarks, *remarks_on_assumed(rig, known.lengths, ASSUMED_LENGTH)]
    bars: dict[str, BarFit] = {}
    for side in problem.sides if not problem.tied else SIDES:
        bar = _bar_fit(problem, fitted, shots, side, known)
        if isinstance(bar, str):
            remarks.append(bar)
            continue
        bars[side] = bar
        if bar.poisson_ratio is None:
            remarks.append(f"{side} bar: the band is too short for Poisson's ratio; it stays as stated")
        if not bar.passages:
            remarks.append(
                f"{side} bar: taken from the other bar, which is of the same stock; not measured itself"
            )
        findings += findings_of_bar(side, bar_of(rig, side), bar.wave_speed_m_s)
    determination = _determination(problem, fitted, bars, known)
    return BarConstants(
        bars=bars,
        determinations=(determination,) if determination is not None else (),
        findings=tuple(findings),
        remarks=tuple(remarks),
    )


# --- what comes out -----------------------------------------------------------------------------------------------


def _covariance(problem: Problem, fitted: Fitted) -> FloatArray:
    """Of the fit, with what is not in it: Poisson's ratios held fast, and the scope's time base."""
    covariance = fitted.covariance.copy()
    for name, bend in fitted.bends.items():
        poisson = bar_of(problem.rig, name.partition(" ")[2]).poisson_ratio
        u = ASSUMED["Poisson's ratio"] * poisson if poisson.u is None else poisson.u
        covariance += u**2 * np.outer(bend, bend)
    clock = np.array([TIME_BASE * fitted.values[name] * name.startswith("c ") for name in fitted.names])
    return covariance + np.outer(clock, clock)


def _bar_fit(
    problem: Problem, fitted: Fitted, shots: Sequence[Shot], side: str, known: Known
) -> BarFit | str:
    """What is found of one bar, or why nothing is."""
    bar = bar_of(problem.rig, side)
    u = dict(zip(fitted.names, np.sqrt(np.diag(_covariance(problem, fitted))), strict=True))
    c, nu = problem.own("c", side), problem.own("nu", side)
    if u[c] > _LEAST_U_SPEED * fitted.values[c]:
        return f"{side} bar: these shots do not determine its wave speed; strike this bar alone, free at its other end"
    names = [
        shot.shot_id
        for shot in known.shots
        if any(b == side for p in shot.passages for b, _, _ in p.way.terms)
    ]
    through = side if side in problem.sides else problem.sides[0]
    speeds: PhaseSpeeds = phase_speeds(problem, shots, fitted, through)
    origin = f"{method_in_words(known.shots)} ({', '.join(shot.shot_id for shot in known.shots)})"
    speed = Quantity(fitted.values[c], float(u[c]), origin)
    density = bar.density_kg_m3
    u_density = ASSUMED["density"] if density.u is None else density.u / float(density)
    modulus = float(density) * float(speed) ** 2
    return BarFit(
        bar=side,
        wave_speed_m_s=speed,
        poisson_ratio=Quantity(fitted.values[nu], float(u[nu]), origin) if nu in fitted.names else None,
        young_modulus_pa=Quantity(
            modulus, modulus * float(np.hypot(u_density, 2 * u[c] / float(speed))), "rho c0^2"
        ),
        frequency_hz=speeds.frequency_hz,
        phase_speed_m_s=speeds.measured_m_s,
        u_phase_speed_m_s=speeds.u_measured_m_s,
        fitted_m_s=speeds.fitted_m_s,
        band_hz=(float(speeds.frequency_hz[0]), float(speeds.frequency_hz[-1])),
        passages=sum(
            any(b == side for b, _, _ in one.way.terms) for shot in known.shots for one in shot.passages
        ),
        shots=tuple(names),
        misfit=fitted.chi2,
        freedom=fitted.freedom,
    )


def _determination(
    problem: Problem, fitted: Fitted, bars: Mapping[str, BarFit], known: Known
) -> Determination | None:
    """Everything that was measured, with one covariance; values of bars of one stock are wholly correlated."""
    names: list[str] = []
    own: list[str] = []
    for side, bar in bars.items():
        names.append(f"{side} bar: wave speed")
        own.append(problem.own("c", side))
        if bar.poisson_ratio is not None:
            names.append(f"{side} bar: Poisson's ratio")
            own.append(problem.own("nu", side))
    for station in problem.rig.gauges:
        proven = station not in problem.priors and f"m {station}" in fitted.names
        if proven or own_position(station, fitted, problem.priors) is not None:
            names.append(budget_name(station, "distance"))
            own.append(f"m {station}")
    if not names:
        return None
    at = [fitted.names.index(name) for name in own]
    return Determination(
        method=method_in_words(known.shots),
        shots=tuple(shot.shot_id for shot in known.shots),
        names=tuple(names),
        values=frozen(np.array([fitted.values[name] for name in own])),
        covariance=frozen(_covariance(problem, fitted)[np.ix_(at, at)]),
    )
