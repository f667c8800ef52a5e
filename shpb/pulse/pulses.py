"""Find the three pulses: each cut from its trace in a window that holds no other wave."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray, frozen
from shpb.pulse.arrivals import Arrivals, geometric_arrivals
from shpb.pulse.foot import Foot, pick_foot
from shpb.pulse.front import UnusableShotError
from shpb.pulse.incident_front import LEAD_RADII, SMOOTHING_RADII, incident_front_s, require_long_enough
from shpb.pulse.pulse import Pulse, Pulses
from shpb.pulse.shot_zeros import ShotZeros, shot_zeros
from shpb.pulse.strain import GaugeStrain, StationStrain
from shpb.pulse.zero_line import ZeroLine
from shpb.rig.bar import Bar
from shpb.rig.rig import Rig
from shpb.rig.sheet import Specimen
from shpb.settings import Settings, Span

_START_RADII = 1.0  # over which the level at a window's start is taken, in a/c0
TAPER_RADII = 4.0  # soft end of a window, in a/c0


def find_pulses(strain: GaugeStrain, rig: Rig, specimen: Specimen, settings: Settings) -> Pulses:
    """Find the three pulses: arrivals from geometry, zero lines, windows, feet.

    Raises
    ------
    UnusableShotError
        If a channel is dead, swapped or inverted, if the record begins after the incident front
        or ends before the reflected and transmitted pulses are in.
    """
    arrivals = geometric_arrivals(incident_front_s(strain, rig, settings), rig, specimen)
    require_long_enough(strain, arrivals, rig)
    zeros = shot_zeros(strain, arrivals, rig)
    lead_i, lead_t = (LEAD_RADII * bar.radius_time_s for bar in (rig.incident_bar, rig.transmitted_bar))
    split = arrivals.reflected_s - lead_i  # the incident window ends and the reflected one begins

    cut = Cutter(strain, settings)
    at_incident = Trace(strain.incident, rig.incident_bar, zeros.incident_noise)
    at_transmitted = Trace(strain.transmitted, rig.transmitted_bar, zeros.transmitted_noise)
    incident = cut(
        "incident",
        at_incident,
        zeros.incident,
        (arrivals.incident_s - 2 * lead_i, split),
        arrivals.incident_s,
    )
    reflected = cut(
        "reflected",
        at_incident,
        zeros.reflected,
        (split, arrivals.second_loading_s - lead_i),
        arrivals.reflected_s,
    )
    transmitted = cut(
        "transmitted",
        at_transmitted,
        zeros.transmitted,
        (arrivals.transmitted_s - 2 * lead_t, arrivals.end_reflection_s - lead_t),
        arrivals.transmitted_through_specimen_s,
    )
    return Pulses(
        incident=incident,
        reflected=reflected,
        transmitted=transmitted,
        arrivals=arrivals,
        sample_interval_s=strain.sample_interval_s,
        tail_at_reflection=zeros.tail_at_reflection,
        remarks=_remarks(strain, arrivals, zeros, reflected, transmitted),
    )


def _remarks(
    strain: GaugeStrain, arrivals: Arrivals, zeros: ShotZeros, reflected: Pulse, transmitted: Pulse
) -> tuple[str, ...]:
    remarks = []
    end = strain.time(strain.samples)
    if not zeros.has_gap:
        remarks.append(
            "no quiet stretch between incident and reflected pulse: the zero line of the reflected pulse "
            "is that before the incident pulse"
        )
    if reflected.window_s[1] <= arrivals.second_loading_s < end:
        remarks.append(f"second loading from {arrivals.second_loading_s * 1e6:.0f} us on is kept out")
    if transmitted.window_s[1] <= arrivals.end_reflection_s < end:
        remarks.append(
            f"end reflection of the transmitted bar from {arrivals.end_reflection_s * 1e6:.0f} us on is kept out"
        )
    return tuple(remarks)


@dataclass(frozen=True, slots=True, eq=False)
class Trace:
    """One gauge's trace, or one wave's: its strain, its bar, its noise."""

    station: StationStrain
    bar: Bar
    noise: float


@dataclass(frozen=True, slots=True)
class Cutter:
    """Cuts one pulse: window, zero line, foot, tapers; what the sheet says overrides."""

    strain: GaugeStrain
    settings: Settings

    def __call__(self, name: str, trace: Trace, zero: ZeroLine, automatic: Span, arrival_s: float) -> Pulse:
        """Cut the pulse ``name`` out of a trace; its foot is sought about ``arrival_s``.

        Raises
        ------
        UnusableShotError
            If the window holds next to nothing, or a foot set by hand lies outside it.
        """
        strain, interval = self.strain, self.strain.sample_interval_s
        record_span = (strain.start_s, strain.time(strain.samples))
        automatic = (max(automatic[0], record_span[0]), min(automatic[1], record_span[1]))
        window: Span = getattr(self.settings, f"{name}_window_s", None) or automatic
        start, stop = strain.index(window[0]), strain.index(window[1])
        if stop - start < 16:
            raise UnusableShotError(
                f"the {name} window from {window[0] * 1e6:.1f} to {window[1] * 1e6:.1f} us holds "
                f"{stop - start} samples",
                where=f"{name} pulse",
                mend="Widen the window in the shot sheet; check gauge distances and wave speeds",
                check="window",
            )
        values = trace.station.axial[start:stop] - zero.at(start, stop)
        near = strain.index(arrival_s + 40 * trace.bar.radius_time_s) - start
        picked = pick_foot(
            values[: max(near, 16)],
            strain.time(start),
            interval,
            trace.noise,
            SMOOTHING_RADII * trace.bar.radius_time_s,
            1 if name == "incident" else None,
        )
        by_hand = getattr(self.settings, f"{name}_foot_s", None)
        foot = picked
        if by_hand is not None:
            if not window[0] <= by_hand <= window[1]:
                raise UnusableShotError(
                    f"the {name} foot set by hand, {by_hand * 1e6:.1f} us, lies outside its window from "
                    f"{window[0] * 1e6:.1f} to {window[1] * 1e6:.1f} us",
                    where=f"{name} pulse",
                    mend="Give the foot on the record's own clock, inside the window",
                    check="window",
                )
            foot = Foot(by_hand, interval, picked.sign if picked else 1, picked.rise_s if picked else 0.0)
        begin = values[: max(int(_START_RADII * trace.bar.radius_time_s / interval), 4)]
        peak = max(float(np.abs(values).max()), 1e-12)
        level, u_level = float(begin.mean()) / peak, trace.noise / float(np.sqrt(begin.size)) / peak
        values *= soft_ends(values.size, int(TAPER_RADII * trace.bar.radius_time_s / interval))
        return Pulse(
            name=name,
            strain=frozen(values),
            start_s=strain.time(start),
            window_s=window,
            automatic_window_s=automatic,
            foot=foot,
            automatic_foot=picked,
            zero=zero,
            noise=trace.noise,
            level_at_start=level,
            u_level_at_start=u_level,
        )


def soft_ends(samples: int, length: int) -> FloatArray:
    """One, with raised-cosine ends of ``length`` samples, so that a cut makes no step."""
    length = max(min(length, samples // 4), 1)
    taper = np.ones(samples)
    ramp = 0.5 * (1 - np.cos(np.pi * (np.arange(length) + 0.5) / length))
    taper[:length] = ramp
    taper[samples - length :] = ramp[::-1]
    return taper
