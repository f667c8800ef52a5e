"""Reducing a stored shot again with another calibration, beside the earlier result, and what that changes.

Record, shot sheet and settings are taken as they were stored. Only the values that the rig file stated matter of the
rig: a shot that used a calibration before is taken back to its rig file first, whose text is stored with it.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError, StoreError
from shpb.reduction import ShotResult, draw_shot, reduce
from shpb.rig.calibration import Calibration
from shpb.rig.rig import Rig
from shpb.rig.rig_file import rig_from_text
from shpb.settings import Analysis
from shpb.store.layout import flow_table
from shpb.store.shot_file import StoredShot, load, save_shot
from shpb.trust.compared import Compared, Numbers
from shpb.trust.finding import Weight

_WAVE = {Analysis.ONE_WAVE: "1w", Analysis.THREE_WAVE: "3w"}
_WORDS = {"1w": "one", "3w": "three"}
_GRAVE = (Weight.REJECT.value, Weight.RESTRICT.value)


class OtherRigError(InputError):
    """The shot was fired on a rig that the calibration is not of."""


def stated_rig(stored: StoredShot) -> Rig:
    """The rig of a stored shot as its rig file stated it, without the calibration it may have used.

    Raises
    ------
    StoreError
        If a calibration was used and the text of the rig file is not stored.
    """
    rig = stored.rig
    if rig.calibration is None:
        return rig
    if not rig.text.strip():
        raise StoreError(
            "the shot used a calibration, and what the rig file stated is not stored",
            where=str(stored.path),
            mend="Reduce the raw record again with the rig file",
        )
    return rig_from_text(rig.text, rig.source or f"rig file in {stored.path.name}", as_stated=True)


def reduced_with(stored: StoredShot, calibration: Calibration) -> ShotResult:
    """Reduce a stored shot with a calibration; with draws as many and from the same seed where it had some.

    Raises
    ------
    OtherRigError
        If the calibration is of another rig.
    StoreError
        If the stated rig is not known.
    InputError
        If the shot cannot be reduced.
    """
    rig = stated_rig(stored)
    if rig.name != calibration.rig:
        raise OtherRigError(
            f"fired on the rig {rig.name}, while the calibration is of {calibration.rig}",
            where=str(stored.path),
            mend="Name a calibration of that rig",
        )
    result = reduce(stored.record, rig.calibrated(calibration), stored.sheet, stored.settings)
    result = replace(result, by_hand=stored.by_hand)
    drawn = stored.attributes.get("trust/draws")
    return result if drawn is None else draw_shot(result, int(drawn["draws"]), seed=int(drawn["seed"]))


def recalibrate(source: Path, calibration: Calibration, target: Path) -> tuple[ShotResult, Compared]:
    """Reduce a stored shot with another calibration and store it in a file of its own.

    Parameters
    ----------
    source : Path
        The earlier result; it is only read.
    calibration : Calibration
        To be used.
    target : Path
        The new file. What stands there is replaced only if it is the same shot by the same calibration.

    Returns
    -------
    ShotResult, Compared
        The new result, and both compared.

    Raises
    ------
    OtherRigError, StoreError, InputError
        As :func:`reduced_with`; if the target is taken.
    """
    if target.resolve() == source.resolve():
        raise StoreError(
            "the new result would be written over the earlier one",
            where=str(target),
            mend="Name another folder",
        )
    require_free(target, calibration)
    stored = load(source)
    result = reduced_with(stored, calibration)
    save_shot(result, target)
    compared = Compared(
        shot_id=stored.sheet.shot_id,
        before=numbers_stored(stored),
        after=numbers_of(result),
        rate_change=rate_change(stored, result),
    )
    return result, compared


def require_free(target: Path, calibration: Calibration) -> None:
    """Refuse a file that holds anything but a result by this very calibration.

    Raises
    ------
    StoreError
        That names what stands there.
    """
    if not target.exists():
        return
    held = load(target).rig.calibration
    if held is None or held.sha256 != calibration.sha256:
        by = "the values of the rig file" if held is None else f"the calibration {held.name}"
        raise StoreError(
            f"a result by {by} stands there; it is not written over",
            where=str(target),
            mend="Name another folder",
        )


def numbers_stored(stored: StoredShot) -> Numbers:
    """What is compared, of a stored shot."""
    response = stored.attributes["response"]
    end = int(np.searchsorted(stored["response/time"], response["loading_end_time"] - 1e-12))
    strain = stored["response/true_strain"]
    calibration = stored.rig.calibration
    return Numbers(
        calibration="" if calibration is None else calibration.name,
        date=stored.rig.calibration_date,
        verdict=stored.verdict,
        flow_stress_pa=_flow(stored["response/flow_stress"]),
        strain=float(strain[min(end, strain.size - 1)]),
        rate_per_s=float(response["mean_strain_rate"]),
        reasons=tuple(one.check for one in stored.findings if one.weight.value in _GRAVE),
    )


def numbers_of(result: ShotResult) -> Numbers:
    """What is compared, of a result."""
    response, calibration = result.response, result.rig.calibration
    return Numbers(
        calibration="" if calibration is None else calibration.name,
        date=result.rig.calibration_date,
        verdict=result.verdict.value,
        flow_stress_pa=_flow(flow_table(result)),
        strain=float(response.curve.true_strain[response.loading[1] - 1]),
        rate_per_s=float(response.rate.mean_per_s),
        reasons=tuple(one.check for one in result.findings if one.weight.value in _GRAVE),
    )


def rate_change(stored: StoredShot, result: ShotResult) -> float | None:
    """Change of the mean engineering strain rate over the time that counted before, a share."""
    attributes = stored.attributes["response"]
    start = attributes.get("span_start_time", 0.0)
    end = attributes.get("span_end_time", attributes["loading_end_time"])
    response, wave = result.response, _WAVE[result.response.analysis]
    means = []
    for time, rate in (
        (stored["response/time"], stored[f"response/strain_rate_{wave}"]),
        (response.time_s, getattr(response, f"{_WORDS[wave]}_wave").strain_rate_per_s),
    ):
        part = (time >= start - 1e-12) & (time <= end + 1e-12)
        means.append(float(rate[part].mean()) if part.any() else 0.0)
    return means[1] / means[0] - 1 if means[0] else None


def _flow(table: FloatArray) -> dict[float, float]:
    """Flow stresses that are known, by strain."""
    return {float(at): float(stress) for at, stress, _ in table if np.isfinite(stress)}
