"""Bars of a standard linear solid: E* in closed form, causal; strains at any station follow from it exactly."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from shpb.calibrate.session import BarEnd, CalibrationShot, FiredShot, ShotKind
from shpb.pulse.bridge import bridge_output
from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig
from tests.synthetic import gauge, rig, smooth_pulse, steel_bar

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
Q = Quantity
DENSITY = 1190.0


@dataclass(frozen=True)
class Solid:
    """E* = E_r + (E_u - E_r) i w tau/(1 + i w tau) (C. Zener, Elasticity and Anelasticity of Metals, 1948)."""

    relaxed_pa: float = 5.0e9
    unrelaxed_pa: float = 5.6e9
    tau_s: float = 12e-6
    density_kg_m3: float = DENSITY

    def speed_m_s(self, frequency_hz: Array) -> Complex:
        """Complex speed sqrt(E*/rho)."""
        turn = 2j * np.pi * frequency_hz * self.tau_s
        modulus = self.relaxed_pa + (self.unrelaxed_pa - self.relaxed_pa) * turn / (1 + turn)
        return np.asarray(np.sqrt(modulus / self.density_kg_m3))

    def xi_per_m(self, frequency_hz: Array) -> Complex:
        """xi = i w/c*."""
        return np.asarray(2j * np.pi * frequency_hz / self.speed_m_s(frequency_hz))

    @property
    def slow_m_s(self) -> float:
        return float(np.sqrt(self.relaxed_pa / self.density_kg_m3))


def polymer_bar(solid: Solid, **changes: object) -> Bar:
    """20 mm, 2 m; Poisson's ratio zero, so that one-dimensional theory is exact."""
    values: dict[str, object] = {
        "material": "acrylic",
        "density_kg_m3": Q(solid.density_kg_m3, 0.0),
        "wave_speed_m_s": Q(solid.slow_m_s, 1.0),
        "poisson_ratio": Q(0.0, 0.0),
        "length_m": Q(2.0, 0.0),
        "yield_strength_pa": None,
    }
    return steel_bar(**{**values, **changes})


def polymer_rig(solid: Solid, to_specimen_m: float = 0.8, **changes: object) -> Rig:
    values: dict[str, object] = {
        "name": "acrylic bars",
        "incident_bar": polymer_bar(solid),
        "transmitted_bar": polymer_bar(solid),
        "incident_gauge": gauge("A", Q(to_specimen_m, 0.0), gain=Q(40.0)),
        "transmitted_gauge": gauge("B", Q(0.4, 0.0), gain=Q(40.0)),
        "striker": None,
    }
    return rig(**{**values, **changes})


def spectrum_of(pulse: Array, length: int) -> Complex:
    return np.asarray(np.fft.rfft(pulse, length))


def passages(pulse: Array, interval_s: float, ways: Mapping[float, float], xi: object, samples: int) -> Array:
    """Strain of a pulse after several ways [m] with a sign each; ``xi`` gives the coefficient at frequencies."""
    length = 8 * samples
    frequency = np.fft.rfftfreq(length, interval_s)
    coefficient = xi(frequency)  # type: ignore[operator]
    total = sum(sign * np.exp(-coefficient * way) for way, sign in ways.items())
    return np.asarray(np.fft.irfft(spectrum_of(pulse, length) * total, length)[:samples])


def apart(
    solid: Solid,
    lab: Rig,
    *,
    shot_id: str = "P1",
    noise: float = 0.0,
    seed: int = 1,
    duration_s: float = 60e-6,
    rise_s: float = 12e-6,
    interval_s: float = 1e-6,
    samples: int = 2400,
    struck_end: BarEnd = BarEnd.FAR,
    xi: object = None,
    height: float = 1e-3,
) -> FiredShot:
    """A free incident bar, struck at one end: y, 2L - y (turned), 2L + y, 4L - y (turned); noise by the peak."""
    bar, there = lab.incident_bar, lab.incident_gauge.to_specimen_m
    length = float(bar.length_m)
    y = float(there) if struck_end is BarEnd.SPECIMEN else length - float(there)
    time = interval_s * np.arange(samples) - 150e-6
    pulse = smooth_pulse(time, height, duration_s, rise_s)
    ways = {y: 1.0, 2 * length - y: -1.0, 2 * length + y: 1.0, 4 * length - y: -1.0}
    strain = passages(pulse, interval_s, ways, xi or solid.xi_per_m, samples)
    volts = bridge_output(-strain, lab.incident_gauge, bar.poisson_ratio)
    if noise:
        volts = volts + np.random.default_rng(seed).normal(0.0, noise * np.abs(volts).max(), volts.shape)
    shot = CalibrationShot(
        shot_id=shot_id,
        kind=ShotKind.BARS_APART,
        record_files=(Path(f"{shot_id}.csv"),),
        struck_end=struck_end,
    )
    record = Record(voltage_v=volts[None], sample_interval_s=interval_s, start_s=0.0, channels=("A",))
    return FiredShot(shot=shot, record=record)
