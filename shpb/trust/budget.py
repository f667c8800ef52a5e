"""Uncertainty of one shot's curves to first order: what every source would change, carried to stress, strain and rate.

A source acts on a whole trace: one gauge factor scales two pulses at once, a wave speed shifts them against each other
and scales force and velocity. So each source gives one curve of change in every output, and correlations are carried by
adding changes before squaring, never sample by sample. White noise alone is independent from sample to sample.

R cannot be less than zero, so it is the signed difference D = 2 (F_in - F_out)/(F_in + F_out), running mean over two
transits as R is, that has a standard uncertainty here. The interval of R is R -+ k u(D), folded at zero.

References
----------
JCGM 100:2008 (GUM), 5.1.2 and 5.2.2: law of propagation of uncertainty, first order, with correlations; 6.2.1: expanded
uncertainty U = k u. The sensitivities are the derivatives of the formulas in :mod:`shpb.response.bar_analysis`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.errors import InputError
from shpb.response.flow import plastic_strain
from shpb.response.response import Response
from shpb.trust.carry import ALL_OUTPUTS, OUTPUTS, Carrier
from shpb.trust.changes import scene_of
from shpb.trust.evidence import Evidence
from shpb.trust.gum import Input, correlation_matrix
from shpb.trust.sources import Source, Way, sources_of

COVERAGE_FACTOR = 2.0  # for about 95 % (JCGM 100:2008, 6.3.3)


@dataclass(frozen=True, slots=True, kw_only=True)
class Contribution:
    """One line of the budget, at the middle of what counts.

    ``share`` is the share of the variance of each output, in the order of ``ALL_OUTPUTS``; the shares of all lines
    add to 1. The line "correlations" holds the cross terms and may be negative.
    """

    source: str
    shared: bool
    assumed: bool
    share: tuple[float, ...]
    note: str = ""


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Budget:
    """Standard uncertainties of the curves, worked out on a thinned grid and laid on the response's when asked for.

    Attributes
    ----------
    time_s : float array, shape (thinned samples,)
        The grid that was worked on; the same as the response's where that is not much finer than need be.
    response_time_s : float array, shape (samples,)
        Time axis of the response, on which the properties are given.
    total, shared : float array, shape (outputs, thinned samples)
        Standard uncertainty of each of ``ALL_OUTPUTS``, whole and the part that all shots of the rig share.
    contributions : tuple of Contribution
        Ranked by their greatest share.
    """

    time_s: FloatArray
    response_time_s: FloatArray
    total: FloatArray
    shared: FloatArray
    contributions: tuple[Contribution, ...] = field(default=())

    @property
    def u(self) -> dict[str, FloatArray]:
        """Standard uncertainty of each of ``OUTPUTS`` [Pa], [1/s] or [1], shape (samples,) each."""
        return {name: self.u_of(name) for name in OUTPUTS}

    @property
    def u_shared(self) -> dict[str, FloatArray]:
        """The part that all shots of the rig share (wave speed, density, bar diameters, gauges)."""
        return {name: self.u_shared_of(name) for name in OUTPUTS}

    @property
    def u_true_strain(self) -> FloatArray:
        """Standard uncertainty of true strain of the curve put forward, shape (samples,)."""
        return self.u_of("true_strain")

    @property
    def u_true_stress_pa(self) -> FloatArray:
        """Standard uncertainty of true stress of the curve put forward [Pa], shape (samples,)."""
        return self.u_of("true_stress")

    @property
    def u_force_difference(self) -> FloatArray:
        """Standard uncertainty of D and so of R by all sources, shape (samples,); 2 where hardly any force acts."""
        return self.u_of("force_difference")

    def u_of(self, name: str) -> FloatArray:
        """Standard uncertainty of one of ``ALL_OUTPUTS`` on the response's time axis, shape (samples,)."""
        return self._laid(self.total[ALL_OUTPUTS.index(name)])

    def u_shared_of(self, name: str) -> FloatArray:
        """The part of it that all shots of the rig share, as :meth:`u_of`."""
        return self._laid(self.shared[ALL_OUTPUTS.index(name)])

    def interval(self, name: str, value: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Ends of the coverage interval of about 95 %, ``value`` -+ k u with k = 2, shape (samples,) each.

        ``name`` is one of ``ALL_OUTPUTS``; for R give "force_difference" and R itself: folded, from 0 to 2.
        """
        u = self.u_of(name)
        low, high = value - COVERAGE_FACTOR * u, value + COVERAGE_FACTOR * u
        if name == "force_difference":
            return np.maximum(low, 0.0), np.minimum(high, 2.0)
        return low, high

    def _laid(self, row: FloatArray) -> FloatArray:
        """A row on the time axis of the response, by straight lines."""
        if self.time_s.size == self.response_time_s.size:
            return row
        laid: FloatArray = np.interp(self.response_time_s, self.time_s, row)
        return laid


def uncertainty_budget(
    evidence: Evidence, correlations: Mapping[tuple[str, str], float] | None = None
) -> Budget:
    """Propagate every stated (or assumed) uncertainty to the curves, first order.

    Parameters
    ----------
    evidence : Evidence
        The shot.
    correlations : mapping of (str, str) to float
        Correlation coefficients between sources, by their names as in the budget, for instance from one calibration
        that gave two of the rig's values. A gauge factor and a wave speed are the quantities themselves: where both are
        too high together, the coefficient is positive.

    Returns
    -------
    Budget

    Raises
    ------
    InputError
        If a correlation names no source, is impossible, or joins what shots share with what they do not.
    """
    scene = scene_of(evidence)
    carrier = Carrier(scene)
    sources = sources_of(evidence)
    # Sources that act alike (a gauge factor and a gain) are one curve of change in different sizes.
    ways = {source.way: np.zeros(2) for source in sources}
    for source in sources:
        ways[source.way] += source.u**2 * np.array([1.0, source.shared])
    changes = carrier.carried([way for way in ways if not _is_noise(way)])
    middle = carrier.middle
    total = np.zeros((len(ALL_OUTPUTS), scene.time_s.size))
    shared = np.zeros_like(total)
    at_middle = {}
    for way, (every, common) in ways.items():
        variance = carrier.noise(way) if _is_noise(way) else changes[way] ** 2
        at_middle[way] = variance[:, middle]
        total += every * variance
        if common:
            shared += common * variance
    crosses = _crosses(sources, changes, correlations or {})
    for cross in crosses:
        total += cross.variance
        shared += cross.variance * cross.shared
    # Correlations may cancel a part to zero, and rounding then takes it below.
    u: FloatArray = np.sqrt(np.maximum(total, 0.0))
    u_shared: FloatArray = np.sqrt(np.maximum(shared, 0.0))
    for rows in (u, u_shared):
        rows[-1] = np.where(carrier.loaded, np.minimum(rows[-1], 2.0), 2.0)
    whole = np.maximum(total[:, middle], 1e-300)
    lines = [
        Contribution(
            source=source.name, shared=source.shared, assumed=source.assumed, note=source.note,
            share=tuple((source.u**2 * at_middle[source.way] / whole).tolist()),
        )
        for source in sources
    ]  # fmt: skip
    lines += [
        Contribution(
            source=cross.name, shared=cross.shared, assumed=False,
            share=tuple((cross.variance[:, middle] / whole).tolist()),
        )
        for cross in crosses
    ]  # fmt: skip
    return Budget(
        time_s=frozen(scene.time_s),
        response_time_s=evidence.response.time_s,
        total=frozen(u),
        shared=frozen(u_shared),
        contributions=tuple(sorted(lines, key=lambda line: -max(map(abs, line.share)))),
    )


def _is_noise(way: Way) -> bool:
    return way[0][0].startswith("noise_")


class _Cross(NamedTuple):
    name: str
    shared: bool
    variance: FloatArray  # (outputs, thinned samples)


def _crosses(
    sources: tuple[Source, ...],
    changes: Mapping[Way, FloatArray],
    correlations: Mapping[tuple[str, str], float],
) -> list[_Cross]:
    """The cross terms 2 r c_a c_b: a line for what shots share and one for what they do not, where there is any."""
    if not correlations:
        return []
    known = {source.name: source for source in sources if source.way in changes}
    correlation_matrix([Input(name, 0.0, 1.0) for name in known], correlations)
    sums: dict[bool, FloatArray] = {}
    for (first, second), r in correlations.items():
        a, b = known[first], known[second]
        if a.shared != b.shared:
            raise InputError(
                "one is shared by all shots, the other is not",
                where=f"correlation of {first!r} and {second!r}",
                mend="Correlate values of the rig with each other, or values of one shot",
            )
        cross = 2 * r * a.u * b.u * changes[a.way] * changes[b.way]
        sums[a.shared] = sums.get(a.shared, 0.0) + cross
    names = {True: "correlations", False: "correlations of the shot's own"}
    return [_Cross(names[shared], shared, cross) for shared, cross in sums.items()]


def flow_stress_uncertainty_pa(
    budget: Budget, response: Response, modulus_pa: float | None
) -> tuple[float | None, ...]:
    """Standard uncertainty of each flow stress at its strain [Pa]; None where there is no flow stress.

    At a given strain the stress carries its own uncertainty and that of the strain, by the slope of the curve.
    ``modulus_pa`` is the specimen's, as the flow stresses were read with.
    """
    if response.span is None:
        return tuple(None for _ in response.flow)
    part = slice(*response.span)
    u = budget.u_of("true_stress_at_strain")[part]
    curve = response.curve
    axis = plastic_strain(curve.true_strain[part], curve.true_stress_pa[part], modulus_pa)
    rising = np.maximum.accumulate(axis)
    return tuple(
        None if point.stress_pa is None else float(np.interp(point.at_strain, rising, u))
        for point in response.flow
    )


__all__ = [
    "ALL_OUTPUTS",
    "COVERAGE_FACTOR",
    "OUTPUTS",
    "Budget",
    "Contribution",
    "flow_stress_uncertainty_pa",
    "uncertainty_budget",
]
