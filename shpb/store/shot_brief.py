"""What later shots are held against, of a stored shot: a few numbers and curves, without its record."""

from __future__ import annotations

import json
from pathlib import Path
from types import SimpleNamespace
from typing import TYPE_CHECKING, Any, NamedTuple, cast

import numpy as np

from shpb.response.flow import FlowStress
from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings
from shpb.store.plain import from_plain
from shpb.store.shot_file import open_shot
from shpb.trust.budget import ALL_OUTPUTS
from shpb.trust.finding import Verdict
from shpb.trust.repeats import Reduced, RepeatShot, repeat_shot

if TYPE_CHECKING:
    import h5py


class ShotBrief(NamedTuple):
    """A stored shot as its repeats see it.

    Attributes
    ----------
    shot_id, verdict : str
    repeat : RepeatShot or None
        None where the shot does not count or has no flow stress.
    end_strain : float or None
        True strain at the end of what counts.
    """

    shot_id: str
    verdict: str
    repeat: RepeatShot | None
    end_strain: float | None


def read_brief(path: Path | str) -> ShotBrief:
    """Read what a shot file gives to the comparison of repeats.

    Raises
    ------
    StoreError
        If it is no shot file, is damaged, or was written by a later version of the format.
    """
    with open_shot(Path(path)) as file:
        return _brief(file)


def _brief(file: h5py.File) -> ShotBrief:
    verdict, facts = Verdict(file.attrs["verdict"]), file["response"].attrs
    end = facts.get("span_end_true_strain")
    if verdict is Verdict.REJECT or "span_start_time" not in facts:
        return ShotBrief(str(file.attrs["shot_id"]), verdict.value, None, None if end is None else float(end))
    inputs = {name: json.loads(file[f"rig/{name}_as_used"][()]) for name in ("rig", "sheet", "settings")}
    sheet = from_plain(ShotSheet, inputs["sheet"])
    row, time = ALL_OUTPUTS.index("true_stress_at_strain"), file["response/time"][()]
    first, last = (int(np.searchsorted(time, facts[f"span_{end}_time"] - 1e-12)) for end in ("start", "end"))
    reduced: Any = SimpleNamespace(
        sheet=sheet,
        rig=from_plain(Rig, inputs["rig"]),
        settings=from_plain(Settings, inputs["settings"]),
        verdict=verdict,
        response=SimpleNamespace(
            time_s=time,
            span=(first, last + 1),
            curve=SimpleNamespace(
                true_strain=file["response/true_strain"][()], true_stress_pa=file["response/true_stress"][()]
            ),
            rate=SimpleNamespace(mean_per_s=float(facts["mean_strain_rate"])),
            flow=_flow(file, plastic=sheet.specimen.young_modulus_pa is not None),
        ),
        budget=SimpleNamespace(
            time_s=time,
            total={row: file["trust/u_true_stress_at_strain"][()]},
            shared={row: file["trust/u_shared_true_stress_at_strain"][()]},
        ),
    )
    repeat = repeat_shot(cast(Reduced, reduced))
    return ShotBrief(sheet.shot_id, verdict.value, repeat, None if end is None else float(end))


def _flow(file: h5py.File, *, plastic: bool) -> tuple[FlowStress, ...]:
    """The table of flow stresses; NaN stands for what is not in what counts."""
    points = []
    for strain, stress, rate in file["response/flow_stress"][()]:
        known = bool(np.isfinite(stress))
        points.append(
            FlowStress(
                at_strain=float(strain),
                plastic=plastic,
                stress_pa=float(stress) if known else None,
                rate_per_s=float(rate) if known else None,
            )
        )
    return tuple(points)
