"""Calibration shots run forwards: one bar alone, two bars in contact, and a resistor across an arm of a bridge.

Time zero is the first contact of the striker; compression is positive. A bar alone is struck at one end and free at
the other, and free at the struck end too once the striker has let go: the pulse runs to and fro, and turns its sign
at every end. A station at the distance y from the struck end of a bar of length L sees it after the ways y, 2 L - y
(turned), 2 L + y, 4 L - y (turned), and so on.

Bars together touch without any specimen. The contact bears compression only: with the arriving waves p (incident bar)
and q (transmitted bar) the faces move at ``(2 p - F)/Z_i`` and ``(F - 2 q)/Z_t``, so that in contact
``F = 2 (p/Z_i + q/Z_t)/(1/Z_i + 1/Z_t)``; where that is tension the bars part, ``F = 0``, until the gap has closed.

References
----------
One-dimensional waves at a step of impedance and at a free end: K. F. Graff, Wave Motion in Elastic Solids (1975),
chapter 2 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import ComplexArray, FloatArray, frozen
from shpb.errors import InputError
from shpb.forward.bars import BarWaves
from shpb.forward.calibration_plan import CalibrationPlan
from shpb.rig.bar import Bar

# The band limit rings a little ahead of a front: a span of the march ends this much before what comes back.
_LEAD_S = 60e-6


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FreeBar:
    """Bars apart: what happened, arrays of shape (samples,), read-only."""

    plan: CalibrationPlan
    time_s: FloatArray
    impact_n: FloatArray  # force of the striker on the bar
    strain: dict[str, FloatArray]  # surface strain at every station of the rig; zero on the other bar


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class BarsTogether:
    """Bars together: what happened, arrays of shape (samples,), read-only."""

    plan: CalibrationPlan
    time_s: FloatArray
    impact_n: FloatArray  # force of the striker on the incident bar
    strain: dict[str, FloatArray]  # surface strain at every station of the rig
    arriving_n: FloatArray  # force of the wave that comes to the contact in the incident bar
    returning_n: FloatArray  # the same in the transmitted bar
    contact_n: FloatArray  # force between the bars, never tension
    velocity_in_m_s: FloatArray  # of the face of the incident bar
    velocity_out_m_s: FloatArray  # of the face of the transmitted bar
    gap_m: FloatArray  # between the faces


def bars_apart(plan: CalibrationPlan, time_s: FloatArray) -> FreeBar:
    """Strike one bar that touches nothing else.

    Parameters
    ----------
    plan : CalibrationPlan
    time_s : float array, shape (samples,)
        Even grid that begins at or before the impact at time zero [s].

    Raises
    ------
    InputError
        If the grid begins after the impact, or the striker still pushes when its pulse comes back to it.
    """
    bar = plan.struck
    force = plan.impact_n(time_s)
    end_m = (float(time_s[-1]) + _LEAD_S) * bar.wave_speed_m_s * (1.0 if plan.solid is None else 1.2)
    waves = _waves(plan, bar, time_s, end_m)
    struck = waves.spectrum(force)
    strain = {name: np.zeros(time_s.size) for name in plan.rig.gauges}
    for name in (one for one in strain if one.startswith(plan.bar)):
        seen = np.zeros(struck.size, dtype=complex)
        for turns, way_m in enumerate(passages_m(plan.from_struck_end_m(name), bar.length_m, end_m)):
            sign = -1.0 if turns % 2 else 1.0
            seen += sign * plan.losses.kept(way_m, turns) * waves.carried(struck, way_m)
        strain[name] = waves.gauge_strain(seen, plan.rig.gauges[name].length_m)
    return FreeBar(
        plan=plan,
        time_s=frozen(time_s.copy()),
        impact_n=frozen(force),
        strain={name: frozen(values) for name, values in strain.items()},
    )


def passages_m(from_struck_end_m: float, length_m: float, end_m: float) -> list[float]:
    """Ways of the pulse to a station, y, 2 L - y, 2 L + y, 4 L - y, ..., up to ``end_m`` [m]."""
    ways: list[float] = []
    turns = 0
    while True:
        whole = 2 * length_m * ((turns + 1) // 2)
        way = whole - from_struck_end_m if turns % 2 else whole + from_struck_end_m
        if way > end_m:
            return ways
        ways.append(float(way))
        turns += 1


def bars_together(plan: CalibrationPlan, time_s: FloatArray) -> BarsTogether:
    """Strike the incident bar while the transmitted one touches it.

    Parameters
    ----------
    plan : CalibrationPlan
        Its ``bar`` is the incident one, struck at the far end.
    time_s : float array, shape (samples,)
        Even grid that begins at or before the impact at time zero [s].

    Raises
    ------
    InputError
        As :func:`bars_apart`; if another bar or end is struck, or the bars are not elastic.
    """
    if plan.bar != "incident" or plan.at_specimen_end or plan.solid is not None:
        raise InputError(
            "bars together are elastic bars, struck at the far end of the incident one",
            where="calibration plan",
            mend="Leave bar, at_specimen_end and solid at their defaults",
        )
    return together_from_impact(plan, time_s, plan.impact_n(time_s))


def together_from_impact(plan: CalibrationPlan, time_s: FloatArray, impact_n: FloatArray) -> BarsTogether:
    """The same for a given force at the impact end [N], shape of ``time_s``."""
    lines = _Lines(plan, time_s, impact_n)
    samples, step = time_s.size, float(time_s[1] - time_s[0])
    contact, gap, reflected, transmitted = (np.zeros(samples) for _ in range(4))
    arriving, returning = np.zeros(samples), np.zeros(samples)
    shortest = 2 * min(bar.length_m / bar.wave_speed_m_s for bar in lines.bars)
    span = int((shortest - _LEAD_S) / step)
    if span < 1:
        raise InputError(
            f"a pulse comes back in {shortest * 1e6:.0f} us",
            where="calibration plan",
            mend="Give longer bars",
        )
    opened = 0.0
    for first in range(0, samples, span):
        now = slice(first, min(first + span, samples))
        p, q = lines.incoming(reflected, transmitted)
        arriving[now], returning[now] = p[now], q[now]
        contact[now], gap[now] = _meet(p[now], q[now], lines.impedances, step, opened)
        opened = float(gap[now][-1])
        reflected[now] = contact[now] - arriving[now]
        transmitted[now] = contact[now] - returning[now]
    z_in, z_out = lines.impedances
    return BarsTogether(
        plan=plan,
        time_s=frozen(time_s.copy()),
        impact_n=frozen(impact_n),
        strain={name: frozen(seen) for name, seen in lines.gauges(reflected, transmitted).items()},
        arriving_n=frozen(arriving),
        returning_n=frozen(returning),
        contact_n=frozen(contact),
        velocity_in_m_s=frozen((2 * arriving - contact) / z_in),
        velocity_out_m_s=frozen((contact - 2 * returning) / z_out),
        gap_m=frozen(gap),
    )


def _meet(
    arriving_n: FloatArray,
    returning_n: FloatArray,
    impedances: tuple[float, float],
    step_s: float,
    opened_m: float,
) -> tuple[FloatArray, FloatArray]:
    """Contact force and gap over one span, sample by sample where the bars are not pressed together."""
    z_in, z_out = impedances
    closing = 2 * (
        arriving_n / z_in + returning_n / z_out
    )  # speed of the faces towards each other without force
    pressed = closing / (1 / z_in + 1 / z_out)
    force, gap = np.maximum(pressed, 0.0), np.zeros(arriving_n.size)
    at = 0
    while at < force.size:
        if opened_m <= 0.0:
            # In contact: nothing to do until the next tension.
            ahead = pressed[at:] < 0
            if not ahead.any():
                break
            at += int(np.argmax(ahead))
        opened_m = max(opened_m - float(closing[at]) * step_s, 0.0)
        gap[at] = opened_m
        if opened_m > 0.0:
            force[at] = 0.0
        at += 1
    return force, gap


class _Lines:
    """The two bars in contact and the waves that run in them."""

    def __init__(self, plan: CalibrationPlan, time_s: FloatArray, impact_n: FloatArray) -> None:
        self.plan, rig = plan, plan.rig
        self.bars = (rig.incident_bar, rig.transmitted_bar)
        self.impedances = (float(self.bars[0].impedance_n_s_m), float(self.bars[1].impedance_n_s_m))
        self.incident, self.transmitted = (_waves(plan, bar, time_s, 2 * bar.length_m) for bar in self.bars)
        self.impact = self.incident.spectrum(impact_n)
        self.direct = self._carried(self.incident, self.impact, self.bars[0].length_m, 0)

    def _carried(self, waves: BarWaves, spectrum: ComplexArray, way_m: float, turns: int) -> ComplexArray:
        kept = self.plan.losses.kept(way_m, turns) * (-1.0 if turns % 2 else 1.0)
        carried: ComplexArray = kept * waves.carried(spectrum, way_m)
        return carried

    def incoming(self, reflected_n: FloatArray, transmitted_n: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Waves that come to the contact, from those that have left it so far: turned at the free ends."""
        left = self.incident.spectrum(reflected_n)
        echo = self._carried(self.incident, left, 2 * self.bars[0].length_m, 1)
        right = self.transmitted.spectrum(transmitted_n)
        back = self._carried(self.transmitted, right, 2 * self.bars[1].length_m, 1)
        return self.incident.history(self.direct + echo), self.transmitted.history(back)

    def gauges(self, reflected_n: FloatArray, transmitted_n: FloatArray) -> dict[str, FloatArray]:
        """Surface strain at every station."""
        left, right = self.incident.spectrum(reflected_n), self.transmitted.spectrum(transmitted_n)
        strain = {}
        for name, gauge in self.plan.rig.gauges.items():
            x = float(gauge.to_specimen_m)
            first = name.startswith("incident")
            waves, leaving, bar = (
                (self.incident, left, self.bars[0]) if first else (self.transmitted, right, self.bars[1])
            )
            seen = self._carried(waves, leaving, x, 0)
            seen = seen + self._carried(waves, leaving, 2 * bar.length_m - x, 1)
            if first:
                seen = seen + self._carried(waves, self.impact, bar.length_m - x, 0)
            strain[name] = waves.gauge_strain(seen, gauge.length_m)
        return strain


def _waves(plan: CalibrationPlan, bar: Bar, time_s: FloatArray, longest_m: float) -> BarWaves:
    step = float(time_s[1] - time_s[0])
    return BarWaves(bar, time_s.size, step, longest_m, dispersive=plan.dispersive, solid=plan.solid)
