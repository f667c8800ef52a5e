"""What each source says about the sensitivities of a rig, as one linear observation each, in logarithms.

Unknowns of a station: how far its gauge factor (with the bridge's arrangement) and its excitation and gain are from
what the rig file states, ``ln(true/stated)``. Where no shunt tells the two apart their sum is the one unknown. The true
by the stated strain per volt is ``ln q = -(factor + electrical)``.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from shpb.calibrate.sensitivity.common_terms import Terms, size_of
from shpb.calibrate.sensitivity.sensitivity_ratio import SensitivityRatio
from shpb.calibrate.sensitivity.shunt import ShuntCheck, ShuntPoint
from shpb.calibrate.sensitivity.striker_line import StrikerLine
from shpb.rig.gauge import Gauge
from shpb.rig.rig import Rig
from shpb.trust.sources import relative_u

Unknown = tuple[str, str]  # station, "factor" or "electrical"

_LEAST = 1e-6  # nothing is known better than that


@dataclass(frozen=True, slots=True, kw_only=True)
class Saying:
    """One source: ``sum(power x unknown) = value``.

    Attributes
    ----------
    name : str
        For people: "striker line of the incident gauge".
    kind : str
        "stated", "shunt", "striker" or "ratio".
    station : str
        The station it speaks about; of a ratio the one that is compared.
    row : mapping
        Unknowns and their powers.
    value : float
        ln of what was found.
    u : float
        Of this source alone, of ``value``.
    terms : mapping of str to float
        Change of ``value`` by one standard uncertainty of what it shares with others.
    doubt : str
        What to check where this source is the odd one out.
    assumed : bool
        Nobody has stated its uncertainty.
    """

    name: str
    kind: str
    station: str
    row: Mapping[Unknown, float]
    value: float
    u: float
    terms: Terms
    doubt: str
    shots: tuple[str, ...] = ()
    assumed: bool = False
    said: str = field(default="")  # what was found, in words

    @property
    def u_value(self) -> float:
        """Standard uncertainty of ``value``."""
        return size_of(self.u, self.terms)

    @property
    def toward_q(self) -> float:
        """Sign of what it says in the direction of its station's ln q."""
        return 1.0 if self.kind in ("striker", "ratio") else -1.0


def sayings_of(
    rig: Rig,
    ratios: Sequence[SensitivityRatio],
    lines: Sequence[StrikerLine],
    shunts: Sequence[ShuntCheck],
) -> tuple[Saying, ...]:
    """Every source as an observation; stations that nobody has measured are left out."""
    stations = {line.station for line in lines} | {check.station for check in shunts}
    for ratio in ratios:
        stations |= {ratio.station, ratio.reference}
    shunted = {check.station for check in shunts}
    sayings: list[Saying] = []
    for name in (one for one in rig.gauges if one in stations):
        sayings += _stated(name, rig.gauges[name], apart=name in shunted)
    sayings += [_shunt(check.station, point) for check in shunts for point in check.points]
    sayings += [_line(line, shunted) for line in lines]
    sayings += [_ratio(ratio, shunted) for ratio in ratios]
    return tuple(sayings)


def row_of(station: str, shunted: set[str], power: float = -1.0) -> dict[Unknown, float]:
    """Logarithm of q of a station by its unknowns."""
    row = {(station, "factor"): power}
    if station in shunted:
        row[(station, "electrical")] = power
    return row


def _stated(station: str, gauge: Gauge, *, apart: bool) -> list[Saying]:
    words = station.replace("_", " ")
    factor = relative_u(gauge.gauge_factor, "gauge factor")
    electrical = float(np.hypot(relative_u(gauge.excitation_v, "excitation"), relative_u(gauge.gain, "gain")))
    factor_assumed = gauge.gauge_factor.u is None
    electrical_assumed = gauge.excitation_v.u is None or gauge.gain.u is None
    of_factor = f"gauge factor and bridge arrangement in [{station}]"
    of_chain = f"excitation_V and gain in [{station}]"
    if apart:
        return [
            _as_stated(station, "factor", f"gauge factor of the {words} as stated", factor, of_factor, factor_assumed),
            _as_stated(
                station, "electrical", f"excitation and gain of the {words} as stated", electrical, of_chain,
                electrical_assumed,
            ),
        ]  # fmt: skip
    name = f"gauge factor, excitation and gain of the {words} as stated"
    both = float(np.hypot(factor, electrical))
    doubt = f"{of_factor}, {of_chain}"
    return [_as_stated(station, "factor", name, both, doubt, factor_assumed or electrical_assumed)]


def _as_stated(station: str, which: str, name: str, u: float, doubt: str, assumed: bool) -> Saying:
    return Saying(
        name=name,
        kind="stated",
        station=station,
        row={(station, which): 1.0},
        value=0.0,
        u=max(u, _LEAST),
        terms={},
        doubt=doubt,
        assumed=assumed,
        said="as in the rig file",
    )


def _shunt(station: str, point: ShuntPoint) -> Saying:
    words = station.replace("_", " ")
    return Saying(
        name=f"shunt {point.shot_id} of the {words}",
        kind="shunt",
        station=station,
        row={(station, "electrical"): 1.0},
        value=float(np.log(point.gain_ratio)),
        u=max(point.u_own, _LEAST),
        terms=dict(point.terms),
        doubt=f"the resistor's value ({point.shunt_ohm:,.0f} ohm stated), the gauge's resistance, the gain",
        shots=(point.shot_id,),
        said=f"excitation and gain {point.gain_ratio:.5g} of the stated",
    )


def _line(line: StrikerLine, shunted: set[str]) -> Saying:
    words = line.station.replace("_", " ")
    return Saying(
        name=f"striker line of the {words}",
        kind="striker",
        station=line.station,
        row=row_of(line.station, shunted),
        value=float(np.log(line.q)),
        u=max(line.u_own, _LEAST),
        terms=dict(line.terms),
        doubt="the speed reading, the striker's diameter and material, the faces' alignment",
        shots=tuple(point.shot_id for point in line.points),
        said=f"true by stated strain {line.q:.5g}",
    )


def _ratio(ratio: SensitivityRatio, shunted: set[str]) -> Saying:
    words, beside = ratio.station.replace("_", " "), ratio.reference.replace("_", " ")
    row = row_of(ratio.station, shunted)
    row.update(row_of(ratio.reference, shunted, 1.0))
    return Saying(
        name=f"pulses of the {words} against the {beside}",
        kind="ratio",
        station=ratio.station,
        row=row,
        value=float(np.log(ratio.ratio)),
        u=max(ratio.u_own, _LEAST),
        terms=dict(ratio.terms),
        doubt="the contact of the bars, their diameters and densities",
        shots=tuple(shot.shot_id for shot in ratio.shots),
        said=f"true by stated strain {ratio.ratio:.5g} of that of the {beside}",
    )
