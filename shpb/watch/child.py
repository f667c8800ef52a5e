"""The parts of the child's work that belong to watching alone: hashing, the earlier result, what is shown."""

from __future__ import annotations

import glob
import hashlib
import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.errors import ShpbError, StoreError
from shpb.watch.shelf import stamp_of
from shpb.watch.tasks import FileLook, PastShot, Refusal, Shown

if TYPE_CHECKING:
    from shpb.reduction import ShotResult

_BLOCK = 1 << 20
_KINDS = ("h5", "png", "pdf", "svg", "csv")


def look(path: Path) -> FileLook:
    """Hash one record file and ask its reader whether it is whole."""
    from shpb.record.read import is_complete
    from shpb.store.peek import Holds, peek

    try:
        before = stamp_of(path)
        digest = hash_of(path)
        ours = _is_hdf5(path) and peek(path).holds in (Holds.SHOT, Holds.MERGE)
        whole = is_complete(path)
        stamp = before if stamp_of(path) == before else None
    except OSError as error:
        facts = stamp_of(path)
        return FileLook(path.name, facts, refused=str(error.strerror or error))
    return FileLook(path.name, stamp, digest, whole.complete, whole.reason, ours=ours)


def hash_of(path: Path) -> str:
    """SHA-256 of a file."""
    digest = hashlib.sha256()
    with path.open("rb", buffering=0) as file:
        while block := file.read(_BLOCK):
            digest.update(block)
    return digest.hexdigest()


def _is_hdf5(path: Path) -> bool:
    with path.open("rb") as file:
        return file.read(8) == b"\x89HDF\r\n\x1a\n"


def content_of(paths: tuple[Path, ...]) -> tuple[str, ...]:
    """Hashes of the files of a record in an order of their own; empty where one cannot be read."""
    try:
        return tuple(sorted(hash_of(path) for path in paths))
    except OSError:
        return ()


def read_earlier(path: Path) -> PastShot | None:
    """What a stored shot gives to the comparison; None for a file that is none."""
    from shpb.store.shot_brief import read_brief

    try:
        brief = read_brief(path)
    except (ShpbError, OSError):
        return None
    return PastShot(
        shot_id=brief.shot_id, verdict=brief.verdict, repeat=brief.repeat, end_strain=brief.end_strain
    )


def refusal_of(error: ShpbError | OSError) -> Refusal:
    """Whether the record, an input or the system is at fault."""
    from shpb.pulse.front import UnusableShotError

    if isinstance(error, UnusableShotError):
        return Refusal.UNUSABLE
    system = isinstance(error, OSError) or isinstance(error.__cause__, OSError)
    return Refusal.SYSTEM if system else Refusal.INPUT


@dataclass(slots=True)
class SetAside:
    """Keeps the result of an earlier record of the same shot beside the new one, out of the way of a merge."""

    ending: str  # of its names: "earlier-1"
    names: tuple[str, ...] = field(default=())

    def move(self, result: ShotResult, store: Path) -> None:
        """Rename what holds the same shot from another record; to be called when the new result is ready."""
        from shpb.store.peek import Holds, peek

        if not store.exists():
            return
        held = peek(store)
        mine = tuple(source.sha256 for source in result.record.sources)
        if held.holds is not Holds.SHOT or held.records == mine:
            return  # what is no shot is refused by whoever writes
        mine_too = {f"{store.stem}.{kind}" for kind in _KINDS}
        moved, number = [], int(self.ending.rpartition("-")[2])
        while store.with_name(f"{store.name}.earlier-{number}").exists():
            number += 1
        for path in sorted(store.parent.glob(f"{glob.escape(store.stem)}*")):
            if path.name in mine_too:
                aside = path.with_name(f"{path.name}.earlier-{number}")
                try:
                    os.replace(path, aside)
                except OSError as error:
                    raise StoreError(
                        f"the earlier result could not be set aside: {error.strerror or error}",
                        where=str(path),
                        mend="Check permission of the folder",
                    ) from error
                moved.append(aside.name)
        self.names = tuple(moved)


def shown_of(
    result: ShotResult,
    files: list[Path],
    *,
    sentence: str,
    line: str,
    aside: tuple[str, ...] = (),
    json: dict[str, Any] | None = None,
) -> Shown:
    """What of a stored shot is shown; ``sentence`` and ``line`` are its verdict and its name in words."""
    from shpb.trust.budget import flow_stress_uncertainty_pa
    from shpb.trust.repeats import repeat_shot

    response, rig, sheet = result.response, result.rig, result.sheet
    span = response.strain_span
    uncertainty = flow_stress_uncertainty_pa(result.budget, response, sheet.specimen.young_modulus_pa)
    past = PastShot(
        shot_id=sheet.shot_id,
        verdict=result.verdict.value,
        repeat=repeat_shot(result),
        end_strain=None if span is None else span[1],
    )
    bar, striker, speed = rig.incident_bar, rig.striker, sheet.striker_speed_m_s
    per_speed = None
    if striker is not None:
        ours, its = bar.impedance_n_s_m, striker.impedance_n_s_m
        per_speed = ours * its / (ours + its) / bar.area_m2
    equilibrium = response.equilibrium
    return Shown(
        shot_id=sheet.shot_id,
        verdict=result.verdict.value,
        sentence=sentence,
        line=line,
        findings=result.findings,
        past=past,
        rate_per_s=response.rate.mean_per_s,
        true_rate_per_s=response.rate.mean_true_per_s,
        strain_span=span,
        flow=tuple(
            (flow.at_strain, flow.plastic, flow.stress_pa, u)
            for flow, u in zip(response.flow, uncertainty, strict=True)
            if flow.stress_pa is not None
        ),
        equilibrium=f"{equilibrium.outcome.value}; mean R {100 * equilibrium.mean_ratio:.1f} %, "
        f"limit {100 * equilibrium.limit:.0f} %",
        striker_speed_m_s=None if speed is None else float(speed),
        stress_per_speed=per_speed,
        bar_yield_pa=None if bar.yield_strength_pa is None else float(bar.yield_strength_pa),
        result=files[0].name,
        files=tuple(map(str, files)),
        set_aside=aside,
        json=json or {},
    )
