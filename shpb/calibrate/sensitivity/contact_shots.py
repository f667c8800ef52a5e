"""What is seen in one calibration shot: bars together with their contact, or one bar with its free end."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.sensitivity.common_terms import LOSS_PER_M, MODEL, size_of
from shpb.calibrate.sensitivity.laid_pulses import Comparison, grid_at, lay, loading
from shpb.calibrate.sensitivity.pulses_of import cut_pulses
from shpb.calibrate.session import FiredShot, ShotKind
from shpb.calibrate.struck import passages_s, refuse, strain_of, struck_station
from shpb.errors import InputError
from shpb.pulse.front import Front, first_front
from shpb.rig.rig import Rig
from shpb.wave.propagation import LowPass

# Common practice: what a clean, straight contact may reflect, what a free end may lose.
REFLECTION = 0.02
END_LOSS = 0.02
_MISSING = 0.5  # of the pulse: below that there is no reflected, or no transmitted pulse


@dataclass(frozen=True, slots=True, kw_only=True)
class ContactReflection:
    """What came back from the contact of one shot, as shares of the incident pulse."""

    shot_id: str
    share: float  # by least squares over the loading
    u_share: float
    expected: float  # (Z_t - Z_i)/(Z_t + Z_i)
    largest: float  # greatest magnitude of what is left without the expected share


@dataclass(frozen=True, slots=True, kw_only=True)
class FreeEnd:
    """The pulse of one shot before and after the free end, at one station: must be -1 but for losses."""

    station: str
    comparison: Comparison
    u_ratio: float

    @property
    def ratio(self) -> float:
        """Reflected by incident strain."""
        return self.comparison.scale


class ApartShot:
    """One bar alone."""

    def __init__(self, fired: FiredShot, rig: Rig, low_pass: LowPass) -> None:
        self._fired, self._rig, self._low_pass = fired, rig, low_pass
        self.reference = struck_station(fired.shot, rig)
        self._bar = rig.bar_of(self.reference)
        own = [name for name in rig.gauges if name.startswith(fired.shot.bar)]
        _refuse_going_through(fired, rig)
        self._cut = cut_pulses(fired, rig, own, passages=2)

    @property
    def unseen(self) -> list[str]:
        """Stations at which the record ends before the pulse has come back."""
        return [name for name, pulses in self._cut.items() if len(pulses) == 1]

    def free_ends(self) -> list[FreeEnd]:
        """Every station: the pulse to the free end and back from it."""
        found = []
        for name, (out, back) in ((name, pulses) for name, pulses in self._cut.items() if len(pulses) > 1):
            # Half the way between the two passages lies the free end.
            to_end = 0.5 * (back.arrival_s - out.arrival_s) * self._bar.wave_speed_m_s
            fit = lay(self._fired, self._bar, self._bar, (out, back), (to_end, -to_end), self._low_pass)
            if fit.scale > -_MISSING:
                raise refuse(
                    self._fired,
                    f"the free end returns {100 * fit.scale:.0f} % of the pulse at the {name.replace('_', ' ')}, "
                    "not -100 %",
                    "Was the other bar in contact? Then say bars-together; else check which bar and end were struck",
                )
            terms = {"model": MODEL, "losses": LOSS_PER_M * 2 * to_end}
            found.append(FreeEnd(station=name, comparison=fit, u_ratio=size_of(fit.u_scale, terms)))
        return found

    def pairs(self) -> list[tuple[str, Comparison]]:
        """Further stations of the bar against the one that the pulse passes first, at that one's place."""
        first = self._cut[self.reference][0]
        found = []
        for name, (out, *_) in self._cut.items():
            if name != self.reference:
                back = -(out.arrival_s - first.arrival_s) * self._bar.wave_speed_m_s
                pair = (first, out)
                found.append(
                    (name, lay(self._fired, self._bar, self._bar, pair, (0.0, back), self._low_pass))
                )
        return found


class TogetherShot:
    """Two bars in contact."""

    def __init__(self, fired: FiredShot, rig: Rig, low_pass: LowPass) -> None:
        self._fired, self._rig, self._low_pass = fired, rig, low_pass
        self.reference = struck_station(fired.shot, rig)
        _require_going_through(fired, rig)
        here = [name for name in rig.gauges if name.startswith("incident")]
        there = [name for name in rig.gauges if name.startswith("transmitted")]
        self._cut = {**cut_pulses(fired, rig, here, passages=2), **cut_pulses(fired, rig, there)}

    def pairs(self) -> list[tuple[str, Comparison]]:
        """Every other station against the first one, at the contact, while the bars are pressed together."""
        bar, x = self._rig.incident_bar, self._distance(self.reference)
        first = self._cut[self.reference][0]
        found = []
        for name, (out, *_) in self._cut.items():
            if name == self.reference:
                continue
            way = self._distance(name) if name.startswith("incident") else -self._distance(name)
            bars = (bar, self._rig.bar_of(name))
            found.append((name, lay(self._fired, *bars, (first, out), (x, way), self._low_pass)))
        return found

    @property
    def unseen(self) -> list[str]:
        """The first station, if the record ends before a reflected pulse would have passed it."""
        return [self.reference] if len(self._cut[self.reference]) == 1 else []

    def reflection(self) -> ContactReflection | None:
        """What comes back from the contact to the incident station; None where the record ends too soon."""
        if self.unseen:
            return None
        bar, x = self._rig.incident_bar, self._distance(self.reference)
        out, back = self._cut[self.reference]
        grid = grid_at(out, bar, x)
        incident = out.carried(bar, grid, x, self._low_pass).force_strain
        returned = back.carried(bar, grid, -x, self._low_pass).force_strain
        start, stop = loading(incident, grid, bar, self._low_pass)
        inside = slice(start, stop)
        weight = float(np.sum(incident[inside] ** 2))
        share = float(np.sum(incident[inside] * returned[inside])) / weight
        u_level = float(np.hypot(back.u_level(), share * out.u_level()))
        z_in, z_out = (one.impedance_n_s_m for one in (bar, self._rig.transmitted_bar))
        expected = float((z_out - z_in) / (z_out + z_in))
        rest = returned[inside] - expected * incident[inside]
        return ContactReflection(
            shot_id=self._fired.shot_id,
            share=share,
            u_share=float(np.hypot(u_level * abs(float(incident[inside].sum())) / weight, MODEL)),
            expected=expected,
            largest=float(np.abs(rest).max() / incident[inside].max()),
        )

    def _distance(self, station: str) -> float:
        return float(self._rig.gauges[station].to_specimen_m)


def _require_going_through(fired: FiredShot, rig: Rig) -> None:
    """Bars together, but nothing arrives in the transmitted bar."""
    record, front = fired.record, None
    for name in ("incident_gauge", "transmitted_gauge"):
        before = front
        axial, bar = strain_of(fired, rig, name).axial, rig.bar_of(name)
        front = first_front(axial, record.sample_interval_s, bar.radius_time_s)
        if front is None:
            _refuse_short(fired, rig, before)
            raise refuse(
                fired,
                f"the {name.replace('_', ' ')} shows no pulse",
                "Were the bars apart? Then say bars-apart; else check the gauge, its cable and channel",
            )


def _refuse_short(fired: FiredShot, rig: Rig, incident: Front | None) -> None:
    """The record may end before the pulse comes to the transmitted bar's station."""
    if incident is None:
        return
    first, second = (passages_s(fired.shot, rig, name)[0] for name in ("incident_gauge", "transmitted_gauge"))
    rest = (fired.record.samples - incident.at) * fired.record.sample_interval_s
    if rest < second - first:
        raise refuse(
            fired,
            f"the record ends {(second - first - rest) * 1e6:.0f} us before the pulse comes to the transmitted gauge",
            "Lengthen the record at the scope",
        )


def _refuse_going_through(fired: FiredShot, rig: Rig) -> None:
    """Bars apart, but the other bar sees the pulse before it can have come back in this one."""
    other = "transmitted" if fired.shot.bar == "incident" else "incident"
    own, name = struck_station(fired.shot, rig), f"{other}_gauge"
    try:
        strain = strain_of(fired, rig, name)
    except InputError:  # the other bar's channel need not be recorded when one bar is alone
        return
    bar, interval = rig.bar_of(own), fired.record.sample_interval_s
    here = strain_of(fired, rig, own)
    front = first_front(here.axial, interval, bar.radius_time_s)
    there = first_front(strain.axial, interval, bar.radius_time_s)
    if front is None or there is None:
        return
    arrives = abs(there.at - front.at) * interval < 4 * bar.length_m / bar.wave_speed_m_s
    if there.peak > 0.3 * front.peak and arrives:
        raise refuse(
            fired,
            f"the {name.replace('_', ' ')} sees {100 * there.peak / front.peak:.0f} % of the pulse "
            f"{abs(there.at - front.at) * interval * 1e6:.0f} us apart from the struck bar",
            "Were the bars in contact? Then say bars-together; else check which bar was struck",
        )


def findings_of_contact(reflections: Sequence[ContactReflection]) -> list[CalibrationFinding]:
    """Contacts that reflect more than the bars' impedances explain."""
    found = []
    for one in reflections:
        off = abs(one.share - one.expected)
        if off > REFLECTION + 2 * one.u_share:
            found.append(
                CalibrationFinding(
                    check="reflection at the contact",
                    measured=f"{100 * one.share:.1f} % of the pulse of {one.shot_id} comes back, "
                    f"{100 * one.expected:.1f} % expected of these bars",
                    limit=f"{100 * REFLECTION:g} % apart",
                    action="Clean and align the faces, press the bars together before firing; or the impedance of a "
                    "bar (diameter, density, wave speed) is not as stated. What is reflected is missing in the "
                    "transmitted pulse.",
                    grave=off > _MISSING,
                )
            )
    return found


def finding_of_unseen(fired: FiredShot, stations: Sequence[str]) -> CalibrationFinding:
    """A record that ends before the pulse is back says less than it could."""
    together = fired.shot.kind is ShotKind.BARS_TOGETHER
    words = " and ".join(station.replace("_", " ") for station in stations)
    return CalibrationFinding(
        check="reflection at the contact" if together else "free end",
        measured=f"not looked at: the record of {fired.shot_id} ends before the pulse is back at the {words}",
        limit="a record that holds the reflected pulse",
        action="Lengthen the record at the scope; check gauge distances and wave speeds in the rig file.",
    )


def findings_of_ends(ends: Sequence[FreeEnd]) -> list[CalibrationFinding]:
    """Free ends that do not return the pulse whole."""
    found = []
    for one in ends:
        off = abs(one.ratio + 1.0)
        if off > END_LOSS + 2 * one.u_ratio:
            found.append(
                CalibrationFinding(
                    check="free end",
                    measured=f"{one.comparison.shot_id}: the {one.station.replace('_', ' ')} sees "
                    f"{100 * one.ratio:.1f} % come back",
                    limit=f"-100 % within {100 * END_LOSS:g} %",
                    action="Look for a bar that touches its supports hard or attenuates (then measure its "
                    "propagation), a gauge coming loose, an amplifier that is not linear.",
                )
            )
    return found
