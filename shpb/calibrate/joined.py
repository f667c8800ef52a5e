"""What several methods say of one rig, joined to calibrated values of bars and stations and their correlations."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence

import numpy as np

from shpb.calibrate.determination import Determination
from shpb.calibrate.sensitivity.reconcile import Reconciled
from shpb.quantity import Quantity
from shpb.rig.calibration import BarCalibration, GaugeCalibration, stated_of, stated_of_bar
from shpb.rig.correlations import NAMES, Correlation
from shpb.rig.propagation_table import PropagationTable
from shpb.rig.rig import SIDES, Rig, budget_name

_SPEED, _POISSON = "wave speed", "Poisson's ratio"
_LEAST = 0.001  # a correlation coefficient below this changes no budget


def joined(of_bars: Sequence[Determination], sensitivities: Reconciled | None) -> Determination | None:
    """All values with one covariance matrix.

    Parameters
    ----------
    of_bars : sequence of Determination
        Of bars and distances, each by itself.
    sensitivities : Reconciled or None
        Gauge factors; they rest on wave speeds, so what is tied to these is tied to the factors.

    Returns
    -------
    Determination or None
        None where there is nothing at all.
    """
    parts = [*of_bars, *([sensitivities.determination] if sensitivities is not None else [])]
    if not parts:
        return None
    names = tuple(name for part in parts for name in part.names)
    covariance = np.zeros((len(names), len(names)))
    start = 0
    for part in parts:
        stop = start + len(part.names)
        covariance[start:stop, start:stop] = part.covariance
        start = stop
    if sensitivities is not None:
        start -= len(sensitivities.determination.names)
        for name, change in sensitivities.shared.items():
            at = _at(name, names)
            if at is not None and covariance[at, at] > 0:
                # The error of the factors is change e/u(e) for an error e of this value.
                tied = np.outer(change, covariance[at, :start] / np.sqrt(covariance[at, at]))
                covariance[start:, :start] += tied
                covariance[:start, start:] += tied.T
    return Determination(
        method="; ".join(dict.fromkeys(part.method for part in parts)),
        shots=tuple(dict.fromkeys(shot for part in parts for shot in part.shots)),
        names=names,
        values=np.concatenate([part.values for part in parts]),
        covariance=covariance,
    )


def _at(name: str, names: Sequence[str]) -> int | None:
    """Where a value stands; of both bars' common value ("bars: wave speed") that of the first that was measured."""
    if name in names:
        return names.index(name)
    if name.startswith("bars:"):
        for side in SIDES:
            own = name.replace("bars:", f"{side} bar:", 1)
            if own in names:
                return names.index(own)
    return None


def bars_of(
    rig: Rig, found: Mapping[str, Quantity], tables: Mapping[str, PropagationTable]
) -> dict[str, BarCalibration]:
    """Calibrated values of the bars by the tables of the rig file; a bar of which nothing was measured is left out."""
    bars = {}
    for side, bar in (("incident", rig.incident_bar), ("transmitted", rig.transmitted_bar)):
        speed, poisson = (found.get(f"{side} bar: {what}") for what in (_SPEED, _POISSON))
        if speed is not None or poisson is not None or side in tables:
            bars[f"{side}_bar"] = BarCalibration(
                wave_speed_m_s=speed,
                poisson_ratio=poisson,
                propagation=tables.get(side),
                as_stated=stated_of_bar(bar),
            )
    return bars


def gauges_of(
    rig: Rig, found: Mapping[str, Quantity], per_volt: Mapping[str, Quantity]
) -> dict[str, GaugeCalibration]:
    """The same of the stations."""
    gauges = {}
    for station, gauge in rig.gauges.items():
        factor, distance = (found.get(budget_name(station, what)) for what in ("factor", "distance"))
        if factor is not None or distance is not None:
            gauges[station] = GaugeCalibration(
                gauge_factor=factor,
                strain_per_volt=per_volt.get(station),
                to_specimen_m=distance,
                as_stated=stated_of(gauge),
            )
    return gauges


def correlations_of(
    found: Determination | None, sensitivities: Reconciled | None, *, one_stock: bool
) -> tuple[Correlation, ...]:
    """Correlation coefficients between all values, by their names in the budget of the calibrated rig.

    Gauge factors are correlated with a density or a diameter too that stands in the rig file and that they rest on.

    Parameters
    ----------
    found : Determination or None
        As :func:`joined` gives it.
    sensitivities : Reconciled or None
    one_stock : bool
        Whether both bars of the calibrated rig share their values: the budget then calls them "bars".
    """
    if found is None:
        return ()
    names = [_in_budget(name, one_stock=one_stock) for name in found.names]
    pairs: dict[tuple[str, str], float] = {}
    for (at, first), (beside, second) in itertools.combinations(enumerate(names), 2):
        # Two bars of one stock name each of their values twice.
        if first != second and (second, first) not in pairs:
            coefficient = found.correlation(found.names[at], found.names[beside])
            pairs.setdefault((first, second), coefficient)
    if sensitivities is not None:
        factors = sensitivities.determination
        u = np.sqrt(np.diag(factors.covariance))
        for name, change in sensitivities.shared.items():
            if name in NAMES and _at(name, found.names) is None:
                for own in _of_each_bar(name, one_stock=one_stock):
                    pairs |= {(own, factor): c for factor, c in zip(factors.names, change / u, strict=True)}
    return tuple(
        # Rounding must not lift a coefficient over one.
        Correlation(*pair, float(np.clip(round(float(coefficient), 6), -1.0, 1.0)))
        for pair, coefficient in pairs.items()
        if abs(coefficient) >= _LEAST
    )


def _of_each_bar(name: str, *, one_stock: bool) -> tuple[str, ...]:
    """A common value of both bars by the names that the budget has for it once the bars differ in something else."""
    if one_stock or not name.startswith("bars:"):
        return (name,)
    return tuple(name.replace("bars:", f"{side} bar:", 1) for side in SIDES)


def _in_budget(name: str, *, one_stock: bool) -> str:
    bar, _, what = name.partition(": ")
    return f"bars: {what}" if one_stock and what and bar.endswith(" bar") else name
