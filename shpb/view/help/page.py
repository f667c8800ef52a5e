"""A page of help: headings, paragraphs and items as plain text of 80 columns."""

from __future__ import annotations

from shpb.view.text import columns_of, wrapped

WIDTH = 79  # one column is left free: some terminals break a line that fills the last one
_IN = "    "


class HelpPage:
    """Lines of a page in the making."""

    def __init__(self, name: str, title: str) -> None:
        self._lines = [f"SHPB {name.upper()}", "", *wrapped(title, WIDTH, _IN)]

    def heading(self, words: str) -> None:
        """A heading at the margin."""
        self._lines += ["", *wrapped(words, WIDTH)]

    def paragraph(self, words: str) -> None:
        """A paragraph; parted by a blank line from a paragraph or an item before."""
        if self._lines[-1].startswith(" "):
            self._lines.append("")
        self._lines += wrapped(words, WIDTH, _IN)

    def lines(self, text: str) -> None:
        """Lines that stay as they are: an example of a file or of a command."""
        if self._lines[-1]:
            self._lines.append("")
        self._lines += [f"{_IN}{_IN}{line}" if line else "" for line in text.strip("\n").splitlines()]

    def item(self, term: str, *words: str) -> None:
        """A term, and below it what is said about it, one paragraph each."""
        self._lines += wrapped(term, WIDTH, _IN, _IN * 2)
        for one in words:
            if one:
                self._lines += wrapped(one, WIDTH, _IN * 2)

    def pair(self, term: str, words: str, column: int = 24) -> None:
        """A short term with its words beside it."""
        first = _IN + term + " " * max(1, column - len(_IN) - columns_of(term))
        self._lines += wrapped(words, WIDTH, first, " " * column)

    @property
    def text(self) -> str:
        """The page, without a line end after the last line."""
        return "\n".join(line.rstrip() for line in self._lines)
