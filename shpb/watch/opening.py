"""What is known of the files of a shot that is not dealt with yet, and why it waits."""

from __future__ import annotations

from dataclasses import dataclass, field

from shpb.watch.journal import Seen
from shpb.watch.landing import BackOff, Stamp
from shpb.watch.tasks import FileLook


@dataclass(slots=True)
class OpenGroup:
    """A group on its way.

    Attributes
    ----------
    stamps : tuple of Stamp
        Of its files when they were last looked at.
    looks : tuple of FileLook
        Hashes, once all files are whole.
    blocked : object
        On what it waits; not tried again until that changes. None where nothing keeps it.
    why, told : str, bool
        Why it waits, in words, and whether that has been said.
    rejected : bool
        Whether the record itself is at fault.
    crashes : int
        How often the child was lost over it.
    """

    stamps: tuple[Stamp, ...] = ()
    looks: tuple[FileLook, ...] = ()
    blocked: object = None
    why: str = ""
    told: bool = False
    rejected: bool = False
    crashes: int = 0
    back_off: BackOff = field(default_factory=BackOff)

    @property
    def content(self) -> tuple[str, ...]:
        """Hashes of its files, in an order of their own."""
        return tuple(sorted(look.sha256 for look in self.looks))

    @property
    def seen(self) -> tuple[Seen, ...]:
        """Its files as the journal keeps them."""
        return tuple(
            Seen(name=look.name, size=stamp.size, mtime_ns=stamp.mtime_ns, sha256=look.sha256)
            for look, stamp in zip(self.looks, self.stamps, strict=True)
        )


def shown_names(names: tuple[str, ...]) -> str:
    """Names of files in one text."""
    return ", ".join(names)
