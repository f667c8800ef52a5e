"""One shot from its plan to its truth: what the gauges see, and what really happened at the specimen.

Time zero is when the loading front, travelling at c0, reaches the specimen's incident face. Arrivals
follow from distances alone. The impact end is free once the striker has let go, and so is the far end
of the transmitted bar: second loading and end reflections are in the result as they are in a record.

At the faces the bars answer with their long-wave impedance, F = Z v. For the first mode it would be
F = Z v c/c0, less by 1 % at f a/c0 = 0.1: by estimate some 0.02 % of a pulse,
whose spectrum has fallen off by then.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.errors import InputError
from shpb.forward.bars import BarWaves
from shpb.forward.contact import FaceSprings
from shpb.forward.specimen import SpecimenHistory, SpecimenModel, SpecimenRun, longest_time_step_s
from shpb.forward.striker import Shaper, impact_force, limited_by_yield, shaped_impact_force
from shpb.rig.bar import Bar, Striker
from shpb.rig.rig import Rig

# Nothing of the front comes earlier than this: the band limit rings a little ahead of it.
_LEAD_S = 60e-6
_TAIL_S = 80e-6
_LONGEST_STEP_S = 0.4e-6  # the band ends near 150 kHz


@dataclass(frozen=True, slots=True, kw_only=True)
class ShotPlan:
    """All that the forward model must know of a shot."""

    rig: Rig
    specimen: SpecimenModel
    striker_speed_m_s: float
    temperature_k: float = 293.15
    striker: Striker | None = None  # another than the rig's
    rise_s: float = 10e-6  # of the striker's impact on the bare bar
    shaper: Shaper | None = None
    dispersive: bool = True
    indented: bool = True  # the bar faces give way under the specimen

    @property
    def striker_used(self) -> Striker:
        """The plan's own striker, else the rig's."""
        striker = self.striker or self.rig.striker
        if striker is None:
            raise InputError(
                "there is no striker", where="shot plan", mend="Describe one in the rig file or the plan"
            )
        return striker


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ForwardShot:
    """What happened: arrays of shape (samples,) on one even grid, loading positive, read-only.

    Forces are those on the bar faces, velocities those of the bar faces, less the mean indentation as
    one-dimensional theory has them; strain, rate, stress and temperature are the specimen's own (means over
    its length). The bar faces have come nearer by the specimen's shortening and both indentations.
    ``incident_strain`` and ``transmitted_strain`` are what a perfect gauge on the bar's surface sees;
    ``station_strain`` holds the same for every station of :attr:`shpb.rig.rig.Rig.gauges`, by name.
    """

    plan: ShotPlan
    arrivals_s: dict[str, float]  # see :func:`arrivals`
    time_s: FloatArray
    incident_strain: FloatArray
    transmitted_strain: FloatArray
    station_strain: Mapping[str, FloatArray]
    incident_force_n: FloatArray  # of the wave that comes to the front face
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
    plastic_strain: FloatArray
    temperature_k: FloatArray

    @property
    def loading_end_s(self) -> float:
        """When the first loading is over: the rate falls below a fifth of its largest [s]."""
        first = (self.time_s > 0) & (self.time_s < self.arrivals_s["second loading"])
        rate = self.eng_strain_rate_per_s[first]
        top = int(np.argmax(rate))
        slow = rate[top:] < 0.2 * rate[top]
        return float(self.time_s[first][top + int(np.argmax(slow)) if slow.any() else -1])

    @property
    def length_after_m(self) -> float:
        """Length after the first loading alone, unloaded, as a momentum trap leaves it [m]."""
        between = np.searchsorted(self.time_s, self.arrivals_s["second loading"] - 20e-6)
        plastic = float(self.plastic_strain[between])
        return self.plan.specimen.length_m * math.exp(-plastic)


def fire(
    plans: Sequence[ShotPlan],
    end_s: float,
    *,
    elements: int = 4,
    courant: float = 0.5,
    damping: float = 0.1,
) -> list[ForwardShot]:
    """Run several shots side by side.

    Parameters
    ----------
    plans : sequence of ShotPlan
    end_s : float
        Until when after time zero [s]; the last 80 us before it may hold ringing of the cut-off end.
    elements : int
        Elements along each specimen.
    courant : float
        Time step by the shortest element transit; must stay below 1 - e at the largest strain e, below
        0.85 (1 - e) where the specimen rings between two loadings (the damping shortens the stable step).
        At 1 (elastic specimens only) elastic waves travel exactly.
    damping : float
        Of elastic ringing, see :class:`shpb.forward.specimen.SpecimenRun`.

    Raises
    ------
    InputError
        If a plan cannot be run: no striker, one still pushing when its pulse comes back, or a strain
        too large for the step.
    """
    if not plans:
        return []
    step = min(courant * longest_time_step_s([p.specimen for p in plans], elements), _LONGEST_STEP_S)
    begin = -max(_time(p.rig.incident_bar, p.rig.incident_bar.length_m) for p in plans) - _LEAD_S
    samples = math.ceil((end_s + _TAIL_S - begin) / step)
    time = np.asarray(begin + step * np.arange(samples), dtype=np.float64)
    zero = int(np.searchsorted(time, -_LEAD_S / 2))

    lines = [_Lines(plan, time) for plan in plans]
    run = SpecimenRun(
        [p.specimen for p in plans],
        np.array([p.rig.incident_bar.impedance_n_s_m for p in plans]),
        np.array([p.rig.transmitted_bar.impedance_n_s_m for p in plans]),
        np.array([p.temperature_k for p in plans]),
        elements=elements,
        time_step_s=step,
        springs=_springs(plans),
        damping=damping,
    )
    histories = _march(run, lines, time, zero)
    return [_shot(plan, line, time, h) for plan, line, h in zip(plans, lines, histories, strict=True)]


def _springs(plans: Sequence[ShotPlan]) -> FaceSprings | None:
    giving = [plan.indented for plan in plans]
    if not any(giving):
        return None
    return FaceSprings.of_bars([(p.rig.incident_bar, p.rig.transmitted_bar) for p in plans], giving=giving)


class _Faces(NamedTuple):
    """What happened at the two faces of one specimen, shape (samples,)."""

    incoming: FloatArray  # force of the wave that comes to the front face [N]
    returning: FloatArray  # the same at the back face
    history: SpecimenHistory


class _Lines:
    """The two bars of one shot and the waves that run in them."""

    def __init__(self, plan: ShotPlan, time_s: FloatArray) -> None:
        rig, step = plan.rig, float(time_s[1] - time_s[0])
        self.rig = rig
        self.incident, self.transmitted = (
            BarWaves(bar, time_s.size, step, 2 * bar.length_m, dispersive=plan.dispersive)
            for bar in (rig.incident_bar, rig.transmitted_bar)
        )
        self.impact = self.incident.spectrum(_impact(plan, time_s))
        self.direct = self.incident.history(self.incident.carried(self.impact, rig.incident_bar.length_m))

    def incoming(self, reflected: FloatArray, transmitted: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Waves that come to the two faces, from the waves that have left them so far."""
        rig = self.rig
        echo = self.incident.carried(self.incident.spectrum(reflected), 2 * rig.incident_bar.length_m)
        far = self.transmitted.carried(
            self.transmitted.spectrum(transmitted), 2 * rig.transmitted_bar.length_m
        )
        return self.direct - self.incident.history(echo), -self.transmitted.history(far)

    def gauges(self, reflected: FloatArray, transmitted: FloatArray) -> dict[str, FloatArray]:
        """Surface strain at every station of the rig."""
        left, right = self.incident.spectrum(reflected), self.transmitted.spectrum(transmitted)
        seen = {}
        for name, gauge in self.rig.gauges.items():
            length, x = self.rig.bar_of(name).length_m, gauge.to_specimen_m
            if name.startswith("incident"):
                bar = self.incident
                waves = bar.carried(self.impact, length - x) + bar.carried(left, x)
                waves = waves - bar.carried(left, 2 * length - x)
            else:
                bar = self.transmitted
                waves = bar.carried(right, x) - bar.carried(right, 2 * length - x)
            seen[name] = bar.gauge_strain(waves, gauge.length_m)
        return seen


def _impact(plan: ShotPlan, time_s: FloatArray) -> FloatArray:
    """Force at the impact end on the time grid [N]."""
    bar, striker = plan.rig.incident_bar, plan.striker_used
    since = time_s + _time(bar, bar.length_m)
    if plan.shaper is not None:
        force = shaped_impact_force(striker, bar, plan.striker_speed_m_s, since, shaper=plan.shaper)
    else:
        force = impact_force(striker, bar, plan.striker_speed_m_s, since, rise_s=plan.rise_s)
    pushing = np.flatnonzero(force > 1e-3 * force.max())
    if since[pushing[-1]] > 2 * _time(bar, bar.length_m):
        raise InputError(
            "the striker still pushes when its pulse comes back to it",
            where="shot plan",
            mend="Take a longer incident bar, a shorter or a lighter striker",
        )
    return limited_by_yield(force, bar)


def _march(run: SpecimenRun, lines: Sequence[_Lines], time_s: FloatArray, zero: int) -> list[_Faces]:
    """March in spans shorter than the shortest way to a bar's end and back.

    What comes to a face in one span has then left it in the spans before.
    """
    samples, step = time_s.size, float(time_s[1] - time_s[0])
    shape = (len(lines), samples)
    reflected, transmitted = np.zeros(shape), np.zeros(shape)
    incoming, returning = np.zeros(shape), np.zeros(shape)
    shortest = min(
        2 * _time(bar, bar.length_m) for ln in lines for bar in (ln.rig.incident_bar, ln.rig.transmitted_bar)
    )
    span = int((shortest - _LEAD_S) / step)
    parts = []
    for first in range(zero, samples, span):
        now = slice(first, min(first + span, samples))
        for i, line in enumerate(lines):
            p, q = line.incoming(reflected[i], transmitted[i])
            incoming[i, now], returning[i, now] = p[now], q[now]
        part = run.march(incoming[:, now], returning[:, now])
        reflected[:, now] = part.force_in_n - incoming[:, now]
        transmitted[:, now] = part.force_out_n - returning[:, now]
        parts.append(part)
    out = []
    for i, line in enumerate(lines):
        names = tuple(SpecimenHistory.__dataclass_fields__)
        before = SpecimenHistory(*(np.zeros(zero) for _ in names))
        before.temperature_k[:] = parts[0].temperature_k[i, 0]
        whole = SpecimenHistory(
            *(
                np.concatenate([getattr(before, name), *(getattr(part, name)[i] for part in parts)])
                for name in names
            )
        )
        # Ahead of the march stands only what the band limit leaks; keep the sums exact there too.
        incoming[i, :zero] = line.direct[:zero]
        reflected[i, :zero] = -incoming[i, :zero]
        out.append(_Faces(incoming[i], returning[i], whole))
    return out


def _shot(plan: ShotPlan, lines: _Lines, time_s: FloatArray, faces: _Faces) -> ForwardShot:
    rig, history = plan.rig, faces.history
    force_in, force_out = history.force_in_n, history.force_out_n
    strain = lines.gauges(force_in - faces.incoming, force_out - faces.returning)
    velocity_in = (2 * faces.incoming - force_in) / rig.incident_bar.impedance_n_s_m
    velocity_out = (force_out - 2 * faces.returning) / rig.transmitted_bar.impedance_n_s_m
    return ForwardShot(
        plan=plan,
        arrivals_s=arrivals(plan),
        time_s=frozen(time_s),
        incident_strain=frozen(strain["incident_gauge"]),
        transmitted_strain=frozen(strain["transmitted_gauge"]),
        station_strain=strain,
        incident_force_n=frozen(faces.incoming),
        force_in_n=frozen(force_in),
        force_out_n=frozen(force_out),
        velocity_in_m_s=frozen(velocity_in),
        velocity_out_m_s=frozen(velocity_out),
        indentation_in_m=frozen(history.indentation_in_m),
        indentation_out_m=frozen(history.indentation_out_m),
        eng_strain=frozen(history.eng_strain),
        eng_strain_rate_per_s=frozen(np.gradient(history.eng_strain, float(time_s[1] - time_s[0]))),
        eng_stress_pa=frozen(history.nominal_stress_pa),
        true_strain=frozen(-np.log1p(-history.eng_strain)),
        true_stress_pa=frozen(history.true_stress_pa),
        plastic_strain=frozen(history.plastic_strain),
        temperature_k=frozen(history.temperature_k),
    )


def arrivals(plan: ShotPlan) -> dict[str, float]:
    """When fronts come by geometry alone, each at its bar's c0 [s], time zero at the incident face."""
    rig = plan.rig
    x_i, x_t = rig.incident_gauge.to_specimen_m, rig.transmitted_gauge.to_specimen_m
    out = plan.specimen.transit_time_s
    return {
        "impact": -_time(rig.incident_bar, rig.incident_bar.length_m),
        "incident": -_time(rig.incident_bar, x_i),
        "incident face": 0.0,
        "transmitted face": out,
        "reflected": _time(rig.incident_bar, x_i),
        "transmitted": out + _time(rig.transmitted_bar, x_t),
        "end reflection": out + _time(rig.transmitted_bar, 2 * rig.transmitted_bar.length_m - x_t),
        "second loading at the gauge": _time(rig.incident_bar, 2 * rig.incident_bar.length_m - x_i),
        "second loading": 2 * _time(rig.incident_bar, rig.incident_bar.length_m),
    }


def _time(bar: Bar, way_m: float) -> float:
    return way_m / bar.wave_speed_m_s
