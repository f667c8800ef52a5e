"""Checks of a shot whose waves two or more stations on a bar tell apart."""

from __future__ import annotations

from collections.abc import Iterator
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, dot
from shpb.pulse.incident_front import LEAD_RADII
from shpb.pulse.separated import SeparatedBar
from shpb.trust.evidence import Evidence
from shpb.trust.finding import Answer, Weight, graded
from shpb.trust.judge import check
from shpb.trust.sources import sources_of
from shpb.wave.station_noise import stations_of

_MOST_GROWTH = 5.0  # of noise by the end of the loading: common practice
_MOST_APART = 2.0  # standard uncertainties between two stations' scales, or places
_LEAST_LATE = 0.1  # samples: fronts of two channels are not laid on each other better than this


@check(
    source="separation of waves by stations: errors add up over the record (Lundberg & Henchoz 1977; Bussac et al. "
    "2002); limit: common practice",
    gravest=Weight.NOTE,
)
def separation(evidence: Evidence) -> Answer | None:
    """What separation by stations does to noise and zero lines, and the frequencies that no spacing tells apart."""
    if not evidence.pulses.separated:
        return None
    end_s = evidence.faces.record_time_of_zero_s + evidence.response.time_s[evidence.response.loading[1] - 1]
    grown = {bar.side: _growth(bar, end_s, evidence) for bar in evidence.pulses.separated}
    worst = max(grown.values())
    said = "; ".join(_in_words(bar, grown[bar.side], end_s, evidence) for bar in evidence.pulses.separated)
    return graded(
        worst,
        _MOST_GROWTH,
        measured=said,
        action="Put a third station where its distances to the others are no whole multiples of each other, or the two "
        "further apart.",
        show=lambda growth: f"noise {growth:.1f} times",
    )


def _growth(bar: SeparatedBar, end_s: float, evidence: Evidence) -> float:
    """Noise of the worse wave at a time, by that of one station."""
    at = bar.begin + round((end_s - bar.begin_s) / evidence.pulses.sample_interval_s)
    return max(bar.noise_at(at, side) for side in ("right", "left")) / bar.usual_noise


def _in_words(bar: SeparatedBar, growth: float, end_s: float, evidence: Evidence) -> str:
    speed = evidence.rig.bar_of(bar.side).wave_speed_m_s
    transit = (max(bar.positions_m) - min(bar.positions_m)) / speed
    offset = 1 + int(max(end_s - bar.begin_s, 0.0) / (2 * transit))
    lost = ", ".join(f"{1e-3 * f:.3g}" for f in bar.singular_hz[1:4])
    more = ", ..." if len(bar.singular_hz) > 4 else ""
    apart = f"no spacing tells apart {lost}{more} kHz" if lost else "the spacings tell all of the band apart"
    return (
        f"{bar.side} bar by {len(bar.stations)} stations: by the end of the loading noise has grown {growth:.1f} "
        f"times, an offset of one zero line up to {offset} times; {apart}, and slow changes rest on the start from rest"
    )


@check(
    source="the front passes every station before anything comes back; scales by the budget's gauge factors, "
    "excitations and gains",
    gravest=Weight.NOTE,
)
def station_scales(evidence: Evidence) -> Answer | None:
    """The stations of a bar must see the same first pulse: a difference of their scales adds up in the waves."""
    found = [one for bar in evidence.pulses.separated for one in against_first(bar, evidence)]
    if not found:
        return None
    worst = max(found, key=lambda one: abs(one.scale - 1) / one.u_scale)
    return graded(
        abs(worst.scale - 1) / worst.u_scale,
        _MOST_APART,
        measured=f"{worst.words} shows {worst.scale:.4f} of what the station before it does (u {worst.u_scale:.4f})",
        action="Calibrate the stations against each other by bars apart: in the waves such a difference adds up.",
        show=lambda apart: f"{apart:.3g} standard uncertainties",
    )


@check(
    source="the front passes every station before anything comes back; places and wave speed by the budget",
    gravest=Weight.NOTE,
)
def station_places(evidence: Evidence) -> Answer | None:
    """The first pulse must come to each station when its distance says: the waves are told apart by that time."""
    found = [one for bar in evidence.pulses.separated for one in against_first(bar, evidence)]
    if not found:
        return None
    worst = max(found, key=lambda one: abs(one.late_s) / one.u_late_s)
    speed = evidence.rig.bar_of(worst.side).wave_speed_m_s
    when = "later" if worst.late_s > 0 else "sooner"
    return graded(
        abs(worst.late_s) / worst.u_late_s,
        _MOST_APART,
        measured=f"{worst.words} sees the pulse {1e6 * abs(worst.late_s):.2f} us {when} than its distance says "
        f"(u {1e6 * worst.u_late_s:.2f} us), as if it stood {1e3 * abs(worst.late_s) * speed:.1f} mm off",
        action="Measure the distances of the stations again, or let a calibration by bars apart find them.",
        show=lambda apart: f"{apart:.3g} standard uncertainties",
    )


class _Seen(NamedTuple):
    """A station against the one that the pulse passes first, with standard uncertainties."""

    side: str
    station: str
    scale: float
    u_scale: float
    late_s: float
    u_late_s: float

    @property
    def words(self) -> str:
        return self.station.replace("_", " ")


def against_first(bar: SeparatedBar, evidence: Evidence) -> list[_Seen]:
    """Scale and delay of each station by least squares, while the pulse is alone there."""
    material = evidence.rig.bar_of(bar.side)
    speed, interval = material.wave_speed_m_s, evidence.pulses.sample_interval_s
    stations = stations_of(bar, material, interval, evidence.settings.dispersion)
    grid, lead = stations.grid, LEAD_RADII * material.radius_time_s
    first = int(np.argmin(bar.positions_m))
    seen = grid.transform(bar.strain[first]) * grid.fade
    out = []
    for k, (name, x) in enumerate(zip(bar.stations, bar.positions_m, strict=True)):
        # How long the pulse is alone here: to the specimen's face and back, or to the far end.
        alone_s = 2 * (-x if bar.side == "incident" else material.length_m - x) / speed - 2 * lead
        stop = bar.starts[k] + int((2 * lead + alone_s) / interval)
        if k == first or alone_s < 4 * lead or stop > bar.strain.shape[1]:
            continue
        part = slice(bar.starts[k], stop)
        expected = seen * np.exp(-stations.xi_per_m * (x - bar.positions_m[first]))
        wave, slope = grid.back(expected)[part], grid.back(expected * grid.p_per_s)[part]
        normal = np.array([[dot(wave, wave), dot(wave, slope)], [dot(wave, slope), dot(slope, slope)]])
        # Noise of the first station is in what is expected: it would make the scale too small.
        normal[0, 0] -= wave.size * (bar.noise[first] * grid.noise_share) ** 2
        scale, by_slope = np.linalg.solve(
            normal, [dot(wave, bar.strain[k, part]), dot(slope, bar.strain[k, part])]
        )
        noise = np.hypot(bar.noise[k], bar.noise[first]) * np.sqrt(np.diag(np.linalg.inv(normal)))
        since = bar.begin + np.arange(float(part.start), float(part.stop))
        pair = bar.stations[first], name
        u_scale = float(
            np.linalg.norm((noise[0], _u_scales(evidence, *pair), *_of_zeros(bar, (first, k), wave, since)))
        )
        u_late = float(np.hypot(noise[1] / scale, _LEAST_LATE * interval))
        late = float(-by_slope / scale)
        out.append(
            _Seen(
                bar.side,
                name,
                float(scale),
                u_scale,
                late,
                float(np.hypot(u_late, _u_late_s(evidence, *pair))),
            )
        )
    return out


def _of_zeros(
    bar: SeparatedBar, pair: tuple[int, int], wave: FloatArray, since: FloatArray
) -> Iterator[float]:
    """What the zero lines of two stations leave in the scale between them, at samples ``since`` of the record."""
    square = dot(wave, wave)
    for k in pair:
        zero = bar.zeros[k]
        yield zero.u_level * abs(float(wave.sum())) / square
        yield zero.u_slope * abs(dot(wave, since - zero.centre)) / square


def _u_scales(evidence: Evidence, first: str, second: str) -> float:
    """Standard uncertainty of the ratio of two stations' scales."""
    squares = [
        (source.u * (source.acts.get(f"strain:{first}", 0.0) - source.acts.get(f"strain:{second}", 0.0))) ** 2
        for source in sources_of(evidence)
    ]
    return float(np.sqrt(sum(squares)))


def _u_late_s(evidence: Evidence, first: str, second: str) -> float:
    """Standard uncertainty of the travel time between two stations by their distances and the wave speed [s]."""
    gauges, bar = evidence.rig.gauges, evidence.rig.bar_of(first)
    way = {name: float(gauges[name].to_specimen_m) / bar.wave_speed_m_s for name in (first, second)}
    short = "in" if first.startswith("incident") else "out"
    moved = [
        source.u
        * (
            source.acts.get(f"distance:{second}", 0.0) * way[second]
            - source.acts.get(f"distance:{first}", 0.0) * way[first]
            - source.acts.get(f"speed_{short}", 0.0) * (way[second] - way[first])
        )
        for source in sources_of(evidence)
    ]
    return float(np.sqrt(sum(one**2 for one in moved)))
