"""Two pulses of one shot laid on each other: both carried to one place, the other fitted by the first on loading."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.calibrate.sensitivity.amplitude import Amplitude, amplitude, loaded
from shpb.calibrate.sensitivity.pulses_of import CutPulse
from shpb.calibrate.session import FiredShot
from shpb.rig.bar import Bar
from shpb.wave.propagation import Grid, LowPass

_BEFORE_RADII = 12.0  # a comparison begins this long before the front, in a/c0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Comparison:
    """One shot: the pulse of one station laid on that of another, at one place; arrays of shape (samples,).

    ``first`` times ``scale`` is ``other`` (shifted back by ``delay_s``) between the samples ``inside``.
    """

    shot_id: str
    time_s: FloatArray  # since the front came to that place
    first: FloatArray
    other: FloatArray
    inside: tuple[int, int]
    scale: float
    u_scale: float
    delay_s: float
    rms: float  # of the difference, by the peak


def lay(
    fired: FiredShot,
    first_bar: Bar,
    other_bar: Bar,
    pulses: tuple[CutPulse, CutPulse],
    distances_m: tuple[float, float],
    low_pass: LowPass,
) -> Comparison:
    """Carry both pulses to one place and fit the other by the first over the loading."""
    one, two = pulses
    grid = grid_at(one, first_bar, distances_m[0])
    first = one.carried(first_bar, grid, distances_m[0], low_pass).force_strain

    def other_at(shift_s: float) -> FloatArray:
        return two.carried(other_bar, grid, distances_m[1], low_pass, shift_s).force_strain

    start, stop = loading(first, grid, first_bar, low_pass)
    fit: Amplitude = amplitude(first, other_at, slice(start, stop), grid.interval_s, low_pass, pulses)
    front = one.arrival_s + distances_m[0] / first_bar.wave_speed_m_s
    return Comparison(
        shot_id=fired.shot_id,
        time_s=frozen(grid.time_s - front),
        first=frozen(first),
        other=frozen(fit.other),
        inside=(start, stop),
        scale=fit.scale,
        u_scale=fit.u_scale,
        delay_s=fit.delay_s,
        rms=fit.rms,
    )


def grid_at(pulse: CutPulse, bar: Bar, distance_m: float) -> Grid:
    """From some time before the front comes to the place until the pulse's window has come there."""
    lead = _BEFORE_RADII * bar.radius_time_s
    front = pulse.arrival_s + distance_m / bar.wave_speed_m_s
    end = pulse.start_s + pulse.strain.size * pulse.interval_s + distance_m / bar.wave_speed_m_s
    return Grid(front - lead, pulse.interval_s, int((end - front + lead) / pulse.interval_s))


def loading(strain: FloatArray, grid: Grid, bar: Bar, low_pass: LowPass) -> tuple[int, int]:
    """From before the front until the trailing edge has fallen to a half, less what the low-pass smears."""
    near = int((_BEFORE_RADII * bar.radius_time_s + 0.25 / low_pass.cutoff_hz) / grid.interval_s)
    near = max(near, int(np.argmax(strain > 0.7 * float(strain.max()))))
    start, stop = loaded(strain, near)
    smear = int(0.5 / low_pass.cutoff_hz / grid.interval_s)
    before = int(_BEFORE_RADII * bar.radius_time_s / grid.interval_s)
    return max(start - before, 0), max(stop - smear, start + 4)
