"""Single calibration shots with known truth, for the tests of the sensitivities: forward model, bridge, scope."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from shpb.arrays import FloatArray
from shpb.calibrate.session import BarEnd, CalibrationShot, FiredShot, ShotKind
from shpb.forward.bars import ComplexModulus
from shpb.forward.calibration_plan import NO_LOSSES, CalibrationPlan, Losses
from shpb.forward.calibration_shot import bars_apart, bars_together
from shpb.forward.recording import Disturbance, recorded
from shpb.forward.shunt import shunt_record
from shpb.forward.striker import Shaper
from shpb.quantity import Quantity
from shpb.record.record import Record, Source
from shpb.rig.bar import Bar, Striker
from shpb.rig.gauge import Arrangement, Gauge
from shpb.rig.rig import Rig

Q = Quantity
INTERVAL_S, PRETRIGGER_S = 0.5e-6, 250e-6
QUIET, NOISY = 0.0, 0.005  # white noise by the peak


def bar(**changes: Any) -> Bar:
    """E = 200 GPa, rho = 8000 kg/m3: c0 = 5000 m/s exactly."""
    values: dict[str, Any] = {
        "material": "steel", "diameter_m": Q(0.02, 5e-6), "length_m": Q(1.8, 2e-4), "density_kg_m3": Q(8000.0, 4.0),
        "wave_speed_m_s": Q(5000.0, 1.0), "poisson_ratio": Q(0.29, 0.002),
    }  # fmt: skip
    return Bar(**{**values, **changes})


def gauge(channel: str, to_specimen_m: float, **changes: Any) -> Gauge:
    values: dict[str, Any] = {
        "to_specimen_m": Q(to_specimen_m, 2e-4), "channels": (channel,), "gauge_factor": Q(2.0, 0.02),
        "excitation_v": Q(5.0, 0.005), "gain": Q(200.0, 1.0), "arrangement": Arrangement.HALF_OPPOSITE,
        "resistance_ohm": Q(350.0, 0.35), "scope_range_v": (-5.0, 5.0), "scope_bits": 14,
    }  # fmt: skip
    return Gauge(**{**values, **changes})


def striker(**changes: Any) -> Striker:
    values: dict[str, Any] = {
        "length_m": Q(0.25, 1e-5), "diameter_m": Q(0.02, 5e-6), "density_kg_m3": Q(8000.0, 4.0),
        "wave_speed_m_s": Q(5000.0, 1.0),
    }  # fmt: skip
    return Striker(**{**values, **changes})


def lab(**changes: Any) -> Rig:
    """Stations 0.9 m before and 0.6 m behind the specimen."""
    values: dict[str, Any] = {
        "name": "closed form", "incident_bar": bar(), "transmitted_bar": bar(length_m=Q(1.6, 2e-4)),
        "incident_gauge": gauge("CH1", 0.9), "transmitted_gauge": gauge("CH2", 0.6), "striker": striker(),
    }  # fmt: skip
    return Rig(**{**values, **changes})


def with_q(rig: Rig, **q: float) -> Rig:
    """The rig as it truly is where the strain per volt of a station is ``q`` times the stated one."""
    changes: dict[str, Any] = {}
    for station, value in q.items():
        stated = rig.gauges[station]
        changes[station] = replace(stated, gauge_factor=Q(float(stated.gauge_factor) / value))
    return replace(rig, **changes)


def shot(name: str, kind: ShotKind, speed_m_s: float | None = None, **changes: Any) -> CalibrationShot:
    said = None if speed_m_s is None else Q(speed_m_s, 0.001 * speed_m_s, "light gates")
    values: dict[str, Any] = {"shot_id": name, "kind": kind, "record_files": (), "striker_speed_m_s": said}
    return CalibrationShot(**{**values, **changes})


def fired(
    true: Rig,
    name: str,
    kind: ShotKind,
    speed_m_s: float = 10.0,
    *,
    noise: float = NOISY,
    samples: int = 2700,
    losses: Losses = NO_LOSSES,
    shaper: Shaper | None = None,
    used: Striker | None = None,
    bending: tuple[float, float] = (0.0, 0.0),
    solid: ComplexModulus | None = None,
    seed: int = 1,
    **said: Any,
) -> FiredShot:
    """Fire one shot on a true rig.

    ``bending`` is |a - b|/|a + b| of stations with two channels, before and after the pulse has been at the far end;
    ``used`` the striker, ``said`` what is written of the shot.
    """
    written = shot(name, kind, speed_m_s, **said)
    at_end = written.struck_end is BarEnd.SPECIMEN
    plan = CalibrationPlan(
        rig=true, striker_speed_m_s=speed_m_s, striker=used, bar=written.bar, at_specimen_end=at_end, losses=losses,
        shaper=shaper, solid=solid,
    )  # fmt: skip
    travel = float(plan.from_struck_end_m(f"{written.bar}_gauge") / plan.struck.wave_speed_m_s)
    start = min(travel - PRETRIGGER_S, -10e-6)  # the forward model begins before the impact
    time = start + INTERVAL_S * np.arange(samples)
    run = bars_together if kind is ShotKind.BARS_TOGETHER else bars_apart
    seen = run(plan, time).strain
    turned = float(plan.struck.length_m / plan.struck.wave_speed_m_s)
    share = np.where(time < turned, *bending)
    random = np.random.default_rng(seed)
    channels: dict[str, FloatArray] = {}
    for station, one in true.gauges.items():
        sides = (1.0,) if len(one.channels) == 1 else (1.0 + share, 1.0 - share)
        for channel, side in zip(one.channels, sides, strict=True):
            channels[str(channel)] = _volts(seen[station] * side, true, station, time, noise, random)
    return FiredShot(shot=written, record=record_of(channels, name, seed, start_s=start - travel))


def _volts(
    strain: FloatArray, true: Rig, station: str, time: FloatArray, noise: float, random: np.random.Generator
) -> FloatArray:
    one, nu = true.gauges[station], float(true.bar_of(station).poisson_ratio)
    full = 1e-3 * one.effective_gauge_factor * one.excitation_v * one.gain / 2  # about that of 10 m/s
    disturbance = Disturbance(
        white_rms_v=noise * full, hum_v=noise * full, hum_phase_rad=1.0, offset_v=2 * noise * full,
        drift_v_per_s=noise * full / 1e-3,
    )  # fmt: skip
    return recorded(strain, one, nu, time, disturbance=disturbance, random=random).voltage_v


def shunted(
    true: Rig,
    name: str,
    station: str,
    ohm: float,
    *,
    said_ohm: float | None = None,
    noise_v: float = 0.002,
    hum_v: float = 0.003,
    drift_v_per_s: float = 0.05,
    on_s: tuple[float, float] = (0.03, 0.07),
    seed: int = 1,
    **said: Any,
) -> FiredShot:
    """Shunt one bridge of a true rig by ``ohm``."""
    stated = said_ohm or ohm
    written = shot(name, ShotKind.SHUNT, station=station, **{"shunt_ohm": Q(stated, 1e-4 * stated), **said})
    time = 40e-6 * np.arange(2500.0)
    random = np.random.default_rng(seed)
    disturbance = Disturbance(
        white_rms_v=noise_v, hum_v=hum_v, hum_phase_rad=0.7, offset_v=0.02, drift_v_per_s=drift_v_per_s
    )
    channels: dict[str, FloatArray] = {}
    for other, one in true.gauges.items():
        if other == station:
            digitised = shunt_record(one, ohm, time, on_s, disturbance=disturbance, random=random)
        else:
            digitised = recorded(np.zeros(time.size), one, 0.29, time, disturbance=disturbance, random=random)
        channels[str(one.channels[0])] = digitised.voltage_v
    return FiredShot(shot=written, record=record_of(channels, name, seed, 40e-6, 0.0))


def record_of(
    channels: dict[str, FloatArray],
    name: str,
    seed: int = 1,
    interval_s: float = INTERVAL_S,
    start_s: float = -PRETRIGGER_S,
) -> Record:
    source = Source(name=f"{name}.csv", sha256=f"{name} {seed}", size_bytes=0, reader="drawn")
    return Record(
        voltage_v=np.stack(list(channels.values())), sample_interval_s=interval_s, start_s=start_s,
        channels=tuple(channels), sources=(source,),
    )  # fmt: skip


def renamed(one: FiredShot, **channels: str) -> FiredShot:
    """The same record with other names of its channels: cables plugged in the wrong way round."""
    names = tuple(channels.get(name, name) for name in one.record.channels)
    return replace(one, record=replace(one.record, channels=names))
