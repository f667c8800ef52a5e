"""Propagation of distributions by Monte Carlo, and the running of a vectorised model.

Every input has a random stream of its own, so a seed gives the same draws whatever the size of the chunks. Memory stays
bounded: outputs with samples are never kept, only their running moments and a histogram for every sample.

References
----------
JCGM 101:2008, Supplement 1 to the GUM: Propagation of distributions using a Monte Carlo method.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.errors import InputError
from shpb.trust.gum import Correlations, Input, correlation_matrix, coverage_factor

Model = Callable[[Mapping[str, FloatArray]], FloatArray]
Progress = Callable[[int, int | None], None]

_FIRST = 128  # draws that lay out the histograms
_BINS = 256  # over 16 standard deviations, so 0.06 u each, with linear interpolation inside
_REACH = 8.0
_VALUES_IN_CHUNK = 2**21  # 16 MB of output at a time


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class MonteCarlo:
    """Distribution of an output. Arrays have the shape of the output, () or (samples,), and its unit."""

    draws: int
    mean: FloatArray
    u: FloatArray  # standard deviation of the draws
    probability: float
    low: FloatArray  # probabilistically symmetric coverage interval
    high: FloatArray
    shortest: tuple[float, float] | None  # shortest coverage interval, outputs of one number only
    values: FloatArray | None  # sorted draws, outputs of one number only
    seed: int
    settled: (
        bool | None
    )  # adaptive: whether the results settled before the limit of draws; None if draws were given


def numerical_tolerance(u: float, digits: int) -> float:
    """Numerical tolerance of a standard uncertainty stated to ``digits`` significant digits.

    u = c 10^l with c an integer of that many digits; the tolerance is 10^l / 2. JCGM 101:2008, 7.9.2.
    """
    if not (math.isfinite(u) and u >= 0) or digits < 1:
        what, mend = f"u is {u}, digits {digits}", "Give u of zero or more and one digit or more"
        raise InputError(what, where="numerical tolerance", mend=mend)
    if u == 0:
        return 0.0
    exponent = int(f"{u:.{digits - 1}e}".split("e")[1])  # after rounding: 0.0996 to two digits is 0.10
    return 0.5 * 10.0 ** (exponent - digits + 1)


def monte_carlo(
    model: Model,
    inputs: Sequence[Input],
    correlations: Correlations = None,
    *,
    draws: int | None = None,
    adaptive: int | None = None,
    probability: float = 0.95,
    seed: int,
    chunk: int | None = None,
    limit: int = 10_000_000,
    progress: Progress | None = None,
) -> MonteCarlo:
    """Propagate the inputs' distributions through a vectorised model.

    Parameters
    ----------
    model : callable
        Takes a mapping of name to array, shape (draws,), or (draws, components) where an input has several; gives shape
        (draws,) or (draws, samples).
    inputs : sequence of Input
    correlations : mapping, Covariance, several, or None
        Correlated inputs must be normal: they are drawn from a multivariate normal (6.4.8).
    draws, adaptive : int
        One of the two: the number of draws, or the significant digits of u that must settle. Adaptive runs batches of
        at least 10,000 draws until mean, u and both ends of the symmetric interval are known within
        :func:`numerical_tolerance` of u with 95 % confidence, at every sample (7.9.4, with Student's factor in place
        of 2 while there are few batches).
    probability : float
        Coverage probability.
    seed : int
        The same seed gives the same draws, whatever ``chunk``.
    chunk : int
        Draws handed to the model at once, at least 32; by default about 2 million output values.
    limit : int
        Most draws of an adaptive run. If they do not suffice, ``settled`` is False.
    progress : callable
        Called after each chunk with the draws done and the draws asked for (None if adaptive).

    Returns
    -------
    MonteCarlo
        One number: intervals from the sorted draws (7.7). Samples: quantiles from histograms of all draws in 256
        bins over 16 standard deviations, laid out by the first draws and interpolated linearly: they differ from
        the sorted draws by some 0.005 u for a smooth density, by 0.03 u where the density jumps at the end point.

    Raises
    ------
    InputError
        If an argument is out of range, the correlations are impossible, correlated inputs are not normal, a t input
        has two or fewer degrees of freedom (no variance), or the model is not finite somewhere.
    """
    batch = _batch_size(draws, adaptive, probability, limit)
    if chunk is not None and chunk < 32:
        raise InputError(f"a chunk of {chunk} draws", where="chunk", mend="Give 32 or more")
    source = _Source(inputs, correlations, seed)
    first = min(chunk or _FIRST, _FIRST, batch)
    y = run_model(model, source.draw(first), first)
    output: _Numbers | _Curves = _Numbers() if y.ndim == 1 else _Curves(y)
    chunk = chunk or max(32, _VALUES_IN_CHUNK // max(1, y[0].size))
    if y.ndim == 1:
        chunk = min(chunk, 100_000)
    rounds = _Moments()
    done, in_batch, settled = 0, 0, None if adaptive is None else False
    while True:
        output.add(y)
        done, in_batch = done + len(y), in_batch + len(y)
        if progress is not None:
            progress(done, draws)
        if in_batch >= batch:
            rounds.add(output.end_batch(probability)[None])
            in_batch = 0
            if adaptive is None:
                break
            settled = _settled(rounds, output.moments, adaptive)
            if settled or done + batch > limit:
                break
        n = min(chunk, batch - in_batch)
        y = run_model(model, source.draw(n), n, shape=y.shape[1:])
    low, high = output.symmetric(probability)
    return MonteCarlo(
        draws=done,
        mean=frozen(np.asarray(output.moments.mean)),
        u=frozen(output.moments.u),
        probability=probability,
        low=frozen(low),
        high=frozen(high),
        shortest=output.shortest(probability),
        values=output.sorted_values(),
        seed=seed,
        settled=settled,
    )


def _batch_size(draws: int | None, adaptive: int | None, probability: float, limit: int) -> int:
    """Draws between two looks at the results: all of them, or the M of 7.9.4 b."""
    if not 0 < probability < 1:
        what = f"the coverage probability is {probability}"
        raise InputError(what, where="probability", mend="Give a number between 0 and 1")
    if (draws is None) == (adaptive is None):
        what, mend = f"draws is {draws} and adaptive is {adaptive}", "Give one of the two"
        raise InputError(what, where="draws", mend=mend)
    if draws is not None:
        # Fewer than five draws beyond each end say nothing about where the interval ends.
        least = math.ceil(10 / (1 - probability) - 1e-9)
        if draws < least:
            what, mend = f"{draws} draws are too few for coverage {probability:g}", f"Give {least} or more"
            raise InputError(what, where="draws", mend=mend)
        return draws
    batch = max(math.ceil(100 / (1 - probability) - 1e-9), 10_000)
    if adaptive is not None and adaptive < 1:
        raise InputError(f"{adaptive} significant digits", where="adaptive", mend="Give 1 or 2")
    if limit < 2 * batch:
        what, mend = f"at most {limit} draws", f"Give {2 * batch} or more: a run has two batches at least"
        raise InputError(what, where="limit", mend=mend)
    return batch


def _settled(rounds: _Moments, output: _Moments, digits: int) -> bool:
    """Whether the four averages over the batches so far are within the tolerance (7.9.4 f to h).

    Stricter than the clause, whose factor 2 lets two batches that agree by chance end the run: two batches have one
    degree of freedom, so the factor is Student's for 95 % until that falls to 2.
    """
    if rounds.n < 2:
        return False
    error = rounds.u / math.sqrt(rounds.n)  # (4, ...)
    u = output.u
    tolerance = np.reshape([numerical_tolerance(float(one), digits) for one in np.ravel(u)], np.shape(u))
    # Where nothing varies but rounding, there is nothing to settle.
    tolerance = np.maximum(tolerance, 1e-12 * np.abs(output.mean))
    factor = max(2.0, float(coverage_factor(0.95, rounds.n - 1)))
    return bool(np.all(factor * error <= tolerance))


class _Source:
    """Draws of the inputs, one random stream for each."""

    def __init__(self, inputs: Sequence[Input], correlations: Correlations, seed: int) -> None:
        if not inputs:
            raise InputError("there are no inputs", where="inputs", mend="Give at least one")
        if seed < 0:
            raise InputError(f"the seed is {seed}", where="seed", mend="Give zero or a positive whole number")
        self.inputs = tuple(inputs)
        unit = correlation_matrix(inputs, correlations)
        self.linked = np.flatnonzero(np.count_nonzero(unit, axis=1) > 1)
        for i, one in enumerate(inputs):
            where = f"input {one.name!r}"
            if i in self.linked and one.distribution != "normal":
                what = f"it is correlated, and its distribution is {one.distribution}"
                raise InputError(
                    what, where=where, mend="Make it normal: only normal inputs may be correlated"
                )
            if i in self.linked and one.components > 1:
                what = f"it is correlated, and has {one.components} components"
                raise InputError(what, where=where, mend="Give each component a name of its own")
            if one.distribution == "t" and one.degrees_of_freedom <= 2:
                what = f"a t distribution with {one.degrees_of_freedom:g} degrees of freedom has no variance"
                raise InputError(what, where=where, mend="Take four or more observations, or pool them")
        self.factor = _square_root(unit[np.ix_(self.linked, self.linked)])
        self.streams = [np.random.default_rng(s) for s in np.random.SeedSequence(seed).spawn(len(inputs))]

    def draw(self, n: int) -> dict[str, FloatArray]:
        """The next n draws of all inputs."""
        deviates = [
            self._deviate(one, rng, n if one.components == 1 else (n, one.components))
            for one, rng in zip(self.inputs, self.streams, strict=True)
        ]
        if self.linked.size:
            mixed = np.einsum("ij,jk->ik", self.factor, np.array([deviates[i] for i in self.linked]))
            for row, i in enumerate(self.linked):
                deviates[i] = mixed[row]
        return {one.name: one.value + one.u * z for one, z in zip(self.inputs, deviates, strict=True)}

    @staticmethod
    def _deviate(one: Input, rng: np.random.Generator, n: int | tuple[int, int]) -> FloatArray:
        """Draws of mean 0 and standard deviation 1, for t of scale 1 (6.4.2 to 6.4.9)."""
        if one.distribution == "normal":
            return rng.standard_normal(n)
        if one.distribution == "t":
            return rng.standard_t(one.degrees_of_freedom, n)
        if one.distribution == "rectangular":
            return math.sqrt(3) * rng.uniform(-1.0, 1.0, n)
        if one.distribution == "triangular":
            return math.sqrt(6) * rng.triangular(-1.0, 0.0, 1.0, n)
        return math.sqrt(2) * np.sin(2 * math.pi * rng.random(n))


def _square_root(unit: FloatArray) -> FloatArray:
    """A with A A' = ``unit``: Cholesky's factor (C.5), or from the eigenvectors where that does not exist."""
    try:
        return np.asarray(np.linalg.cholesky(unit), dtype=np.float64)
    except np.linalg.LinAlgError:  # singular: an input is a linear combination of others
        values, vectors = np.linalg.eigh(unit)
        return np.asarray(vectors * np.sqrt(np.maximum(values, 0.0)))


class _Moments:
    """Running mean and variance over the first axis.

    T. F. Chan, G. H. Golub, R. J. LeVeque, The American Statistician 37 (1983) 242-247, equations (2.1).
    """

    def __init__(self) -> None:
        self.n = 0
        self.mean: FloatArray = np.zeros(())
        self.square: FloatArray = np.zeros(())  # sum of squared deviations

    def add(self, y: FloatArray) -> None:
        """Take in rows of draws."""
        part = _Moments()
        part.n, part.mean = len(y), np.asarray(y.mean(axis=0))
        away = y - part.mean
        part.square = np.asarray(np.einsum("i...,i...->...", away, away))
        self.merge(part)

    def merge(self, other: _Moments) -> None:
        """Take in what another has seen."""
        n = self.n + other.n
        step = other.mean - self.mean
        self.square = self.square + other.square + step**2 * (self.n * other.n / n)
        self.mean = self.mean + step * (other.n / n)
        self.n = n

    @property
    def u(self) -> FloatArray:
        """Standard deviation."""
        return np.asarray(np.sqrt(self.square / (self.n - 1)))


class _Numbers:
    """Outputs of one number a draw: all are kept."""

    def __init__(self) -> None:
        self.moments = _Moments()
        self.parts: list[FloatArray] = []
        self.batch: list[FloatArray] = []

    def add(self, y: FloatArray) -> None:
        self.moments.add(y)
        self.batch.append(y)

    def end_batch(self, probability: float) -> FloatArray:
        """Mean, u, low and high of the batch, shape (4,)."""
        y = np.sort(np.concatenate(self.batch))
        self.batch = []
        self.parts.append(y)
        return np.array([y.mean(), y.std(ddof=1), *_symmetric_interval(y, probability)])

    def sorted_values(self) -> FloatArray:
        """All draws, sorted."""
        if len(self.parts) > 1:
            self.parts = [np.sort(np.concatenate(self.parts), kind="stable")]
        return frozen(self.parts[0])

    def symmetric(self, probability: float) -> tuple[FloatArray, FloatArray]:
        low, high = _symmetric_interval(self.sorted_values(), probability)
        return np.array(low), np.array(high)

    def shortest(self, probability: float) -> tuple[float, float]:
        return shortest_interval(self.sorted_values(), probability)


def _covered(n: int, probability: float) -> int:
    """Draws inside the interval, pM to the nearest whole number: q of 7.7.1."""
    return min(int(probability * n + 0.5), n - 1)


def _symmetric_interval(y: FloatArray, probability: float) -> tuple[float, float]:
    """Interval between sorted draws with as many below as above (7.7.2)."""
    q = _covered(len(y), probability)
    r = max((len(y) - q + 1) // 2, 1)
    return float(y[r - 1]), float(y[r + q - 1])


def shortest_interval(y: FloatArray, probability: float) -> tuple[float, float]:
    """Shortest interval that holds the share ``probability`` of the sorted draws ``y``, shape (draws,) (7.7.4)."""
    q = _covered(len(y), probability)
    r = int(np.argmin(y[q:] - y[:-q]))
    return float(y[r]), float(y[r + q])


class _Curves:
    """Outputs over samples: moments and a histogram for every sample, of the batch and of all."""

    def __init__(self, first: FloatArray) -> None:
        start = _Moments()
        start.add(first)
        self.samples = first.shape[1]
        self.low = start.mean - _REACH * start.u
        self.width = 2 * _REACH * start.u / _BINS
        # A sample that did not vary so far has bins of no width: the same value falls in the first, others outside.
        still = np.ptp(first, axis=0) == 0
        self.low[still], self.width[still] = first[0, still], 0.0
        self.per_unit = np.divide(1.0, self.width, out=np.full(self.samples, 1e300), where=~still)
        self.offset = np.arange(self.samples) * (_BINS + 2)
        self.moments, self.counts = _Moments(), self._empty()
        self.batch_moments, self.batch_counts = _Moments(), self._empty()

    def _empty(self) -> np.ndarray[tuple[int, ...], np.dtype[np.int64]]:
        return np.zeros(self.samples * (_BINS + 2), dtype=np.int64)

    def add(self, y: FloatArray) -> None:
        self.batch_moments.add(y)
        with np.errstate(over="ignore"):
            place = (y - self.low) * self.per_unit
        np.clip(place, -1.0, _BINS, out=place)  # the two outer bins take what lies beyond
        np.floor(place, out=place)
        place += self.offset + 1
        self.batch_counts += np.bincount(place.astype(np.intp).ravel(), minlength=self.batch_counts.size)

    def end_batch(self, probability: float) -> FloatArray:
        """Mean, u, low and high of the batch, shape (4, samples)."""
        low, high = self._quantiles(self.batch_counts, self.batch_moments.n, probability)
        row = np.array([self.batch_moments.mean, self.batch_moments.u, low, high])
        self.moments.merge(self.batch_moments)
        self.counts += self.batch_counts
        self.batch_moments, self.batch_counts = _Moments(), self._empty()
        return row

    def symmetric(self, probability: float) -> tuple[FloatArray, FloatArray]:
        return self._quantiles(self.counts, self.moments.n, probability)

    def _quantiles(
        self, counts: np.ndarray[tuple[int, ...], np.dtype[np.int64]], n: int, probability: float
    ) -> tuple[FloatArray, FloatArray]:
        below = np.cumsum(counts.reshape(self.samples, _BINS + 2), axis=1)
        column = np.arange(self.samples)
        ends = []
        for share in (0.5 - 0.5 * probability, 0.5 + 0.5 * probability):
            target = share * n
            place = np.argmax(below >= target, axis=1)
            if np.any((place == 0) | (place == _BINS + 1)):
                sample = int(np.argmax((place == 0) | (place == _BINS + 1)))
                what = f"the interval reaches beyond {_REACH:g} standard deviations of the first draws"
                mend = "The output has rare huge values: narrow the input behind them, or look at one sample alone"
                raise InputError(what, where=f"model, sample {sample}", mend=mend)
            before = below[column, place - 1]
            inside = (target - before) / (below[column, place] - before)
            ends.append(np.asarray(self.low + (place - 1 + inside) * self.width))
        return ends[0], ends[1]

    def sorted_values(self) -> None:
        return None

    def shortest(self, probability: float) -> None:  # noqa: ARG002 - the pair of classes has one shape
        return None


def run_model(
    model: Model, values: Mapping[str, FloatArray], runs: int, *, shape: tuple[int, ...] | None = None
) -> FloatArray:
    """Call a vectorised model and check what it gives: finite, shape (runs,) or (runs, samples).

    ``shape`` is that of one run's output, where it is known from an earlier call.
    """
    y = np.asarray(model(values), dtype=float)
    if (
        y.ndim not in (1, 2)
        or y.shape[0] != runs
        or (shape is not None and y.shape[1:] != shape)
        or not y.size
    ):
        raise InputError(
            f"the model gave shape {y.shape} for {runs} runs",
            where="model",
            mend="Give one row for each run: shape (runs,) or (runs, samples)",
        )
    with np.errstate(over="ignore", invalid="ignore"):
        fine = np.isfinite(y.sum())
    if not fine and not np.all(np.isfinite(y)):
        run = int(np.argmin(np.isfinite(y.reshape(runs, -1)).all(axis=1)))
        at = ", ".join(f"{name} = {float(x[run]):.6g}" for name, x in values.items() if x.ndim == 1)
        raise InputError(
            f"the model is not finite at {at}",
            where="model",
            mend="Narrow the input that leaves the model's range, or guard the model there",
        )
    return y


def numerical_sensitivities(
    model: Model, inputs: Sequence[Input], *, step: float = 0.01
) -> dict[str, FloatArray]:
    """Partial derivatives of a vectorised model at the inputs' values, by central differences.

    Parameters
    ----------
    model : callable
        Takes a mapping of name to array, shape (runs,), gives shape (runs,) or (runs, samples). Called once.
    inputs : sequence of Input
    step : float
        Step to either side as a share of the input's ``u``. Small for a smooth model; 1 gives the mean slope over
        one standard uncertainty (JCGM 100:2008, 5.1.3 note 2), right for models that move by whole samples. An exactly
        known input is moved by 6e-6 of its value (of 1, if that is zero).

    Returns
    -------
    dict of name to float array
        Shape () or (samples,), in the output's unit per the input's unit.
    """
    if not (math.isfinite(step) and step > 0):
        raise InputError(f"the step is {step}", where="step", mend="Give a positive share of u")
    correlation_matrix(inputs)  # refuses double names
    n = len(inputs)
    x = np.array([one.value for one in inputs])
    exact = np.cbrt(np.finfo(float).eps) * np.where(x == 0, 1.0, np.abs(x))
    h = np.array([one.u * step for one in inputs])
    # A step below the grid of floats would give 0/0: such an input is as good as exact.
    h = np.where(np.abs(h) > 1e-13 * np.abs(x), h, exact)
    points = np.repeat(x[:, None], 2 * n, axis=1)
    points[np.arange(n), np.arange(n)] += h
    points[np.arange(n), n + np.arange(n)] -= h
    y = run_model(model, {one.name: points[i] for i, one in enumerate(inputs)}, 2 * n)
    # The steps as floats hold them, not as they were asked for.
    moved = points[np.arange(n), np.arange(n)] - points[np.arange(n), n + np.arange(n)]
    return {one.name: np.asarray((y[i] - y[n + i]) / moved[i]) for i, one in enumerate(inputs)}
