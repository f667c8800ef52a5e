"""Calibration sessions of the invented laboratory, and what is really true of its rigs on these days.

The rig files are off by what a first guess is off: wave speeds by up to 0.4 %, the chains of the gauges by 1 to 2 %,
one gauge of bench 4 by 1 to 2 mm. The light gates have one error for all shots of a session.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import cache
from typing import TypeVar

from shpb.demo.calibration_truth import CalibrationTruth, TrueShot, bars_of
from shpb.demo.scenario import bench_text
from shpb.demo.scope import random_for
from shpb.forward.calibration_plan import Losses
from shpb.forward.solids import StandardLinearSolid
from shpb.quantity import Quantity
from shpb.rig.bar import Bar, Striker
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.rig.rig_file import rig_from_text

Part = TypeVar("Part", Bar, Gauge, Striker)

U_SPEED = 0.0015  # of the light gates, relative: spacing in common, and timing
_OWN_SPEED = 0.0003  # of the timing alone
U_SHUNT = 0.0002  # of a resistor, relative
ACRYLIC = StandardLinearSolid(relaxed_pa=5.20e9, unrelaxed_pa=5.70e9, relaxation_time_s=12e-6)
_ACRYLIC_DENSITY = 1190.6


@cache
def calibration_truths() -> tuple[CalibrationTruth, ...]:
    """Return the sessions of the demo, by date."""
    return _bench_4_february(), _bench_3(), _bench_4_august()


def _bench_4_february() -> CalibrationTruth:
    text = bench_text("bench_4")
    true = _true_bench_4(
        rig_from_text(text, "bench 4"),
        speeds=(4884.6, 4887.5),
        incident={"to_specimen_m": 0.9001, "gauge_factor": 2.09 * 1.006, "gain": 300 * 1.0110},
        transmitted={"to_specimen_m": 0.5982, "gauge_factor": 3.42 * 0.992, "gain": 430 * 0.9965},
    )
    return CalibrationTruth(
        name="bench_4_2031-02-03", date="2031-02-03", rig_file="calibration/bench_4.toml", rig_text=text, true=true,
        speed_error=0.0010, shots=_all_shots("2031-02-03", 0.0010), temperature_c=20.0, operator="K.O.",
        remarks="First calibration of the bench", losses=_STEEL_LOSSES,
    )  # fmt: skip


def _bench_4_august() -> CalibrationTruth:
    text = _renewed(bench_text("bench_4"))
    true = _true_bench_4(
        rig_from_text(text, "bench 4"),
        speeds=(4883.8, 4886.7),  # three kelvins warmer
        incident={"to_specimen_m": 0.9001, "gauge_factor": 2.09 * 1.006, "gain": 300 * 1.0125},
        transmitted={"to_specimen_m": 0.6054, "gauge_factor": 3.38 * 0.990, "gain": 430 * 0.9965},
    )
    return CalibrationTruth(
        name="bench_4_2031-08-11", date="2031-08-11", rig_file="calibration/bench_4_august.toml", rig_text=text,
        true=true, speed_error=-0.0012, shots=_all_shots("2031-08-11", -0.0012), temperature_c=23.0, operator="T.V.",
        remarks="Transmitted gauge renewed on 2031-08-04", losses=_STEEL_LOSSES,
    )  # fmt: skip


def _bench_3() -> CalibrationTruth:
    text = bench_text("bench_3")
    stated = rig_from_text(text, "bench 3")
    speed = ACRYLIC.wave_speed_m_s(_ACRYLIC_DENSITY)
    bars = {
        side: _with(
            bar, density_kg_m3=_ACRYLIC_DENSITY, wave_speed_m_s=speed, poisson_ratio=0.355, length_m=length
        )
        for (side, bar), length in zip(bars_of(stated).items(), (2.0003, 1.9998), strict=True)
    }
    true = replace(
        stated,
        incident_bar=bars["incident"],
        transmitted_bar=bars["transmitted"],
        incident_gauge=_with(stated.incident_gauge, to_specimen_m=1.0002),
        transmitted_gauge=_with(stated.transmitted_gauge, to_specimen_m=0.9999),
        striker=_with(stated.striker, density_kg_m3=_ACRYLIC_DENSITY, wave_speed_m_s=speed),
    )
    plan = (("BA-I1", "incident", 4.0), ("BA-I2", "incident", 5.5), ("BA-I3", "incident", 7.0),
            ("BA-T1", "transmitted", 4.5), ("BA-T2", "transmitted", 6.5))  # fmt: skip
    return CalibrationTruth(
        name="bench_3_2031-03-19", date="2031-03-19", rig_file="calibration/bench_3.toml", rig_text=text, true=true,
        speed_error=0.0006,
        shots=tuple(
            _fired(("2031-03-19", 0.0006), name, "bars-apart", speed, bar=bar, end=bar == "transmitted", db=52.0)
            for name, bar, speed in plan
        ),
        temperature_c=21.0, operator="K.O.", remarks="Acrylic bars: attenuation and phase speed are to be measured",
        solid=ACRYLIC, interval_us=0.5, samples=5600, pretrigger_us=600.0, rise_us=30.0,
    )  # fmt: skip


_STEEL_LOSSES = Losses(per_metre=0.0002, per_reflection=0.0010)
_TOGETHER_M_S = (3.0, 5.0, 7.0, 9.0, 11.0)  # the transmitted gauge of bench 4 reaches its range near 13 m/s
_TOGETHER_DB = (46.0, 48.0, 50.0, 52.0, 54.0)
_SHUNTS_OHM = (174_650.0, 87_150.0)


def _all_shots(date: str, speed_error: float) -> tuple[TrueShot, ...]:
    """Bars apart, bars together and shunts of one session."""
    day = (date, speed_error)
    apart = [
        _fired(day, f"BA-{bar[0].upper()}{n}", "bars-apart", speed, bar=bar, end=bar == "transmitted", db=db)
        for bar in ("incident", "transmitted")
        for n, speed, db in ((1, 8.0, 52.0), (2, 10.0, 50.0))
    ]
    together = [
        _fired(day, f"BT-{n}", "bars-together", speed, db=db)
        for n, (speed, db) in enumerate(zip(_TOGETHER_M_S, _TOGETHER_DB, strict=True), 1)
    ]
    shunts = [
        _shunt(date, f"SH-{bar[0].upper()}{n}", bar, ohm)
        for bar in ("incident", "transmitted")
        for n, ohm in enumerate(_SHUNTS_OHM, 1)
    ]
    return (*apart, *together, *shunts)


def _fired(
    day: tuple[str, float],
    name: str,
    kind: str,
    about_m_s: float,
    *,
    db: float,
    bar: str = "incident",
    end: bool = False,
) -> TrueShot:
    """A shot near the speed that was set: the gun scatters by half a per cent, the timing by its own error."""
    date, error = day
    random = random_for(f"{date} {name} striker")
    speed = about_m_s * (1 + 0.005 * float(random.standard_normal()))
    shown = speed * (1 + error) * (1 + _OWN_SPEED * float(random.standard_normal()))
    return TrueShot(
        shot_id=name, kind=kind, bar=bar, at_specimen_end=end, striker_speed_m_s=speed,
        shown_speed_m_s=round(shown, 3), peak_to_noise_db=db,
    )  # fmt: skip


def _shunt(date: str, name: str, bar: str, ohm: float) -> TrueShot:
    random = random_for(f"{date} {ohm:.0f} ohm")  # one resistor for both bridges
    true = ohm * (1 + 0.5 * U_SHUNT * float(random.standard_normal()))
    return TrueShot(shot_id=name, kind="shunt", bar=bar, shunt_ohm=true, shown_shunt_ohm=ohm)


def _true_bench_4(
    stated: Rig,
    *,
    speeds: tuple[float, float],
    incident: Mapping[str, float],
    transmitted: Mapping[str, float],
) -> Rig:
    """Bench 1 as it is: two bars and a striker of one stock, their sizes off by less than is stated."""
    common = {"density_kg_m3": 8013.0, "poisson_ratio": 0.293}
    first = _with(
        stated.incident_bar, diameter_m=19.002e-3, length_m=1.8003, wave_speed_m_s=speeds[0], **common
    )
    second = _with(
        stated.transmitted_bar, diameter_m=18.999e-3, length_m=1.5998, wave_speed_m_s=speeds[1], **common
    )
    return replace(
        stated,
        incident_bar=first,
        transmitted_bar=second,
        incident_gauge=_with(stated.incident_gauge, excitation_v=5.0012, resistance_ohm=350.1, **incident),
        transmitted_gauge=_with(
            stated.transmitted_gauge, excitation_v=4.9991, resistance_ohm=349.9, **transmitted
        ),
        striker=_with(
            stated.striker,
            length_m=300.03e-3,
            diameter_m=19.001e-3,
            density_kg_m3=8013.0,
            wave_speed_m_s=speeds[0],
        ),
    )


def _with(part: Part | None, **values: float) -> Part:
    """A part of the rig with true values in place of the stated ones."""
    assert part is not None
    planted = {name: Quantity(value, 0.0, "planted") for name, value in values.items()}
    return replace(part, **planted)  # type: ignore[arg-type]


def _renewed(text: str) -> str:
    """The rig file of bench 4 after its transmitted gauge was renewed."""
    changes = {
        ", before its first calibration.": ", since its transmitted gauge was renewed.",
        'remarks = "Demo: every value is invented"':
            'remarks = "Demo: every value is invented; transmitted gauge renewed on 2031-08-04"',
        "value = 600.0, u = 0.3": "value = 604.0, u = 0.3",
        "value = 3.42, u_percent": "value = 3.38, u_percent",
    }  # fmt: skip
    for old, new in changes.items():
        if text.count(old) != 1:
            raise AssertionError(f"the rig file of bench 4 has changed: {old!r}")
        text = text.replace(old, new)
    return text
