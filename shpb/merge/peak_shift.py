"""How the peak of the flow stress over temperature moves with the rate."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.errors import InputError
from shpb.fitting.weighted_line import Estimate, fitted
from shpb.merge.sensitivity import BOLTZMANN_J_K
from shpb.merge.temperature import Extreme, Place

_AVOGADRO_PER_MOL = 6.02214076e23  # exact in the SI since 2019


@dataclass(frozen=True, slots=True, kw_only=True)
class RatePeak:
    """The peak found at one rate [1/s]."""

    rate_per_s: float
    peak: Extreme


@dataclass(frozen=True, slots=True, kw_only=True)
class PeakShift:
    """Peak temperature against rate.

    Attributes
    ----------
    kelvin_per_decade : Estimate
        Slope of the peak temperature over log10(rate) [K].
    activation_energy_j : Estimate or None
        Q of ln(rate) = const - Q/(k T_peak) [J]; None where the peak does not move up with the rate.
    energy_open : bool
        Whether its interval has no upper end, because no shift at all lies within the uncertainty; the upper end is
        then infinite.
    used, left_out : tuple of float
        Rates with a bracketed peak, and those without [1/s].
    """

    kelvin_per_decade: Estimate
    activation_energy_j: Estimate | None
    energy_open: bool
    used: tuple[float, ...]
    left_out: tuple[float, ...]

    @property
    def activation_energy_j_per_mol(self) -> Estimate | None:
        """The same per mole [J/mol]."""
        energy = self.activation_energy_j
        return None if energy is None else energy.scaled(_AVOGADRO_PER_MOL)


def peak_shift(peaks: Sequence[RatePeak]) -> PeakShift:
    """Shift of the peak with the rate: a line over log10(rate), and the activation energy.

    ln(rate) = const - Q/(k T_peak) for a peak that is due to a thermally activated process (Arrhenius). The
    temperature carries the uncertainty, so 1/T_peak is fitted over ln(rate).

    Parameters
    ----------
    peaks : sequence of RatePeak
        One a rate. Peaks that no tests bracket are left out, and named.

    Raises
    ------
    InputError
        If fewer than two rates have a bracketed peak.
    """
    for one in peaks:
        if not 0 < one.rate_per_s < math.inf:
            raise InputError(f"a rate of {one.rate_per_s}", where="peak shift", mend="Give positive rates")
    held = sorted((p for p in peaks if p.peak.place is Place.INSIDE), key=lambda p: p.rate_per_s)
    left_out = tuple(sorted(p.rate_per_s for p in peaks if p.peak.place is not Place.INSIDE))
    if len(held) < 2 or held[0].rate_per_s == held[-1].rate_per_s:
        raise InputError(
            f"{len(held)} rates with a peak between tested temperatures",
            where="peak shift",
            mend="It takes two rates at least; test at more temperatures round the peak",
        )
    temperature = np.array([p.peak.temperature_k for p in held], dtype=np.float64)
    u = np.array([p.peak.u_temperature_k for p in held], dtype=np.float64)
    log_rate = np.log([p.rate_per_s for p in held])
    design = np.column_stack((np.ones(u.size), log_rate))
    line = fitted(design, temperature, np.diag(u**2))
    per_ln = line.estimate(np.array([0.0, 1.0]), float(line.coefficients[1]))
    inverse = fitted(design, 1 / temperature, np.diag((u / temperature**2) ** 2))
    energy, is_open = _energy(inverse.estimate(np.array([0.0, 1.0]), float(inverse.coefficients[1])))
    return PeakShift(
        kelvin_per_decade=per_ln.scaled(math.log(10)),
        activation_energy_j=energy,
        energy_open=is_open,
        used=tuple(p.rate_per_s for p in held),
        left_out=left_out,
    )


def _energy(per_ln: Estimate) -> tuple[Estimate | None, bool]:
    """Q = -k/(d(1/T)/d ln rate): the ends of the interval exchange."""
    if per_ln.value >= 0:
        return None, False
    low, high = per_ln.interval
    return Estimate(
        value=-BOLTZMANN_J_K / per_ln.value,
        u=BOLTZMANN_J_K / per_ln.value**2 * per_ln.u,
        interval=(-BOLTZMANN_J_K / low, -BOLTZMANN_J_K / high if high < 0 else math.inf),
        freedom=per_ln.freedom,
    ), high >= 0
