"""From a reduced shot to a curve of the material: only what counts, and without the strain of the bar faces.

Bar curves hold the indentation of the bar faces in their strain, quasi-static curves do not: left in, it costs 4 to 5 %
of a rate sensitivity (measured on an independent simulation). So it is taken out unless somebody says otherwise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.merge.material_curve import MaterialCurve, RateRange
from shpb.response.flow import plastic_strain
from shpb.rig.gauge import TestKind
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet

RESTRICTED = "restricted"  # begins the remark on such a shot
_STEP = 5e-4  # of plastic strain, to which a curve of thousands of samples is thinned
_LEAST_U = 1e-4  # relative: an own uncertainty below this has been forgotten, not measured


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class StoredCurve:
    """What the merge needs of a stored shot; arrays of shape (samples,) over the whole loading.

    Attributes
    ----------
    rig, sheet : Rig, ShotSheet
        As used.
    verdict : str
        "accept", "restrict" or "reject".
    reasons : tuple of str
        Names of the checks that rejected or restricted it.
    strain, stress_pa, rate_per_s : float array
        Engineering strain, stress [Pa] and rate [1/s] of the curve put forward.
    span : (int, int) or None
        Samples that count; nothing else is ever used.
    indentation : float array
        Strain of the bar faces, engineering.
    indentation_out : bool
        Whether ``strain`` is without it already.
    heating_k : float array or None
        Adiabatic rise of the temperature [K].
    u_pa, u_shared_pa : float array
        Standard uncertainty of true stress at a given strain [Pa], and the part that all shots of the rig share.
    origin, sha256 : str
        File name and hash of its bytes.
    """

    rig: Rig
    sheet: ShotSheet
    verdict: str
    reasons: tuple[str, ...]
    strain: FloatArray
    stress_pa: FloatArray
    rate_per_s: FloatArray
    span: tuple[int, int] | None
    indentation: FloatArray
    indentation_out: bool
    heating_k: FloatArray | None
    u_pa: FloatArray
    u_shared_pa: FloatArray
    origin: str
    sha256: str


@dataclass(frozen=True, slots=True, kw_only=True)
class LeftOut:
    """A file that is not in the merge, and why."""

    origin: str
    why: str


def why_left_out(shot: StoredCurve) -> str:
    """Why a shot stays out of the merge; empty where it may enter."""
    if shot.verdict == "reject":
        return f"rejected: {', '.join(shot.reasons) or 'see its findings'}"
    if shot.span is None:
        return "nothing of it counts"
    if shot.sheet.specimen.young_modulus_pa is None:
        return "its sheet states no young_modulus: plastic strain needs the quasi-static one"
    return ""


def from_shot(shot: StoredCurve, *, indentation_out: bool = True) -> MaterialCurve:
    """True stress over true plastic strain of a shot, inside the span that counts.

    Parameters
    ----------
    shot : StoredCurve
    indentation_out : bool
        Whether the strain that the bar faces add is taken out (or left out, where the reduction has done so).

    Raises
    ------
    InputError
        If the shot does not count (:func:`why_left_out`), or its strain does not rise inside the span.
    """
    why = why_left_out(shot)
    if why or shot.span is None:
        raise InputError(why, where=shot.origin, mend="Leave it out, or reduce it again")
    part = slice(*shot.span)
    sign = 1.0 if shot.sheet.kind is TestKind.TENSION else -1.0
    engineering, remarks = _strain(shot, indentation_out=indentation_out)
    stretch = np.maximum(1.0 + sign * engineering[part], 1e-3)
    true_strain, true_stress = sign * np.log(stretch), shot.stress_pa[part] * stretch
    plastic = plastic_strain(true_strain, true_stress, shot.sheet.specimen.young_modulus_pa)
    chosen = _rising(plastic)
    if chosen.size < 4:
        raise InputError(
            f"its plastic strain rises over {chosen.size} points only",
            where=shot.origin,
            mend="Look at the span that counts: it is too short to merge",
        )
    at = np.arange(part.start, part.stop)[chosen]
    stress = true_stress[chosen]
    shared = float(np.median(shot.u_shared_pa[at] / stress))
    own = np.sqrt(np.maximum(shot.u_pa[at] ** 2 - shot.u_shared_pa[at] ** 2, (_LEAST_U * stress) ** 2))
    inside = plastic[chosen]
    if shot.verdict == "restrict":
        remarks = (
            *remarks,
            f"{RESTRICTED} by {', '.join(shot.reasons) or 'its findings'}: only its span enters",
        )
    return MaterialCurve(
        plastic_strain=inside,
        stress_pa=stress,
        rate_per_s=np.maximum(shot.rate_per_s[part] / stretch, 1e-6)[chosen],
        temperature_k=float(shot.sheet.temperature_k),
        temperature_rise_k=None if shot.heating_k is None else shot.heating_k[at],
        u_own_pa=own,
        u_shared=min(shared, 0.5),
        shared_group=shot.rig.name,
        span=(float(inside[0]), float(inside[-1])),
        range=RateRange.BAR,
        material=shot.sheet.specimen.material,
        kind=shot.sheet.kind,
        origin=shot.origin,
        sha256=shot.sha256,
        remarks=remarks,
    )


def _strain(shot: StoredCurve, *, indentation_out: bool) -> tuple[FloatArray, tuple[str, ...]]:
    """Engineering strain with the indentation as asked for, and what was done."""
    if indentation_out == shot.indentation_out or not shot.indentation.any():
        return shot.strain, (
            "strain without the bar faces' share" if shot.indentation_out else "strain of the bars",
        )
    if indentation_out:
        return shot.strain - shot.indentation, ("the bar faces' share has been taken out of the strain",)
    return shot.strain + shot.indentation, ("the bar faces' share has been put back into the strain",)


def _rising(plastic: FloatArray) -> np.ndarray:
    """Samples at which plastic strain has risen by a step since the last one taken, the last sample too."""
    highest = np.maximum.accumulate(plastic)
    cell = np.floor((highest - highest[0]) / _STEP)
    fresh = np.concatenate((np.array([True]), np.diff(cell) > 0))
    chosen = np.flatnonzero(fresh & (plastic >= highest - 1e-12))
    kept: np.ndarray = chosen[np.concatenate((np.array([True]), np.diff(plastic[chosen]) > 0))]
    return kept
