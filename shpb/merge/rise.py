"""Does the stress of the points rise with temperature anywhere? Then a law that only softens cannot hold."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.merge.points import FlowPoints

_SAME_RATE = 1.25  # ratio of rates that still is one rate
_HOTTER_K = 10.0
_COVERAGE = 3.0  # combined standard uncertainties that a rise must exceed: many pairs are looked at
_LEAST_RISE = 0.01  # relative, below which no law minds


@dataclass(frozen=True, slots=True, kw_only=True)
class Rise:
    """The most significant rise of stress with temperature.

    Attributes
    ----------
    rate_per_s : float
    cold_k, hot_k : float
        Start temperatures of the two conditions [K].
    plastic_strain : (float, float)
        Strains over which they were compared.
    rise_pa, u_rise_pa : float
        Mean difference of stress and its standard uncertainty [Pa].
    cold_stress_pa : float
        Mean stress of the colder one [Pa].
    """

    rate_per_s: float
    cold_k: float
    hot_k: float
    plastic_strain: tuple[float, float]
    rise_pa: float
    u_rise_pa: float
    cold_stress_pa: float

    def in_words(self) -> str:
        """One sentence for messages and reports."""
        low, high = self.plastic_strain
        strains = f"plastic strain {low:.3g}" if high == low else f"plastic strains {low:.3g} to {high:.3g}"
        return (
            f"at {self.rate_per_s:.3g} /s and {strains} the stress rises from {self.cold_stress_pa / 1e6:.0f} MPa at "
            f"{self.cold_k:.0f} K by {self.rise_pa / 1e6:.0f} MPa (u {self.u_rise_pa / 1e6:.1f}) at {self.hot_k:.0f} K"
        )


def rise_with_temperature(points: FlowPoints) -> Rise | None:
    """The most significant rise of stress between two conditions of one rate, None where there is none.

    Pairs of conditions whose mean rates agree within 25 % and whose start temperatures are more than 10 K apart are
    compared over their common strains. The own uncertainty of a condition counts as if all its points shared it;
    errors that both conditions share cancel. A rise counts if it exceeds three combined standard uncertainties and
    1 % of the stress.
    """
    rates, starts, numbers = points.mean_rates_per_s(), points.start_temperatures_k(), points.conditions
    found = [
        rise
        for cold in range(len(numbers))
        for hot in range(len(numbers))
        if starts[hot] - starts[cold] > _HOTTER_K
        and max(rates[hot], rates[cold]) <= _SAME_RATE * min(rates[hot], rates[cold])
        and (rise := _between(points, numbers[cold], numbers[hot])) is not None
    ]
    real = [r for r in found if r.rise_pa > max(_COVERAGE * r.u_rise_pa, _LEAST_RISE * r.cold_stress_pa)]
    return max(real, key=lambda rise: rise.rise_pa / rise.u_rise_pa) if real else None


def _between(points: FlowPoints, cold: int, hot: int) -> Rise | None:
    """Rise of stress from one condition to another over their common strains; None where they have none."""
    a, b = points.of(cold), points.of(hot)
    low = max(points.plastic_strain[a].min(), points.plastic_strain[b].min())
    high = min(points.plastic_strain[a].max(), points.plastic_strain[b].max())
    if high < low:
        return None
    at = np.unique(np.clip(np.concatenate((points.plastic_strain[a], points.plastic_strain[b])), low, high))
    cold_pa = np.interp(at, points.plastic_strain[a], points.stress_pa[a])
    hot_pa = np.interp(at, points.plastic_strain[b], points.stress_pa[b])
    variance = float(np.mean(points.u_own_pa[a] ** 2) + np.mean(points.u_own_pa[b] ** 2))
    for error in points.shared:
        # Of a scale error that both share only the difference of stress keeps a part.
        share_a, share_b = error.members[a].mean(), error.members[b].mean()
        variance += (error.relative_u * (share_b * hot_pa.mean() - share_a * cold_pa.mean())) ** 2
    return Rise(
        rate_per_s=float(np.exp(np.mean(np.log(points.rate_per_s[a | b])))),
        cold_k=float(points.temperature_k[a][0]),
        hot_k=float(points.temperature_k[b][0]),
        plastic_strain=(float(low), float(high)),
        rise_pa=float(np.mean(hot_pa - cold_pa)),
        u_rise_pa=float(np.sqrt(variance)),
        cold_stress_pa=float(cold_pa.mean()),
    )
