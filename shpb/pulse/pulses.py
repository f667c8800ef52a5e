"""Incident, reflected and transmitted pulse: each cut from its trace in a window that holds no other wave."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.pulse.arrivals import Arrivals, geometric_arrivals
from shpb.pulse.foot import Foot, pick_foot
from shpb.pulse.front import Front, UnusableShotError, first_front
from shpb.pulse.strain import GaugeStrain, StationStrain
from shpb.pulse.zero_line import QuietWindow, ZeroLine, quiet_before_front, quiet_gap, zero_line
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig
from shpb.rig.sheet import Specimen
from shpb.settings import Settings, Span

# A dispersed front begins a few a/c0 before its tangent foot: this much room is left before each foot.
_LEAD_RADII = 5.0
_SMOOTHING_RADII = 0.2  # running mean of the pickers, in a/c0
_START_RADII = 1.0  # over which the level at a window's start is taken, in a/c0
TAPER_RADII = 4.0  # soft end of a window, in a/c0


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Pulse:
    """One pulse in its window, zero line removed, ends tapered to zero.

    Attributes
    ----------
    name : str
        incident, reflected or transmitted.
    strain : float array, shape (samples of the window,)
        Strain at the gauge [1], positive under the loading pulse.
    start_s : float
        Time of the first sample on the record's clock [s].
    window_s : (float, float)
        The window used [s].
    automatic_window_s : (float, float)
        The window the program would have set [s].
    foot : Foot or None
        The onset, None where no pulse stands clear of the noise.
    automatic_foot : Foot or None
        The onset the program picked, where the sheet overrides it.
    zero : ZeroLine
        The line that was removed.
    noise : float
        Standard deviation of one sample of strain.
    level_at_start, u_level_at_start : float
        Level where the window begins, share of the pulse's peak: not zero if the pulse came sooner.
    """

    name: str
    strain: FloatArray
    start_s: float
    window_s: Span
    automatic_window_s: Span
    foot: Foot | None
    automatic_foot: Foot | None
    zero: ZeroLine
    noise: float
    level_at_start: float = 0.0
    u_level_at_start: float = 0.0

    @property
    def set_by_hand(self) -> bool:
        """Whether the sheet set the window or the foot."""
        return self.window_s != self.automatic_window_s or self.foot != self.automatic_foot


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Pulses:
    """The three pulses of a shot at their gauges, and what was seen on the way."""

    incident: Pulse
    reflected: Pulse
    transmitted: Pulse
    arrivals: Arrivals
    sample_interval_s: float
    # Level of the incident pulse's tail where the reflected pulse begins, share of its peak.
    tail_at_reflection: float
    # Zero shift of the incident gauge across the incident pulse beyond plausible drift, share of the peak.
    remarks: tuple[str, ...] = field(default=())

    def __iter__(self):  # type: ignore[no-untyped-def]
        yield from (self.incident, self.reflected, self.transmitted)


def find_pulses(strain: GaugeStrain, rig: Rig, specimen: Specimen, settings: Settings) -> Pulses:
    """Find the three pulses: arrivals from geometry, feet, zero lines and windows.

    Raises
    ------
    UnusableShotError
        If a channel is dead, swapped or inverted, if the record begins after the incident front
        or ends before the reflected and transmitted pulses are in.
    """
    front = _incident_front(strain, rig, settings)
    arrivals = geometric_arrivals(front.time_s, rig, specimen)
    _require_long_enough(strain, arrivals, rig)

    incident_trace, transmitted_trace = strain.incident.axial, strain.transmitted.axial
    lead_i, lead_t = (_LEAD_RADII * _radius_time(bar) for bar in (rig.incident_bar, rig.transmitted_bar))
    index, interval = strain.index, strain.sample_interval_s
    split = arrivals.reflected_s - lead_i  # the incident window ends and the reflected one begins

    # Zero lines. The transmitted gauge is quiet until anything can have come through the bars.
    before = _quiet_or_refuse(incident_trace, index(arrivals.incident_s - lead_i), interval, "incident")
    peak_i = _peak_above(incident_trace, before, index(arrivals.incident_s), index(split))
    settled = _level(incident_trace, index(split), lead_i / interval)
    pulse_end = _end_of_pulse(
        incident_trace, settled, before.noise, peak_i, index(arrivals.incident_s), index(split)
    )
    # A trace that stands at a quarter of the peak is the pulse itself, not a shifted zero.
    gap = None
    if abs(settled - before.level) < 0.25 * peak_i:
        gap = quiet_gap(incident_trace, peak_i, pulse_end, index(split))
    before_t = _quiet_or_refuse(
        transmitted_trace, index(arrivals.transmitted_s - lead_t), interval, "transmitted"
    )
    stop_t = index(arrivals.end_reflection_s - lead_t)
    peak_t = _peak_above(transmitted_trace, before_t, before_t.stop, stop_t)
    zero_i = zero_line(before, () if gap is None else (gap,), peak_i, interval)
    zero_r = zero_i if gap is None else zero_line(gap, (before,), peak_i, interval)
    zero_t = zero_line(before_t, (), peak_t, interval)

    # Against the zero of the gap where there is one: a gauge that came loose shifts zero, but leaves no tail.
    tail = _level(incident_trace, index(split), lead_i / interval) - float(
        zero_r.at(index(split), index(split) + 1)[0]
    )

    cut = _Cutter(strain, settings)
    incident = cut(
        "incident",
        strain.incident,
        zero_i,
        before.noise,
        (arrivals.incident_s - 2 * lead_i, split),
        arrivals.incident_s,
        rig.incident_bar,
        sign=1,
    )
    reflected = cut(
        "reflected",
        strain.incident,
        zero_r,
        before.noise,
        (split, arrivals.second_loading_s - lead_i),
        arrivals.reflected_s,
        rig.incident_bar,
        sign=None,
    )
    transmitted = cut(
        "transmitted",
        strain.transmitted,
        zero_t,
        before_t.noise,
        (arrivals.transmitted_s - 2 * lead_t, arrivals.end_reflection_s - lead_t),
        arrivals.transmitted_through_specimen_s,
        rig.transmitted_bar,
        sign=None,
    )
    return Pulses(
        incident=incident,
        reflected=reflected,
        transmitted=transmitted,
        arrivals=arrivals,
        sample_interval_s=interval,
        tail_at_reflection=tail / peak_i,
        remarks=_remarks(strain, arrivals, gap),
    )


# --- the incident front and what must be true of it ---------------------------------------------


@dataclass(frozen=True, slots=True)
class _IncidentFront:
    time_s: float


def _radius_time(bar: Bar) -> float:
    """a/c0 [s], the natural unit of time of a bar's dispersion."""
    return bar.radius_m / bar.wave_speed_m_s


def _incident_front(strain: GaugeStrain, rig: Rig, settings: Settings) -> _IncidentFront:
    interval = strain.sample_interval_s
    smoothing = _radius_time(rig.incident_bar)
    incident = _front_or_refuse(strain.incident, interval, smoothing, "incident")
    transmitted = _front_or_refuse(strain.transmitted, interval, smoothing, "transmitted")
    _refuse_swapped(strain, incident, transmitted, rig)
    if incident.at * interval < 2 * _radius_time(rig.incident_bar):
        raise UnusableShotError(
            "the record begins on the incident pulse: there is no quiet time before it",
            where="incident gauge",
            mend="Set the scope to keep at least 100 us before the trigger and fire again",
            check="pre-trigger",
        )
    for name, front in (("incident", incident), ("transmitted", transmitted)):
        if front.sign < 0:
            raise UnusableShotError(
                f"the {name} pulse comes out negative: the polarity is inverted",
                where=f"{name} gauge",
                mend="Turn voltage_under_compression (or _tension) round in the rig file, or check the wiring",
                check="polarity",
            )
    if settings.incident_foot_s is not None:
        return _IncidentFront(settings.incident_foot_s)
    lead = int(4 * _LEAD_RADII * _radius_time(rig.incident_bar) / interval)
    start = max(incident.at - lead, 0)
    level = float(np.median(strain.incident.axial[start : max(incident.at - lead // 4, start + 8)]))
    segment = strain.incident.axial[start : incident.at + 6 * lead] - level
    foot = pick_foot(
        segment, strain.time(start), interval, incident.noise, _SMOOTHING_RADII * smoothing, sign=1
    )
    return _IncidentFront(strain.time(incident.at) if foot is None else foot.time_s)


def _front_or_refuse(station: StationStrain, interval: float, smoothing: float, name: str) -> Front:
    front = first_front(station.axial, interval, smoothing)
    if front is None:
        raise UnusableShotError(
            "there is no pulse above the noise",
            where=f"{name} gauge",
            mend="Check that the gauge is connected, the bridge excited and the right channel named",
            check="dead channel",
        )
    return front


def _refuse_swapped(strain: GaugeStrain, incident: Front, transmitted: Front, rig: Rig) -> None:
    interval = strain.sample_interval_s
    expected = (
        rig.incident_gauge.to_specimen_m / rig.incident_bar.wave_speed_m_s
        + rig.transmitted_gauge.to_specimen_m / rig.transmitted_bar.wave_speed_m_s
    )
    lag = (transmitted.at - incident.at) * interval
    clear = transmitted.peak > 20 * transmitted.noise
    if clear and lag < -0.5 * expected:
        raise UnusableShotError(
            f"the transmitted channel sees a pulse {-lag * 1e6:.0f} us before the incident one: the "
            f"channels are swapped",
            where="record",
            mend="Exchange the two channel names in the rig file, or the cables at the scope",
            check="channel order",
        )


def _require_long_enough(strain: GaugeStrain, arrivals: Arrivals, rig: Rig) -> None:
    end = strain.time(strain.samples)
    for name, arrival, bar in (
        ("reflected", arrivals.reflected_s, rig.incident_bar),
        ("transmitted", arrivals.transmitted_through_specimen_s, rig.transmitted_bar),
    ):
        if end < arrival + 2 * _LEAD_RADII * _radius_time(bar):
            raise UnusableShotError(
                f"the record ends at {end * 1e6:.0f} us, but the {name} pulse only arrives at "
                f"{arrival * 1e6:.0f} us",
                where="record",
                mend="Lengthen the record at the scope; check gauge distances and wave speeds in the rig file",
                check="record length",
            )


def _quiet_or_refuse(trace: FloatArray, front: int, interval: float, name: str) -> QuietWindow:
    window = quiet_before_front(trace, front, interval)
    if window is None:
        # Little pre-trigger: the last resort is whatever stands before the front.
        window = quiet_before_front(trace, max(front, 16), interval)
    if window is None or window.stop > max(front, 16):
        raise UnusableShotError(
            "there is no quiet time before the pulse",
            where=f"{name} gauge",
            mend="Set the scope to keep at least 100 us before the trigger and fire again",
            check="pre-trigger",
        )
    return window


def _peak_above(trace: FloatArray, quiet: QuietWindow, start: int, stop: int) -> float:
    values = trace[start : max(stop, start + 1)]
    return max(float(np.abs(values - quiet.level).max()), 1e-12)


def _end_of_pulse(trace: FloatArray, settled: float, noise: float, peak: float, start: int, stop: int) -> int:
    """Last sample before ``stop`` at which the trace stands clear of where it settles (2 % of its peak, or noise)."""
    threshold = max(0.02 * peak, 4 * noise)
    above = np.flatnonzero(np.abs(trace[start:stop] - settled) > threshold)
    return start + int(above[-1]) if above.size else start


def _level(trace: FloatArray, stop: int, samples: float) -> float:
    """Mean of the last samples before ``stop``."""
    return float(trace[max(stop - max(int(samples), 1), 0) : stop].mean())


def _remarks(strain: GaugeStrain, arrivals: Arrivals, gap: QuietWindow | None) -> tuple[str, ...]:
    remarks = []
    end = strain.time(strain.samples)
    if gap is None:
        remarks.append(
            "no quiet stretch between incident and reflected pulse: the zero line of the reflected pulse "
            "is that before the incident pulse"
        )
    if arrivals.second_loading_s < end:
        remarks.append(f"second loading from {arrivals.second_loading_s * 1e6:.0f} us on is kept out")
    if arrivals.end_reflection_s < end:
        remarks.append(
            f"end reflection of the transmitted bar from {arrivals.end_reflection_s * 1e6:.0f} us on is kept out"
        )
    return tuple(remarks)


# --- cutting -----------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Cutter:
    """Cuts one pulse: window, zero line, foot, tapers; what the sheet says overrides."""

    strain: GaugeStrain
    settings: Settings

    def __call__(
        self,
        name: str,
        station: StationStrain,
        zero: ZeroLine,
        noise: float,
        automatic: Span,
        arrival_s: float,
        bar: Bar,
        sign: int | None,
    ) -> Pulse:
        strain, interval = self.strain, self.strain.sample_interval_s
        record_span = (strain.start_s, strain.time(strain.samples))
        automatic = (max(automatic[0], record_span[0]), min(automatic[1], record_span[1]))
        window: Span = getattr(self.settings, f"{name}_window_s") or automatic
        start, stop = strain.index(window[0]), strain.index(window[1])
        if stop - start < 16:
            raise UnusableShotError(
                f"the {name} window from {window[0] * 1e6:.1f} to {window[1] * 1e6:.1f} us holds "
                f"{stop - start} samples",
                where=f"{name} pulse",
                mend="Widen the window in the shot sheet; check gauge distances and wave speeds",
                check="window",
            )
        values = station.axial[start:stop] - zero.at(start, stop)
        near = strain.index(arrival_s + 40 * _radius_time(bar)) - start
        picked = pick_foot(
            values[: max(near, 16)],
            strain.time(start),
            interval,
            noise,
            _SMOOTHING_RADII * _radius_time(bar),
            sign,
        )
        by_hand = getattr(self.settings, f"{name}_foot_s")
        foot = picked
        if by_hand is not None:
            foot = Foot(by_hand, interval, picked.sign if picked else 1, picked.rise_s if picked else 0.0)
        begin = values[: max(int(_START_RADII * _radius_time(bar) / interval), 4)]
        peak = max(float(np.abs(values).max()), 1e-12)
        level, u_level = float(begin.mean()) / peak, noise / float(np.sqrt(begin.size)) / peak
        values *= _taper(values.size, int(TAPER_RADII * _radius_time(bar) / interval))
        return Pulse(
            name=name,
            strain=frozen(values),
            start_s=strain.time(start),
            window_s=window,
            automatic_window_s=automatic,
            foot=foot,
            automatic_foot=picked,
            zero=zero,
            noise=noise,
            level_at_start=level,
            u_level_at_start=u_level,
        )


def _taper(samples: int, length: int) -> FloatArray:
    """One, with raised-cosine ends of ``length`` samples, so that a cut makes no step."""
    length = max(min(length, samples // 4), 1)
    taper = np.ones(samples)
    ramp = 0.5 * (1 - np.cos(np.pi * (np.arange(length) + 0.5) / length))
    taper[:length] = ramp
    taper[samples - length :] = ramp[::-1]
    return taper
