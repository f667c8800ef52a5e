"""Calibration sessions whose rig is drawn from what its rig file states: the truth is known, and so are the odds.

Light on purpose: short bars, few passages, 1 MS/s, records in memory.

A calibration allows for more than its rig file states: what a one-dimensional impact and contact leave out, alike in
all shots, what no two shots have alike, and dispersion a little unlike that of the section (MODEL, REPEATABILITY,
U_SCALE, common practice). Bars that are only computed do none of it; all is drawn at the size that is allowed for, or
the intervals would hold the truth every time.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

from shpb.arrays import FloatArray
from shpb.calibrate.bars.phase_fit import U_SCALE
from shpb.calibrate.sensitivity.common_terms import LOSS_PER_M, MODEL, REPEATABILITY
from shpb.calibrate.session import BarEnd, CalibrationShot, FiredShot, Session, ShotKind
from shpb.forward.calibration_plan import CalibrationPlan, Losses
from shpb.forward.calibration_shot import bars_apart, bars_together
from shpb.forward.recording import Disturbance, bridge_ratio, recorded
from shpb.forward.shunt import shunt_record
from shpb.quantity import Quantity
from shpb.record.record import Record, Source
from shpb.rig.bar import Bar, Striker
from shpb.rig.gauge import Arrangement, Gauge
from shpb.rig.rig import Rig, budget_name

Q = Quantity
SEED = 20310811
INTERVAL_S, SAMPLES, PRETRIGGER_S, RISE_S = 1e-6, 1150, 250e-6, 15e-6
SHUNT_INTERVAL_S, SHUNT_SAMPLES = 40e-6, 2500
U_SPEED, U_OWN_SPEED = 0.0012, 0.0002  # of the light gates: of a session in common, and of a shot
U_SHUNT = 0.0002
END_LOSS = 0.0005
TOGETHER_M_S = (5.0, 8.0, 11.0)
SHUNTS_OHM = (174_650.0, 87_150.0)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DrawnSession:
    """What the papers say, what is true, and what was recorded."""

    stated: Rig
    true: Rig
    day: Day
    fired: tuple[FiredShot, ...]

    @property
    def session(self) -> Session:
        """As a session file would have it."""
        return Session(
            date="2031-08-11",
            rig_file=Path("drawn.toml"),
            name="drawn",
            shots=tuple(one.shot for one in self.fired),
        )

    def sensitivity(self, station: str) -> float:
        """True strain per volt by the stated one."""
        return chain(self.stated.gauges[station]) / chain(self.true.gauges[station])

    @property
    def truth(self) -> dict[str, float]:
        """What a calibration should find, by the names of the budget; gauge factors hold the whole chain."""
        found = {}
        for side, bar in (("incident", self.true.incident_bar), ("transmitted", self.true.transmitted_bar)):
            found[f"{side} bar: wave speed"] = float(bar.wave_speed_m_s)
            found[f"{side} bar: Poisson's ratio"] = float(bar.poisson_ratio)
        for station, gauge in self.stated.gauges.items():
            factor = float(gauge.gauge_factor) / self.sensitivity(station)
            found[budget_name(station, "factor")] = factor
            found[budget_name(station, "distance")] = float(self.true.gauges[station].to_specimen_m)
        return found


def chain(gauge: Gauge) -> float:
    return float(gauge.effective_gauge_factor * gauge.excitation_v * gauge.gain)


@dataclass(frozen=True, slots=True, kw_only=True)
class Day:
    """What is alike in all shots of one session and stands in no rig file."""

    true: Rig
    waves: Rig  # the same, its dispersion to another scale: Poisson's ratio, as far as the mode alone goes
    speed_error: float  # of the light gates
    losses: Losses
    push: dict[str, float]  # what an impact on this bar gives, by what its speed should give
    across: float  # what goes over the contact, by what should


@cache
def stated_rig() -> Rig:
    """Two bars of two stocks, known as well as a steel tape, a balance and a dial let one know."""
    first = Bar(
        material="steel, first melt", diameter_m=Q(15e-3, 4e-6), length_m=Q(1.4, 0.2e-3),
        density_kg_m3=Q(7850.0, 4.0), wave_speed_m_s=Q(5050.0, 15.0), poisson_ratio=Q(0.29, 0.01),
    )  # fmt: skip
    second = replace(
        first, material="steel, second melt", length_m=Q(1.2, 0.2e-3), density_kg_m3=Q(7840.0, 4.0)
    )
    gauge = Gauge(
        to_specimen_m=Q(0.7, 0.3e-3), channels=("CH1",), gauge_factor=Q(2.08, 0.008 * 2.08), excitation_v=Q(5.0, 2e-3),
        gain=Q(330.0, 0.008 * 330), arrangement=Arrangement.HALF_OPPOSITE, length_m=Q(2e-3),
        resistance_ohm=Q(350.0, 0.1), scope_range_v=(-5.0, 5.0), scope_bits=12,
    )  # fmt: skip
    other = replace(
        gauge, to_specimen_m=Q(0.4, 0.3e-3), channels=("CH2",), gauge_factor=Q(2.11, 0.008 * 2.11)
    )
    striker = Striker(
        length_m=Q(0.2, 3e-5), diameter_m=Q(15e-3, 4e-6), density_kg_m3=Q(7850.0, 4.0), wave_speed_m_s=Q(5050.0, 15.0)
    )  # fmt: skip
    return Rig(
        name="drawn", incident_bar=first, transmitted_bar=second, incident_gauge=gauge, transmitted_gauge=other,
        striker=striker,
    )  # fmt: skip


def drawn_session(number: int) -> DrawnSession:
    """Draw one session: the rig within its stated uncertainties, the light gates, and the noise of every record."""
    random = np.random.default_rng([SEED, number])
    stated, true = stated_rig(), _drawn_rig(stated_rig(), random)
    day = Day(
        true=true,
        waves=_with_other_dispersion(true, random),
        speed_error=U_SPEED * float(random.standard_normal()),
        losses=Losses(per_metre=LOSS_PER_M * abs(float(random.standard_normal())), per_reflection=END_LOSS),
        push={side: _allowed(random, MODEL) for side in ("incident", "transmitted")},
        across=_allowed(random, MODEL),
    )
    fired = [
        _fired(day, random, "BA-I", ShotKind.BARS_APART, 9.0),
        _fired(day, random, "BA-T", ShotKind.BARS_APART, 9.0, bar="transmitted"),
    ]
    fired += [
        _fired(day, random, f"BT-{n}", ShotKind.BARS_TOGETHER, speed)
        for n, speed in enumerate(TOGETHER_M_S, 1)
    ]
    shunts = {ohm: ohm * _allowed(random, U_SHUNT) for ohm in SHUNTS_OHM}
    fired += [
        _shunted(true, random, f"SH-{side[0].upper()}{n}", f"{side}_gauge", ohm, really)
        for side in ("incident", "transmitted")
        for n, (ohm, really) in enumerate(shunts.items(), 1)
    ]
    own = tuple(replace(one, shot=replace(one.shot, striker=_used(one, stated))) for one in fired)
    return DrawnSession(stated=stated, true=true, day=day, fired=own)


def _used(one: FiredShot, stated: Rig) -> Striker | None:
    return None if one.shot.kind is ShotKind.SHUNT else stated.striker


def _drawn_rig(stated: Rig, random: np.random.Generator) -> Rig:
    """Every stated value off by its own normal draw; the striker is of the stock of the incident bar."""

    def drawn(part: Any) -> Any:
        values = {name: getattr(part, name) for name in part.__dataclass_fields__}
        off = {
            name: Q(float(value) + value.u * float(random.standard_normal()))
            for name, value in values.items()
            if isinstance(value, Quantity) and value.u
        }
        return replace(part, **off)

    first = drawn(stated.incident_bar)
    striker = replace(
        drawn(stated.striker), density_kg_m3=first.density_kg_m3, wave_speed_m_s=first.wave_speed_m_s
    )
    return replace(
        stated,
        incident_bar=first,
        transmitted_bar=drawn(stated.transmitted_bar),
        incident_gauge=drawn(stated.incident_gauge),
        transmitted_gauge=drawn(stated.transmitted_gauge),
        striker=striker,
    )


def _with_other_dispersion(true: Rig, random: np.random.Generator) -> Rig:
    bars = (true.incident_bar, true.transmitted_bar)
    first, second = (
        replace(bar, poisson_ratio=Q(bar.poisson_ratio * _allowed(random, U_SCALE))) for bar in bars
    )
    return replace(true, incident_bar=first, transmitted_bar=second)


def _allowed(random: np.random.Generator, share: float) -> float:
    return 1.0 + share * float(random.standard_normal())


def _fired(
    day: Day, random: np.random.Generator, name: str, kind: ShotKind, about_m_s: float, bar: str = "incident"
) -> FiredShot:
    true, at_end = day.true, bar == "transmitted"
    speed = about_m_s * _allowed(random, 0.005)
    pushes = speed * day.push[bar] * _allowed(random, REPEATABILITY)
    plan = CalibrationPlan(
        rig=day.waves,
        striker_speed_m_s=pushes,
        bar=bar,
        at_specimen_end=at_end,
        rise_s=RISE_S,
        losses=day.losses,
    )
    trigger = plan.from_struck_end_m(f"{bar}_gauge") / plan.struck.wave_speed_m_s + 0.1 * RISE_S
    start = trigger - PRETRIGGER_S + INTERVAL_S * float(random.uniform())
    run = bars_together if kind is ShotKind.BARS_TOGETHER else bars_apart
    seen = dict(run(plan, start + INTERVAL_S * np.arange(SAMPLES)).strain)
    if kind is ShotKind.BARS_TOGETHER:
        seen["transmitted_gauge"] = seen["transmitted_gauge"] * day.across * _allowed(random, REPEATABILITY)
    volts = [_volts(seen[station], true, station, random) for station in true.gauges]
    shown = speed * (1 + day.speed_error) * _allowed(random, U_OWN_SPEED)
    shot = CalibrationShot(
        shot_id=name, kind=kind, record_files=(), bar=bar,
        struck_end=BarEnd.SPECIMEN if at_end else BarEnd.FAR,
        striker_speed_m_s=Q(shown, float(np.hypot(U_SPEED, U_OWN_SPEED)) * shown, "light gates"),
    )  # fmt: skip
    return FiredShot(
        shot=shot, record=_record(volts, INTERVAL_S, -PRETRIGGER_S, f"{name} {random.integers(2**62)}")
    )


def _volts(strain: FloatArray, true: Rig, station: str, random: np.random.Generator) -> FloatArray:
    gauge, nu = true.gauges[station], float(true.bar_of(station).poisson_ratio)
    peak = float(np.abs(bridge_ratio(-strain, gauge, nu)).max() * gauge.excitation_v * gauge.gain)
    time = INTERVAL_S * np.arange(strain.size)
    disturbance = _disturbance(peak, float(time[-1]), random)
    return recorded(strain, gauge, nu, time, disturbance=disturbance, random=random).voltage_v


def _disturbance(peak_v: float, duration_s: float, random: np.random.Generator) -> Disturbance:
    """Noise of 50 dB below the peak, hum, offset and drift of a few thousandths."""
    return Disturbance(
        white_rms_v=max(peak_v * 10 ** (-50 / 20), 0.002),
        hum_v=0.002 * peak_v + 0.001,
        hum_phase_rad=float(random.uniform(0, 2 * np.pi)),
        offset_v=float(random.uniform(-0.05, 0.05)),
        drift_v_per_s=float(random.uniform(-1, 1)) * 0.003 * peak_v / duration_s,
    )


def _shunted(
    true: Rig, random: np.random.Generator, name: str, station: str, stated_ohm: float, true_ohm: float
) -> FiredShot:
    time = SHUNT_INTERVAL_S * np.arange(SHUNT_SAMPLES)
    volts = []
    for one, gauge in true.gauges.items():
        disturbance = _disturbance(0.0, float(time[-1]), random)
        if one == station:
            on = (0.03, 0.07)
            digitised = shunt_record(gauge, true_ohm, time, on, disturbance=disturbance, random=random)
        else:
            digitised = recorded(
                np.zeros(time.size), gauge, 0.3, time, disturbance=disturbance, random=random
            )
        volts.append(digitised.voltage_v)
    shot = CalibrationShot(
        shot_id=name, kind=ShotKind.SHUNT, record_files=(), station=station,
        bar=station.removesuffix("_gauge"), shunt_ohm=Q(stated_ohm, U_SHUNT * stated_ohm),
    )  # fmt: skip
    return FiredShot(
        shot=shot, record=_record(volts, SHUNT_INTERVAL_S, 0.0, f"{name} {random.integers(2**62)}")
    )


def _record(volts: list[FloatArray], interval_s: float, start_s: float, name: str) -> Record:
    return Record(
        voltage_v=np.stack(volts), sample_interval_s=interval_s, start_s=start_s, channels=("CH1", "CH2"),
        sources=(Source(name=name, sha256=name, size_bytes=0, reader="drawn"),),
    )  # fmt: skip
