"""A dozen SIGKILLs at random moments of reduce and watch; the long runs are ``python -m tests.faults.kills``."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest


@pytest.mark.slow
@pytest.mark.skipif(not hasattr(os, "fork"), reason="needs fork")
@pytest.mark.parametrize(("verb", "count"), [("reduce", 8), ("watch", 3)])
def test_whatever_is_killed_leaves_whole_results_and_the_next_run_completes(verb: str, count: int) -> None:
    # In a process of its own: it forks, which the test runner's threads do not like.
    command = [
        sys.executable,
        "-m",
        "tests.faults.kills",
        "--verb",
        verb,
        "--count",
        str(count),
        "--seed",
        "5",
    ]
    done = subprocess.run(command, cwd=Path(__file__).parents[2], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr[-2000:]
    assert f"'killed': {count}" in done.stdout.splitlines()[-1]
