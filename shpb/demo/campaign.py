"""Write the demo campaign into a folder, whole or not at all, and never over anyone's own files."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from importlib import resources
from pathlib import Path

from shpb.demo.calibration_files import calibration_files
from shpb.demo.calibration_scenario import calibration_truths
from shpb.demo.calibration_truth import CalibrationTruth
from shpb.demo.folder import MARKER, Kind, earlier_files, marker, put, refuse_changed
from shpb.demo.materials import WRENMOOR
from shpb.demo.merge_files import MERGE_BENCHES, merge_files, merge_truth
from shpb.demo.paper import quasistatic_files, shot_list, shot_sheet
from shpb.demo.record_files import record_files
from shpb.demo.scenario import BENCHES, DemoShot, bench_text, demo_shots
from shpb.demo.scope import scope_record
from shpb.demo.truth import DemoTruth, campaign_truth

LIST_NAME = "shot_list.csv"

Progress = Callable[[str], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class WrittenShot:
    """One shot of the campaign and where its files are."""

    shot: DemoShot
    record_files: tuple[Path, ...]
    rig_file: Path
    sheet: Path | None  # None where the shot stands in the shot list


@dataclass(frozen=True, slots=True, kw_only=True)
class DemoCampaign:
    """The demo campaign as it lies in a folder."""

    folder: Path
    shots: tuple[WrittenShot, ...]
    shot_list: Path
    rig_files: tuple[Path, ...]
    quasistatic_files: tuple[Path, ...]


def write_demo(
    folder: str | Path, *, to_merge: bool = False, progress: Progress | None = None
) -> DemoCampaign:
    """Write a demo campaign: rig files, records, shot sheets, shot list, quasi-static curves.

    The files are made beside ``folder`` and moved in at the end, so that a crash leaves nothing half
    done. A folder that holds a demo campaign already is brought back to its first state; other
    files in it, results among them, are left alone.

    Parameters
    ----------
    folder : str or Path
        Made if it is not there.
    to_merge : bool
        The larger campaign of the same two alloys over rates and temperatures, in place of the one with a shot of
        every kind.
    progress : callable or None
        Told in a few words what is being done.

    Returns
    -------
    DemoCampaign

    Raises
    ------
    InputError
        If the folder holds files but no demo campaign, or the other one, or a file of it was changed since,
        or it cannot be written to. Nothing is changed then.

    Examples
    --------
    >>> campaign = write_demo("demo")  # doctest: +SKIP
    >>> campaign.shots[0].sheet  # doctest: +SKIP
    PosixPath('demo/records/W-01.toml')
    """
    folder = Path(folder)
    say = progress if progress is not None else _silent
    kind = Kind.TO_MERGE if to_merge else Kind.EVERY_KIND
    earlier = earlier_files(folder, kind)
    say("firing the shots")
    truths = merge_truth() if to_merge else campaign_truth()
    say("writing the records")
    if to_merge:
        files, shots = _to_merge_files(truths, folder)
    else:
        files, shots = _campaign_files(truths, folder)
    refuse_changed(folder, files, earlier)
    say("moving the files into place")
    put(folder, files)
    return DemoCampaign(
        folder=folder,
        shots=shots,
        shot_list=folder / LIST_NAME,
        rig_files=tuple(folder / _rig_name(bench) for bench in (MERGE_BENCHES if to_merge else BENCHES)),
        quasistatic_files=tuple(folder / name for name in files if name.startswith("quasistatic/")),
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class WrittenSession:
    """One calibration session of the demo, where its files are, and what is really true."""

    session_file: Path
    rig_file: Path
    truth: CalibrationTruth


@dataclass(frozen=True, slots=True, kw_only=True)
class DemoCalibration:
    """The calibration sessions of the demo as they lie in a folder, by date."""

    folder: Path
    sessions: tuple[WrittenSession, ...]


def write_calibration_demo(folder: str | Path, *, progress: Progress | None = None) -> DemoCalibration:
    """Write the calibration sessions of the invented laboratory: rig files, session files, records.

    Into a folder of their own, in the manner of :func:`write_demo`.

    Raises
    ------
    InputError
        As :func:`write_demo`.
    """
    folder = Path(folder)
    say = progress if progress is not None else _silent
    earlier = earlier_files(folder, Kind.CALIBRATION)
    say("firing the shots")
    files = calibration_files()
    files[MARKER] = marker(files, Kind.CALIBRATION)
    refuse_changed(folder, files, earlier)
    say("moving the files into place")
    put(folder, files)
    return DemoCalibration(
        folder=folder,
        sessions=tuple(
            WrittenSession(
                session_file=folder / truth.session_file, rig_file=folder / truth.rig_file, truth=truth
            )
            for truth in calibration_truths()
        ),
    )


def _silent(message: str) -> None:
    """Tell nobody."""


def _rig_name(bench: str) -> str:
    return f"calibration/{bench}.toml"


def _campaign_files(
    truths: dict[str, DemoTruth], folder: Path
) -> tuple[dict[str, bytes], tuple[WrittenShot, ...]]:
    """Every file of the campaign by its path within the folder, the marker last."""
    files = {_rig_name(bench): bench_text(bench).encode() for bench in BENCHES}
    shots: list[WrittenShot] = []
    listed: list[tuple[DemoTruth, str]] = []
    for truth in truths.values():
        shot, sheet = truth.shot, None
        own = record_files(shot, scope_record(truth))
        files.update({f"records/{name}": content for name, content in own.items()})
        if shot.alloy is WRENMOOR:
            sheet = f"records/{shot.shot_id}.toml"
            files[sheet] = shot_sheet(truth, tuple(own)).encode()
        else:
            (name,) = own
            listed.append((truth, f"records/{name}"))
        shots.append(
            WrittenShot(
                shot=shot,
                record_files=tuple(folder / "records" / name for name in own),
                rig_file=folder / _rig_name(shot.bench),
                sheet=None if sheet is None else folder / sheet,
            )
        )
    files[LIST_NAME] = shot_list(listed).encode()
    files.update({f"quasistatic/{name}": content for name, content in quasistatic_files().items()})
    files["README.txt"] = _readme().encode()
    files[MARKER] = marker(files, Kind.EVERY_KIND)
    return files, tuple(shots)


def _to_merge_files(
    truths: dict[str, DemoTruth], folder: Path
) -> tuple[dict[str, bytes], tuple[WrittenShot, ...]]:
    """The same for the campaign to merge: every shot stands in the list."""
    files = {_rig_name(bench): bench_text(bench).encode() for bench in MERGE_BENCHES}
    files.update(merge_files(truths, LIST_NAME))
    shots = tuple(
        WrittenShot(
            shot=truth.shot,
            record_files=(folder / "records" / f"{truth.shot.shot_id}.npz",),
            rig_file=folder / _rig_name(truth.shot.bench),
            sheet=None,
        )
        for truth in truths.values()
    )
    files[MARKER] = marker(files, Kind.TO_MERGE)
    return files, shots


def _readme() -> str:
    text = resources.files("shpb.demo").joinpath("texts", "README.txt").read_text(encoding="utf-8")
    lines = (f"  {shot.shot_id}  {shot.special}\n        expected: {shot.expected}" for shot in demo_shots())
    return text.replace("{shots}", "\n".join(lines))
