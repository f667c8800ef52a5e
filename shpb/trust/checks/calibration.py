"""Checks of the calibration that a shot stands on: its days, and whether the rig is still as it was then."""

from __future__ import annotations

import datetime

from shpb.limits import USUAL
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Weight
from shpb.trust.judge import check


@check("calibration_days", gravest=Weight.NOTE)
def calibration_date(evidence: Evidence) -> Answer | None:
    """The shot must lie within the days for which the rig's calibration holds."""
    calibration = evidence.rig.calibration
    most, whose = _most_days(evidence)
    limit = f"0 to {most} days from calibration to shot{whose}"
    where = "calibration_date in the rig file" if calibration is None else "date in the calibration"
    dates = {where: evidence.rig.calibration_date, "date in the shot sheet": evidence.sheet.date}
    days = {name: _day(text) for name, text in dates.items()}
    unknown = [
        f"no {name}" if not dates[name] else f"{name} is no year-month-day"
        for name, day in days.items()
        if day is None
    ]
    calibrated, fired = days.values()
    if calibrated is None or fired is None:
        return Answer(
            weight=Weight.NOTE,
            measured=f"age of the calibration not known: {', '.join(unknown)}",
            limit=limit,
            action="State both days: later readers ask which calibration these numbers stand on.",
        )
    age = (fired - calibrated).days
    named = "" if calibration is None else f" {calibration.name}"
    return Answer(
        weight=Weight.FINE if 0 <= age <= most else Weight.NOTE,
        measured=f"shot {age} days after the calibration{named}"
        if age >= 0
        else f"shot {-age} days before the calibration{named}",
        limit=limit,
        action="Calibrate anew and state its day."
        if age > most
        else "Check both days, and which rig file is meant. A later calibration may be put in force for earlier shots: "
        "shpb recalibrate.",
    )


def _most_days(evidence: Evidence) -> tuple[int, str]:
    """For how many days the calibration holds, and who says so: its file, or a lab that sets less."""
    own, calibration = evidence.settings.limits.calibration_days, evidence.rig.calibration
    if calibration is None or (own != USUAL.calibration_days and own < calibration.holds_days):
        return own, ""
    return calibration.holds_days, ", as the calibration says"


def _day(text: str) -> datetime.date | None:
    """The day that a text begins with, None where it is no year-month-day."""
    try:
        return datetime.date.fromisoformat(text.strip()[:10])
    except ValueError:
        return None


@check(
    source="a calibrated gauge factor holds gauge, bridge, supply and amplifier; a wave speed the bar's stated length",
    gravest=Weight.REJECT,
)  # fmt: skip
def calibration_matches(evidence: Evidence) -> Answer | None:
    """Rig, bars, gauges and wiring must be those that were calibrated."""
    calibration = evidence.rig.calibration
    if calibration is None:
        return None
    changed = evidence.rig.departures
    grave = [one for one in changed if one.grave]
    return Answer(
        weight=Weight.REJECT if grave else Weight.NOTE if changed else Weight.FINE,
        measured=f"changed since {calibration.name}: {'; '.join(map(str, changed))}"
        if changed
        else f"as on the day of {calibration.name}",
        limit="no change since the calibration",
        action="Calibrate anew, or put back what was changed; the values of the calibration were used, and they are "
        "not those of this rig."
        if grave
        else "Remove the station from the next calibration, or put it back into the rig file.",
    )
