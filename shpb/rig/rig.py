"""The rig: two bars with a gauge station each, the striker, and what the scope leaves unsaid."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from shpb.errors import InputError
from shpb.rig.bar import Bar, Striker, one_stock
from shpb.rig.calibration import Calibration, Departure, calibrated_bar, calibrated_gauge, departures
from shpb.rig.correlations import Correlation, correlations_after
from shpb.rig.gauge import Gauge

SIDES = ("incident", "transmitted")


@dataclass(frozen=True, slots=True, kw_only=True)
class RecordHints:
    """What the record file may lack; where the file says it too, both must agree.

    ``None`` means: the file must say it.
    """

    sample_interval_s: float | None = None
    trigger_offset_s: float | None = None  # time of the first sample on the record's clock
    time_unit: str | None = None  # "s", "ms", "us" or "ns"
    voltage_unit: str | None = None  # "V", "mV" or "uV"
    volts_per_code: tuple[float, ...] | None = None  # one for all channels, or one each
    channel_names: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Rig:
    """Everything that stands in the lab and does not change from shot to shot.

    Examples
    --------
    >>> import shpb
    >>> rig = shpb.read_rig(folder / "calibration" / "bench_1.toml")
    >>> round(rig.incident_bar.wave_speed_m_s)
    4870
    >>> rig.incident_bar.diameter_m.u  # standard uncertainty [m]
    5e-06
    """

    name: str
    incident_bar: Bar
    transmitted_bar: Bar
    incident_gauge: Gauge
    transmitted_gauge: Gauge
    more_incident_gauges: tuple[Gauge, ...] = ()  # further stations on the bar
    more_transmitted_gauges: tuple[Gauge, ...] = ()
    striker: Striker | None = None
    record: RecordHints = field(default_factory=RecordHints)
    text: str = ""  # the rig file, word for word, stored with every result
    settings: Mapping[str, object] = field(default_factory=dict)  # fields of Settings, for all its shots
    correlations: tuple[Correlation, ...] = ()  # between its values, from one calibration
    calibration_date: str = ""  # the day these values hold for
    calibration: Calibration | None = None  # the one in force; its values stand above already
    departures: tuple[
        Departure, ...
    ] = ()  # what the rig file no longer says as on the day of the calibration
    remarks: str = ""
    source: str = ""  # the file it was read from, for messages

    def __post_init__(self) -> None:
        for name, gauge in self.gauges.items():
            side, bar = name.split("_")[0], self.bar_of(name)
            if not 0 < gauge.to_specimen_m < bar.length_m:
                raise InputError(
                    f"the {side} gauge stands {gauge.to_specimen_m:g} m from the specimen on a bar "
                    f"of {bar.length_m:g} m",
                    where=f"{name}.to_specimen",
                    mend="Give the distance from the gauge to the specimen face, less than the bar's length",
                )

    @property
    def correlation_pairs(self) -> dict[tuple[str, str], float]:
        """Correlation coefficients by pairs of names of the uncertainty budget.

        Further stations are no part of the budget of a shot, so pairs with one of them are left out.
        """
        return {
            (one.first, one.second): one.coefficient
            for one in self.correlations
            if not one.of_further_station
        }

    @property
    def gauges(self) -> dict[str, Gauge]:
        """Every station by the name of its table in the rig file: ``incident_gauge``, ``incident_gauge_2``."""
        named: dict[str, Gauge] = {}
        for side in SIDES:
            stations = (getattr(self, f"{side}_gauge"), *getattr(self, f"more_{side}_gauges"))
            named |= {station_name(side, n): gauge for n, gauge in enumerate(stations, 1)}
        return named

    def bar_of(self, station: str) -> Bar:
        """The bar that a station of :attr:`gauges` sits on."""
        return self.incident_bar if station.startswith("incident") else self.transmitted_bar

    def calibrated(self, calibration: Calibration) -> Rig:
        """The rig with the values of a calibration in place of the stated ones.

        To be asked of the rig as its file states it: what has changed since the calibration is noted in
        ``departures``, and what was measured takes its covariance along.
        """
        bars = {"incident_bar": self.incident_bar, "transmitted_bar": self.transmitted_bar}
        gauges = {
            name: calibrated_gauge(gauge, calibration.gauges.get(name)) for name, gauge in self.gauges.items()
        }

        def on(side: str) -> tuple[Gauge, ...]:
            return tuple(gauge for name, gauge in gauges.items() if name.startswith(side))

        measured = {name: calibrated_bar(bar, calibration.bars.get(name)) for name, bar in bars.items()}
        return replace(
            self,
            incident_bar=measured["incident_bar"],
            transmitted_bar=measured["transmitted_bar"],
            incident_gauge=on("incident")[0],
            transmitted_gauge=on("transmitted")[0],
            more_incident_gauges=on("incident")[1:],
            more_transmitted_gauges=on("transmitted")[1:],
            correlations=correlations_after(
                self.correlations,
                calibration.correlations,
                _measured_names(calibration),
                shared=_shared(*bars.values()) if not one_stock(*measured.values()) else (),
            ),
            calibration_date=calibration.date,
            calibration=calibration,
            departures=departures(self.name, bars, self.gauges, calibration),
        )


def _shared(a: Bar, b: Bar) -> tuple[str, ...]:
    """What two bars of one stock have in common, by the names of the uncertainty budget; empty for others."""
    if not one_stock(a, b):
        return ()
    modulus = a.stated_modulus_pa
    speed = "wave speed" if modulus is None or modulus.u is None else "modulus"
    return "density", "diameter", speed, "Poisson's ratio"


def _measured_names(calibration: Calibration) -> set[str]:
    """Values that were measured, by their names in the uncertainty budget."""
    names: set[str] = set()
    for table, bar in calibration.bars.items():
        side = table.replace("_", " ")
        if bar.wave_speed_m_s is not None:
            names |= {f"{side}: wave speed", f"{side}: modulus"}
        if bar.poisson_ratio is not None:
            names.add(f"{side}: Poisson's ratio")
    for table, gauge in calibration.gauges.items():
        if gauge.gauge_factor is not None:
            names |= {budget_name(table, what) for what in ("factor", "excitation", "gain")}
        if gauge.to_specimen_m is not None:
            names.add(budget_name(table, "distance"))
    return names


def budget_name(station: str, what: str) -> str:
    """Name in the uncertainty budget of a station's ``factor``, ``distance``, ``excitation`` or ``gain``.

    Examples
    --------
    >>> budget_name("incident_gauge_2", "factor"), budget_name("transmitted_gauge", "gain")
    ('incident gauge 2 factor', 'transmitted gain')
    """
    words = station.replace("_", " ")
    further = not words.endswith("gauge")
    return f"{words} {what}" if further or what in {"factor", "distance"} else f"{words[:-6]} {what}"


def station_name(side: str, number: int) -> str:
    """Name of a station's table in the rig file; the first of a bar has no number."""
    return f"{side}_gauge" if number == 1 else f"{side}_gauge_{number}"
