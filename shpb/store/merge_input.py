"""What the merge reads of a shot file."""

from __future__ import annotations

import hashlib
from pathlib import Path

import numpy as np

from shpb.errors import StoreError
from shpb.merge.from_shot import StoredCurve
from shpb.settings import Analysis
from shpb.store.shot_file import load

_WAVE = {Analysis.ONE_WAVE: "1w", Analysis.THREE_WAVE: "3w"}


def stored_curve(path: Path | str) -> StoredCurve:
    """Read a shot file for merging.

    Raises
    ------
    StoreError
        If it is no shot file, is damaged, or was written before uncertainties were kept.
    """
    source = Path(path)
    stored = load(source)
    wave = _WAVE[stored.settings.analysis]
    response = stored.attributes.get("response")
    if response is None:
        raise StoreError(
            "holds no group response: it is damaged",
            where=str(source),
            mend="Reduce the raw record again",
        )
    time = stored["response/time"]
    span = None
    if "span_start_time" in response:
        first, last = (
            int(np.searchsorted(time, response[f"span_{end}_time"] - 1e-12)) for end in ("start", "end")
        )
        span = (first, last + 1)
    try:
        applied = bool(stored.attributes["response/corrections/indentation"]["applied"])
    except KeyError:
        raise StoreError(
            "holds no corrections: it was written by an earlier version",
            where=str(source),
            mend="Reduce the shot again",
        ) from None
    weights = ("reject", "restrict")
    return StoredCurve(
        rig=stored.rig,
        sheet=stored.sheet,
        verdict=stored.verdict,
        reasons=tuple(one.check for one in stored.findings if one.weight.value in weights),
        strain=stored[f"response/strain_{wave}"],
        stress_pa=stored[f"response/stress_{wave}"],
        rate_per_s=stored[f"response/strain_rate_{wave}"],
        span=span,
        indentation=stored["response/indentation_strain"],
        indentation_out=applied,
        heating_k=stored.arrays.get("response/temperature_rise"),
        u_pa=stored["trust/u_true_stress_at_strain"],
        u_shared_pa=stored["trust/u_shared_true_stress_at_strain"],
        origin=source.name,
        sha256=hashlib.sha256(source.read_bytes()).hexdigest(),
    )
