"""A campaign to merge: two invented alloys at three rates and five temperatures, with repeats and the usual mishaps.

What the papers state is not quite what was fired. Every specimen has its own small errors (diameter, length,
temperature, striker speed), each within its stated uncertainty. The rig differs from its rig file by one draw for
the whole campaign: that error all shots share, and repeats do not average it out.
"""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass, replace
from functools import cache
from typing import TypeVar

import numpy as np

from shpb.demo.materials import HEXALUNE, WRENMOOR, Alloy
from shpb.demo.scenario import DemoShot, Expected, Fired, Format, bench_rig
from shpb.demo.scope import random_for
from shpb.quantity import Quantity
from shpb.rig.rig import Rig

Part = TypeVar("Part")

RATES_PER_S = (800.0, 1600.0, 2800.0)
TEMPERATURES_C = {"W": (20.0, 100.0, 200.0, 300.0, 400.0), "H": (20.0, 300.0, 600.0, 700.0, 800.0)}
QUASISTATIC_RATES_PER_S = (1e-3, 1e-2, 1e-1)
BENCHES = ("bench_1", "bench_1_long")

U_SIZE_MM = 0.005  # of a micrometer, standard uncertainty
U_TEMPERATURE_K = 1.0
_MOST_K = 2.0  # the furnace is never further off
_SPEED_SPREAD = 0.004  # of the striker at one pressure, relative
_RISE_US = 35.0  # a paper disc in front of the bar: no ringing, and the specimen is not outrun
_MIDDLE_BY_MEAN = 1.07  # rate in the middle of the pulse by the mean rate, which its rise and end make lower
_ROOM_C = 20.0
_REPEATS_IN_THE_COLD, _REPEATS_IN_THE_MIDDLE, _MIDDLE = 3, 2, 1600.0


@dataclass(frozen=True, slots=True)
class _Size:
    """Specimen and bench that suit an alloy at a rate: in equilibrium, and strained beyond 0.2 where it can be."""

    diameter_mm: float
    length_mm: float
    bench: str


_SIZES = {
    ("W", 800.0): _Size(12.0, 4.5, "bench_1_long"),
    ("W", 1600.0): _Size(10.0, 3.5, "bench_1"),
    ("W", 2800.0): _Size(8.0, 2.4, "bench_1"),
    ("H", 800.0): _Size(8.0, 5.5, "bench_1_long"),
    ("H", 1600.0): _Size(8.0, 5.5, "bench_1"),
    ("H", 2800.0): _Size(6.0, 3.0, "bench_1"),
}


@cache
def merge_shots() -> tuple[DemoShot, ...]:
    """Return the shots of the campaign to merge: the plan first, then the mishaps."""
    shots = []
    for alloy in (WRENMOOR, HEXALUNE):
        for rate in RATES_PER_S:
            for celsius in TEMPERATURES_C[alloy.code]:
                count = 1
                if celsius == _ROOM_C:
                    count = _REPEATS_IN_THE_COLD
                elif rate == _MIDDLE:
                    count = _REPEATS_IN_THE_MIDDLE
                shots += [_shot(alloy, rate, celsius, str(number + 1)) for number in range(count)]
    return (*shots, *_mishaps())


def _mishaps() -> tuple[DemoShot, ...]:
    """What a campaign holds besides its plan."""
    odd = _shot(WRENMOOR, 1600.0, 20.0, "4", really=_softer(WRENMOOR, 0.94))
    slip = _shot(HEXALUNE, 1600.0, 20.0, "4")
    clipped = _shot(HEXALUNE, 1600.0, 20.0, "5", size=_Size(12.0, 5.5, "bench_1"))
    late = _shot(WRENMOOR, 2800.0, 20.0, "4", size=_Size(12.0, 6.0, "bench_1"))
    return (
        replace(
            odd, special="an outlying repeat: 6 % softer, which only its repeats can tell",
            striker_speed_m_s=0.95 * odd.striker_speed_m_s, remarks="From the end of the rod",
        ),
        replace(
            slip, special="a slip of the pen: 9 mm written for 8; the mass tells", expected=Expected.MISWRITTEN,
            diameter_mm=round(slip.diameter_mm + 1.0, 2),
        ),
        replace(
            clipped, special="transmitted channel at its rail: specimen too strong for the range",
            expected=Expected.CLIPPED,
        ),
        replace(
            late, special="long specimen at a high rate: in equilibrium late, so its early curve stays out",
            expected=Expected.LATE,
        ),
    )  # fmt: skip


def _softer(alloy: Alloy, factor: float) -> Alloy:
    """The alloy with every stress times a factor."""
    law = alloy.law
    return replace(
        alloy,
        law=replace(law, initial_pa=factor * law.initial_pa, hardening_pa=factor * law.hardening_pa),
    )


def _shot(
    alloy: Alloy,
    rate_per_s: float,
    celsius: float,
    repeat: str,
    *,
    size: _Size | None = None,
    really: Alloy | None = None,
) -> DemoShot:
    size = size or _SIZES[alloy.code, rate_per_s]
    shot_id = f"{alloy.code}-{rate_per_s:.0f}-{celsius:.0f}C-{repeat}"
    random = random_for(f"{shot_id} fired")
    diameter, length = (
        round(nominal + 0.02 * float(random.uniform(-1, 1)), 2)
        for nominal in (size.diameter_mm, size.length_mm)
    )
    error_k = U_TEMPERATURE_K * float(random.standard_normal())
    fired = Fired(
        alloy=really or alloy,
        diameter_mm=diameter + U_SIZE_MM * float(random.standard_normal()),
        length_mm=length + U_SIZE_MM * float(random.standard_normal()),
        temperature_c=celsius + min(max(error_k, -_MOST_K), _MOST_K),
        rig=true_rig(size.bench),
    )
    speed = striker_speed_m_s(alloy, size.diameter_mm, size.length_mm, size.bench, rate_per_s, celsius)
    hot = celsius > 50
    return DemoShot(
        shot_id=shot_id,
        special=f"{rate_per_s:.0f} /s at {celsius:.0f} °C",
        expected=Expected.GOOD,
        alloy=alloy,
        diameter_mm=diameter,
        length_mm=length,
        striker_speed_m_s=speed * (1 + _SPEED_SPREAD * float(random.standard_normal())),
        format=Format.NPZ,
        bench=size.bench,
        temperature_c=celsius,
        rise_us=_RISE_US,
        peak_to_noise_db=52.0,
        interval_us=0.4,
        samples=2150,
        pretrigger_us=150.0,
        date=f"2031-0{4 if alloy is WRENMOOR else 5}-{3 + round(celsius / 50):02d}",
        operator="K.O." if alloy is WRENMOOR else "T.V.",
        lubricant="boron nitride" if hot else "molybdenum disulphide grease",
        fired=fired,
    )


def striker_speed_m_s(
    alloy: Alloy, diameter_mm: float, length_mm: float, bench: str, rate_per_s: float, celsius: float
) -> float:
    """Striker speed that gives a mean true strain rate.

    For equal bars and striker, V = L de/dt + 2 F/Z: the incident face moves at V - F/Z, the transmitted one at F/Z.
    """
    rig = bench_rig(bench)
    if rig.striker is None:
        raise AssertionError("the benches of the demo have strikers")
    rate = _MIDDLE_BY_MEAN * rate_per_s
    middle = rate * (rig.striker.length_m / rig.incident_bar.wave_speed_m_s)  # half the pulse: 2 L/c
    strain = -math.expm1(-middle)
    stress = float(alloy.law.stress_pa(middle, rate, celsius + 273.15)) / (1 - strain)
    force = stress * math.pi / 4 * (diameter_mm / 1e3) ** 2
    return rate * (1 - strain) * length_mm / 1e3 + 2 * force / rig.incident_bar.impedance_n_s_m


@cache
def true_rig(bench: str) -> Rig:
    """The rig as it really is: every number off by its stated uncertainty times one draw for the whole campaign.

    Benches that share bars, gauges and amplifiers share their errors: the draw goes by the name of the number.
    """
    rig = bench_rig(bench)
    return replace(
        rig,
        **{
            name: _drawn(getattr(rig, name), name)
            for name in ("incident_bar", "transmitted_bar", "incident_gauge", "transmitted_gauge", "striker")
        },
    )


def _drawn(part: Part, name: str) -> Part:
    changed = {}
    for field in dataclasses.fields(part):  # type: ignore[arg-type]
        value = getattr(part, field.name)
        if isinstance(value, Quantity) and value.u:
            draw = float(np.clip(random_for(f"rig {name} {field.name}").standard_normal(), -2, 2))
            changed[field.name] = Quantity(value + value.u * draw, value.u, value.origin)
    return dataclasses.replace(part, **changed)  # type: ignore[type-var]
