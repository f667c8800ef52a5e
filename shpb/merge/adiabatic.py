"""Stress along the adiabatic path of a law: the specimen keeps the heat of its plastic work.

    T(e) = T0 + heat * integral from 0 to e of s(e', rate, T(e')) de',   heat = share/(rho c_p)

The equation is solved by successive approximation (Picard), which for an integral of this kind converges like
a power series of the softening. The nodes are those of Clenshaw and Curtis in the cube root of the strain: a
power law of hardening, whose slope is infinite at zero strain, is smooth there, and few nodes do. All
conditions are solved at once, and the weights are made once for a fit.

References
----------
G. I. Taylor, H. Quinney, Proc. R. Soc. A 143 (1934) 307-326; C. W. Clenshaw, A. R. Curtis, Numer. Math. 2 (1960)
197-205; J.-P. Berrut, L. N. Trefethen, SIAM Rev. 46 (2004) 501-517 (interpolation between the nodes).
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.merge.models.model import Model, State
from shpb.merge.points import FlowPoints, IntArray

_NODES = 20
_POWER = 3  # strain = greatest strain * x^3
_ROUNDS = 60
_SETTLED_K = 1e-9

StressAt = Callable[[FloatArray, FloatArray, FloatArray], FloatArray]


@cache
def _nodes() -> tuple[FloatArray, FloatArray]:
    """Nodes x in [0, 1], shape (nodes,), and the matrix of integrals from 0 to each node, shape (nodes, nodes)."""
    order = np.arange(_NODES)
    theta = np.pi * order / (_NODES - 1)
    z = -np.cos(theta)  # from -1 to 1
    values = np.polynomial.chebyshev.chebvander(z, _NODES - 1)
    integrals = np.empty_like(values)
    for k in range(_NODES):
        one = np.zeros(_NODES)
        one[k] = 1.0
        integrals[:, k] = np.polynomial.chebyshev.chebval(z, np.polynomial.chebyshev.chebint(one, lbnd=-1))
    return 0.5 * (z + 1), 0.5 * integrals @ np.linalg.inv(values)


def _between(x: FloatArray) -> FloatArray:
    """Matrix that takes values at the nodes to values at ``x``, shape (len(x), nodes)."""
    nodes, _ = _nodes()
    weight = (-1.0) ** np.arange(_NODES)
    weight[[0, -1]] *= 0.5
    apart = x[:, None] - nodes
    exact = apart == 0
    part = weight / np.where(exact, 1.0, apart)
    matrix = part / part.sum(axis=1, keepdims=True)
    on_node = exact.any(axis=1)
    matrix[on_node] = exact[on_node]
    return np.asarray(matrix)


class AdiabaticPaths:
    """The paths of a set of conditions, ready to be walked with any stress function.

    Parameters
    ----------
    strains : list of float array
        Plastic strains of each condition at which the temperature is asked for; the path starts at zero.
    rates_per_s : list of float array
        Rates at these strains [1/s]; straight lines between them, constant before the first.
    starts_k : float array, shape (conditions,)
        Start temperatures [K].
    heat_k_m3_j : float
        share/(rho c_p) [K m^3/J].
    """

    def __init__(
        self,
        strains: list[FloatArray],
        rates_per_s: list[FloatArray],
        starts_k: FloatArray,
        heat_k_m3_j: float,
    ) -> None:
        nodes, _ = _nodes()
        ends = np.array([max(float(strain.max()), 1e-12) for strain in strains])
        self._strain = ends[:, None] * nodes**_POWER
        self._rate = np.array(
            [
                np.interp(row, *_rising(e, r))
                for row, e, r in zip(self._strain, strains, rates_per_s, strict=True)
            ]
        )
        # de = ends * 3 x^2 dx
        self._scale = heat_k_m3_j * ends[:, None] * _POWER * nodes ** (_POWER - 1)
        self._starts = np.asarray(starts_k, dtype=float)[:, None]
        self._between = [_between((e / end) ** (1 / _POWER)) for e, end in zip(strains, ends, strict=True)]

    def temperatures_k(self, stress_at: StressAt) -> list[FloatArray]:
        """Temperature at the asked strains of each condition [K].

        ``stress_at(plastic, rate_per_s, temperature_k)`` gives the stress [Pa] for arrays of one shape. Where it
        gives no finite value, neither does this.
        """
        _, integral = _nodes()
        temperature = np.broadcast_to(self._starts, self._strain.shape)
        for _ in range(_ROUNDS):
            stress = stress_at(self._strain, self._rate, temperature)
            following = self._starts + (self._scale * stress) @ integral.T
            change = float(np.max(np.abs(following - temperature)))
            temperature = following
            if not change > _SETTLED_K:  # settled, or no number at all
                break
        return [matrix @ row for matrix, row in zip(self._between, temperature, strict=True)]


def _rising(strain: FloatArray, rate: FloatArray) -> tuple[FloatArray, FloatArray]:
    order = np.argsort(strain, kind="stable")
    return strain[order], rate[order]


class PathsOfPoints:
    """Temperature at each of a set of points, for any parameters of a law; cheap to ask again and again."""

    def __init__(self, model: Model, points: FlowPoints) -> None:
        self.model, self.points = model, points
        self.facts = model.known_facts()
        self._members: list[IntArray] = []
        self._paths: AdiabaticPaths | None = None
        # Only a law that knows temperature feels the heat.
        if points.heat_k_m3_j is None or not model.uses_temperature or not points.adiabatic.any():
            return
        hot = [c for c in points.conditions if points.adiabatic[points.of(c)][0]]
        self._members = [np.flatnonzero(points.of(c)) for c in hot]
        self._paths = AdiabaticPaths(
            [points.plastic_strain[i] for i in self._members],
            [points.rate_per_s[i] for i in self._members],
            np.array([points.temperature_k[i[0]] for i in self._members]),
            points.heat_k_m3_j,
        )

    def temperature_k(self, parameters: FloatArray) -> FloatArray:
        """Temperature at each point [K], shape (points,)."""
        temperature = self.points.temperature_k
        if self._paths is None:
            return temperature
        temperature = temperature.copy()
        found = self._paths.temperatures_k(
            lambda e, r, t: self.model.law(parameters, State(e, r, t, self.facts))
        )
        for members, values in zip(self._members, found, strict=True):
            temperature[members] = values
        return temperature

    def stress_pa(self, parameters: FloatArray) -> FloatArray:
        """Stress of the law at each point [Pa], shape (points,)."""
        points = self.points
        state = State(points.plastic_strain, points.rate_per_s, self.temperature_k(parameters), self.facts)
        return np.asarray(self.model.law(parameters, state))


def adiabatic_stress_pa(
    model: Model,
    parameters: FloatArray,
    plastic: FloatArray,
    rate_per_s: FloatArray | float,
    start_k: float,
    heat_k_m3_j: float,
) -> tuple[FloatArray, FloatArray]:
    """Stress and temperature along one adiabatic path.

    Parameters
    ----------
    model : Model
    parameters : float array, shape (parameters,)
    plastic : float array, shape (points,)
        True plastic strain at which they are asked for; the path starts at zero strain.
    rate_per_s : float, or float array of shape (points,)
        True rate [1/s].
    start_k : float
        Temperature at zero strain [K].
    heat_k_m3_j : float
        share/(rho c_p) [K m^3/J].

    Returns
    -------
    stress_pa, temperature_k : float array, shape (points,)

    Raises
    ------
    InputError
        If strains are negative, or the law has no value on the path.
    """
    plastic = np.atleast_1d(np.asarray(plastic, dtype=float))
    if plastic.ndim != 1 or not plastic.size or not (np.isfinite(plastic).all() and plastic.min() >= 0):
        raise InputError("plastic strains must be numbers of 0 or more, shape (points,)", where="plastic")
    rate = np.broadcast_to(np.asarray(rate_per_s, dtype=float), plastic.shape)
    paths = AdiabaticPaths([plastic], [rate], np.array([start_k]), heat_k_m3_j)
    facts = model.known_facts()
    temperature = paths.temperatures_k(lambda e, r, t: model.law(parameters, State(e, r, t, facts)))[0]
    stress = model.stress_pa(parameters, plastic, rate, temperature)
    if not np.isfinite(stress).all():
        raise InputError("the law has no finite stress on this path", where=model.key)
    return stress, temperature
