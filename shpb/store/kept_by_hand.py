"""What people moved in a shot survives its being reduced anew: the stored file gives it back."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from shpb.errors import ShpbError
from shpb.pulse.by_hand import SETTINGS, ByHand, setting_of
from shpb.record.record import Record
from shpb.rig.sheet import ShotSheet
from shpb.settings import Settings
from shpb.store import layout
from shpb.store.plain import from_plain
from shpb.store.shot_file import by_hand_in


def with_kept(
    path: Path, record: Record, sheet: ShotSheet, settings: Settings
) -> tuple[Settings, tuple[ByHand, ...]]:
    """The settings with the windows and feet that were moved by hand when this shot was reduced before, and by whom.

    A window or foot that the shot sheet states otherwise than it did then is the later word: the sheet rules.

    Parameters
    ----------
    path : Path
        Where the shot was stored, if it was.
    record, sheet, settings : Record, ShotSheet, Settings
        As they are now.

    Returns
    -------
    Settings, tuple of ByHand
        Unchanged and empty where nothing, or another shot, stands there.
    """
    import h5py

    if not path.is_file():
        return settings, ()
    try:
        with h5py.File(path, "r", locking="best-effort") as file:
            if not _same_shot(file, record, sheet):
                return settings, ()
            history = by_hand_in(file)
            if not history:
                return settings, ()
            used = from_plain(Settings, _json(file, "settings"))
            stated = dict(_json(file, "sheet")["overrides"])
    except (OSError, KeyError, ValueError, TypeError, RuntimeError, ShpbError):
        return settings, ()  # whoever stores the shot says what is wrong with that file
    moved = {name for kept in history for move in kept.moves if (name := setting_of(move.pulse, move.part))}
    return settings.replaced(**_still_meant(moved, used, stated, sheet.overrides)), history


def _still_meant(
    moved: set[str], used: Settings, stated: Mapping[str, object], states: Mapping[str, object]
) -> dict[str, object]:
    """Of the windows and feet that hands have moved, those that no sheet has changed since."""
    return {name: getattr(used, name) for name in SETTINGS
            if name in moved and _plain(stated.get(name)) == _plain(states.get(name))}  # fmt: skip


def _plain(value: object) -> object:
    return list(value) if isinstance(value, tuple) else value


def _same_shot(file: Any, record: Record, sheet: ShotSheet) -> bool:
    if file.attrs.get("format") != layout.FORMAT or file.attrs.get("shot_id") != sheet.shot_id:
        return False
    return list(file["record"].attrs["sha256"]) == [source.sha256 for source in record.sources]


def _json(file: Any, name: str) -> Any:
    text = file[f"rig/{name}_as_used"][()]
    return json.loads(text)
