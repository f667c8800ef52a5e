"""All passages of all shots in one least-squares fit: wave speeds, Poisson's ratios, lengths and distances.

What a station sees of a pulse after the way d is, in every bin f of the window's Fourier transform,

    s(f) = g(f) A(f) sign exp(-i w d/c(f)) + noise,   c(f) the first mode's phase speed for (c0, nu)

with one spectrum A of the pulse for all passages of a shot. A is free: for given parameters the best one follows
linearly, so it is projected out (variable projection). g is real: what supports, ends and the section of the mode take
from the amplitude says nothing of the wave speed, and is let free as exp(a + b f^2). Offset and slope of the zero line
below every passage are free too, as far as drift and hum are plausible: soft-ended windows do not drop them by
themselves.

Each step carries the passages to one place with the parameters so far (:mod:`~.carried`) and takes what is
left of their phases for one Gauss-Newton step. The band is widened step by step, so that no phase is ever a turn off.

Reference
---------
G. H. Golub, V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413-432 (variable projection).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import NamedTuple

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.calibrate.bars.carried import CONTACT, HIGHEST_FA_C0, Problem, Shot, Spectra
from shpb.calibrate.bars.mode_table import mode_at
from shpb.calibrate.bars.ways import bar_of, lengths_of
from shpb.pulse.zero_line import PLAUSIBLE_DRIFT_PER_S

_STAGES = (0.03, 0.06, 0.10, 0.15, 0.20, HIGHEST_FA_C0)  # bands of the steps, f a/c0
_LAST_STEPS = 12  # with the whole band, at most
_SMALL_STEP = 0.01  # standard uncertainties: a parameter's last step
_U_OFFSET = 0.05  # of the peak: what the zero line may be off below one passage
_U_LOG_GAIN = 1.0  # no restriction to speak of
_U_START = {"c": 0.05, "nu": 0.05}  # relative, absolute: while the band is still narrow
_U_FREE = {"c": 0.20, "nu": 0.20}  # at last: nothing that a result could feel
_POISSON = (0.05, 0.47)
# By how much the scale of the dispersion over frequency may be another than the bar's radius has it, relative. Without
# this allowance the mere shape of the dispersion would state c0 by the radius, more firmly than any length, and so
# would whatever a real bar or gauge does a little unlike the mode (common practice).
U_SCALE = 0.03
U_CONTACT_S = 0.3e-6  # common practice: what the contact of two bars may delay, alike in all shots


class Local(NamedTuple):
    """Of one shot: logarithm of the gain a + b (f/f_max)^2, offset and slope, each of shape (passages,)."""

    gain: FloatArray
    bend: FloatArray
    offset: FloatArray
    slope: FloatArray


class Fitted(NamedTuple):
    """One solution; ``names`` in the order of ``covariance``: "c incident", "nu incident", "m incident_gauge",
    "t contact".

    A bar's own length is "m incident". ``bends`` is what the solution moves by with each parameter that is held fast.
    """

    values: dict[str, float]
    names: tuple[str, ...]
    covariance: FloatArray
    chi2: float
    freedom: int
    bends: dict[str, FloatArray]
    local: tuple[Local, ...]  # one of each shot
    misfit: float  # what is left, root mean square by that of the passages


class _Normal(NamedTuple):
    """Normal equations of one shot with what is its own eliminated."""

    matrix: FloatArray
    right: FloatArray
    back: FloatArray  # own parameters: constant part, and what they change by with the common ones
    chi2: float
    rows: int
    power: float  # weighted sum of squares of the passages themselves


def fit(problem: Problem, shots: Sequence[Shot]) -> Fitted:
    """Solve by Gauss-Newton, the band widened step by step; noise raised to what the record shows (Birge)."""
    values = _start(problem)
    names = tuple(values)
    free = tuple(name for name in names if name not in problem.held)
    local = [_nothing(len(shot.shot.passages)) for shot in shots]
    scale = 1.0
    stages = [*_STAGES, *[HIGHEST_FA_C0] * _LAST_STEPS]
    for number, most in enumerate(stages):
        last = number >= len(_STAGES)
        normals = [
            _normal(shot, values, problem, own, most, names) for shot, own in zip(shots, local, strict=True)
        ]
        matrix = sum(one.matrix for one in normals) / scale
        right = sum(one.right for one in normals) / scale
        u_prior = _priors(problem, names, values, _U_FREE if last else _U_START)
        # Lengths come last: phases that are still off would bend them.
        keep = np.array([name in free and (last or name[0] not in "md") for name in names])
        full = matrix + np.diag([1 / u**2 for _, u in u_prior])
        pull = right + np.array(
            [(known - values[n]) / u**2 for n, (known, u) in zip(names, u_prior, strict=True)]
        )
        step = np.zeros(len(names))
        step[keep] = _solve(full[np.ix_(keep, keep)], pull[keep])
        for name, change in zip(names, step, strict=True):
            values[name] += float(change)
            if name.startswith("nu "):
                values[name] = float(np.clip(values[name], *_POISSON))
        local = [_moved(own, one.back, step) for own, one in zip(local, normals, strict=True)]
        chi2, rows = sum(one.chi2 for one in normals), sum(one.rows for one in normals)
        freedom = max(rows - int(keep.sum()), 1)
        scale = max(chi2 / freedom, 1.0)
        if (
            last
            and number > len(_STAGES)
            and np.all(np.abs(step[keep]) * np.sqrt(np.diag(full)[keep]) < _SMALL_STEP)
        ):
            break
    covariance = _inverse(full[np.ix_(keep, keep)])
    bends = {name: -covariance @ full[keep, names.index(name)] for name in problem.held}
    misfit = float(np.sqrt(chi2 / sum(one.power for one in normals)))
    return Fitted(
        values,
        tuple(name for name, kept in zip(names, keep, strict=True) if kept),
        covariance,
        chi2,
        freedom,
        bends,
        tuple(local),
        misfit,
    )


def _start(problem: Problem) -> dict[str, float]:
    values: dict[str, float] = {}
    for side in problem.sides:
        for kind in ("c", "nu"):
            values.setdefault(problem.own(kind, side), problem.start[f"{kind} {side}"])
        values.setdefault(problem.own("d", side), 0.0)
    values |= {f"m {name}": length for name, length in lengths_of(problem.rig).items()}
    crossing = any(one.way.crosses for shot in problem.shots for one in shot.passages)
    return values | {CONTACT: 0.0} if crossing else values


def _priors(
    problem: Problem, names: Sequence[str], values: Mapping[str, float], u_free: Mapping[str, float]
) -> list[tuple[float, float]]:
    found = []
    for name in names:
        kind, _, what = name.partition(" ")
        if kind == "m":
            found.append(problem.priors.get(what, (values[name], 1.0)))
        elif kind == "d":
            found.append((0.0, U_SCALE))
        elif kind == "t":
            found.append((0.0, U_CONTACT_S))
        else:
            known = problem.start[name]
            found.append((known, u_free[kind] * (known if kind == "c" else 1.0)))
    return found


def _nothing(passages: int) -> Local:
    return Local(*(np.zeros(passages) for _ in range(4)))


def _moved(own: Local, back: FloatArray, step: FloatArray) -> Local:
    change = (back[:, 0] - back[:, 1:] @ step).reshape(4, -1)
    return Local(*(one + by for one, by in zip(own, change, strict=True)))


def _normal(
    shot: Shot, values: Mapping[str, float], problem: Problem, own: Local, most: float, names: Sequence[str]
) -> _Normal:
    """Linearise one shot about the parameters so far."""
    spectra = shot.carried(values, problem)
    laid = laid_over(spectra, own, most / shot.unit_s)
    weight, model = laid.weight, laid.model
    square = (spectra.frequency_hz / spectra.frequency_hz[-1]) ** 2
    columns: list[ComplexArray] = [
        -1j * slope * model for slope in phase_slopes(shot, values, problem, names)
    ]
    columns += _own_columns(model, square, spectra.zero)
    design = np.array([(np.sqrt(weight) * laid.projected(column)).ravel() for column in columns])
    rest = (np.sqrt(weight) * laid.residual).ravel()
    used = weight > 0
    rows = int(2 * (used.sum() - used.any(axis=0).sum()))
    power = float((weight * np.abs(laid.data) ** 2).sum())
    return _eliminated(design, rest, len(names), shot, rows, power)


class Laid(NamedTuple):
    """All passages of a shot beside the one pulse that fits them best; arrays of shape (passages, bins)."""

    data: ComplexArray
    model: ComplexArray
    residual: ComplexArray
    gain: FloatArray
    weight: FloatArray

    def projected(self, column: ComplexArray) -> ComplexArray:
        """What of a change of the model the free pulse does not take up."""
        below = np.maximum((self.weight * self.gain**2).sum(axis=0), 1e-300)
        left: ComplexArray = column - self.gain * ((self.weight * self.gain * column).sum(axis=0) / below)
        return left


def laid_over(spectra: Spectra, own: Local, highest_hz: float = np.inf) -> Laid:
    """Find the pulse that fits all passages best, bin by bin."""
    weight = np.where(spectra.frequency_hz <= highest_hz, spectra.weight, 0.0)
    # A bin that only one passage has says nothing: its pulse is free.
    weight = np.where((weight > 0).sum(axis=0) > 1, weight, 0.0)
    square = (spectra.frequency_hz / spectra.frequency_hz[-1]) ** 2
    gain = np.exp(own.gain[:, None] + own.bend[:, None] * square)
    data = spectra.values - own.offset[:, None] * spectra.zero[0] - own.slope[:, None] * spectra.zero[1]
    below = np.maximum((weight * gain**2).sum(axis=0), 1e-300)
    model = gain * ((weight * gain * data).sum(axis=0) / below)
    return Laid(data, model, np.where(weight > 0, data - model, 0.0), gain, weight)


def phase_slopes(
    shot: Shot, values: Mapping[str, float], problem: Problem, names: Sequence[str]
) -> list[FloatArray]:
    """What each parameter adds to the lag of each passage, by its unit; shape (passages, bins) each."""
    frequency = shot.frequency_hz
    omega = 2 * np.pi * frequency
    lengths = {name: values[f"m {name}"] for name in lengths_of(shot.rig)}
    slopes = {name: np.zeros((len(shot.shot.passages), frequency.size)) for name in names}
    for side in problem.sides:
        c, nu = values[problem.own("c", side)], values[problem.own("nu", side)]
        fa_c0 = frequency * float(bar_of(shot.rig, side).radius_m) * (1 + values[problem.own("d", side)]) / c
        mode = mode_at(fa_c0, nu)
        wavenumber = omega / c * mode.slowness
        by_c = -omega / c**2 * mode.group_slowness
        by_nu = omega / c * mode.by_poisson
        by_scale = omega / c * (mode.group_slowness - mode.slowness)
        for row, one in enumerate(shot.shot.passages):
            way = one.way.length_m(side, lengths)
            slopes[problem.own("c", side)][row] += way * by_c
            slopes[problem.own("nu", side)][row] += way * by_nu
            slopes[problem.own("d", side)][row] += way * by_scale
            for bar, name, factor in one.way.terms:
                if bar == side:
                    slopes[f"m {name}"][row] += factor * wavenumber
    if CONTACT in slopes:
        for row, one in enumerate(shot.shot.passages):
            slopes[CONTACT][row] = omega * float(one.way.crosses)
    return list(slopes.values())


def _own_columns(model: ComplexArray, square: FloatArray, zero: ComplexArray) -> list[ComplexArray]:
    columns = []
    for part in (
        model,
        model * square,
        np.broadcast_to(zero[0], model.shape),
        np.broadcast_to(zero[1], model.shape),
    ):
        for row in range(model.shape[0]):
            column = np.zeros_like(model)
            column[row] = part[row]
            columns.append(column)
    return columns


def _eliminated(
    design: ComplexArray, rest: ComplexArray, common: int, shot: Shot, rows: int, power: float
) -> _Normal:
    """Normal equations of the common parameters, the shot's own solved for (Schur complement)."""
    whole = (design.conj() @ design.T).real
    right = (design.conj() @ rest).real
    passages = len(shot.shot.passages)
    u_offset = _U_OFFSET * shot.shot.peak
    u_slope = PLAUSIBLE_DRIFT_PER_S * shot.shot.peak * shot.shot.interval_s
    prior = np.repeat([_U_LOG_GAIN, _U_LOG_GAIN, u_offset, u_slope], passages) ** -2.0
    c, o = slice(0, common), slice(common, None)
    own = whole[o, o] + np.diag(prior)
    back = _solve(own, np.column_stack([right[o], whole[o, c]]))
    matrix = whole[c, c] - whole[c, o] @ back[:, 1:]
    chi2 = float((np.abs(rest) ** 2).sum() - right[o] @ back[:, 0])
    return _Normal(matrix, right[c] - whole[c, o] @ back[:, 0], back, chi2, rows - 4 * (passages - 1), power)


def _solve(matrix: FloatArray, right: FloatArray) -> FloatArray:
    """Solve scaled equations of very unlike parameters."""
    scale = 1 / np.sqrt(np.diag(matrix))
    solved = np.linalg.solve(matrix * np.outer(scale, scale), (right.T * scale).T)
    found: FloatArray = (solved.T * scale).T
    return found


def _inverse(matrix: FloatArray) -> FloatArray:
    inverse = _solve(matrix, np.eye(len(matrix)))
    return 0.5 * (inverse + inverse.T)
