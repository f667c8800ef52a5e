"""Numbers that tensile and compression standards read off a curve: offset yield, strain-hardening exponent."""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from shpb.arrays import FloatArray, require_finite
from shpb.errors import InputError


@dataclass(frozen=True, slots=True, kw_only=True)
class OffsetYield:
    """Stress at which the curve meets the line of the elastic slope, moved by the offset.

    Attributes
    ----------
    offset : float
        Plastic strain of the construction; 0.002 gives R_p0.2.
    stress_pa, strain : float
        Where the curve crosses the line [Pa], [1].
    slope_pa : float
        Slope of the line [Pa].
    slope_from : str
        "given modulus" or "fitted slope": the two differ where something else gave way too.
    """

    offset: float
    stress_pa: float
    strain: float
    slope_pa: float
    slope_from: str


def offset_yield(
    strain: FloatArray,
    stress_pa: FloatArray,
    offset: float = 0.002,
    *,
    modulus_pa: float | None = None,
    fitted_slope_pa: float | None = None,
    zero_strain: float = 0.0,
) -> OffsetYield:
    """Offset yield strength after the standard construction, at any offset.

    A line of slope m_E through (offset, 0); the first crossing of the curve with it, by straight lines
    between the readings (ISO 6892-1 proof strength, plastic extension; ASTM E8/E8M, ASTM E9; from memory).

    Parameters
    ----------
    strain, stress_pa : float array, shape (samples,)
        Engineering strain and stress [Pa], loading positive, in the order of the test.
    offset : float
        Plastic strain, above 0; 0.002 is usual.
    modulus_pa, fitted_slope_pa : float, optional
        Slope of the line [Pa]: the true modulus if it is given, else the slope fitted to this curve. With
        the latter, compliance that is left in the curve does not shift the crossing by much; with the
        former it does.
    zero_strain : float
        Strain at which the elastic line has no stress (the toe).

    Raises
    ------
    InputError
        If no slope is given, the offset is not positive, or the curve never crosses the line: it ends too
        early.
    """
    _require_curve(strain, stress_pa)
    slope = modulus_pa if modulus_pa is not None else fitted_slope_pa
    if slope is None or not 0 < slope < math.inf:
        raise InputError(
            "no slope for the line" if slope is None else f"a slope of {slope:g} Pa",
            where="offset yield",
            mend="Give the Young's modulus, or find the straight part of the curve first",
        )
    if not 0 < offset < 0.5:
        raise InputError(
            f"an offset of {offset:g}", where="offset yield", mend="Give a fraction; 0.002 is 0.2 %"
        )
    above = stress_pa - slope * (strain - zero_strain - offset)
    # Before the offset the line is below zero stress; a foot of noise there is no crossing.
    crossed = np.flatnonzero((above[:-1] > 0) & (above[1:] <= 0) & (strain[1:] > zero_strain + offset))
    if not crossed.size:
        raise InputError(
            f"the curve never meets the line moved by a strain of {offset:g}",
            where="offset yield",
            mend="Choose a smaller offset, or check modulus and strain: the curve may end before it",
        )
    i = int(crossed[0])
    share = float(above[i] / (above[i] - above[i + 1]))
    return OffsetYield(
        offset=offset,
        stress_pa=float(stress_pa[i] + share * (stress_pa[i + 1] - stress_pa[i])),
        strain=float(strain[i] + share * (strain[i + 1] - strain[i])),
        slope_pa=float(slope),
        slope_from="given modulus" if modulus_pa is not None else "fitted slope",
    )


class HardeningStrain(StrEnum):
    """Which true strain stands on the axis of the regression."""

    PLASTIC = "true plastic strain"
    TOTAL = "true strain"


@dataclass(frozen=True, slots=True, kw_only=True)
class HardeningExponent:
    """Strain-hardening exponent n and strength coefficient of stress = K strain^n.

    Attributes
    ----------
    n, u_n : float
        Exponent, and its standard uncertainty from the scatter about the line.
    n_interval : (float, float)
        95 % interval (Student).
    coefficient_pa : float
        K: stress that the law has at strain 1 [Pa].
    strain_range : (float, float)
        Strains between which it was fitted.
    against : HardeningStrain
        Which strain.
    points : int
        Readings used.
    """

    n: float
    u_n: float
    n_interval: tuple[float, float]
    coefficient_pa: float
    strain_range: tuple[float, float]
    against: HardeningStrain
    points: int


def hardening_exponent(
    true_strain: FloatArray,
    true_stress_pa: FloatArray,
    strain_range: tuple[float, float],
    *,
    modulus_pa: float | None = None,
) -> HardeningExponent:
    """Exponent n by the line of ln(true stress) over ln(true strain) between two strains.

    The regression of ISO 10275 and ASTM E646 (from memory): stress on strain, every reading in the range
    with the same weight. Against true plastic strain e - s/E where a modulus is given, against true total
    strain otherwise; both are in use, so the result says which.

    Parameters
    ----------
    true_strain, true_stress_pa : float array, shape (samples,)
        True total strain and true stress [Pa].
    strain_range : (float, float)
        Between which strains, of the kind that stands on the axis; both above 0.
    modulus_pa : float, optional
        Young's modulus [Pa].

    Raises
    ------
    InputError
        If the range is empty or holds fewer than five readings, or a stress in it is not positive.
    """
    _require_curve(true_strain, true_stress_pa)
    low, high = strain_range
    if not 0 < low < high:
        raise InputError(
            f"strains from {low:g} to {high:g}",
            where="hardening exponent",
            mend="Give two rising strains above 0",
        )
    axis = true_strain if modulus_pa is None else true_strain - true_stress_pa / modulus_pa
    inside = (axis >= low) & (axis <= high)
    if inside.sum() < 5:
        raise InputError(
            f"{int(inside.sum())} readings between strains {low:g} and {high:g}",
            where="hardening exponent",
            mend=f"Choose a range inside the curve ({axis.min():.3g} to {axis.max():.3g}) with at least five",
        )
    if true_stress_pa[inside].min() <= 0:
        raise InputError(
            "a stress that is not positive", where="hardening exponent", mend="Choose a range above yield"
        )
    x, y = np.log(axis[inside]), np.log(true_stress_pa[inside])
    spread = x - x.mean()
    n = float((spread * y).sum() / (spread**2).sum())
    rest = y - y.mean() - n * spread
    freedom = x.size - 2
    u_n = math.sqrt(float((rest**2).sum()) / freedom / float((spread**2).sum()))
    from scipy.special import stdtrit

    half = float(stdtrit(freedom, 0.975)) * u_n
    return HardeningExponent(
        n=n,
        u_n=u_n,
        n_interval=(n - half, n + half),
        coefficient_pa=math.exp(float(y.mean()) - n * float(x.mean())),
        strain_range=(low, high),
        against=HardeningStrain.TOTAL if modulus_pa is None else HardeningStrain.PLASTIC,
        points=int(inside.sum()),
    )


def _require_curve(strain: FloatArray, stress_pa: FloatArray) -> None:
    if strain.ndim != 1 or strain.shape != stress_pa.shape or strain.size < 2:
        raise InputError(
            f"strain of shape {strain.shape}, stress of shape {stress_pa.shape}",
            where="curve",
            mend="Give two arrays of the same length, at least two readings",
        )
    for name, array in (("strain", strain), ("stress", stress_pa)):
        require_finite(array, where=name, mend="Cut the curve before that sample")
