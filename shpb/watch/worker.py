"""A child process that does the work which can crash, hang or run out of memory, warm and with a time limit.

A damaged HDF5 or MATLAB file can bring its library, and with it the interpreter, down or into an endless loop. So
everything that opens a record is done in a child that is started anew ("spawn", no shared state), kept for the next
task, and ended when it does not answer in time. The parent only ever waits.
"""

from __future__ import annotations

import contextlib
import multiprocessing
import signal
import sys
import time
from collections.abc import Callable
from multiprocessing.connection import Connection
from multiprocessing.process import BaseProcess
from typing import Any

TIME_LIMIT_S = 60.0
START_LIMIT_S = 300.0  # a busy machine, or a program that lies on a share, may take long to import
_POLL_S = 0.2  # so that Ctrl-C is heard on every system
_GRACE_S = 5.0  # by which the child's own alarm is later than the parent's


class WorkerError(Exception):
    """The child did not answer: it crashed, hung or had no memory left. The message says which, in plain words."""


class Worker:
    """One child process, started when it is needed and kept.

    Parameters
    ----------
    work : callable
        Takes a task and returns a reply; importable by name, since the child starts from nothing. It must not raise.
    prepare : callable
        Run once in the child: imports, so that the first task need not wait for them.
    limit_s : float
        How long a task may take, its imports apart.
    """

    def __init__(
        self,
        work: Callable[[Any], Any],
        prepare: Callable[[], None] | None = None,
        *,
        limit_s: float = TIME_LIMIT_S,
    ) -> None:
        self.limit_s = limit_s
        self._work, self._prepare = work, prepare
        self._process: BaseProcess | None = None
        self._pipe: Connection | None = None
        self._ready = False  # whether it has made its imports

    @property
    def process_id(self) -> int | None:
        """Of the child, None where there is none."""
        return None if self._process is None else self._process.pid

    def start(self) -> None:
        """Start the child if there is none; returns at once."""
        if self._process is not None and self._process.is_alive():
            return
        self.stop()
        context = multiprocessing.get_context("spawn")
        ours, theirs = context.Pipe()
        process = context.Process(
            target=_serve, args=(theirs, self._work, self._prepare, self.limit_s), daemon=True
        )
        try:
            process.start()
        except BaseException:
            ours.close()
            raise
        finally:
            theirs.close()
        self._process, self._pipe = process, ours

    def ask(self, task: object) -> Any:
        """Hand a task to the child and wait for its reply.

        Raises
        ------
        WorkerError
            If none comes; the child is gone then, and the next task starts another.
        """
        try:
            self.start()
        except OSError as error:  # no memory or no process left for another child
            raise WorkerError(f"the child process does not start: {error.strerror or error}") from None
        assert self._pipe is not None
        try:
            self._pipe.send(task)
            if not self._ready:
                self._wait(START_LIMIT_S, "the child process does not start")
                self._ready = bool(self._pipe.recv())
            self._wait(self.limit_s, "the reading hangs")
            answered, reply = self._pipe.recv()
        except (EOFError, OSError):
            code = self._end_of_crashed()
            raise WorkerError(_crash_words(code)) from None
        except BaseException:
            # Interrupted in the middle: whatever the child answers later must not be taken for another reply.
            self.stop()
            raise
        if not answered:
            raise WorkerError(str(reply))
        return reply

    def _wait(self, limit_s: float, what: str) -> None:
        """Wait until the child has said something."""
        assert self._pipe is not None
        deadline = time.monotonic() + limit_s
        while not self._pipe.poll(_POLL_S):
            if time.monotonic() > deadline:
                self.stop()
                raise WorkerError(f"no answer within {limit_s:.0f} s: {what}")

    def stop(self) -> None:
        """End the child at once; what it writes is whole or not there."""
        process, pipe, self._process, self._pipe = self._process, self._pipe, None, None
        self._ready = False
        if pipe is not None:
            pipe.close()
        if process is not None:
            process.kill()
            process.join()
            process.close()

    def _end_of_crashed(self) -> int | None:
        assert self._process is not None
        self._process.join(2.0)
        code = self._process.exitcode
        self.stop()
        return code


def _crash_words(code: int | None) -> str:
    if code is not None and code < 0:
        name = next((one.name for one in signal.Signals if one.value == -code), str(-code))
        killed = "; the system may have run out of memory" if name == "SIGKILL" else ""
        return f"the reading crashed ({name}{killed})"
    return "the reading crashed" + ("" if code is None else f" (exit status {code})")


def _serve(
    pipe: Connection, work: Callable[[Any], Any], prepare: Callable[[], None] | None, limit_s: float
) -> None:
    """The child: task after task until the parent is gone."""
    import faulthandler
    import os

    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the parent hears Ctrl-C and ends the child in order
    for stream in (sys.stdout, sys.stderr):
        # Nothing of what a library says may land between the lines of the parent.
        with contextlib.suppress(OSError, ValueError, AttributeError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())
    alarm = open(os.devnull, "w")  # noqa: SIM115 - for as long as the child lives
    if prepare is not None:
        prepare()
    with contextlib.suppress(OSError):
        pipe.send(True)  # ready
    while True:
        try:
            task = pipe.recv()
        except (EOFError, OSError):
            return
        # A parent that was killed ends no one: this clock runs in C and needs no interpreter that still answers.
        faulthandler.dump_traceback_later(limit_s + _GRACE_S, exit=True, file=alarm)
        reply = _answered(work, task)
        faulthandler.cancel_dump_traceback_later()
        try:
            pipe.send(reply)
        except (EOFError, OSError):
            return


def _answered(work: Callable[[Any], Any], task: object) -> tuple[bool, object]:
    try:
        return True, work(task)
    except MemoryError:
        return False, "there is not enough memory for this record"
    except Exception as error:  # a fault of the program: the loop must outlive it, and say it
        return False, f"a fault of the program ({type(error).__name__}: {error}); please report it"
