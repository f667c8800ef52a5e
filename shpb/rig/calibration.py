"""The result of a calibration: dated values of a rig with their uncertainties, and what they were measured with.

A rig file names the calibration in force. Its values then stand in place of those of the rig file, so that everything
after it, budget included, sees one rig. The gauge factor of a calibrated station holds its whole chain: with the
excitation and the gain that the rig file states it gives the right strain, and its uncertainty is that of the whole.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace

from shpb.quantity import Quantity
from shpb.rig.bar import Bar
from shpb.rig.correlations import Correlation
from shpb.rig.gauge import Gauge
from shpb.rig.propagation_table import PropagationTable

IN_THE_CHAIN = "within the calibrated gauge factor"


@dataclass(frozen=True, slots=True, kw_only=True)
class BarCalibration:
    """What was measured of one bar (None where it was not), and what the rig file said of it that day."""

    wave_speed_m_s: Quantity | None = None
    poisson_ratio: Quantity | None = None
    propagation: PropagationTable | None = None
    as_stated: Mapping[str, str | float] = field(default_factory=dict)  # see :func:`stated_of_bar`


@dataclass(frozen=True, slots=True, kw_only=True)
class GaugeCalibration:
    """What was measured of one gauge station, and what the rig file said of it that day.

    ``gauge_factor`` holds the whole chain; ``strain_per_volt`` [1/V] says the same for small signals.
    """

    gauge_factor: Quantity | None = None
    strain_per_volt: Quantity | None = None
    to_specimen_m: Quantity | None = None
    as_stated: Mapping[str, str | float] = field(default_factory=dict)  # see :func:`stated_of`


@dataclass(frozen=True, slots=True, kw_only=True)
class CalibrationRecord:
    """One record that the values were measured from."""

    shot_id: str
    kind: str
    file: str
    sha256: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Calibration:
    """One dated calibration of a rig.

    ``bars`` and ``gauges`` go by the tables of the rig file: ``incident_bar``, ``transmitted_gauge_2``.
    """

    name: str
    rig: str  # name of the rig
    date: str  # year-month-day
    holds_days: int
    bars: Mapping[str, BarCalibration] = field(default_factory=dict)
    gauges: Mapping[str, GaugeCalibration] = field(default_factory=dict)
    correlations: tuple[Correlation, ...] = ()
    records: tuple[CalibrationRecord, ...] = ()
    methods: Mapping[str, str] = field(default_factory=dict)  # in words, by what was measured
    findings: tuple[str, ...] = ()
    temperature_k: Quantity | None = None
    remarks: str = ""
    program_version: str = ""
    text: str = ""  # the file, word for word, stored with every result
    source: str = ""  # the file it was read from, for messages
    sha256: str = ""


def stated_of(gauge: Gauge) -> dict[str, str | float]:
    """What identifies a station: a calibration of it holds only as long as none of this changes."""
    return {
        "arrangement": gauge.arrangement.value,
        "channel": ", ".join(str(channel) for channel in gauge.channels),
        "gauge_factor": float(gauge.gauge_factor),
        "excitation_V": float(gauge.excitation_v),
        "gain": float(gauge.gain),
        "lead_resistance_ohm": float(gauge.lead_resistance_ohm),
        "tension_sign": float(gauge.tension_sign),
        "to_specimen_m": float(gauge.to_specimen_m),
    }


def stated_of_bar(bar: Bar) -> dict[str, str | float]:
    """What identifies a bar: a wave speed measured on it follows from its stated length, a modulus from its density."""
    return {
        "material": bar.material,
        "length_m": float(bar.length_m),
        "diameter_m": float(bar.diameter_m),
        "density_kg_m3": float(bar.density_kg_m3),
    }


@dataclass(frozen=True, slots=True, kw_only=True)
class Departure:
    """Something in the rig file that is no longer as it was on the day of the calibration.

    ``grave`` where the calibrated values are wrong for what stands in the lab now.
    """

    table: str  # of the rig file
    key: str
    then: str | float
    now: str | float
    grave: bool = True

    def __str__(self) -> str:
        then, now = (f"{value:.6g}" if isinstance(value, float) else value for value in (self.then, self.now))
        return f"{self.table} {self.key} {now}, at the calibration {then}"


def departures(
    rig: str, bars: Mapping[str, Bar], gauges: Mapping[str, Gauge], calibration: Calibration
) -> tuple[Departure, ...]:
    """What in a rig is not as the calibration found it.

    Parameters
    ----------
    rig : str
        Name of the rig.
    bars, gauges : mapping
        As the rig file states them now, by their tables.
    calibration : Calibration
        Measured on the rig as it was.
    """
    found: list[Departure] = []
    if rig != calibration.rig:
        found.append(Departure(table="rig", key="name", then=calibration.rig, now=rig))
    for name, bar_then in calibration.bars.items():
        found += _changes(name, bar_then.as_stated, stated_of_bar(bars[name]), {})
    for name, then in calibration.gauges.items():
        if name not in gauges:
            found.append(
                Departure(
                    table=name, key="station", then="calibrated", now="not in the rig file", grave=False
                )
            )
            continue
        measured = {"gauge_factor": then.gauge_factor, "to_specimen_m": then.to_specimen_m}
        found += _changes(name, then.as_stated, stated_of(gauges[name]), measured)
    return tuple(found)


def _changes(
    table: str,
    then: Mapping[str, str | float],
    now: Mapping[str, str | float],
    measured: Mapping[str, Quantity | None],
) -> Iterator[Departure]:
    for key, before in then.items():
        after = now.get(key, before)
        if isinstance(before, float) and isinstance(after, float):
            value = measured.get(key)
            # Who copies a measured value into the rig file, rounded, has changed nothing in the lab.
            copied = value is not None and math.isclose(after, value, rel_tol=1e-4)
            if copied or math.isclose(after, before, rel_tol=1e-9, abs_tol=1e-12):
                continue
        elif after == before:
            continue
        yield Departure(table=table, key=key, then=before, now=after)


def calibrated_bar(bar: Bar, by: BarCalibration | None) -> Bar:
    """The bar with the measured values in place of the stated ones."""
    if by is None:
        return bar
    changes: dict[str, object] = {}
    if by.wave_speed_m_s is not None:
        changes |= {"wave_speed_m_s": by.wave_speed_m_s, "stated_modulus_pa": None}
    if by.poisson_ratio is not None:
        changes["poisson_ratio"] = by.poisson_ratio
    if by.propagation is not None:
        changes["propagation"] = by.propagation
    return replace(bar, **changes)  # type: ignore[arg-type]


def calibrated_gauge(gauge: Gauge, by: GaugeCalibration | None) -> Gauge:
    """The station with the measured values in place of the stated ones."""
    if by is None:
        return gauge
    changes: dict[str, object] = {}
    if by.gauge_factor is not None:
        changes |= {
            "gauge_factor": by.gauge_factor,
            "excitation_v": Quantity(float(gauge.excitation_v), 0.0, IN_THE_CHAIN),
            "gain": Quantity(float(gauge.gain), 0.0, IN_THE_CHAIN),
        }
    if by.to_specimen_m is not None:
        changes["to_specimen_m"] = by.to_specimen_m
    return replace(gauge, **changes)  # type: ignore[arg-type]
