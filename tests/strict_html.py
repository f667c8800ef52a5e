"""A strict look at HTML for tests: everything opened is closed in order, and what stands where can be asked for."""

from __future__ import annotations

import re
from html.parser import HTMLParser
from itertools import pairwise

VOID = {"meta", "input", "br"}


class Strict(HTMLParser):
    """Parse a page and raise on whatever a lenient browser would mend in silence."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.open: list[str] = []
        self.elements: list[tuple[str, dict[str, str]]] = []
        self.tables: dict[str, list[list[str]]] = {}
        self.words: list[str] = []
        self._caption = ""
        self._cell: list[str] | None = None
        self._row: list[str] = []
        self._rows: list[list[str]] = []
        self.feed(text)
        self.close()
        assert self.open == [], f"left open: {self.open}"
        assert self.rawdata == ""

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        names = [name for name, _ in attrs]
        assert len(set(names)) == len(names), f"an attribute twice: {tag} {names}"
        self.elements.append((tag, {name: value or "" for name, value in attrs}))
        if tag not in VOID:
            self.open.append(tag)
        if tag == "table":
            self._rows, self._caption = [], ""
        elif tag == "tr":
            self._row = []
        elif tag in ("td", "th", "caption"):
            self._cell = []

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        assert "svg" in self.open, f"<{tag}/> outside of a figure"
        self.elements.append((tag, {name: value or "" for name, value in attrs}))

    def handle_endtag(self, tag: str) -> None:
        assert self.open, f"</{tag}> closes nothing"
        assert self.open[-1] == tag, f"</{tag}> closes <{self.open[-1]}>"
        self.open.pop()
        if tag == "caption":
            self._caption = "".join(self._cell or [])
        elif tag in ("td", "th"):
            self._row.append("".join(self._cell or []))
        elif tag == "tr":
            self._rows.append(self._row)
        elif tag == "table":
            self.tables[self._caption] = self._rows

    def handle_data(self, data: str) -> None:
        if not self.open or self.open[-1] != "style":
            self.words.append(data)
        if self._cell is not None:
            self._cell.append(data)

    def handle_comment(self, data: str) -> None:
        raise AssertionError(f"a comment: {data[:80]}")

    def handle_pi(self, data: str) -> None:
        raise AssertionError(f"a processing instruction: {data[:80]}")

    @property
    def text(self) -> str:
        """All words of the page, spaces made one."""
        return " ".join("".join(self.words).split())

    def of(self, tag: str) -> list[dict[str, str]]:
        """Attributes of every element of a kind."""
        return [attributes for name, attributes in self.elements if name == tag]

    def table(self, start: str) -> list[list[str]]:
        """Rows of the table whose caption begins so, its head among them."""
        return next(rows for caption, rows in self.tables.items() if caption.startswith(start))

    def value(self, caption: str, name: str) -> str:
        """What stands beside a name in a table of pairs."""
        return next(row[1] for row in self.table(caption) if row[0] == name)


def require_sound(text: str) -> Strict:
    """Everything that holds for every page: sound, reaching nowhere, nothing to run, figures with words."""
    page = Strict(text)
    assert text.startswith('<!DOCTYPE html>\n<html lang="en">')
    policy = [one["content"] for one in page.of("meta") if one.get("http-equiv") == "Content-Security-Policy"]
    assert len(policy) == 1
    assert policy[0].startswith("default-src 'none'; style-src 'unsafe-inline'; img-src data:")
    assert "script-src" not in policy[0]
    tags = {tag for tag, _ in page.elements}
    assert not tags & {
        "script",
        "link",
        "img",
        "iframe",
        "object",
        "embed",
        "base",
        "form",
        "image",
        "foreignobject",
    }
    assert "://" not in re.sub(r">[^<]*<", "><", text), "an address outside the page"
    assert "@import" not in text
    identities = [attributes["id"] for _, attributes in page.elements if "id" in attributes]
    assert len(set(identities)) == len(identities)
    for tag, attributes in page.elements:
        assert not [name for name in attributes if name.startswith("on")], f"{tag} runs something"
        for name, value in attributes.items():
            for target in re.findall(r"url\(([^)]*)\)", value):
                assert target.startswith("#"), target
                assert target[1:] in identities
            if name.endswith("href") and value.startswith("#"):
                assert value[1:] in identities, value
            elif name.endswith("href"):
                assert tag == "a"
                assert ":" not in value, value
                assert not value.startswith("/"), value
    for svg in page.of("svg"):
        assert svg["role"] == "img"
        assert set(svg["aria-labelledby"].split()) <= set(identities)
    for cell in page.of("th"):
        assert cell.get("scope") in ("row", "col")
    levels = [int(tag[1]) for tag, _ in page.elements if re.fullmatch(r"h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after <= before + 1 for before, after in pairwise(levels))
    return page
