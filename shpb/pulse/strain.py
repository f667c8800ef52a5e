"""Volts to strain at the two gauge stations: the one place where the sign of the wiring is applied."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from shpb.arrays import FloatArray, frozen, require_finite
from shpb.pulse.bridge import strain_from_voltage
from shpb.pulse.front import UnusableShotError
from shpb.record.record import Record
from shpb.rig.bar import Bar
from shpb.rig.gauge import Gauge, TestKind
from shpb.rig.rig import Rig

_BLOCK = 1 << 20


@dataclass(frozen=True, slots=True, eq=False)
class StationStrain:
    """Strain at one gauge station over the whole record, positive under the loading pulse.

    Attributes
    ----------
    axial : float array, shape (samples,)
        Mean strain of the station's channels [1]; only a constant zero is removed yet.
    bending : float array or None
        Half the difference of the two sides [1], where each side has its own channel.
    voltage_v : float array, shape (channels of the station, samples)
        The voltages as acquired.
    """

    axial: FloatArray
    bending: FloatArray | None
    voltage_v: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class GaugeStrain:
    """Strain at both stations on the record's clock.

    ``more`` holds further stations by their names in :attr:`shpb.rig.rig.Rig.gauges`, where they were asked for.
    """

    incident: StationStrain
    transmitted: StationStrain
    sample_interval_s: float
    start_s: float
    more: Mapping[str, StationStrain] = field(default_factory=dict)

    @property
    def stations(self) -> dict[str, StationStrain]:
        """Every station by its name in :attr:`shpb.rig.rig.Rig.gauges`."""
        return {"incident_gauge": self.incident, "transmitted_gauge": self.transmitted, **self.more}

    @property
    def samples(self) -> int:
        """Number of samples."""
        return int(self.incident.axial.size)

    def index(self, time_s: float) -> int:
        """Sample at or after a time on the record's clock, kept inside the record."""
        return int(np.clip(np.ceil((time_s - self.start_s) / self.sample_interval_s), 0, self.samples))

    def time(self, index: int) -> float:
        """Time of a sample on the record's clock [s]."""
        return self.start_s + index * self.sample_interval_s


def gauge_strain(record: Record, rig: Rig, kind: TestKind, *, every: bool = False) -> GaugeStrain:
    """Convert the record of a shot to strain at both stations; with ``every`` at further ones of the rig too.

    Raises
    ------
    InputError
        If a channel named in the rig file is not in the record, or holds a NaN.
    """
    return GaugeStrain(
        station_strain(record, rig.incident_gauge, rig.incident_bar, kind),
        station_strain(record, rig.transmitted_gauge, rig.transmitted_bar, kind),
        record.sample_interval_s,
        record.start_s,
        {
            name: station_strain(record, gauge, rig.bar_of(name), kind)
            for name, gauge in rig.gauges.items()
            if every and name not in ("incident_gauge", "transmitted_gauge")
        },
    )


def station_strain(record: Record, gauge: Gauge, bar: Bar, kind: TestKind) -> StationStrain:
    """Convert the channels of one station to strain, positive under the loading pulse.

    Raises
    ------
    InputError
        If a channel is not in the record, or holds a NaN.
    UnusableShotError
        If a voltage means more strain than any bar lives through.
    """
    voltages = [record.channel(channel) for channel in gauge.channels]
    for channel, voltage in zip(gauge.channels, voltages, strict=True):
        require_finite(
            voltage,
            where=f"channel {channel!r}",
            mend="Cut the record before that sample or export it again",
        )
    # strain_from_voltage gives tension positive: turn it once to loading positive.
    sign = 1.0 if kind is TestKind.TENSION else -1.0
    sides = []
    for voltage in voltages:
        zero, side = _first_zero(voltage), np.empty_like(voltage)
        # By blocks: a record of tens of millions of samples needs no second one beside it.
        for start in range(0, voltage.size, _BLOCK):
            block = slice(start, start + _BLOCK)
            side[block] = strain_from_voltage(voltage[block] - zero, gauge, bar.poisson_ratio)
        side *= sign
        sides.append(side)
    _require_possible(sides, gauge)
    axial = sides[0] if len(sides) == 1 else 0.5 * (sides[0] + sides[1])
    bending = None if len(sides) == 1 else frozen(0.5 * (sides[0] - sides[1]))
    # One channel is seen, not copied.
    as_recorded = voltages[0][np.newaxis] if len(voltages) == 1 else np.stack(voltages)
    return StationStrain(frozen(axial), bending, as_recorded)


def _require_possible(sides: list[FloatArray], gauge: Gauge) -> None:
    """No bar lives through 5 % of strain: such a number comes from a wrong unit, gain or a spike."""
    for channel, strain in zip(gauge.channels, sides, strict=True):
        worst = max(int(np.argmax(strain)), int(np.argmin(strain)), key=lambda i: abs(strain[i]))
        if abs(strain[worst]) > 0.05:
            raise UnusableShotError(
                f"the voltage at sample {worst} means {100 * float(strain[worst]):.3g} % of strain in the bar",
                where=f"channel {channel!r}",
                mend="Check the unit of the voltages (mV or V), gain, excitation and gauge factor in the rig file, and "
                "look for a spike in the record",
                check="strain range",
            )


def _first_zero(voltage_v: FloatArray) -> float:
    """Level before the shot: median of the first fiftieth of the record. The zero line comes later;
    the bridge's non-linearity only needs the zero to within a per cent or so of the signal.
    """
    return float(np.median(voltage_v[: max(voltage_v.size // 50, 16)]))
