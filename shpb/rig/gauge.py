"""A strain-gauge station on a bar: gauges, bridge, amplifier and the scope channel behind it."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import StrEnum

from shpb.quantity import Quantity


class Arrangement(StrEnum):
    """How the active gauges sit in the Wheatstone bridge (arms 1 and 3 are opposite)."""

    QUARTER = "quarter"
    HALF_OPPOSITE = "half-opposite"  # two axial gauges on opposite sides, in opposite arms
    HALF_POISSON = "half-poisson"  # one axial, one transverse, in adjacent arms
    FULL_POISSON = "full-poisson"  # two axial, two transverse
    FULL = "full"  # four active arms, + - + -


class TestKind(StrEnum):
    """What the bars do to the specimen."""

    __test__ = False  # not a test class, whatever its name says to a test runner

    COMPRESSION = "compression"
    TENSION = "tension"


@dataclass(frozen=True, slots=True, kw_only=True)
class Gauge:
    """One gauge station.

    ``channels`` names one scope channel, or two where each side of the bar is recorded on its
    own: their mean strain is the axial strain, half their difference the bending strain.
    A channel is the column name in the record, or its position (1 is the first voltage column).
    """

    to_specimen_m: Quantity  # distance from the gauge station to the specimen face
    channels: tuple[str | int, ...]
    gauge_factor: Quantity
    excitation_v: Quantity
    arrangement: Arrangement
    gain: Quantity = field(default_factory=lambda: Quantity(1.0))
    tension_sign: int = 1  # sign of the voltage while the bar is in tension
    linear_amplifier: bool = False  # output proportional to strain by construction
    length_m: Quantity = field(default_factory=lambda: Quantity(0.0))  # of the gauge grid
    resistance_ohm: Quantity | None = None
    lead_resistance_ohm: Quantity = field(default_factory=lambda: Quantity(0.0))
    bandwidth_hz: Quantity | None = None  # -3 dB of the amplifier
    scope_range_v: tuple[float, float] | None = None
    scope_bits: int | None = None

    def loading_sign(self, kind: TestKind) -> int:
        """Sign that turns this station's voltage positive under the loading pulse."""
        return self.tension_sign if kind is TestKind.TENSION else -self.tension_sign

    @property
    def effective_gauge_factor(self) -> float:
        """Gauge factor less the loss in the lead wires, k R/(R + R_lead)."""
        if self.resistance_ohm is None or not self.lead_resistance_ohm:
            return self.gauge_factor
        return self.gauge_factor * self.resistance_ohm / (self.resistance_ohm + self.lead_resistance_ohm)
