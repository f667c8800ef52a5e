"""Stations of one bar: the linear operator from their strains to both waves, by least squares, and what each gives.

The formulas stand in :mod:`shpb.wave.separation`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from shpb.arrays import ComplexArray, FloatArray, frozen
from shpb.wave.laplace import LaplaceGrid

# Periods of the highest whole frequency over which the cut end of a record rings back.
_RINGING = 10.0


class Waves(NamedTuple):
    """One number or array for each of the two waves."""

    right: FloatArray
    left: FloatArray


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Operator:
    """The least-squares operator from stations to both waves at one place: linear, and the same at all times.

    Attributes
    ----------
    grid : LaplaceGrid
    right, left : complex array, shape (stations, bins)
        Share of each station's transform in the wave.
    """

    grid: LaplaceGrid
    right: ComplexArray
    left: ComplexArray

    def kernels(self, gain: FloatArray, ahead: int = 0) -> Waves:
        """Response of each wave to a unit sample at each station, shape (stations, ahead + samples).

        ``gain`` is that of a low-pass at the grid's frequencies; the first ``ahead`` samples are before the impulse.
        """
        return Waves(*(self.grid.back(side * gain, ahead) for side in (self.right, self.left)))


def least_squares_operator(
    positions_m: ArrayLike, xi_per_m: ComplexArray, noise: ArrayLike, grid: LaplaceGrid, place_m: float = 0.0
) -> Operator:
    """Return the operator for stations at ``positions_m`` and waves at ``place_m``.

    Written with the 2 x 2 minors of the normal equations (Cauchy and Binet), so that nothing cancels where the
    stations hardly differ.
    """
    x = np.asarray(positions_m, dtype=np.float64)[:, None] - place_m
    weight = (1.0 / np.asarray(noise, dtype=np.float64) ** 2)[:, None]
    right, left = np.exp(-xi_per_m * x), np.exp(xi_per_m * x)
    # minor[j, k] = right_j left_k - left_j right_k
    minor = 2 * np.sinh(xi_per_m * (x[None, :] - x[:, None]))
    pairs = weight[None, :] * weight[:, None]
    total = 0.5 * (pairs * np.abs(minor) ** 2).sum(axis=(0, 1))
    to_right = (pairs * np.conj(minor) * left[None, :]).sum(axis=1) / total
    to_left = (pairs * np.conj(-minor) * right[None, :]).sum(axis=1) / total
    return Operator(grid=grid, right=to_right, left=to_left)


@dataclass(frozen=True, slots=True, eq=False)
class Stations:
    """Where the stations stand on their bar, and how its waves travel.

    Attributes
    ----------
    x_m, noise : float array, shape (stations,)
    xi_per_m : complex array, shape (bins,)
    grid : LaplaceGrid
    """

    x_m: FloatArray
    xi_per_m: ComplexArray
    noise: FloatArray
    grid: LaplaceGrid

    @property
    def felt_samples(self) -> int:
        """Samples over which the cut end of a record is felt: its ringing, and one transit where weights look ahead."""
        grid = self.grid
        seconds = _RINGING / grid.stop_hz
        if self.x_m.size > 2:
            slowness = float(self.xi_per_m[0].real) / grid.decay_per_s
            seconds += slowness * float(np.ptp(self.x_m))
        return int(np.ceil(seconds / grid.interval_s))

    def operator(self, place_m: float) -> Operator:
        """The least-squares operator for waves at a place."""
        return least_squares_operator(self.x_m, self.xi_per_m, self.noise, self.grid, place_m)

    def contributions(self, strains: FloatArray, operator: Operator, place_m: float) -> Waves:
        """What each station's strain gives to each wave at a place, shape (stations, samples) each.

        Two stations look back only, so that the end of the record is felt nowhere before it. The weights that more
        stations get by frequency look ahead too; a record that simply stopped would be felt for half a millisecond
        before its end. So the outer two stations go first, as far as they know both waves, and least squares only
        shares out what all stations show beside these: noise.
        """
        found = [self.of_one(row, k, operator, place_m) for k, row in enumerate(strains)]
        return Waves(*(frozen(np.stack(rows)) for rows in zip(*found, strict=True)))

    def of_one(self, strain: FloatArray, k: int, operator: Operator, place_m: float) -> Waves:
        """The waves at a place, if station ``k`` alone saw any strain: what it gives to them, shape (samples,) each."""
        grid, fade, xi = self.grid, self.grid.fade, self.xi_per_m
        if self.x_m.size == 2:
            seen = grid.transform(strain) * fade
            return Waves(grid.back(seen * operator.right[k]), grid.back(seen * operator.left[k]))
        first, last = int(np.argmin(self.x_m)), int(np.argmax(self.x_m))
        outer = [first, last]
        share = np.zeros((2, 1))
        if k in outer:
            share[outer.index(k)] = 1.0
        # The wave to the right is known at the first station, that to the left at the last, up to the record's end.
        spectrum = grid.transform(strain) * fade
        at_first, at_last = (
            least_squares_operator(self.x_m[outer], xi, self.noise[outer], grid, float(self.x_m[at]))
            for at in outer
        )
        right = grid.transform(grid.back((share * at_first.right).sum(axis=0) * spectrum))
        left = grid.transform(grid.back((share * at_last.left).sum(axis=0) * spectrum))
        to_right = right * self._away(self.x_m - self.x_m[first], -1)
        to_left = left * self._away(self.x_m - self.x_m[last], 1)
        beside = -grid.back(to_right + to_left)
        beside[k] += strain
        rest = grid.transform(beside)
        way_right, way_left = (
            self._away(np.array([place_m - self.x_m[at]]), s) for at, s in ((first, -1), (last, 1))
        )
        return Waves(
            grid.back((right * way_right)[0] + (rest * operator.right).sum(axis=0) * fade),
            grid.back((left * way_left)[0] + (rest * operator.left).sum(axis=0) * fade),
        )

    def _away(self, distance_m: FloatArray, sign: int) -> ComplexArray:
        """Factor of a wave at a distance to the right, shape (distances, bins)."""
        factor: ComplexArray = np.exp(sign * self.xi_per_m * distance_m[:, None])
        return factor
