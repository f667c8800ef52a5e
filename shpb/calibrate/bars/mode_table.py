"""The first mode as a smooth table over frequency and Poisson's ratio: a fit asks for it some thousand times."""

from __future__ import annotations

from functools import cache
from typing import Any, NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.wave.pochhammer import first_mode_at_frequency

HIGHEST_FA_C0 = 0.33
POISSON = (0.02, 0.48)
_NODES = 167, 24  # keeps 1/c to 1e-8 of it


class ModeAt(NamedTuple):
    """Shape of the frequencies each."""

    slowness: FloatArray  # c0/c
    group_slowness: FloatArray  # c0/c_g
    by_poisson: FloatArray  # of the slowness


@cache
def _table() -> Any:
    from scipy.interpolate import RectBivariateSpline

    fa_c0, poisson = np.linspace(0.0, HIGHEST_FA_C0, _NODES[0]), np.linspace(*POISSON, _NODES[1])
    slowness = [1 / first_mode_at_frequency(fa_c0, nu).phase_speed for nu in poisson]
    return RectBivariateSpline(fa_c0, poisson, np.transpose(slowness), kx=5, ky=5)


def mode_at(fa_c0: FloatArray, poisson_ratio: float) -> ModeAt:
    """First mode at rising f a/c0 up to 0.33, beyond it that of 0.33; shape (frequencies,)."""
    # A grid of one column: half the time of one point after the other.
    table, x = _table(), np.minimum(fa_c0, HIGHEST_FA_C0)
    slowness = table(x, poisson_ratio)[:, 0]
    # k = w/c0 s(x): d k/d w = (s + x s')/c0.
    by_x, by_poisson = (table(x, poisson_ratio, dx=dx, dy=dy)[:, 0] for dx, dy in ((1, 0), (0, 1)))
    return ModeAt(slowness, slowness + x * by_x, by_poisson)
