"""What a file in the watched folder can be, by its name and its first characters."""

from __future__ import annotations

import re
from enum import StrEnum
from pathlib import Path

HEAD_BYTES = 8192

# Half-written downloads and copies, locks of editors and office programs, backups.
_TEMPORARY = re.compile(
    r"^[.~]|~$|\.(part|partial|tmp|temp|crdownload|download|filepart|swp|swx|lock|lck|bak|old|earlier-\d+)$", re.I
)  # fmt: skip
# What no scope writes its voltages into.
_NO_RECORD = re.compile(
    r"\.(png|jpe?g|bmp|gif|tiff?|svg|pdf|html?|xml|json|md|rst|log|ini|cfg|set|zip|gz|7z|exe|dll|py|m|ipynb|docx?|odt"
    r"|xlsx?|ods|pptx?|lnk|url|mp4|avi|mov|db)$",
    re.I,
)
_LISTS = frozenset((".csv", ".tsv"))
# The channel stands apart, or behind a digit: "bench2" and "march4" are no channels, nor is the steel in "plate_C45".
_CHANNEL = re.compile(
    r"^(?P<stem>.*?[^\s_.-])"
    r"(?:(?:[\s_.-]+|(?<=\d))(?:channel|chan|ch)[\s_-]?(?P<number>\d{1,2})|[\s_.-]+c(?P<short>\d))$",
    re.I,
)
_RECORD_OF_OURS = re.compile(rb"^(?:\xef\xbb\xbf)?time_us,counts,true_strain,")


class Role(StrEnum):
    """What a file is taken for."""

    RECORD = "record"
    SHEET = "sheet"
    LIST = "list"
    NOTHING = "nothing"


def role_of(path: Path, size: int) -> Role:
    """What a file is taken for; its head is read only where the name leaves it open.

    Raises
    ------
    OSError
        If its head cannot be read.
    """
    name, suffix = path.name, path.suffix.lower()
    if size == 0 or _TEMPORARY.search(name) or _NO_RECORD.search(name):
        return Role.NOTHING
    if suffix == ".toml":
        return Role.SHEET
    if suffix in _LISTS:
        with path.open("rb") as file:
            head = file.read(HEAD_BYTES)
        if _RECORD_OF_OURS.match(head):
            return Role.NOTHING  # curves that this program wrote
        if is_list(head):
            return Role.LIST
    return Role.RECORD


def is_list(head: bytes) -> bool:
    """Whether a CSV file is a shot list: the row of column names has those that every list needs."""
    encoding = "utf-16" if head.startswith((b"\xff\xfe", b"\xfe\xff")) else "utf-8-sig"
    for line in head.decode(encoding, "replace").splitlines():
        cells = {cell.strip(' "') for cell in re.split(r"[,;\t]", line)}
        if line.strip() and not line.startswith("#"):
            return "shot_id" in cells and "record" in cells
    return False


def stem_of(name: str) -> tuple[str, int | None]:
    """The shot that a record's name speaks of, and the channel where there is one file for each.

    Examples
    --------
    >>> stem_of("S-014_CH2.csv"), stem_of("S-014.csv"), stem_of("CH1.csv")
    (('S-014', 2), ('S-014', None), ('CH1', None))
    """
    stem = Path(name).stem
    found = _CHANNEL.match(stem)
    return (found["stem"], int(found["number"] or found["short"])) if found else (stem, None)
