"""Two stations that see one pulse: the ratio of their sensitivities, and what contact and free end send back.

Bars together, no specimen: the incident pulse carried to the contact and the transmitted one carried back to it are the
same wave while the bars are pressed together; their strains are as ``2 Z_i c_i/((Z_i + Z_t) c_t)`` (force as
``2 Z_t/(Z_i + Z_t)``), and nothing comes back of equal bars, ``(Z_t - Z_i)/(Z_t + Z_i)`` of others. After the trailing
edge the bars part, so only the loading counts. Bars apart: a free end returns the pulse as tension of the same size,
which tests station, losses and linearity in both directions; further stations of the bar see the same pulse on its way.

With q the true by the stated strain per volt of a station, ``q_other/q_first`` is the expected ratio of the strains by
the stated one. On the independent simulation of bars together it is 1 within 0.02 % (clean) and 0.05 % (noise of 0.7 %
of the peak, hum, drift), the pulses lie on each other within 20 ns, and 0.05 % of the pulse comes back.

References
----------
K. F. Graff, Wave Motion in Elastic Solids (1975), section 2.4 (from memory): steps of impedance and free ends.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.calibrate.determination import CalibrationFinding
from shpb.calibrate.sensitivity.common_terms import (
    LOSS_PER_M,
    MODEL,
    REPEATABILITY,
    Mean,
    Terms,
    added,
    bar_terms,
    mean_of,
    size_of,
)
from shpb.calibrate.sensitivity.contact_shots import (
    ApartShot,
    ContactReflection,
    FreeEnd,
    TogetherShot,
    finding_of_unseen,
    findings_of_contact,
    findings_of_ends,
)
from shpb.calibrate.sensitivity.laid_pulses import Comparison
from shpb.calibrate.session import FiredShot, ShotKind, of_kind
from shpb.rig.rig import Rig
from shpb.settings import DEFAULT, Settings
from shpb.wave.faces import low_pass_of


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class SensitivityRatio:
    """q of one station by q of another, from all shots that both saw.

    ``terms`` are relative changes by one standard uncertainty of what is shared with other results.
    """

    station: str
    reference: str
    expected: float  # strain at the station by that at the reference, both true
    mean: Mean
    terms: Terms
    shots: tuple[Comparison, ...]

    @property
    def ratio(self) -> float:
        """True by stated strain per volt of ``station``, by that of ``reference``."""
        return self.mean.value

    @property
    def u_own(self) -> float:
        """Relative standard uncertainty from the shots alone."""
        return self.mean.u / abs(self.mean.value)

    @property
    def u_ratio(self) -> float:
        """Standard uncertainty with all terms."""
        return abs(self.ratio) * size_of(self.u_own, self.terms)


@dataclass(frozen=True, slots=True, kw_only=True)
class Compared:
    """All that pulses laid on each other say."""

    ratios: tuple[SensitivityRatio, ...]
    reflections: tuple[ContactReflection, ...]
    free_ends: tuple[FreeEnd, ...]
    findings: tuple[CalibrationFinding, ...]


def sensitivity_ratio(fired: Sequence[FiredShot], rig: Rig, settings: Settings = DEFAULT) -> Compared:
    """Compare the pulses of all bars-together and bars-apart shots of a session.

    Parameters
    ----------
    fired : sequence of FiredShot
        Of any kind; shunts are passed over.
    rig : Rig
        With measured wave speeds.
    settings : Settings
        For the low-pass, as for shots.

    Raises
    ------
    InputError
        If a shot is not what it is called (bars together, but the pulse comes back; apart, but it goes through), a
        channel is missing, swapped or inverted, or a pulse has not passed a station when the next one comes.
    """
    low_pass = low_pass_of(rig, settings)
    by_pair: dict[tuple[str, str], list[Comparison]] = {}
    reflections: list[ContactReflection] = []
    ends: list[FreeEnd] = []
    unseen: list[CalibrationFinding] = []
    for one in of_kind(fired, ShotKind.BARS_TOGETHER):
        shot = TogetherShot(one, rig, low_pass)
        reflections += [seen] if (seen := shot.reflection()) is not None else []
        unseen += [finding_of_unseen(one, shot.unseen)] if shot.unseen else []
        for station, comparison in shot.pairs():
            by_pair.setdefault((station, shot.reference), []).append(comparison)
    for one in of_kind(fired, ShotKind.BARS_APART):
        alone = ApartShot(one, rig, low_pass)
        ends += alone.free_ends()
        unseen += [finding_of_unseen(one, alone.unseen)] if alone.unseen else []
        for station, comparison in alone.pairs():
            by_pair.setdefault((station, alone.reference), []).append(comparison)
    ratios = tuple(_ratio(rig, *pair, shots) for pair, shots in by_pair.items())
    findings = (*_of_ratios(ratios), *findings_of_contact(reflections), *findings_of_ends(ends), *unseen)
    return Compared(ratios=ratios, reflections=tuple(reflections), free_ends=tuple(ends), findings=findings)


def _ratio(rig: Rig, station: str, reference: str, shots: Sequence[Comparison]) -> SensitivityRatio:
    bar_i, bar_t = rig.bar_of(reference), rig.bar_of(station)
    expected, terms = 1.0, {}
    way = abs(float(rig.gauges[station].to_specimen_m - rig.gauges[reference].to_specimen_m))
    side, beside = (name.split("_", maxsplit=1)[0] for name in (station, reference))
    if side != beside:
        z_i, z_t = bar_i.impedance_n_s_m, bar_t.impedance_n_s_m
        c_i, c_t = bar_i.wave_speed_m_s, bar_t.wave_speed_m_s
        expected = float(2 * z_i * c_i / ((z_i + z_t) * c_t))
        share = float(z_t / (z_i + z_t))
        terms = added(
            bar_terms(rig, beside, impedance=share, speed=1.0),
            bar_terms(rig, side, impedance=-share, speed=-1.0),
        )
        terms = {name: value for name, value in terms.items() if abs(value) > 1e-12}
        way = float(rig.gauges[station].to_specimen_m + rig.gauges[reference].to_specimen_m)
    # What is lost on the way makes the later station seem less sensitive, q larger.
    terms = added(terms, {"losses": LOSS_PER_M * way, f"model of {station} by {reference}": MODEL})
    values = [expected / one.scale for one in shots]
    own = [
        abs(value) * float(np.hypot(one.u_scale / one.scale, REPEATABILITY))
        for value, one in zip(values, shots, strict=True)
    ]
    return SensitivityRatio(
        station=station,
        reference=reference,
        expected=expected,
        mean=mean_of(values, own),
        terms=terms,
        shots=tuple(shots),
    )


def _of_ratios(ratios: Sequence[SensitivityRatio]) -> list[CalibrationFinding]:
    found = []
    for one in ratios:
        if one.mean.contradicted:
            worst = max(one.shots, key=lambda shot: abs(one.expected / shot.scale - one.ratio))
            found.append(
                CalibrationFinding(
                    check="repeats of the sensitivity ratio",
                    measured=f"{one.station.replace('_', ' ')} by {one.reference.replace('_', ' ')}: "
                    f"{100 * one.mean.scatter / abs(one.ratio):.2f} % scatter, most in {worst.shot_id}",
                    limit=f"{100 * REPEATABILITY:g} % and the noise",
                    action="Check alignment, contact faces and the screws of the amplifiers; the mean's u is made "
                    "larger.",
                )
            )
    return found
