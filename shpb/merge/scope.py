"""Which points a law is fitted to: a law without temperature to one temperature, one without rate to one condition."""

from __future__ import annotations

import numpy as np

from shpb.merge.model_fit import ModelFit
from shpb.merge.models.model import Model
from shpb.merge.points import FlowPoints

_SAME_K = 10.0
_SAME_DECADES = 0.2
_ROOM_K = 293.15


def points_for(model: Model, points: FlowPoints) -> FlowPoints:
    """The points that a law can be asked about.

    With rate and temperature in the law all of them. Without temperature those of the temperature with the most
    conditions (of several the one nearest to 20 C); without rate, of these, the slowest condition with enough points.
    """
    if model.uses_temperature:
        return points
    temperatures = points.start_temperatures_k()
    near = [np.abs(temperatures - one) <= _SAME_K for one in temperatures]
    best = max(range(temperatures.size), key=lambda i: (int(near[i].sum()), -abs(temperatures[i] - _ROOM_K)))
    conditions = [c for c, inside in zip(points.conditions, near[best], strict=True) if inside]
    if not model.uses_rate:
        rates = dict(zip(points.conditions, points.mean_rates_per_s(), strict=True))
        needed = len(model.parameters) + 1
        rich = [c for c in conditions if int(points.of(c).sum()) >= needed] or conditions
        conditions = [min(rich, key=lambda c: rates[c])]
    return points.select(np.isin(points.condition, conditions))


def scope_words(fit: ModelFit) -> str:
    """What a law was fitted to, in words: its range of rates and temperatures, and how many conditions that are."""
    rates, temperatures = fit.points.mean_rates_per_s(), fit.points.start_temperatures_k()
    slow, fast = float(rates.min()), float(rates.max())
    cold, hot = float(temperatures.min()), float(temperatures.max())
    rate = f"{slow:.2g} /s" if np.log10(fast / slow) < _SAME_DECADES else f"{slow:.2g} to {fast:.2g} /s"
    kelvin = f"{cold:.0f} K" if hot - cold < _SAME_K else f"{cold:.0f} to {hot:.0f} K"
    count = len(fit.points.conditions)
    return f"{rate}, {kelvin}, {count} condition{'' if count == 1 else 's'}, {len(fit.points)} points"
