"""Numbers read off the curve inside the span that counts: flow stress, back-extrapolated yield, first slope."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, dot

_YIELD_FIT = (0.03, 0.08)  # true strain between which the back-extrapolated line is fitted


@dataclass(frozen=True, slots=True, kw_only=True)
class FlowStress:
    """True stress at a given strain.

    ``plastic`` says whether ``at_strain`` is true plastic strain (a quasi-static modulus was given)
    or total true strain. ``stress_pa`` is None where the strain lies outside the span that counts.
    """

    at_strain: float
    plastic: bool
    stress_pa: float | None
    rate_per_s: float | None


def plastic_strain(
    true_strain: FloatArray, true_stress_pa: FloatArray, modulus_pa: float | None
) -> FloatArray:
    """True plastic strain e - s/E with the quasi-static modulus E; total true strain without one."""
    return true_strain if modulus_pa is None else true_strain - true_stress_pa / modulus_pa


def flow_stresses(
    true_strain: FloatArray,
    true_stress_pa: FloatArray,
    true_rate_per_s: FloatArray,
    span: tuple[int, int] | None,
    modulus_pa: float | None,
    at_strains: tuple[float, ...],
) -> tuple[FlowStress, ...]:
    """Flow stress and true rate at each strain, by straight lines between samples inside the span."""
    plastic = modulus_pa is not None
    if span is None:
        return tuple(
            FlowStress(at_strain=e, plastic=plastic, stress_pa=None, rate_per_s=None) for e in at_strains
        )
    part = slice(*span)
    axis = plastic_strain(true_strain[part], true_stress_pa[part], modulus_pa)
    # Strain rises with time while loading lasts; the running maximum irons out noise.
    axis = np.maximum.accumulate(axis)

    def at(strain: float) -> FlowStress:
        inside = axis[0] <= strain <= axis[-1]
        return FlowStress(
            at_strain=strain,
            plastic=plastic,
            stress_pa=float(np.interp(strain, axis, true_stress_pa[part])) if inside else None,
            rate_per_s=float(np.interp(strain, axis, true_rate_per_s[part])) if inside else None,
        )

    return tuple(at(strain) for strain in at_strains)


def back_extrapolated_yield_pa(
    true_strain: FloatArray,
    true_stress_pa: FloatArray,
    span: tuple[int, int] | None,
    modulus_pa: float | None,
) -> float | None:
    """Yield stress where a line through 3 to 8 % of true strain meets the quasi-static modulus line.

    None without a modulus or where the span that counts does not hold that range.
    """
    if span is None or modulus_pa is None:
        return None
    strain, stress = true_strain[span[0] : span[1]], true_stress_pa[span[0] : span[1]]
    inside = (strain >= _YIELD_FIT[0]) & (strain <= _YIELD_FIT[1])
    if inside.sum() < 8 or strain[0] > _YIELD_FIT[0] or strain[-1] < _YIELD_FIT[1]:
        return None
    x, y = strain[inside], stress[inside]
    centre = x.mean()
    slope = dot(x - centre, y) / dot(x - centre, x - centre)
    intercept = float(y.mean()) - slope * float(centre)
    if slope >= modulus_pa:
        return None
    # E e = intercept + slope e  =>  s = intercept E/(E - slope)
    return intercept * modulus_pa / (modulus_pa - slope)


def apparent_slope_pa(strain: FloatArray, stress_pa: FloatArray, loading: tuple[int, int]) -> float | None:
    """Slope of the first rise of the curve [Pa], between a fifth and a half of its greatest stress.

    Called apparent because it is not a modulus: the specimen is not yet in equilibrium and the bar faces
    give way (common practice: 10 to 50 % of the modulus of a metal).
    """
    e, s = strain[loading[0] : loading[1]], stress_pa[loading[0] : loading[1]]
    if e.size < 4:
        return None
    top = int(np.argmax(s))
    low = int(np.argmax(s >= 0.2 * s[top]))
    high = int(np.argmax(s >= 0.5 * s[top]))
    if high - low < 2 or e[high] <= e[low]:
        return None
    return float((s[high] - s[low]) / (e[high] - e[low]))
