"""Generalised least squares over sources of sensitivity, and which source does not fit the others."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.calibrate.sensitivity.sayings import Saying, Unknown
from shpb.fitting.weighted_line import common_covariance

DOUBT = 0.05  # chance below which sources contradict each other: then uncertainties grow
ODD = 0.01  # chance below which the odd one is sought
LEFT_OUT = 3.5  # standard uncertainties; by chance once in two thousand
_MOST_LEFT_OUT = 3


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class JointFit:
    """Outcome of one fit.

    Attributes
    ----------
    unknowns : tuple
        Station and what of it.
    solution : float array, shape (unknowns,)
    covariance : float array, shape (unknowns, unknowns)
        By the stated uncertainties.
    gain : float array, shape (unknowns, sources)
        What moves the solution.
    determined : float array, shape (unknowns, unknowns)
        Projection on what the sources determine; the unit matrix where that is everything.
    sayings : tuple of Saying
    chi2 : float
    freedom : int
    """

    unknowns: tuple[Unknown, ...]
    solution: FloatArray
    covariance: FloatArray
    gain: FloatArray
    determined: FloatArray
    sayings: tuple[Saying, ...]
    chi2: float
    freedom: int

    @property
    def chance(self) -> float:
        """Chance of so much scatter or more."""
        if self.freedom < 1:
            return 1.0
        from scipy.special import chdtrc

        return float(chdtrc(self.freedom, self.chi2))

    @property
    def contradicted(self) -> bool:
        """Whether the sources scatter more than their uncertainties allow."""
        return self.chance < DOUBT

    def design_row(self, row: Mapping[Unknown, float]) -> FloatArray:
        """Powers in the order of the unknowns, shape (unknowns,)."""
        return np.array([row.get(unknown, 0.0) for unknown in self.unknowns])

    def away(self, saying: Saying) -> tuple[float, float]:
        """How far a source that took no part lies from this fit, and the standard uncertainty of that."""
        row = self.design_row(saying.row)
        if not self.knows(saying):
            return 0.0, float("inf")
        shared = np.array([_shared(saying, other) for other in self.sayings])
        variance = saying.u_value**2 + row @ self.covariance @ row - 2 * row @ self.gain @ shared
        return saying.value - float(row @ self.solution), float(np.sqrt(max(variance, 1e-300)))

    def knows(self, saying: Saying) -> bool:
        """Whether this fit predicts what the source says."""
        row = self.design_row(saying.row)
        return set(saying.row) <= set(self.unknowns) and bool(
            np.allclose(row @ self.determined, row, atol=1e-6)
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Outlier:
    """Sources that do not fit the others: how far they say something else, in ln and in standard uncertainties."""

    sayings: tuple[Saying, ...]
    away: float
    residual: float


def fit_of(sayings: Sequence[Saying]) -> JointFit:
    """Fit all unknowns that the sources name; those that they do not determine keep to zero, the stated value."""
    unknowns = tuple(dict.fromkeys(unknown for one in sayings for unknown in one.row))
    design = np.array([[one.row.get(unknown, 0.0) for unknown in unknowns] for one in sayings])
    values = np.array([one.value for one in sayings])
    spread = common_covariance(np.array([one.u for one in sayings]), [dict(one.terms) for one in sayings])
    root = np.linalg.cholesky(spread)
    a, y = np.linalg.solve(root, design), np.linalg.solve(root, values)
    inverse = np.linalg.pinv(a, rcond=1e-10)
    solution = inverse @ y
    rest = y - a @ solution
    return JointFit(
        unknowns=unknowns,
        solution=solution,
        covariance=inverse @ inverse.T,
        gain=np.linalg.solve(root.T, inverse.T).T,
        determined=inverse @ a,
        sayings=tuple(sayings),
        chi2=float(rest @ rest),
        freedom=len(sayings) - int(np.linalg.matrix_rank(a, tol=1e-9 * float(np.abs(a).max()))),
    )


def odd_ones(
    sayings: Sequence[Saying],
) -> tuple[tuple[Outlier, ...], tuple[Saying, ...], tuple[Outlier, ...]]:
    """Sources that are left out, those that stay, and who might be the cause of what still does not fit."""
    kept = tuple(sayings)
    found: list[Outlier] = []
    for _ in range(_MOST_LEFT_OUT):
        if fit_of(kept).chance >= ODD:
            return tuple(found), kept, ()
        possible = _possible(kept)
        odd = _the_one(possible)
        if odd is None:
            return tuple(found), kept, possible
        found.append(odd)
        kept = tuple(one for one in kept if one not in odd.sayings)
    fit = fit_of(kept)
    return tuple(found), kept, _possible(kept) if fit.contradicted else ()


def _the_one(possible: Sequence[Outlier]) -> Outlier | None:
    """The only one that brings agreement; of several, a statement whose uncertainty nobody has stated."""
    if len(possible) == 1:
        one = possible[0]
    else:
        assumed = [one for one in possible if all(saying.assumed for saying in one.sayings)]
        if len(assumed) != 1:
            return None
        one = assumed[0]
    return one if abs(one.residual) > LEFT_OUT else None


def _possible(kept: Sequence[Saying]) -> tuple[Outlier, ...]:
    """Sources, and all shunts of a station together, without which the rest agree; the fewest that do."""
    for groups in (_single(kept), _shunts(kept)):
        found = []
        for group in groups:
            others = [one for one in kept if one not in group]
            fit = fit_of(others)
            if fit.chance >= DOUBT and all(fit.knows(one) for one in group):
                away, u_away = fit.away(group[0])
                found.append(Outlier(sayings=tuple(group), away=away, residual=away / u_away))
        if found:
            return tuple(sorted(found, key=lambda one: -abs(one.residual)))
    return _worst_of_many(kept)


def _worst_of_many(kept: Sequence[Saying]) -> tuple[Outlier, ...]:
    """Where more than one is wrong: the one without which chi2 falls most, if it falls to a third of it."""
    whole = fit_of(kept).chi2
    best: tuple[float, Outlier] | None = None
    for group in itertools.chain(_single(kept), _shunts(kept)):
        fit = fit_of([one for one in kept if one not in group])
        if not all(fit.knows(one) for one in group):
            continue
        away, u_away = fit.away(group[0])
        one = Outlier(sayings=tuple(group), away=away, residual=away / u_away)
        if best is None or fit.chi2 < best[0]:
            best = (fit.chi2, one)
    return (best[1],) if best is not None and best[0] < whole / 3 else ()


def _single(kept: Sequence[Saying]) -> list[tuple[Saying, ...]]:
    return [(one,) for one in kept]


def _shunts(kept: Sequence[Saying]) -> list[tuple[Saying, ...]]:
    by_station: dict[str, list[Saying]] = {}
    for one in kept:
        if one.kind == "shunt":
            by_station.setdefault(one.station, []).append(one)
    return [tuple(group) for group in by_station.values() if len(group) > 1]


def _shared(one: Saying, other: Saying) -> float:
    """Covariance of two sources by what they share."""
    return sum(value * other.terms.get(name, 0.0) for name, value in one.terms.items())
