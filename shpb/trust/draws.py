"""Uncertainty of a whole shot by Monte Carlo: every draw is a shot of its own, from the windowed pulses to flow stress.

Where the linear budget asks what a small change does, a draw changes everything at once, by as much as its sources say,
and goes through the chain again: dispersion, shift, forces, velocities, integration, true values, R. It shows what the
linear budget leaves out: products of errors, R that is folded at zero, intervals that are not symmetric.

References
----------
JCGM 101:2008, Supplement 1 to the GUM: 5.9 (propagation), 7.7 (coverage intervals), 7.9 (adaptive number of draws).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.errors import InputError
from shpb.trust.budget import Budget
from shpb.trust.drawn_curves import CURVES, DrawnCurves
from shpb.trust.drawn_faces import Drawn, DrawnFaces
from shpb.trust.evidence import Evidence
from shpb.trust.gum import Input
from shpb.trust.montecarlo import MonteCarlo, Progress, monte_carlo
from shpb.trust.sources import PULSES, RELATIVE, Source, sources_of

PROBABILITY = 0.95
ADAPTIVE_DIGITS = 1  # of u that must settle at every sample
ADAPTIVE_LIMIT = 200_000


@dataclass(frozen=True, slots=True, kw_only=True)
class DrawnFlow:
    """Flow stress at one strain as the draws have it [Pa]."""

    at_strain: float
    mean_pa: float
    u_pa: float
    low_pa: float
    high_pa: float


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Draws:
    """What the draws of a shot gave.

    Attributes
    ----------
    draws, seed : int
        How many, and from which seed: the same seed gives the same numbers.
    probability : float
        Of the coverage intervals, which are probabilistically symmetric.
    settled : bool or None
        Adaptive: whether the results settled before the limit of draws. None where the number was given.
    time_s, response_time_s : float array
        The grid that was worked on, and that of the response.
    mean, u, low, high : float array, shape (curves, thinned samples)
        Of each of ``CURVES`` [Pa], [1/s] or [1].
    flow : tuple of DrawnFlow
        Flow stresses that lie in what counts.
    """

    draws: int
    seed: int
    probability: float
    settled: bool | None
    time_s: FloatArray
    response_time_s: FloatArray
    mean: FloatArray
    u: FloatArray
    low: FloatArray
    high: FloatArray
    flow: tuple[DrawnFlow, ...]

    def of(self, what: str, curve: str) -> FloatArray:
        """One of mean, u, low and high of one of ``CURVES`` on the response's time axis, shape (samples,)."""
        row = getattr(self, what)[CURVES.index(curve)]
        laid: FloatArray = np.interp(self.response_time_s, self.time_s, row)
        return laid


def draw_evidence(
    evidence: Evidence,
    budget: Budget,
    draws: int | None,
    *,
    seed: int = 1,
    correlations: Mapping[tuple[str, str], float] | None = None,
    chunk: int | None = None,
    progress: Progress | None = None,
) -> Draws:
    """Draw a shot again and again from its sources of uncertainty.

    Parameters
    ----------
    evidence : Evidence
        The shot as it was reduced.
    budget : Budget
        Its linear budget; says where R says anything.
    draws : int or None
        How many; None draws until one significant digit of every standard uncertainty has settled.
    seed : int
        The same seed gives the same numbers, whatever ``chunk``.
    correlations : mapping of (str, str) to float
        As for :func:`shpb.trust.budget.uncertainty_budget`.
    chunk : int
        Draws at once; by default as many as keep the memory below some 200 MB.
    progress : callable
        Called with the draws done and the draws asked for (None if adaptive).

    Raises
    ------
    InputError
        If the number of draws or the seed is out of range, or a correlation impossible.
    """
    if evidence.pulses.separated:
        raise InputError(
            "draws change pulses in their windows, and this shot's waves were told apart by stations",
            where="draws",
            mend="Use the linear budget, which carries every station's share, or reduce with waves = windows",
        )
    sources = sources_of(evidence)
    faces = DrawnFaces(evidence, _spread(sources))
    single = Drawn({}, {}, {}, 1)
    curves = DrawnCurves(evidence, budget, faces.time_s, faces(single))
    plain = [source for source in sources if not _noisy(source)]
    levels = _noise_levels(sources)

    def model(values: Mapping[str, FloatArray]) -> FloatArray:
        drawn = _drawn(plain, levels, values)
        return curves(faces(drawn), drawn)

    inputs = [
        Input(source.name, 0.0, source.u, shared=source.shared, distribution=source.distribution)
        for source in plain
    ]
    inputs += [
        Input(f"{pulse} noise", 0.0, level, components=2 * faces.bins)
        for pulse, level in levels.items()
        if level
    ]
    done = monte_carlo(
        model, inputs, correlations, draws=draws, adaptive=ADAPTIVE_DIGITS if draws is None else None,
        probability=PROBABILITY, seed=seed, chunk=chunk, limit=ADAPTIVE_LIMIT, progress=progress,
    )  # fmt: skip
    return _result(done, evidence.response.time_s, faces.time_s, curves)


def _noisy(source: Source) -> bool:
    return any(parameter.startswith("noise_") for parameter in source.acts)


def _noise_levels(sources: tuple[Source, ...]) -> dict[str, float]:
    """White noise of each pulse, all of its sources together [1]."""
    return {
        pulse: float(np.sqrt(sum(source.u**2 for source in sources if f"noise_{pulse}" in source.acts)))
        for pulse in PULSES
    }


def _spread(sources: tuple[Source, ...]) -> dict[str, tuple[float, float]]:
    """Standard uncertainty of Poisson's ratio, and relative of radius by wave speed, of either bar."""

    def u(*parameters: str) -> float:
        squares = [
            source.u**2 for source in sources if any(parameter in source.acts for parameter in parameters)
        ]
        return float(np.sqrt(sum(squares)))

    spread = {side: (u(f"poisson_{side}"), u(f"diameter_{side}", f"speed_{side}")) for side in ("in", "out")}
    for side, (poisson, _) in spread.items():
        if poisson > 0.06:
            raise InputError(
                f"the standard uncertainty of Poisson's ratio is {poisson:g}",
                where="incident_bar" if side == "in" else "transmitted_bar",
                mend="Give 0.06 or less: the draws must not leave the range of solid bars, 0 to 0.49",
            )
    return spread


def _drawn(plain: list[Source], levels: Mapping[str, float], values: Mapping[str, FloatArray]) -> Drawn:
    """Factors and sums of a chunk of draws, by quantity."""
    factors: dict[str, FloatArray] = {}
    sums: dict[str, FloatArray] = {}
    for source in plain:
        change = values[source.name]
        for parameter, power in source.acts.items():
            if parameter in RELATIVE:
                # No length, density or gauge factor is negative, however unlikely the draw.
                factor = np.maximum(1.0 + change, 0.05) ** power
                factors[parameter] = factors[parameter] * factor if parameter in factors else factor
            else:
                sums[parameter] = sums.get(parameter, 0.0) + power * change
    noise = {pulse: values[f"{pulse} noise"] for pulse, level in levels.items() if level}
    return Drawn(factors, sums, noise, len(next(iter(values.values()))))


def _result(done: MonteCarlo, response_time_s: FloatArray, time_s: FloatArray, curves: DrawnCurves) -> Draws:
    samples = len(CURVES) * time_s.size
    rows = {name: getattr(done, name) for name in ("mean", "u", "low", "high")}
    table = {name: frozen(row[:samples].reshape(len(CURVES), -1).copy()) for name, row in rows.items()}
    points = zip(
        curves.points, np.stack([row[samples:] for row in rows.values()], axis=1).tolist(), strict=True
    )
    return Draws(
        draws=done.draws,
        seed=done.seed,
        probability=done.probability,
        settled=done.settled,
        time_s=frozen(time_s),
        response_time_s=response_time_s,
        flow=tuple(
            DrawnFlow(at_strain=point.at_strain, mean_pa=mean, u_pa=u, low_pa=low, high_pa=high)
            for point, (mean, u, low, high) in points
        ),
        **table,
    )
