"""Offset yield strength of every quasi-static test of a merge, or why it has none."""

from __future__ import annotations

from dataclasses import dataclass

from shpb.errors import InputError
from shpb.merge.offset import offset_yield
from shpb.merge.prepare import engineering_curve
from shpb.merge.quasistatic import QuasistaticTest
from shpb.merge.settings import MergeSettings


@dataclass(frozen=True, slots=True, kw_only=True)
class OffsetStrength:
    """Offset yield strength of one test.

    Attributes
    ----------
    origin : str
        Name of the test's table.
    offset : float
        Plastic engineering strain of the construction.
    stress_pa : float or None
        Engineering stress at the crossing [Pa]; None where there is none.
    slope_from : str
        Whether the line has the stated modulus or the slope of the curve.
    why : str
        Why there is none.
    """

    origin: str
    offset: float
    stress_pa: float | None
    slope_from: str = ""
    why: str = ""


def offset_strength(test: QuasistaticTest, settings: MergeSettings) -> OffsetStrength:
    """Offset yield of a test, compliance and toe taken out; with the stated modulus where there is one."""
    try:
        curve = engineering_curve(test, settings.curves)
        modulus = test.young_modulus_pa
        fitted = None if curve.linear is None else curve.linear.slope_pa
        found = offset_yield(
            curve.strain,
            curve.stress_pa,
            settings.offset,
            modulus_pa=None if modulus is None else float(modulus),
            fitted_slope_pa=fitted,
        )
    except InputError as error:
        return OffsetStrength(origin=test.origin, offset=settings.offset, stress_pa=None, why=error.what)
    return OffsetStrength(
        origin=test.origin, offset=settings.offset, stress_pa=found.stress_pa, slope_from=found.slope_from
    )
