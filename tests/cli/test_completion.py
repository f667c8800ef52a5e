"""Completion as the shells themselves see it: each is started, given the script, and asked."""

from __future__ import annotations

import os
import pty
import select
import shutil
import subprocess
import sys
import time
from pathlib import Path

import pytest

from shpb.cli.completion_scripts import SHELLS, described, script
from shpb.cli.main import main, verb_parsers
from shpb.view.help_text import TOPICS

VERBS = set(verb_parsers())
ASK_BASH = """
source "$1"; shift
COMP_WORDS=("$@"); COMP_CWORD=$(( ${#COMP_WORDS[@]} - 1 )); COMPREPLY=()
_shpb
printf '%s\\n' "${COMPREPLY[@]}"
"""


@pytest.fixture(name="lab")
def _lab(tmp_path: Path) -> Path:
    for name in ("a.toml", "B.TOML", "list.csv", "shot.h5", "scope.trc", "two words.toml", "--odd.toml"):
        (tmp_path / name).touch()
    (tmp_path / "records").mkdir()
    return tmp_path


def written(shell: str, folder: Path) -> Path:
    path = folder / f"completion.{shell}"
    path.write_text(script(shell, described(verb_parsers())) + "\n", encoding="utf-8")
    return path


def bash(lab: Path, *words: str) -> set[str]:
    if not shutil.which("bash"):
        pytest.skip("bash is not installed")
    path = written("bash", lab.parent)
    done = subprocess.run(
        ["bash", "--norc", "-c", ASK_BASH, "ask", str(path), *words],
        cwd=lab, capture_output=True, text=True, check=True, timeout=20,
    )  # fmt: skip
    assert done.stderr == ""
    return set(done.stdout.split("\n")) - {""}


def test_bash_offers_verbs(lab: Path) -> None:
    assert bash(lab, "shpb", "") == VERBS | {"--help", "--version"}
    assert bash(lab, "shpb", "re") == {"reduce", "report", "record", "recalibrate"}


@pytest.mark.slow
def test_bash_offers_every_option_of_a_verb(lab: Path) -> None:
    for name, (_, parser) in verb_parsers().items():
        offered = bash(lab, "shpb", name, "-")
        assert {one for action in parser._actions for one in action.option_strings} == offered


def test_bash_offers_what_an_option_can_be(lab: Path) -> None:
    assert bash(lab, "shpb", "reduce", "a.toml", "--figure", "") == {"png", "pdf", "svg", "none"}
    assert bash(lab, "shpb", "export", "--units", "S") == {"SI"}
    assert bash(lab, "shpb", "reduce", "--results", "") == {"records"}


def test_bash_offers_files_of_the_kind_a_verb_takes(lab: Path) -> None:
    sheets = {"a.toml", "B.TOML", "list.csv", "two words.toml", "--odd.toml", "records"}
    assert bash(lab, "shpb", "reduce", "") == sheets
    assert bash(lab, "shpb", "show", "") == {"shot.h5", "records"}
    assert bash(lab, "shpb", "record", "sc") == {"scope.trc"}
    assert bash(lab, "shpb", "reduce", "--rig", "a") == {"a.toml"}


def test_bash_offers_topics(lab: Path) -> None:
    assert bash(lab, "shpb", "help", "") == VERBS | set(TOPICS)
    assert bash(lab, "shpb", "completion", "") == set(SHELLS)


def fish(lab: Path, line: str) -> set[str]:
    if not shutil.which("fish"):
        pytest.skip("fish is not installed")
    path = written("fish", lab.parent)
    code = "source $argv[1]; complete --do-complete $argv[2]"
    done = subprocess.run(
        ["fish", "--no-config", "-c", code, str(path), line],
        cwd=lab, capture_output=True, text=True, check=True, timeout=20, env={**os.environ, "HOME": str(lab.parent)},
    )  # fmt: skip
    return {one.split("\t")[0] for one in done.stdout.splitlines()}


def test_fish_offers_verbs_options_choices_and_files(lab: Path) -> None:
    assert fish(lab, "shpb re") == {"reduce", "report", "record", "recalibrate"}
    assert fish(lab, "shpb reduce a.toml --figure ") == {"png", "pdf", "svg", "none"}
    assert {"--figure", "--full"} <= fish(lab, "shpb reduce --f")
    assert fish(lab, "shpb help che") == {"checks"}
    assert "shot.h5" in fish(lab, "shpb show ")
    assert fish(lab, "shpb export x.h5 --into ") == {"records/"}


def zsh(lab: Path, line: str) -> str:
    """What a terminal shows when a tabulator is struck behind a line."""
    if not shutil.which("zsh"):
        pytest.skip("zsh is not installed")
    path = written("zsh", lab.parent)
    child, stream = pty.fork()
    if child == 0:
        os.chdir(lab)
        os.execve(shutil.which("zsh") or "", ["zsh", "-f", "-i"], {
            "PATH": os.environ["PATH"], "HOME": str(lab.parent), "TERM": "dumb", "PS1": "", "COLUMNS": "200",
        })  # fmt: skip
    try:
        os.write(stream, f"autoload -Uz compinit; compinit -u -D; source {path}; echo rea''dy\r".encode())
        said = until(stream, "ready")
        assert "ready" in said
        os.write(stream, f"{line}\t".encode())
        return until(stream, None)
    finally:
        os.kill(child, 9)
        os.waitpid(child, 0)
        os.close(stream)


def until(stream: int, mark: str | None, limit_s: float = 15.0) -> str:
    """Read until a mark stands there, or for want of one until it is quiet."""
    said, end = "", time.monotonic() + limit_s
    while time.monotonic() < end:
        ready, _, _ = select.select([stream], [], [], 1.5 if mark is None and said else limit_s)
        if not ready:
            break
        try:
            said += os.read(stream, 65536).decode(errors="replace")
        except OSError:
            break
        if mark is not None and mark in said:
            break
    return said


@pytest.mark.slow
def test_zsh_completes_a_verb_and_a_choice(lab: Path) -> None:
    assert "recalibrate" in zsh(lab, "shpb reca")
    assert "powershell" in zsh(lab, "shpb completion pow")
    listed = zsh(lab, "shpb reduce --figure ")
    assert all(kind in listed for kind in ("png", "pdf", "svg", "none"))
    assert "shot.h5" in zsh(lab, "shpb show sh")


def test_powershell_script_names_every_verb_and_option() -> None:
    text = script("powershell", described(verb_parsers()))
    for name, (_, parser) in verb_parsers().items():
        row = next(line for line in text.splitlines() if line.strip().startswith(f"'{name}' = @('-h'"))
        assert all(f"'{one}'" in row for action in parser._actions for one in action.option_strings)


def test_the_verb_prints_the_script(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["completion", "bash"]) == 0
    assert capsys.readouterr().out.rstrip() == script("bash", described(verb_parsers())).rstrip()


def test_an_unknown_shell_is_named(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(["completion", "abacus"])
    assert ended.value.code == 2
    assert "bash" in capsys.readouterr().err


def test_the_script_needs_no_numpy() -> None:
    code = "import sys; from shpb.cli.main import main; main(['completion', 'bash']); assert 'numpy' not in sys.modules"
    subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, timeout=30)
