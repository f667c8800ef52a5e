"""From the shots of one session to one dated calibration of the rig.

The order is that of what rests on what: propagation of bars that are not elastic; wave speed, Poisson's ratio and
positions of the others; sensitivities with pulses carried by these; one covariance over all. Nothing is measured that
the session has no shots for, and what it has none for is said.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from shpb.calibrate.bars.arrival_speed import ArrivalSpeed, arrival_wave_speed
from shpb.calibrate.bars.bar_constants import BarConstants, bar_constants
from shpb.calibrate.determination import CalibrationFinding, Determination
from shpb.calibrate.in_words import methods_of, remarks_of
from shpb.calibrate.joined import bars_of, correlations_of, gauges_of, joined
from shpb.calibrate.propagation.complex_propagation import MeasuredPropagation, complex_propagation
from shpb.calibrate.sensitivity.bending import BendingRatios, bending
from shpb.calibrate.sensitivity.reconcile import Reconciled, reconcile
from shpb.calibrate.sensitivity.sensitivity_ratio import Compared, sensitivity_ratio
from shpb.calibrate.sensitivity.shunt import ShuntChecks, shunt
from shpb.calibrate.sensitivity.striker_line import StrikerLines, striker_line
from shpb.calibrate.session import FiredShot, Session, ShotKind, of_kind
from shpb.calibrate.struck import require_own_records
from shpb.errors import InputError
from shpb.rig.bar import one_stock
from shpb.rig.calibration import Calibration, CalibrationRecord
from shpb.rig.propagation_table import PropagationTable
from shpb.rig.rig import SIDES, Rig
from shpb.settings import DEFAULT, Settings
from shpb.version import VERSION


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Calibrated:
    """One calibration and everything that it was found from; parts are None where the session has no shots for them.

    Attributes
    ----------
    calibration : Calibration
        Values, uncertainties, correlations, records; its name is that of the session.
    session : Session
    rig : Rig
        As its rig file states it.
    measured : Rig
        The same with the calibrated values.
    determination : Determination or None
        All values with one covariance.
    constants : BarConstants or None
    arrivals : tuple of ArrivalSpeed
        Wave speeds by arrivals, shown beside and never used.
    propagation : mapping of str to MeasuredPropagation
        By bar, "incident".
    compared : Compared or None
        Pulses laid on each other.
    lines : StrikerLines or None
    shunts : ShuntChecks or None
    sensitivities : Reconciled or None
    bending : BendingRatios
    findings : tuple of CalibrationFinding
        Grave ones first.
    remarks : tuple of str
    """

    calibration: Calibration
    session: Session
    rig: Rig
    measured: Rig
    determination: Determination | None
    constants: BarConstants | None
    arrivals: tuple[ArrivalSpeed, ...]
    propagation: Mapping[str, MeasuredPropagation]
    compared: Compared | None
    lines: StrikerLines | None
    shunts: ShuntChecks | None
    sensitivities: Reconciled | None
    bending: BendingRatios
    findings: tuple[CalibrationFinding, ...] = field(default=())
    remarks: tuple[str, ...] = field(default=())

    @property
    def grave(self) -> bool:
        """Whether something must be looked at before this calibration is put in force."""
        return any(one.grave for one in self.findings)


def calibrate(
    session: Session, rig: Rig, fired: Sequence[FiredShot], settings: Settings = DEFAULT
) -> Calibrated:
    """Find all that the shots of a session say about their rig.

    Parameters
    ----------
    session : Session
    rig : Rig
        As its rig file states it, a calibration in force left aside.
    fired : sequence of FiredShot
        The shots of the session with their records.
    settings : Settings
        For the low-pass and the limits, as for shots.

    Raises
    ------
    InputError
        If a shot is not what it is called, lacks what its kind needs or shares its record with another; if the records
        are of another rig; or if there is nothing in the session that says anything.
    """
    require_own_records(fired)
    _require_bars_of_session(session)
    propagation = _propagation(session, rig, fired)
    tables = _tables(rig, propagation)
    constants = _constants(rig, fired, elastic=[side for side in SIDES if side not in tables])
    arrivals = tuple(
        arrival_wave_speed(one, rig)
        for one in of_kind(fired, ShotKind.BARS_APART)
        if one.shot.bar not in tables
    )
    of_bars = [*_speeds(propagation, tables), *(constants.determinations if constants is not None else ())]
    carried = rig.calibrated(_calibration(session, rig, of_bars, tables))

    struck = any(one.shot.kind is not ShotKind.SHUNT for one in fired)
    with_speed = any(one.shot.striker_speed_m_s is not None for one in fired)
    compared = sensitivity_ratio(fired, carried, settings) if struck else None
    lines = striker_line(fired, carried, settings) if with_speed else None
    shunts = shunt(fired, rig) if of_kind(fired, ShotKind.SHUNT) else None
    sensitivities = _reconciled(carried, compared, lines, shunts)
    bent = bending(fired, carried, settings)

    found = joined(of_bars, sensitivities)
    if found is None:
        raise InputError(
            "the shots of this session measure nothing",
            where=session.source or "calibration session",
            mend="Fire bars-apart for wave speeds, bars-together with a striker speed for sensitivities",
        )
    findings = _ordered(constants, propagation, compared, lines, shunts, sensitivities, bent)
    calibration = dataclasses.replace(
        _calibration(session, rig, of_bars, tables, sensitivities),
        records=_records(fired),
        methods=methods_of(propagation, constants, sensitivities),
        findings=tuple(str(one) for one in findings),
    )
    same = rig.calibrated(calibration)
    correlations = correlations_of(
        found, sensitivities, one_stock=one_stock(same.incident_bar, same.transmitted_bar)
    )
    calibration = dataclasses.replace(calibration, correlations=correlations)
    return Calibrated(
        calibration=calibration,
        session=session,
        rig=rig,
        measured=rig.calibrated(calibration),
        determination=found,
        constants=constants,
        arrivals=arrivals,
        propagation=propagation,
        compared=compared,
        lines=lines,
        shunts=shunts,
        sensitivities=sensitivities,
        bending=bent,
        findings=findings,
        remarks=remarks_of(
            rig, fired, propagation, tables, constants, arrivals, lines, shunts, sensitivities
        ),
    )


def _require_bars_of_session(session: Session) -> None:
    """Propagation is asked of bars that were struck alone."""
    apart = {shot.bar for shot in session.shots if shot.kind is ShotKind.BARS_APART}
    if session.propagation_of and not apart.intersection(session.propagation_of):
        raise InputError(
            f"propagation of the {' and '.join(session.propagation_of)} bar is asked for, but no shot of bars apart "
            "struck it",
            where=session.source or "calibration session",
            mend="Fire bars-apart shots of this bar, or leave propagation out",
        )


# --- bars ---------------------------------------------------------------------------------------------------


def _propagation(session: Session, rig: Rig, fired: Sequence[FiredShot]) -> dict[str, MeasuredPropagation]:
    apart = {one.shot.bar for one in of_kind(fired, ShotKind.BARS_APART)}
    sides = [side for side in SIDES if side in session.propagation_of and side in apart]
    return {side: complex_propagation(fired, rig, side) for side in sides}


def _tables(rig: Rig, propagation: Mapping[str, MeasuredPropagation]) -> dict[str, PropagationTable]:
    """By bar; bars of one stock are one material and one section: what one shows holds for both."""
    tables = {side: one.table for side, one in propagation.items()}
    if len(tables) == 1 and one_stock(rig.incident_bar, rig.transmitted_bar):
        (table,) = tables.values()
        return dict.fromkeys(SIDES, table)
    return tables


def _speeds(
    propagation: Mapping[str, MeasuredPropagation], tables: Mapping[str, PropagationTable]
) -> list[Determination]:
    """Wave speeds that go with the tables; where one table serves both bars its speed does too."""
    found = [one.determination for one in propagation.values()]
    if len(tables) > len(found):
        (one,) = found
        names = tuple(f"{side} bar: {one.names[0].partition(': ')[2]}" for side in SIDES)
        both = np.ones(len(SIDES))
        return [
            dataclasses.replace(
                one,
                names=names,
                values=one.values[0] * both,
                covariance=one.covariance[0, 0] * np.outer(both, both),
            )
        ]
    return found


def _constants(rig: Rig, fired: Sequence[FiredShot], elastic: Sequence[str]) -> BarConstants | None:
    """Of elastic bars alone: one wave speed says nothing of the others."""
    used = [one for one in fired if one.shot.kind is not ShotKind.SHUNT and one.shot.bar in elastic]
    if len(elastic) < len(SIDES):
        used = list(of_kind(used, ShotKind.BARS_APART))
    return bar_constants(used, rig) if used else None


# --- sensitivities ------------------------------------------------------------------------------------------


def _reconciled(
    rig: Rig, compared: Compared | None, lines: StrikerLines | None, shunts: ShuntChecks | None
) -> Reconciled | None:
    ratios = compared.ratios if compared is not None else ()
    of_lines = lines.lines if lines is not None else ()
    checks = shunts.checks if shunts is not None else ()
    if not (ratios or of_lines or checks):
        return None
    return reconcile(rig, ratios, of_lines, checks)


# --- the calibration ----------------------------------------------------------------------------------------


def _calibration(
    session: Session,
    rig: Rig,
    of_bars: Sequence[Determination],
    tables: Mapping[str, PropagationTable],
    sensitivities: Reconciled | None = None,
) -> Calibration:
    """The values that were measured, without what they were measured from."""
    parts = [*of_bars, *([sensitivities.determination] if sensitivities is not None else [])]
    found = {name: part.quantity(name) for part in parts for name in part.names}
    return Calibration(
        name=session.name,
        rig=rig.name,
        date=session.date,
        holds_days=session.holds_days,
        bars=bars_of(rig, found, tables),
        gauges=gauges_of(rig, found, sensitivities.strain_per_volt if sensitivities is not None else {}),
        temperature_k=session.temperature_k,
        remarks=session.remarks,
        program_version=VERSION,
    )


def _records(fired: Sequence[FiredShot]) -> tuple[CalibrationRecord, ...]:
    return tuple(
        CalibrationRecord(
            shot_id=one.shot_id, kind=one.shot.kind.value, file=source.name, sha256=source.sha256
        )
        for one in fired
        for source in one.record.sources
    )


def _ordered(
    constants: BarConstants | None,
    propagation: Mapping[str, MeasuredPropagation],
    compared: Compared | None,
    lines: StrikerLines | None,
    shunts: ShuntChecks | None,
    sensitivities: Reconciled | None,
    bent: BendingRatios,
) -> tuple[CalibrationFinding, ...]:
    """Every finding once, grave ones first, else in the order of the work."""
    parts = (constants, *propagation.values(), compared, lines, shunts, sensitivities, bent)
    found = dict.fromkeys(one for part in parts if part is not None for one in part.findings)
    return tuple(sorted(found, key=lambda one: not one.grave))
