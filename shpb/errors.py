"""One error family: every message says what is wrong, where, and the mend.

The command line prints these on stderr without a traceback. A doubtful *result*
(no equilibrium, a clipped pulse) is not an error: it is a finding of :mod:`shpb.trust`.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

# Names and keys come from files: a damaged one may have thousands of characters, which would bury the message.
_LONGEST, _LONGEST_NAME = 1500, 400


def _clipped(text: str, longest: int) -> str:
    """``text`` as it is, or its beginning and its end where it is far too long."""
    if len(text) <= longest:
        return text
    return f"{text[: longest // 2]} ... ({len(text)} characters) ... {text[-longest // 4 :]}"


class ShpbError(Exception):
    """Base of all errors that the package raises on purpose.

    Parameters
    ----------
    what : str
        What is wrong, with the value that was found.
    where : str
        File, line, key, channel or sample.
    mend : str
        What the user can do about it.

    Examples
    --------
    >>> str(ShpbError("the bar is 20 m wide", where="rig.toml", mend="Write diameter_mm = 20"))
    'rig.toml: the bar is 20 m wide. Write diameter_mm = 20'
    """

    def __init__(self, what: str, *, where: str = "", mend: str = "") -> None:
        self.what = what
        self.where = where
        self.mend = mend
        super().__init__(what, where, mend)

    def __str__(self) -> str:
        what, where = _clipped(self.what, _LONGEST), _clipped(self.where, _LONGEST)
        text = f"{where}: {what}" if where else what
        return f"{text.rstrip('.')}. {self.mend}" if self.mend else text

    def __reduce__(self) -> tuple[object, ...]:
        # Keyword-only arguments do not survive the default pickling, which worker processes need.
        return _rebuild, (type(self), self.what, self.where, self.mend)


def _rebuild(kind: type[ShpbError], what: str, where: str, mend: str) -> ShpbError:
    return kind(what, where=where, mend=mend)


class InputError(ShpbError):
    """A file, a key, a record or an argument cannot be used as it stands.

    Examples
    --------
    >>> import shpb
    >>> try:
    ...     shpb.read_rig("no-such-rig.toml")
    ... except shpb.InputError as error:
    ...     print(error.where)
    no-such-rig.toml
    """


class IncompleteRecordError(InputError):
    """The record is still being written, or was cut short."""


class StoreError(ShpbError):
    """A result could not be written or read back."""


@dataclass(frozen=True, slots=True)
class Mistake:
    """One mistake in a file that people write: a rig file, a shot sheet, a shot list."""

    file: str
    key: str  # dotted key path, or "line 7, column diameter_mm"
    found: str
    expected: str  # with unit and range
    mend: str = ""

    def __str__(self) -> str:
        file, key, found = (_clipped(part, _LONGEST_NAME) for part in (self.file, self.key, self.found))
        text = f"{file}: {key}: found {found}, expected {self.expected}"
        return f"{text}. {self.mend}" if self.mend else text


class FileMistakes(InputError):  # noqa: N818 - it names what it holds
    """All mistakes found in one reading of a file, together."""

    def __init__(self, mistakes: Iterable[Mistake]) -> None:
        self.mistakes = tuple(mistakes)
        files = ", ".join(dict.fromkeys(m.file for m in self.mistakes))
        count = len(self.mistakes)
        super().__init__(f"{count} mistake{'s' if count != 1 else ''}", where=files)

    def __str__(self) -> str:
        return "\n".join([f"{self.where}: {self.what}", *(f"  - {m}" for m in self.mistakes)])

    def __reduce__(self) -> tuple[object, ...]:
        return FileMistakes, (self.mistakes,)
