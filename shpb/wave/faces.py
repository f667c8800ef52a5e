"""The three pulses at the specimen faces, on one clock whose zero is the arrival of the loading front."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.errors import InputError
from shpb.pulse.foot import Foot, pick_foot
from shpb.pulse.pulse import Pulses
from shpb.pulse.pulses import TAPER_RADII
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Alignment, Settings
from shpb.wave.propagation import STOP_BY_CUTOFF, CarriedPulse, Grid, LowPass
from shpb.wave.to_faces import Solved, ToFaces

# The common clock begins this long before the front, in a/c0 of the incident bar.
_BEFORE_RADII = 12.0
_SMOOTHING_RADII = 0.5
# The faces' clock need not be finer than this many points in the shortest period that passes.
_POINTS_IN_A_PERIOD = 50
_PICK_RADII = 60.0  # feet are sought this long after the front


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FacePulses:
    """Pulses at the specimen faces.

    Attributes
    ----------
    time_s : float array, shape (samples,)
        Time since the loading front reached the incident face [s].
    interval_s : float
        Of ``time_s`` [s]: the record's own, or a whole multiple where that is much finer than need be.
    record_time_of_zero_s : float
        Where time zero lies on the record's own clock [s].
    incident, reflected, transmitted : CarriedPulse
        Strains [1], shape (samples,) each, loading-positive.
    low_pass : LowPass
        The one filter of all three.
    whole : int
        Samples up to which no pulse feels the soft end of its window.
    reflected_misalignment_s, transmitted_misalignment_s : float or None
        Foot of that pulse less where geometry puts it, before any tuning [s].
    u_misalignment_s : float
        Standard uncertainty of the two from the pickers' scatter [s].
    reflected_shift_s, transmitted_shift_s : float
        The tuned part: what was added to the physical delay [s]; zero in physical time.
    untuned : FacePulses or None
        The same without the tuned part, where there is one.
    returning : CarriedPulse or None
        The wave that comes back to the specimen in the transmitted bar, where its stations tell it apart.
    face_impedance_ratio : float
        Impedance of the incident bar at its face by that of the bar: other than 1 where a hot end is corrected.
    undone_hz : tuple of float
        Up to where gauge and amplifier of incident, reflected and transmitted pulse can be undone [Hz]; zero where
        nothing is stated of them.
    """

    time_s: FloatArray
    interval_s: float
    record_time_of_zero_s: float
    incident: CarriedPulse
    reflected: CarriedPulse
    transmitted: CarriedPulse
    low_pass: LowPass
    reflected_misalignment_s: float | None
    transmitted_misalignment_s: float | None
    u_misalignment_s: float
    whole: int
    reflected_shift_s: float = 0.0
    transmitted_shift_s: float = 0.0
    untuned: FacePulses | None = None
    face_impedance_ratio: float = 1.0
    undone_hz: tuple[float, ...] = (0.0, 0.0, 0.0)
    returning: CarriedPulse | None = None

    def index(self, time_s: float) -> int:
        """Sample at or after a time since the front, kept on the grid."""
        return int(np.clip(np.ceil((time_s - self.time_s[0]) / self.interval_s), 0, self.time_s.size))


def low_pass_of(rig: Rig, settings: Settings) -> LowPass:
    """The one low-pass of a rig: from the bar with the lower c0/a, or as the settings state it.

    It ends where a measured propagation table ends, at the latest: beyond that nothing is known of the bar.
    """
    bars = (rig.incident_bar, rig.transmitted_bar)
    cutoff = settings.cutoff_hz
    if cutoff is None:
        cutoff = settings.cutoff_fa_c0 * min(1 / bar.radius_time_s for bar in bars)
    known = [bar.propagation.frequency_hz[-1] for bar in bars if bar.propagation is not None]
    return LowPass(min(cutoff, *(end_hz / STOP_BY_CUTOFF for end_hz in known))) if known else LowPass(cutoff)


def carry_to_faces(
    pulses: Pulses, rig: Rig, sheet: ShotSheet, settings: Settings, solved: Solved | None = None
) -> FacePulses:
    """Carry the pulses to the specimen faces: incident forward, reflected and transmitted back.

    All three pass the same zero-phase low-pass and the same dispersion step, to the same place, before
    any sum or difference is formed (Gorham 1983; Lifshitz & Leber 1994). ``solved`` is for a shot that is
    carried again with other windows.
    """
    low_pass = low_pass_of(rig, settings)
    transit = sheet.specimen.transit_time_s or 0.0
    grid = _common_grid(pulses, rig, low_pass)
    to_faces = ToFaces(pulses, rig, sheet, settings, grid, low_pass, solved)
    at_faces = to_faces()
    incident, reflected, transmitted, impedance_ratio, returning = at_faces
    feet = _feet_at_faces(pulses, (incident, reflected, transmitted), grid, rig)
    travel = _travel_s(rig.incident_gauge.to_specimen_m, rig.incident_bar)
    zero = feet[0].time_s if feet[0] is not None else pulses.arrivals.incident_s + travel
    off_r = None if feet[1] is None else feet[1].time_s - zero
    off_t = None if feet[2] is None else feet[2].time_s - zero - transit
    u_off = float(np.sqrt(sum(foot.u_time_s**2 for foot in feet if foot is not None)))
    physical = FacePulses(
        time_s=frozen(grid.time_s - zero),
        interval_s=grid.interval_s,
        record_time_of_zero_s=zero,
        incident=incident,
        reflected=reflected,
        transmitted=transmitted,
        low_pass=low_pass,
        reflected_misalignment_s=off_r,
        transmitted_misalignment_s=off_t,
        u_misalignment_s=u_off,
        whole=_whole(grid, low_pass, rig),
        face_impedance_ratio=impedance_ratio,
        undone_hz=to_faces.undone_hz,
        returning=returning,
    )
    if settings.alignment is Alignment.PHYSICAL:
        return physical
    shift_r = -(off_r or 0.0)
    shift_t = -(off_t + transit) if off_t is not None else 0.0
    tuned = to_faces(shift_r, shift_t)
    return replace(
        physical,
        incident=tuned.incident,
        reflected=tuned.reflected,
        transmitted=tuned.transmitted,
        returning=tuned.returning,
        reflected_shift_s=shift_r,
        transmitted_shift_s=shift_t,
        untuned=physical,
    )


def _common_grid(pulses: Pulses, rig: Rig, low_pass: LowPass) -> Grid:
    """From a little before the front to where the first of the three windows ends, at the faces.

    A record sampled much faster than anything that passes is laid on every second, third, ... of its samples.
    """
    travel_i = _travel_s(rig.incident_gauge.to_specimen_m, rig.incident_bar)
    travel_t = _travel_s(rig.transmitted_gauge.to_specimen_m, rig.transmitted_bar)
    front = pulses.arrivals.incident_s + travel_i
    start = front - _BEFORE_RADII * rig.incident_bar.radius_time_s
    stop = min(
        pulses.incident.window_s[1] + travel_i,
        pulses.reflected.window_s[1] - travel_i,
        pulses.transmitted.window_s[1] - travel_t,
    )
    every = max(int(1.0 / (_POINTS_IN_A_PERIOD * low_pass.stop_hz * pulses.sample_interval_s)), 1)
    interval = every * pulses.sample_interval_s
    samples = int((stop - start) / interval)
    if samples < 32 or stop <= front:
        raise InputError(
            f"the three windows have only {max(stop - front, 0) * 1e6:.1f} us in common at the specimen",
            where="pulse windows",
            mend="Widen the windows in the shot sheet, lengthen the record, or check gauge distances",
        )
    return Grid(start, interval, samples)


def _whole(grid: Grid, low_pass: LowPass, rig: Rig) -> int:
    """Samples up to which the taper of the windows, smeared by the low-pass, is not felt."""
    unit = max(bar.radius_time_s for bar in (rig.incident_bar, rig.transmitted_bar))
    return max(grid.samples - int((TAPER_RADII * unit + 2.0 / low_pass.cutoff_hz) / grid.interval_s), 0)


def _travel_s(distance_m: float, bar: Bar) -> float:
    """Travel time of a front over a distance [s]."""
    return distance_m / bar.front_speed_m_s


def _feet_at_faces(
    pulses: Pulses, carried: tuple[CarriedPulse, CarriedPulse, CarriedPulse], grid: Grid, rig: Rig
) -> tuple[Foot | None, ...]:
    """Pick all three feet at the faces, with the same picker, where dispersion no longer rounds them."""
    unit = rig.incident_bar.radius_time_s
    stop = int((_BEFORE_RADII + _PICK_RADII) * unit / grid.interval_s)
    travel_i = _travel_s(rig.incident_gauge.to_specimen_m, rig.incident_bar)
    travel_t = _travel_s(rig.transmitted_gauge.to_specimen_m, rig.transmitted_bar)
    to_face = {"incident": travel_i, "reflected": -travel_i, "transmitted": -travel_t}
    feet: list[Foot | None] = []
    for pulse, at_face in zip(pulses, carried, strict=True):
        if pulse.foot is None:
            feet.append(None)
        elif pulse.foot_by_hand:
            # A foot set by hand counts as it stands, carried to the face at the speed of fronts.
            feet.append(pulse.foot._replace(time_s=pulse.foot.time_s + to_face[pulse.name]))
        else:
            smoothing, sign = _SMOOTHING_RADII * unit, pulse.foot.sign
            strain = at_face.strain[:stop]
            # The picker smooths over samples: of fewer, each must count for as many as it stands for.
            noise = pulse.noise * float(np.sqrt(pulses.sample_interval_s / grid.interval_s))
            feet.append(pick_foot(strain, grid.start_s, grid.interval_s, noise, smoothing, sign))
    return tuple(feet)
