"""One shot as a point of the striker's line: the first pulse of a station at the struck end, plateau and integral."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.sensitivity.amplitude import loaded
from shpb.calibrate.sensitivity.common_terms import REPEATABILITY
from shpb.calibrate.sensitivity.impact import Impact
from shpb.calibrate.sensitivity.pulses_of import CutPulse
from shpb.calibrate.session import FiredShot
from shpb.calibrate.struck import from_struck_end_m, refuse
from shpb.rig.rig import Rig
from shpb.wave.propagation import Grid, LowPass

MIDDLE = (0.2, 0.8)  # of 2 L/c: common practice
# Where a plateau changes by more than this from one end to the other, it is none (a shaper, another striker).
NOT_FLAT = 0.05
EQUAL_IMPEDANCE = 0.02
_LEAST_SAMPLES = 8  # of a plateau
_WHOLE_TAIL = 0.02  # a pulse whose window ends below this share of its peak is in it whole
_KEPT_SHARE = 0.25  # of what the low-pass adds to a plateau: the fronts' own rise is not known better
_BEFORE_RADII = 20.0  # the struck end is looked at from this long before the impact, in a/c0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LinePoint:
    """One shot on the line; arrays of shape (samples,) at the struck end.

    ``momentum_q`` is q by the momentum integral, None where that does not hold.
    """

    shot_id: str
    speed_m_s: float
    expected: float  # strain by the striker's speed
    stated: float  # strain by the station, mean of the plateau
    u_stated: float  # of this shot alone
    flatness: float  # standard deviation across the plateau, share of it
    duration_s: float  # between the half heights of the fronts
    momentum_q: float | None
    time_s: FloatArray
    strain: FloatArray
    plateau_s: tuple[float, float]
    usable: bool = True

    @property
    def q(self) -> float:
        """True by stated strain per volt."""
        return self.expected / self.stated


def line_point(fired: FiredShot, rig: Rig, pulse: CutPulse, impact: Impact, low_pass: LowPass) -> LinePoint:
    """Carry the first pulse back to the struck end and take its plateau.

    Raises
    ------
    InputError
        If the pulse is too short in the record, or as such, to have a plateau.
    """
    grid, at_impact, strain = _at_struck_end(fired, rig, pulse, impact, low_pass)
    interval = grid.interval_s
    start, stop = loaded(strain, _middle(fired, pulse, impact, grid, at_impact, strain))
    duration = (stop - start) * interval
    length = min(duration, impact.duration_s)
    first, last = (start + int(share * length / interval) for share in MIDDLE)
    plateau = strain[first:last]
    if plateau.size < _LEAST_SAMPLES:
        raise refuse(
            fired,
            f"the pulse at the {pulse.station.replace('_', ' ')} lasts "
            + (
                f"{duration * 1e6:.0f} us"
                if duration > 0.05 * impact.duration_s
                else f"less than {0.5e6 * impact.duration_s:.0f} us"
            )
            + f", a striker of this length makes {impact.duration_s * 1e6:.0f} us",
            "Check the striker's length, and that nothing else was hit",
        )
    kept = _kept(low_pass, grid, (start, stop), (first, last))
    stated = float(plateau.mean()) / kept
    alike = max(1.0 / (2 * low_pass.cutoff_hz * interval), 1.0)  # samples whose noise the low-pass makes one
    noise = pulse.noise * low_pass.noise_share(interval)
    by_noise = noise * float(np.sqrt(min(alike / plateau.size, 1.0)))
    slope = float(np.polyfit(np.linspace(-0.5, 0.5, plateau.size), plateau, 1)[0])
    u_slope = by_noise * float(np.sqrt(12.0))
    by_choice = float(np.hypot(REPEATABILITY, _KEPT_SHARE * (1.0 - kept))) * stated
    return LinePoint(
        shot_id=fired.shot_id,
        speed_m_s=float(impact.speed_m_s),
        expected=impact.strain,
        stated=stated,
        u_stated=float(np.sqrt(by_noise**2 + pulse.u_level() ** 2 + by_choice**2)),
        flatness=float(plateau.std()) / stated,
        duration_s=duration,
        momentum_q=_momentum(pulse, impact),
        time_s=frozen(grid.time_s - at_impact),
        strain=frozen(strain),
        plateau_s=(float(grid.time_s[first] - at_impact), float(grid.time_s[last - 1] - at_impact)),
        usable=abs(slope) <= NOT_FLAT * stated + 3 * u_slope,
    )


def _at_struck_end(
    fired: FiredShot, rig: Rig, pulse: CutPulse, impact: Impact, low_pass: LowPass
) -> tuple[Grid, float, FloatArray]:
    """Grid, time of the impact, and what of the pulse at the struck end is laid against V."""
    bar = rig.bar_of(pulse.station)
    y = from_struck_end_m(fired.shot, rig, pulse.station)
    lead = _BEFORE_RADII * bar.radius_time_s
    at_impact = pulse.arrival_s - y / bar.wave_speed_m_s
    grid = Grid(at_impact - lead, pulse.interval_s, int(pulse.strain.size + 2 * lead / pulse.interval_s))
    at_end = pulse.carried(bar, grid, -y, low_pass)
    if bar.propagation is None:
        return grid, at_impact, at_end.force_strain
    # V is what striker and bar share: v + F/Z_s; as strain it is this mean. In an elastic bar both are one plateau, in
    # one that creeps the velocity keeps level under a striker of its own stock, while force and strain do not.
    ratio = impact.impedance_ratio
    share = 1.0 if impact.alike else ratio / (1.0 + ratio)
    return grid, at_impact, share * at_end.velocity_strain + (1.0 - share) * at_end.force_strain


def _middle(
    fired: FiredShot, pulse: CutPulse, impact: Impact, grid: Grid, at_impact: float, strain: FloatArray
) -> int:
    """A sample within the pulse; one that a shaper makes rise late is to be found too, to be left out with a reason."""
    near = int((at_impact - grid.start_s + 0.5 * impact.duration_s) / grid.interval_s)
    near = max(near, int(np.argmax(strain > 0.7 * float(strain.max()))))
    if near + _LEAST_SAMPLES > strain.size:
        raise refuse(
            fired,
            f"the record holds {pulse.strain.size * grid.interval_s * 1e6:.0f} us of the pulse at the "
            f"{pulse.station.replace('_', ' ')}, the striker makes {impact.duration_s * 1e6:.0f} us",
            "Lengthen the record, or take a shorter striker",
        )
    return near


def _kept(low_pass: LowPass, grid: Grid, pulse: tuple[int, int], plateau: tuple[int, int]) -> float:
    """Mean over the plateau of a rectangle as long as the pulse, height 1, behind the low-pass.

    A slow low-pass lets both fronts ring into the middle of a short pulse: the mean is 1.000 where the pulse lasts for
    ten periods of the cut-off, 0.997 for four, 1.02 for two.
    """
    length = 4 * grid.samples
    shift = grid.samples  # away from the ends, which the transform joins
    rectangle = np.zeros(length)
    rectangle[shift + pulse[0] : shift + pulse[1]] = 1.0
    frequency: FloatArray = np.fft.rfftfreq(length, grid.interval_s).astype(np.float64, copy=False)
    passed = np.fft.irfft(np.fft.rfft(rectangle) * low_pass.gain(frequency), length)
    return float(passed[shift + plateau[0] : shift + plateau[1]].mean())


def _momentum(pulse: CutPulse, impact: Impact) -> float | None:
    """True by stated strain from the integral, where the striker gives all it has and the window holds the pulse."""
    if abs(impact.impedance_ratio - 1.0) > EQUAL_IMPEDANCE or pulse.tail > _WHOLE_TAIL:
        return None
    return float(impact.impulse / (pulse.strain.sum() * pulse.interval_s))
