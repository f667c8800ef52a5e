"""Topics about working with the program: result files, watching, exit statuses, JSON."""

from __future__ import annotations

from collections.abc import Sequence

from shpb.view.help.key_topics import see_also
from shpb.view.help.page import HelpPage

Field = tuple[str, str, str]  # path in the file, unit, meaning


def files(fields: Sequence[Field]) -> str:
    """The files that are written, the HDF5 layout among them."""
    page = HelpPage("files", "The files that are written: HDF5, CSV, figures, reports.")
    page.paragraph(
        "Every file is written beside its place, synced and then renamed: it is whole or not there. The "
        "results of another shot and files that this program did not write are never written over; raw "
        "records are never touched."
    )
    page.heading("WHERE THEY GO")
    for name, words in (
        ("results/ID.h5", "one HDF5 file for each shot, beside the sheet or list, or in --results"),
        ("results/ID.png", "its page; --figure pdf or svg, or none"),
        ("results/ID.csv", "its curves, with --csv; `shpb export` writes them later"),
        ("results/ID.html", "its report, by `shpb report`; campaign.html for a campaign"),
        ("merged/merged.h5", "a merge, with its figures and tables beside it"),
        ("RIG_DATE.toml", "a calibration, beside the rig file"),
    ):
        page.pair(name, words)
    page.heading("THE HDF5 FILE OF A SHOT")
    page.paragraph(
        "SI units as attributes of every array; groups of curves carry NXdata attributes, so any "
        "general HDF5 viewer plots "
        "them. The root holds format, format_version, program_version, created_utc, shot_id and verdict."
    )
    for name, words in (
        ("/record", "voltages as acquired, channels, sample interval, trigger offset, file names and sha256"),
        ("/rig", "rig file and shot sheet word for word, and every number as used; the calibration file"),
        (
            "/pulse/...",
            "incident, reflected, transmitted: strain at the gauge, windows and feet, automatic and "
            "used; by_hand",
        ),
        ("/wave", "the three pulses at the specimen faces"),
        (
            "/response",
            "forces, velocities, rates, strains, stresses, R; what counts as attributes; flow_stress",
        ),
        ("/trust", "uncertainties, budget and findings; closure; draws"),
    ):
        page.pair(name, words)
    page.heading("ARRAYS")
    for path, unit, label in fields:
        page.pair(path, f"{label}{f' [{unit}]' if unit else ''}", 40)
    page.heading("IN PYTHON")
    page.lines(
        'import shpb\n\nshot = shpb.load("results/S-014.h5")\nstress = shot["response/true_stress"]  # Pa\n'
        "again = shot.reduce_again()  # the same arrays, bit for bit"
    )
    see_also(page, ("methods", "merge", "json"))
    return page.text


def watch() -> str:
    """Watching a folder."""
    page = HelpPage("watch", "Watching: each record that lands in a folder is reduced and shown.")
    page.paragraph(
        "`shpb watch FOLDER --rig FILE` looks at the folder the scope writes into, a local disk or a "
        "share. A record is taken up when its size has stood still and its reader says that it is whole; "
        "temporary, hidden and empty files are left alone, and files of one shot, one for each channel, "
        "are taken together."
    )
    page.heading("WHICH SHOT IT IS")
    page.paragraph(
        "A record belongs to the shot sheet or the row of a shot list that names it; sheets are looked for "
        "in the watched folder, and where --sheets says. A record that nobody names is asked about at the "
        "terminal: the few numbers that are missing. The answers become a shot sheet, and are never asked "
        "for again."
    )
    page.heading("WHAT IS SHOWN")
    page.paragraph(
        "Verdict, what to look at, how the shot compares with earlier ones at this condition, and what to "
        "change for the next. A striker speed that is proposed is arithmetic, no leave to fire: what bars, "
        "gun and catcher stand, and the rules of the laboratory, come first. A verdict is about data: do "
        "not go near the rig because it has appeared."
    )
    page.heading("WHEN SOMETHING GOES WRONG")
    page.paragraph(
        "Bad files, damaged HDF5, a full disk or a share that is gone are said and tried again; the "
        "watching goes on. Each shot is reduced in a child process with a time limit. Ctrl-C ends, and "
        "everything stored is whole; what lands meanwhile is found at the next start. A sheet that is "
        "corrected has its shot reduced again."
    )
    see_also(page, ("shot-sheet", "checks", "exit-status"))
    return page.text


def exit_status() -> str:
    """Exit statuses."""
    page = HelpPage("exit-status", "Exit status: what a script can rely on.")
    page.heading("STATUS")
    page.pair("0", "done", 12)
    page.pair("1", "failed: the disk, the system, or a fault of the program", 12)
    page.pair(
        "2", "bad input or usage: the message names file, key or option, what was found, and the mend", 12
    )
    page.pair(
        "3", "done, but a shot is rejected (reduce, adjust, recalibrate, watch --once); or a finding must be "
        "understood before a calibration is put in force (calibrate)", 12,
    )  # fmt: skip
    page.heading("STREAMS")
    page.paragraph(
        "Results go to standard output, messages and progress to standard error. On a terminal messages "
        "are wrapped at 80 columns and progress is a bar; through a pipe each message stays on its line "
        "and progress is a line now and then. Words carry the meaning: with NO_COLOR set, or through a "
        "pipe, nothing is lost."
    )
    see_also(page, ("json",))
    return page.text


def as_json(version: int) -> str:
    """JSON for other programs."""
    page = HelpPage("json", "JSON: the same results for other programs.")
    page.paragraph(
        "Every verb has --json. What it prints is one JSON document on standard output (`shpb "
        "watch`: one for each event, on a line of its own), with "
        f'"schema" and "schema_version" (now {version}). The version grows when a key changes its '
        "meaning or goes; new keys may come at any time. Keys carry SI units; a number that is not "
        "known is null. On failure "
        '"error" says what, where and the mend, and the exit status is not 0.'
    )
    see_also(page, ("exit-status", "files"))
    return page.text
