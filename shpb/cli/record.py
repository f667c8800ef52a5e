"""``shpb record``: what a record file holds, before anything is done with it."""

from __future__ import annotations

import argparse
from pathlib import Path

HELP = "say what a record file holds: channels, interval, remarks"
DESCRIPTION = """\
Read a record (delimited text, NPZ, NPY, HDF5, MATLAB or TDMS; one file, or
one file a channel) and say what it holds: channels and their extremes, sample
interval, trigger offset, and what the reader noticed. Give --rig where the
file leaves something unsaid."""
EXAMPLE = """\
example:
  shpb record shots/s014.csv
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument("files", nargs="+", type=Path, metavar="FILE", help="the record, or one file a channel")
    verb.add_argument("--rig", type=Path, metavar="FILE", help="rig file that says what the record does not")
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")


def run(options: argparse.Namespace) -> int:
    """Read the record and describe it."""
    from shpb.cli.status import DONE
    from shpb.record.read import read_record
    from shpb.rig.rig import RecordHints
    from shpb.rig.rig_file import read_rig
    from shpb.view.summary import json_text, record_json
    from shpb.view.terminal import record_text

    hints = read_rig(options.rig).record if options.rig else RecordHints()
    record = read_record(options.files, hints)
    print(json_text(record_json(record)) if options.json else record_text(record))
    return DONE
