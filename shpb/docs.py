"""The generated tables of ``calibration/README.md``: keys of all files, checks and corrections.

``python -m shpb.docs calibration/README.md`` brings them up to date; a test compares the two.
"""

from __future__ import annotations

import re
import sys
from pathlib import Path

from shpb.errors import InputError
from shpb.limits import LIMIT_FACTS, USUAL, key_of, limit_in_words
from shpb.response.corrections.facts import FACTS
from shpb.rig.docs import key_blocks
from shpb.trust.judge import Check, all_checks

_BLOCK = re.compile(r"(<!-- keys: ([a-z-]+) -->\n).*?(<!-- end of keys -->)", re.DOTALL)
_HEAD = "| check | what it looks at | usual limit, by key | source | gravest |\n|---|---|---|---|---|\n"


def check_table() -> str:
    """All checks in Markdown, in the order in which findings of equal weight stand."""
    return _HEAD + "".join(_check_row(check) for check in all_checks())


def _check_row(check: Check) -> str:
    limits = [f"`{key_of(name)}` {limit_in_words(name, getattr(USUAL, name))}" for name in check.limits]
    sources = dict.fromkeys([check.source, *(LIMIT_FACTS[name].source for name in check.limits)])
    cells = (
        check.name,
        check.what.removesuffix("."),
        ", ".join(limits) or "none of its own",
        "; ".join(source for source in sources if source),
        check.gravest.value,
    )
    return "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |\n"


def correction_table() -> str:
    """All corrections in Markdown, in the order in which they act."""
    head = "| correction | what it does | holds for | needs | source |\n|---|---|---|---|---|\n"
    rows = (
        (f"`{which.value}`", fact.what, fact.holds_for, fact.needs, fact.source)
        for which, fact in FACTS.items()
    )
    return head + "".join("| " + " | ".join(row) + " |\n" for row in rows)


def blocks() -> dict[str, str]:
    """Every generated block of the README by its name."""
    return {**key_blocks(), "checks": check_table(), "corrections": correction_table()}


def refreshed(text: str) -> str:
    """Return the README with every generated block written anew.

    Raises
    ------
    InputError
        If a block is missing, or one is asked for that does not exist.
    """
    written = blocks()
    asked = [match[2] for match in _BLOCK.finditer(text)]
    if sorted(asked) != sorted(written):
        raise InputError(
            f"the blocks are {', '.join(asked)}",
            where="README",
            mend=f"Put each of these between its marks once: {', '.join(written)}",
        )
    return _BLOCK.sub(lambda match: match[1] + written[match[2]] + match[3], text)


if __name__ == "__main__":
    readme = Path(sys.argv[1])
    readme.write_text(refreshed(readme.read_text(encoding="utf-8")), encoding="utf-8")
