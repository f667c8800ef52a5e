"""Write the demo campaign into a folder, whole or not at all, and never over anyone's own files."""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from importlib import resources
from pathlib import Path, PurePosixPath

from shpb.demo.materials import WRENMOOR
from shpb.demo.merge_files import MERGE_BENCHES, merge_files, merge_truth
from shpb.demo.paper import quasistatic_files, shot_list, shot_sheet
from shpb.demo.record_files import record_files
from shpb.demo.scenario import BENCHES, DemoShot, bench_text, demo_shots
from shpb.demo.scope import scope_record
from shpb.demo.truth import DemoTruth, campaign_truth
from shpb.errors import InputError

MARKER = "demo_campaign.json"
_FORMAT = "shpb-demo-campaign"
LIST_NAME = "shot_list.csv"

Progress = Callable[[str], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class WrittenShot:
    """One shot of the campaign and where its files are."""

    shot: DemoShot
    record_files: tuple[Path, ...]
    rig_file: Path
    sheet: Path | None  # None where the shot stands in the shot list


@dataclass(frozen=True, slots=True, kw_only=True)
class DemoCampaign:
    """The demo campaign as it lies in a folder."""

    folder: Path
    shots: tuple[WrittenShot, ...]
    shot_list: Path
    rig_files: tuple[Path, ...]
    quasistatic_files: tuple[Path, ...]


def write_demo(
    folder: str | Path, *, to_merge: bool = False, progress: Progress | None = None
) -> DemoCampaign:
    """Write a demo campaign: rig files, records, shot sheets, shot list, quasi-static curves.

    The files are made beside ``folder`` and moved in at the end, so that a crash leaves nothing half
    done. A folder that holds a demo campaign already is brought back to its first state; other
    files in it, results among them, are left alone.

    Parameters
    ----------
    folder : str or Path
        Made if it is not there.
    to_merge : bool
        The larger campaign of the same two alloys over rates and temperatures, in place of the one with a shot of
        every kind.
    progress : callable or None
        Told in a few words what is being done.

    Returns
    -------
    DemoCampaign

    Raises
    ------
    InputError
        If the folder holds files but no demo campaign, or the other one, or a file of it was changed since,
        or it cannot be written to. Nothing is changed then.

    Examples
    --------
    >>> campaign = write_demo("demo")  # doctest: +SKIP
    >>> campaign.shots[0].sheet  # doctest: +SKIP
    PosixPath('demo/records/W-01.toml')
    """
    folder = Path(folder)
    say = progress if progress is not None else _silent
    earlier = _earlier_files(folder, to_merge=to_merge)
    say("firing the shots")
    truths = merge_truth() if to_merge else campaign_truth()
    say("writing the records")
    if to_merge:
        files, shots = _to_merge_files(truths, folder)
    else:
        files, shots = _campaign_files(truths, folder)
    _refuse_changed(folder, files, earlier)
    say("moving the files into place")
    try:
        _put(folder, files)
    except OSError as error:
        raise InputError(
            f"the demo cannot be written: {error.strerror or error}",
            where=str(folder),
            mend="Choose a folder that you may write to, with some 5 MB of room",
        ) from error
    return DemoCampaign(
        folder=folder,
        shots=shots,
        shot_list=folder / LIST_NAME,
        rig_files=tuple(folder / _rig_name(bench) for bench in (MERGE_BENCHES if to_merge else BENCHES)),
        quasistatic_files=tuple(folder / name for name in files if name.startswith("quasistatic/")),
    )


def _silent(message: str) -> None:
    """Tell nobody."""


def _rig_name(bench: str) -> str:
    return f"calibration/{bench}.toml"


def _campaign_files(
    truths: dict[str, DemoTruth], folder: Path
) -> tuple[dict[str, bytes], tuple[WrittenShot, ...]]:
    """Every file of the campaign by its path within the folder, the marker last."""
    files = {_rig_name(bench): bench_text(bench).encode() for bench in BENCHES}
    shots: list[WrittenShot] = []
    listed: list[tuple[DemoTruth, str]] = []
    for truth in truths.values():
        shot, sheet = truth.shot, None
        own = record_files(shot, scope_record(truth))
        files.update({f"records/{name}": content for name, content in own.items()})
        if shot.alloy is WRENMOOR:
            sheet = f"records/{shot.shot_id}.toml"
            files[sheet] = shot_sheet(truth, tuple(own)).encode()
        else:
            (name,) = own
            listed.append((truth, f"records/{name}"))
        shots.append(
            WrittenShot(
                shot=shot,
                record_files=tuple(folder / "records" / name for name in own),
                rig_file=folder / _rig_name(shot.bench),
                sheet=None if sheet is None else folder / sheet,
            )
        )
    files[LIST_NAME] = shot_list(listed).encode()
    files.update({f"quasistatic/{name}": content for name, content in quasistatic_files().items()})
    files["README.txt"] = _readme().encode()
    files[MARKER] = _marker(files)
    return files, tuple(shots)


def _to_merge_files(
    truths: dict[str, DemoTruth], folder: Path
) -> tuple[dict[str, bytes], tuple[WrittenShot, ...]]:
    """The same for the campaign to merge: every shot stands in the list."""
    files = {_rig_name(bench): bench_text(bench).encode() for bench in MERGE_BENCHES}
    files.update(merge_files(truths, LIST_NAME))
    shots = tuple(
        WrittenShot(
            shot=truth.shot,
            record_files=(folder / "records" / f"{truth.shot.shot_id}.npz",),
            rig_file=folder / _rig_name(truth.shot.bench),
            sheet=None,
        )
        for truth in truths.values()
    )
    files[MARKER] = _marker(files, to_merge=True)
    return files, shots


def _readme() -> str:
    text = resources.files("shpb.demo").joinpath("texts", "README.txt").read_text(encoding="utf-8")
    lines = (f"  {shot.shot_id}  {shot.special}\n        expected: {shot.expected}" for shot in demo_shots())
    return text.replace("{shots}", "\n".join(lines))


def _marker(files: dict[str, bytes], *, to_merge: bool = False) -> bytes:
    """What tells a demo folder from others, and a changed file from one as it was written."""
    digests = {name: hashlib.sha256(content).hexdigest() for name, content in sorted(files.items())}
    head = {"format": _FORMAT, "version": 1, **({"to_merge": True} if to_merge else {})}
    return (json.dumps({**head, "files": digests}, indent=1) + "\n").encode()


def _earlier_files(folder: Path, *, to_merge: bool) -> dict[str, str]:
    """Digests of an earlier demo's files; empty for a new or an empty folder."""
    if folder.exists() and not folder.is_dir():
        raise InputError("this is a file", where=str(folder), mend="Give the name of a folder")
    if not folder.exists() or not any(folder.iterdir()):
        return {}
    try:
        marker = json.loads((folder / MARKER).read_text(encoding="utf-8"))
        files = {str(name): str(digest) for name, digest in marker["files"].items()}
        known, other = marker["format"] == _FORMAT, bool(marker.get("to_merge")) != to_merge
    except (OSError, ValueError, KeyError, TypeError, AttributeError):
        known = False
    if known and other:
        raise InputError(
            "the folder holds the other demo campaign",
            where=str(folder),
            mend="Give a new or an empty folder; nothing was written",
        )
    if known:
        return files
    raise InputError(
        "the folder holds files and is no demo campaign",
        where=str(folder),
        mend="Give a new or an empty folder; nothing was written",
    )


def _refuse_changed(folder: Path, files: dict[str, bytes], earlier: dict[str, str]) -> None:
    """Refuse to write over anything that this program did not write itself."""
    for name, content in files.items():
        path = folder / name
        if name == MARKER or not path.exists():
            continue
        present = path.read_bytes() if path.is_file() else None
        if present is None or (
            present != content and hashlib.sha256(present).hexdigest() != earlier.get(name)
        ):
            raise InputError(
                "this file was changed since the demo was written",
                where=str(path),
                mend="Move it elsewhere, or give another folder; nothing was written",
            )


def _put(folder: Path, files: dict[str, bytes]) -> None:
    folder.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(prefix=f".{folder.name}-", dir=folder.parent) as made:
        inside = Path(made) / "demo"
        for name, content in files.items():
            path = inside / PurePosixPath(name)
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(content)
        if not folder.exists():
            shutil.move(inside, folder)
            return
        for name in files:  # the marker comes last
            (folder / name).parent.mkdir(parents=True, exist_ok=True)
            os.replace(inside / name, folder / name)
