"""HTML from parts that cannot be got wrong: what is not markup by type is escaped on its way in.

Nothing on a page reaches outside the file: the policy in its head allows inline styles and nothing else, and there
is no script at all.
"""

from __future__ import annotations

import html
import re
from collections.abc import Iterable, Sequence
from typing import NamedTuple

from shpb.version import VERSION
from shpb.view.report.style import STYLE
from shpb.view.text import printable

POLICY = "default-src 'none'; style-src 'unsafe-inline'; img-src data:; base-uri 'none'; form-action 'none'"
LONGEST = 2000  # letters of one outside string that are shown
CAUTION = (
    "A verdict speaks about data, never about safety: do not go near the rig because a shot counts. Stresses here are "
    "results of tests, not allowables for design. Local rules and licensed practice come first."
)
_VOID = ("br", "input", "meta")
_HEAD_BYTES = 16_384
_META = re.compile(r'<meta name="(shpb-[a-z-]+)" content="([^"]*)">')
_TYPESET = ((" us", " µs"), ("<=", "≤"), (">=", "≥"), ("+-", "±"))


class Markup(str):
    """Text that is HTML already."""

    __slots__ = ()


def escaped(value: object) -> Markup:
    r"""Return any value as text of a page: one line, nothing in it that a browser would obey.

    Examples
    --------
    >>> escaped("<b> & \x1b")
    '&lt;b&gt; &amp; \\x1b'
    """
    return value if isinstance(value, Markup) else Markup(html.escape(shown(value), quote=True))


def shown(value: object) -> str:
    """A value as it is shown, before it is escaped: on one line, without control characters, not endless."""
    text = printable(value)
    return text if len(text) <= LONGEST else f"{text[:LONGEST]}... and {len(text) - LONGEST} more letters"


def typeset(text: str) -> str:
    """Our own plain words with the signs that a page has and a console may not.

    >>> typeset("foot +0.20 us, limit <= 5 %")
    'foot +0.20 µs, limit ≤ 5 %'
    """
    for plain, sign in _TYPESET:
        text = text.replace(plain, sign)
    return text


def together(parts: Iterable[object], between: str = "") -> Markup:
    """Parts one after the other, what is not markup among them escaped."""
    return Markup(between.join(escaped(part) for part in parts))


def element(tag: str, *content: object, **attributes: object) -> Markup:
    """One element.

    Parameters
    ----------
    tag : str
    *content : object
        :class:`Markup` goes in as it is, everything else escaped.
    **attributes : object
        ``class_`` and ``for_`` stand for ``class`` and ``for``, other underscores for hyphens; None and False are
        left out, True is an empty value.

    Examples
    --------
    >>> element("td", "3 < 4", class_="number")
    '<td class="number">3 &lt; 4</td>'
    """
    said = "".join(
        f' {name.rstrip("_").replace("_", "-")}="{"" if value is True else escaped(value)}"'
        for name, value in attributes.items()
        if value is not None and value is not False
    )
    if tag in _VOID:
        return Markup(f"<{tag}{said}>")
    return Markup(f"<{tag}{said}>{together(content)}</{tag}>")


def section(heading: str, *content: object, level: int = 2, identity: str | None = None) -> Markup:
    """A part of a page under its heading."""
    return element("section", element(f"h{level}", heading), *content, id=identity)


class Column(NamedTuple):
    """A column of a table: its heading, whether it holds numbers, whether its few words stay on one line."""

    heading: str
    number: bool = False
    short: bool = False

    @property
    def look(self) -> str | None:
        """Class of its cells."""
        return "number" if self.number else "short" if self.short else None


def header_row(columns: Sequence[Column]) -> Markup:
    """The head of a table."""
    cells = [element("th", one.heading, scope="col", class_=one.look) for one in columns]
    return element("thead", element("tr", *cells))


def row(columns: Sequence[Column], cells: Sequence[object]) -> Markup:
    """One row; its first cell is its heading."""
    found = []
    for number, (column, cell) in enumerate(zip(columns, cells, strict=True)):
        if number:
            found.append(element("td", cell, class_=column.look))
        else:
            found.append(element("th", cell, scope="row", class_=column.look))
    return element("tr", *found)


def table(caption: str, columns: Sequence[Column], rows: Iterable[Sequence[object]]) -> Markup:
    """A table in a frame of its own, which scrolls on a narrow screen instead of the page."""
    body = element("tbody", *(row(columns, cells) for cells in rows))
    whole = element("table", element("caption", caption), header_row(columns), body)
    return element("div", whole, class_="wide", tabindex="0", role="region", aria_label=caption)


def pairs(caption: str, rows: Iterable[tuple[str, object]]) -> Markup:
    """A table of names and what they are."""
    body = [element("tr", element("th", name, scope="row"), element("td", value)) for name, value in rows]
    return element("table", element("caption", caption), element("tbody", *body), class_="pairs")


def paragraphs(texts: Iterable[object], class_: str | None = None) -> Markup:
    """A list, one entry a text; nothing where there is none."""
    items = [element("li", text) for text in texts]
    return element("ul", *items, class_=class_) if items else Markup("")


def word_for_word(heading: str, text: str) -> Markup:
    """A file as people wrote it, folded away."""
    lines = "\n".join(printable(line) for line in text.splitlines())
    body = element("pre", Markup(html.escape(lines, quote=True)))
    return element("details", element("summary", heading), body)


def page(title: str, marks: dict[str, str], *content: object, style: str = "") -> str:
    """The whole file.

    Parameters
    ----------
    title : str
    marks : dict of str to str
        What the program itself must know of the file when it meets it again; names begin with ``shpb-``.
    *content : object
        What stands in the body.
    style : str
        Rules of this page besides those of all.
    """
    head = [
        element("meta", charset="utf-8"),
        element("meta", http_equiv="Content-Security-Policy", content=Markup(POLICY)),
        element("meta", name="generator", content=f"shpb {VERSION}"),
        *(element("meta", name=name, content=value) for name, value in marks.items()),
        element("meta", name="viewport", content="width=device-width, initial-scale=1"),
        element("meta", name="color-scheme", content="light"),
        element("meta", name="referrer", content="no-referrer"),
        element("title", title),
        Markup(f"<style>\n{STYLE}{style}</style>"),
    ]
    body = element("body", element("main", together(content, "\n")))
    whole = element(
        "html", Markup("\n"), element("head", together(head, "\n")), Markup("\n"), body, lang="en"
    )
    return f"<!DOCTYPE html>\n{whole}\n"


def marks_of(text: str) -> dict[str, str]:
    """What :func:`page` wrote for the program, from the beginning of a file; empty for a file of others.

    >>> marks_of(page("Shot 1", {"shpb-report": "shot", "shpb-shot": "a & b"}))
    {'shpb-report': 'shot', 'shpb-shot': 'a & b'}
    """
    if not text.startswith("<!DOCTYPE html>\n<html lang="):
        return {}
    return {name: html.unescape(value) for name, value in _META.findall(text[:_HEAD_BYTES])}
