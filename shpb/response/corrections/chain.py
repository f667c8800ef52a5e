"""The corrections of one shot in their order: what each would change, and the curves after those that are applied."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.response.bar_analysis import Curve, FaceMotion, curve_from
from shpb.response.corrections.correction import Curves, Loading, Off, Report
from shpb.response.corrections.friction import friction
from shpb.response.corrections.heating import heating
from shpb.response.corrections.indentation import indentation
from shpb.response.corrections.inertia import inertia
from shpb.response.corrections.rig_side import bar_mismatch, bar_temperature, gauge_rise
from shpb.rig.gauge import TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings
from shpb.wave.faces import FacePulses

# Strain first, because radius and length follow from it; then what inertia and friction have added to the stress;
# heat last, because it is made by the specimen's own stress.
_ON_THE_CURVES: tuple[Callable[[Loading], Report], ...] = (indentation, inertia, friction, heating)


def correct(
    faces: FacePulses,
    motion: FaceMotion,
    curves: Curves,
    rig: Rig,
    sheet: ShotSheet,
    loading: tuple[int, int],
    settings: Settings,
) -> tuple[Curves, tuple[Report, ...]]:
    """Work out every correction, and apply those that the settings switch on and that hold for this shot.

    Returns
    -------
    Curves
        After the corrections that are applied.
    tuple of Report
        What each did, or would have done.
    """
    shot = Loading.of(faces, motion, curves, rig, sheet, loading)

    def asked(report: Report) -> Report:
        return replace(
            report,
            switched_on=settings.switched_on(report.correction),
            thinned_time_s=shot.time_s,
            time_s=faces.time_s,
        )

    reports = [asked(one) for one in (gauge_rise(rig, faces), bar_temperature(shot), bar_mismatch(shot))]
    for step in _ON_THE_CURVES:
        report = asked(step(shot))
        reports.append(report)
        if report.applied:
            curves = taken_off(curves, report.off, faces.interval_s, sheet.kind)
            shot = Loading.of(faces, motion, curves, rig, sheet, loading)
    for report in reports:
        for array in (*report.thinned, report.rise_k):
            if isinstance(array, np.ndarray):
                frozen(array)
    return curves, tuple(reports)


def taken_off(curves: Curves, off: Off, interval_s: float, kind: TestKind) -> Curves:
    """The three curves less a correction."""
    stresses = (off.stress_1w_pa, off.stress_2w_pa, off.stress_3w_pa)
    rate = np.gradient(off.strain, interval_s) if isinstance(off.strain, np.ndarray) else 0.0

    def less(curve: Curve, stress: FloatArray | float) -> Curve:
        return curve_from(
            curve.strain_rate_per_s - rate, curve.strain - off.strain, curve.stress_pa - stress, kind
        )

    return Curves(*(less(curve, stress) for curve, stress in zip(curves, stresses, strict=True)))
