"""What the watcher has to tell; how it is told is for others to say."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import StrEnum
from pathlib import Path
from typing import Any

from shpb.watch.compare import Comparison, SpeedStep
from shpb.watch.tasks import Shown


class Tone(StrEnum):
    """How urgent a remark is."""

    NOTE = "note"
    WAIT = "waits"  # something must come or be mended
    TROUBLE = "trouble"  # the system refuses; it is tried again
    MENDED = "mended"


@dataclass(frozen=True, slots=True)
class Remark:
    """Something to be said once."""

    tone: Tone
    text: str
    about: str = ""  # the record or paper


@dataclass(frozen=True, slots=True, kw_only=True)
class ShotShown:
    """A shot is reduced and stored."""

    shown: Shown
    names: tuple[str, ...]
    revision: int
    why_again: str  # "the sheet has changed"; empty for a first time
    comparison: Comparison | None
    steps: tuple[str, ...]
    speed: SpeedStep | None


@dataclass(frozen=True, slots=True, kw_only=True)
class ShotRefused:
    """A shot that could not be reduced."""

    names: tuple[str, ...]
    shot_id: str
    text: str
    unusable: bool  # the record itself is at fault: the shot is rejected
    bad_input: bool
    json: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class FiguresDrawn:
    """The figure of a shot is there."""

    shot_id: str
    files: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class SheetWanted:
    """A whole record that no sheet and no list speaks of."""

    records: tuple[Path, ...]
    stem: str


Event = Remark | ShotShown | ShotRefused | FiguresDrawn | SheetWanted
