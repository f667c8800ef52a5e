"""Bars-apart records of a pulse that runs to and fro, by exact phases alone: ways, signs and losses by hand."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache
from typing import Any

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.calibrate.session import BarEnd, FiredShot, ShotKind
from shpb.pulse.bridge import strain_from_voltage
from shpb.quantity import Quantity
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.wave.pochhammer import first_mode_at_frequency
from tests.calibrate.fired import bar, gauge, lab, record_of, shot

Q = Quantity
C0, NU, RADIUS_M = 5000.0, 0.29, 0.01
LENGTH_M, U_LENGTH_M = 1.8, 0.3e-3
STATION_M, U_STATION_M = 0.9, 0.5e-3
INTERVAL_S, SAMPLES, LEAD_S = 0.5e-6, 3000, 200e-6
PULSE_S, RISE_S, PEAK = 100e-6, 15e-6, 1e-3


@dataclass(frozen=True, slots=True, kw_only=True)
class Run:
    """How one record is off what the papers say; the defaults are true to them."""

    length_m: float = LENGTH_M
    station_m: tuple[float, ...] = (STATION_M,)
    c0: float = C0
    noise: float = 0.003  # of the peak
    hum: float = 0.01
    kept: float = 0.995  # of the amplitude, at each end
    end_sign: float = -1.0
    late_s: float = 0.0  # what everything after the first passage is late
    stray: float = 0.0  # share that comes 40 us late in all later passages: the bar touches something
    rise_s: float = RISE_S
    seed: int = 1
    at_specimen: bool = False
    pulse_s: float = PULSE_S
    samples: int = SAMPLES


@cache
def _grid(c0: float, samples: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Frequency, wavenumber and a band that ends before the surface strain of the mode vanishes."""
    frequency: FloatArray = np.fft.rfftfreq(8 * samples, INTERVAL_S).astype(np.float64)
    fa_c0 = frequency * RADIUS_M / c0
    inside = fa_c0 < 0.285
    speed = np.full(frequency.size, c0)
    speed[inside] = c0 * first_mode_at_frequency(fa_c0[inside], NU).phase_speed
    band = 0.5 * (1 + np.cos(np.pi * np.clip((fa_c0 - 0.24) / 0.04, 0, 1)))
    return frequency, 2 * np.pi * frequency / speed, np.where(inside, band, 0.0)


@cache
def _pulse(samples: int, pulse_s: float, rise_s: float) -> ComplexArray:
    """Spectrum of the pulse at the struck end, a flat top with cosine flanks, at time zero."""
    time = INTERVAL_S * np.arange(8 * samples)
    up = 0.5 * (1 - np.cos(np.pi * np.clip(time / rise_s, 0, 1)))
    down = 0.5 * (1 - np.cos(np.pi * np.clip((time - pulse_s) / rise_s, 0, 1)))
    return np.fft.rfft(PEAK * (up - down))


def strain_of_run(run: Run, station_m: float) -> FloatArray:
    """Compression positive, the first front of the farthest way LEAD_S after the start, shape (samples,)."""
    frequency, wavenumber, band = _grid(run.c0, run.samples)
    y = station_m if run.at_specimen else run.length_m - station_m
    first = min(one if run.at_specimen else run.length_m - one for one in run.station_m)
    spectrum = np.zeros(frequency.size, dtype=complex)
    for turns in range(8):
        way = 2 * run.length_m * ((turns + 1) // 2) + (y if turns % 2 == 0 else -y)
        late = run.late_s if turns else 0.0
        factor = (run.end_sign * run.kept) ** turns
        if turns:
            factor = factor * (1 + run.stray * np.exp(-2j * np.pi * frequency * 40e-6))
        spectrum += factor * np.exp(-1j * (wavenumber * way + 2 * np.pi * frequency * late))
    shift = np.exp(-2j * np.pi * frequency * (LEAD_S - first / run.c0))
    seen = np.fft.irfft(
        spectrum * _pulse(run.samples, run.pulse_s, run.rise_s) * band * shift, 8 * run.samples
    )
    return np.asarray(seen[: run.samples], dtype=float)


def run_record(run: Run, rig: Rig, **said: Any) -> FiredShot:
    """The record of a run at the first stations of the incident bar."""
    random = np.random.default_rng([20310811, run.seed])
    time = INTERVAL_S * np.arange(run.samples)
    channels: dict[str, FloatArray] = {}
    stations = [one for name, one in rig.gauges.items() if name.startswith("incident")]
    for station, station_m in zip(stations, run.station_m, strict=False):
        strain = strain_of_run(run, station_m)
        strain = strain + PEAK * run.hum * np.sin(2 * np.pi * 50 * time + random.uniform(0, 2 * np.pi))
        strain = strain + PEAK * run.noise * random.standard_normal(run.samples)
        channels[str(station.channels[0])] = -strain * _volts_per_strain(station)
    name = said.pop("name", f"BA-{run.seed}")
    end = BarEnd.SPECIMEN if run.at_specimen else BarEnd.FAR
    written = shot(name, ShotKind.BARS_APART, struck_end=end, **said)
    return FiredShot(shot=written, record=record_of(channels, name, run.seed, INTERVAL_S))


def _volts_per_strain(station: Gauge) -> float:
    """Linear: the stations of these rigs have linear amplifiers."""
    return 1.0 / float(strain_from_voltage(np.array([1.0]), station, NU)[0])


def run_rig(stations_m: tuple[float, ...] = (STATION_M,), u_m: float = U_STATION_M, **changes: Any) -> Rig:
    """What the papers say; c0 and Poisson's ratio as a handbook has them, a little off."""
    first = bar(length_m=Q(LENGTH_M, U_LENGTH_M), wave_speed_m_s=Q(4950.0, 50.0), poisson_ratio=Q(0.30, 0.01),
                **changes)  # fmt: skip
    named = [
        gauge(f"CH{n}", x, linear_amplifier=True) for n, x in zip((1, 3, 4, 5), stations_m, strict=False)
    ]
    named = [replace(one, to_specimen_m=Q(float(one.to_specimen_m), u_m)) for one in named]
    return lab(
        incident_bar=first,
        transmitted_bar=bar(material="another steel"),
        incident_gauge=named[0],
        more_incident_gauges=tuple(named[1:]),
    )
