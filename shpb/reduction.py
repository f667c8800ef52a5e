"""The whole chain of one shot, readable top to bottom on one page."""

from __future__ import annotations

from dataclasses import dataclass

from shpb.pulse.pulse import Pulses
from shpb.pulse.pulses import find_pulses
from shpb.pulse.strain import GaugeStrain, gauge_strain
from shpb.record.record import Record
from shpb.response.response import Response, specimen_response
from shpb.rig.overrides import settings_for
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings
from shpb.trust.budget import Budget, uncertainty_budget
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Finding, Verdict, verdict_of
from shpb.trust.judge import judge
from shpb.wave.faces import FacePulses, carry_to_faces


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
    findings: tuple[Finding, ...]

    @property
    def verdict(self) -> Verdict:
        """Whether the shot counts; about data only."""
        return verdict_of(self.findings)


def reduce(record: Record, rig: Rig, sheet: ShotSheet, settings: Settings | None = None) -> ShotResult:
    """Reduce one shot: voltages to strain, pulses, faces, response, findings.

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
    strain = gauge_strain(record, rig, sheet.kind)
    pulses = find_pulses(strain, rig, sheet.specimen, settings)
    faces = carry_to_faces(pulses, rig, sheet.specimen, settings)
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
    return ShotResult(
        record=record,
        rig=rig,
        sheet=sheet,
        settings=settings,
        strain=strain,
        pulses=pulses,
        faces=faces,
        response=response,
        budget=uncertainty_budget(evidence),
        findings=judge(evidence),
    )
