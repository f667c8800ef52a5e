"""The rig: two bars with a gauge station each, the striker, and what the scope leaves unsaid."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from shpb.errors import InputError
from shpb.rig.bar import Bar, Striker
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
    striker: Striker | None = None
    record: RecordHints = field(default_factory=RecordHints)
    text: str = ""  # the rig file, word for word, stored with every result
    settings: Mapping[str, object] = field(default_factory=dict)  # fields of Settings, for all its shots
    correlations: tuple[Correlation, ...] = ()  # between its values, from one calibration
    calibration_date: str = ""  # the day these values hold for
    remarks: str = ""
    source: str = ""  # the file it was read from, for messages

    def __post_init__(self) -> None:
        for side, bar, gauge in (
            ("incident", self.incident_bar, self.incident_gauge),
            ("transmitted", self.transmitted_bar, self.transmitted_gauge),
        ):
            if not 0 < gauge.to_specimen_m < bar.length_m:
                raise InputError(
                    f"the {side} gauge stands {gauge.to_specimen_m:g} m from the specimen on a bar "
                    f"of {bar.length_m:g} m",
                    where=f"{side}_gauge.to_specimen",
                    mend="Give the distance from the gauge to the specimen face, less than the bar's length",
                )

    @property
    def correlation_pairs(self) -> dict[tuple[str, str], float]:
        """Correlation coefficients by pairs of names of the uncertainty budget."""
        return {(one.first, one.second): one.coefficient for one in self.correlations}
