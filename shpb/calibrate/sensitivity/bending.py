"""Bending in calibration shots, pulse by pulse, at stations whose two sides have a channel each.

B = |a - b|/|a + b| of the two sides, over what of the pulse stands above half of its peak. Bars that are struck off
centre or askew bend from the first pulse on; bending that comes with the reflected or the transmitted pulse speaks of
the contact and the supports. Flexural waves are slower, so some of it lags behind its pulse.

Source: up to 5 to 10 % is good (common practice).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.sensitivity.pulses_of import CutPulse, cut_pulses
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.calibrate.struck import strain_of
from shpb.rig.rig import Rig
from shpb.settings import DEFAULT, Settings


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Bending:
    """One pulse at one station; arrays of shape (samples of its window,)."""

    shot_id: str
    station: str
    pulse: str  # "incident", "reflected" or "transmitted"
    ratio: float  # bending by axial strain
    axial: float  # mean axial strain where it is loud [1]
    time_s: FloatArray  # on the record's clock
    axial_strain: FloatArray
    bending_strain: FloatArray


@dataclass(frozen=True, slots=True, kw_only=True)
class BendingRatios:
    """Every pulse of every shot."""

    pulses: tuple[Bending, ...]
    findings: tuple[CalibrationFinding, ...]


def bending(fired: Sequence[FiredShot], rig: Rig, settings: Settings = DEFAULT) -> BendingRatios:
    """Bending ratio of every pulse at every station with two channels; empty where there is no such station.

    Parameters
    ----------
    fired : sequence of FiredShot
        Of any kind; shunts are passed over.
    rig : Rig
    settings : Settings
        For the limit.

    Raises
    ------
    InputError
        As :func:`~shpb.calibrate.sensitivity.pulses_of.cut_pulses`.
    """
    sided = [name for name, gauge in rig.gauges.items() if len(gauge.channels) == 2]
    found: list[Bending] = []
    for one in fired:
        if one.shot.kind is ShotKind.SHUNT:
            continue
        for name in sided:
            found += _of_station(one, rig, name)
    limit = settings.limits.bending
    return BendingRatios(
        pulses=tuple(found),
        findings=tuple(_finding(one, limit) for one in found if one.ratio > limit),
    )


def bending_ratio(axial: FloatArray, bending_strain: FloatArray) -> float:
    """|a - b|/|a + b| from half sum and half difference of the sides, both zero at rest, where the pulse is loud."""
    loud = np.abs(axial) > 0.5 * float(np.abs(axial).max())
    return float(np.abs(bending_strain[loud]).mean() / np.abs(axial[loud]).mean())


def _of_station(fired: FiredShot, rig: Rig, station: str) -> list[Bending]:
    names: tuple[str, ...]
    if station.startswith(fired.shot.bar):
        names = ("incident", "reflected")
    elif fired.shot.kind is ShotKind.BARS_TOGETHER:
        names = ("transmitted",)
    else:
        return []
    difference = strain_of(fired, rig, station).bending
    if difference is None:
        return []
    pulses = cut_pulses(fired, rig, [station], passages=len(names))[station]
    return [
        _one(fired, station, name, pulse, difference)
        for name, pulse in zip(names, pulses, strict=False)  # a short record holds the first alone
        # Of equal bars nothing comes back from the contact: there is no pulse that could be bent.
        if pulse.peak > 0.2 * pulses[0].peak
    ]


def _one(fired: FiredShot, station: str, name: str, pulse: CutPulse, difference: FloatArray) -> Bending:
    record = fired.record
    start = round((pulse.start_s - record.start_s) / record.sample_interval_s)
    # The axial zero line's own quiet window serves the bending strain too.
    quiet = slice(*pulse.zero.quiet[0])
    bent = difference[start : start + pulse.strain.size] - float(difference[quiet].mean())
    loud = np.abs(pulse.strain) > 0.5 * pulse.peak
    return Bending(
        shot_id=fired.shot_id,
        station=station,
        pulse=name,
        ratio=bending_ratio(pulse.strain, bent),
        axial=float(pulse.strain[loud].mean()),
        time_s=frozen(pulse.start_s + record.sample_interval_s * np.arange(float(pulse.strain.size))),
        axial_strain=pulse.strain,
        bending_strain=frozen(bent),
    )


def _finding(one: Bending, limit: float) -> CalibrationFinding:
    return CalibrationFinding(
        check="bending",
        measured=f"{one.shot_id}: bending is {100 * one.ratio:.1f} % of the axial strain in the {one.pulse} pulse at "
        f"the {one.station.replace('_', ' ')}",
        limit=f"{100 * limit:.3g} %",
        action="Align barrel, striker and bars; check the bar supports.",
    )
