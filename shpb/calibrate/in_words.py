"""A calibration in words: how each value was measured, and what the session had no shots for."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from shpb.calibrate.bars.arrival_speed import ArrivalSpeed
from shpb.calibrate.bars.bar_constants import BarConstants
from shpb.calibrate.determination import Determination
from shpb.calibrate.propagation.complex_propagation import MeasuredPropagation
from shpb.calibrate.sensitivity.reconcile import Reconciled
from shpb.calibrate.sensitivity.shunt import ShuntChecks
from shpb.calibrate.sensitivity.striker_line import StrikerLines
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.rig.propagation_table import PropagationTable
from shpb.rig.rig import SIDES, Rig, budget_name


def methods_of(
    propagation: Mapping[str, MeasuredPropagation],
    constants: BarConstants | None,
    sensitivities: Reconciled | None,
) -> dict[str, str]:
    """How each value was measured and from which shots, by its name in the uncertainty budget."""
    parts: list[Determination] = [one.determination for one in propagation.values()]
    parts += list(constants.determinations) if constants is not None else []
    parts += [sensitivities.determination] if sensitivities is not None else []
    said = {name: f"{part.method} ({', '.join(part.shots)})" for part in parts for name in part.names}
    for side, one in propagation.items():
        said[f"{side} bar: propagation"] = (
            f"{one.determination.method} ({', '.join(one.determination.shots)})"
        )
    return said


def remarks_of(
    rig: Rig,
    fired: Sequence[FiredShot],
    propagation: Mapping[str, MeasuredPropagation],
    tables: Mapping[str, PropagationTable],
    constants: BarConstants | None,
    arrivals: Sequence[ArrivalSpeed],
    lines: StrikerLines | None,
    shunts: ShuntChecks | None,
    sensitivities: Reconciled | None,
) -> tuple[str, ...]:
    """What every method remarks, and then what was not measured for want of shots; each once."""
    said: list[str] = [text for one in propagation.values() for text in one.remarks]
    said += [
        f"{side} bar: propagation taken from the other bar, which is of the same stock"
        for side in tables
        if side not in propagation
    ]
    said += list(constants.remarks) if constants is not None else []
    said += _by_arrivals(fired, arrivals)
    said += [text for line in (lines.lines if lines is not None else ()) for text in line.remarks]
    said += list(shunts.remarks) if shunts is not None else []
    said += list(sensitivities.determination.remarks) if sensitivities is not None else []
    said += _not_measured(rig, fired, constants, tables, sensitivities, lines)
    return tuple(dict.fromkeys(said))


def _by_arrivals(fired: Sequence[FiredShot], arrivals: Sequence[ArrivalSpeed]) -> list[str]:
    """Wave speeds as one would read them off the trace, for comparison."""
    bar_of = {one.shot_id: one.shot.bar for one in fired}
    said = []
    for side in SIDES:
        mine = [one for one in arrivals if bar_of[one.shot_id] == side]
        feet = [one.by_foot_m_s for one in mine if one.by_foot_m_s is not None]
        if mine:
            correlation = sum(one.by_correlation_m_s for one in mine) / len(mine)
            foot = f" and {sum(feet) / len(feet):.0f} m/s foot to foot" if feet else ""
            said.append(
                f"{side} bar: for comparison, arrivals give {correlation:.0f} m/s by cross-correlation{foot}; "
                "dispersion biases both, so they are not used"
            )
    return said


def _not_measured(
    rig: Rig,
    fired: Sequence[FiredShot],
    constants: BarConstants | None,
    tables: Mapping[str, PropagationTable],
    sensitivities: Reconciled | None,
    lines: StrikerLines | None,
) -> list[str]:
    said = []
    names = {name for one in (constants.determinations if constants else ()) for name in one.names}
    for side in SIDES:
        if side not in tables and f"{side} bar: wave speed" not in names:
            said.append(
                f"{side} bar: wave speed not measured; strike this bar alone, free at its other end (bars-apart)"
            )
    if lines is None and any(one.shot.kind is not ShotKind.SHUNT for one in fired):
        said.append("no shot states its striker's speed: nothing checks the sensitivities as a whole")
    known = sensitivities.determination.names if sensitivities is not None else ()
    for station in rig.gauges:
        if budget_name(station, "factor") not in known:
            said.append(
                f"{station.replace('_', ' ')}: sensitivity not measured; fire bars-together with a striker speed"
            )
    return said
