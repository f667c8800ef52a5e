"""From the lines above a quasi-static table, and the TOML file beside it, to checked facts."""

from __future__ import annotations

import difflib
import hashlib
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from shpb.merge.quasistatic_keys import ALSO_CALLED, FACT_TABLE
from shpb.merge.text_table import HeaderFact
from shpb.quantity import Quantity
from shpb.rig.gauge import TestKind
from shpb.rig.key import Key, Kind
from shpb.rig.mistakes import Collector, nearest, shown
from shpb.rig.text_file import read_text, toml_tables
from shpb.rig.values import Unreadable, value_in_si

_NUMERIC = {Kind.QUANTITY, Kind.NUMBER}
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_LIKE = 0.82  # how like a key an unknown word must be to count as a misspelt one, and no remark


@dataclass(slots=True)
class Facts:
    """The facts of one test by the stem of their key, in SI, and where each stands."""

    given: dict[str, Any] = field(default_factory=dict)
    where: dict[str, str] = field(default_factory=dict)
    stated: set[str] = field(default_factory=set)  # usable or not
    remarks: list[str] = field(default_factory=list)
    sources: list[tuple[str, str]] = field(
        default_factory=list
    )  # further files, with the hash of their bytes

    def quantity(self, stem: str) -> Quantity | None:
        """The number, None where it is not stated or unusable."""
        value = self.given.get(stem)
        return value if isinstance(value, Quantity) else None

    def number(self, stem: str) -> float | None:
        """The number, None where it is not stated or unusable."""
        value = self.given.get(stem)
        return float(value) if isinstance(value, float) else None

    def text(self, stem: str) -> str:
        """The text, empty where it is not stated."""
        return str(self.given.get(stem, ""))


def sidecar_of(path: Path) -> Path:
    """The TOML file of the same name beside a table."""
    return path.with_suffix(".toml")


def read_facts(header: tuple[HeaderFact, ...], sidecar: Path, seen: Collector, beside: Collector) -> Facts:
    """Read the facts of both places; mistakes go to ``seen`` (table) and ``beside`` (TOML file).

    A line above the table that is like no key is a remark. In the TOML file every key must be known.
    """
    facts = Facts()
    for fact in header:
        known = _known(fact.key)
        if known is None:
            _misspelt(fact, facts, seen)
            continue
        _take(facts, known, _from_text(fact.value, known[0]), f"line {fact.line}, {fact.key}", seen)
    if sidecar.is_file():
        _read_sidecar(facts, sidecar, beside)
    _kind_in_words(facts)
    return facts


def _known(name: str) -> tuple[Key, Any] | None:
    """The key of that name, whatever its capitals, with its unit."""
    word = name.replace(" ", "_").casefold()
    word = ALSO_CALLED.get(word, word).casefold()
    return next((found for known, found in FACT_TABLE.lookup().items() if known.casefold() == word), None)


def _misspelt(fact: HeaderFact, facts: Facts, seen: Collector) -> None:
    word = fact.key.replace(" ", "_").casefold()
    names = {name.casefold(): name for name in FACT_TABLE.lookup()}
    stems = {key.stem: key.name for key in FACT_TABLE.keys if key.units[0].suffix}
    stems["strain_rate"] = stems["rate"]
    guess = stems.get(word, "")
    if not guess:
        close = difflib.get_close_matches(word, names, n=1, cutoff=_LIKE)
        guess = names[close[0]] if close else ""
    if guess:
        facts.stated.add(FACT_TABLE.lookup()[guess][0].stem)  # that it is missing is not told again
        seen.add(f"line {fact.line}, {fact.key}", "an unknown key", "a known one", f"Did you mean {guess}?")


def _from_text(text: str, key: Key) -> object:
    """What a header value would be in TOML."""
    if key.kind in _NUMERIC:
        plain = text.replace(",", ".") if text.count(",") == 1 and "." not in text else text
        return float(plain) if _NUMBER.fullmatch(plain) else text
    if key.kind is Kind.SWITCH:
        return {"true": True, "yes": True, "false": False, "no": False}.get(text.casefold(), text)
    return text.casefold() if key.kind is Kind.CHOICE else text


def _take(
    facts: Facts, known: tuple[Key, Any], raw: object, where: str, seen: Collector, file: str = ""
) -> None:
    key, unit = known
    facts.stated.add(key.stem)
    try:
        value = value_in_si(raw, key, unit)
    except Unreadable as bad:
        seen.add(f"{where}.{bad.sub}" if bad.sub else where, bad.found, bad.expected, bad.mend)
        return
    if key.stem in facts.given:
        if facts.given[key.stem] != value:
            seen.add(
                where,
                shown(raw),
                f"the same as {facts.where[key.stem]}",
                "Keep the right one, and state it once",
            )
        return
    facts.given[key.stem], facts.where[key.stem] = value, f"{where} in {file}" if file else where


def _read_sidecar(facts: Facts, sidecar: Path, beside: Collector) -> None:
    text = read_text(sidecar, "TOML file of a quasi-static test")
    facts.sources.append((sidecar.name, hashlib.sha256(sidecar.read_bytes()).hexdigest()))
    document: Mapping[str, Any] = toml_tables(text, sidecar.name)
    if set(document) == {FACT_TABLE.name} and isinstance(document[FACT_TABLE.name], Mapping):
        document = document[FACT_TABLE.name]
    names = [*FACT_TABLE.lookup(), *ALSO_CALLED]
    for name, raw in document.items():
        if name.startswith("note_"):
            continue
        known = _known(name)
        if known is None:
            guess = nearest(name, names)
            mend = f"Did you mean {guess}?" if guess else "For a note of your own begin it with note_"
            beside.add(name, "an unknown key", "a fact of the test", mend)
            continue
        _take(facts, known, raw, name, beside, sidecar.name)


def _kind_in_words(facts: Facts) -> None:
    """Take the kind from the test's own words, where they say it and the key is missing."""
    if "kind" in facts.stated:
        return
    words = facts.text("test").casefold()
    named = [kind for kind in TestKind if kind in words]
    if len(named) == 1:
        facts.given["kind"], facts.where["kind"] = named[0], facts.where["test"]
        facts.stated.add("kind")
        facts.remarks.append(
            f'kind "{named[0]}" taken from the words of the test: {shown(facts.text("test"))}'
        )
