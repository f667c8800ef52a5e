"""A stored shot worked out again, so that it can be shown in full, and held against what was stored."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.errors import ShpbError, StoreError
from shpb.reduction import ShotResult, draw_shot
from shpb.store.shot_file import StoredShot

_SAME = 1e-9  # relative: rounding of another processor


class Again(NamedTuple):
    """A shot worked out again; ``differs`` says how it differs from what was stored, empty where it does not."""

    result: ShotResult
    differs: str


def worked_out_again(stored: StoredShot) -> Again:
    """Work a stored shot out again from its record, rig, sheet and settings, with as many draws as it was stored with.

    The same version of the program gives the same curves, bit for bit.

    Raises
    ------
    StoreError
        If this version cannot work it out.
    """
    try:
        result = stored.reduce_again()
        drawn = stored.attributes.get("trust/draws")
        if drawn is not None:
            result = draw_shot(result, int(drawn["draws"]), seed=int(drawn["seed"]))
    except ShpbError as error:
        raise StoreError(
            f"this version of the program cannot work the shot out again: {error.what}",
            where=str(stored.path),
            mend=error.mend or "Reduce the raw record again",
        ) from error
    return Again(result, _differs(stored, result))


def _differs(stored: StoredShot, result: ShotResult) -> str:
    by = stored.attributes["/"].get("program_version", "another version")
    found = []
    if stored.verdict != result.verdict.value:
        found.append(f"verdict {stored.verdict} when it was stored, {result.verdict.value} now")
    before, now = stored["response/true_stress"], result.response.curve.true_stress_pa
    strains = stored["response/true_strain"], result.response.curve.true_strain
    if before.shape != now.shape:
        found.append("its curve has another length")
    else:
        size = max(float(np.abs(before).max()), 1e-300)
        change = float(np.abs(before - now).max()) / size
        strain = float(np.abs(strains[0] - strains[1]).max())
        if change > _SAME or strain > _SAME:
            found.append(
                f"true stress changed by up to {100 * change:.2g} % of its peak, true strain by up to {strain:.2g}"
            )
    if not found:
        return ""
    return f"stored by shpb {by}, and this version finds otherwise: {'; '.join(found)}"
