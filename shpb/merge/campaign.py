"""Merge a campaign: curves of one material to conditions, a table, sensitivities, temperature courses and fits."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from shpb.errors import InputError
from shpb.merge.fit import fit_model
from shpb.merge.flow_table import FlowRow, flow_points, flow_rows, isothermal
from shpb.merge.from_shot import LeftOut, StoredCurve, from_shot, why_left_out
from shpb.merge.material_curve import MaterialCurve
from shpb.merge.model_fit import ModelFit
from shpb.merge.models.model import Model
from shpb.merge.models.registry import all_models, model_named
from shpb.merge.offset_strength import OffsetStrength, offset_strength
from shpb.merge.peak_shift import PeakShift, RatePeak, peak_shift
from shpb.merge.points import FlowPoints
from shpb.merge.prepare import from_quasistatic
from shpb.merge.quasistatic import QuasistaticTest
from shpb.merge.repeats import Repeats, average_repeats, group_repeats
from shpb.merge.scope import points_for
from shpb.merge.sensitivity import RangeSensitivities, rate_point, sensitivities_by_range
from shpb.merge.settings import NO_MODELS, MergeSettings
from shpb.merge.temperature import TemperatureCourse, temperature_course
from shpb.merge.upturn import Upturn, upturn
from shpb.response.corrections.heating import USUAL_HEAT_SHARE
from shpb.rig.gauge import TestKind
from shpb.rig.sheet import Specimen

Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class RateStudy:
    """Rate sensitivity at one plastic strain and temperature."""

    plastic_strain: float
    temperature_k: float
    sensitivities: RangeSensitivities
    upturn: Upturn


@dataclass(frozen=True, slots=True, kw_only=True)
class CourseAtRate:
    """Flow stress against temperature at one rate; ``course`` is None where there are too few temperatures."""

    plastic_strain: float
    rate_per_s: float  # geometric mean
    conditions: tuple[int, ...]
    course: TemperatureCourse | None
    why_not: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class NotFitted:
    """A law that was not fitted, and why."""

    model: Model
    why: str


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class MergedMaterial:
    """All that the campaign says about one material under one kind of test.

    Attributes
    ----------
    conditions : tuple of Repeats
        Means of the repeats, in the order of :func:`shpb.merge.repeats.group_repeats`.
    rows : tuple of FlowRow
        Flow stress at the chosen plastic strains.
    rates, courses
        Rate sensitivity by strain and temperature; temperature by rate.
    shift : PeakShift or None
        Of the strength peak with rate; None with the reason in ``why_no_shift``.
    points : FlowPoints or None
        What the laws were fitted to.
    fits, not_fitted
        One entry for each law that was asked for. Those fitted to most points first, of these the best corrected Akaike
        criterion first: it compares laws on the same points only.
    """

    material: str
    kind: TestKind
    conditions: tuple[Repeats, ...]
    rows: tuple[FlowRow, ...]
    rates: tuple[RateStudy, ...]
    courses: tuple[CourseAtRate, ...]
    shift: PeakShift | None
    why_no_shift: str
    points: FlowPoints | None
    fits: tuple[ModelFit, ...]
    not_fitted: tuple[NotFitted, ...]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Merged:
    """A merged campaign: every material, offset yields, what stayed out, and what went in by hash."""

    settings: MergeSettings
    materials: tuple[MergedMaterial, ...]
    curves: tuple[MaterialCurve, ...]
    left_out: tuple[LeftOut, ...]
    offsets: tuple[OffsetStrength, ...] = ()

    @property
    def used(self) -> tuple[tuple[str, str], ...]:
        """Name and hash of every file that went in."""
        pairs = [
            source for curve in self.curves for source in (curve.sources or ((curve.origin, curve.sha256),))
        ]
        return tuple(dict.fromkeys(pairs))


def merge_campaign(
    shots: Sequence[StoredCurve],
    tests: Sequence[QuasistaticTest],
    settings: MergeSettings,
    progress: Progress | None = None,
) -> Merged:
    """Merge shots with quasi-static tests.

    Shots that are not accepted stay out, restricted ones enter inside their span only. A test that cannot be used stays
    out with its reason.

    Parameters
    ----------
    shots : sequence of StoredCurve
    tests : sequence of QuasistaticTest
    settings : MergeSettings
    progress : callable
        Called with the steps done and all steps.

    Raises
    ------
    InputError
        If nothing is left to merge.
    """
    curves: list[MaterialCurve] = []
    left_out: list[LeftOut] = []
    specimens: dict[str, list[Specimen]] = {}
    for shot in shots:
        why = why_left_out(shot)
        if why:
            left_out.append(LeftOut(origin=shot.origin, why=why))
            continue
        try:
            curves.append(from_shot(shot, indentation_out=settings.indentation_out))
        except InputError as error:
            left_out.append(LeftOut(origin=shot.origin, why=error.what))
            continue
        specimens.setdefault(shot.sheet.specimen.material, []).append(shot.sheet.specimen)
    for test in tests:
        try:
            curves.append(from_quasistatic(test, settings.curves))
        except InputError as error:
            left_out.append(LeftOut(origin=test.origin, why=str(error)))
    if not curves:
        raise InputError(
            f"none of {len(shots)} shots and {len(tests)} quasi-static tests can be merged",
            where="merge",
            mend="; ".join(f"{one.origin}: {one.why}" for one in left_out[:3]) or "Name a folder of results",
        )
    groups: dict[tuple[str, str], list[Repeats]] = {}
    for group in group_repeats(curves, settings.repeats):
        mean = average_repeats(group, settings.repeats)
        groups.setdefault((mean.material, mean.kind.value), []).append(mean)
    models = _models(settings)
    steps = len(groups) * (len(models) + 1)
    done = 0
    materials = []
    for (material, _), conditions in groups.items():

        def step() -> None:
            nonlocal done
            done += 1
            if progress is not None:
                progress(done, steps)

        materials.append(_material(tuple(conditions), specimens.get(material, []), models, settings, step))
    return Merged(
        settings=settings,
        materials=tuple(materials),
        curves=tuple(curves),
        left_out=tuple(left_out),
        offsets=tuple(offset_strength(test, settings) for test in tests),
    )


def _models(settings: MergeSettings) -> tuple[Model, ...]:
    if settings.models == NO_MODELS:
        return ()
    return tuple(model_named(key) for key in settings.models) if settings.models else all_models()


def _material(
    conditions: tuple[Repeats, ...],
    specimens: Sequence[Specimen],
    models: Sequence[Model],
    settings: MergeSettings,
    step: Callable[[], None],
) -> MergedMaterial:
    rows = flow_rows(conditions, settings.strains)
    courses = _courses(rows, conditions, settings)
    rows = isothermal(rows, conditions)
    shift, why_no_shift = _shift(courses)
    step()
    points, why_no_points = None, ""
    try:
        points = flow_points(rows, conditions, _heat_k_m3_j(specimens))
    except InputError as error:
        why_no_points = str(error)
    fits: list[ModelFit] = []
    not_fitted: list[NotFitted] = []
    for model in models:
        if points is None:
            not_fitted.append(NotFitted(model=model, why=why_no_points))
        else:
            try:
                law = _with_facts(model, specimens, settings)
                fits.append(fit_model(law, points_for(law, points), leave_out=settings.leave_out))
            except InputError as error:
                not_fitted.append(NotFitted(model=model, why=str(error)))
        step()
    return MergedMaterial(
        material=conditions[0].material,
        kind=conditions[0].kind,
        conditions=conditions,
        rows=rows,
        rates=_rates(conditions, settings),
        courses=courses,
        shift=shift,
        why_no_shift=why_no_shift,
        points=points,
        fits=tuple(
            sorted(fits, key=lambda fit: (-len(fit.points), fit.aicc if fit.aicc is not None else np.inf))
        ),
        not_fitted=tuple(not_fitted),
    )


def _heat_k_m3_j(specimens: Sequence[Specimen]) -> float | None:
    """Temperature rise by plastic work, from the first sheet that states density and heat capacity."""
    for one in specimens:
        if one.density_kg_m3 is not None and one.heat_capacity_j_kg_k is not None:
            share = USUAL_HEAT_SHARE if one.heat_share is None else float(one.heat_share)
            return float(share / (one.density_kg_m3 * one.heat_capacity_j_kg_k))
    return None


def _with_facts(model: Model, specimens: Sequence[Specimen], settings: MergeSettings) -> Model:
    """The law with what is stated of the material, of the merge, or of both."""
    stated = {"reference_rate_per_s": settings.reference_rate_per_s, **settings.facts}
    for one in specimens:
        if one.melting_temperature_k is not None:
            stated.setdefault("melting_temperature_k", float(one.melting_temperature_k))
    known = {fact.name for fact in model.facts}
    return model.with_facts(**{name: value for name, value in stated.items() if name in known})


# --- rate and temperature ------------------------------------------------------------------------------


def near_groups(values: Sequence[float], within: float) -> list[list[int]]:
    """Indices of sorted values, cut into groups no wider than ``within`` from their first member."""
    groups: list[list[int]] = []
    for i in np.argsort(values, kind="stable"):
        if groups and values[i] - values[groups[-1][0]] <= within:
            groups[-1].append(int(i))
        else:
            groups.append([int(i)])
    return groups


def _rates(conditions: tuple[Repeats, ...], settings: MergeSettings) -> tuple[RateStudy, ...]:
    studies = []
    for group in near_groups([c.temperature_k for c in conditions], 2 * settings.repeats.temperature_k):
        for strain in settings.strains:
            points = [p for i in group if (p := rate_point(conditions[i], strain)) is not None]
            if len(points) < 2:
                continue
            studies.append(
                RateStudy(
                    plastic_strain=strain,
                    temperature_k=float(np.mean([p.temperature_k for p in points])),
                    sensitivities=sensitivities_by_range(
                        points, reference_rate_per_s=settings.reference_rate_per_s
                    ),
                    upturn=upturn(points, allowances=settings.allowances),
                )
            )
    return tuple(studies)


def _courses(
    rows: tuple[FlowRow, ...], conditions: tuple[Repeats, ...], settings: MergeSettings
) -> tuple[CourseAtRate, ...]:
    """Flow stress against temperature, by rate: rates of one range within ``course_decades`` are one rate."""
    found = []
    for name in dict.fromkeys(c.range for c in conditions):
        members = [i for i, c in enumerate(conditions) if c.range is name]
        decades = [float(np.log10(conditions[i].mean_rate_per_s)) for i in members]
        for group in near_groups(decades, settings.course_decades):
            chosen = {members[i] for i in group}
            for strain in settings.strains:
                part = [row for row in rows if row.condition in chosen and row.plastic_strain == strain]
                if len(part) < 2:
                    continue
                found.append(_course(part, strain, settings))
    return tuple(found)


def _course(part: Sequence[FlowRow], strain: float, settings: MergeSettings) -> CourseAtRate:
    course, why = None, ""
    try:
        course = temperature_course(
            np.array([row.temperature_k for row in part]),
            np.array([row.stress_pa for row in part]),
            np.array([row.u_own_pa for row in part]),
            u_temperature_k=settings.u_temperature_k,
            seed=settings.seed,
        )
    except InputError as error:
        why = error.what
    return CourseAtRate(
        plastic_strain=strain,
        rate_per_s=float(np.exp(np.mean(np.log([row.rate_per_s for row in part])))),
        conditions=tuple(row.condition for row in part),
        course=course,
        why_not=why,
    )


def _shift(courses: tuple[CourseAtRate, ...]) -> tuple[PeakShift | None, str]:
    """Shift of the peak with rate, at the plastic strain where most rates show one."""
    by_strain: dict[float, list[RatePeak]] = {}
    for one in courses:
        if one.course is not None and one.course.rises:
            peaks = by_strain.setdefault(one.plastic_strain, [])
            peaks.append(RatePeak(rate_per_s=one.rate_per_s, peak=one.course.peak))
    if not by_strain:
        return None, "no rate shows a rise of the stress with temperature"
    bracketed = {
        strain: sum(one.peak.temperature_k is not None for one in peaks)
        for strain, peaks in by_strain.items()
    }
    best = max(by_strain, key=lambda strain: (bracketed[strain], -strain))
    try:
        return peak_shift(by_strain[best]), ""
    except InputError as error:
        return None, error.what
