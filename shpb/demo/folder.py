"""A demo's files into a folder: whole or not at all, and never over anyone's own files."""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import tempfile
from enum import Enum
from pathlib import Path, PurePosixPath

from shpb.errors import InputError

MARKER = "demo_campaign.json"
_FORMAT = "shpb-demo-campaign"


class Kind(Enum):
    """Which demo a folder holds: the value is what its marker says of it."""

    EVERY_KIND = ""  # a shot of every kind
    TO_MERGE = "to_merge"
    CALIBRATION = "calibration"


def marker(files: dict[str, bytes], kind: Kind) -> bytes:
    """What tells a demo folder from others, and a changed file from one as it was written."""
    digests = {name: hashlib.sha256(content).hexdigest() for name, content in sorted(files.items())}
    head = {"format": _FORMAT, "version": 1, **({kind.value: True} if kind.value else {})}
    return (json.dumps({**head, "files": digests}, indent=1) + "\n").encode()


def earlier_files(folder: Path, kind: Kind) -> dict[str, str]:
    """Digests of an earlier demo's files; empty for a new or an empty folder.

    Raises
    ------
    InputError
        If the folder holds anything but a demo of this kind.
    """
    if folder.exists() and not folder.is_dir():
        raise InputError("this is a file", where=str(folder), mend="Give the name of a folder")
    if not folder.exists() or not any(folder.iterdir()):
        return {}
    try:
        said = json.loads((folder / MARKER).read_text(encoding="utf-8"))
        files = {str(name): str(digest) for name, digest in said["files"].items()}
        known = said["format"] == _FORMAT
        other = {one.value for one in Kind if one.value and said.get(one.value)} != (
            {kind.value} if kind.value else set()
        )
    except (OSError, ValueError, KeyError, TypeError, AttributeError):
        known = False
    if known and other:
        raise InputError(
            "the folder holds another demo campaign",
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


def refuse_changed(folder: Path, files: dict[str, bytes], earlier: dict[str, str]) -> None:
    """Refuse to write over anything that this program did not write itself.

    Raises
    ------
    InputError
        Naming the file.
    """
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


def put(folder: Path, files: dict[str, bytes]) -> None:
    """Make the files beside the folder and move them in, the last one last.

    Raises
    ------
    InputError
        If they cannot be written.
    """
    try:
        _put(folder, files)
    except OSError as error:
        raise InputError(
            f"the demo cannot be written: {error.strerror or error}",
            where=str(folder),
            mend="Choose a folder that you may write to, with some 5 MB of room",
        ) from error


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
