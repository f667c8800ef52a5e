"""A merge read back from its file, and which of the files that went in have changed since."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import StoreError
from shpb.merge.from_shot import LeftOut
from shpb.merge.settings import MergeSettings
from shpb.store import merge_layout as layout
from shpb.store.gate import opened
from shpb.store.plain import from_plain

if TYPE_CHECKING:
    import h5py


@dataclass(frozen=True, slots=True, kw_only=True)
class UsedFile:
    """A file that went into a merge: name, hash of its bytes, and where it lay below the merged folder."""

    name: str
    sha256: str
    place: str


@dataclass(frozen=True, slots=True, kw_only=True)
class ChangedFile:
    """A file that is not what it was when it was merged."""

    place: str
    gone: bool

    def in_words(self) -> str:
        """One sentence for terminals."""
        return f"{self.place} {'is gone' if self.gone else 'has changed'} since the last merge"


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class StoredMerge:
    """A merge as read back from its file.

    ``arrays`` maps a path such as ``"materials/1/table/stress"`` to its numbers, ``texts`` to its words, ``units`` to
    its unit; ``attributes`` maps the path of a group to its attributes ("/" for the file).
    """

    path: Path
    settings: MergeSettings
    used: tuple[UsedFile, ...]
    left_out: tuple[LeftOut, ...]
    arrays: Mapping[str, FloatArray]
    texts: Mapping[str, tuple[str, ...]]
    units: Mapping[str, str]
    attributes: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)

    @property
    def materials(self) -> tuple[str, ...]:
        """Names of the materials, in the order of their groups from 1."""
        numbers = sorted(
            (name for name in self.attributes if name.startswith("materials/") and name.count("/") == 1),
            key=lambda name: int(name.split("/")[1]),
        )
        return tuple(str(self.attributes[name]["material"]) for name in numbers)

    def __getitem__(self, path: str) -> FloatArray:
        """Numbers at a path; the message of the error lists what there is."""
        try:
            return self.arrays[path]
        except KeyError:
            start = path.rsplit("/", 1)[0]
            near = sorted(name for name in self.arrays if name.startswith(start)) or sorted(self.arrays)
            raise StoreError(
                f"there is no {path!r}", where=str(self.path), mend=f"There are {', '.join(near[:30])}"
            ) from None


def load_merge(path: Path | str) -> StoredMerge:
    """Read a merge back from its HDF5 file.

    Raises
    ------
    StoreError
        If it is no merge, is damaged, or was written by a later version of the format.
    """
    source = Path(path)
    with opened(
        source,
        name=layout.FORMAT,
        version=layout.FORMAT_VERSION,
        what="a merge",
        read_as="a merge",
        verb="merge",
        again="merge again",
    ) as file:
        return _read(file, source)


def changed_since(path: Path | str, folder: Path | str) -> list[ChangedFile]:
    """Which files that went into the merge at ``path`` have another hash now, or are gone.

    Parameters
    ----------
    path : Path
        The file of the merge.
    folder : Path
        The folder that was merged, to which the places of the files refer.

    Raises
    ------
    StoreError
        If ``path`` is no merge, or damaged.
    """
    found: list[ChangedFile] = []
    for used in dict.fromkeys(load_merge(path).used):
        if not used.place:  # it was not known where it lay
            continue
        here = Path(folder) / used.place
        try:
            sha256 = hashlib.sha256(here.read_bytes()).hexdigest()
        except OSError:
            found.append(ChangedFile(place=used.place, gone=True))
            continue
        if sha256 != used.sha256:
            found.append(ChangedFile(place=used.place, gone=False))
    return found


def _read(file: h5py.File, path: Path) -> StoredMerge:
    import h5py

    arrays: dict[str, FloatArray] = {}
    texts: dict[str, tuple[str, ...]] = {}
    units: dict[str, str] = {}
    attributes: dict[str, dict[str, Any]] = {"/": _plain_attributes(file)}

    def visit(name: str, item: object) -> None:
        if isinstance(item, h5py.Group):
            attributes[name] = _plain_attributes(item)
            return
        if not isinstance(item, h5py.Dataset) or name == "settings":
            return
        units[name] = str(item.attrs.get("units", ""))
        if h5py.check_string_dtype(item.dtype):
            texts[name] = tuple(_text(value) for value in item[()])
        else:
            arrays[name] = np.asarray(item[()])

    file.visititems(visit)
    settings = from_plain(MergeSettings, json.loads(_text(file["settings"][()])))
    used = zip(texts["files/name"], texts["files/sha256"], texts["files/place"], strict=True)
    left_out = zip(texts["left_out/name"], texts["left_out/why"], strict=True)
    return StoredMerge(
        path=path,
        settings=settings,
        used=tuple(UsedFile(name=name, sha256=sha256, place=place) for name, sha256, place in used),
        left_out=tuple(LeftOut(origin=origin, why=why) for origin, why in left_out),
        arrays=arrays,
        texts=texts,
        units=units,
        attributes=attributes,
    )


def _text(value: object) -> str:
    return value.decode("utf-8", "surrogateescape") if isinstance(value, bytes) else str(value)


def _plain_attributes(item: h5py.Group) -> dict[str, Any]:
    return {name: _plain(item.attrs[name]) for name in item.attrs}


def _plain(value: Any) -> Any:
    if isinstance(value, np.ndarray):
        return [_plain(one) for one in value]
    if isinstance(value, np.generic):
        return value.item()
    return _text(value) if isinstance(value, bytes) else value
