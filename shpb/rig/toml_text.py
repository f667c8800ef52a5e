"""Writing the little TOML that a row of a shot list turns into."""

from __future__ import annotations

from collections.abc import Mapping


def toml_value(value: object) -> str:
    """Return a text, number, switch, list or mapping as TOML 1.0 would have it on one line."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, int):
        return str(value)
    if isinstance(value, float):
        return repr(value)  # the shortest text that reads back to the same number
    if isinstance(value, str):
        return '"' + "".join(_escaped(c) for c in value) + '"'
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{name} = {toml_value(item)}" for name, item in value.items()) + " }"
    if isinstance(value, list | tuple):
        return "[" + ", ".join(toml_value(item) for item in value) + "]"
    raise TypeError(f"no TOML for {type(value).__name__}")


def toml_document(tables: Mapping[str, Mapping[str, object]]) -> str:
    """Return tables of plain keys as TOML text; empty tables are left out."""
    return "\n".join(
        f"[{name}]\n" + "".join(f"{key} = {toml_value(value)}\n" for key, value in table.items())
        for name, table in tables.items()
        if table
    )


def toml_comment(text: str) -> str:
    """Return ``text`` as comment lines, without the control characters that TOML forbids there."""
    lines = text.splitlines() or [""]
    return "".join(
        "# " + "".join(c if c.isprintable() or c == "\t" else "?" for c in line).rstrip() + "\n"
        for line in lines
    )


def _escaped(character: str) -> str:
    if character in '"\\':
        return "\\" + character
    if character.isprintable():
        return character
    code = ord(character)
    return f"\\u{code:04x}" if code <= 0xFFFF else f"\\U{code:08x}"
