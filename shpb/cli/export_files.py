"""From what the user names to stored shots and merges: for verbs that only read results."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from shpb.cli.usage import RESULTS, result_files
from shpb.errors import InputError

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
        folders = [source / place for place in _PLACES] if source.is_dir() else []
        inside = [path for folder in folders for path in result_files(folder)] if folders else [source]
        kept = 0
        for path in inside:
            held = peek(path).holds
            if held is Holds.OTHER and source.is_dir():
                continue
            if held is Holds.OTHER or (held is Holds.DAMAGED and path.suffix.lower() not in RESULTS):
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
