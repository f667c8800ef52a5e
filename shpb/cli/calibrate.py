"""``shpb calibrate``: the shots of one day to dated values of the rig with uncertainties; and its history."""

from __future__ import annotations

import argparse
import dataclasses
from pathlib import Path
from typing import TYPE_CHECKING

from shpb.cli.usage import FIGURES, require_folder
from shpb.errors import InputError

if TYPE_CHECKING:
    from shpb.calibrate.calibration import Calibrated

HELP = "turn calibration shots into dated values of the rig"
DESCRIPTION = """\
Turn the calibration shots of one day into wave speeds, gauge positions and
sensitivities with uncertainties: a dated calibration file beside the rig file,
never over an earlier one. The rig file itself is not touched: the line that
puts the calibration in force is printed. With --trend, show every value of a
rig over all its calibrations."""
EXAMPLE = """\
examples:
  shpb calibrate session.toml
  shpb calibrate session.toml --into calibration --figure pdf
  shpb calibrate --trend calibration --rig "Bench 1"

A session file says what was fired and how: shpb forms writes one to fill in.

exit status: 0 done, 1 failed, 2 bad input or usage, 3 done, but a finding must
be understood before the calibration is put in force
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument("session", nargs="?", type=Path, metavar="SESSION", help="session file (TOML)")
    verb.add_argument(
        "--into",
        type=Path,
        metavar="FOLDER",
        help="where the calibration goes (default: beside the rig file)",
    )
    verb.add_argument("--figure", choices=FIGURES, default="png", help="kind of figure (default png)")
    verb.add_argument(
        "--trend",
        type=Path,
        metavar="FOLDER",
        help="instead of calibrating: every value over time, from all calibrations in a folder",
    )
    verb.add_argument(
        "--rig", metavar="NAME", help="with --trend: which rig, by its name, where the folder holds several"
    )
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")


def run(options: argparse.Namespace) -> int:
    """Calibrate, or show the history of a rig."""
    if (options.session is None) == (options.trend is None):
        raise InputError(
            "a session file or --trend is needed" if options.session is None else "both were given",
            where="shpb calibrate",
            mend="Give a session file to calibrate, or --trend FOLDER for the history",
        )
    if options.trend is not None:
        return _trend(options)
    if options.rig is not None:
        raise InputError(
            "the session names its rig", where="--rig", mend="Leave it out, or use it with --trend"
        )
    return _calibrate(options)


def _calibrate(options: argparse.Namespace) -> int:
    from shpb.calibrate.calibration import calibrate
    from shpb.calibrate.records import fired_shots
    from shpb.calibrate.session_file import read_session, session_on_rig
    from shpb.cli.progress import progress
    from shpb.cli.status import DONE, REJECTED
    from shpb.rig.overrides import settings_from
    from shpb.rig.rig_file import read_rig
    from shpb.view.calibrated import calibrated_json, calibrated_text, in_force_text
    from shpb.view.summary import json_text

    session = read_session(options.session)
    rig = read_rig(session.rig_file, as_stated=True)
    session = session_on_rig(session, rig)
    folder = session.rig_file.parent if options.into is None else options.into
    require_folder(folder, "--into")
    stem = session.name or f"{session.rig_file.stem}_{session.date[:10]}"
    fired = []
    # The fits take about as long as reading all records.
    with progress(2 * len(session.shots), "calibrating") as step:
        for one in fired_shots(session, rig):
            fired.append(one)
            step(len(fired))
        done = calibrate(dataclasses.replace(session, name=stem), rig, fired, settings_from(rig.settings))
        step(2 * len(session.shots))
    done, file, figure = _store(done, folder, stem, options.figure)
    if options.json:
        print(json_text(calibrated_json(done, str(file), str(figure or ""))))
    else:
        print(calibrated_text(done))
        print()
        print(in_force_text(done, str(file), str(session.rig_file)))
        if figure is not None:
            print(f"Figure: {figure}")
    return REJECTED if done.grave else DONE


def _store(done: Calibrated, folder: Path, stem: str, kind: str) -> tuple[Calibrated, Path, Path | None]:
    """Write the calibration under a free name, read it back, and draw its page."""
    from shpb.cli.reduce import file_stem
    from shpb.rig.calibration_file import free_name, read_calibration, write_calibration

    folder.mkdir(parents=True, exist_ok=True)
    path = free_name(folder, file_stem(stem))
    write_calibration(dataclasses.replace(done.calibration, name=path.stem), path)
    # What is shown is what the file says.
    done = dataclasses.replace(done, calibration=read_calibration(path))
    if kind == "none":
        return done, path, None
    from shpb.view.calibrated_page import save_calibrated_figure

    return done, path, save_calibrated_figure(done, path.with_suffix(f".{kind}"))


def _trend(options: argparse.Namespace) -> int:
    from shpb.calibrate.history import history_of, trends_of
    from shpb.cli.status import DONE
    from shpb.view.calibration_trend import trend_json, trend_text
    from shpb.view.summary import json_text

    calibrations = history_of(options.trend, options.rig or "")
    trends = trends_of(calibrations)
    rig = calibrations[-1].rig
    figure = None
    if options.figure != "none":
        from shpb.cli.reduce import file_stem
        from shpb.view.calibration_trend_page import save_trend_figure

        folder = options.into or options.trend
        require_folder(folder, "--into")
        folder.mkdir(parents=True, exist_ok=True)
        figure = save_trend_figure(rig, trends, folder / f"history_{file_stem(rig)}.{options.figure}")
    if options.json:
        print(json_text(trend_json(rig, calibrations, trends)))
    else:
        print(trend_text(rig, trends))
        if figure is not None:
            print(f"Figure: {figure}")
    return DONE
