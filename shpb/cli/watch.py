"""``shpb watch``: reduce each record as it lands, and show at the bench what came of it."""

from __future__ import annotations

import argparse
import contextlib
import shutil
import signal
import sys
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from shpb.cli.reduce import add_choices, choices_in
from shpb.cli.status import BAD_INPUT, DONE, FAILED, REJECTED
from shpb.cli.usage import FIGURES, require_folder
from shpb.errors import InputError

if TYPE_CHECKING:
    from shpb.cli.watch_ask import Asker
    from shpb.watch.events import Event, SheetWanted, ShotRefused, ShotShown
    from shpb.watch.loop import Watch

HELP = "watch a folder: reduce and show each shot as its record lands"
DESCRIPTION = """\
Watch the folder that the scope writes into. Each record is picked up once it
is whole, matched to its shot sheet or its row of a shot list in the folder,
reduced, stored and shown: the verdict, what to look at, how it compares with
earlier shots at this condition, what to change for the next one. A record that
no sheet names is asked about at the terminal, and the answers become its
sheet. A sheet that is corrected has its shot reduced again. Ctrl-C ends; what
lands meanwhile is found at the next start."""
EXAMPLE = """\
examples:
  shpb watch scope --rig calibration/rig.toml --bell
  shpb watch scope --sheets shots.csv --rate 1500
  shpb watch scope --once --no-questions --json

A striker speed that is proposed is arithmetic, no leave to fire: what the bars,
the gun and the catcher stand, and the rules of the laboratory, come first.

exit status: 0 done, 1 failed, 2 bad input or usage, 3 with --once: done, a
shot is rejected
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument("folder", type=Path, metavar="FOLDER", help="folder that the scope writes into")
    verb.add_argument("--rig", type=Path, metavar="FILE", help="rig file for shots whose sheet names none")
    verb.add_argument(
        "--sheets", type=Path, action="append", default=[], metavar="FILE",
        help="shot list, shot sheet or folder of sheets that lies elsewhere; may be given several times",
    )  # fmt: skip
    verb.add_argument(
        "--results", type=Path, metavar="FOLDER", help="where results go (default: results/ in the folder)"
    )
    verb.add_argument("--figure", choices=FIGURES, default="png", help="kind of figure (default png)")
    verb.add_argument("--csv", action="store_true", help="write the curves as CSV too")
    verb.add_argument(
        "--rate", type=float, metavar="PER_S", help="strain rate wanted: a striker speed is proposed for it"
    )
    verb.add_argument("--once", action="store_true", help="deal with what is there, then end")
    verb.add_argument(
        "--no-questions", action="store_true", help="ask nothing: records without a sheet wait for one"
    )
    verb.add_argument("--bell", action="store_true", help="ring the terminal's bell at each verdict")
    verb.add_argument("--json", action="store_true", help="print one JSON object a line for each shot")
    verb.add_argument(
        "--time-limit", type=float, default=60.0, metavar="S",
        help="seconds after which the reading of a damaged file is given up (default 60)",
    )  # fmt: skip
    add_choices(verb)


def run(options: argparse.Namespace) -> int:
    """Watch until it is ended."""
    from shpb.cli.reduce import Outputs
    from shpb.cli.watch_ask import Asker, Lines
    from shpb.cli.watch_work import Work, prepare
    from shpb.rig.overrides import settings_from
    from shpb.watch.desk import Desk
    from shpb.watch.journal import clear_left_over, open_journal
    from shpb.watch.lock import hold
    from shpb.watch.loop import Watch
    from shpb.watch.shelf import Shelf
    from shpb.watch.worker import Worker

    results = _checked(options)
    choices = choices_in(options)
    settings_from(choices)  # a choice that cannot be is said now, not at the first shot
    outputs = Outputs(folder=results, figure=options.figure, csv=options.csv, choices=choices)
    results.mkdir(parents=True, exist_ok=True)
    lock = hold(results)
    journal, damaged = open_journal(results)
    for place in (options.folder, results):
        clear_left_over(place, journal.processes)
    worker = Worker(Work(outputs, as_json=options.json), prepare, limit_s=options.time_limit)
    desk = Desk(
        folder=options.folder,
        results=results,
        worker=worker,
        journal=journal,
        shelf=Shelf(tuple(options.sheets)),
        rig_file=options.rig,
        rate_per_s=options.rate,
        figure=options.figure != "none",
    )
    ask = not options.no_questions and sys.stdin.isatty() and sys.stderr.isatty()
    asker = Asker(desk, Lines(sys.stdin.fileno()) if ask else None)
    bench = _Bench(Watch(desk), asker, as_json=options.json, bell=options.bell, once=options.once)
    if damaged:
        bench.say("", damaged)
    try:
        with _ended_in_order():
            bench.watch_on()
    except KeyboardInterrupt:
        bench.say_ended()
        # Who watches ends by Ctrl-C; with --once it cuts short what was asked for.
        return FAILED if options.once else DONE
    finally:
        worker.stop()
        clear_left_over(results, journal.processes)
        if journal.changed and results.is_dir():
            with contextlib.suppress(Exception):
                journal.save()
        if lock is not None:
            lock.close()
    return bench.status()


def _checked(options: argparse.Namespace) -> Path:
    """What was named, looked at before anything begins; the results folder."""
    folder: Path = options.folder
    if not folder.is_dir():
        what = "this is a file" if folder.exists() else "there is no such folder"
        raise InputError(what, where=str(folder), mend="Name the folder that the scope writes into")
    results: Path = options.results or folder / "results"
    require_folder(results, "--results")
    if results.resolve() == folder.resolve():
        raise InputError(
            "results in the watched folder itself would be taken for records",
            where="--results",
            mend="Give another folder; results/ in the watched one is usual",
        )
    for path in options.sheets:
        if not path.exists():
            raise InputError("there is no such file or folder", where=str(path), mend="Check --sheets")
    if options.rig is not None:
        from shpb.rig.rig_file import read_rig

        read_rig(options.rig)
    if options.rate is not None and not 0 < options.rate < 1e7:
        raise InputError(f"found {options.rate:g}", where="--rate", mend="Give a strain rate in 1/s")
    if not 1 <= options.time_limit <= 86400:
        raise InputError(
            f"found {options.time_limit:g}", where="--time-limit", mend="Give 1 to 86400 seconds"
        )
    return results


@contextlib.contextmanager
def _ended_in_order() -> Iterator[None]:
    """Let a request to end, and the closing of the terminal, do what Ctrl-C does."""

    def end(_number: int, _frame: object) -> None:
        raise KeyboardInterrupt

    names = [name for name in ("SIGTERM", "SIGHUP") if hasattr(signal, name)]
    try:
        before = {name: signal.signal(getattr(signal, name), end) for name in names}
    except ValueError:  # not the main thread
        before = {}
    try:
        yield
    finally:
        for name, handler in before.items():
            signal.signal(getattr(signal, name), handler)


@dataclass(slots=True)
class _Bench:
    """What stands on the screen."""

    watch: Watch
    asker: Asker
    as_json: bool
    bell: bool
    once: bool
    _verdicts: list[str] = field(default_factory=list)
    _failed: bool = False
    _bad_input: bool = False
    _wanted: list[SheetWanted] = field(default_factory=list)

    def watch_on(self) -> None:
        """Turn after turn."""
        if not self.once:
            self.say(
                "", f"watching {self.watch.desk.folder}; results go to {self.watch.desk.results}; Ctrl-C ends"
            )
        while True:
            for event in self.watch.step(time.monotonic()):
                self.asker.break_line()
                self.show(event)
                self.asker.ask_again()
            self._say_wanted()
            self.asker.step()
            if self.once and not self.watch.busy and not self.asker.asking:
                return
            time.sleep(self.watch.pause_s(time.monotonic()))

    def show(self, event: Event) -> None:
        """Say one thing."""
        from shpb.watch.events import FiguresDrawn, Remark, SheetWanted, ShotRefused, ShotShown

        match event:
            case Remark():
                self.say(event.about, event.text)
            case ShotShown():
                self._show_shot(event)
            case ShotRefused():
                self._show_refused(event)
            case FiguresDrawn():
                self._say_written(event.shot_id, event.files)
            case SheetWanted():
                self._wanted += [] if self.asker.want(event) else [event]

    def _show_shot(self, event: ShotShown) -> None:
        from shpb.view.watch_text import bench_text, json_line, shot_record

        self._verdicts.append(event.shown.verdict)
        if self.as_json:
            print(json_line(shot_record(event)), flush=True)
        else:
            height = shutil.get_terminal_size().lines - 4 if sys.stdout.isatty() else None
            print(f"\n{bench_text(event, height=height, stressed=_may_stress(sys.stdout))}\n", flush=True)
            self._say_written(event.shown.shot_id, event.shown.files)
        self._ring()

    def _say_written(self, shot_id: str, files: tuple[str, ...]) -> None:
        self.say(f"shot {shot_id}", f"written: {', '.join(Path(name).name for name in files)}")

    def _show_refused(self, event: ShotRefused) -> None:
        from shpb.view.watch_text import json_line, refused_record, refused_text

        self._verdicts += ["reject"] if event.unusable else []
        self._bad_input = self._bad_input or (event.bad_input and not event.unusable)
        self._failed = self._failed or not (event.bad_input or event.unusable)
        if self.as_json:
            print(json_line(refused_record(event)), flush=True)
        else:
            print(f"\n{refused_text(event, stressed=_may_stress(sys.stdout))}\n", flush=True)
        self._ring()

    def _say_wanted(self) -> None:
        """Records that nobody can be asked about: many that lie there at the start are one remark, not hundreds."""
        if not self._wanted:
            return
        first, more = self._wanted[0], len(self._wanted) - 1
        self._wanted = []
        names = ", ".join(path.name for path in first.records)
        self.say(
            names + (f" and {more} more record{'' if more == 1 else 's'}" if more else ""),
            f"no shot sheet and no list names {'them' if more else 'it'}. Write {first.stem}.toml beside it "
            "with at least id, kind, record, material, diameter_mm and length_mm (shpb forms gives one to fill in), "
            "or a row in a shot list",
        )

    def _ring(self) -> None:
        if self.bell:
            print("\a", end="", file=sys.stderr, flush=True)

    def say(self, about: str, text: str) -> None:
        """A remark on the side: time of day, what it is about, what there is to say."""
        from shpb.view.watch_text import notice_text

        lines = notice_text(about, text, width=70)
        stamp = time.strftime("%H:%M:%S")
        for number, line in enumerate(lines):
            print(f"{stamp if number == 0 else ' ' * len(stamp)}  {line}", file=sys.stderr, flush=True)

    def say_ended(self) -> None:
        """The last words after Ctrl-C."""
        count = self.watch.desk.stored
        with contextlib.suppress(OSError):
            print(file=sys.stderr)
            self.say(
                "",
                f"stopped; {count} shot{'' if count == 1 else 's'} stored; what lands meanwhile is found at the "
                "next start",
            )

    def status(self) -> int:
        """What --once ends with, after saying what is left."""
        waiting = self.watch.waiting
        for about, why, told in waiting:
            if not told:
                self.say(about, why)
        count, left = self.watch.desk.stored, len(waiting)
        rest = f"; {left} record{'' if left == 1 else 's'} left waiting" if left else ""
        self.say("", f"{count} shot{'' if count == 1 else 's'} stored{rest}")
        if self._failed or self.watch.troubles:
            return FAILED
        if self._bad_input or any(why for _, why, _ in waiting):
            return BAD_INPUT
        return REJECTED if "reject" in self._verdicts else DONE


def _may_stress(stream: TextIO) -> bool:
    """Whether reverse video may be used."""
    import os

    return stream.isatty() and not os.environ.get("NO_COLOR") and os.environ.get("TERM", "dumb") != "dumb"
