"""From what the user names to stored shots and merges: for verbs that only read results."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from shpb.errors import InputError

_ENDINGS = (".h5", ".hdf5")
_PLACES = ("", "results", "merged")  # of a campaign's folder


@dataclass(frozen=True, slots=True)
class Results:
    """Files that were named or found, each once; damaged ones are among the shots and are named when read."""

    shots: tuple[Path, ...]
    merges: tuple[Path, ...]


def find_results(sources: Sequence[Path]) -> Results:
    """Stored shots and merges among files and folders.

    A folder is searched in itself, in results/ and in merged/; files in it that are no results are passed over.

    Raises
    ------
    InputError
        If something that was named is not there or is no result, or a folder holds none.
    """
    from shpb.store.peek import Holds, peek

    shots: dict[Path, Path] = {}
    merges: dict[Path, Path] = {}
    for source in sources:
        if not source.exists():
            raise InputError("there is no such file or folder", where=str(source), mend="Check the name")
        inside = _in_folder(source) if source.is_dir() else [source]
        kept = 0
        for path in inside:
            held = peek(path).holds
            if held is Holds.OTHER and source.is_dir():
                continue
            if held is Holds.OTHER or (held is Holds.DAMAGED and path.suffix.lower() not in _ENDINGS):
                raise InputError(
                    "is not a result of this program",
                    where=str(path),
                    mend="Name a shot file (.h5) that `shpb reduce` wrote, a merged.h5, or their folder",
                )
            kept += 1
            (merges if held is Holds.MERGE else shots).setdefault(path.resolve(), path)
        if source.is_dir() and not kept:
            raise InputError(
                "there is no shot file and no merged.h5 in it, in results/ or in merged/",
                where=str(source),
                mend="Reduce the shots first (`shpb reduce`), or name their folder",
            )
    return Results(tuple(shots.values()), tuple(merges.values()))


def _in_folder(folder: Path) -> list[Path]:
    found: list[Path] = []
    for place in _PLACES:
        try:
            entries = sorted((folder / place).iterdir())
        except (FileNotFoundError, NotADirectoryError):
            continue
        except OSError as error:
            raise InputError(
                f"the folder cannot be read: {error.strerror or error}",
                where=str(folder / place),
                mend="Check the permissions",
            ) from None
        found += [
            path
            for path in entries
            if path.suffix.lower() in _ENDINGS and not path.name.startswith(".") and path.is_file()
        ]
    return found
