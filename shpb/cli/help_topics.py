"""``shpb help``: topics as plain text, and the help of a verb."""

from __future__ import annotations

import argparse
import shutil
import sys

from shpb.errors import InputError

HELP = "help on a topic: rig file, shot sheet, checks, methods, ..."
DESCRIPTION = """\
Show help on a topic (rig-file, shot-sheet, shot-list, calibration, checks,
corrections, methods, files, merge, watch, exit-status and others), or on a
verb. Without a name, list them all. On a terminal a long text goes through the
pager that PAGER names."""
EXAMPLE = """\
examples:
  shpb help
  shpb help rig-file
  shpb help checks | grep friction
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument("topic", nargs="?", metavar="TOPIC", help="topic or verb; without one, list them all")
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")


def run(options: argparse.Namespace) -> int:
    """Show a topic."""
    from shpb.cli.status import DONE

    text = _text(options.topic)
    if options.json:
        _print_json(options.topic, text)
    else:
        _show(text)
    return DONE


def _text(topic: str | None) -> str:
    from shpb.cli.main import verb_parsers
    from shpb.view.help_text import TOPICS, index_text, topic_text

    verbs = verb_parsers()
    if topic is None:
        return index_text((name, words) for name, (words, _) in verbs.items())
    name = topic.strip().casefold().replace("_", "-").replace(" ", "-")
    # A topic says more than the verb of the same name, and names it; the verb's options follow.
    if name in TOPICS:
        text = topic_text(name, _fields() if name == "files" else ())
        return f"{text}\n\nTHE VERB\n\n{verbs[name][1].format_help().rstrip()}" if name in verbs else text
    if name in verbs:
        return verbs[name][1].format_help().rstrip()
    raise InputError(f"there is no help on {topic!r}", where="shpb help", mend=_near(name, [*TOPICS, *verbs]))


def _near(name: str, known: list[str]) -> str:
    """Topics whose names are like, or hold, what was typed."""
    import difflib

    close = [one for one in known if len(name) > 2 and (name in one or one in name)]
    close += [one for one in difflib.get_close_matches(name, known, n=3) if one not in close]
    if not close:
        return "`shpb help` lists the topics"
    return f"Did you mean {' or '.join(close[:3])}? `shpb help` lists all topics"


def _fields() -> list[tuple[str, str, str]]:
    """Arrays of a shot's file, from the table of its layout."""
    from shpb.store import layout

    groups = (("wave", layout.WAVE), ("response", layout.RESPONSE), ("trust", layout.TRUST))
    return [(f"{group}/{one.name}", one.units, one.label) for group, fields in groups for one in fields]


def _show(text: str) -> None:
    """Through a pager on a terminal that is too low for the text, else plainly."""
    if sys.stdout.isatty() and text.count("\n") >= shutil.get_terminal_size().lines - 1:
        import pydoc

        pydoc.pager(text + "\n")
    else:
        print(text)


def _print_json(topic: str | None, text: str) -> None:
    from shpb.view.help_text import TOPICS
    from shpb.view.summary import head, json_text

    said = {
        **head("shpb help"),
        "topic": topic,
        "topics": dict(TOPICS),
        "text": text,
    }
    print(json_text(said))
