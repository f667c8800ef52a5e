"""The files of the demo's calibration sessions: rig files, session files, records, read-me."""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from importlib import resources

import numpy as np

from shpb.arrays import FloatArray
from shpb.demo.calibration_scenario import (
    U_SHUNT,
    U_SPEED,
    calibration_truths,
)
from shpb.demo.calibration_truth import CalibrationTruth, TrueShot
from shpb.demo.record_files import record_files
from shpb.demo.scenario import Format
from shpb.demo.scope import ScopeRecord, even_times, random_for, usual_disturbance
from shpb.forward.calibration_shot import bars_apart, bars_together
from shpb.forward.recording import Digitised, Disturbance, bridge_ratio, recorded
from shpb.forward.shunt import shunt_record
from shpb.rig.gauge import Gauge

# The scope triggers at a tenth of the incident pulse; its clock is its own, so at any part of a sample.
_TRIGGER_SHARE = 0.1
# A shunt is switched by hand and recorded slowly.
_SHUNT_INTERVAL_S, _SHUNT_SAMPLES, _SHUNT_ON_S = 20e-6, 5000, (0.03, 0.07)


@dataclass(frozen=True, slots=True)
class _Label:
    """What stands in a record's file."""

    shot_id: str
    date: str
    format: Format


def calibration_files() -> dict[str, bytes]:
    """Every file of the demo's sessions by its path within the folder, but the marker."""
    files: dict[str, bytes] = {}
    for truth in calibration_truths():
        files[truth.rig_file] = truth.rig_text.encode()
        formats = itertools.cycle((Format.CODES, Format.COMMA))
        names = {}
        for shot, form in zip(truth.shots, formats, strict=False):
            ((name, content),) = record_files(
                _Label(shot.shot_id, truth.date, form), calibration_record(truth, shot)
            ).items()
            names[shot.shot_id] = f"records/{truth.name}/{name}"
            files[names[shot.shot_id]] = content
        files[truth.session_file] = session_text(truth, names).encode()
    files["README.txt"] = _readme().encode()
    return files


def calibration_record(truth: CalibrationTruth, shot: TrueShot) -> ScopeRecord:
    """Record one shot or shunt of a session, seeded by its names."""
    random = random_for(f"{truth.name} {shot.shot_id}")
    names = tuple(str(gauge.channels[0]) for gauge in truth.true.gauges.values())
    if shot.kind == "shunt":
        return _shunted(truth, shot, names, random)
    interval, pretrigger = truth.interval_us * 1e-6, truth.pretrigger_us * 1e-6
    station = f"{shot.bar}_gauge"
    plan = truth.plan(shot)
    trigger = (
        plan.from_struck_end_m(station) / plan.struck.wave_speed_m_s
        + _TRIGGER_SHARE * plan.rise_s
        + interval * float(random.uniform())
    )
    since_impact = even_times(trigger - pretrigger, interval, truth.samples)
    run = bars_together if shot.kind == "bars-together" else bars_apart
    seen = run(plan, since_impact).strain
    time = even_times(-pretrigger, interval, truth.samples)
    channels = []
    for name, gauge in truth.true.gauges.items():
        nu = float(truth.true.bar_of(name).poisson_ratio)
        peak = float(np.abs(bridge_ratio(-seen[name], gauge, nu)).max() * gauge.excitation_v * gauge.gain)
        disturbance = usual_disturbance(peak, float(time[-1] - time[0]), shot.peak_to_noise_db, random)
        channels.append(recorded(seen[name], gauge, nu, time, disturbance=disturbance, random=random))
    return ScopeRecord(names, tuple(channels), -pretrigger, interval)


def _shunted(
    truth: CalibrationTruth, shot: TrueShot, names: tuple[str, ...], random: np.random.Generator
) -> ScopeRecord:
    """Both channels while the bridge of one of them is shunted."""
    time = even_times(0.0, _SHUNT_INTERVAL_S, _SHUNT_SAMPLES)
    channels = []
    for name, gauge in truth.true.gauges.items():
        disturbance = usual_disturbance(0.0, float(time[-1]), shot.peak_to_noise_db, random)
        if name == shot.station:
            on = _SHUNT_ON_S
            channels.append(
                shunt_record(gauge, shot.shunt_ohm, time, on, disturbance=disturbance, random=random)
            )
        else:
            channels.append(_silent(gauge, time, disturbance, random))
    return ScopeRecord(names, tuple(channels), 0.0, _SHUNT_INTERVAL_S)


def _silent(
    gauge: Gauge, time_s: FloatArray, disturbance: Disturbance, random: np.random.Generator
) -> Digitised:
    """A channel on which nothing happens."""
    return recorded(np.zeros(time_s.size), gauge, 0.3, time_s, disturbance=disturbance, random=random)


def session_text(truth: CalibrationTruth, records: dict[str, str]) -> str:
    """Text of a session file; ``records`` are the record files by shot id, as seen from it."""
    lines = [
        "# Calibration session of an invented laboratory. Every value is invented.",
        "",
        "[calibration]",
        f"date = {truth.date}",
        f'rig = "{truth.rig_file}"',
        f'name = "{truth.name}"',
        "holds_days = 365",
        f"temperature_C = {{ value = {truth.temperature_c:g}, u = 1 }}",
        f'operator = "{truth.operator}"',
        f'remarks = "{truth.remarks}"',
        *(['propagation = ["incident", "transmitted"]'] if truth.solid is not None else []),
    ]
    for shot in truth.shots:
        lines += ["", "[[shot]]", f'id = "{shot.shot_id}"', f'kind = "{shot.kind}"']
        lines.append(f'record = "{records[shot.shot_id]}"')
        lines += _said_of(shot)
    return "\n".join(lines) + "\n"


def _said_of(shot: TrueShot) -> list[str]:
    if shot.kind == "shunt":
        value, u = shot.shown_shunt_ohm, U_SHUNT * shot.shown_shunt_ohm
        return [
            f'station = "{shot.station}"',
            f'shunt_ohm = {{ value = {value:.0f}, u = {u:.0f}, origin = "bench multimeter" }}',
        ]
    value, u = shot.shown_speed_m_s, U_SPEED * shot.shown_speed_m_s
    speed = f'striker_speed_m_s = {{ value = {value:.3f}, u = {u:.4f}, origin = "light gates" }}'
    if shot.kind == "bars-together":
        return [speed]
    end = "specimen" if shot.at_specimen_end else "far"
    return [f'bar = "{shot.bar}"', f'struck_end = "{end}"', speed]


def _readme() -> str:
    text = (
        resources.files("shpb.demo").joinpath("texts", "README_calibration.txt").read_text(encoding="utf-8")
    )
    lines = (f"  {truth.session_file:<33} {truth.remarks}" for truth in calibration_truths())
    return text.replace("{sessions}", "\n".join(lines))
