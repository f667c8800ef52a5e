"""``shpb adjust``: move windows and feet of one shot by hand, in a window or by options, kept with name and reason."""

from __future__ import annotations

import argparse
import math
import re
import sys
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.cli.usage import FIGURES
from shpb.errors import InputError, ShpbError

if TYPE_CHECKING:
    from shpb.adjust.desk import Desk
    from shpb.adjust.following import Move
    from shpb.cli.adjust_files import Opened
    from shpb.reduction import ShotResult
    from shpb.settings import Settings

HELP = "move the windows and feet of one shot by hand"
DESCRIPTION = """\
Move pulse windows and feet of one shot by hand and see what follows. SHOT is a
shot sheet (.toml) or a stored shot (.h5). Without a change among the options a
window opens: drag with the mouse, or use the keys named at its bottom. What was
changed, from what, by whom and why is stored in the shot file beside what the
program chose; nothing is changed before it is saved."""
EXAMPLE = """\
examples:
  shpb adjust results/s014.h5
  shpb adjust results/s014.h5 --reflected-window 340,520 \\
      --by "A. B." --why "bump of a loose cable at 530 us"
  shpb adjust shots/s014.toml --reflected-foot 367.4 --by "A. B." --why "noise"
  shpb adjust results/s014.h5 --reset reflected --by "A. B." --why "cable mended"

times in microseconds on the record's clock; automatic gives one back
exit status: 0 done, 1 failed, 2 bad input or usage, 3 done, the shot is rejected
"""

_PULSES = ("incident", "reflected", "transmitted")
_AUTOMATIC = "automatic"
_US = 1e-6


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    # Else a window that begins before the trigger, -20,160, would be taken for an option.
    verb._negative_number_matcher = re.compile(r"^-\.?\d")
    verb.add_argument("shot", type=Path, metavar="SHOT", help="shot sheet (.toml) or stored shot (.h5)")
    verb.add_argument("--rig", type=Path, metavar="FILE", help="rig file for a sheet that names none")
    verb.add_argument(
        "--results",
        type=Path,
        metavar="FOLDER",
        help="where the result of a sheet goes (default: results/ beside it)",
    )
    moves = verb.add_argument_group("changes without a window (microseconds on the record's clock)")
    for pulse in _PULSES:
        moves.add_argument(
            f"--{pulse}-window", metavar="START,END", help=f"window of the {pulse} pulse, or automatic"
        )
        moves.add_argument(f"--{pulse}-foot", metavar="TIME", help=f"foot of the {pulse} pulse, or automatic")
    moves.add_argument(
        "--reset",
        nargs="?",
        const="all",
        metavar="PULSE",
        help="give window and foot of one pulse, or of all, back to the program first",
    )
    kept = verb.add_argument_group("what is kept")
    kept.add_argument("--by", metavar="NAME", help="who answers for the change (else asked)")
    kept.add_argument(
        "--why", metavar="TEXT", help="why the program's own choice does not serve (else asked)"
    )
    kept.add_argument(
        "--figure",
        choices=FIGURES,
        help="figure to draw (default: those that stand beside the result, else png)",
    )
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")


def run(options: argparse.Namespace) -> int:
    """Adjust the shot."""
    from shpb.adjust.desk import Desk
    from shpb.adjust.following import Following
    from shpb.cli.adjust_files import open_shot

    wanted = _wanted(options)
    if options.json and not wanted:
        raise InputError(
            "there is no change to report",
            where="--json",
            mend="Name the change with options, such as --incident-window 10,160",
        )
    opened = open_shot(options.shot, options.rig, options.results)
    shot = Following(opened.record, opened.rig, opened.sheet, opened.settings)
    desk = Desk(shot, opened.settings)
    return _by_options(options, opened, desk, wanted) if wanted else _in_a_window(options, opened, desk)


# --- by options ---------------------------------------------------------------------------------


def _wanted(options: argparse.Namespace) -> dict[str, object]:
    """The settings that the options ask for, in seconds; None is the program's own choice."""
    wanted: dict[str, object] = {}
    if options.reset is not None:
        if options.reset not in (*_PULSES, "all"):
            raise InputError(
                f"found {options.reset!r}", where="--reset", mend=f"Give {', '.join(_PULSES)} or all"
            )
        for pulse in _PULSES if options.reset == "all" else (options.reset,):
            wanted |= {f"{pulse}_window_s": None, f"{pulse}_foot_s": None}
    for pulse in _PULSES:
        for part, count in (("window", 2), ("foot", 1)):
            text = getattr(options, f"{pulse}_{part}")
            if text is not None:
                times = _times(text, count, f"--{pulse}-{part}")
                wanted[f"{pulse}_{part}_s"] = times[0] if times and count == 1 else times
    return wanted


def _times(text: str, count: int, where: str) -> tuple[float, ...] | None:
    """Times [s] out of "10,160" in microseconds; None for "automatic"."""
    if text.strip().casefold() == _AUTOMATIC:
        return None
    try:
        times = tuple(float(part) for part in text.split(","))
    except ValueError:
        times = ()
    if len(times) != count or not all(map(math.isfinite, times)):
        example = "two times with a comma between, 10,160" if count == 2 else "one time, 367.4"
        raise InputError(
            f"found {text!r}",
            where=where,
            mend=f"Give {example} (microseconds, decimal point), or {_AUTOMATIC}",
        )
    if count == 2 and not times[0] < times[1]:
        raise InputError(f"found {text!r}", where=where, mend="Give the start before the end")
    return tuple(time * _US for time in times)


def _by_options(options: argparse.Namespace, opened: Opened, desk: Desk, wanted: dict[str, object]) -> int:
    from shpb.adjust.following import kept_now
    from shpb.cli.adjust_files import store
    from shpb.cli.status import DONE, REJECTED

    shot = desk.shot
    settings: Settings = opened.settings.replaced(**wanted)
    _require_inside(settings, shot.record_s)
    before = _as_it_stands(desk)
    moves = shot.moves(opened.settings, settings)
    if not moves:
        _say_nothing_changed(before, opened, as_json=options.json)
        return REJECTED if before.verdict == "reject" else DONE
    shot.reduced(settings)  # what cannot be reduced is refused before anybody is asked for a name
    kept = kept_now(
        _asked(options.by, "--by", "Who answers for this change? "),
        _asked(options.why, "--why", "Why does the program's own choice not serve? "),
        moves,
    )
    after, files = store(opened, shot.reduced(settings, (*opened.by_hand, kept)), options.figure)
    if options.json:
        _print_json(before, _Stands.of(after), moves, after, files)
    else:
        _print_text(before, after, moves, files)
    return REJECTED if after.verdict.value == "reject" else DONE


def _require_inside(settings: Settings, record_s: tuple[float, float]) -> None:
    """A window that runs out of the record would end where the record does, and not where it was asked to."""
    for pulse in _PULSES:
        window = getattr(settings, f"{pulse}_window_s")
        slack = 1e-9
        if window is not None and not record_s[0] - slack <= window[0] < window[1] <= record_s[1] + slack:
            raise InputError(
                f"the window from {window[0] / _US:.2f} to {window[1] / _US:.2f} us does not lie inside the record",
                where=f"--{pulse}-window",
                mend=f"The record runs from {record_s[0] / _US:.2f} to {record_s[1] / _US:.2f} us",
            )


def _asked(given: str | None, option: str, question: str) -> str:
    """What an option gives, or the answer at the terminal; never empty."""
    if given is None and sys.stdin is not None and sys.stdin.isatty():
        print(question, end="", file=sys.stderr, flush=True)
        given = sys.stdin.readline()
    if given is None or not given.strip():
        raise InputError(
            "is not given" if given is None else "is empty",
            where=option,
            mend=f"A change by hand is kept with name and reason: give {option} TEXT; nothing was stored",
        )
    return given


@dataclass(frozen=True, slots=True)
class _Stands:
    """What a shot says: the word of its verdict and the sentence."""

    verdict: str
    words: str

    @classmethod
    def of(cls, result: ShotResult) -> _Stands:
        from shpb.view.wording import verdict_sentence

        return cls(result.verdict.value, verdict_sentence(result))

    @property
    def line(self) -> str:
        return f"{self.verdict.upper()}  {self.words}"


def _as_it_stands(desk: Desk) -> _Stands:
    """What the shot says before the change; windows that give no curve are a reason to change them."""
    try:
        return _Stands.of(desk.shot.reduced(desk.settings))
    except ShpbError as error:
        return _Stands("failed", f"no curve from these windows: {error}")


def _say_nothing_changed(stands: _Stands, opened: Opened, *, as_json: bool) -> None:
    if as_json:
        from shpb.view.summary import json_text

        print(json_text(_content(opened.sheet.shot_id, stands, stands, (), [])))
    else:
        print(f"{stands.line}\nNothing differs from what stands already; nothing was stored.")


def _print_text(before: _Stands, after: ShotResult, moves: Sequence[Move], files: Sequence[Path]) -> None:
    from shpb.view.by_hand_words import change_words
    from shpb.view.terminal import shot_text
    from shpb.view.text import printable, wrapped

    lines = wrapped(printable(before.line), 80, "Before    ")
    lines += wrapped(printable(_Stands.of(after).line), 80, "After     ")
    for number, move in enumerate(moves):
        lines += wrapped(change_words(move), 80, ("" if number else "Changed").ljust(10))
    print("\n".join(lines), end="\n\n")
    print(shot_text(after))
    for path in files:
        print(f"written: {printable(path)}")


def _print_json(
    before: _Stands, stands: _Stands, moves: Sequence[Move], after: ShotResult, files: Sequence[Path]
) -> None:
    from shpb.view.summary import json_text, shot_json

    content = _content(after.sheet.shot_id, before, stands, moves, files)
    print(json_text(content | {"shot": shot_json(after)}))


def _content(
    shot_id: str, before: _Stands, after: _Stands, moves: Sequence[Move], files: Sequence[Path]
) -> dict[str, Any]:
    from shpb.view.by_hand_words import moves_json
    from shpb.view.summary import head

    return {
        **head("shpb adjust"),
        "shot_id": shot_id,
        "before": {"verdict": before.verdict, "verdict_in_words": before.words},
        "after": {"verdict": after.verdict, "verdict_in_words": after.words},
        "changes": moves_json(moves),
        "files": [str(path) for path in files],
    }


# --- in a window --------------------------------------------------------------------------------


def _in_a_window(options: argparse.Namespace, opened: Opened, desk: Desk) -> int:
    from shpb.adjust.following import kept_now
    from shpb.cli.adjust_files import store
    from shpb.cli.status import BAD_INPUT, DONE, REJECTED
    from shpb.view.adjust.show import show
    from shpb.view.text import printable

    shot = desk.shot
    now = opened

    def save(by: str, why: str) -> tuple[ShotResult, str]:
        nonlocal now
        kept = kept_now(by, why, desk.moves())
        result, files = store(now, shot.reduced(desk.settings, (*now.by_hand, kept)), options.figure)
        now = replace(now, settings=desk.settings, by_hand=result.by_hand)
        for path in files:
            print(f"written: {printable(path)}", flush=True)
        desk.kept()
        return result, f"stored in {printable(files[0].name)}"

    result = show(desk, save, by=options.by or "", why=options.why or "", history=opened.by_hand)
    if now is opened:
        print("Nothing was saved, and nothing was changed.")
    if result is None:
        print("These windows still give no curve.")
        return BAD_INPUT
    if now is not opened:
        print(_Stands.of(result).line)
    return REJECTED if result.verdict.value == "reject" else DONE
