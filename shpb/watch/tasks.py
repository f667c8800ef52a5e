"""What the watcher asks of its child process, and what comes back: small, and fit to pass between processes."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import StrEnum
from pathlib import Path
from typing import Any

from shpb.rig.rig import Rig
from shpb.rig.sheet import ShotSheet
from shpb.trust.finding import Finding
from shpb.trust.repeats import RepeatShot
from shpb.watch.landing import Stamp

# --- asked ---------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Look:
    """Hash record files and say whether each is whole."""

    paths: tuple[Path, ...]


@dataclass(frozen=True, slots=True)
class ReduceShot:
    """Reduce a shot and store it; keep it for its figure."""

    sheet: ShotSheet
    rig: Rig
    named_in: Path
    content: tuple[str, ...]  # hashes that the record must still have
    earlier_name: str  # what an earlier result from another record is called from now on


@dataclass(frozen=True, slots=True)
class DrawShot:
    """Draw the figure of a stored shot."""

    result: str  # name of the shot file


@dataclass(frozen=True, slots=True)
class ReadEarlier:
    """Read what a stored shot gives to the comparison."""

    path: Path


# --- came back -----------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class FileLook:
    """One record file as the child saw it."""

    name: str
    stamp: Stamp | None  # None where it changed meanwhile
    sha256: str = ""
    complete: bool = False
    reason: str = ""
    refused: str = ""  # by the system: what it said
    ours: bool = False  # a result of this program


class Refusal(StrEnum):
    """Why there is no result."""

    UNUSABLE = "unusable"  # the record itself
    INPUT = "input"  # something in sheet, rig file or record must be mended
    CHANGED = "changed"  # the record is not what it was: look again
    SYSTEM = "system"  # disk, share or permission: try again later


@dataclass(frozen=True, slots=True)
class Refused:
    """A shot or a figure that could not be made."""

    why: Refusal
    text: str
    json: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class PastShot:
    """A stored shot as later ones see it."""

    shot_id: str
    verdict: str
    repeat: RepeatShot | None
    end_strain: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Shown:
    """A reduced and stored shot, as far as it is shown."""

    shot_id: str
    verdict: str
    sentence: str
    line: str
    findings: tuple[Finding, ...]
    past: PastShot
    rate_per_s: float
    true_rate_per_s: float
    strain_span: tuple[float, float] | None
    flow: tuple[tuple[float, bool, float, float | None], ...]  # strain, plastic, stress [Pa], u [Pa]
    equilibrium: str
    striker_speed_m_s: float | None
    stress_per_speed: float | None  # in the incident bar by the striker's speed [Pa s/m]
    bar_yield_pa: float | None
    result: str  # name of the shot file
    files: tuple[str, ...]
    set_aside: tuple[str, ...] = ()
    json: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Drawn:
    """Figures that were drawn."""

    files: tuple[str, ...]
