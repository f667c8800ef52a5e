"""The topics of ``shpb help``: their names, what each is about, and their text."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from shpb.view.help.page import HelpPage

# Name and one line; the text of each is made when it is asked for, so that a list of them costs nothing.
TOPICS: dict[str, str] = {
    "rig-file": "the rig file: bars, gauges, striker, choices, limits",
    "shot-sheet": "the shot sheet: record, striker speed, specimen",
    "shot-list": "the shot list: many shots in one table",
    "quasi-static": "quasi-static tables for a merge",
    "calibration": "calibration sessions and calibration files",
    "checks": "every check with its limit and source",
    "corrections": "every correction with its range and source",
    "methods": "how a shot is worked out, step by step, with sources",
    "merge": "merging a campaign; the laws",
    "files": "the files that are written; the HDF5 layout",
    "watch": "watching the folder of the scope",
    "exit-status": "exit statuses, streams, terminals",
    "json": "JSON for other programs",
}


def topic_text(name: str, fields: Sequence[tuple[str, str, str]] = ()) -> str:
    """The text of a topic, no line over 79 columns.

    Parameters
    ----------
    name : str
        A key of ``TOPICS``.
    fields : sequence of (path, unit, meaning)
        Arrays of the HDF5 file of a shot, for the topic ``files``.
    """
    if name in ("files", "watch", "exit-status", "json"):
        from shpb.view.help import bench_topics
        from shpb.view.summary import SCHEMA_VERSION

        if name == "files":
            return bench_topics.files(fields)
        if name == "json":
            return bench_topics.as_json(SCHEMA_VERSION)
        return bench_topics.watch() if name == "watch" else bench_topics.exit_status()
    if name in ("checks", "corrections", "methods", "merge"):
        from shpb.view.help import judging_topics

        return str(getattr(judging_topics, name)())
    from shpb.view.help import key_topics

    return str(getattr(key_topics, name.replace("-", "_"))())


def index_text(verbs: Iterable[tuple[str, str]]) -> str:
    """The list of topics and verbs."""
    page = HelpPage("help", "Topics and verbs that there is help for.")
    page.heading("TOPICS: shpb help TOPIC")
    for name, words in TOPICS.items():
        page.pair(name, words, 20)
    page.heading("VERBS: shpb help VERB, or shpb VERB --help")
    for name, words in verbs:
        page.pair(name, words, 20)
    return page.text
