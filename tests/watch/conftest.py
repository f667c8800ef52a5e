"""A watched folder with a clock of its own: no test waits for real time to pass."""

from __future__ import annotations

import itertools
import os
import shutil
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

from shpb.cli.reduce import Outputs
from shpb.cli.watch_work import Work
from shpb.demo import DemoCampaign, write_demo
from shpb.watch.desk import Desk
from shpb.watch.events import Event, FiguresDrawn, Remark, SheetWanted, ShotRefused, ShotShown
from shpb.watch.journal import open_journal
from shpb.watch.loop import Watch
from shpb.watch.tasks import ReduceShot

_stamps = itertools.count(1_800_000_000_000_000_000, 1_000_000_000)


@dataclass
class InProcess:
    """Does the child's work here; ``hook`` sees each task first and may answer or raise in its place."""

    work: Callable[[object], Any]
    hook: Callable[[object], Any] | None = None
    asked: list[object] = field(default_factory=list)
    process_id: int | None = None

    def start(self) -> None:
        """Nothing to start."""

    def ask(self, task: object) -> Any:
        self.asked.append(task)
        answer = self.hook(task) if self.hook is not None else None
        return self.work(task) if answer is None else answer


@dataclass
class Bench:
    """The lab: a folder of the scope, the demo's records to put into it, and what was said."""

    lab: Path
    demo: Path
    figure: str = "none"
    now: float = 1000.0
    events: list[Event] = field(default_factory=list)
    watch: Watch = field(init=False)
    worker: InProcess = field(init=False)

    def __post_init__(self) -> None:
        self.start()

    @property
    def scope(self) -> Path:
        return self.lab / "scope"

    @property
    def results(self) -> Path:
        return self.scope / "results"

    def start(self, **changes: Any) -> None:
        """Begin the watch, as after a restart."""
        self.results.mkdir(parents=True, exist_ok=True)
        self.worker = InProcess(
            Work(Outputs(folder=self.results, figure=self.figure, csv=False, choices={}), as_json=True)
        )
        journal, _ = open_journal(self.results)
        values: dict[str, Any] = {"figure": self.figure != "none", **changes}
        self.watch = Watch(
            Desk(folder=self.scope, results=self.results, worker=self.worker, journal=journal, **values)
        )
        self.events = []

    def put(self, name: str, called: str | None = None) -> Path:
        """Let a file of the demo land, with a time stamp of its own."""
        target = self.scope / (called or name)
        shutil.copyfile(self.demo / "records" / name, target)
        return self.touch(target)

    def write(self, name: str, content: str | bytes) -> Path:
        """Write a file, with a time stamp of its own."""
        target = self.scope / name
        target.write_bytes(content.encode() if isinstance(content, str) else content)
        return self.touch(target)

    def touch(self, path: Path) -> Path:
        stamp = next(_stamps)
        os.utime(path, ns=(stamp, stamp))
        return path

    def shot(self, shot_id: str) -> None:
        """Let a shot of the demo land with its sheet."""
        for path in sorted((self.demo / "records").glob(f"{shot_id}[._]*")):
            self.put(path.name)

    def text_of(self, name: str) -> str:
        return (self.demo / "records" / name).read_text("utf-8")

    def turn(self, seconds: float = 4.0, *, step: float = 0.5) -> list[Event]:
        """Let time pass; return what was said meanwhile."""
        said: list[Event] = []
        for _ in range(round(seconds / step)):
            said += self.watch.step(self.now)
            self.now += step
        self.events += said
        return said

    # --- what was said ---

    @property
    def shown(self) -> list[ShotShown]:
        return [event for event in self.events if isinstance(event, ShotShown)]

    @property
    def refused(self) -> list[ShotRefused]:
        return [event for event in self.events if isinstance(event, ShotRefused)]

    @property
    def wanted(self) -> list[SheetWanted]:
        return [event for event in self.events if isinstance(event, SheetWanted)]

    @property
    def drawn(self) -> list[FiguresDrawn]:
        return [event for event in self.events if isinstance(event, FiguresDrawn)]

    @property
    def remarks(self) -> list[str]:
        return [
            f"{e.about}: {e.text}" for e in self.events if isinstance(e, Remark) and "seen;" not in e.text
        ]

    @property
    def reductions(self) -> int:
        return sum(isinstance(task, ReduceShot) for task in self.worker.asked)

    @property
    def stored(self) -> list[str]:
        return sorted(path.name for path in self.results.glob("*.h5"))


@pytest.fixture(scope="session")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    return write_demo(tmp_path_factory.mktemp("watched") / "demo")


@pytest.fixture
def bench(campaign: DemoCampaign, tmp_path: Path) -> Bench:
    """A lab with the demo's rig files and an empty folder of the scope."""
    shutil.copytree(campaign.folder / "calibration", tmp_path / "calibration")
    (tmp_path / "scope").mkdir()
    return Bench(tmp_path, campaign.folder)
