"""The rig: two bars with a gauge station each, the striker, and what the scope leaves unsaid."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from shpb.errors import InputError
from shpb.rig.bar import Bar, Striker
from shpb.rig.calibration import Calibration, calibrated_bar, calibrated_gauge
from shpb.rig.correlations import Correlation
from shpb.rig.gauge import Gauge


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
        """Correlation coefficients by pairs of names of the uncertainty budget."""
        return {(one.first, one.second): one.coefficient for one in self.correlations}

    @property
    def gauges(self) -> dict[str, Gauge]:
        """Every station by the name of its table in the rig file: ``incident_gauge``, ``incident_gauge_2``."""
        named: dict[str, Gauge] = {}
        for side in ("incident", "transmitted"):
            stations = (getattr(self, f"{side}_gauge"), *getattr(self, f"more_{side}_gauges"))
            named |= {station_name(side, n): gauge for n, gauge in enumerate(stations, 1)}
        return named

    def bar_of(self, station: str) -> Bar:
        """The bar that a station of :attr:`gauges` sits on."""
        return self.incident_bar if station.startswith("incident") else self.transmitted_bar

    def calibrated(self, calibration: Calibration) -> Rig:
        """The rig with the values of a calibration in place of the stated ones."""
        gauges = {
            name: calibrated_gauge(gauge, calibration.gauges.get(name)) for name, gauge in self.gauges.items()
        }

        def on(side: str) -> tuple[Gauge, ...]:
            return tuple(gauge for name, gauge in gauges.items() if name.startswith(side))

        measured = {frozenset((one.first, one.second)) for one in calibration.correlations}
        return replace(
            self,
            incident_bar=calibrated_bar(self.incident_bar, calibration.bars.get("incident_bar")),
            transmitted_bar=calibrated_bar(self.transmitted_bar, calibration.bars.get("transmitted_bar")),
            incident_gauge=on("incident")[0],
            transmitted_gauge=on("transmitted")[0],
            more_incident_gauges=on("incident")[1:],
            more_transmitted_gauges=on("transmitted")[1:],
            correlations=(
                *(one for one in self.correlations if frozenset((one.first, one.second)) not in measured),
                *calibration.correlations,
            ),
            calibration_date=calibration.date,
            calibration=calibration,
        )


def station_name(side: str, number: int) -> str:
    """Name of a station's table in the rig file; the first of a bar has no number."""
    return f"{side}_gauge" if number == 1 else f"{side}_gauge_{number}"
