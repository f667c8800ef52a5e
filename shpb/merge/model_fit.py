"""What a constitutive fit gives: parameters with intervals, what is behind them, and flow curves from them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from shpb.arrays import BoolArray, FloatArray, frozen
from shpb.errors import InputError
from shpb.fitting.derivatives import differences
from shpb.merge.adiabatic import adiabatic_stress_pa
from shpb.merge.models.model import Model
from shpb.merge.points import FlowPoints

_ROOM = 1e-9  # relative, so that the end of a range counts as inside
_SILENT = 1e-6  # part of a gradient along a direction without information that makes its stress unknown
_SAME_RATE, _SAME_K = 1.5, 10.0  # how near tests count as made there


class Standing(StrEnum):
    """How a parameter came by its value."""

    FITTED = "fitted"
    FIXED = "fixed"  # by the user
    HELD = "held"  # the points cannot tell it
    AT_BOUND = "at bound"
    NOT_DETERMINED = "not determined"


@dataclass(frozen=True, slots=True, kw_only=True)
class ParameterEstimate:
    """One parameter of the law.

    Attributes
    ----------
    name, unit, meaning : str
    standing : Standing
    value : float or None
        None where it is not determined.
    u : float or None
        Standard uncertainty; None unless fitted.
    low, high : float or None
        95 % interval (Student) within the range in which the parameter makes sense; None unless fitted.
    reason : str
        Why it is not fitted, or what to mind; empty if there is nothing.
    """

    name: str
    unit: str
    meaning: str
    standing: Standing
    value: float | None
    u: float | None = None
    low: float | None = None
    high: float | None = None
    reason: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class SharedEstimate:
    """What the fit found for a shared scale error: factor 1 + d on the stress of its points.

    ``u`` is its standard uncertainty after the fit, None where ``d`` was stopped near three times its stated one,
    ``prior_u``.
    """

    name: str
    d: float
    u: float | None
    prior_u: float


@dataclass(frozen=True, slots=True, kw_only=True)
class ConditionResidual:
    """How the law meets one condition; relative to the law's stress, measured less law.

    Attributes
    ----------
    condition : int
    label : str
    rate_per_s, temperature_k : float
        Geometric mean rate [1/s], start temperature [K].
    points : int
    mean, rms : float
        With the shared errors as fitted.
    longest_run : int
        Longest row of residuals of one sign.
    left_out_rms : float or None
        Of the prediction by a fit without this condition; None where there cannot be one.
    left_out_reason : str
        Why there is none.
    """

    condition: int
    label: str
    rate_per_s: float
    temperature_k: float
    points: int
    mean: float
    rms: float
    longest_run: int
    left_out_rms: float | None
    left_out_reason: str


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FlowCurve:
    """Stress of the fitted law along plastic strain.

    Attributes
    ----------
    plastic_strain, stress_pa, temperature_k, u_stress_pa : float array, shape (points,)
        ``u_stress_pa`` [Pa] comes from the covariance; infinite where the stress depends on what the data do not tell.
    extrapolated : bool array, shape (points,)
        True outside what was tested.
    reasons : tuple of str
        Why, in words.
    """

    plastic_strain: FloatArray
    stress_pa: FloatArray
    temperature_k: FloatArray
    u_stress_pa: FloatArray
    extrapolated: BoolArray
    reasons: tuple[str, ...]

    def __post_init__(self) -> None:
        for array in (
            self.plastic_strain,
            self.stress_pa,
            self.temperature_k,
            self.u_stress_pa,
            self.extrapolated,
        ):
            frozen(array)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ModelFit:
    """A law fitted to flow points.

    Attributes
    ----------
    model : Model
        With the facts that were stated.
    points : FlowPoints
    estimates : tuple of ParameterEstimate
        In the order of ``model.parameters``.
    parameters : float array, shape (parameters,)
        Numbers that the flow curves use, also where an estimate has no value of its own.
    covariance : float array, shape (parameters, parameters)
        Zero for parameters that were not fitted, infinite on the diagonal for those not determined.
    covariance_inside : float array, shape (parameters, parameters)
        Within the directions that the points determine: for uncertainties of stresses.
    correlation : float array, shape (parameters, parameters)
    silent : float array, shape (directions, parameters)
        Directions in which the parameters can move without a point noticing.
    shared : tuple of SharedEstimate
    chi2 : float
        Sum of squares over the stated uncertainties, own and shared, at these parameters.
    degrees_of_freedom : int
    scatter_factor : float
        Own uncertainties were widened by this, where the points scatter about the law by more than they state
        (Birge ratio, never below 1).
    shared_factor : float
        The covariance was widened by the square of this, where the scale errors come out larger than they state.
    aicc : float or None
        Corrected Akaike information criterion; of laws fitted to the same points the lowest is the best.
    left_out_rms : float or None
        Relative, over all conditions that could be left out and predicted.
    conditions : tuple of ConditionResidual
    stress_pa, temperature_k : float array, shape (points,)
        Law and temperature at the points, without the shared errors.
    condition_number : float
    converged : bool
        The parameters are at the minimum to a hundredth of their uncertainty at least.
    warnings : tuple of str
        What the data cannot tell, and what to mind.
    """

    model: Model
    points: FlowPoints
    estimates: tuple[ParameterEstimate, ...]
    parameters: FloatArray
    covariance: FloatArray
    covariance_inside: FloatArray
    correlation: FloatArray
    silent: FloatArray
    shared: tuple[SharedEstimate, ...]
    chi2: float
    degrees_of_freedom: int
    scatter_factor: float
    shared_factor: float
    aicc: float | None
    left_out_rms: float | None
    conditions: tuple[ConditionResidual, ...]
    stress_pa: FloatArray
    temperature_k: FloatArray
    condition_number: float
    converged: bool
    warnings: tuple[str, ...]

    def __post_init__(self) -> None:
        for array in (self.parameters, self.covariance, self.covariance_inside, self.correlation, self.silent,
                      self.stress_pa, self.temperature_k):  # fmt: skip
            frozen(array)

    def estimate(self, name: str) -> ParameterEstimate:
        """The estimate of a parameter by its name; InputError if the law has none of that name."""
        return self.estimates[self.model.position(name)]

    def flow_curve(
        self, plastic: FloatArray, rate_per_s: float, temperature_k: float, *, adiabatic: bool = False
    ) -> FlowCurve:
        """Flow curve of the law at one rate.

        Parameters
        ----------
        plastic : float array, shape (points,)
            True plastic strain, 0 or more.
        rate_per_s : float
            True rate [1/s].
        temperature_k : float
            Temperature at zero strain [K].
        adiabatic : bool
            Whether the specimen keeps its heat; needs ``points.heat_k_m3_j``.

        Returns
        -------
        FlowCurve

        Raises
        ------
        InputError
            If a number is out of range, or heating is asked for and not known.
        """
        plastic = np.atleast_1d(np.asarray(plastic, dtype=float))
        _check_request(self, plastic, rate_per_s, temperature_k, adiabatic)
        heat = self.points.heat_k_m3_j if adiabatic else None

        def path(parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
            if heat is not None:
                return adiabatic_stress_pa(self.model, parameters, plastic, rate_per_s, temperature_k, heat)
            stress = self.model.stress_pa(parameters, plastic, rate_per_s, temperature_k)
            return stress, np.full_like(plastic, temperature_k)

        stress, temperature = path(self.parameters)
        extrapolated, reasons = _outside(self, plastic, rate_per_s, temperature)
        return FlowCurve(
            plastic_strain=plastic.copy(),
            stress_pa=stress,
            temperature_k=temperature,
            u_stress_pa=_uncertainty(self, lambda p: path(p)[0]),
            extrapolated=extrapolated,
            reasons=reasons,
        )


def _check_request(
    fit: ModelFit, plastic: FloatArray, rate_per_s: float, temperature_k: float, adiabatic: bool
) -> None:
    if plastic.ndim != 1 or not plastic.size or not (np.isfinite(plastic).all() and plastic.min() >= 0):
        raise InputError("plastic strains must be numbers of 0 or more, shape (points,)", where="plastic")
    for name, value in (("rate_per_s", rate_per_s), ("temperature_k", temperature_k)):
        if not (np.isfinite(value) and value > 0):
            raise InputError(f"found {value:g}, expected more than 0", where=name)
    if adiabatic and fit.points.heat_k_m3_j is None:
        raise InputError(
            "an adiabatic curve needs the share of plastic work that becomes heat, density and heat capacity",
            where="flow_curve",
            mend="Give heat_k_m3_j = share/(density * heat capacity) with the points",
        )


def _uncertainty(fit: ModelFit, stress_of: Callable[[FloatArray], FloatArray]) -> FloatArray:
    """Standard uncertainty of stresses from the covariance of the parameters, shape (points,)."""
    model = fit.model
    least = 1e-3 * model.sizes(fit.points)
    slopes = differences(stress_of, fit.parameters, model.lower, model.upper, fine=False, least=least)
    variance = np.einsum("ij,jk,ik->i", slopes, fit.covariance_inside, slopes)
    u = np.sqrt(np.maximum(variance, 0.0))
    if fit.silent.size:
        size = np.sqrt(np.sum((slopes * np.abs(fit.parameters)) ** 2, axis=1))
        along = np.abs(slopes @ fit.silent.T).max(axis=1)
        u = np.where(along > _SILENT * size, np.inf, u)
    return np.asarray(u)


def _outside(
    fit: ModelFit, plastic: FloatArray, rate_per_s: float, temperature_k: FloatArray
) -> tuple[BoolArray, tuple[str, ...]]:
    """Which points of a curve lie outside what was tested, and why."""
    points, reasons = fit.points, []
    tested = points.plastic_strain
    outside = (plastic < tested.min() * (1 - _ROOM)) | (plastic > tested.max() * (1 + _ROOM))
    if outside.any():
        reasons.append(f"plastic strain outside {tested.min():.3g} to {tested.max():.3g}")
    rates = points.rate_per_s
    far = not rates.min() * (1 - _ROOM) <= rate_per_s <= rates.max() * (1 + _ROOM)
    if far:
        reasons.append(f"{rate_per_s:.3g} /s is outside {rates.min():.3g} to {rates.max():.3g} /s")
    low, high = (
        float(points.temperature_k.min()),
        float(max(fit.temperature_k.max(), points.temperature_k.max())),
    )
    hot = (temperature_k < low - _SAME_K) | (temperature_k > high + _SAME_K)
    if hot.any():
        reasons.append(f"temperature outside {low:.0f} to {high:.0f} K")
    lonely = not far and not hot.any() and _in_empty_corner(points, rate_per_s, float(temperature_k[0]))
    if lonely:
        reasons.append(f"no tests surround {rate_per_s:.3g} /s and {temperature_k[0]:.0f} K together")
    return np.asarray(outside | hot | far | lonely), tuple(reasons)


def _in_empty_corner(points: FlowPoints, rate_per_s: float, temperature_k: float) -> bool:
    """True if one of the four quarters around (rate, temperature) holds no condition."""
    rates, starts = points.mean_rates_per_s(), points.start_temperatures_k()
    faster, slower = rates * _SAME_RATE >= rate_per_s, rates <= rate_per_s * _SAME_RATE
    hotter, colder = starts + _SAME_K >= temperature_k, starts - _SAME_K <= temperature_k
    return not all((a & b).any() for a in (faster, slower) for b in (hotter, colder))
