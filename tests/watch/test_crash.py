"""The watch with its real child: records whose reading crashes, hangs or eats the memory cost no other shot."""

from __future__ import annotations

import os
import signal
import sys
import time
from dataclasses import dataclass

import pytest

from shpb.cli.reduce import Outputs
from shpb.cli.watch_work import Work, prepare
from shpb.watch.tasks import Look
from shpb.watch.worker import Worker
from tests.watch.conftest import Bench


@dataclass(frozen=True)
class Fragile:
    """The work of the child with a library in it that some files bring down, as damaged HDF5 does."""

    work: Work

    def __call__(self, task: object) -> object:
        if isinstance(task, Look):
            name = task.paths[0].name
            if name.startswith("crash"):
                os.kill(os.getpid(), signal.SIGSEGV)
            if name.startswith("hang"):
                time.sleep(600)
            if name.startswith("memory"):
                raise MemoryError
        return self.work(task)


@pytest.mark.slow
@pytest.mark.skipif(sys.platform == "win32", reason="signals as on POSIX")
def test_bad_records_among_good_ones(bench: Bench) -> None:
    outputs = Outputs(folder=bench.results, figure="none", csv=False, choices={})
    worker = Worker(Fragile(Work(outputs)), prepare, limit_s=3.0)
    bench.watch.desk.worker = worker
    try:
        for name in ("crash.h5", "hang.h5", "memory.h5"):
            bench.put("W-06.h5", name)
        bench.shot("W-02")
        bench.turn(12)
    finally:
        worker.stop()
    assert bench.stored == ["W-02.h5"]
    said = {refused.names[0]: refused.text for refused in bench.refused}
    assert set(said) == {"crash.h5", "hang.h5", "memory.h5"}
    assert "SIGSEGV" in said["crash.h5"]
    assert "no answer within 3 s: the reading hangs" in said["hang.h5"]
    assert "not enough memory" in said["memory.h5"]
    assert not any(refused.unusable or refused.bad_input for refused in bench.refused)
