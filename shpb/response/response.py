"""Response of the specimen: the stage that turns pulses at the faces into curves and what is read off them."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.errors import InputError
from shpb.pulse.pulse import Pulses
from shpb.response.balance import Balance, work_balance
from shpb.response.bar_analysis import Curve, FaceMotion, face_motion, one_wave, three_wave, two_wave
from shpb.response.corrections.chain import correct
from shpb.response.corrections.correction import Curves, Report
from shpb.response.equilibrium import Equilibrium, force_uncertainties, judge_equilibrium
from shpb.response.flow import FlowStress, apparent_slope_pa, back_extrapolated_yield_pa, flow_stresses
from shpb.response.span import RateSummary, loading_span, rate_summary
from shpb.rig.gauge import TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Analysis, Correction, Settings
from shpb.wave.faces import FacePulses


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Response:
    """What the specimen did; arrays of shape (samples,) on ``time_s``.

    Attributes
    ----------
    time_s : float array
        Time since the loading front reached the incident face [s].
    motion : FaceMotion
        Forces and velocities at both faces.
    one_wave, two_wave, three_wave : Curve
        The three analyses; the formulas stand in :mod:`shpb.response.bar_analysis`.
    analysis : Analysis
        Which of them is put forward (:attr:`curve`).
    equilibrium : Equilibrium
        R(t), floor and outcome.
    untuned_equilibrium : Equilibrium or None
        The same without the tuned part of the shifts, where there is one.
    loading : (int, int)
        Samples from the front to the end of loading.
    span : (int, int) or None
        Samples that count: in equilibrium and loading. None where nothing counts.
    rate : RateSummary
        Over the span that counts, or over the loading where nothing does.
    corrections : tuple of Report
        What each correction did to the curves, or would have done.
    """

    time_s: FloatArray
    motion: FaceMotion
    one_wave: Curve
    two_wave: Curve
    three_wave: Curve
    analysis: Analysis
    equilibrium: Equilibrium
    untuned_equilibrium: Equilibrium | None
    loading: tuple[int, int]
    span: tuple[int, int] | None
    rate: RateSummary
    balance: Balance
    corrections: tuple[Report, ...]
    flow: tuple[FlowStress, ...]
    yield_back_extrapolated_pa: float | None
    apparent_slope_pa: float | None

    @property
    def curve(self) -> Curve:
        """The curve put forward as the result."""
        return self.one_wave if self.analysis is Analysis.ONE_WAVE else self.three_wave

    def correction(self, which: Correction) -> Report:
        """What one correction did, or would have done."""
        return next(report for report in self.corrections if report.correction is which)

    @property
    def indentation_strain(self) -> FloatArray:
        """Estimate of the engineering strain that the bar faces add [1], taken off or not, shape (samples,)."""
        return np.broadcast_to(self.correction(Correction.INDENTATION).off.strain, self.time_s.shape)

    @property
    def heating_k(self) -> FloatArray | None:
        """Adiabatic rise of the specimen's temperature along the three-wave curve [K], shape (samples,).

        None without its density or heat capacity.
        """
        report = self.correction(Correction.HEATING)
        return None if report.rise_k is None else report.laid(report.rise_k)

    @property
    def elastic_faces_strain(self) -> FloatArray:
        """The part of the strain of the curves that belongs to the bar faces: zero where it has been taken off."""
        taken = self.correction(Correction.INDENTATION).applied
        return np.zeros_like(self.time_s) if taken else self.indentation_strain

    @property
    def strain_span(self) -> tuple[float, float] | None:
        """True strain at both ends of the span that counts."""
        if self.span is None:
            return None
        strain = self.curve.true_strain
        return float(strain[self.span[0]]), float(strain[self.span[1] - 1])


def specimen_response(
    faces: FacePulses, pulses: Pulses, rig: Rig, sheet: ShotSheet, settings: Settings
) -> Response:
    """Reduce pulses at the faces to stress, strain, rate, and what is read off them.

    Raises
    ------
    InputError
        If the pulses hold no loading of the specimen at all.
    """
    specimen, kind = sheet.specimen, sheet.kind
    motion = face_motion(faces, rig)
    own_bars = settings.switched_on(Correction.MISMATCH)
    raw = Curves(
        one_wave(faces, motion, rig, specimen, kind, own_bars=own_bars),
        two_wave(faces, motion, rig, specimen, kind, own_bars=own_bars),
        three_wave(faces, motion, specimen, kind),
    )
    loading = loading_span(raw.three_wave.strain_rate_per_s, faces.time_s, faces.whole)
    if loading[1] - loading[0] < 8 or motion.force_out_n[slice(*loading)].max() <= 0:
        raise InputError(
            "the pulses never load the specimen",
            where="response",
            mend="Check polarity, channels and windows in the rig file and the shot sheet",
        )
    curves, reports = correct(faces, motion, raw, rig, sheet, loading, settings)
    one, two, three = curves
    for array in (*motion, *(getattr(c, f.name) for c in curves for f in dataclasses.fields(c))):
        frozen(array)
    curve = one if settings.analysis is Analysis.ONE_WAVE else three
    equilibrium = judge_equilibrium(
        motion, force_uncertainties(pulses, faces, rig, settings), faces, curve.true_strain, loading, specimen,
        settings,
    )  # fmt: skip
    span = None if equilibrium.start is None else (equilibrium.start, loading[1])
    if span is not None:
        end = min(span[1], _over_the_edge(three, rig, sheet))
        span = (span[0], end) if end - span[0] >= 8 else None
    modulus = specimen.young_modulus_pa
    return Response(
        time_s=faces.time_s,
        motion=motion,
        one_wave=one,
        two_wave=two,
        three_wave=three,
        analysis=settings.analysis,
        equilibrium=equilibrium,
        untuned_equilibrium=_untuned(faces, pulses, rig, sheet, settings),
        loading=loading,
        span=span,
        rate=rate_summary(three.strain_rate_per_s, three.true_strain_rate_per_s, span or loading),
        balance=work_balance(pulses, faces, raw.three_wave, rig, specimen, loading, sheet.striker_speed_m_s),
        corrections=reports,
        flow=flow_stresses(
            curve.true_strain, curve.true_stress_pa, curve.true_strain_rate_per_s, span, modulus,
            settings.flow_strains,
        ),
        yield_back_extrapolated_pa=back_extrapolated_yield_pa(
            curve.true_strain, curve.true_stress_pa, span, modulus
        ),
        # Of the curve as the bars see it: what is usual for it includes the bar faces that give way.
        apparent_slope_pa=apparent_slope_pa(raw.three_wave.strain, raw.three_wave.stress_pa, loading),
    )  # fmt: skip


def _over_the_edge(curve: Curve, rig: Rig, sheet: ShotSheet) -> int:
    """First sample at which the specimen has grown over a bar's edge (constant volume); beyond the end if never."""
    size = curve.true_strain.size
    if sheet.kind is TestKind.TENSION:
        return size
    bar = min(rig.incident_bar.diameter_m, rig.transmitted_bar.diameter_m)
    over = np.flatnonzero(curve.true_strain > 2 * np.log(bar / sheet.specimen.diameter_m))
    return int(over[0]) if over.size else size


def _untuned(
    faces: FacePulses, pulses: Pulses, rig: Rig, sheet: ShotSheet, settings: Settings
) -> Equilibrium | None:
    """R(t) in physical time, shown beside the tuned one (tuning on equilibrium would be circular)."""
    if faces.untuned is None:
        return None
    physical, specimen = faces.untuned, sheet.specimen
    motion = face_motion(physical, rig)
    curve = three_wave(physical, motion, specimen, sheet.kind)
    loading = loading_span(curve.strain_rate_per_s, physical.time_s, physical.whole)
    uncertainties = force_uncertainties(pulses, physical, rig, settings)
    return judge_equilibrium(motion, uncertainties, physical, curve.true_strain, loading, specimen, settings)
