"""The child: warm, and no loss to the watch when it crashes, hangs, or has no memory left."""

from __future__ import annotations

import os
import signal
import sys
import time
from collections.abc import Iterator
from typing import Any

import pytest

from shpb.watch.worker import Worker, WorkerError

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="signals as on POSIX")


def work(task: Any) -> Any:
    """What a test asks of the child."""
    match task:
        case "who":
            return os.getpid()
        case "exit":
            os._exit(7)
        case "abort":
            os.kill(os.getpid(), signal.SIGSEGV)
        case "out of memory":
            os.kill(os.getpid(), signal.SIGKILL)
        case "hang":
            while True:
                time.sleep(1)
        case "no memory":
            raise MemoryError
        case "fault":
            raise ZeroDivisionError("of all things")
        case "noise":
            os.write(1, b"a library speaks")
            sys.stderr.write("and again")
            return "quiet"
    return task


def slow_start() -> None:
    """Imports that take longer than a task may."""
    time.sleep(1.5)


@pytest.fixture(scope="module")
def child() -> Iterator[Worker]:
    worker = Worker(work, limit_s=1.0)
    yield worker
    worker.stop()


def test_one_child_serves_task_after_task(child: Worker) -> None:
    first = child.ask("who")
    assert first == child.ask("who") == child.process_id
    assert first != os.getpid()


@pytest.mark.slow
@pytest.mark.parametrize(
    ("task", "words"),
    [
        ("exit", r"crashed \(exit status 7\)"),
        ("abort", r"crashed \(SIGSEGV\)"),
        ("out of memory", r"crashed \(SIGKILL; the system may have run out of memory\)"),
        ("hang", "no answer within 1 s: the reading hangs"),
    ],
)
def test_a_child_that_is_lost_is_replaced(child: Worker, task: str, words: str) -> None:
    before = child.ask("who")
    with pytest.raises(WorkerError, match=words):
        child.ask(task)
    assert child.process_id is None
    with pytest.raises(ProcessLookupError):
        os.kill(before, 0)
    child.start()  # at once, so that it is warm for the next record
    assert child.ask(("same", 1.5)) == ("same", 1.5)
    assert child.process_id != before


@pytest.mark.parametrize(
    ("task", "words"),
    [
        ("no memory", "not enough memory"),
        ("fault", r"a fault of the program \(ZeroDivisionError: of all things"),
    ],
)
def test_an_exception_costs_no_child(child: Worker, task: str, words: str) -> None:
    before = child.ask("who")
    with pytest.raises(WorkerError, match=words):
        child.ask(task)
    assert child.ask("who") == before


def test_what_libraries_print_stays_out_of_the_way(child: Worker, capfd: pytest.CaptureFixture[str]) -> None:
    assert child.ask("noise") == "quiet"
    assert capfd.readouterr() == ("", "")


def test_interrupted_in_mid_task_the_late_reply_is_not_taken_for_another(
    child: Worker, monkeypatch: pytest.MonkeyPatch
) -> None:
    child.ask("who")
    assert child._pipe is not None

    def poll(self: Any, timeout: float = 0.0) -> bool:
        raise KeyboardInterrupt

    monkeypatch.setattr(type(child._pipe), "poll", poll)
    with pytest.raises(KeyboardInterrupt):
        child.ask("first")
    monkeypatch.undo()
    assert child.ask("second") == "second"


def test_a_slow_start_is_not_taken_for_a_hang() -> None:
    worker = Worker(work, slow_start, limit_s=1.0)
    try:
        assert worker.ask("first") == "first"
    finally:
        worker.stop()
