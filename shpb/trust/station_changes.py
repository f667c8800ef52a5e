"""What a small change of a station or of the bar does to waves that stations have told apart, at the specimen's face.

The waves are linear in the strains of the stations, so a gauge factor changes them by that station's own share. Places
and wave speed change what the stations should see of given waves: with e = A w, the least-squares estimate of w changes
by that of -dA w (the residual, which is noise, is left out).

The clock's zero is the foot of the incident wave at the face. Whatever moves that foot, moves the clock; how far, is
found by least squares over the front, scale and delay together.

Approximate: the band's line is taken on the waves' faces as if they ended with the loading, a wave that comes back in
the transmitted bar left out.
"""

from __future__ import annotations

import dataclasses

import numpy as np

from shpb.arrays import BoolArray, ComplexArray, FloatArray
from shpb.pulse.separated import SeparatedBar
from shpb.quantity import Quantity
from shpb.rig.bar import Bar
from shpb.trust.evidence import Evidence
from shpb.trust.sources import laid_on_feet
from shpb.wave.complex_propagation import u_attenuation_per_m
from shpb.wave.laplace import propagation_at
from shpb.wave.station_noise import FaceKernels, left_at_face_s, stations_of
from shpb.wave.stations import Stations, Waves

# Steps of the differences by which the propagation coefficient is differentiated.
_RELATIVE_STEP, _POISSON_STEP = 1e-4, 1e-3
# The front that ties the clock, in a/c0 about its foot, if it has no known rise.
_FRONT_BEFORE, _FRONT_AFTER = 12.0, 30.0


class StationChanges:
    """Changes of the waves at the face by a unit change of one quantity.

    Waves go by number: incident 0, reflected 1, transmitted 2, returning 3.

    Parameters
    ----------
    evidence : Evidence
        With ``pulses.separated``.
    time_s, strains, slopes : float array, shape (samples,), (3, samples), (3, samples)
        The thinned faces' clock, strains of the three pulses there, and their slopes [1/s].
    """

    def __init__(
        self, evidence: Evidence, time_s: FloatArray, strains: FloatArray, slopes: FloatArray
    ) -> None:
        self._evidence, self._time_s = evidence, time_s
        self._strains, self._slopes = list(strains), list(slopes)
        if evidence.faces.returning is not None:
            back = np.interp(time_s, evidence.faces.time_s, evidence.faces.returning.strain)
            self._strains.append(back)
            self._slopes.append(np.gradient(back, time_s))
        self._bars = {bar.side: _BarAtFace(bar, evidence, time_s) for bar in evidence.pulses.separated}

    def __call__(self, parameter: str) -> dict[int, FloatArray] | None:
        """Changes by number of the wave; None where the quantity is none of the stations' own."""
        what, _, station = parameter.partition(":")
        if station:
            side = station.split("_", 1)[0]
            raw = self._bars[side].by_station(what, station)
        else:
            what, _, short = parameter.rpartition("_")
            side = {"in": "incident", "out": "transmitted"}.get(short, "")
            if what == "distance" or side not in self._bars:
                return None
            if what not in ("speed", "poisson", "diameter", "attenuation"):
                return None
            raw = self._bars[side].by_bar(what)
        first = 0 if side == "incident" else 2
        changes = {first: raw.right}
        if first + 1 < len(self._strains):
            changes[first + 1] = np.where(self.has_left(side), raw.left, 0.0)
        return self._on_clock(changes, side)

    def kernels(self, side: str) -> FaceKernels:
        """Kernels of the stations of one bar at the face."""
        return self._bars[side].kernels

    def has_left(self, side: str) -> BoolArray:
        """Where on the thinned faces' clock the wave to the left of one bar can have come at all: before, it is cut."""
        return self._bars[side].since_s >= left_from_s(self._evidence, side)

    def since_s(self, side: str) -> FloatArray:
        """Time since the stretch of record that a bar was worked out on began, on the thinned faces' clock [s]."""
        return self._bars[side].since_s

    def _on_clock(self, changes: dict[int, FloatArray], side: str) -> dict[int, FloatArray]:
        """Lay changes on a clock whose zero follows the incident foot; waves laid on that foot follow by themselves."""
        laid_r, laid_t = laid_on_feet(self._evidence)
        moved = self._delay_s(0, changes[0]) if side == "incident" else 0.0
        laid = {1: laid_r, 2: laid_t, 3: laid_t}
        own = {n: self._delay_s(min(n, 2), changes[min(n, 2)]) for n in changes if laid.get(n, False)}
        found = {}
        for n in range(len(self._strains)):
            clock = own.get(n, 0.0) if laid.get(n, False) else moved
            if n in changes or clock:
                found[n] = changes.get(n, 0.0) + clock * self._slopes[n]
        return found

    def _delay_s(self, n: int, change: FloatArray) -> float:
        """By how much later the front of a wave comes: change = scale times wave - delay times slope, least squares."""
        evidence = self._evidence
        pulse = tuple(evidence.pulses)[n]
        unit = evidence.rig.incident_bar.radius_time_s
        rise = pulse.foot.rise_s if pulse.foot is not None else 0.0
        late = evidence.sheet.specimen.transit_time_s or 0.0 if n == 2 else 0.0
        front = (self._time_s >= -_FRONT_BEFORE * unit) & (
            self._time_s <= late + max(1.2 * rise, _FRONT_AFTER * unit)
        )
        columns = np.stack((self._strains[n][front], -self._slopes[n][front]), axis=1)
        solution = np.linalg.lstsq(columns / np.abs(columns).max(axis=0), change[front], rcond=None)[0]
        return float(solution[1] / np.abs(columns).max(axis=0)[1])


def left_from_s(evidence: Evidence, side: str) -> float:
    """When the wave to the left is let in at the face, since the stretch of a bar's record began [s]."""
    bar = evidence.pulses.separated_bar(side)
    pulse = evidence.pulses.reflected if side == "incident" else evidence.pulses.returning
    assert bar is not None, side
    if pulse is None:
        return np.inf
    return float(left_at_face_s(bar, pulse, evidence.rig.bar_of(side)))


class _BarAtFace:
    """One bar's stations with the face as the place of the waves."""

    def __init__(self, bar: SeparatedBar, evidence: Evidence, time_s: FloatArray) -> None:
        self._bar, self._evidence = bar, evidence
        self._material = evidence.rig.bar_of(bar.side)
        self._interval_s = evidence.pulses.sample_interval_s
        self._dispersion = evidence.settings.dispersion
        self.since_s: FloatArray = time_s + (evidence.faces.record_time_of_zero_s - bar.begin_s)
        self._stations: Stations = stations_of(bar, self._material, self._interval_s, self._dispersion)
        grid = self._stations.grid
        self._operator = self._stations.operator(bar.positions_m[0])
        self._gain = evidence.faces.low_pass.gain(grid.frequency_hz)
        self._at_first = tuple(grid.transform(side.sum(axis=0)) for side in (bar.right, bar.left))
        self._kernels: FaceKernels | None = None

    @property
    def kernels(self) -> FaceKernels:
        """Worked out when first asked for."""
        if self._kernels is None:
            self._kernels = FaceKernels(
                self._bar, self._material, self._evidence.faces.low_pass, self._interval_s, self._dispersion
            )
        return self._kernels

    def by_station(self, what: str, station: str) -> Waves:
        """By a relative change of strain or distance, a unit of zero level [1] or of zero slope [1/s]."""
        bar = self._bar
        k = bar.stations.index(station)
        if what == "strain":
            return self._from_first(
                *(self._stations.grid.transform(side[k]) for side in (bar.right, bar.left))
            )
        row = np.zeros(bar.strain.shape[1])
        if what == "distance":
            # The stated place is wrong by its own share, so that the wave there is not the one that was seen.
            row = -bar.positions_m[k] * self._along(k)
        elif what == "level":
            row[bar.starts[k] :] = -1.0
        else:
            assert what == "slope", what
            time = np.arange(float(row.size)) * self._interval_s + bar.begin_s
            centre = self._evidence.strain.time(0) + bar.zeros[k].centre * self._interval_s
            row[bar.starts[k] :] = -(time - centre)[bar.starts[k] :]
        return self._at_face(row[None], (k,))

    def by_bar(self, what: str) -> Waves:
        """By a relative change of wave speed or diameter, a unit of Poisson's ratio, or the table's own uncertainty of
        attenuation: through the propagation coefficient.
        """
        slope = self._propagation_slope(what)
        grid = self._stations.grid
        rows = []
        for x in self._bar.positions_m:
            right, left = self._there(x)
            # e = P exp(-xi x) + N exp(xi x), with P and N at the face, x = 0: de = dxi x (N - P).
            rows.append(-grid.back(slope * x * (left - right) * grid.fade))
        return self._at_face(np.stack(rows), tuple(range(len(rows))))

    def _propagation_slope(self, what: str) -> ComplexArray:
        """Derivative of xi; a measured table is in error by one share of its speed and by its own u of attenuation."""
        table, grid = self._material.propagation, self._stations.grid
        if what == "attenuation" or table is not None:
            if what == "attenuation" and table is not None:
                return u_attenuation_per_m(table, grid.frequency_hz).astype(np.complex128)
            share = -1.0 if what == "speed" else 0.0
            of_table: ComplexArray = share * self._stations.xi_per_m
            return of_table
        name, step = {
            "speed": ("wave_speed_m_s", _RELATIVE_STEP),
            "diameter": ("diameter_m", _RELATIVE_STEP),
            "poisson": ("poisson_ratio", _POISSON_STEP),
        }[what]
        value = float(getattr(self._material, name))
        ends = []
        for sign in (-1, 1):
            changed = value + sign * step if what == "poisson" else value * (1 + sign * step)
            material: Bar = dataclasses.replace(self._material, **{name: Quantity(changed)})  # type: ignore[arg-type]
            ends.append(propagation_at(material, grid.p_per_s, self._dispersion))
        slope: ComplexArray = (ends[1] - ends[0]) / (2 * step)
        return slope

    def _there(self, x_m: float) -> tuple[ComplexArray, ComplexArray]:
        """Both waves at another place."""
        way = np.exp(-self._stations.xi_per_m * (x_m - self._bar.positions_m[0]))
        right, left = self._at_first
        return right * way, left / way

    def _along(self, k: int) -> FloatArray:
        """Slope of the strain along the bar at a station [1/m], shape (samples,)."""
        right, left = self._there(self._bar.positions_m[k])
        grid = self._stations.grid
        return grid.back(self._stations.xi_per_m * (left - right) * grid.fade)

    def _at_face(self, rows: FloatArray, stations: tuple[int, ...]) -> Waves:
        """What strains at some stations give at the face, on the faces' clock."""
        right, left = np.zeros(self._stations.grid.samples), np.zeros(self._stations.grid.samples)
        for row, k in zip(rows, stations, strict=True):
            one = self._stations.of_one(row, k, self._operator, self._bar.positions_m[0])
            right, left = right + one.right, left + one.left
        grid = self._stations.grid
        return self._from_first(grid.transform(right), grid.transform(left))

    def _from_first(self, right: ComplexArray, left: ComplexArray) -> Waves:
        """Carry both waves from the first station to the face, through the low-pass, on the faces' clock."""
        way = np.exp(self._stations.xi_per_m * self._bar.positions_m[0])
        grid = self._stations.grid
        time = grid.interval_s * np.arange(float(grid.samples))
        both = (grid.back(wave * factor * self._gain) for wave, factor in ((right, way), (left, 1 / way)))
        return Waves(*(np.interp(self.since_s, time, wave) for wave in both))
