"""A long shot with known truth: incident and reflected pulse lie on each other at every station."""

from __future__ import annotations

import dataclasses
from functools import cache

import numpy as np

from shpb.demo.materials import WRENMOOR
from shpb.forward.recording import Disturbance, recorded, sampled
from shpb.forward.shot import ForwardShot, ShotPlan, fire
from shpb.quantity import Quantity
from shpb.record.record import Record
from shpb.rig.bar import Striker
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from tests.synthetic import copper, gauge, sheet, steel_bar

Q = Quantity
INTERVAL_S = 5e-7
SPEED = 8.0


def station(channel: str, to_specimen_m: float) -> Gauge:
    """12 bit over a range that the pulse fills to two thirds."""
    return gauge(channel, to_specimen_m, scope_range_v=(-3.0, 3.0), scope_bits=12, gauge_factor=Q(2.1, 0.004))


def long_rig(
    incident_m: tuple[float, ...] = (1.5, 0.7),
    transmitted_m: tuple[float, ...] = (1.0,),
    transmitted_length_m: float = 3.0,
) -> Rig:
    """Bars of 3 m, c0 = 5000 m/s, and a striker of 1.4 m: a pulse of 560 us, where 1.5 m leave room for 600 us less
    the rise and its tail, 0.7 m for 280 us.
    """
    bar = steel_bar(
        length_m=Q(3.0, 0.001),
        wave_speed_m_s=Q(5000.0, 1.0),
        density_kg_m3=Q(8000.0, 8.0),
        diameter_m=Q(0.02, 1e-5),
    )
    incident = [station(f"I{n}", x) for n, x in enumerate(incident_m, 1)]
    transmitted = [station(f"T{n}", x) for n, x in enumerate(transmitted_m, 1)]
    return Rig(
        name="long bars",
        calibration_date="2031-02-03",
        incident_bar=bar,
        transmitted_bar=dataclasses.replace(bar, length_m=Q(transmitted_length_m, 0.001)),
        incident_gauge=incident[0],
        transmitted_gauge=transmitted[0],
        more_incident_gauges=tuple(incident[1:]),
        more_transmitted_gauges=tuple(transmitted[1:]),
        striker=Striker(
            length_m=Q(1.4), diameter_m=Q(0.02), density_kg_m3=Q(8000.0), wave_speed_m_s=Q(5000.0)
        ),
    )


def long_sheet() -> ShotSheet:
    """The specimen of the shot as its sheet has it: a soft alloy, 10 x 10 mm."""
    model = WRENMOOR.specimen(0.010, 0.010)
    return sheet(
        copper(
            length_m=Q(0.010, 5e-6),
            diameter_m=Q(0.010, 5e-6),
            young_modulus_pa=Q(model.young_modulus_pa),
            density_kg_m3=Q(model.density_kg_m3),
        ),
        striker_speed_m_s=Q(SPEED, 0.02),
    )


@cache
def fired(
    incident_m: tuple[float, ...] = (1.5, 0.7),
    transmitted_m: tuple[float, ...] = (1.0,),
    transmitted_length_m: float = 3.0,
) -> ForwardShot:
    """The shot as it really went, for stations at these places."""
    plan = ShotPlan(
        rig=long_rig(incident_m, transmitted_m, transmitted_length_m),
        specimen=WRENMOOR.specimen(0.010, 0.010),
        striker_speed_m_s=SPEED,
        rise_s=20e-6,
        indented=False,
    )
    return fire([plan], 1500e-6)[0]


def record_of_shot(
    truth: ForwardShot,
    *,
    noise_db: float | None = 46.0,
    seed: int = 1,
    start_s: float = -900e-6,
    stop_s: float = 1500e-6,
) -> Record:
    """What a 12-bit scope wrote of all stations; the clock is that of the truth, later by 1 ms.

    ``noise_db``: peak of each channel to its white noise, None for a clean record of floating-point volts.
    """
    lab = truth.plan.rig
    time = np.arange(start_s, stop_s, INTERVAL_S)
    random = np.random.default_rng(seed)
    volts, names = [], []
    for name, one in lab.gauges.items():
        seen = np.zeros(time.size)
        running = time > truth.time_s[1]
        seen[running] = sampled(truth.station_strain[name], truth.time_s, time[running])
        nu = lab.bar_of(name).poisson_ratio
        if noise_db is None:
            fine = dataclasses.replace(one, scope_bits=30)
            volts.append(recorded(seen, fine, nu, time, disturbance=Disturbance(), random=random).voltage_v)
        else:
            clean = recorded(seen, one, nu, time, disturbance=Disturbance(), random=random).voltage_v
            white = float(np.abs(clean).max()) * 10 ** (-noise_db / 20)
            disturbance = Disturbance(white_rms_v=white, offset_v=0.02)
            volts.append(recorded(seen, one, nu, time, disturbance=disturbance, random=random).voltage_v)
        names.append(str(one.channels[0]))
    return Record(
        voltage_v=np.stack(volts), sample_interval_s=INTERVAL_S, start_s=start_s + 1e-3, channels=tuple(names)
    )
