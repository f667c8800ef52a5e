"""Standard uncertainty by the law of propagation: inputs, correlations, sensitivities, a ranked budget.

Nothing here knows about bars. Inputs carry a name, a value and a standard uncertainty; a model turns values into an
output, one number or one per sample; the budget says how uncertain the output is and which input is to blame.

Source: JCGM 100:2008, Evaluation of measurement data: Guide to the expression of uncertainty in measurement (GUM).
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from statistics import NormalDist
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from shpb.arrays import BoolArray, FloatArray, frozen, require_finite
from shpb.errors import InputError

Distribution = Literal["normal", "rectangular", "triangular", "arcsine", "t"]
DISTRIBUTIONS: tuple[str, ...] = get_args(Distribution)

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(64)
_MANY_DEGREES = 100.0  # from here on the expansion in 1/nu is exact to 1e-9


@dataclass(frozen=True, slots=True)
class Input:
    """One input quantity of a measurement model, in a unit of its own.

    ``u`` is the standard uncertainty whatever the distribution: the half width is u sqrt 3 (rectangular), u sqrt 6
    (triangular) or u sqrt 2 (arcsine). For ``"t"`` it is the scale, s/sqrt(n) of n observations, as the GUM takes it;
    the standard deviation of the draws is larger by sqrt(nu/(nu-2)) (JCGM 101:2008, 6.4.9). Only Monte Carlo asks for
    the distribution. An InputError names the input and the field that cannot be used.
    """

    name: str  # unique within a budget; the model finds the value under it
    value: float  # best estimate
    u: float  # zero or more
    origin: str = ""  # where u comes from: a certificate, a data sheet, repeated readings
    shared: bool = False  # one error acts on all shots of a rig (wave speed), or each shot has its own
    distribution: Distribution = "normal"
    degrees_of_freedom: float = math.inf  # one or more; infinite where u is taken as exactly known
    components: int = 1  # independent numbers of one kind, such as a noise; more than 1 for Monte Carlo alone

    def __post_init__(self) -> None:
        nu = self.degrees_of_freedom
        checks = (
            (bool(self.name), "it has no name", "Give each input a name of its own"),
            (math.isfinite(self.value), f"its value is {self.value}", "Give a finite value"),
            (
                math.isfinite(self.u) and self.u >= 0,
                f"its standard uncertainty is {self.u}",
                "Give zero or a positive number",
            ),
            (
                self.distribution in DISTRIBUTIONS,
                f"its distribution is {self.distribution!r}",
                f"Choose one of {', '.join(DISTRIBUTIONS)}",
            ),
            (nu >= 1, f"its degrees of freedom are {nu}", "Give n - 1 of n observations, 1 or more"),
            (self.components >= 1, f"it has {self.components} components", "Give 1 or more"),
            (
                self.distribution != "t" or math.isfinite(nu),
                "a t distribution needs its degrees of freedom",
                "Give n - 1 of n observations, or take the normal distribution",
            ),
        )
        for fine, what, mend in checks:
            if not fine:
                raise InputError(what, where=f"input {self.name!r}", mend=mend)


@dataclass(frozen=True, slots=True, eq=False)
class Covariance:
    """Covariance matrix of some named inputs, from a calibration or from observations made together.

    ``matrix`` has shape (n, n) in the order of ``names``, each element in the product of the two units. It is copied
    and set read-only; InputError unless it is finite, symmetric and positive semi-definite.
    """

    names: tuple[str, ...]
    matrix: FloatArray

    def __post_init__(self) -> None:
        where = f"covariance of {', '.join(self.names)}"
        matrix = np.array(self.matrix, dtype=float)
        n = len(self.names)
        if len(set(self.names)) < n:
            raise InputError("a name occurs twice", where=where, mend="Name each row once")
        if matrix.shape != (n, n):
            raise InputError(
                f"the shape is {matrix.shape}", where=where, mend=f"Give {n} rows and {n} columns"
            )
        require_finite(matrix, where=where, mend="Give finite covariances")
        if np.any(np.diag(matrix) < 0):
            what = "not positive semi-definite: a variance is negative"
            raise InputError(what, where=where, mend="Give squares of standard uncertainties there")
        u = np.sqrt(np.diag(matrix))
        scale = np.outer(u, u)
        if np.any(np.abs(matrix - matrix.T) > 1e-9 * scale):
            raise InputError("the matrix is not symmetric", where=where, mend="Give cov(a, b) = cov(b, a)")
        if np.any(matrix[scale == 0]):
            what, mend = "an exactly known input has a covariance", "Give it zeros, or a variance"
            raise InputError(what, where=where, mend=mend)
        _require_semidefinite(_unit_diagonal(matrix), where)
        object.__setattr__(self, "matrix", frozen(0.5 * (matrix + matrix.T)))


Correlations = Mapping[tuple[str, str], float] | Covariance | Iterable[Covariance] | None
"""Coefficients by pair of names, or one or several covariance matrices over some of the names; the rest is 0."""


def _unit_diagonal(covariance: FloatArray) -> FloatArray:
    """Correlation matrix of a covariance matrix; rows of exactly known inputs get 0."""
    u = np.sqrt(np.diag(covariance))
    scale = np.outer(u, u)
    unit: FloatArray = np.divide(covariance, scale, out=np.zeros_like(covariance), where=scale > 0)
    np.fill_diagonal(unit, 1.0)
    return unit


def _require_semidefinite(unit: FloatArray, where: str) -> None:
    smallest = float(np.linalg.eigvalsh(unit)[0])
    if smallest < -1e-10 * len(unit):
        what = f"not positive semi-definite: the correlation matrix has an eigenvalue {smallest:.3g}"
        mend = "No inputs can have these correlations: correct them, or give more digits"
        raise InputError(what, where=where, mend=mend)


def correlation_matrix(inputs: Sequence[Input], correlations: Correlations = None) -> FloatArray:
    """Correlation matrix of the inputs, shape (n, n), ones on the diagonal, in the order of ``inputs``.

    InputError if a name is unknown or given twice, a pair is given twice, a coefficient is outside -1 to 1, a
    covariance matrix does not have the inputs' ``u``**2 on its diagonal, or the whole is not positive semi-definite.
    """
    place = {one.name: i for i, one in enumerate(inputs)}
    if len(place) < len(inputs):
        raise InputError("a name occurs twice", where="inputs", mend="Give each input a name of its own")
    unit = np.eye(len(inputs))
    for (first, second), r in _pairs(inputs, correlations):
        where = f"correlation of {first!r} and {second!r}"
        for name in (first, second):
            if name not in place:
                mend = f"The inputs are {', '.join(place)}"
                raise InputError(f"there is no input {name!r}", where=where, mend=mend)
        if first == second or not -1 <= r <= 1:
            mend = "Give -1 to 1 for two different inputs"
            raise InputError(f"the coefficient is {r}", where=where, mend=mend)
        i, j = place[first], place[second]
        if unit[i, j] not in (0.0, r):
            raise InputError(f"given as {unit[i, j]:g} and as {r:g}", where=where, mend="Give each pair once")
        unit[i, j] = unit[j, i] = r
    linked = np.flatnonzero(np.count_nonzero(unit, axis=1) > 1)
    if linked.size:
        _require_semidefinite(unit[np.ix_(linked, linked)], "correlations")
    return unit


def _pairs(inputs: Sequence[Input], correlations: Correlations) -> list[tuple[tuple[str, str], float]]:
    """All correlated pairs, whichever way they were given."""
    if correlations is None:
        return []
    if isinstance(correlations, Mapping):
        return list(correlations.items())
    blocks = [correlations] if isinstance(correlations, Covariance) else list(correlations)
    u_of = {one.name: one.u for one in inputs}
    pairs = []
    for block in blocks:
        for name, variance in zip(block.names, np.diag(block.matrix), strict=True):
            where = f"covariance of {name!r}"
            if name not in u_of:
                mend = f"The inputs are {', '.join(u_of)}"
                raise InputError(f"there is no input {name!r}", where=where, mend=mend)
            # A matrix in other units than the inputs must not pass; digits lost in printing may.
            if not math.isclose(math.sqrt(variance), u_of[name], rel_tol=1e-3):
                what = f"the matrix gives u = {math.sqrt(variance):.6g}, the input {u_of[name]:.6g}"
                mend = "Give both in the same unit, from the same evaluation"
                raise InputError(what, where=where, mend=mend)
        unit = np.clip(_unit_diagonal(block.matrix), -1.0, 1.0)
        for i, j in combinations(range(len(block.names)), 2):
            pairs.append(((block.names[i], block.names[j]), float(unit[i, j])))
    return pairs


@dataclass(frozen=True, slots=True, eq=False)
class TypeA:
    """Means of quantities observed together, and the covariance of these means."""

    names: tuple[str, ...]
    mean: FloatArray  # (n,)
    covariance: Covariance  # of the means
    observations: int

    @property
    def u(self) -> FloatArray:
        """Standard uncertainty of each mean, shape (n,)."""
        return np.sqrt(np.diag(self.covariance.matrix))

    def inputs(
        self, *, shared: bool = False, origin: str = "", distribution: Distribution = "normal"
    ) -> tuple[Input, ...]:
        """The means as inputs of a budget; pass ``covariance`` along as their correlations."""
        origin, degrees = origin or f"mean of {self.observations} observations", self.observations - 1.0
        return tuple(
            Input(name, float(x), float(u), origin, shared, distribution, degrees)
            for name, x, u in zip(self.names, self.mean, self.u, strict=True)
        )


def type_a(observations: Mapping[str, ArrayLike]) -> TypeA:
    """Evaluate repeated observations: means, their standard uncertainties and their covariance.

    ``observations`` maps names to arrays, shape (n_observations,), n at least 2; the k-th values of all belong to one
    observation. Quantities that were not observed together belong in calls of their own.

    Source: JCGM 100:2008, 4.2.2, 4.2.3 (variance of a mean, s^2/n), 5.2.3 equation (17) (covariance of two), H.2.
    """
    if not observations:
        raise InputError("there are no observations", where="observations", mend="Give at least one quantity")
    rows = {name: np.asarray(values, dtype=float) for name, values in observations.items()}
    shape, *others = {row.shape for row in rows.values()}
    if others or len(shape) != 1 or shape[0] < 2:
        found = ", ".join(f"{name} {row.shape}" for name, row in rows.items())
        mend = "Give each quantity the same number of observations, two or more"
        raise InputError(f"the shapes are {found}", where="observations", mend=mend)
    for name, row in rows.items():
        require_finite(row, where=f"observations of {name!r}", mend="Leave out that observation in all")
    table = np.array(list(rows.values()))
    n, mean = table.shape[1], table.mean(axis=1)
    away = table - mean[:, None]
    covariance = np.einsum("ik,jk->ij", away, away) / (n * (n - 1))
    return TypeA(tuple(rows), frozen(mean), Covariance(tuple(rows), covariance), n)


@dataclass(frozen=True, slots=True, kw_only=True)
class Contribution:
    """What one input does to the output: a line of the budget."""

    name: str
    u: float  # |c| u(x), output unit; root mean square over the samples asked for
    share: float  # of the variance; the shares sum to 1, a negative one means correlation takes away
    shared: bool
    origin: str


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LinearBudget:
    """Combined standard uncertainty, where it comes from, and what shots of one rig share.

    Arrays have the shape of the output, () or (samples,), and its unit. ``variance_parts`` sums over its first axis to
    ``u``**2: each input gets its own term and half of every cross term it takes part in, c_i c_j cov(x_i, x_j), so
    a part is negative where correlation takes away more than the input brings. ``u_shared``**2 + ``u_own``**2 =
    ``u``**2 without a remainder, since a shared input cannot be correlated with a shot's own.
    """

    inputs: tuple[Input, ...]
    u: FloatArray
    u_shared: FloatArray
    u_own: FloatArray
    degrees_of_freedom: FloatArray  # effective, Welch-Satterthwaite
    signed_parts: FloatArray  # (inputs, ...), c_i u(x_i)
    correlation: FloatArray  # (inputs, inputs)

    @property
    def variance_parts(self) -> FloatArray:
        """What each input brings to the variance, shape (inputs, ...)."""
        return _variance_parts(self.signed_parts, self.correlation)

    def ranked(self, samples: int | slice | BoolArray | None = None) -> tuple[Contribution, ...]:
        """Contributions, the largest share of the variance first.

        ``samples`` picks one sample, a slice or a mask; over several, variances are summed. Shares are 0 where the
        output is exactly known.
        """
        pick = slice(None) if samples is None else samples
        n = len(self.inputs)
        variance = self.variance_parts.reshape(n, -1)[:, pick].reshape(n, -1)
        u = self.signed_parts.reshape(n, -1)[:, pick].reshape(n, -1)
        if not u.shape[1]:
            raise InputError("no sample is chosen", where="samples", mend="Choose one sample or more")
        total = float(variance.sum())
        shares = variance.sum(axis=1) / total if total > 0 else np.zeros(n)
        rms = np.sqrt(np.mean(np.square(u), axis=1))
        lines = [
            Contribution(
                name=one.name, u=float(rms[i]), share=float(shares[i]), shared=one.shared, origin=one.origin
            )
            for i, one in enumerate(self.inputs)
        ]
        return tuple(sorted(lines, key=lambda line: (-line.share, -line.u)))

    def expanded(self, probability: float = 0.95) -> FloatArray:
        """Expanded uncertainty U = t u, half the coverage interval (JCGM 100:2008, G.6.4)."""
        return np.asarray(coverage_factor(probability, self.degrees_of_freedom) * self.u)


def propagate(
    sensitivities: Mapping[str, ArrayLike], inputs: Sequence[Input], correlations: Correlations = None
) -> LinearBudget:
    """Combine the inputs' standard uncertainties to first order.

    ``sensitivities`` maps every input's name, and no other, to the output's partial derivative by that input, shape ()
    or (samples,), in the output's unit per the input's unit. For correlations see :data:`Correlations`.

    Effective degrees of freedom are those of G.4.1 equation (G.2b), which holds for independent inputs: inputs that are
    correlated enter it as one, with the smallest degrees of freedom among them. For quantities observed together that
    is n - 1, which is exact.

    InputError if names do not match, a sensitivity is not finite, shapes do not fit, the correlations are impossible,
    or a shared input is correlated with one that is the shot's own.

    Source: JCGM 100:2008, 5.1.2 equation (10), 5.2.2 equations (13) and (16), G.4.1.
    """
    scaled = _scaled(sensitivities, inputs)
    unit = correlation_matrix(inputs, correlations)
    shared_variance, own_variance = np.zeros(scaled.shape[1:]), np.zeros(scaled.shape[1:])
    for one, row in zip(inputs, scaled, strict=True):
        sums = shared_variance if one.shared else own_variance
        sums += row * row
    for i, j in np.argwhere(np.triu(unit, 1)):
        if inputs[i].shared != inputs[j].shared:
            where = f"correlation of {inputs[i].name!r} and {inputs[j].name!r}"
            mend = "Split the own one into a shared part and an independent rest, or mark both alike"
            raise InputError("one is shared by all shots, the other is not", where=where, mend=mend)
        sums = shared_variance if inputs[i].shared else own_variance
        sums += 2 * unit[i, j] * scaled[i] * scaled[j]
    # Parts that cancel (r = -1) may leave a rounding error below zero.
    shared_variance = np.asarray(np.maximum(shared_variance, 0.0))
    own_variance = np.asarray(np.maximum(own_variance, 0.0))
    total = np.asarray(shared_variance + own_variance)
    return LinearBudget(
        inputs=tuple(inputs),
        u=frozen(np.asarray(np.sqrt(total))),
        u_shared=frozen(np.asarray(np.sqrt(shared_variance))),
        u_own=frozen(np.asarray(np.sqrt(own_variance))),
        degrees_of_freedom=frozen(_effective_degrees(scaled, unit, total, inputs)),
        signed_parts=frozen(scaled),
        correlation=frozen(unit),
    )


def propagated_covariance(
    first: Mapping[str, ArrayLike],
    second: Mapping[str, ArrayLike],
    inputs: Sequence[Input],
    correlations: Correlations = None,
    *,
    only_shared: bool = False,
) -> FloatArray:
    """Covariance of two outputs of the same inputs, in the product of their units.

    ``first`` and ``second`` map each input's name to a sensitivity, shape () or (samples,). With ``only_shared`` it is
    the covariance of outputs of two different shots of one rig. JCGM 100:2008, H.2.3 equation (H.9).
    """
    a, b = _scaled(first, inputs), _scaled(second, inputs)
    unit = correlation_matrix(inputs, correlations)
    if only_shared:
        unit = unit * np.outer([one.shared for one in inputs], [one.shared for one in inputs])
    total = np.zeros(np.broadcast_shapes(a.shape[1:], b.shape[1:]))
    for i, j in np.argwhere(unit):
        total += unit[i, j] * a[i] * b[j]
    return total


def _scaled(sensitivities: Mapping[str, ArrayLike], inputs: Sequence[Input]) -> FloatArray:
    """c_i u(x_i) of all inputs, shape (inputs, ...)."""
    names = [one.name for one in inputs]
    if not names:
        raise InputError("there are no inputs", where="inputs", mend="Give at least one")
    for one in inputs:
        if one.components > 1:
            what, mend = f"it has {one.components} components", "Give each of them a name, or use Monte Carlo"
            raise InputError(what, where=f"input {one.name!r}", mend=mend)
    if set(names) != set(sensitivities):
        missing = sorted(set(names) - set(sensitivities))
        stray = sorted(set(sensitivities) - set(names))
        what = f"names do not match: no sensitivity for {missing}, no input for {stray}"
        raise InputError(what, where="sensitivities", mend="Give one sensitivity for each input")
    rows = [np.asarray(sensitivities[name], dtype=float) for name in names]
    shapes = {row.shape for row in rows} - {()}
    if len(shapes) > 1 or any(len(shape) != 1 for shape in shapes):
        what, mend = f"the shapes are {sorted(shapes)}", "Give numbers, or arrays over the same samples"
        raise InputError(what, where="sensitivities", mend=mend)
    scaled = np.empty((len(rows), *(shapes.pop() if shapes else ())))
    with np.errstate(invalid="ignore", over="ignore"):
        for i, row in enumerate(rows):
            np.multiply(row, inputs[i].u, out=scaled[i, ...])
        if not np.isfinite(scaled.sum()):  # one sum for all; only a bad one pays for the search
            for name, row in zip(names, rows, strict=True):
                require_finite(row, where=f"sensitivity to {name!r}", mend="Mend the model there")
    return scaled


def _variance_parts(scaled: FloatArray, unit: FloatArray) -> FloatArray:
    """Own terms, and half of each cross term to either side."""
    parts = np.square(scaled)
    for i, j in np.argwhere(np.triu(unit, 1)):
        cross = unit[i, j] * scaled[i] * scaled[j]
        parts[i] += cross
        parts[j] += cross
    return parts


def _effective_degrees(
    scaled: FloatArray, unit: FloatArray, total: FloatArray, inputs: Sequence[Input]
) -> FloatArray:
    """Welch-Satterthwaite over groups of inputs that are independent of each other."""
    if all(math.isinf(one.degrees_of_freedom) for one in inputs):
        return np.full_like(total, np.inf)
    variance, below = _variance_parts(scaled, unit), np.zeros_like(total)
    group = list(range(len(inputs)))
    for i, j in np.argwhere(np.triu(unit, 1)):
        group = [group[i] if g == group[j] else g for g in group]
    for g in set(group):
        members = [i for i, other in enumerate(group) if other == g]
        degrees = min(inputs[i].degrees_of_freedom for i in members)
        if math.isfinite(degrees):
            below = below + np.maximum(variance[members].sum(axis=0), 0.0) ** 2 / degrees
    return np.divide(total**2, below, out=np.full_like(total, np.inf), where=below > 0)


def coverage_factor(probability: float, degrees_of_freedom: ArrayLike = math.inf) -> FloatArray:
    """Factor t_p(nu) by which u is multiplied for a two-sided interval (JCGM 100:2008, G.3.2, table G.2)."""
    if not 0 < probability < 1:
        what = f"the coverage probability is {probability}"
        raise InputError(what, where="coverage", mend="Give a number between 0 and 1")
    return student_t_quantile(0.5 + 0.5 * probability, degrees_of_freedom)


def student_t_quantile(probability: float, degrees_of_freedom: ArrayLike) -> FloatArray:
    """Quantile of Student's t for one probability and any real degrees of freedom from 1 to infinity.

    With t = sqrt(nu) tan(theta) the density's integral is that of cos(theta)^(nu-1), which is smooth up to the end;
    Newton's steps from 0 cannot overshoot, since it is concave. From 100 degrees on: the expansion in 1/nu.

    The result has the shape of ``degrees_of_freedom``; it is good to 1e-8 from 0.005 to 0.995, to 1e-5 from 0.0005 to
    0.9995; probabilities beyond are refused.

    Source: Abramowitz and Stegun, Handbook of Mathematical Functions (1964), 26.7.1 (integral), 26.7.5 (expansion).
    """
    nu = np.asarray(degrees_of_freedom, dtype=float)
    if not 0.0005 - 1e-12 <= probability <= 0.9995 + 1e-12:
        what, mend = f"the probability is {probability}", "Give 0.0005 to 0.9995: a coverage up to 0.999"
        raise InputError(what, where="Student's t", mend=mend)
    if not np.all(nu >= 1):
        what, mend = "degrees of freedom below 1 or not a number", "Give n - 1 of n observations, 1 or more"
        raise InputError(what, where="Student's t", mend=mend)
    if probability < 0.5:
        return -student_t_quantile(1 - probability, nu)
    quantile = _t_expansion(probability, nu)
    few = nu < _MANY_DEGREES
    if np.any(few):
        quantile[few] = _t_of_few(probability, nu[few])
    return quantile


def _t_expansion(probability: float, nu: FloatArray) -> FloatArray:
    x = NormalDist().inv_cdf(probability)
    g1 = (x**3 + x) / 4
    g2 = (5 * x**5 + 16 * x**3 + 3 * x) / 96
    g3 = (3 * x**7 + 19 * x**5 + 17 * x**3 - 15 * x) / 384
    g4 = (79 * x**9 + 776 * x**7 + 1482 * x**5 - 1920 * x**3 - 945 * x) / 92160
    return np.asarray(x + (g1 + (g2 + (g3 + g4 / nu) / nu) / nu) / nu)


def _t_of_few(probability: float, nu: FloatArray) -> FloatArray:
    """Upper quantiles below 100 degrees, shape (n,); log t is a smooth function of 1/nu, so 25 of them give all."""
    if nu.size <= 25 or probability == 0.5:
        return _t_by_newton(probability, nu)
    log_t = np.polynomial.Chebyshev.interpolate(
        lambda inverse: np.log(_t_by_newton(probability, 1 / inverse)), 24, domain=[1 / _MANY_DEGREES, 1.0]
    )
    return np.asarray(np.exp(log_t(1 / nu)))


def _t_by_newton(probability: float, nu: FloatArray) -> FloatArray:
    """Upper quantiles for an array of degrees of freedom, shape (n,)."""
    log_c = np.array([math.lgamma(0.5 * (v + 1)) - math.lgamma(0.5 * v) for v in nu]) - 0.5 * math.log(
        math.pi
    )
    c, power = np.exp(log_c), nu - 1
    theta = np.zeros_like(nu)
    for _ in range(100):
        nodes = 0.5 * theta[:, None] * (1 + _NODES)
        area = 0.5 * theta * (np.cos(nodes) ** power[:, None] * _WEIGHTS).sum(axis=1)
        step = ((probability - 0.5) / c - area) / np.cos(theta) ** power
        theta = np.minimum(theta + step, 0.5 * math.pi * (1 - 1e-15))
        if np.all(np.abs(step) <= 1e-14 * theta):
            break
    return np.asarray(np.sqrt(nu) * np.tan(theta))
