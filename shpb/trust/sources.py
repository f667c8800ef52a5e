"""What makes a shot uncertain: every source with its size, whom it belongs to, and what it acts on.

One list serves both ways of propagation. The linear budget (:mod:`shpb.trust.budget`) asks what a small change of each
quantity does to the curves; the draws (:mod:`shpb.trust.draws`) change all quantities at once, by any amount. A source
acts on one or several of these quantities:

strain of a pulse (relative), its zero level [1] and slope [1/s], its window, its white noise [1], its delay [s]; wave
speed, density, diameter, gauge distance (relative) and Poisson's ratio of either bar; the specimen's diameter and
length (relative); the band limit; the strain of the indentation and the stress of every other correction (relative).

Windows and band limit have no true value. Their lines say what another choice, as good as the one made, would have
changed: both ends of a window drawn in by their soft length, and a cut-off lower by a fifth.

References
----------
JCGM 100:2008 (GUM), 4.3.7 (limits: rectangular distribution), F.2.2.1 (resolution of a digital instrument).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.bridge import bridge_form
from shpb.pulse.separated import SeparatedBar
from shpb.pulse.strain import StationStrain
from shpb.quantity import Quantity
from shpb.rig.bar import Bar, one_stock
from shpb.rig.gauge import Arrangement, Gauge
from shpb.rig.propagation_table import PropagationTable
from shpb.settings import Alignment, Correction
from shpb.trust.evidence import Evidence
from shpb.trust.gum import Distribution
from shpb.wave.hot_bar import hot_ends

PULSES = ("incident", "reflected", "transmitted")
BARS = ("in", "out")  # the incident and the transmitted bar

# Acted on by a factor (1 + change), so that several sources multiply; all else is added to.
RELATIVE = frozenset(
    (
        *(f"strain_{pulse}" for pulse in PULSES),
        *(f"{what}_{bar}" for what in ("speed", "density", "diameter", "distance") for bar in BARS),
        "specimen_diameter",
        "specimen_length",
    )
)

# Where nobody has stated an uncertainty (common practice; relative standard uncertainties).
ASSUMED = {
    "gauge factor": 0.005,
    "excitation": 0.001,
    "gain": 0.002,
    "density": 0.002,
    "wave speed": 0.002,
    "bar diameter": 0.0005,
    "modulus": 0.01,
    "specimen diameter": 0.001,
    "specimen length": 0.002,
    "gauge distance": 0.001,
    "Poisson's ratio": 0.03,
}
# Common practice: a cut-off may as well be a fifth lower.
BAND_SHARE = 0.2
# Common practice: the static indentation holds for a dynamic force within 15 %.
INDENTATION_SHARE = 0.15
# A known error that is not corrected must lie inside the interval (JCGM 100:2008, F.2.4.5). With 0.9 of the estimate
# the interval of k = 2 holds it in 95 % of all cases at least, however large it is beside the other errors.
INDENTATION_LEFT_IN = 0.9
# Common practice, where such a correction is applied and the sheet does not say how well its input is known.
STRESS_CORRECTIONS = {Correction.INERTIA: 0.2, Correction.FRICTION: 0.3, Correction.HEATING: 0.2}
# Common practice: a bar face is known to 20 K, the temperature coefficient of its modulus to 15 %.
HOT_FACE_K, HOT_SLOPE = 20.0, 0.15
_SAMPLES_FOR_A_STEP = 4096


Way = tuple[tuple[str, float], ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Source:
    """One source of uncertainty.

    Attributes
    ----------
    name : str
        Unique within a shot.
    shared : bool
        By all shots of the rig, or this shot's own.
    assumed : bool
        Nobody has stated it: the size is common practice.
    u : float
        Standard uncertainty of the quantity, in the unit of what it acts on; relative where that is.
    acts : mapping of str to float
        On what, and with which power (relative) or factor (else).
    distribution : str
        For the draws.
    note : str
        What a reader of the line should know besides.
    """

    name: str
    shared: bool
    u: float
    acts: Mapping[str, float]
    assumed: bool = False
    distribution: Distribution = "normal"
    note: str = field(default="")

    @property
    def way(self) -> Way:
        """On what it acts, whatever its size: alike for sources that do the same."""
        return tuple(sorted(self.acts.items()))


def sources_of(evidence: Evidence) -> tuple[Source, ...]:
    """Every source of one shot, also those that are zero here but would be looked for."""
    return (
        *_rig_sources(evidence),
        *_specimen_sources(evidence),
        *_correction_sources(evidence),
        *_pulse_sources(evidence),
        *_feet(evidence),
    )


def laid_on_feet(evidence: Evidence) -> tuple[bool, bool]:
    """Whether the reflected and the transmitted pulse were laid on the incident foot: no distance moves them then."""
    if evidence.settings.alignment is not Alignment.FEET:
        return False, False
    faces = evidence.faces
    return faces.reflected_misalignment_s is not None, faces.transmitted_misalignment_s is not None


# --- the rig ---------------------------------------------------------------------------------------


def relative_u(value: float, name: str, shares: Mapping[str, float] = ASSUMED) -> float:
    """Relative standard uncertainty of a quantity, assumed by its name where nobody has stated it."""
    u = getattr(value, "u", None)
    return shares[name] if u is None else float(u / abs(value)) if value else 0.0


def _relative(value: float, name: str) -> tuple[float, bool]:
    """Relative standard uncertainty of a quantity, and whether it had to be assumed."""
    return relative_u(value, name), getattr(value, "u", None) is None


def _rig_sources(evidence: Evidence) -> Iterator[Source]:
    rig = evidence.rig
    for side, bar, pulses in (("incident", "in", PULSES[:2]), ("transmitted", "out", PULSES[2:])):
        separated = evidence.pulses.separated_bar(side)
        if separated is None:
            strain = {f"strain_{pulse}": -1.0 for pulse in pulses}
            yield from _gauge(side, rig.gauges[f"{side}_gauge"], strain, {f"distance_{bar}": 1.0})
            continue
        # Each station has its own share in both waves of its bar.
        for station in separated.stations:
            acts = {f"strain:{station}": -1.0}, {f"distance:{station}": 1.0}
            yield from _gauge(_words(station), rig.gauges[station], *acts)
    if one_stock(rig.incident_bar, rig.transmitted_bar):
        # Bars of one stock: what was measured once acts on both.
        yield from _bar(evidence, "bars", rig.incident_bar, BARS)
    else:
        yield from _bar(evidence, "incident bar", rig.incident_bar, BARS[:1])
        yield from _bar(evidence, "transmitted bar", rig.transmitted_bar, BARS[1:])


def _words(station: str) -> str:
    """A station as the budget's lines name it: "incident" for the first, "incident gauge 2" for the second."""
    return station.removesuffix("_gauge").replace("_", " ")


def _gauge(
    name: str, gauge: Gauge, strain: Mapping[str, float], distance: Mapping[str, float]
) -> Iterator[Source]:
    """Strain is inverse to gauge factor, excitation and gain; the distance shifts pulses against each other."""
    of_gauge = name if name[-1].isdigit() else f"{name} gauge"
    for what, full, value in (
        ("gauge factor", f"{of_gauge} factor", gauge.gauge_factor),
        ("excitation", f"{name} excitation", gauge.excitation_v),
        ("gain", f"{name} gain", gauge.gain),
    ):
        u, assumed = _relative(value, what)
        yield Source(name=full, shared=True, assumed=assumed, u=u, acts=strain)
    u, assumed = _relative(gauge.to_specimen_m, "gauge distance")
    yield Source(name=f"{of_gauge} distance", shared=True, assumed=assumed, u=u, acts=distance)


def _bar(evidence: Evidence, name: str, bar: Bar, sides: tuple[str, ...]) -> Iterator[Source]:
    modulus = bar.stated_modulus_pa
    lines: list[tuple[str, dict[str, float], float]] = [
        ("density", {"density": 1.0}, bar.density_kg_m3),
        ("bar diameter", {"diameter": 1.0}, bar.diameter_m),
    ]
    if bar.propagation is not None:
        lines.append(("wave speed", {"speed": 1.0}, _measured_speed(bar, bar.propagation)))
        # One unit is the table's own standard uncertainty, in the same direction at all frequencies.
        acts = {f"attenuation_{side}": 1.0 for side in sides}
        yield Source(
            name=f"{name}: attenuation", shared=True, u=1.0, acts=acts, note="of the measured propagation"
        )
    elif modulus is None or modulus.u is None:
        lines.append(("wave speed", {"speed": 1.0}, bar.wave_speed_m_s))
    else:
        # c = sqrt(E/rho) was worked out from the two: what is known of them acts through both.
        lines[0] = ("density", {"density": 1.0, "speed": -0.5}, bar.density_kg_m3)
        lines.append(("modulus", {"speed": 0.5}, modulus))
    for what, on, value in lines:
        u, assumed = _relative(value, what)
        acts = {f"{key}_{side}": power for key, power in on.items() for side in sides}
        yield Source(
            name=f"{name}: {what.removeprefix('bar ')}", shared=True, assumed=assumed, u=u, acts=acts
        )
    u, assumed = _relative(bar.poisson_ratio, "Poisson's ratio")
    nu = float(bar.poisson_ratio)
    acts = {f"poisson_{side}": 1.0 for side in sides}
    for side, gauge, pulses in (
        ("in", evidence.rig.incident_gauge, PULSES[:2]),
        ("out", evidence.rig.transmitted_gauge, PULSES[2:]),
    ):
        # Transverse gauges: the bridge gives (1 + nu) times the axial strain.
        if side in sides and gauge.arrangement in (Arrangement.HALF_POISSON, Arrangement.FULL_POISSON):
            acts |= {f"strain_{pulse}": -1.0 / (1.0 + nu) for pulse in pulses}
    yield Source(name=f"{name}: Poisson's ratio", shared=True, assumed=assumed, u=u * nu, acts=acts)


def _measured_speed(bar: Bar, table: PropagationTable) -> Quantity:
    """Reference speed of a bar with a measured table, as uncertain as the table's middle if that is more.

    Its line stands for one common share of error in all phase speeds, and so in travel time, modulus and impedance.
    """
    speed = bar.wave_speed_m_s
    shares = sorted(u / c for u, c in zip(table.u_phase_speed_m_s, table.phase_speed_m_s, strict=True))
    of_table = shares[len(shares) // 2] * speed
    return Quantity(float(speed), max(speed.u or 0.0, of_table), speed.origin)


# --- the shot's own ----------------------------------------------------------------------------------


def _specimen_sources(evidence: Evidence) -> Iterator[Source]:
    specimen = evidence.sheet.specimen
    for name, value in (("diameter", specimen.diameter_m), ("length", specimen.length_m)):
        u, assumed = _relative(value, f"specimen {name}")
        acts = {f"specimen_{name}": 1.0}
        yield Source(name=f"specimen {name}", shared=False, assumed=assumed, u=u, acts=acts)
    acts = {"indentation": 1.0}
    if _indentation_taken_off(evidence):
        yield Source(name="indentation taken off", shared=False, u=INDENTATION_SHARE, acts=acts)
    else:
        yield Source(
            name="indentation left in",
            shared=False,
            u=INDENTATION_LEFT_IN,
            acts=acts,
            note="a known error to one side, of the size of the estimate: take it off",
        )


def _correction_sources(evidence: Evidence) -> Iterator[Source]:
    """How well the corrections of stress are known, where they are applied; what is left in is only reported."""
    mu = evidence.sheet.specimen.friction_coefficient
    for report in evidence.response.corrections:
        if report.applied and report.correction is Correction.BAR_TEMPERATURE:
            yield from _hot_ends(evidence)
        if not report.applied or report.correction not in STRESS_CORRECTIONS:
            continue
        u, assumed = STRESS_CORRECTIONS[report.correction], True
        if report.correction is Correction.FRICTION and mu is not None and mu.u is not None and mu > 0:
            u, assumed = mu.u / mu, False
        name = report.correction.value
        yield Source(name=f"{name} taken off", shared=False, assumed=assumed, u=u, acts={name: 1.0})


def _hot_ends(evidence: Evidence) -> Iterator[Source]:
    """Face temperature and temperature coefficient, by the force that a slow gradient would make of them: the most."""
    ends = hot_ends(evidence.rig, evidence.sheet)
    for side, end, pulses in (("incident", ends[0], PULSES[:2]), ("transmitted", ends[1], PULSES[2:])):
        if end is None:
            continue
        face = getattr(evidence.sheet, f"{side}_face_temperature_k")
        slope = end.bar.modulus_temperature_coefficient_per_k
        u_face = HOT_FACE_K if face.u is None else face.u
        u_slope = HOT_SLOPE * abs(end.modulus_slope_per_k) if slope is None or slope.u is None else slope.u
        # Force goes as the fourth root of the stiffness ratio 1 + k (T - room).
        u = np.hypot(end.modulus_slope_per_k * u_face, (end.face_k - end.room_k) * u_slope) / (
            4 * end.stiffness_ratio
        )
        assumed = face.u is None or slope is None or slope.u is None
        acts = {f"strain_{pulse}": 1.0 for pulse in pulses}
        yield Source(name=f"{side} hot end", shared=False, assumed=assumed, u=float(u), acts=acts)


def _indentation_taken_off(evidence: Evidence) -> bool:
    """Whether the curves have it: switched on, and not refused for this shot."""
    return evidence.response.correction(Correction.INDENTATION).applied


def _pulse_sources(evidence: Evidence) -> Iterator[Source]:
    """What each pulse has on its own: linearity, bending and dispersion; zero line, window, noise and digits."""
    error, interval = evidence.settings.pulse_error, evidence.pulses.sample_interval_s
    for bar in evidence.pulses.separated:
        yield from _of_stations(evidence, bar)
    for pulse in evidence.pulses:
        name = pulse.name
        if evidence.pulses.waves(name) is not None:
            # Approximate: linearity and bending act at the stations; here each wave has an error of its own, as where
            # windows tell the pulses apart.
            yield Source(name=f"{name} pulse", shared=False, u=error, acts={f"strain_{name}": 1.0})
            continue
        for what, u, act in (
            ("pulse", error, "strain"),
            ("zero level", pulse.zero.u_level, "level"),
            ("zero slope", pulse.zero.u_slope / interval, "slope"),
        ):
            yield Source(name=f"{name} {what}", shared=False, u=u, acts={f"{act}_{name}": 1.0})
        yield Source(
            name=f"{name} window", shared=False, u=1 / np.sqrt(3), acts={f"window_{name}": 1.0},
            distribution="rectangular", note="both ends drawn in by up to their soft length",
        )  # fmt: skip
        at = evidence.rig.incident_gauge if name != "transmitted" else evidence.rig.transmitted_gauge
        station = evidence.strain.incident if name != "transmitted" else evidence.strain.transmitted
        bar_of = evidence.rig.bar_of("transmitted" if name == "transmitted" else "incident")
        step = _step_strain(at, bar_of, station, evidence.strain.index(pulse.window_s[0]))
        yield from _digits_and_noise(name, name, step, pulse.noise)
    yield Source(
        name="band limit",
        shared=False,
        u=1.0,
        acts={"band": 1.0},
        note=f"a cut-off {100 * BAND_SHARE:.0f} % lower",
    )


def _of_stations(evidence: Evidence, bar: SeparatedBar) -> Iterator[Source]:
    """Zero line, noise and digits of each station of a bar whose waves were told apart."""
    interval = evidence.pulses.sample_interval_s
    for n, station in enumerate(bar.stations):
        name, zero = f"{_words(station)} station", bar.zeros[n]
        for what, u, act in (
            ("zero level", zero.u_level, "level"),
            ("zero slope", zero.u_slope / interval, "slope"),
        ):
            yield Source(name=f"{name} {what}", shared=False, u=u, acts={f"{act}:{station}": 1.0})
        step = _step_strain(
            evidence.rig.gauges[station],
            evidence.rig.bar_of(station),
            evidence.strain.stations[station],
            bar.begin,
        )
        yield from _digits_and_noise(name, station, step, bar.noise[n])


def _digits_and_noise(name: str, what: str, step: float, noise: float) -> Iterator[Source]:
    """Noise as measured holds the rounding of the digitiser, as long as it is more than half a step.

    ``what`` is the pulse or the station that they act on.
    """
    rounding = step / np.sqrt(12.0)
    if noise >= 0.5 * step:
        rest = float(np.sqrt(max(noise**2 - rounding**2, 0.0)))
        note = "" if step else "the step of the digitiser is too small to be seen, and not stated"
        yield Source(
            name=f"{name} quantisation", shared=False, u=rounding, acts={f"noise_{what}": 1.0}, note=note
        )
    else:
        # A quiet signal stays in one step: its rounding is the same from sample to sample, and no filter helps.
        rest = noise
        level = f"level_{what}" if what in PULSES else f"level:{what}"
        yield Source(
            name=f"{name} quantisation", shared=False, u=rounding, acts={level: 1.0},
            distribution="rectangular", note="noise below half a step: not white, one level through the pulse",
        )  # fmt: skip
    yield Source(name=f"{name} noise", shared=False, u=rest, acts={f"noise_{what}": 1.0})


def _step_strain(gauge: Gauge, bar: Bar, station: StationStrain, start: int) -> float:
    """One step of the digitiser as strain at the gauge; from range and bits, else from the record; 0 if unseen."""
    if gauge.scope_range_v is not None and gauge.scope_bits is not None:
        step = (gauge.scope_range_v[1] - gauge.scope_range_v[0]) / 2**gauge.scope_bits
    else:
        step = _least_step(station.voltage_v[0, start : start + _SAMPLES_FOR_A_STEP])
    form = bridge_form(gauge.arrangement, bar.poisson_ratio)
    per_volt = form.n / (form.B * gauge.effective_gauge_factor * gauge.excitation_v * gauge.gain)
    # The mean of two channels rounds twice, independently.
    return float(step * per_volt / np.sqrt(len(gauge.channels)))


def _least_step(voltage_v: FloatArray) -> float:
    """Smallest step between the values of a trace [V]; what is no more than rounding of decimals does not count."""
    steps = np.diff(np.unique(voltage_v))
    steps = steps[steps > 1e-6 * max(float(np.ptp(voltage_v)), 1e-300)]
    return float(steps.min()) if steps.size else 0.0


def _feet(evidence: Evidence) -> Iterator[Source]:
    """Only where pulses are laid on the incident foot: that foot moves both, the others their own pulse."""
    laid = dict(zip(PULSES[1:], laid_on_feet(evidence), strict=True))
    moved = [name for name, is_laid in laid.items() if is_laid]
    if not moved:
        return
    u_feet = _u_feet_s(evidence)
    acts = {f"delay_{name}": -1.0 for name in moved}
    yield Source(name="incident foot", shared=False, u=u_feet["incident"], acts=acts)
    for name in moved:
        yield Source(name=f"{name} foot", shared=False, u=u_feet[name], acts={f"delay_{name}": 1.0})


def _u_feet_s(evidence: Evidence) -> dict[str, float]:
    """Standard uncertainty of each foot at the face [s]: together as the faces have it, shared out as at the gauges."""
    at_gauge = {p.name: 0.0 if p.foot is None else float(p.foot.u_time_s) for p in evidence.pulses}
    together = float(np.sqrt(sum(u**2 for u in at_gauge.values())))
    share = evidence.faces.u_misalignment_s / together if together > 0 else 0.0
    return {name: u * share for name, u in at_gauge.items()}
