"""Completion scripts made from the parser: what each verb and option takes, and how each shell is told."""

from __future__ import annotations

import argparse
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import NamedTuple

SHELLS = ("bash", "zsh", "fish", "powershell")

# Endings of the files that an argument takes, by its placeholder; folders are always offered, to go into them.
_ENDINGS: dict[tuple[str, str], tuple[str, ...]] = {
    ("reduce", "SHOT"): ("toml", "csv"),
    ("adjust", "SHOT"): ("toml", "h5"),
    ("show", "SHOT"): ("h5",),
    ("export", "RESULT"): ("h5",),
    ("report", "SHOT"): ("h5",),
    ("recalibrate", "RESULT"): ("h5",),
    ("calibrate", "SESSION"): ("toml",),
}
_OPTION_ENDINGS: dict[str, tuple[str, ...]] = {
    "--rig": ("toml",),
    "--calibration": ("toml",),
    "--sheets": ("toml", "csv"),
}


class Takes(NamedTuple):
    """What stands at a place: one of some words, or a file or folder; nothing of both where anything may stand.

    ``files`` holds endings; an empty tuple allows every file, None says that no file stands there.
    """

    words: tuple[str, ...] = ()
    files: tuple[str, ...] | None = None
    folders: bool = False


class Option(NamedTuple):
    """An option by all its names; ``takes`` is None for a switch."""

    names: tuple[str, ...]
    help: str
    takes: Takes | None


class Verb(NamedTuple):
    """A verb with its options, and what stands without an option."""

    name: str
    help: str
    options: tuple[Option, ...]
    positional: Takes


def described(parsers: Mapping[str, tuple[str, argparse.ArgumentParser]]) -> tuple[Verb, ...]:
    """What a shell needs to know of every verb."""
    from shpb.view.help_text import TOPICS

    found = []
    for name, (words, parser) in parsers.items():
        options, positional = [], Takes()
        for action in parser._actions:
            if action.help == argparse.SUPPRESS:
                continue
            if action.option_strings:
                options.append(_option(action))
            else:
                positional = _merged(positional, _takes(name, action))
        if name == "help":
            positional = Takes(words=(*TOPICS, *(one for one in parsers if one not in TOPICS)))
        found.append(Verb(name, words, tuple(options), positional))
    return tuple(found)


def _option(action: argparse.Action) -> Option:
    takes = None
    if action.nargs != 0:
        takes = _takes_option(action)
    return Option(tuple(action.option_strings), _one_line(action.help), takes)


def _one_line(text: str | None) -> str:
    return " ".join((text or "").replace("%%", "%").split())


def _takes_option(action: argparse.Action) -> Takes:
    if action.choices:
        return Takes(words=tuple(map(str, action.choices)))
    if action.type is not Path:
        return Takes()
    if action.metavar == "FOLDER":
        return Takes(folders=True)
    return Takes(files=_OPTION_ENDINGS.get(action.option_strings[0], ()), folders=True)


def _takes(verb: str, action: argparse.Action) -> Takes:
    if action.choices:
        return Takes(words=tuple(map(str, action.choices)))
    if action.type is not Path:
        return Takes()
    metavar = str(action.metavar)
    if metavar == "FOLDER" and verb != "merge":
        return Takes(folders=True)
    return Takes(files=_ENDINGS.get((verb, metavar), ()), folders=True)


def _merged(one: Takes, other: Takes) -> Takes:
    if one.files is None or other.files is None:
        files = one.files if other.files is None else other.files
    else:
        files = () if not one.files or not other.files else (*one.files, *other.files)
    return Takes((*one.words, *other.words), files, one.folders or other.folders)


def script(shell: str, verbs: Sequence[Verb]) -> str:
    """The script for a shell."""
    return {"bash": _bash, "zsh": _zsh, "fish": _fish, "powershell": _powershell}[shell](verbs)


# --- bash ----------------------------------------------------------------------------------------------

_BASH = """\
# bash completion for shpb
_shpb_words() {
    local word
    while IFS= read -r word; do COMPREPLY+=("$word"); done < <(compgen -W "$1" -- "$2")
}
_shpb_files() {
    local word ending
    while IFS= read -r word; do
        if [[ -d "${word/#\\~/$HOME}" ]]; then COMPREPLY+=("$word"); continue; fi
        if [[ "$1" == folders ]]; then continue; fi
        if [[ -z "$1" ]]; then COMPREPLY+=("$word"); continue; fi
        for ending in $1; do
            if [[ "${word,,}" == *."$ending" ]]; then COMPREPLY+=("$word"); break; fi
        done
    done < <(compgen -f -- "$2")
    compopt -o filenames 2>/dev/null
}
_shpb() {
    local word="${COMP_WORDS[COMP_CWORD]}" before="${COMP_WORDS[COMP_CWORD-1]}" verb="${COMP_WORDS[1]}"
    COMPREPLY=()
    if (( COMP_CWORD == 1 )); then _shpb_words "@VERBS@ --help --version" "$word"; return; fi
    case "$verb $before" in
@VALUES@
    esac
    if [[ "$word" == -* ]]; then
        case "$verb" in
@OPTIONS@
        esac
        return
    fi
    case "$verb" in
@POSITIONAL@
    esac
}
complete -F _shpb shpb"""


def _bash(verbs: Sequence[Verb]) -> str:
    values, options, positional = [], [], []
    for verb in verbs:
        for option in verb.options:
            if option.takes is not None:
                cases = "|".join(f'"{verb.name} {name}"' for name in option.names)
                values.append(f"        {cases}) {_bash_takes(option.takes)} return;;")
        names = " ".join(name for option in verb.options for name in option.names)
        options.append(f'            {verb.name}) _shpb_words "{names}" "$word";;')
        taken = _bash_takes(verb.positional)
        if taken:
            positional.append(f"        {verb.name}) {taken.rstrip(';')};;")
    return _filled(_BASH, VERBS=" ".join(verb.name for verb in verbs), VALUES="\n".join(values),
                   OPTIONS="\n".join(options), POSITIONAL="\n".join(positional))  # fmt: skip


def _bash_takes(takes: Takes) -> str:
    if takes.words:
        return f'_shpb_words "{" ".join(takes.words)}" "$word";'
    if takes.files is not None:
        return f'_shpb_files "{" ".join(takes.files)}" "$word";'
    return '_shpb_files folders "$word";' if takes.folders else ""


def _filled(text: str, **parts: str) -> str:
    for name, part in parts.items():
        text = text.replace(f"@{name}@", part)
    return text


# --- zsh -----------------------------------------------------------------------------------------------

_ZSH = """\
#compdef shpb
# zsh completion for shpb
_shpb() {
    local -a verbs
    local state line curcontext="$curcontext"
    verbs=(
@VERBS@
    )
    if (( CURRENT == 2 )); then
        _describe 'verb' verbs
        return
    fi
    local verb=${words[2]}
    shift words
    (( CURRENT-- ))
    case $verb in
@CASES@
    esac
}
if [[ "${funcstack[1]}" == "_shpb" ]]; then _shpb "$@"; else compdef _shpb shpb; fi"""


def _zsh(verbs: Sequence[Verb]) -> str:
    described_verbs = [f"        {_quoted(f'{verb.name}:{verb.help}')}" for verb in verbs]
    cases = []
    for verb in verbs:
        lines = [_zsh_option(name, option) for option in verb.options for name in option.names]
        lines.append(_quoted(f"*:{verb.name}:{_zsh_takes(verb.positional)}"))
        joined = " \\\n                ".join(lines)
        cases.append(
            f"        {verb.name})\n            _arguments \\\n                {joined}\n            ;;"
        )
    return _filled(_ZSH, VERBS="\n".join(described_verbs), CASES="\n".join(cases))


def _zsh_option(name: str, option: Option) -> str:
    words = option.help.replace("[", "(").replace("]", ")").replace(":", " -")
    head = f"*{name}[{words}]"
    return _quoted(head if option.takes is None else f"{head}:value:{_zsh_takes(option.takes)}")


def _zsh_takes(takes: Takes) -> str:
    if takes.words:
        return f"({' '.join(takes.words)})"
    if takes.files:
        return f'_files -g "*.({"|".join(takes.files)})(-.)"'
    if takes.files is not None:
        return "_files"
    return "_files -/" if takes.folders else "( )"


def _quoted(text: str) -> str:
    """A word in single quotes, as shells of the Bourne family read it."""
    return "'" + text.replace("'", "'\\''") + "'"


# --- fish ----------------------------------------------------------------------------------------------


def _fish(verbs: Sequence[Verb]) -> str:
    lines = ["# fish completion for shpb", "complete -c shpb -f"]
    lines.append("complete -c shpb -n __fish_use_subcommand -l help -d 'show help'")
    lines.append("complete -c shpb -n __fish_use_subcommand -l version -d 'show the version'")
    for verb in verbs:
        lines.append(f"complete -c shpb -n __fish_use_subcommand -a {verb.name} -d {_fish_quoted(verb.help)}")
    for verb in verbs:
        when = f"complete -c shpb -n '__fish_seen_subcommand_from {verb.name}'"
        for option in verb.options:
            names = " ".join(f"-l {n[2:]}" if n.startswith("--") else f"-s {n[1:]}" for n in option.names)
            takes = "" if option.takes is None else f" -r {_fish_takes(option.takes)}".rstrip()
            lines.append(f"{when} {names}{takes} -d {_fish_quoted(option.help)}")
        taken = _fish_takes(verb.positional)
        if taken:
            lines.append(f"{when} {taken}")
    return "\n".join(lines)


def _fish_takes(takes: Takes) -> str:
    if takes.words:
        return f"-f -a {_fish_quoted(' '.join(takes.words))}"
    if takes.files:
        return "-k -a " + _fish_quoted(
            " ".join(f"(__fish_complete_suffix .{ending})" for ending in takes.files)
        )
    if takes.files is not None:
        return "-F"
    return "-f -a '(__fish_complete_directories)'" if takes.folders else ""


def _fish_quoted(text: str) -> str:
    return "'" + text.replace("\\", "\\\\").replace("'", "\\'") + "'"


# --- PowerShell ----------------------------------------------------------------------------------------

_POWERSHELL = """\
# PowerShell completion for shpb; file names are completed by PowerShell itself
Register-ArgumentCompleter -Native -CommandName shpb -ScriptBlock {
    param($word, $command, $cursor)
    $verbs = @(@VERBS@)
    $options = @{
@OPTIONS@
    }
    $values = @{
@VALUES@
    }
    $words = @($command.CommandElements | ForEach-Object { $_.ToString() })
    if ($word -ne '') { $words = @($words | Select-Object -SkipLast 1) }
    $offered = @()
    if ($words.Count -le 1) {
        $offered = $verbs
    } elseif ($values.ContainsKey($words[1] + ' ' + $words[-1])) {
        $offered = $values[$words[1] + ' ' + $words[-1]]
    } elseif ($word.StartsWith('-')) {
        $offered = $options[$words[1]]
    } elseif ($values.ContainsKey($words[1])) {
        $offered = $values[$words[1]]
    }
    $offered | Where-Object { $_ -like ($word + '*') } | ForEach-Object {
        [System.Management.Automation.CompletionResult]::new($_, $_, 'ParameterValue', $_)
    }
}"""


def _powershell(verbs: Sequence[Verb]) -> str:
    options, values = [], []
    for verb in verbs:
        names = [name for option in verb.options for name in option.names]
        options.append(f"        '{verb.name}' = @({_listed(names)})")
        if verb.positional.words:
            values.append(f"        '{verb.name}' = @({_listed(verb.positional.words)})")
        for option in verb.options:
            if option.takes is not None and option.takes.words:
                for name in option.names:
                    values.append(f"        '{verb.name} {name}' = @({_listed(option.takes.words)})")
    return _filled(_POWERSHELL, VERBS=_listed(verb.name for verb in verbs), OPTIONS="\n".join(options),
                   VALUES="\n".join(values))  # fmt: skip


def _listed(words: Iterable[str]) -> str:
    return ", ".join(f"'{word}'" for word in words)
