"""Propagation coefficient of a bar that is not elastic, from two passages of one pulse.

After the way p between two passages the spectrum of a pulse is S2 = S1 exp(-xi p), with xi = alpha + i w/c (the second
one turned back in sign where it has come from a free end). So

    alpha = -ln|S2/S1|/p        w/c = -arg(S2/S1)/p

with the phase unwrapped from low frequency up, after the rigid delay between the windows is taken out. Several shots
give H = sum S1* S2/sum |S1|^2 and the coherence. The curve through the frequencies is smoothed in the complex slowness
xi/(i w), which varies slowly, with the weight that each frequency has by its own signal.

References
----------
C. Bacon, Exp. Mech. 38 (1998) 242-249 (free bar, one station).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from shpb.arrays import ComplexArray, FloatArray, frozen
from shpb.calibrate.determination import CalibrationFinding, Determination
from shpb.calibrate.propagation.apart_shots import groups_of, pairs_of, shots_of
from shpb.calibrate.propagation.passage_spectra import Points, points_of
from shpb.calibrate.propagation.smooth_spectrum import smoothed
from shpb.calibrate.session import FiredShot
from shpb.errors import InputError
from shpb.rig.bar import Bar
from shpb.rig.propagation_table import PropagationTable
from shpb.rig.rig import Rig
from shpb.wave.pochhammer import first_mode_at_wavelength

_TABLE_POINTS = (40, 150)
_TWICE_U = 2.0
_NEGLIGIBLE = 5e-4  # of the phase speed: what scatters less is no fault of the shots
_NEARLY_BEST = 1.2
_ODD = 4.0  # mean square of residuals by their expected size from which shots contradict each other


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class MeasuredPropagation:
    """Measured propagation of one bar, and what a figure of it needs.

    Attributes
    ----------
    bar : str
        ``"incident"`` or ``"transmitted"``.
    table : PropagationTable
        Smooth, with standard uncertainties that hold the lengths' too.
    determination : Determination
        Wave speed of the bar, at the low end of the band.
    frequency_hz, attenuation_per_m, phase_speed_m_s : float array, shape (points,)
        Every frequency of every pair of passages by itself, not smoothed.
    u_attenuation_per_m, u_phase_speed_m_s : float array, shape (points,)
        From noise alone.
    coherence : float array, shape (points,)
    loss_tangent, u_loss_tangent : float
        One mean loss tangent of the material over the band.
    width_hz : float
        Reach of the smoothing to either side.
    misfit : float
        Mean square of the points' distances from the curve by their expected size.
    """

    bar: str
    table: PropagationTable
    determination: Determination
    frequency_hz: FloatArray
    attenuation_per_m: FloatArray
    phase_speed_m_s: FloatArray
    u_attenuation_per_m: FloatArray
    u_phase_speed_m_s: FloatArray
    coherence: FloatArray
    loss_tangent: float
    u_loss_tangent: float
    width_hz: float
    misfit: float
    findings: tuple[CalibrationFinding, ...] = ()
    remarks: tuple[str, ...] = ()

    @property
    def elastic(self) -> bool:
        """Whether no attenuation stands clear of its uncertainty."""
        return abs(self.loss_tangent) <= _TWICE_U * self.u_loss_tangent


def complex_propagation(fired: Sequence[FiredShot], rig: Rig, bar: str) -> MeasuredPropagation:
    """Measure how waves travel in one bar, from bars-apart shots.

    Parameters
    ----------
    fired : sequence of FiredShot
        Of a session; the bars-apart shots of this bar are used.
    rig : Rig
        With the lengths and distances that hold: the propagation is inverse to them.
    bar : str
        ``"incident"`` or ``"transmitted"``.

    Raises
    ------
    InputError
        If there is no such shot, one record is used twice, no two passages can be told apart, or too little of the
        pulse stands above the noise.
    """
    pairs, refused = pairs_of(shots_of(fired, bar), rig)
    of = rig.incident_bar if bar == "incident" else rig.transmitted_bar
    sets: list[Points] = []
    poor: list[InputError] = []
    for group in groups_of(pairs):
        try:
            sets.append(points_of(group, of))
        except InputError as error:
            poor.append(error)
    if not sets:
        raise poor[0]
    return _measured(bar, of, sets, (*refused, *(f"{one}" for one in poor)))


# --- all sets together -------------------------------------------------------------------------------------


def _measured(bar: str, of: Bar, sets: Sequence[Points], refused: tuple[str, ...]) -> MeasuredPropagation:
    frequency, slowness, u, coherence, u_path, u_gain = _merged(sets)
    points = int(np.clip(2 * frequency.size / len(sets), *_TABLE_POINTS))
    at = np.linspace(frequency[0], frequency[-1], points)
    curve = smoothed(frequency, slowness, u, at)
    omega, u_curve = 2 * np.pi * at, curve.u
    speed, attenuation = 1 / curve.values.real, -omega * curve.values.imag
    table = PropagationTable(
        frequency_hz=_floats(at),
        attenuation_per_m=_floats(attenuation),
        phase_speed_m_s=_floats(speed),
        u_attenuation_per_m=_floats(
            np.sqrt((omega * u_curve) ** 2 + (attenuation * u_path) ** 2 + u_gain**2)
        ),
        u_phase_speed_m_s=_floats(speed * np.hypot(speed * u_curve, u_path)),
        coherence=_floats(np.interp(at, frequency, coherence)),
    )
    w, u_scattered = 2 * np.pi * frequency, u * np.sqrt(max(curve.misfit, 1.0))
    scatter = float(np.median(u_scattered / slowness.real))
    loss, u_loss = _mean_loss(frequency, slowness, u_scattered, u_gain)
    measured = MeasuredPropagation(
        bar=bar,
        table=table,
        determination=_wave_speed(bar, of, table, sets),
        frequency_hz=frozen(frequency),
        attenuation_per_m=frozen(-w * slowness.imag),
        phase_speed_m_s=frozen(1 / slowness.real),
        u_attenuation_per_m=frozen(w * u),
        u_phase_speed_m_s=frozen(u / slowness.real**2),
        coherence=frozen(coherence),
        loss_tangent=loss,
        u_loss_tangent=u_loss,
        width_hz=curve.width,
        misfit=curve.misfit,
        findings=tuple(_findings(bar, table, curve.misfit, scatter)),
    )
    return _with_remarks(measured, sets, refused)


def _merged(
    sets: Sequence[Points],
) -> tuple[FloatArray, ComplexArray, FloatArray, FloatArray, float, float]:
    """All points by frequency, and what all of them have in common: u of the way (relative) and of the gain by it."""
    frequency = np.concatenate([one.frequency_hz for one in sets])
    order = np.argsort(frequency, kind="stable")
    weight = np.array([float((1 / one.u_slowness_s_m**2).sum()) for one in sets])
    weight /= weight.sum()
    # Lengths of one bar: taken as in error together, which is never too little.
    u_path = float(
        sum(w * one.passages.u_path_m / one.passages.path_m for w, one in zip(weight, sets, strict=True))
    )
    u_gain = float(
        sum(w * one.passages.u_gain / one.passages.path_m for w, one in zip(weight, sets, strict=True))
    )
    return (
        frequency[order],
        np.concatenate([one.slowness_s_m for one in sets])[order],
        np.concatenate([one.u_slowness_s_m for one in sets])[order],
        np.concatenate([one.coherence for one in sets])[order],
        u_path,
        u_gain,
    )


def _mean_loss(
    frequency_hz: FloatArray, slowness: ComplexArray, u: FloatArray, u_gain: float
) -> tuple[float, float]:
    """One loss tangent for all frequencies: E* = rho/s^2, so tan = -2 Im s/Re s where it is small."""
    weight = (slowness.real / (2 * u)) ** 2
    loss = -2 * slowness.imag / slowness.real
    mean = float((weight * loss).sum() / weight.sum())
    # A gain in error looks like a loss of 2 c u_gain/w.
    common = float((weight * 2 * u_gain / (2 * np.pi * frequency_hz * slowness.real)).sum() / weight.sum())
    return mean, float(np.hypot(1 / np.sqrt(weight.sum()), common))


def _wave_speed(bar: str, of: Bar, table: PropagationTable, sets: Sequence[Points]) -> Determination:
    """Speed of slow waves: at the lowest frequency that is known nearly best, the section's part taken out."""
    speed, u = np.asarray(table.phase_speed_m_s), np.asarray(table.u_phase_speed_m_s)
    known = u / speed
    low = int(np.argmax(known <= _NEARLY_BEST * known[: speed.size // 3].min()))
    at_hz = table.frequency_hz[low]
    ratio = float(
        first_mode_at_wavelength([at_hz * of.radius_m / speed[low]], of.poisson_ratio).phase_speed[0]
    )
    return Determination(
        method=f"propagation of {_how(sets)}, at {at_hz / 1e3:.2g} kHz",
        shots=tuple(dict.fromkeys(shot for one in sets for shot in one.shots)),
        names=(f"{bar} bar: wave speed",),
        values=np.array([speed[low] / ratio]),
        covariance=np.array([[(u[low] / ratio) ** 2]]),
    )


def _how(sets: Sequence[Points]) -> str:
    ways = dict.fromkeys(one.passages.words for one in sets)
    return "two passages " + "; ".join(ways)


def _findings(bar: str, table: PropagationTable, misfit: float, scatter: float) -> list[CalibrationFinding]:
    found = []
    low = [a / u for a, u in zip(table.attenuation_per_m, table.u_attenuation_per_m, strict=True) if u > 0]
    if low and min(low) < -3.0:
        found.append(
            CalibrationFinding(
                check=f"{bar} bar: attenuation",
                measured=f"the later passage is larger than the earlier one by {-min(low):.1f} times its uncertainty",
                limit="3 times",
                action="Check that the bar's other end is free, and the sensitivities if two stations were used.",
                grave=True,
            )
        )
    if misfit > _ODD and scatter > _NEGLIGIBLE:
        found.append(
            CalibrationFinding(
                check=f"{bar} bar: propagation",
                measured=f"the frequencies scatter {np.sqrt(misfit):.1f} times as much as their noise says",
                limit=f"{np.sqrt(_ODD):g} times",
                action="Look for bending, a loose gauge, supports that touch, or shots of different bars.",
            )
        )
    return found


def _with_remarks(
    measured: MeasuredPropagation, sets: Sequence[Points], refused: tuple[str, ...]
) -> MeasuredPropagation:
    table = measured.table
    low, high = table.frequency_hz[0] / 1e3, table.frequency_hz[-1] / 1e3
    remarks = [
        f"{measured.bar} bar: propagation known from {low:.2g} to {high:.3g} kHz, by two passages "
        f"{one.passages.words}; beyond, {one.ends_by}"
        for one in sets
    ]
    if measured.elastic:
        remarks.append(
            f"the {measured.bar} bar is elastic within its uncertainty: loss tangent {measured.loss_tangent:.5f}, "
            f"standard uncertainty {measured.u_loss_tangent:.5f}"
        )
    if all(len(one.shots) == 1 for one in sets):
        remarks.append(
            f"{measured.bar} bar: one shot, so what shots do not repeat is not known; uncertainties follow from the "
            "noise before the pulse, the coherence is that of neighbouring frequencies"
        )
    found = replace(measured.determination, remarks=tuple(remarks))
    return replace(measured, determination=found, remarks=(*remarks, *refused))


def _floats(values: FloatArray) -> tuple[float, ...]:
    return tuple(map(float, values))
