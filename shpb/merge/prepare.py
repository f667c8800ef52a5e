"""From a quasi-static test to a curve of the material: compliance, toe, true stress, true plastic strain."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.merge.machine import pooled_rising, slope_corrected, specimen_displacement_m
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.merge.quasistatic import QuasistaticTest
from shpb.merge.toe import LinearPart, linear_part, without_toe
from shpb.response.flow import plastic_strain
from shpb.rig.gauge import TestKind

_UNNAMED_MACHINE = "quasi-static machine"
# A slope beyond these shares of the modulus is no elastic slope of this material, whatever the machine.
_SLOPE_SHARES = (0.02, 2.0)
_SLOPE_TELLS = 0.10  # a slope this far from the modulus is worth a remark
_RATE_WINDOW = 0.02  # of plastic strain, over which the rate is read off the times
_RATE_POINTS = 60
_RATES_AGREE = 2.0  # factor


@dataclass(frozen=True, slots=True, kw_only=True)
class CurveSettings:
    """How a quasi-static test becomes a curve of the material.

    Attributes
    ----------
    toe : bool
        Whether strain is counted from where the straight part begins (kept as measured where there is none).
    least_plastic_strain : float
        Start of the valid span: below it the curve hangs on the modulus and on the toe.
    assumed_u, assumed_u_shared : float
        Relative standard uncertainties of stress where the test states none: its own (area, reading) and the
        machine's (load cell). Common practice for a machine of class 1 and a micrometer.
    """

    toe: bool = True
    least_plastic_strain: float = 5e-4
    assumed_u: float = 0.007
    assumed_u_shared: float = 0.006

    def __post_init__(self) -> None:
        for name, top in (("least_plastic_strain", 0.1), ("assumed_u", 0.5)):
            if not 0 < getattr(self, name) < top:
                raise InputError(
                    f"found {getattr(self, name)}", where=f"settings.{name}", mend=f"Give 0 to {top:g}"
                )
        if not 0 <= self.assumed_u_shared < 0.5:
            raise InputError(
                f"found {self.assumed_u_shared}", where="settings.assumed_u_shared", mend="Give 0 to 0.5"
            )


DEFAULT = CurveSettings()


class EngineeringCurve(NamedTuple):
    """A test with compliance and toe taken out; arrays of shape (samples,)."""

    strain: FloatArray
    stress_pa: FloatArray
    linear: LinearPart | None
    remarks: tuple[str, ...]


def engineering_curve(test: QuasistaticTest, settings: CurveSettings = DEFAULT) -> EngineeringCurve:
    """Engineering strain of the specimen alone, from the zero of its straight part, and stress [Pa].

    This is the curve for offset yield and the like.

    Raises
    ------
    InputError
        If the table holds plastic strain, the slope is to be corrected and there is none, or the elastic
        slope cannot belong to the stated modulus: then a unit, the area or the modulus is wrong.
    """
    if test.plastic:
        raise InputError(
            "the table holds true plastic strain, not the whole curve",
            where=test.origin,
            mend="Give the table with total strain",
        )
    strain, stress = test.strain, test.stress_pa
    remarks: list[str] = []
    if test.compliance is not None:
        strain = _without_machine(test)
        remarks.append(f"compliance of the machine taken out ({test.compliance.origin})")
    try:
        linear: LinearPart | None = linear_part(strain, stress)
    except InputError as error:
        linear = None
        if test.slope_correction:
            raise InputError(error.what, where=test.origin, mend="The slope cannot be corrected") from None
        if settings.toe:
            remarks.append(f"no toe correction: {error.what}; strain is counted as the table has it")
    if linear is None:
        return EngineeringCurve(strain, stress, None, tuple(remarks))
    modulus = test.young_modulus_pa
    if modulus is not None:
        _require_elastic(linear, float(modulus), test)
    if test.slope_correction and modulus is not None:
        strain = slope_corrected(strain, stress, linear.slope_pa, float(modulus))
        remarks.append(f"elastic slope corrected to {modulus / 1e9:.4g} GPa: {linear.in_words()}")
    elif modulus is not None and abs(linear.slope_pa / modulus - 1) > _SLOPE_TELLS:
        left = float(stress.max()) * abs(1 / linear.slope_pa - 1 / modulus)
        remarks.append(
            f"the elastic slope is {100 * linear.slope_pa / modulus:.0f} % of the modulus ({linear.in_words()}): "
            f"up to {100 * left:.2g} % of strain is not the specimen's; measure the compliance or correct the slope"
        )
    if settings.toe:
        strain = without_toe(strain, linear)
        remarks.append(
            f"strain counted from {linear.zero_strain:.3g} (u {linear.u_zero_strain:.1g}), where the straight "
            f"part begins: {linear.in_words()}"
        )
    return EngineeringCurve(strain, stress, linear, tuple(remarks))


def from_quasistatic(test: QuasistaticTest, settings: CurveSettings = DEFAULT) -> MaterialCurve:
    """Curve of the material from a quasi-static test.

    Compliance and toe are taken out (:func:`engineering_curve`); true strain and stress follow at constant
    volume (compression e_t = -ln(1 - e), s_t = s (1 - e); tension with +, up to the greatest force), and plastic
    strain with the true modulus, e_p = e_t - s_t/E. Where noise makes plastic strain step back, neighbours are
    averaged until it rises. The test counts as isothermal.

    Parameters
    ----------
    test : QuasistaticTest
        As :func:`shpb.merge.quasistatic.read_quasistatic` gives it.
    settings : CurveSettings
        The defaults serve a metal.

    Raises
    ------
    InputError
        If the modulus is missing, the units cannot be right, times and stated rate disagree, or nothing of the
        curve is plastic.
    """
    if test.plastic:
        plastic, stress, order, total = test.strain, test.stress_pa, np.arange(test.strain.size), test.strain
        remarks = ["plastic strain as the table has it"]
    else:
        plastic, stress, order, total, remarks = _plastic(test, settings)
    rate, said = _rate(test, order, total, plastic)
    rising, pooled, rates = _rising(plastic, stress, rate)
    low = max(settings.least_plastic_strain, float(rising[0])) if rising.size else 0.0
    if rising.size < 2 or low >= rising[-1]:
        raise InputError(
            f"plastic strain ends at {float(rising[-1]) if rising.size else 0.0:.3g}, before the curve counts",
            where=test.origin,
            mend="Strain the specimen further, or check modulus, strain and units",
        )
    own, shared, group, assumed = _uncertainty(test, settings)
    return MaterialCurve(
        plastic_strain=rising,
        stress_pa=pooled,
        rate_per_s=rates,
        temperature_k=float(test.temperature_k),
        u_own_pa=own * pooled,
        u_shared=shared,
        shared_group=group,
        span=(low, float(rising[-1])),
        range=RateRange.QUASI_STATIC,
        material=test.material,
        kind=test.kind,
        origin=test.origin,
        sha256=test.sha256,
        sources=test.sources,
        remarks=(*test.remarks, *remarks, *said, *assumed),
    )


def _without_machine(test: QuasistaticTest) -> FloatArray:
    if test.gauge_length_m is None or test.area_m2 is None or test.compliance is None:
        raise InputError(
            "a compliance without gauge length and area",
            where=test.origin,
            mend="State gauge_length_mm and diameter_mm or area_mm2",
        )
    length = float(test.gauge_length_m)
    force = test.stress_pa * float(test.area_m2)
    return specimen_displacement_m(test.strain * length, force, test.compliance) / length


def _require_elastic(linear: LinearPart, modulus_pa: float, test: QuasistaticTest) -> None:
    share = linear.slope_pa / modulus_pa
    low, high = _SLOPE_SHARES
    if not low <= share <= high:
        raise InputError(
            f"the elastic slope is {linear.slope_pa / 1e9:.3g} GPa where the modulus is {modulus_pa / 1e9:.4g} GPa",
            where=test.origin,
            mend="Check the units of strain and stress (a strain in per cent is named _percent), the area and the "
            "modulus",
        )


def _plastic(
    test: QuasistaticTest, settings: CurveSettings
) -> tuple[FloatArray, FloatArray, np.ndarray, FloatArray, list[str]]:
    """Plastic strain and true stress of the part of the test that counts, its samples, and its total strain."""
    modulus = test.young_modulus_pa
    if modulus is None:
        raise InputError(
            "plastic strain needs the Young's modulus, and none is stated",
            where=f"{test.origin}, young_modulus_GPa",
            mend="Add it: the true modulus at this temperature, not the slope of this curve",
        )
    curve = engineering_curve(test, settings)
    remarks = list(curve.remarks)
    first, last = 0, int(np.argmax(curve.strain)) + 1
    if test.kind is TestKind.TENSION:
        top = int(np.argmax(curve.stress_pa)) + 1
        if top < last:
            remarks.append(
                f"cut at the greatest force (strain {curve.strain[top - 1]:.3g}): beyond it the bar necks"
            )
            last = top
    if curve.linear is not None:
        first = curve.linear.last - 1  # below it there is nothing plastic to tell from noise
    strain, stress = curve.strain[first:last], curve.stress_pa[first:last]
    if np.abs(strain).max() >= 1 and (test.kind is TestKind.COMPRESSION or strain.min() <= -1):
        raise InputError(
            f"with compliance and toe taken off, engineering strain runs from {strain.min():.4g} to "
            f"{strain.max():.4g}: that cannot be",
            where=test.origin,
            mend="Check gauge length, compliance and the first readings of the table",
        )
    if test.kind is TestKind.COMPRESSION:
        true_strain, true_stress = -np.log1p(-strain), stress * (1 - strain)
    else:
        true_strain, true_stress = np.log1p(strain), stress * (1 + strain)
    plastic = plastic_strain(true_strain, true_stress, float(modulus))
    return plastic, true_stress, np.arange(first, last), true_strain, remarks


def _rising(
    plastic: FloatArray, stress_pa: FloatArray, rate: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Strictly rising plastic strain from 0 on, with stress and rate averaged alike."""
    weight = np.ones(plastic.size)
    stress, rising = pooled_rising(stress_pa, plastic, weight)
    rates, _ = pooled_rising(rate, plastic, weight)
    counts = (rising >= 0) & (stress > 0)
    return rising[counts], stress[counts], rates[counts]


def _rate(
    test: QuasistaticTest, order: np.ndarray, total: FloatArray, plastic: FloatArray
) -> tuple[FloatArray, list[str]]:
    """True strain rate at the samples that count: from the times if there are any, else as stated."""
    stated = None if test.rate_per_s is None else float(test.rate_per_s)
    if test.time_s is None:
        if stated is None:
            raise InputError(
                "no strain rate and no times", where=test.origin, mend="State rate_per_s above the table"
            )
        if not test.rate_is_engineering:
            return np.full(order.size, stated), []
        sign = 1.0 if test.kind is TestKind.COMPRESSION else -1.0
        return stated * np.exp(sign * total), ["true rate from a constant engineering rate"]
    rate = _rate_of_times(test.time_s[order], total, plastic)
    middle = float(np.median(rate))
    if middle <= 0:
        raise InputError(
            "the strain does not grow with time", where=test.origin, mend="Check the column of times"
        )
    if stated is not None and not 1 / _RATES_AGREE < middle / stated < _RATES_AGREE:
        raise InputError(
            f"the times give {middle:.3g} /s, but {stated:.3g} /s is stated",
            where=f"{test.origin}, rate_per_s",
            mend="Correct the rate or the unit of time, or call the column note_time",
        )
    return np.maximum(rate, 1e-3 * middle), ["true rate from the column of times"]


def _rate_of_times(time_s: FloatArray, total: FloatArray, plastic: FloatArray) -> FloatArray:
    """Slope of strain over time in windows of plastic strain, between which straight lines stand."""
    centres = np.linspace(plastic[0], plastic[-1], _RATE_POINTS)
    half = min(_RATE_WINDOW, float(np.ptp(plastic)) / 4) / 2
    rates = np.empty(centres.size)
    for i, centre in enumerate(centres):
        near = np.abs(plastic - centre) <= half
        if near.sum() < 3:
            near = np.zeros(plastic.size, dtype=bool)
            near[np.argsort(np.abs(plastic - centre), kind="stable")[:5]] = True
        t = time_s[near] - time_s[near].mean()
        rates[i] = float((t * total[near]).sum() / (t * t).sum())
    return np.interp(plastic, centres, rates)


def _uncertainty(test: QuasistaticTest, settings: CurveSettings) -> tuple[float, float, str, list[str]]:
    said: list[str] = []
    own, shared = test.stress_u, test.stress_u_shared
    if own is None:
        own = settings.assumed_u
        said.append(f"the test's own uncertainty of stress is assumed: {100 * own:g} %")
    if shared is None:
        shared = settings.assumed_u_shared
        said.append(f"the machine's uncertainty of stress is assumed: {100 * shared:g} %")
    if shared > 0 and not test.machine:
        said.append("the machine is not named: all such tests are taken to share its error")
    group = (test.machine or _UNNAMED_MACHINE) if shared > 0 else ""
    if not math.isfinite(own):
        raise InputError(
            f"the standard uncertainty of its stress is {own}",
            where=test.origin,
            mend="Give stress_u_percent",
        )
    return own, shared, group, said
