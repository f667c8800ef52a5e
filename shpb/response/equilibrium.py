"""Force equilibrium: R(t) with its measurement floor, and one of four outcomes.

    R(t) = |F_in - F_out| / ((F_in + F_out)/2) = 2 |F_in - F_out|/(F_in + F_out)

Both numerator and denominator are running means over two elastic transits of the specimen, because R
alternates from one transit to the next. Some papers use (F_in - F_out)/F_out or half of this value: the
definition is therefore printed beside every number.

The floor u(R) says how small an R this rig can see. F_in is a difference of two large pulses, each with an
error of its own (gauge linearity, bending, what is left of dispersion), so that
u(F_in)^2 = (E A)^2 (p^2 (I^2 + R^2) + noise^2 + (slope u_t)^2 + zero^2).

References
----------
E. D. H. Davies, S. C. Hunter, J. Mech. Phys. Solids 11 (1963) 155-179 (t >= pi L/c_s);
G. Ravichandran, G. Subhash, J. Am. Ceram. Soc. 77 (1994) 263-267 (R <= 5 %).
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from shpb.arrays import BoolArray, FloatArray, frozen
from shpb.pulse.front import moving_mean
from shpb.pulse.pulse import Pulses
from shpb.response.bar_analysis import FaceMotion
from shpb.rig.rig import Rig
from shpb.rig.sheet import Specimen
from shpb.settings import Settings
from shpb.wave.faces import FacePulses
from shpb.wave.propagation import CarriedPulse
from shpb.wave.station_noise import FaceKernels, left_at_face_s

R_DEFINITION = "R = 2 |F_in - F_out| / (F_in + F_out), running mean over two specimen transits"
_SHARE_WITHIN = 0.90  # of the rest of the loading for which R must stay within the limit
_LEAST_FORCE = 0.05  # share of the greatest mean force below which R says nothing


class Outcome(StrEnum):
    """The four outcomes of the equilibrium check."""

    REACHED = "reached"
    REACHED_LATE = "reached late"
    NOT_REACHED = "not reached"
    CANNOT_BE_DECIDED = "cannot be decided"


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Equilibrium:
    """How the two face forces agree.

    Attributes
    ----------
    ratio : float array, shape (samples,)
        R(t); NaN-free: 2 where the mean force is too small to say anything.
    floor : float array, shape (samples,)
        u(R)(t), the measurement floor, capped at 2.
    outcome : Outcome
    start : int or None
        Sample from which the specimen is in equilibrium, None if never.
    share_within : float
        Share of the loading after ``start`` (or of all of it) with R within the limit.
    mean_ratio : float
        Mean R over the loading that counts, or over all loading where none does.
    nrms : float
        Root mean square of F_in - F_out over that of the mean force, same span.
    impulse_ratio : float
        Impulse of F_out by impulse of F_in over the loading.
    typical_floor : float
        Median of u(R) over the same span.
    reverberations : float or None
        Elastic transits of the specimen before ``start``; None without its wave speed.
    """

    ratio: FloatArray
    floor: FloatArray
    limit: float
    outcome: Outcome
    start: int | None
    strain_at_start: float | None
    share_within: float
    mean_ratio: float
    nrms: float
    impulse_ratio: float
    typical_floor: float
    reverberations: float | None


def force_uncertainties(
    pulses: Pulses, faces: FacePulses, rig: Rig, settings: Settings
) -> tuple[FloatArray, FloatArray]:
    """Standard uncertainty of F_in and F_out [N] from what differs from pulse to pulse.

    What scales a whole force (E A, gauge factor, gain) is left out: it belongs to the budget, not
    to the floor of R... except that both gauges may differ, which ``pulse_error`` is to hold.
    """
    u_time = max(faces.u_misalignment_s, 0.2 * pulses.sample_interval_s)
    band = faces.low_pass.noise_share(pulses.sample_interval_s)

    def variance(wave: CarriedPulse) -> FloatArray:
        slope = np.gradient(wave.strain, faces.interval_s)
        found: FloatArray = (settings.pulse_error * wave.strain) ** 2 + (slope * u_time) ** 2
        return found

    def of_record(side: str, names: tuple[str, ...]) -> FloatArray | float:
        """By noise and zero lines: of pulses on their own, or grown in waves that stations have told apart."""
        bar = pulses.separated_bar(side)
        if bar is None:
            cut = [pulse for pulse in pulses if pulse.name in names]
            return sum((pulse.noise * band) ** 2 + pulse.zero.u_level**2 for pulse in cut)
        interval, material = pulses.sample_interval_s, rig.bar_of(side)
        kernels = FaceKernels(bar, material, faces.low_pass, interval, settings.dispersion)
        left = pulses.reflected if side == "incident" else pulses.returning
        from_s = np.inf if left is None else left_at_face_s(bar, left, material)
        return kernels.force_variance(faces.time_s + (faces.record_time_of_zero_s - bar.begin_s), from_s)

    squares_in = variance(faces.incident) + variance(faces.reflected)
    squares_out = variance(faces.transmitted)
    if faces.returning is not None:
        squares_out = squares_out + variance(faces.returning)
    u_in = rig.incident_bar.force_per_strain_n * np.sqrt(
        squares_in + of_record("incident", ("incident", "reflected"))
    )
    u_out = rig.transmitted_bar.force_per_strain_n * np.sqrt(
        squares_out + of_record("transmitted", ("transmitted",))
    )
    return u_in, u_out


def judge_equilibrium(
    motion: FaceMotion,
    uncertainties: tuple[FloatArray, FloatArray],
    faces: FacePulses,
    true_strain: FloatArray,
    loading: tuple[int, int],
    specimen: Specimen,
    settings: Settings,
) -> Equilibrium:
    """Find R(t), its floor and the outcome over the loading, samples ``loading[0]`` to ``loading[1]``."""
    first, last = loading
    transit = specimen.transit_time_s
    width = max(round(2 * transit / faces.interval_s), 1) if transit else 1
    difference = motion.force_in_n - motion.force_out_n
    mean_force = 0.5 * (motion.force_in_n + motion.force_out_n)
    smooth_force = moving_mean(mean_force, width)
    # Clear of zero: where hardly any force acts, R is a quotient of two noises.
    loaded = smooth_force > _LEAST_FORCE * max(float(mean_force[first:last].max()), 0.0)
    safe = np.where(loaded, smooth_force, 1.0)
    ratio = np.where(loaded, np.minimum(moving_mean(np.abs(difference), width) / safe, 2.0), 2.0)
    floor = np.where(loaded, np.minimum(np.hypot(*uncertainties) / safe, 2.0), 2.0)

    limit = settings.limits.equilibrium
    within = ratio[first:last] <= limit
    start = _first_lasting(within)
    span = slice(first if start is None else first + start, last)
    typical_floor = float(np.median(floor[span]))
    mean_ratio = float(ratio[span].mean())
    at_start = None if start is None else float(true_strain[first + start])
    outcome = _outcome(start, at_start, mean_ratio, typical_floor, limit, settings.limits.late_strain)
    if outcome is Outcome.CANNOT_BE_DECIDED:
        start = at_start = None
    impulse_in = float(motion.force_in_n[first:last].sum())
    return Equilibrium(
        ratio=frozen(ratio),
        floor=frozen(floor),
        limit=limit,
        outcome=outcome,
        start=None if start is None else first + start,
        strain_at_start=at_start,
        share_within=float(within[0 if start is None else start :].mean()),
        mean_ratio=mean_ratio,
        nrms=_rms(difference[span]) / max(_rms(mean_force[span]), 1e-12),
        impulse_ratio=float(motion.force_out_n[first:last].sum()) / impulse_in if impulse_in > 0 else 0.0,
        typical_floor=typical_floor,
        reverberations=None
        if transit is None or start is None
        else float(faces.time_s[first + start] / transit),
    )


def _first_lasting(within: BoolArray) -> int | None:
    """First sample within the limit from which at least 90 % of the rest is within it."""
    rest = np.arange(within.size, 0, -1)
    share = np.cumsum(within[::-1])[::-1] / rest
    lasting = np.flatnonzero(within & (share >= _SHARE_WITHIN))
    # A last flicker at the very end of the loading is not equilibrium.
    if lasting.size == 0 or lasting[0] > 0.75 * within.size:
        return None
    return int(lasting[0])


def _outcome(
    start: int | None, strain: float | None, mean: float, floor: float, limit: float, late: float
) -> Outcome:
    if start is None:
        # The forces differ by more than the limit even if the floor is taken off them twice.
        clearly = mean - 2 * floor > limit
        return Outcome.CANNOT_BE_DECIDED if floor > limit and not clearly else Outcome.NOT_REACHED
    if floor > limit:
        return Outcome.CANNOT_BE_DECIDED
    return Outcome.REACHED_LATE if strain is not None and strain > late else Outcome.REACHED


def _rms(values: FloatArray) -> float:
    return float(np.sqrt(np.mean(values**2)))
