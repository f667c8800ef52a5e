"""Rate sensitivity of the flow stress at one plastic strain and temperature."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.fitting.weighted_line import Estimate, Fit, common_covariance, fitted
from shpb.merge.material_curve import RateRange
from shpb.merge.repeats import Repeats

BOLTZMANN_J_K = 1.380649e-23  # exact in the SI since 2019
_SAME_TEMPERATURE_K = 10.0
_DIFFERENT_RATES = 1.05  # rates nearer than this factor are one rate


@dataclass(frozen=True, slots=True, kw_only=True)
class RatePoint:
    """Flow stress at one rate, for a plastic strain that all points share.

    Attributes
    ----------
    rate_per_s, stress_pa : float
        True rate [1/s] and true stress [Pa].
    u_own_pa : float
        Standard uncertainty that this point has alone [Pa].
    shared : mapping of str to float
        Relative standard uncertainty by rig or machine, common to all points that name it.
    temperature_k : float
        Of the test [K].
    range : RateRange
        Quasi-static machine or bar.
    label : str
        Condition or file, for messages.
    """

    rate_per_s: float
    stress_pa: float
    u_own_pa: float
    shared: Mapping[str, float] = field(default_factory=dict)
    temperature_k: float
    range: RateRange
    label: str = ""

    def __post_init__(self) -> None:
        for name in ("rate_per_s", "stress_pa", "u_own_pa", "temperature_k"):
            value = getattr(self, name)
            if not (value > 0 and math.isfinite(value)):
                raise InputError(
                    f"{name} is {value}", where=self.label or "rate point", mend="Give a positive number"
                )
        for group, u in self.shared.items():
            if not 0 <= u < 1:
                raise InputError(
                    f"the relative uncertainty shared by {group} is {u}",
                    where=self.label or "rate point",
                    mend="Give a share below 1",
                )


def rate_point(repeats: Repeats, plastic_strain: float) -> RatePoint | None:
    """The mean of a condition at one plastic strain; None where no repeat is valid there.

    At a strain between grid points the values stand on straight lines, but not across a place where a repeat
    ends, because the mean may jump there.
    """
    grid = repeats.plastic_strain
    right = int(np.searchsorted(grid, plastic_strain * (1 - 1e-12)))
    if right == grid.size or (right == 0 and grid[0] > plastic_strain * (1 + 1e-9)):
        return None
    left = right if math.isclose(grid[right], plastic_strain, rel_tol=1e-9) else right - 1
    if not all(
        any(c.holds(float(grid[i])) and c.holds(plastic_strain) for c in repeats.curves)
        for i in (left, right)
    ):
        return None
    if repeats.count[left] != repeats.count[right]:
        # Only the grid point with the repeats that are valid at the strain itself stands for it.
        now = sum(c.holds(plastic_strain) for c in repeats.curves)
        left = right = left if repeats.count[left] == now else right

    def value(array: FloatArray) -> float:
        if left == right:
            return float(array[left])
        share = (plastic_strain - grid[left]) / (grid[right] - grid[left])
        return float(array[left] + share * (array[right] - array[left]))

    return RatePoint(
        rate_per_s=value(repeats.rate_per_s),
        stress_pa=value(repeats.stress_pa),
        u_own_pa=value(repeats.u_own_pa),
        shared={name: value(u) for name, u in repeats.shared.items()},
        temperature_k=repeats.temperature_k,
        range=repeats.range,
        label=", ".join(c.origin for c in repeats.curves),
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class RateSensitivity:
    """How the flow stress depends on the rate over an interval of rates.

    Attributes
    ----------
    exponent : Estimate
        m = d ln(stress)/d ln(rate). May be negative.
    per_decade_pa : Estimate
        d stress/d log10(rate) [Pa].
    coefficient : Estimate
        C of stress = stress_ref (1 + C ln(rate/rate_ref)), the rate factor of Johnson & Cook.
    reference_rate_per_s : float
        rate_ref, without which C says nothing.
    activation_volume_m3 : Estimate or None
        sqrt(3) k T/(d stress/d ln rate) [m^3]; None where the stress does not rise with rate.
    activation_volume_open : bool
        Whether its interval has no upper end, because no rate dependence at all lies within the uncertainty;
        the upper end is then infinite.
    rates_per_s : (float, float)
        Interval of rates that the points cover.
    temperature_k : float
        Mean temperature of the points [K].
    points : tuple of RatePoint
        What was fitted, by rate.
    chi2, freedom : float, int
        Of the line in ln(stress): chi2 far above freedom says that a line does not describe the points.
    line : Fit
        ln(stress/Pa) = line[0] + line[1] ln(rate).
    """

    exponent: Estimate
    per_decade_pa: Estimate
    coefficient: Estimate
    reference_rate_per_s: float
    activation_volume_m3: Estimate | None
    activation_volume_open: bool
    rates_per_s: tuple[float, float]
    temperature_k: float
    points: tuple[RatePoint, ...]
    chi2: float
    freedom: int
    line: Fit

    def stress_pa(self, rate_per_s: FloatArray) -> FloatArray:
        """Stress of the fitted power law at those rates [Pa], for figures; not beyond ``rates_per_s``."""
        level, slope = self.line.coefficients
        return np.asarray(np.exp(level + slope * np.log(rate_per_s)))


def rate_sensitivity(
    points: Sequence[RatePoint], *, reference_rate_per_s: float | None = None
) -> RateSensitivity:
    """Rate sensitivity in its usual forms, by weighted regression with shared errors as common terms.

    Lines through ln(stress) and through stress over ln(rate) by generalised least squares: points of one rig
    carry one common scale error, so an offset between two machines is not taken for rate sensitivity within
    them, and widens the interval between them. Uncertainties that are too small for the scatter are widened;
    none is narrowed.

    Parameters
    ----------
    points : sequence of RatePoint
        At one plastic strain and one temperature; two different rates at least.
    reference_rate_per_s : float, optional
        For C; the lowest rate if left out.

    Raises
    ------
    InputError
        If there is only one rate, or the temperatures differ by more than 10 K.

    References
    ----------
    J. D. Campbell, Dynamic Plasticity of Metals, 1970 (m, per decade); G. R. Johnson, W. H. Cook, Proc. 7th
    Int. Symp. Ballistics, 1983 (C); U. F. Kocks, A. S. Argon, M. F. Ashby, Prog. Mater. Sci. 19 (1975)
    (activation volume; sqrt(3) is the factor of von Mises between tension and shear). From memory.
    """
    points = tuple(sorted(points, key=lambda p: p.rate_per_s))
    _require_rates(points)
    reference = points[0].rate_per_s if reference_rate_per_s is None else reference_rate_per_s
    if not 0 < reference < math.inf:
        raise InputError(
            f"a reference rate of {reference}", where="rate sensitivity", mend="Give a positive rate"
        )
    log_rate = np.log([p.rate_per_s for p in points])
    stress = np.array([p.stress_pa for p in points])
    design = np.column_stack((np.ones(stress.size), log_rate))
    line = fitted(design, np.log(stress), relative_covariance(points))
    # A common factor times the measured stresses would pull the line to the low ones (R. W. Peelle's puzzle):
    # the smooth stresses of the first line carry it.
    smooth = np.exp(design @ line.coefficients)
    covariance = relative_covariance(points) * np.outer(smooth, smooth)
    at_reference = np.column_stack((np.ones(stress.size), log_rate - math.log(reference)))
    straight = fitted(at_reference, stress, covariance)
    level, slope = straight.coefficients
    if level <= 0:
        raise InputError(
            f"the line gives no positive stress at the reference rate {reference:g} /s",
            where="rate sensitivity",
            mend="Choose a reference rate inside the tested rates",
        )
    c = float(slope / level)
    temperature = float(np.mean([p.temperature_k for p in points]))
    per_ln = straight.estimate(np.array([0.0, 1.0]), float(slope))
    volume, is_open = _activation_volume(per_ln, temperature)
    return RateSensitivity(
        exponent=line.estimate(np.array([0.0, 1.0]), float(line.coefficients[1])),
        per_decade_pa=per_ln.scaled(math.log(10)),
        coefficient=straight.estimate(np.array([-c / level, 1 / level]), c),
        reference_rate_per_s=float(reference),
        activation_volume_m3=volume,
        activation_volume_open=is_open,
        rates_per_s=(points[0].rate_per_s, points[-1].rate_per_s),
        temperature_k=temperature,
        points=points,
        chi2=line.chi2,
        freedom=line.freedom,
        line=line,
    )


def _require_rates(points: tuple[RatePoint, ...]) -> None:
    rates = [p.rate_per_s for p in points]
    if len(points) < 2 or rates[-1] / rates[0] < _DIFFERENT_RATES:
        found = f"only the rate {rates[0]:.3g} /s" if points else "no points"
        raise InputError(
            found, where="rate sensitivity", mend="It takes tests at two rates that differ at least; add some"
        )
    temperatures = [p.temperature_k for p in points]
    if max(temperatures) - min(temperatures) > _SAME_TEMPERATURE_K:
        raise InputError(
            f"temperatures from {min(temperatures):.4g} to {max(temperatures):.4g} K are mixed",
            where="rate sensitivity",
            mend="Take the points of one temperature",
        )


def relative_covariance(points: Sequence[RatePoint]) -> FloatArray:
    """Covariance of ln(stress), shape (points, points)."""
    own = np.array([p.u_own_pa / p.stress_pa for p in points])
    return common_covariance(own, [p.shared for p in points])


def _activation_volume(per_ln_pa: Estimate, temperature_k: float) -> tuple[Estimate | None, bool]:
    """Activation volume from d stress/d ln(rate): the ends of the interval exchange."""
    if per_ln_pa.value <= 0:
        return None, False
    top = math.sqrt(3) * BOLTZMANN_J_K * temperature_k
    low, high = per_ln_pa.interval
    return Estimate(
        value=top / per_ln_pa.value,
        u=top / per_ln_pa.value**2 * per_ln_pa.u,
        interval=(top / high, top / low if low > 0 else math.inf),
        freedom=per_ln_pa.freedom,
    ), low <= 0


@dataclass(frozen=True, slots=True, kw_only=True)
class RangeSensitivities:
    """Rate sensitivity within the quasi-static tests, within the bar shots, and over all.

    Each is None where it cannot be told; ``reasons`` says why, under the same name.
    """

    quasi_static: RateSensitivity | None
    bar: RateSensitivity | None
    all: RateSensitivity | None
    reasons: dict[str, str]


def sensitivities_by_range(
    points: Sequence[RatePoint], *, reference_rate_per_s: float | None = None
) -> RangeSensitivities:
    """Rate sensitivity within and between the ranges; see :func:`rate_sensitivity`."""
    chosen = {
        "quasi_static": [p for p in points if p.range is RateRange.QUASI_STATIC],
        "bar": [p for p in points if p.range is RateRange.BAR],
        "all": list(points),
    }
    found: dict[str, RateSensitivity | None] = {}
    reasons: dict[str, str] = {}
    for name, part in chosen.items():
        try:
            found[name] = rate_sensitivity(part, reference_rate_per_s=reference_rate_per_s)
        except InputError as error:
            found[name] = None
            reasons[name] = error.what
    return RangeSensitivities(**found, reasons=reasons)


@dataclass(frozen=True, slots=True, kw_only=True)
class TwoPointSensitivity:
    """Rate sensitivity between two tests: m, stress per decade [Pa], and C with the first rate as reference."""

    exponent: float
    per_decade_pa: float
    coefficient: float


def two_point_sensitivity(
    rates_per_s: tuple[float, float], stresses_pa: tuple[float, float]
) -> TwoPointSensitivity:
    """Exponent m = ln(s2/s1)/ln(r2/r1), (s2 - s1)/log10(r2/r1), C = (s2/s1 - 1)/ln(r2/r1).

    >>> round(two_point_sensitivity((1e-3, 1e3), (100e6, 120e6)).exponent, 7)
    0.0131969

    Raises
    ------
    InputError
        If a number is not positive, or the rates are equal.
    """
    if not all(0 < v < math.inf for v in (*rates_per_s, *stresses_pa)) or rates_per_s[0] == rates_per_s[1]:
        raise InputError(
            f"rates {rates_per_s} and stresses {stresses_pa}",
            where="two-point sensitivity",
            mend="Give two different positive rates and two positive stresses",
        )
    span = math.log(rates_per_s[1] / rates_per_s[0])
    ratio = stresses_pa[1] / stresses_pa[0]
    return TwoPointSensitivity(
        exponent=math.log(ratio) / span,
        per_decade_pa=(stresses_pa[1] - stresses_pa[0]) / (span / math.log(10)),
        coefficient=(ratio - 1) / span,
    )
