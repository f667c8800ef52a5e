"""``shpb forms``: forms for a new lab to fill in."""

from __future__ import annotations

import argparse
from pathlib import Path

NAME = "forms"
HELP = "write a rig file, a shot sheet and a shot list to fill in"
DESCRIPTION = """\
Write a commented rig file, shot sheet and shot list into a folder: every key
with its unit, its meaning, an example value, and whether it may be left out."""
EXAMPLE = """\
example:
  shpb forms my-lab
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument("folder", type=Path, metavar="FOLDER", help="folder to write to; made if need be")


def run(options: argparse.Namespace) -> int:
    """Write the three forms."""
    from shpb.cli.status import DONE
    from shpb.rig.templates import write_templates
    from shpb.view.text import printable

    for path in write_templates(options.folder):
        print(printable(path))
    return DONE
