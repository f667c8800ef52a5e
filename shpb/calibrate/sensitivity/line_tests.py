"""Is a calibration line straight, and does it go through the origin?"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.sensitivity.common_terms import REPEATABILITY, Mean, mean_of
from shpb.errors import InputError
from shpb.fitting.weighted_line import Fit, fitted

# Beyond this many standard uncertainties an intercept or a curvature is more than chance; a curvature below the share
# of the strain that gauges are stated to be linear to (common practice) does no harm.
_DOUBT = 2.5
_NO_HARM = 0.002
_ODD = 3.5  # a repeat that far from all others, which agree, is none of them


class OnLine(Protocol):
    """A point: what should be there, and what was measured."""

    @property
    def expected(self) -> float:
        """Abscissa."""

    @property
    def stated(self) -> float:
        """Ordinate."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LineTests:
    """What a line through several points says besides its slope; None where there are too few.

    Attributes
    ----------
    slope, u_slope : float or None
        Of the free line, stated by expected.
    intercept, u_intercept : float or None
        Of the free line [1], three points or more.
    curvature, u_curvature : float or None
        Share by which the highest point lies off a straight line through the origin and the lowest points' slope; four
        points or more.
    residuals : float array, shape (points,)
        Stated less the line through the origin, by the expected value.
    """

    slope: float | None
    u_slope: float | None
    intercept: float | None
    u_intercept: float | None
    curvature: float | None
    u_curvature: float | None
    residuals: FloatArray


def line_tests(points: Sequence[OnLine], u_relative: Sequence[float]) -> LineTests:
    """Test a line by its own points.

    Parameters
    ----------
    points : sequence
        Expected and stated values.
    u_relative : sequence of float
        Relative standard uncertainty that each point has alone.
    """
    x = np.array([point.expected for point in points])
    y = np.array([point.stated for point in points])
    u = np.abs(y) * np.array(u_relative)
    through = float(np.sum(x * y / u**2) / np.sum(x**2 / u**2))
    top = float(np.abs(x).max())
    free = _fit(np.stack([np.ones_like(x), x / top], axis=1), y, u) if x.size > 2 else None
    bent = _fit(np.stack([x / top, (x / top) ** 2], axis=1), y, u) if x.size > 3 else None
    nothing: tuple[float | None, float | None] = (None, None)
    slope = intercept = curvature = nothing
    if free is not None:
        intercept, slope = _value(free, 0), _value(free, 1, top)
    if bent is not None:
        curvature = _value(bent, 1, float(bent.coefficients[0]))
    return LineTests(
        slope=slope[0],
        u_slope=slope[1],
        intercept=intercept[0],
        u_intercept=intercept[1],
        curvature=curvature[0],
        u_curvature=curvature[1],
        residuals=frozen((y - through * x) / x),
    )


def odd_point(values: Sequence[float], u: Sequence[float]) -> tuple[int, float, float] | None:
    """The one repeat without which all others agree, if there is just one such; None where nothing is odd.

    Parameters
    ----------
    values, u : sequence of float
        Repeats of one value, and the standard uncertainty that each has alone.

    Returns
    -------
    (int, float, float) or None
        Its place, how far it lies from the mean of the others (relative), and that in standard uncertainties.
    """
    if len(values) < 3 or not mean_of(values, u).contradicted:
        return None
    alone = []
    for at in range(len(values)):
        rest = mean_of([v for k, v in enumerate(values) if k != at], [s for k, s in enumerate(u) if k != at])
        away, joint = values[at] - rest.value, float(np.hypot(u[at], rest.u))
        if not rest.contradicted and abs(away) > _ODD * joint:
            alone.append((at, away / rest.value, away / joint))
    return alone[0] if len(alone) == 1 else None


def _fit(design: FloatArray, y: FloatArray, u: FloatArray) -> Fit | None:
    try:
        return fitted(design, y, np.diag(u**2))
    except InputError:
        return None  # all points at one place


def _value(fit: Fit, at: int, by: float = 1.0) -> tuple[float, float]:
    return float(fit.coefficients[at] / by), float(np.sqrt(fit.covariance[at, at]) / abs(by))


def findings_of_line(station: str, tests: LineTests, mean: Mean) -> list[CalibrationFinding]:
    """What is not as a line of a good gauge should be."""
    found, words = [], station.replace("_", " ")
    intercept, curvature = tests.intercept, tests.curvature
    if (
        intercept is not None
        and tests.u_intercept is not None
        and abs(intercept) > _DOUBT * tests.u_intercept
    ):
        found.append(
            CalibrationFinding(
                check="intercept of the calibration line",
                measured=f"the line of the {words} misses the origin by {intercept * 1e6:.1f} microstrain, "
                f"u = {tests.u_intercept * 1e6:.1f}",
                limit=f"{_DOUBT:g} u",
                action="Look for a speed reading with a constant error, or a zero that moves with the shot.",
            )
        )
    if curvature is not None and tests.u_curvature is not None:
        significant = abs(curvature) > _DOUBT * tests.u_curvature and abs(curvature) > _NO_HARM
        if significant:
            found.append(
                CalibrationFinding(
                    check="curvature of the calibration line",
                    measured=f"the {words} is not linear: {100 * curvature:+.2f} % at the highest point, "
                    f"u = {100 * tests.u_curvature:.2f} %",
                    limit=f"{_DOUBT:g} u and {100 * _NO_HARM:g} %",
                    action="Check linear_amplifier in the rig file, the scope's and the amplifier's range, and whether "
                    "misalignment grows with speed.",
                )
            )
    if mean.contradicted:
        found.append(
            CalibrationFinding(
                check="scatter about the calibration line",
                measured=f"the shots at the {words} scatter by {100 * mean.scatter / abs(mean.value):.2f} %",
                limit=f"{100 * REPEATABILITY:g} %, the noise and the timing",
                action="Look for the shot that lies off: speed reading, alignment. The slope's u is made larger.",
            )
        )
    return found
