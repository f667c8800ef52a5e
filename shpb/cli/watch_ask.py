"""Asking at the terminal for the few numbers of a record without a sheet, while the watch goes on."""

from __future__ import annotations

import datetime
import os
import queue
import sys
import threading
from dataclasses import dataclass, field
from pathlib import Path

from shpb.errors import InputError, StoreError
from shpb.view.text import printable, wrapped
from shpb.watch.desk import Desk
from shpb.watch.events import SheetWanted
from shpb.watch.questions import ALL_LATER, LATER, LEAVE_OUT, Interview, Question, free_sheet_path, last_of
from shpb.whole_file import whole_file

_TEACH = (
    f"Enter takes what stands in [ ]; {LEAVE_OUT} leaves out what may be left out; "
    f"'{LATER}' puts it off until a sheet is there, '{ALL_LATER}' every record that waits."
)


class Lines:
    """Lines typed at the terminal, read in a thread of their own so that the watch need not wait for them."""

    def __init__(self, descriptor: int) -> None:
        self._descriptor = descriptor
        self._lines: queue.SimpleQueue[str | None] = queue.SimpleQueue()
        self._thread: threading.Thread | None = None

    def get(self) -> list[str | None]:
        """What was typed since; None is the end of the input."""
        if self._thread is None:
            self._thread = threading.Thread(target=self._read, name="answers", daemon=True)
            self._thread.start()
        found = []
        while not self._lines.empty():
            found.append(self._lines.get())
        return found

    def _read(self) -> None:
        held = b""
        while True:
            try:
                piece = os.read(self._descriptor, 4096)
            except OSError:
                piece = b""
            if not piece:
                self._lines.put(None)
                return
            held += piece
            *whole, held = held.split(b"\n")
            for line in whole:
                self._lines.put(line.decode(sys.stdin.encoding or "utf-8", "replace").rstrip("\r"))


@dataclass(slots=True)
class Asker:
    """Asks about one record after the other.

    Parameters
    ----------
    desk : Desk
    lines : Lines or None
        None where nobody can be asked.
    """

    desk: Desk
    lines: Lines | None
    _wanted: list[SheetWanted] = field(default_factory=list)
    _now: Interview | None = None
    _unwritten: tuple[Path, str] | None = None
    _refused: str = ""

    @property
    def asking(self) -> bool:
        """Whether there is anything to ask."""
        return self.lines is not None and (self._now is not None or bool(self._wanted))

    def want(self, event: SheetWanted) -> bool:
        """Take a record without a sheet in hand; whether somebody can be asked."""
        if self.lines is None:
            return False
        known = [one.records for one in self._wanted] + ([self._now.records] if self._now else [])
        if event.records not in known:
            self._wanted.append(event)
        return True

    def break_line(self) -> None:
        """Before something else is printed: leave the line of the open question."""
        if self._now is not None:
            print(file=sys.stderr)

    def ask_again(self) -> None:
        """After something else was printed: show the open question again."""
        if self._now is not None and self._now.question is not None:
            self._prompt(self._now.question)

    def step(self) -> None:
        """Take the answers that have come, and ask on."""
        if self.lines is None:
            return
        self._write_late()
        typed = self.lines.get()
        if self._now is None:
            self._begin()
            typed = typed[-1:] if typed[-1:] == [None] else []  # typed before the question: no answer to it
            if typed and self._now is None:
                self.lines = None
        for line in typed:
            if self._now is None:
                return  # typed ahead of a question that nobody has read yet
            self._take(line)

    def _begin(self) -> None:
        while self._wanted:
            wanted = self._wanted.pop(0)
            if self.desk.shelf.naming(wanted.records[0], wanted.stem) or not wanted.records[0].exists():
                continue  # a sheet has come meanwhile
            last = last_of(list(self.desk.shelf.shots()), wanted.records[0].parent)
            last |= self.desk.journal.answers
            today = datetime.date.today().isoformat()
            self._now = Interview(wanted.records, wanted.stem, last, self.desk.rig_path, today)
            names = ", ".join(printable(path.name) for path in wanted.records)
            others = len(self._wanted)
            more = f" {others} more wait{'s' if others == 1 else ''} for one too." if others else ""
            print(f"\nNo shot sheet names {names}.{more}", file=sys.stderr)
            print("\n".join(wrapped(_TEACH, 78)), file=sys.stderr)
            self.ask_again()
            return

    def _prompt(self, question: Question) -> None:
        assert self._now is not None
        unit = f", {question.unit.symbol.removeprefix('°')}" if question.unit.symbol else ""
        choices = f" ({', '.join(question.key.choices)})" if question.key.choices else ""
        proposed = self._now.proposed(question)
        shown = f" [{printable(proposed)}]" if proposed else ""
        print(f"  {question.words}{unit}{choices}{shown}: ", end="", file=sys.stderr, flush=True)

    def _take(self, line: str | None) -> None:
        assert self._now is not None
        said = ALL_LATER if line is None else line.strip().casefold()
        if said in (LATER, ALL_LATER):
            if said == ALL_LATER:
                self._wanted.clear()
            self._put_off(ended=line is None)
            return
        try:
            self._now.answer(line or "")
            if self._now.question is None:
                self._finish(self._now)
        except InputError as error:
            for part in str(error).splitlines():
                print(f"  {printable(part)}", file=sys.stderr)
        self.ask_again()

    def _put_off(self, *, ended: bool) -> None:
        assert self._now is not None
        name = f"{self._now.stem}.toml"
        print(f"\n  put off: waits for a sheet such as {printable(name)}", file=sys.stderr)
        self._now = None
        if ended:
            self.lines = None

    def _finish(self, interview: Interview) -> None:
        text = interview.sheet_text(self.desk.shelf)
        self.desk.journal.answers |= {k: v for k, v in interview.answers.items() if v != LEAVE_OUT}
        self.desk.journal.changed = True
        self._now = None
        self._unwritten = free_sheet_path(interview.folder, interview.stem), text
        self._write_late()

    def _write_late(self) -> None:
        """Write the sheet of the last answers; a folder that refuses is tried again at each turn."""
        if self._unwritten is None:
            return
        path, text = self._unwritten
        path = free_sheet_path(path.parent, path.stem) if path.exists() else path
        try:
            if not path.parent.is_dir():
                raise StoreError("the folder is not there", where=str(path.parent))
            with whole_file(path) as part:
                part.write_text(text, encoding="utf-8")
        except (StoreError, OSError) as error:
            if str(error) != self._refused:
                self._refused = str(error)
                print(f"  {printable(error)}. The answers are kept; it is tried again.", file=sys.stderr)
            return
        self._unwritten, self._refused = None, ""
        print(f"  written: {printable(path.name)}", file=sys.stderr)
