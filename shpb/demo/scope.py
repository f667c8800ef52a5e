"""What the scope wrote of each demo shot: voltages with noise, hum, drift, and the faults of the day."""

from __future__ import annotations

from dataclasses import dataclass
from zlib import crc32

import numpy as np

from shpb.arrays import FloatArray
from shpb.demo.faults import half_off
from shpb.demo.scenario import Expected
from shpb.demo.truth import DemoTruth
from shpb.forward.recording import Digitised, Disturbance, bridge_ratio, recorded, sampled
from shpb.rig.bar import Bar
from shpb.rig.gauge import Gauge
from shpb.settings import Span

SEED = 20310217
# White noise of the amplifiers themselves: a small signal does not make it smaller.
_LEAST_NOISE_V = 0.002


@dataclass(frozen=True, slots=True, eq=False)
class ScopeRecord:
    """A record as the scope keeps it."""

    names: tuple[str, ...]  # of the channels
    channels: tuple[Digitised, ...]
    start_s: float
    interval_s: float

    @property
    def samples(self) -> int:
        """Samples of each channel."""
        return int(self.channels[0].codes.size)

    @property
    def time_s(self) -> FloatArray:
        """Time of each sample on the record's clock [s]."""
        return even_times(self.start_s, self.interval_s, self.samples)


def even_times(start_s: float, interval_s: float, samples: int) -> FloatArray:
    """Return an even clock of so many samples [s]."""
    return np.asarray(start_s + interval_s * np.arange(samples), dtype=np.float64)


def random_for(name: str) -> np.random.Generator:
    """A generator of its own for everything that bears a name, the same on every run."""
    return np.random.default_rng([SEED, crc32(name.encode())])


def scope_record(truth: DemoTruth) -> ScopeRecord:
    """Record one demo shot, seeded by its id."""
    shot, rig = truth.shot, truth.shot.plan.rig
    random = random_for(shot.shot_id)
    time = even_times(truth.record_start_s, truth.record_interval_s, shot.samples)
    incident = truth.incident_strain
    if shot.expected is Expected.LOOSE_GAUGE:
        incident = half_off(incident, truth.time_s, truth.arrivals_s["incident"] + 75e-6)
    first = (truth.arrivals_s["incident"], truth.arrivals_s["reflected"])
    through = (truth.arrivals_s["transmitted"], truth.arrivals_s["end reflection"])
    parts = (
        (incident, rig.incident_gauge, rig.incident_bar, first),
        (truth.transmitted_strain, rig.transmitted_gauge, rig.transmitted_bar, through),
    )
    channels = []
    for strain, gauge, bar, span in parts:
        # Before the forward model begins there is nothing on the bars.
        seen = np.zeros(time.size)
        running = time > truth.time_s[1]
        seen[running] = sampled(strain, truth.time_s, time[running])
        disturbance = _disturbance(
            seen, time, gauge, bar, span_s=span, peak_to_noise_db=shot.peak_to_noise_db, random=random
        )
        channels.append(
            recorded(seen, gauge, bar.poisson_ratio, time, disturbance=disturbance, random=random)
        )
    if shot.expected is Expected.SWAPPED:
        channels.reverse()
    names = tuple(str(gauge.channels[0]) for gauge in (rig.incident_gauge, rig.transmitted_gauge))
    return ScopeRecord(names, tuple(channels), truth.record_start_s, truth.record_interval_s)


def _disturbance(
    strain: FloatArray,
    time_s: FloatArray,
    gauge: Gauge,
    bar: Bar,
    *,
    span_s: Span,
    peak_to_noise_db: float,
    random: np.random.Generator,
) -> Disturbance:
    """Noise by the peak of the channel's first pulse; hum, offset and drift of a few thousandths of it."""
    pulse = strain[(time_s >= span_s[0]) & (time_s < span_s[1])]
    ratio = bridge_ratio(-pulse, gauge, bar.poisson_ratio)
    peak = float(np.abs(ratio).max() * gauge.excitation_v * gauge.gain)
    return usual_disturbance(peak, float(time_s[-1] - time_s[0]), peak_to_noise_db, random)


def usual_disturbance(
    peak_v: float, duration_s: float, peak_to_noise_db: float, random: np.random.Generator
) -> Disturbance:
    """What the laboratory's chains add to a channel whose first pulse has this peak [V]; 0 for a silent one."""
    return Disturbance(
        white_rms_v=max(peak_v * 10 ** (-peak_to_noise_db / 20), _LEAST_NOISE_V),
        hum_v=0.003 * peak_v + 0.002,
        hum_phase_rad=float(random.uniform(0, 2 * np.pi)),
        offset_v=float(random.uniform(-0.05, 0.05)),
        drift_v_per_s=float(random.uniform(-1, 1)) * 0.004 * peak_v / duration_s,
    )
