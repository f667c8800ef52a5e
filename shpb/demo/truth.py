"""What really happened in the demo shots, on each record's own clock. For tests; never written for users."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass
from functools import cache

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.demo.scenario import DemoShot, Expected, demo_shot, demo_shots
from shpb.errors import InputError
from shpb.forward.onset import tangent_foot_s
from shpb.forward.shot import ForwardShot, fire
from shpb.settings import Span

# All records end before this, in the forward model's time.
_END_S = 0.80e-3
# Specimens of the campaign, the second loading included, are strained to 0.35, see fire().
_COURANT = 0.5
# The scope triggers when the incident strain first passes this share of its peak.
_TRIGGER_LEVEL = 0.10


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DemoTruth:
    """The truth of one demo shot, loading positive.

    Attributes
    ----------
    time_s : float array, shape (samples,)
        Time of the arrays below, on the record's own clock [s]. The grid is finer than the record's and
        reaches beyond it on both sides.
    record_time_of_zero_s : float
        When the loading front, travelling at c0, reaches the incident face, on the record's clock [s].
    record_start_s, record_interval_s : float
        Clock of the record itself [s].
    incident_strain, transmitted_strain : float array
        Surface strain at the two gauges without noise and without the faults of bridge or scope [1].
    force_in_n, force_out_n, velocity_in_m_s, velocity_out_m_s : float array
        At the two bar faces.
    indentation_in_m, indentation_out_m : float array
        By which the bar faces give way under the specimen: they have come nearer by both and by the
        specimen's shortening [m].
    eng_strain, eng_strain_rate_per_s, eng_stress_pa, true_strain, true_stress_pa, temperature_k : float array
        Of the specimen itself, means over its length.
    arrivals_s : dict
        Geometric arrivals at c0 on the record's clock [s]; names in :func:`shpb.forward.shot.arrivals`.
    feet_s : dict
        Onset of the pulses at their gauges ("incident", "reflected", "transmitted") on the record's
        clock [s]: the straight line through the noise-free first rise from 10 to 60 % of its height, carried
        on to zero; the first rise is over where the slope has first fallen to a quarter of its steepest
        (:func:`shpb.forward.onset.tangent_foot_s`). Left out are the reflected pulse that lies on the
        incident one, and a pulse whose first rise is not over 30 us after its geometric arrival.
    loading_end_s : float
        When the first loading of the specimen is over, on the record's clock [s].
    length_after_m : float
        Length after the first loading alone, as a momentum trap leaves it [m].
    """

    shot: DemoShot
    time_s: FloatArray
    record_time_of_zero_s: float
    record_start_s: float
    record_interval_s: float
    incident_strain: FloatArray
    transmitted_strain: FloatArray
    force_in_n: FloatArray
    force_out_n: FloatArray
    velocity_in_m_s: FloatArray
    velocity_out_m_s: FloatArray
    indentation_in_m: FloatArray
    indentation_out_m: FloatArray
    eng_strain: FloatArray
    eng_strain_rate_per_s: FloatArray
    eng_stress_pa: FloatArray
    true_strain: FloatArray
    true_stress_pa: FloatArray
    temperature_k: FloatArray
    arrivals_s: dict[str, float]
    feet_s: dict[str, float]
    loading_end_s: float
    length_after_m: float


def demo_truth(shot_id: str) -> DemoTruth:
    """Return the truth of one demo shot.

    The first call runs the forward model for the whole campaign (some two seconds).

    Raises
    ------
    InputError
        If there is no such shot.
    """
    return campaign_truth()[demo_shot(shot_id).shot_id]


@cache
def campaign_truth() -> dict[str, DemoTruth]:
    """Return the truth of every demo shot by its id."""
    return truths_of(demo_shots(), _END_S)


def truths_of(shots: Sequence[DemoShot], end_s: float) -> dict[str, DemoTruth]:
    """Fire shots side by side and return the truth of each by its id.

    Parameters
    ----------
    shots : sequence of DemoShot
    end_s : float
        When all their records are over, in the forward model's time [s].
    """
    groups: dict[int, list[DemoShot]] = defaultdict(list)
    for shot in shots:
        groups[shot.elements].append(shot)
    found = {}
    for elements, group in groups.items():
        fired = fire([shot.plan for shot in group], end_s, elements=elements, courant=_COURANT)
        found.update({shot.shot_id: _truth(shot, one) for shot, one in zip(group, fired, strict=True)})
    return {shot.shot_id: found[shot.shot_id] for shot in shots}


def _truth(shot: DemoShot, fired: ForwardShot) -> DemoTruth:
    trigger = _trigger_s(fired, shot.interval_us * 1e-6)
    pretrigger = shot.pretrigger_us * 1e-6
    # Record's clock less the forward model's.
    shift = (pretrigger if shot.clock_starts_at_zero else 0.0) - trigger
    arrivals = {name: at + shift for name, at in fired.arrivals_s.items()}
    return DemoTruth(
        shot=shot,
        time_s=frozen(fired.time_s + shift),
        record_time_of_zero_s=shift,
        record_start_s=0.0 if shot.clock_starts_at_zero else -pretrigger,
        record_interval_s=shot.interval_us * 1e-6,
        incident_strain=fired.incident_strain,
        transmitted_strain=fired.transmitted_strain,
        force_in_n=fired.force_in_n,
        force_out_n=fired.force_out_n,
        velocity_in_m_s=fired.velocity_in_m_s,
        velocity_out_m_s=fired.velocity_out_m_s,
        indentation_in_m=fired.indentation_in_m,
        indentation_out_m=fired.indentation_out_m,
        eng_strain=fired.eng_strain,
        eng_strain_rate_per_s=fired.eng_strain_rate_per_s,
        eng_stress_pa=fired.eng_stress_pa,
        true_strain=fired.true_strain,
        true_stress_pa=fired.true_stress_pa,
        temperature_k=fired.temperature_k,
        arrivals_s=arrivals,
        feet_s={name: foot + shift for name, foot in _feet(shot, fired).items()},
        loading_end_s=fired.loading_end_s + shift,
        length_after_m=fired.length_after_m,
    )


def _trigger_s(fired: ForwardShot, interval_s: float) -> float:
    """When the scope triggers: the crossing of its level, as late as the next sample of a free clock."""
    level = _TRIGGER_LEVEL * fired.incident_strain.max()
    crossing = float(fired.time_s[int(np.argmax(fired.incident_strain >= level))])
    return math.ceil(crossing / interval_s) * interval_s


def _feet(shot: DemoShot, fired: ForwardShot) -> dict[str, float]:
    strains = {
        "incident": fired.incident_strain,
        "reflected": fired.incident_strain,
        "transmitted": fired.transmitted_strain,
    }
    feet = {}
    for name, strain in strains.items():
        if name == "reflected" and shot.expected is Expected.OVERLAPPING:
            continue
        with suppress(InputError):  # a soft disc before the striker: the rise is not over within the span
            feet[name] = tangent_foot_s(fired.time_s, strain, _span(fired, name))
    return feet


def _span(fired: ForwardShot, name: str) -> Span:
    """From before the front to beyond the pulse's first rise, before anything else arrives."""
    start = fired.arrivals_s[name]
    return start - 25e-6, start + 30e-6
