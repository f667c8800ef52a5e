"""What the child process of ``shpb watch`` does: everything that opens a record, a shot file or a figure."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from shpb.cli.reduce import Outputs, draw_pages, load_what_workers_need, reduce_and_store
from shpb.errors import ShpbError
from shpb.watch.child import SetAside, content_of, look, read_earlier, refusal_of, shown_of
from shpb.watch.tasks import Drawn, DrawShot, Look, ReadEarlier, ReduceShot, Refusal, Refused, Shown

if TYPE_CHECKING:
    from shpb.reduction import ShotResult

_last: dict[str, ShotResult] = {}  # in the child: the shot reduced last, for its figure


@dataclass(frozen=True, slots=True)
class Work:
    """Does one task after the other; picklable, so that it can be handed to the child."""

    outputs: Outputs
    as_json: bool = False

    def __call__(self, task: object) -> object:
        """Answer one of the tasks of :mod:`shpb.watch.tasks`."""
        match task:
            case Look():
                return tuple(look(path) for path in task.paths)
            case ReduceShot():
                return self._reduce(task)
            case DrawShot():
                return self._draw(task)
            case ReadEarlier():
                return read_earlier(task.path)
        raise TypeError(f"no such task: {type(task).__name__}")

    def _reduce(self, task: ReduceShot) -> Shown | Refused:
        from shpb.cli.batch import Task

        try:
            self._require_results()
            aside = SetAside(task.earlier_name)
            result, files = reduce_and_store(
                Task(task.sheet, task.rig, task.named_in),
                self.outputs,
                before_saving=lambda result, store: self._ready(task, result, store, aside),
            )
        except _ChangedError:
            return Refused(Refusal.CHANGED, "the record has changed while it was read")
        except (ShpbError, OSError) as error:
            if content_of(task.sheet.record_files) != task.content:
                return Refused(Refusal.CHANGED, "the record has changed while it was read")
            return self._refused(error, task.sheet.shot_id)
        _last.clear()
        _last[files[0].name] = result
        return _shown(result, files, aside.names, as_json=self.as_json)

    def _require_results(self) -> None:
        # Else the missing folder of a share that went away would be made anew on the local disk.
        if not self.outputs.folder.is_dir():
            raise FileNotFoundError(None, "the folder is not there", str(self.outputs.folder))

    def _ready(self, task: ReduceShot, result: ShotResult, store: Path, aside: SetAside) -> None:
        if tuple(sorted(source.sha256 for source in result.record.sources)) != task.content:
            raise _ChangedError
        self._require_results()
        aside.move(result, store)

    def _draw(self, task: DrawShot) -> Drawn | Refused:
        from shpb.store.shot_file import load

        try:
            self._require_results()
            result = _last.get(task.result)
            if result is None:
                result = load(self.outputs.folder / task.result).reduce_again()
            return Drawn(tuple(map(str, draw_pages(result, self.outputs))))
        except (ShpbError, OSError) as error:
            return self._refused(error, "")

    def _refused(self, error: ShpbError | OSError, shot_id: str) -> Refused:
        from shpb.view.summary import error_json

        said = {"shot_id": shot_id, **error_json(error)} if self.as_json else {}
        text = str(error)
        if isinstance(error, OSError):
            text = f"{f'{error.filename}: ' if error.filename else ''}{error.strerror or error}"
        return Refused(refusal_of(error), text, said)


class _ChangedError(Exception):
    """The record is no longer the one that was looked at."""


def prepare() -> None:
    """Import all that a first shot needs, while the scope is still writing it."""
    import shpb.store.peek
    import shpb.store.shot_brief
    import shpb.view.listing
    import shpb.view.summary
    import shpb.view.watch_text  # noqa: F401

    load_what_workers_need()


def _shown(result: ShotResult, files: list[Path], aside: tuple[str, ...], *, as_json: bool) -> Shown:
    from shpb.view.summary import shot_json
    from shpb.view.wording import shot_line, verdict_sentence

    return shown_of(
        result,
        files,
        sentence=verdict_sentence(result),
        line=shot_line(result),
        aside=aside,
        json=shot_json(result) if as_json else {},
    )
