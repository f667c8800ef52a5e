"""Ways of the pulse in a calibration shot, as sums of bar lengths and station distances.

A way is a sum of bar lengths and station distances, so that errors of these can be carried along. With bars apart it is
counted from the struck end: the station at y from it on a bar of length L is passed after y, 2 L - y (turned in sign),
2 L + y, ... With bars together it is counted from the contact, where both waves are the same as long as the bars are
pressed together: -x for incident stations, x for those of the transmitted bar, and again, turned, 2 L_t - x.
What comes later in bars together hangs on how the bars part.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from shpb.calibrate.session import BarEnd, CalibrationShot, ShotKind
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig

MOST_PASSAGES = 12  # of one station: further ones have lost more than they tell


@dataclass(frozen=True, slots=True)
class Way:
    """A way through one or both bars: for each bar what lengths it is the sum of.

    ``terms`` are (bar, length, factor); a length is a bar ("incident") or a station ("incident_gauge_2").
    """

    terms: tuple[tuple[str, str, float], ...]
    sign: int = 1
    crosses: bool = False  # the contact of the two bars

    def length_m(self, side: str, lengths: Mapping[str, float]) -> float:
        """Length of the way within one bar [m]."""
        return sum(factor * lengths[name] for bar, name, factor in self.terms if bar == side)

    def time_s(self, lengths: Mapping[str, float], speeds: Mapping[str, float]) -> float:
        """Time at the bars' wave speeds [s]."""
        return sum(factor * lengths[name] / speeds[bar] for bar, name, factor in self.terms)


@dataclass(frozen=True, slots=True, kw_only=True)
class Passage:
    """One passage at one station."""

    station: str
    way: Way


def lengths_of(rig: Rig) -> dict[str, float]:
    """Lengths of bars and distances of stations by the names that ways use [m]."""
    bars = {"incident": float(rig.incident_bar.length_m), "transmitted": float(rig.transmitted_bar.length_m)}
    return bars | {name: float(gauge.to_specimen_m) for name, gauge in rig.gauges.items()}


def bar_of(rig: Rig, side: str) -> Bar:
    """The bar of a side."""
    return rig.incident_bar if side == "incident" else rig.transmitted_bar


# --- ways -----------------------------------------------------------------------------------------------------


def ways_of(shot: CalibrationShot, station: str) -> Iterator[tuple[Way, bool]]:
    """Ways to a station, without end, and whether the passage can be used; those of one kind in their order."""
    if shot.kind is ShotKind.BARS_APART:
        yield from _to_and_fro(shot, station)
    elif station.startswith("incident"):
        here = "incident"
        yield Way(((here, station, -1.0),)), True
        for trip in range(MOST_PASSAGES):
            yield Way(((here, here, 2.0 * trip), (here, station, 1.0)), 1, True), False
            yield Way(((here, here, 2.0 * trip + 2), (here, station, -1.0))), False
    else:
        there = "transmitted"
        yield Way(((there, station, 1.0),), 1, True), True
        yield Way(((there, there, 2.0), (there, station, -1.0)), -1, True), True
        for trip in range(1, MOST_PASSAGES):
            yield Way(((there, there, 2.0 * trip), (there, station, 1.0)), 1, True), False
            again = ("incident", "incident", 2.0 * trip)
            yield Way((again, (there, station, 1.0)), 1, True), False


def _to_and_fro(shot: CalibrationShot, station: str) -> Iterator[tuple[Way, bool]]:
    side = shot.bar
    for number in range(MOST_PASSAGES):
        trips, outward = 2.0 * ((number + 1) // 2), 1.0 if number % 2 == 0 else -1.0
        if shot.struck_end is BarEnd.SPECIMEN:
            terms: tuple[tuple[str, str, float], ...] = ((side, side, trips), (side, station, outward))
        else:
            terms = ((side, side, trips + outward), (side, station, -outward))
        yield Way(tuple(term for term in terms if term[2]), 1 if number % 2 == 0 else -1), True
