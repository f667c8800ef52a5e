"""The history of a rig: all its calibrations in a folder, each value over time, and how far it drifts."""

from __future__ import annotations

import itertools
import math
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from shpb.errors import FileMistakes, InputError
from shpb.quantity import Quantity
from shpb.rig.calibration import Calibration
from shpb.rig.calibration_file import is_calibration, read_calibration
from shpb.rig.rig import budget_name

Stated = Mapping[str, str | float]
_BAR_VALUES = (("wave_speed_m_s", "wave speed", "m/s"), ("poisson_ratio", "Poisson's ratio", ""))
_GAUGE_VALUES = (("gauge_factor", "factor", ""), ("to_specimen_m", "distance", "m"))


@dataclass(frozen=True, slots=True, kw_only=True)
class TrendPoint:
    """One value at one calibration."""

    calibration: str  # its name
    date: str
    value: Quantity


@dataclass(frozen=True, slots=True, kw_only=True)
class Drift:
    """The step of a value from one calibration to the next.

    ``in_u`` is the change in units of the joint standard uncertainty sqrt(u1^2 + u2^2), None where one of the two is
    not known. Errors that both calibrations share, such as the spacing of the light gates, are in both u but not in
    the change, so that a true drift shows a little less than it is. ``changed`` says what stood otherwise in the rig
    file: after a new gauge the step is no drift.
    """

    earlier: TrendPoint
    later: TrendPoint
    changed: tuple[str, ...] = ()

    @property
    def relative(self) -> float:
        """Change as a share of the earlier value; not a number where that is zero."""
        before = float(self.earlier.value)
        return (self.later.value - before) / before if before else math.nan

    @property
    def joint_u(self) -> float | None:
        """Standard uncertainty of the change, in the unit of the value."""
        u = self.earlier.value.u, self.later.value.u
        return None if u[0] is None or u[1] is None else math.hypot(u[0], u[1])

    @property
    def in_u(self) -> float | None:
        """Change in units of its standard uncertainty."""
        return (self.later.value - self.earlier.value) / self.joint_u if self.joint_u else None


@dataclass(frozen=True, slots=True, kw_only=True)
class Trend:
    """One value over time.

    Attributes
    ----------
    name : str
        As in the uncertainty budget: "incident bar: wave speed".
    table : str
        Of the rig file: "incident_bar".
    unit : str
        SI, empty for a number.
    points : tuple of TrendPoint
        By date, those calibrations that measured it.
    drifts : tuple of Drift
        One fewer.
    """

    name: str
    table: str
    unit: str
    points: tuple[TrendPoint, ...]
    drifts: tuple[Drift, ...]

    @property
    def scatter(self) -> float | None:
        """Standard deviation over the points, in the unit of the value; None for fewer than two."""
        values = [float(point.value) for point in self.points]
        if len(values) < 2:
            return None
        mean = sum(values) / len(values)
        return math.sqrt(sum((value - mean) ** 2 for value in values) / (len(values) - 1))


def history_of(folder: str | Path, rig: str = "") -> tuple[Calibration, ...]:
    """All calibrations of one rig in a folder, by date and then by name.

    Parameters
    ----------
    folder : str or Path
        Other files in it, rig files and sessions among them, are passed over.
    rig : str
        Name of the rig; may be left out where all calibrations are of one rig.

    Raises
    ------
    InputError
        If there is no such folder, no calibration of the rig in it, or calibrations of several rigs and none named.
    FileMistakes
        With the mistakes of every calibration file that cannot be used: a gap in a history must not pass unseen.
    """
    folder = Path(folder)
    if not folder.is_dir():
        raise InputError("there is no such folder", where=str(folder), mend="Name the folder of calibrations")
    found = _all_in(folder)
    rigs = Counter(one.rig for one in found)
    if not rig and len(rigs) > 1:
        raise InputError(
            f"calibrations of {len(rigs)} rigs: {', '.join(rigs)}", where=str(folder), mend="Name one of them"
        )
    found = [one for one in found if not rig or one.rig == rig]
    if not found:
        said = f" of the rig {rig}" if rig else ""
        beside = f"There are some of {', '.join(rigs)}" if rigs else "shpb calibrate writes them"
        raise InputError(f"there is no calibration{said}", where=str(folder), mend=beside)
    return tuple(sorted(found, key=lambda one: (one.date, one.name)))


def trends_of(calibrations: Sequence[Calibration]) -> tuple[Trend, ...]:
    """Every measured value over time, with the step from each calibration to the next that measured it.

    Parameters
    ----------
    calibrations : sequence of Calibration
        Of one rig, by date, as :func:`history_of` gives them.

    Returns
    -------
    tuple of Trend
        Bars first, then stations; a value that no calibration measured is left out.
    """
    tables: dict[str, None] = {}
    for one in calibrations:
        tables |= dict.fromkeys((*one.bars, *one.gauges))
    named = sorted(tables, key=lambda table: ("gauge" in table, table))
    return tuple(trend for table in named for trend in _of_table(table, calibrations))


def _all_in(folder: Path) -> list[Calibration]:
    found: list[Calibration] = []
    mistakes: list[FileMistakes] = []
    for path in sorted(folder.glob("*.toml")):
        if is_calibration(path):
            try:
                found.append(read_calibration(path))
            except FileMistakes as error:
                mistakes.append(error)
    if mistakes:
        raise FileMistakes(mistake for error in mistakes for mistake in error.mistakes)
    return found


def _of_table(table: str, calibrations: Sequence[Calibration]) -> Iterator[Trend]:
    is_gauge = "gauge" in table
    for field, what, unit in _GAUGE_VALUES if is_gauge else _BAR_VALUES:
        measured: list[tuple[TrendPoint, Stated]] = []
        for one in calibrations:
            of = one.gauges.get(table) if is_gauge else one.bars.get(table)
            value = getattr(of, field, None)
            if of is not None and value is not None:
                point = TrendPoint(calibration=one.name, date=one.date, value=value)
                measured.append((point, of.as_stated))
        if measured:
            name = budget_name(table, what) if is_gauge else f"{table.replace('_', ' ')}: {what}"
            drifts = tuple(
                Drift(earlier=before, later=after, changed=_changed(said, says))
                for (before, said), (after, says) in itertools.pairwise(measured)
            )
            points = tuple(point for point, _ in measured)
            yield Trend(name=name, table=table, unit=unit, points=points, drifts=drifts)


def _changed(before: Stated, after: Stated) -> tuple[str, ...]:
    """Keys of what the rig file stated that are no longer the same."""
    return tuple(key for key in before if key in after and before[key] != after[key])
