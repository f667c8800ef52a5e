"""``shpb demo``: a complete working folder of an invented campaign, written and reduced."""

from __future__ import annotations

import argparse
from collections.abc import Sequence
from pathlib import Path

HELP = "write a demo campaign of an invented lab and reduce it"
DESCRIPTION = """\
Write a complete working folder of an invented lab (rig files, records in
several formats, shot sheets, a shot list, quasi-static curves) and reduce
every shot. Good shots and bad: out of equilibrium, clipped, overlapping,
swapped channels, a loose gauge, a bar that yields.
With --merge it is a larger campaign: two alloys at three rates and five
temperatures, with repeats and slow tests, to be merged; no figures.
With --calibration it is calibration shots: a bar alone, bars together,
shunt resistors, on two days; and acrylic bars. Written, not evaluated."""
EXAMPLE = """\
examples:
  shpb demo first-campaign
  shpb demo two-alloys --merge
  shpb demo bench-days --calibration
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument("folder", type=Path, metavar="FOLDER", help="new or empty folder")
    which = verb.add_mutually_exclusive_group()
    which.add_argument("--merge", action="store_true", help="a larger campaign, made to be merged")
    which.add_argument("--calibration", action="store_true", help="calibration shots of two rigs")
    verb.add_argument("--write-only", action="store_true", help="write the folder, reduce nothing")
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")


def run(options: argparse.Namespace) -> int:
    """Write the campaign, then reduce it as ``shpb reduce`` would."""
    import sys

    from shpb.cli.batch import gather, start_workers, usual_workers
    from shpb.cli.reduce import Outputs, load_what_workers_need, reduce_all
    from shpb.cli.status import DONE, REJECTED
    from shpb.demo.campaign import write_demo
    from shpb.view.text import printable

    if options.calibration:
        return _write_calibration(options)
    workers = usual_workers()
    # While the records are computed the workers load what they need.
    pool = None if options.write_only else start_workers(workers, load_what_workers_need)
    try:
        campaign = write_demo(options.folder, to_merge=options.merge, progress=_say_stage)
    except BaseException:
        if pool is not None:
            pool.shutdown(wait=False, cancel_futures=True)
        raise
    print(f"demo campaign written to {printable(campaign.folder)}", file=sys.stderr)
    if options.write_only:
        if options.json:
            _print_json(
                campaign.folder, "shots", [shot.sheet for shot in campaign.shots if shot.sheet is not None]
            )
        return DONE
    sheets = [shot.sheet for shot in campaign.shots if shot.sheet is not None]
    tasks, _ = gather([*sheets, campaign.shot_list], rig_file=None)
    status = reduce_all(
        tasks,
        Outputs(folder=campaign.folder / "results", figure="none" if options.merge else "png"),
        as_json=options.json,
        full=False,
        workers=workers,
        pool=pool,
    )
    if options.merge:
        print(f"next: shpb merge {printable(campaign.folder)}", file=sys.stderr)
    # Rejected shots are part of the demo: it is done when all is as planned.
    return DONE if status == REJECTED else status


def _write_calibration(options: argparse.Namespace) -> int:
    """Write the calibration sessions and say how to go on."""
    import sys

    from shpb.cli.status import DONE
    from shpb.demo.campaign import write_calibration_demo
    from shpb.view.text import printable

    written = write_calibration_demo(options.folder, progress=_say_stage)
    print(f"calibration shots written to {printable(written.folder)}", file=sys.stderr)
    sessions = [session.session_file for session in written.sessions]
    if options.json:
        _print_json(written.folder, "sessions", sessions)
    else:
        for path in sessions:
            print(f"next: shpb calibrate {printable(path)}", file=sys.stderr)
    return DONE


def _say_stage(words: str) -> None:
    """What is being done, on a terminal: it takes some seconds, and how many nobody knows."""
    import sys

    if sys.stderr.isatty():
        print(f"{words} ...", file=sys.stderr)


def _print_json(folder: Path, what: str, files: Sequence[Path]) -> None:
    from shpb.view.summary import head, json_text

    said = head("shpb demo")
    print(json_text(said | {"folder": str(folder), what: [str(path) for path in files]}))
