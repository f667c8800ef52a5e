"""What a constitutive law is made of: parameters, fixed facts, the stress, and a guess to start from."""

from __future__ import annotations

import difflib
import itertools
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from functools import partial
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.merge.points import FlowPoints

Facts = Mapping[str, float]
BestOfGrid = Callable[..., tuple[dict[str, float], FloatArray]]


class State(NamedTuple):
    """Where a law is asked for its stress; arrays of one shape, and what it takes as known."""

    plastic: FloatArray
    rate_per_s: FloatArray
    temperature_k: FloatArray
    facts: Facts


Law = Callable[[FloatArray, State], FloatArray]
Guess = Callable[[State, BestOfGrid], FloatArray]

_FROM_BOUND = 1e-3  # how far inside its range a start lies, of its range or usual size


@dataclass(frozen=True, slots=True, kw_only=True)
class Parameter:
    """A constant of a law that a fit finds.

    Attributes
    ----------
    name : str
        As in the published formula.
    unit : str
        SI; "1" for a pure number.
    lower, upper : float
        Range in which it makes sense.
    meaning : str
    needs : tuple of str
        "rates", "temperatures": any one of these must vary in the points, or they say nothing about it.
    held_at : float
        Its value where the points say nothing about it.
    usual : float
        Its usual size, where the unit is not Pa (there it is the mean stress of the points).
    by_ratio : bool
        Searched, and its interval taken, on a logarithmic scale: it spans orders of magnitude.
    """

    name: str
    unit: str
    lower: float
    upper: float
    meaning: str
    needs: tuple[str, ...] = ()
    held_at: float = 0.0
    usual: float = 1.0
    by_ratio: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class Fact:
    """A number that a law takes as known: it is stated with every result and never fitted."""

    name: str
    unit: str
    meaning: str
    default: float | None = None  # None: the user must say


@dataclass(frozen=True, slots=True, kw_only=True)
class Model:
    """A constitutive law.

    Attributes
    ----------
    key : str
        Name for commands and files.
    name, formula, source : str
        Name, formula and published source of the law.
    parameters : tuple of Parameter
    law : callable
        ``law(parameters, state)`` gives the stress [Pa] in the shape of the state's arrays.
    guess : callable
        ``guess(state, best_of)`` gives parameters to start from; the state is that of the points, and ``best_of`` is
        :func:`best_of_grid` for them.
    facts : tuple of Fact
    uses_rate, uses_temperature : bool
        Whether the stress depends on them.
    softening_only : bool
        Stress can only fall with temperature.
    refuses : callable
        ``refuses(state)`` says why the law cannot be used there; empty if it can.
    cannot : tuple of str
        What the law cannot represent, in plain words.
    stated : mapping
        Values of the facts that were stated; the defaults hold for the others.
    """

    key: str
    name: str
    formula: str
    source: str
    parameters: tuple[Parameter, ...]
    law: Law
    guess: Guess
    facts: tuple[Fact, ...] = ()
    uses_rate: bool
    uses_temperature: bool
    softening_only: bool = False
    refuses: Callable[[State], str] = lambda _: ""
    cannot: tuple[str, ...] = ()
    stated: Facts = field(default_factory=dict)

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the parameters, in order."""
        return tuple(parameter.name for parameter in self.parameters)

    @property
    def lower(self) -> FloatArray:
        """Least values of the parameters, shape (parameters,)."""
        return np.array([parameter.lower for parameter in self.parameters])

    @property
    def upper(self) -> FloatArray:
        """Greatest values of the parameters, shape (parameters,)."""
        return np.array([parameter.upper for parameter in self.parameters])

    def with_facts(self, **values: float) -> Model:
        """The law with facts stated, e.g. ``melting_temperature_k=1356``.

        Raises
        ------
        InputError
            If the law has no such fact or a value is not a positive number.
        """
        known = [fact.name for fact in self.facts]
        for name, value in values.items():
            if name not in known:
                raise InputError(
                    f"{self.name} takes no fact {name!r}; it takes {', '.join(known) or 'none'}",
                    where=self.key,
                    mend=_meant(name, known),
                )
            if not (np.isfinite(value) and value > 0):
                raise InputError(f"found {value:g}, expected more than 0", where=f"{self.key}, fact {name}")
        return replace(self, stated={**self.stated, **values})

    def known_facts(self) -> dict[str, float]:
        """Value of every fact.

        Raises
        ------
        InputError
            If one has neither a stated value nor a default.
        """
        values = {}
        for fact in self.facts:
            value = self.stated.get(fact.name, fact.default)
            if value is None:
                raise InputError(
                    f"{self.name} needs {fact.name}: {fact.meaning} [{fact.unit}]",
                    where=self.key,
                    mend=f"State it, e.g. with_facts({fact.name}=...)",
                )
            values[fact.name] = value
        return values

    def stress_pa(
        self,
        parameters: FloatArray,
        plastic: FloatArray | float,
        rate_per_s: FloatArray | float,
        temperature_k: FloatArray | float,
    ) -> FloatArray:
        """Flow stress of the law at one temperature each, no heating.

        Parameters
        ----------
        parameters : float array, shape (parameters,)
            In the order of ``names``.
        plastic, rate_per_s, temperature_k : float or float array
            True plastic strain, true rate [1/s], temperature [K]; shapes that broadcast.

        Returns
        -------
        float array
            True stress [Pa], of the broadcast shape.
        """
        parameters = np.asarray(parameters, dtype=float)
        if parameters.shape != (len(self.parameters),):
            raise InputError(
                f"{parameters.size} parameters, expected {len(self.parameters)}: {', '.join(self.names)}",
                where=self.key,
            )
        strain, rate, temperature = np.broadcast_arrays(
            np.asarray(plastic, dtype=float), np.asarray(rate_per_s, dtype=float),
            np.asarray(temperature_k, dtype=float),
        )  # fmt: skip
        return np.asarray(self.law(parameters, State(strain, rate, temperature, self.known_facts())))

    def start(self, points: FlowPoints) -> FloatArray:
        """A guess from the points, inside the range of every parameter and none of them zero without need."""
        state = State(points.plastic_strain, points.rate_per_s, points.heated_k(), self.known_facts())
        guess = np.asarray(self.guess(state, partial(best_of_grid, points)), dtype=float)
        # A start on a bound would leave the search without a scale for that parameter.
        reach = np.minimum(self.sizes(points), self.upper - self.lower)
        return np.asarray(np.clip(guess, self.lower + _FROM_BOUND * reach, self.upper - _FROM_BOUND * reach))

    def sizes(self, points: FlowPoints) -> FloatArray:
        """Usual sizes of the parameters, shape (parameters,)."""
        stress = float(points.stress_pa.mean())
        return np.array([stress if p.unit == "Pa" else p.usual for p in self.parameters])

    def position(self, name: str) -> int:
        """Place of a parameter in the order of ``names``; InputError if there is none of that name."""
        if name not in self.names:
            raise InputError(
                f"{self.name} has no parameter {name!r}; it has {', '.join(self.names)}",
                where=self.key,
                mend=_meant(name, self.names),
            )
        return self.names.index(name)


def _meant(name: str, known: Iterable[str]) -> str:
    close = difflib.get_close_matches(name, list(known), n=1)
    return f"Did you mean {close[0]}?" if close else ""


def best_of_grid(
    points: FlowPoints,
    columns: Callable[..., FloatArray],
    **grids: Iterable[float],
) -> tuple[dict[str, float], FloatArray]:
    """The best coarse values of the parameters that do not enter linearly, and the linear ones that go with them.

    Parameters
    ----------
    points : FlowPoints
    columns : callable
        ``columns(**values)`` gives the matrix whose product with the linear parameters is the stress,
        shape (points, linear parameters).
    **grids : iterable of float
        Values to try, by name; all combinations are.

    Returns
    -------
    values : dict
        The best of the grid.
    linear : float array, shape (linear parameters,)
        None negative.
    """
    from scipy.optimize import nnls

    weight = 1 / points.u_own_pa
    target = points.stress_pa * weight
    ranked: list[tuple[float, int, dict[str, float], FloatArray]] = []
    for values in itertools.product(*grids.values()):
        named = dict(zip(grids, values, strict=True))
        with np.errstate(all="ignore"):
            matrix = columns(**named) * weight[:, None]
        if not np.isfinite(matrix).all():
            continue
        linear = np.linalg.lstsq(matrix, target, rcond=1e-10)[0]
        ranked.append((float(np.sum((matrix @ linear - target) ** 2)), len(ranked), named, matrix))
    ranked.sort(key=lambda one: one[:2])
    found = []
    for _, place, named, matrix in ranked[:40]:  # the sign of the linear ones counts among the best
        length = np.sqrt(np.sum(matrix**2, axis=0))
        length = np.where(length > 0, length, 1.0)
        linear, rest = nnls(matrix / length, target)
        found.append((float(rest), place, named, linear / length))
    _, _, named, linear = min(found, key=lambda one: one[:2])
    return named, np.asarray(linear)
