"""What every correction gets to see, and what it gives back."""

from __future__ import annotations

from dataclasses import dataclass, field, fields
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.response.bar_analysis import Curve, FaceMotion
from shpb.response.corrections.facts import FACTS, Fact
from shpb.rig.gauge import TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet, Specimen
from shpb.settings import Correction
from shpb.wave.faces import FacePulses
from shpb.wave.propagation import LowPass


class Curves(NamedTuple):
    """One-, two- and three-wave curve of a shot."""

    one_wave: Curve
    two_wave: Curve
    three_wave: Curve


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Loading:
    """A shot as the corrections see it: the curves as the corrections before left them, on a thinned grid.

    Ten points in the shortest period that passes the low-pass: corrections are as smooth as the pulses.
    """

    time_s: FloatArray
    low_pass: LowPass
    motion: FaceMotion
    curves: Curves
    rig: Rig
    sheet: ShotSheet
    loading: tuple[int, int]  # thinned samples from the front to the end of loading

    @classmethod
    def of(
        cls,
        faces: FacePulses,
        motion: FaceMotion,
        curves: Curves,
        rig: Rig,
        sheet: ShotSheet,
        loading: tuple[int, int],
    ) -> Loading:
        """Thin a shot."""
        stride = max(int(0.1 / faces.low_pass.stop_hz / faces.interval_s), 1)
        at = slice(None, None, stride)
        return cls(
            time_s=faces.time_s[at],
            low_pass=faces.low_pass,
            motion=FaceMotion(*(values[at] for values in motion)),
            curves=Curves(*(_thinned(curve, at) for curve in curves)),
            rig=rig,
            sheet=sheet,
            loading=(-(-loading[0] // stride), max(-(-loading[1] // stride), -(-loading[0] // stride) + 2)),
        )

    @property
    def specimen(self) -> Specimen:
        """The specimen."""
        return self.sheet.specimen

    @property
    def compressed(self) -> bool:
        """Whether the bars press on a cylinder: what friction, inertia and indentation are about."""
        return self.sheet.kind is TestKind.COMPRESSION

    @property
    def stretch(self) -> FloatArray:
        """Current length by initial length, shape (samples,), from three-wave strain; kept between 0.05 and 2."""
        sign = -1.0 if self.compressed else 1.0
        return np.clip(1.0 + sign * self.curves.three_wave.strain, 0.05, 2.0)

    @property
    def height_m(self) -> FloatArray:
        """Current length [m]."""
        return self.specimen.length_m * self.stretch

    @property
    def radius_m(self) -> FloatArray:
        """Current radius at constant volume [m]."""
        radius: FloatArray = self.specimen.diameter_m / 2 / np.sqrt(self.stretch)
        return radius

    def greatest(self, change: FloatArray | float) -> float:
        """Greatest size of a change over the loading."""
        values = np.broadcast_to(change, self.time_s.shape)[slice(*self.loading)]
        return float(np.abs(values).max())

    def share_of_stress(self, change: FloatArray | float) -> float:
        """Greatest size of a change of stress where the specimen flows, as a share of the three-wave stress there."""
        part = slice(*self.loading)
        stress = self.curves.three_wave.stress_pa[part]
        flows = stress > 0.5 * stress.max()
        if not flows.any():
            raise InputError(
                "the force on the specimen is nowhere positive in the loading",
                where="specimen stress",
                mend="Check kind in the shot sheet, polarity and channel names in the rig file, and the pulses",
            )
        values = np.broadcast_to(change, self.time_s.shape)[part]
        return float(np.abs(values[flows] / stress[flows]).max())


def _thinned(curve: Curve, at: slice) -> Curve:
    return Curve(**{field.name: getattr(curve, field.name)[at] for field in fields(Curve)})


class Off(NamedTuple):
    """What a correction takes off the engineering curves: arrays of shape (samples,), or zero.

    Strain is one for all three analyses; stresses [Pa] are by the face or faces that the analysis looks at.
    """

    strain: FloatArray | float = 0.0
    stress_1w_pa: FloatArray | float = 0.0
    stress_2w_pa: FloatArray | float = 0.0
    stress_3w_pa: FloatArray | float = 0.0


NOTHING = Off()


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Report:
    """What one correction did, or would have done.

    Attributes
    ----------
    correction : Correction
    brief, size : str
        How much it changes, in a few words and in full, with units; brief is empty where that is not known.
    thinned : Off
        What it takes off the curves (whether applied or not), on ``thinned_time_s``; zero where it acts on the pulses.
    rise_k : float array or None
        Heating alone: rise of the temperature along the curve [K], on ``thinned_time_s``.
    thinned_time_s, time_s : float array
        Thinned grid, and time axis of the response [s].
    refused : str
        Why it cannot be applied here; empty where it can.
    switched_on : bool
        Whether the settings ask for it.
    """

    correction: Correction
    brief: str
    size: str
    thinned: Off = NOTHING
    rise_k: FloatArray | None = None
    refused: str = ""
    switched_on: bool = False
    thinned_time_s: FloatArray = field(default_factory=lambda: np.zeros(0))
    time_s: FloatArray = field(default_factory=lambda: np.zeros(0))

    @property
    def off(self) -> Off:
        """What it takes off the curves, on the time axis of the response."""
        return Off(
            *(self.laid(change) if isinstance(change, np.ndarray) else change for change in self.thinned)
        )

    def laid(self, values: FloatArray) -> FloatArray:
        """Thinned values on the time axis of the response, by straight lines."""
        if self.thinned_time_s.size == self.time_s.size:
            return values
        laid: FloatArray = np.interp(self.time_s, self.thinned_time_s, values)
        return laid

    @property
    def fact(self) -> Fact:
        """What the correction is about, its source, its range of validity and what it needs."""
        return FACTS[self.correction]

    @property
    def applied(self) -> bool:
        """Whether the curves of the result have it."""
        return self.switched_on and not self.refused

    @property
    def state(self) -> str:
        """Applied, refused or not applied, in words."""
        if self.applied:
            return "applied"
        return f"refused: {self.refused}" if self.switched_on else "not applied"
