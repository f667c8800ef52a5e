"""Phase speed between passages, each frequency by itself: what a figure lays beside the fitted first mode."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.bars.carried import Problem, Shot
from shpb.calibrate.bars.mode_table import mode_at
from shpb.calibrate.bars.phase_fit import Fitted, laid_over
from shpb.calibrate.bars.ways import bar_of, lengths_of

_LEAST_KNOWN = 0.05  # relative uncertainty beyond which a frequency shows nothing


class PhaseSpeeds(NamedTuple):
    """Arrays of shape (frequencies,), read-only."""

    frequency_hz: FloatArray
    measured_m_s: FloatArray
    u_measured_m_s: FloatArray
    fitted_m_s: FloatArray


def phase_speeds(problem: Problem, shots: Sequence[Shot], fitted: Fitted, side: str) -> PhaseSpeeds:
    """Phase speed of one bar by all shots that passed through it.

    At each frequency alone the passages say by how much the wavenumber is another than the fitted one; lengths,
    gains and zero lines are those of the fit. Shots are averaged by their weights.
    """
    frequency, change, weight = (np.concatenate(parts) for parts in zip(
        *(_of_shot(problem, shot, fitted, number, side) for number, shot in enumerate(shots)), strict=True
    ))  # fmt: skip
    step = max(float(np.diff(shot.frequency_hz[:2])[0]) for shot in shots)
    place = np.round(frequency / step).astype(int)
    total = np.bincount(place, weight)
    kept = np.flatnonzero(total > 0)
    mean_f = np.bincount(place, weight * frequency)[kept] / total[kept]
    mean = np.bincount(place, weight * change)[kept] / total[kept]
    u = np.sqrt(max(fitted.chi2 / fitted.freedom, 1.0) / total[kept])
    known = u < _LEAST_KNOWN
    mean_f, mean, u = mean_f[known], mean[known], u[known]
    line = _fitted_m_s(problem, fitted, side, mean_f)
    return PhaseSpeeds(*(frozen(one) for one in (mean_f, line / (1 + mean), u * line, line)))


def _of_shot(
    problem: Problem, shot: Shot, fitted: Fitted, number: int, side: str
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Frequency, relative change of the wavenumber and its weight, each of shape (bins,)."""
    spectra = shot.carried(fitted.values, problem)
    laid = laid_over(spectra, fitted.local[number])
    lengths = {name: fitted.values[f"m {name}"] for name in lengths_of(problem.rig)}
    wavenumber = 2 * np.pi * spectra.frequency_hz / _fitted_m_s(problem, fitted, side, spectra.frequency_hz)
    way = np.array([one.way.length_m(side, lengths) for one in shot.shot.passages])
    column = laid.projected(-1j * way[:, None] * wavenumber * laid.model)
    weight = (laid.weight * np.abs(column) ** 2).sum(axis=0)
    change = (laid.weight * (column.conj() * laid.residual).real).sum(axis=0) / np.maximum(weight, 1e-300)
    return spectra.frequency_hz, change, weight


def _fitted_m_s(problem: Problem, fitted: Fitted, side: str, frequency_hz: FloatArray) -> FloatArray:
    c, nu, scale = (fitted.values[problem.own(kind, side)] for kind in ("c", "nu", "d"))
    fa_c0 = frequency_hz * float(bar_of(problem.rig, side).radius_m) * (1 + scale) / c
    speed: FloatArray = c / mode_at(fa_c0, nu).slowness
    return speed
