"""``shpb forms``: forms for a new lab to fill in."""

from __future__ import annotations

import argparse
from collections.abc import Sequence
from pathlib import Path

HELP = "write rig file, shot sheet, shot list and calibration session to fill in"
DESCRIPTION = """\
Write a commented rig file, shot sheet, shot list and calibration session into
a folder: every key with its unit, its meaning, an example value, and whether it
may be left out."""
EXAMPLE = """\
example:
  shpb forms my-lab
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument("folder", type=Path, metavar="FOLDER", help="folder to write to; made if need be")
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")


def run(options: argparse.Namespace) -> int:
    """Write the forms."""
    from shpb.cli.status import DONE
    from shpb.rig.templates import write_templates
    from shpb.view.text import printable

    files = write_templates(options.folder)
    if options.json:
        _print_json(files)
    else:
        for path in files:
            print(printable(path))
    return DONE


def _print_json(files: Sequence[Path]) -> None:
    from shpb.view.summary import head, json_text

    said = head("shpb forms")
    print(json_text(said | {"files_written": [str(path) for path in files]}))
