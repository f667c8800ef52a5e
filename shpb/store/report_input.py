"""What a report reads of a shot file: the shot, its budget, and the hash of the file."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import NamedTuple

from shpb.errors import StoreError
from shpb.store.plain import from_plain
from shpb.store.shot_file import StoredShot, load
from shpb.trust.budget import Contribution


class ReportInput(NamedTuple):
    """A stored shot with the ranked lines of its budget, and the sha256 of its file."""

    stored: StoredShot
    budget: tuple[Contribution, ...]
    sha256: str


def read_for_report(path: Path | str) -> ReportInput:
    """Read a shot file for its report.

    Raises
    ------
    StoreError
        If it is no shot file, is damaged, or was written by a later version of the format.
    """
    source = Path(path)
    stored = load(source)
    missing = [
        group for group in ("response", "trust", "wave", "pulse/incident") if group not in stored.attributes
    ]
    if missing or "verdict" not in stored.attributes["/"]:
        raise StoreError(
            f"holds no {', '.join(missing) or 'verdict'}",
            where=str(source),
            mend="Reduce the raw record again",
        )
    _require_even(stored)
    return ReportInput(stored, _budget(source), hashlib.sha256(source.read_bytes()).hexdigest())


def _require_even(stored: StoredShot) -> None:
    """The curves of a group are as long as its time; half a curve must not pass for a whole one."""
    for group in ("response", "wave", "trust", "trust/closure", "trust/draws", "response/corrections"):
        time = stored.arrays.get(f"{group}/time", stored["response/time"])
        for path, values in stored.arrays.items():
            inside = path.startswith(f"{group}/") and (
                group == "response/corrections" or path.count("/") == group.count("/") + 1
            )
            if inside and values.ndim == 1 and values.size != time.size:
                raise StoreError(
                    f"{path} has {values.size} values for {time.size} times",
                    where=str(stored.path),
                    mend="The file may be damaged: reduce the raw record again",
                )


def _budget(path: Path) -> tuple[Contribution, ...]:
    import h5py

    try:
        with h5py.File(path, "r", locking="best-effort") as file:
            lines = json.loads(file["trust/budget"][()]) if "trust/budget" in file else []
        return tuple(from_plain(Contribution, line) for line in lines)
    except (OSError, KeyError, ValueError, TypeError, RuntimeError) as error:
        raise StoreError(
            f"its budget cannot be read ({error})", where=str(path), mend="Reduce the raw record again"
        ) from error
