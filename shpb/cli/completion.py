"""``shpb completion``: a script that lets a shell complete verbs, options, choices and file names."""

from __future__ import annotations

import argparse

HELP = "print a script that completes commands in your shell"
DESCRIPTION = """\
Print a script for a shell, made from this version's verbs and options. It
completes verbs, options, what an option can be, help topics, and file names
of the kinds that a verb takes."""
EXAMPLE = """\
bash, in ~/.bashrc:
  eval "$(shpb completion bash)"
zsh, in ~/.zshrc, below compinit:
  eval "$(shpb completion zsh)"
fish:
  shpb completion fish > ~/.config/fish/completions/shpb.fish
PowerShell, in $PROFILE:
  shpb completion powershell | Out-String | Invoke-Expression
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    from shpb.cli.completion_scripts import SHELLS

    verb.add_argument("shell", choices=SHELLS, help="which shell")
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")


def run(options: argparse.Namespace) -> int:
    """Print the script."""
    from shpb.cli.completion_scripts import described, script
    from shpb.cli.main import verb_parsers
    from shpb.cli.status import DONE

    text = script(options.shell, described(verb_parsers()))
    if options.json:
        from shpb.view.summary import head, json_text

        said = head("shpb completion")
        print(json_text(said | {"shell": options.shell, "script": text}))
    else:
        print(text)
    return DONE
