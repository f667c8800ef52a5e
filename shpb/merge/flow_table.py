"""The merged table: flow stress at chosen plastic strains against rate and temperature."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from shpb.errors import InputError
from shpb.merge.material_curve import RateRange
from shpb.merge.points import FlowPoints, SharedError
from shpb.merge.repeats import Repeats
from shpb.merge.sensitivity import rate_point

_SAME_DECADES = 0.5  # rates this near serve the slope over temperature
_SAME_K = 1.0
# Of the own errors of a curve: its size, its temperature and its alignment move the whole of it, noise and ringing
# only parts. An estimate; near 1 it hardly matters.
_ALONG_CURVE = 0.9


@dataclass(frozen=True, slots=True, kw_only=True)
class FlowRow:
    """Flow stress of one condition at one plastic strain.

    Attributes
    ----------
    condition : int
        Place of the condition in the merged material.
    label : str
        What the condition is called.
    range : RateRange
    plastic_strain, stress_pa : float
        True plastic strain, mean true stress [Pa].
    u_own_pa, u_shared_pa, u_pa : float
        Standard uncertainty of the mean [Pa]: its own part, what conditions of one rig or machine share, and both.
    shared : tuple of (str, float)
        Relative shared part by rig or machine.
    scatter_pa : float or None
        Standard deviation among repeats [Pa]; None where there is one test.
    count : int
        Tests that are valid there.
    rate_per_s : float
        True rate at this strain [1/s].
    rate_range_per_s : (float, float)
        Extremes over the valid spans of the condition.
    temperature_k, rise_k : float, float or None
        At the start, and adiabatic rise up to this strain [K]; None where isothermal.
    isothermal_pa : float or None
        Stress at the start temperature had the specimen stayed cold [Pa]; None where the campaign does not tell.
    u_isothermal_pa : float or None
        Its standard uncertainty, with that of the slope over temperature [Pa].
    """

    condition: int
    label: str
    range: RateRange
    plastic_strain: float
    stress_pa: float
    u_own_pa: float
    u_shared_pa: float
    shared: tuple[tuple[str, float], ...]
    scatter_pa: float | None
    count: int
    rate_per_s: float
    rate_range_per_s: tuple[float, float]
    temperature_k: float
    rise_k: float | None
    isothermal_pa: float | None = None
    u_isothermal_pa: float | None = None

    @property
    def u_pa(self) -> float:
        """Standard uncertainty, own and shared parts together [Pa]."""
        return float(np.hypot(self.u_own_pa, self.u_shared_pa))


def condition_label(condition: Repeats) -> str:
    """A condition in words: rate and temperature."""
    return f"{condition.mean_rate_per_s:.3g} /s, {condition.temperature_k:.0f} K"


def flow_rows(conditions: Sequence[Repeats], strains: Sequence[float]) -> tuple[FlowRow, ...]:
    """The table, without isothermal stresses: rows only where a condition is valid."""
    rows = []
    for number, condition in enumerate(conditions):
        for strain in strains:
            row = _row(number, condition, strain)
            if row is not None:
                rows.append(row)
    return tuple(rows)


def _row(number: int, condition: Repeats, strain: float) -> FlowRow | None:
    point = rate_point(condition, strain)
    if point is None:
        return None
    grid = condition.plastic_strain
    near = int(np.clip(np.searchsorted(grid, strain), 0, grid.size - 1))
    scatter = float(condition.scatter_pa[near])
    rise = condition.temperature_rise_k
    return FlowRow(
        condition=number,
        label=condition_label(condition),
        range=condition.range,
        plastic_strain=strain,
        stress_pa=point.stress_pa,
        u_own_pa=point.u_own_pa,
        u_shared_pa=point.stress_pa * float(np.sqrt(sum(u**2 for u in point.shared.values()))),
        shared=tuple(sorted(point.shared.items())),
        scatter_pa=scatter if np.isfinite(scatter) else None,
        count=sum(curve.holds(strain) for curve in condition.curves),
        rate_per_s=point.rate_per_s,
        rate_range_per_s=condition.rate_range_per_s,
        temperature_k=condition.temperature_k,
        rise_k=None if rise is None else float(np.interp(strain, grid, rise)),
    )


def isothermal(rows: tuple[FlowRow, ...], conditions: Sequence[Repeats]) -> tuple[FlowRow, ...]:
    """Add the isothermal stress where other temperatures at the same strain and rate tell the slope.

    s_iso = s - (ds/dT) rise, with the slope half-way up the rise of the parabola through the row and two other
    temperatures: its neighbours, or the two nearest where it is the first or the last. Each stress stands at the
    temperature that the specimen had by then. Near a strength peak the slope changes from one side to the other:
    half of that change is its uncertainty. Where there is one other temperature only, the straight line serves, and
    half its slope is the uncertainty. Isothermal rows are what they are.
    """
    del conditions

    def completed(row: FlowRow) -> FlowRow:
        if row.rise_k is None:
            return replace(row, isothermal_pa=row.stress_pa, u_isothermal_pa=row.u_pa)
        found = _slope_pa_k(row, _neighbours(row, rows))
        if found is None:
            return row
        slope, u_slope = found
        return replace(
            row,
            isothermal_pa=row.stress_pa - slope * row.rise_k,
            u_isothermal_pa=float(np.hypot(row.u_pa, u_slope * row.rise_k)),
        )

    return tuple(completed(row) for row in rows)


def _heated_k(row: FlowRow) -> float:
    return row.temperature_k + (row.rise_k or 0.0)


def _neighbours(row: FlowRow, rows: Sequence[FlowRow]) -> list[FlowRow]:
    """At most two rows of other temperatures that tell the slope at a row, the nearer first."""
    nearest: list[FlowRow] = []  # of each temperature the row of the nearest rate
    here = np.log10(row.rate_per_s)
    for other in sorted(rows, key=lambda one: abs(np.log10(one.rate_per_s) - here)):
        if (
            other.plastic_strain == row.plastic_strain
            and other.range is row.range
            and abs(np.log10(other.rate_per_s) - here) < _SAME_DECADES
            and all(abs(other.temperature_k - one.temperature_k) > _SAME_K for one in (row, *nearest))
        ):
            nearest.append(other)
    nearest.sort(key=lambda one: abs(one.temperature_k - row.temperature_k))
    cooler = [one for one in nearest if one.temperature_k < row.temperature_k]
    warmer = [one for one in nearest if one.temperature_k > row.temperature_k]
    chosen = [cooler[0], warmer[0]] if cooler and warmer else nearest[:2]
    return sorted(chosen, key=lambda one: abs(one.temperature_k - row.temperature_k))


def _slope_pa_k(row: FlowRow, others: Sequence[FlowRow]) -> tuple[float, float] | None:
    """Slope of the stress over temperature half-way up a row's rise, and its uncertainty [Pa/K]; None if untold."""
    away = np.array([_heated_k(other) - _heated_k(row) for other in others])
    if not others or np.abs(away).min() < 1.0:
        return None
    chords = np.array([other.stress_pa - row.stress_pa for other in others]) / away
    if len(others) == 1:
        return float(chords[0]), abs(float(chords[0])) / 2
    if abs(away[1] - away[0]) < 1.0:
        return None
    bend = (chords[1] - chords[0]) / (away[1] - away[0])
    # The parabola through the row has the slope chord - bend (away - 2 x) at x from it; half-way x = -rise/2.
    slope = chords[0] - bend * (away[0] + (row.rise_k or 0.0))
    # From one straight piece of the three points to the other.
    change = bend * (away[1] if away[0] * away[1] > 0 else away[1] - away[0])
    return float(slope), abs(float(change)) / 2


def flow_points(
    rows: Sequence[FlowRow], conditions: Sequence[Repeats], heat_k_m3_j: float | None
) -> FlowPoints:
    """The table as points for a constitutive law.

    Bar conditions are adiabatic where their heating is known; then the law is asked along its own heated path.

    Raises
    ------
    InputError
        If there are no rows.
    """
    if not rows:
        raise InputError(
            "no condition is valid at any of the chosen plastic strains",
            where="merged table",
            mend="Choose other plastic strains",
        )
    rows = sorted(rows, key=lambda row: (row.condition, row.plastic_strain))
    groups = dict.fromkeys(name for row in rows for name, _ in row.shared)
    shared = []
    for name in groups:
        members = np.array([any(group == name for group, _ in row.shared) for row in rows])
        sizes = [u for row in rows for group, u in row.shared if group == name]
        if max(sizes) > 0:
            shared.append(SharedError(name=name, relative_u=float(np.mean(sizes)), members=members))
    heated = heat_k_m3_j is not None
    return FlowPoints(
        plastic_strain=np.array([row.plastic_strain for row in rows]),
        stress_pa=np.array([row.stress_pa for row in rows]),
        rate_per_s=np.array([row.rate_per_s for row in rows]),
        temperature_k=np.array([row.temperature_k for row in rows]),
        u_own_pa=np.array([row.u_own_pa for row in rows]),
        condition=np.array([row.condition for row in rows]),
        adiabatic=np.array([heated and row.rise_k is not None for row in rows]),
        shared=tuple(shared),
        heat_k_m3_j=heat_k_m3_j,
        own_correlation=_ALONG_CURVE,
        labels={number: condition_label(one) for number, one in enumerate(conditions)},
    )
