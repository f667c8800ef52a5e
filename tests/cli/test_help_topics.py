"""``shpb help``: every topic from the tables of the program, near spellings, the pager; and messages on stderr."""

from __future__ import annotations

import io
import os
import pty
import subprocess
import sys

import pytest

from shpb.cli.main import main, verb_parsers
from shpb.cli.say import say
from shpb.limits import LIMIT_FACTS, key_of
from shpb.merge.models.registry import all_models
from shpb.response.corrections.facts import FACTS
from shpb.rig.columns import COLUMNS
from shpb.rig.keys import RIG_FILE, SHEET_FILE
from shpb.rig.session_keys import SESSION_FILE
from shpb.trust.judge import all_checks
from shpb.view.help_text import TOPICS, topic_text
from shpb.view.text import columns_of


def plain(text: str) -> str:
    return " ".join(text.split())


@pytest.mark.parametrize("topic", list(TOPICS))
def test_every_topic_fits_80_columns_and_names_only_topics_that_there_are(
    topic: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["help", topic]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert out.startswith(f"SHPB {topic.upper()}\n")
    assert max(map(columns_of, out.splitlines())) <= 80
    assert len(out.splitlines()) > 8
    known = {*TOPICS, *verb_parsers()}
    for named in plain(out).split("shpb help ")[1:]:
        assert named.split()[0].strip(",.`)") in known | {"TOPIC", "VERB"}


def test_the_files_that_people_write_are_told_key_by_key() -> None:
    for topic, tables in (
        ("rig-file", RIG_FILE),
        ("shot-sheet", SHEET_FILE[:2]),
        ("calibration", SESSION_FILE),
    ):
        text = topic_text(topic)
        for table in tables:
            if topic == "calibration" and table.name == "record":
                continue
            for key in table.keys:
                assert " or ".join(name for name, _ in key.names()) in plain(text), key.name
                assert plain(key.meaning) in plain(text)
    columns = topic_text("shot-list")
    assert all(one.name in columns for one in COLUMNS.values() if one.part not in {"u", "origin"})


def test_checks_corrections_and_laws_are_all_there_with_their_sources() -> None:
    checks = plain(topic_text("checks"))
    for check in all_checks():
        assert check.name in checks
        assert plain(check.what) in checks
        assert all(f"{key_of(name)} = " in checks for name in check.limits)
        assert all(LIMIT_FACTS[name].source in checks for name in check.limits)
    corrections = plain(topic_text("corrections"))
    assert all(
        plain(fact.source) in corrections and which.value in corrections for which, fact in FACTS.items()
    )
    laws = plain(topic_text("merge"))
    assert all(
        plain(one.formula) in laws and plain(one.source) in laws and one.key in laws for one in all_models()
    )


def test_a_verb_is_helped_and_the_list_holds_all(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["help", "export"]) == 0
    assert "usage: shpb export" in capsys.readouterr().out
    assert main(["help", "watch"]) == 0  # a topic of the same name, and then its options
    assert "usage: shpb watch" in capsys.readouterr().out
    assert main(["help"]) == 0
    words = capsys.readouterr().out.split()
    assert {*TOPICS, *verb_parsers()} <= set(words)


@pytest.mark.parametrize(
    ("typed", "meant"),
    [
        ("chekcs", "checks"),
        ("rigfile", "rig-file"),
        ("list", "shot-list"),
        ("exit", "exit-status"),
        ("exprot", "export"),
    ],
)
def test_a_wrong_topic_is_answered_with_near_spellings(
    typed: str, meant: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["help", typed]) == 2
    assert f"Did you mean {meant}" in capsys.readouterr().err


@pytest.mark.parametrize("typed", ["RIG-FILE", "rig_file", "Rig file"])
def test_case_and_joints_do_not_matter(typed: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["help", typed]) == 0
    assert capsys.readouterr().out.startswith("SHPB RIG-FILE")


def on_terminal(code: str, **environment: str) -> str:
    """What a Python process shows on a terminal of 24 lines and 80 columns."""
    child, stream = pty.fork()
    if child == 0:
        os.execve(sys.executable, [sys.executable, "-c", code], {**os.environ, "LINES": "24", **environment})
    said = b""
    while True:
        try:
            got = os.read(stream, 65536)
        except OSError:
            break
        if not got:
            break
        said += got
    os.waitpid(child, 0)
    os.close(stream)
    return said.decode(errors="replace").replace("\r\n", "\n")


HELP = "from shpb.cli.main import main; main(['help', '{}'])"


def test_a_long_topic_goes_through_the_pager_on_a_terminal_only() -> None:
    pager = "sed s/^/paged:/"
    assert "paged:SHPB CHECKS" in on_terminal(HELP.format("checks"), PAGER=pager, COLUMNS="80")
    assert on_terminal(HELP.format("json"), PAGER=pager, COLUMNS="80").startswith("SHPB JSON")  # it fits
    done = subprocess.run(
        [sys.executable, "-c", HELP.format("checks")],
        env={**os.environ, "PAGER": pager},
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout.startswith("SHPB CHECKS")


# --- messages ------------------------------------------------------------------------------------------

MESSAGE = (
    "a-file.toml: 2 mistakes\n  - a-file.toml: bar.diameter: found 20 m, expected a number in mm, 0.5 to 200. "
    + "Mend it " * 12
)


def test_messages_keep_their_lines_through_a_pipe() -> None:
    stream = io.StringIO()
    say(MESSAGE, stream)
    assert stream.getvalue() == f"shpb: {MESSAGE}\n"


@pytest.mark.parametrize("columns", ["80", "60", "200"])
def test_messages_are_wrapped_on_a_terminal(columns: str) -> None:
    code = f"from shpb.cli.say import say; say({MESSAGE!r})"
    said = on_terminal(code, COLUMNS=columns)
    assert max(map(len, said.splitlines())) <= min(80, int(columns))
    assert plain(said) == plain(f"shpb: {MESSAGE}")
    assert "\n  - a-file.toml" in said  # a list of mistakes stays one


def test_a_message_never_obeys_what_stands_in_a_name() -> None:
    stream = io.StringIO()
    say("shot \x1b[2J.toml: bad", stream)
    assert "\x1b" not in stream.getvalue()
