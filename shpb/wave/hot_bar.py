"""Waves through the end of a bar that is hot or cold at the specimen: modulus and impedance change along it.

Where the temperature falls from the face to the rest of the bar, wave speed and impedance change along the heated
length. The bar is cut into slices of equal travel time; at each interface force and velocity are continuous, within a
slice the two waves only shift. What is known at the cold end so gives what happened at the face, exactly for slices,
with all reflections inside. Two limits are published: a pulse short against the gradient keeps its energy flux, force
by (E_hot/E_cold)^(1/4) and velocity by its inverse; a pulse long against it sees the force unchanged.

References
----------
D. Chiddister, L. E. Malvern, Exp. Mech. 3 (1963) 81-90; S. M. Walley, J. Dyn. Behav. Mater. (2020), review.
Density is taken as constant: its change is some thirty times smaller than that of the modulus.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet

ROOM_K = 293.15  # what the rig's values hold for
_COLD_K = 1.0  # a face this near to it is cold


@dataclass(frozen=True, slots=True)
class HotEnd:
    """End of a bar with a straight temperature profile: ``face_k`` at the specimen, ``room_k`` after ``length_m``.

    ``modulus_slope_per_k`` is (dE/dT)/E of the bar, some -3e-4 /K for steels (common practice).
    """

    bar: Bar
    face_k: float
    length_m: float
    modulus_slope_per_k: float
    room_k: float = ROOM_K

    def __post_init__(self) -> None:
        if not 0.3 <= self.stiffness_ratio <= 1.5:
            raise InputError(
                f"the modulus at the bar's face would be {self.stiffness_ratio:.2f} of that at room temperature",
                where="bar face temperature",
                mend="Check the face temperature and modulus_temperature_coefficient_per_K of the bar",
            )

    @property
    def stiffness_ratio(self) -> float:
        """E at the face by E of the cold bar."""
        return 1.0 + self.modulus_slope_per_k * (self.face_k - self.room_k)

    @property
    def impedance_ratio(self) -> float:
        """Force impedance at the face by that of the cold bar: the root of the stiffness ratio."""
        return float(np.sqrt(self.stiffness_ratio))

    @property
    def travel_s(self) -> float:
        """Time from the cold end to the face, the integral of dx/c(T(x)) [s]."""
        # With r = sqrt(1 + q u): int_0^1 du/r = 2 (r(1) - 1)/q = 2/(r(1) + 1).
        return 2.0 * self.length_m / (self.bar.wave_speed_m_s * (self.impedance_ratio + 1.0))

    def impedance_ratios(self, slices: int) -> FloatArray:
        """Impedance at the middle of slices of equal travel time, by that of the cold bar, from cold to face."""
        # The travel time from the cold end to where E is r^2 of its cold value goes as r - 1.
        share = (np.arange(slices) + 0.5) / slices
        ratios: FloatArray = 1.0 + (self.impedance_ratio - 1.0) * share
        return ratios


def through_hot_end(
    toward: FloatArray, away: FloatArray, end: HotEnd, interval_s: float
) -> tuple[FloatArray, FloatArray]:
    """Waves at the face of a hot end from those at its cold end.

    Parameters
    ----------
    toward, away : float array, shape (samples,)
        Force of the waves that run towards the specimen and away from it, at the cold end, on one clock; quiet at
        the beginning. Any common unit.
    end : HotEnd
    interval_s : float
        Sample interval.

    Returns
    -------
    toward, away : float array, shape (samples,)
        The same at the face. The last samples of ``away``, the travel time long, are not known and are zero.
    """
    ratio = 1.0
    for following in end.impedance_ratios(whole_slices(end, interval_s)):
        toward, away = _across(following / ratio, toward, away)
        toward, away = _later(toward), _earlier(away)
        ratio = float(following)
    return _across(end.impedance_ratio / ratio, toward, away)


def whole_slices(end: HotEnd, interval_s: float) -> int:
    """Slices of one sample interval each; what is left of the travel time is for the caller to shift by."""
    return max(round(end.travel_s / interval_s), 1)


def _across(step: float, toward: FloatArray, away: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Waves beyond an interface whose impedance is ``step`` times that before it: force and velocity are continuous.

    p' + n' = p + n and (p' - n')/step = p - n.
    """
    half_sum, half_difference = 0.5 * (1 + step), 0.5 * (1 - step)
    return half_sum * toward + half_difference * away, half_difference * toward + half_sum * away


def _later(wave: FloatArray) -> FloatArray:
    return np.concatenate((np.zeros(1), wave[:-1]))


def _earlier(wave: FloatArray) -> FloatArray:
    return np.concatenate((wave[1:], np.zeros(1)))


def hot_ends(rig: Rig, sheet: ShotSheet) -> tuple[HotEnd | None, HotEnd | None]:
    """The ends of both bars where the sheet states another temperature of their faces, None elsewhere."""

    def end(bar: Bar, face_k: float | None) -> HotEnd | None:
        if (
            face_k is None
            or bar.modulus_temperature_coefficient_per_k is None
            or sheet.heated_length_m is None
            or abs(face_k - ROOM_K) < _COLD_K
        ):
            return None
        return HotEnd(bar, face_k, sheet.heated_length_m, bar.modulus_temperature_coefficient_per_k)

    return (
        end(rig.incident_bar, sheet.incident_face_temperature_k),
        end(rig.transmitted_bar, sheet.transmitted_face_temperature_k),
    )


def why_no_hot_ends(rig: Rig, sheet: ShotSheet) -> str:
    """Why nothing can be said of hot bar ends; empty where something can."""
    faces = (
        ("incident", rig.incident_bar, rig.incident_gauge, sheet.incident_face_temperature_k),
        ("transmitted", rig.transmitted_bar, rig.transmitted_gauge, sheet.transmitted_face_temperature_k),
    )
    stated = [face for face in faces if face[3] is not None]
    if not stated:
        return "the shot sheet states no temperature of the bar faces"
    stated = [face for face in stated if face[3] is not None and abs(face[3] - ROOM_K) >= _COLD_K]
    if not stated:
        return "both bar faces are cold"
    if sheet.heated_length_m is None:
        return "the shot sheet states no heated_length of the bars"
    for name, bar, gauge, _ in stated:
        if bar.modulus_temperature_coefficient_per_k is None:
            return f"the rig file states no modulus_temperature_coefficient of the {name} bar"
        if sheet.heated_length_m > gauge.to_specimen_m:
            return f"the heated length reaches beyond the {name} gauge"
    try:
        hot_ends(rig, sheet)
    except InputError as error:
        return error.what
    return ""
