"""The whole chain of one shot, readable top to bottom on one page."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields, replace
from typing import TYPE_CHECKING

from shpb.pulse.by_hand import ByHand
from shpb.pulse.pulse import Pulses
from shpb.pulse.pulses import find_pulses
from shpb.pulse.strain import GaugeStrain, gauge_strain
from shpb.record.record import Record
from shpb.response.response import Response, specimen_response
from shpb.rig.overrides import settings_for
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings, Waves
from shpb.trust.budget import Budget, uncertainty_budget
from shpb.trust.closure import Closure, close
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Finding, Verdict, verdict_of
from shpb.trust.judge import judge
from shpb.wave.faces import FacePulses, carry_to_faces
from shpb.wave.station_waves import station_pulses

if TYPE_CHECKING:
    from shpb.trust.draws import Draws


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ShotResult:
    """One reduced shot: what went in, every stage on the way, and what can be said of it.

    Examples
    --------
    >>> result.verdict.value, result.response.equilibrium.outcome.value
    ('accept', 'reached')
    >>> stress = result.response.curve.true_stress_pa  # on result.response.time_s
    >>> [finding.check for finding in result.findings if finding.weight.value == "reject"]
    []
    """

    record: Record
    rig: Rig
    sheet: ShotSheet
    settings: Settings
    strain: GaugeStrain
    pulses: Pulses
    faces: FacePulses
    response: Response
    budget: Budget
    closure: Closure | None
    findings: tuple[Finding, ...]
    draws: Draws | None = None  # by :func:`draw_shot`
    by_hand: tuple[ByHand, ...] = ()  # windows and feet that people moved, oldest first

    @property
    def verdict(self) -> Verdict:
        """Whether the shot counts; about data only."""
        return verdict_of(self.findings)


def reduce(record: Record, rig: Rig, sheet: ShotSheet, settings: Settings | None = None) -> ShotResult:
    """Reduce one shot: voltages to strain, pulses, faces, response, uncertainty, closure, findings.

    Parameters
    ----------
    record : Record
        Voltages as acquired.
    rig : Rig
        What stands in the lab.
    sheet : ShotSheet
        What was tested.
    settings : Settings or None
        Every choice of the reduction, used exactly as given; None takes the defaults as the rig file and
        the shot sheet change them.

    Raises
    ------
    UnusableShotError
        If the record cannot be reduced at all; the message says why and what to do.
    InputError
        If record, rig and sheet do not fit together.

    Examples
    --------
    >>> import shpb
    >>> sheet = shpb.read_sheet(folder / "records" / "W-02.toml")
    >>> rig = shpb.read_rig(sheet.rig_file)
    >>> record = shpb.read_record(sheet.record_files, shpb.hints_for(rig, sheet))
    >>> result = shpb.reduce(record, rig, sheet)
    >>> print(result.verdict.value, round(result.response.rate.mean_per_s, -2), "1/s")
    accept 1500.0 1/s
    """
    settings = settings_for(rig, sheet) if settings is None else settings
    by_stations = settings.waves is Waves.STATIONS
    strain = gauge_strain(record, rig, sheet.kind, every=by_stations)
    pulses = (station_pulses if by_stations else find_pulses)(strain, rig, sheet.specimen, settings)
    faces = carry_to_faces(pulses, rig, sheet, settings)
    response = specimen_response(faces, pulses, rig, sheet, settings)
    evidence = Evidence(
        record=record,
        rig=rig,
        sheet=sheet,
        settings=settings,
        strain=strain,
        pulses=pulses,
        faces=faces,
        response=response,
    )
    budget = uncertainty_budget(evidence, rig.correlation_pairs)
    closure = close(evidence, budget)
    return ShotResult(
        record=record,
        rig=rig,
        sheet=sheet,
        settings=settings,
        strain=strain,
        pulses=pulses,
        faces=faces,
        response=response,
        budget=budget,
        closure=closure,
        findings=judge(replace(evidence, budget=budget, closure=closure)),
    )


def draw_shot(
    result: ShotResult,
    draws: int | None = None,
    *,
    seed: int = 1,
    progress: Callable[[int, int | None], None] | None = None,
) -> ShotResult:
    """Work out the uncertainty of a reduced shot by Monte Carlo as well, beside its linear budget.

    Parameters
    ----------
    result : ShotResult
        The reduced shot.
    draws : int or None
        How many, 200 or more; None draws until one significant digit of every standard uncertainty has settled
        (JCGM 101:2008, 7.9.4).
    seed : int
        The same seed gives the same numbers.
    progress : callable
        Called after each chunk with the draws done and the draws asked for (None where they are not known).

    Returns
    -------
    ShotResult
        The same with ``draws``.

    Raises
    ------
    InputError
        If the number of draws or the seed is out of range.

    Examples
    --------
    >>> from shpb.reduction import draw_shot
    >>> drawn = draw_shot(result, 500, seed=1).draws
    >>> drawn.draws, drawn.mean.shape == drawn.u.shape
    (500, True)
    """
    from shpb.trust.draws import draw_evidence

    evidence = Evidence(**{field.name: getattr(result, field.name) for field in fields(Evidence)})
    drawn = draw_evidence(
        evidence,
        result.budget,
        draws,
        seed=seed,
        correlations=result.rig.correlation_pairs,
        progress=progress,
    )
    return replace(result, draws=drawn)
