"""Which repeat stands out from the others. It is named, with by how much; nobody is dropped."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.merge.material_curve import MaterialCurve


@dataclass(frozen=True, slots=True, kw_only=True)
class Outlier:
    """A repeat that differs from the others by more than their scatter and the uncertainties explain.

    Attributes
    ----------
    origin : str
        File or shot; empty where there are only two, of which neither can be called the odd one.
    difference : float
        Mean relative difference of its stress from the median of the others, signed.
    largest, at_strain : float
        Greatest relative difference, signed, and the plastic strain where it is.
    ratio : float
        Root mean square of the difference over its standard uncertainty.
    overlap : (float, float)
        Plastic strains over which they were compared.
    """

    origin: str
    difference: float
    largest: float
    at_strain: float
    ratio: float
    overlap: tuple[float, float]
    origins: tuple[str, ...] = ()  # the two that disagree

    def in_words(self) -> str:
        """One sentence for tables and terminals."""
        low, high = self.overlap
        where = f"between plastic strains {low:.3g} and {high:.3g}"
        if not self.origin:
            return (
                f"{' and '.join(self.origins)} disagree by {100 * abs(self.difference):.1f} % on average {where} "
                f"({self.ratio:.1f} standard uncertainties); with two repeats it cannot be said which one is off"
            )
        return (
            f"{self.origin} differs from the other repeats by {100 * self.difference:+.1f} % on average {where} "
            f"(at most {100 * self.largest:+.1f} % at {self.at_strain:.3g}; {self.ratio:.1f} standard uncertainties); "
            "it is in the mean all the same"
        )


def outliers_of(
    curves: tuple[MaterialCurve, ...],
    grid: FloatArray,
    inside: BoolArray,
    stress_pa: FloatArray,
    u_own_pa: FloatArray,
    limit: float,
) -> tuple[Outlier, ...]:
    """Compare every repeat with the median of the others, where at least one other is valid.

    The uncertainty of the difference is made of the repeat's own and, for the others, of their own or their
    scatter, whichever is larger; two that belong to different rigs differ by what each rig shares, too. Of two
    repeats it is only said that they disagree.

    Parameters
    ----------
    curves : tuple of MaterialCurve
        The repeats.
    grid : float array, shape (grid,)
        Plastic strain.
    inside : bool array, shape (curves, grid)
        Where each is valid.
    stress_pa, u_own_pa : float array, shape (curves, grid)
        Stress and its own standard uncertainty [Pa].
    limit : float
        Standard uncertainties by which the difference must stand out.
    """
    if len(curves) < 2:
        return ()
    compared = [_against_others(i, curves, grid, inside, stress_pa, u_own_pa) for i in range(len(curves))]
    if len(curves) == 2:
        first = compared[0]
        if first is None or first.ratio <= limit:
            return ()
        origins = tuple(c.origin for c in curves)
        return (
            Outlier(
                origin="", difference=first.difference, largest=first.largest, at_strain=first.at_strain,
                ratio=first.ratio, overlap=first.overlap, origins=origins,
            ),
        )  # fmt: skip
    return tuple(one for one in compared if one is not None and one.ratio > limit)


def _against_others(
    i: int,
    curves: tuple[MaterialCurve, ...],
    grid: FloatArray,
    inside: BoolArray,
    stress_pa: FloatArray,
    u_own_pa: FloatArray,
) -> Outlier | None:
    others = [j for j in range(len(curves)) if j != i]
    overlap = inside[i] & inside[others].any(axis=0)
    if not overlap.any():
        return None
    held = inside[others][:, overlap]
    values = np.where(held, stress_pa[others][:, overlap], np.nan)
    own = np.where(held, u_own_pa[others][:, overlap], np.nan)
    median = np.nanmedian(values, axis=0)
    count = held.sum(axis=0)
    u_others = np.sqrt(np.nanmean(own**2, axis=0))
    scatter = np.sqrt(
        np.nansum((values - np.nanmean(values, axis=0)) ** 2, axis=0) / np.maximum(count - 1, 1)
    )
    u_others = np.maximum(u_others, scatter)
    between = _between_groups(curves, i, others) * median
    u = np.sqrt(u_own_pa[i, overlap] ** 2 + u_others**2 / count + between**2)
    difference = stress_pa[i, overlap] - median
    share = difference / median
    worst = int(np.argmax(np.abs(share)))
    strain = grid[overlap]
    return Outlier(
        origin=curves[i].origin,
        difference=float(share.mean()),
        largest=float(share[worst]),
        at_strain=float(strain[worst]),
        ratio=float(np.sqrt(np.mean((difference / u) ** 2))),
        overlap=(float(strain[0]), float(strain[-1])),
    )


def _between_groups(curves: tuple[MaterialCurve, ...], i: int, others: list[int]) -> float:
    """Relative uncertainty of the difference that comes from errors which only one side shares."""
    weights: dict[str, float] = {}
    for j in others:
        if curves[j].u_shared:
            group = curves[j].shared_group
            weights[group] = weights.get(group, 0.0) - curves[j].u_shared / len(others)
    if curves[i].u_shared:
        group = curves[i].shared_group
        weights[group] = weights.get(group, 0.0) + curves[i].u_shared
    return math.sqrt(sum(weight**2 for weight in weights.values()))
