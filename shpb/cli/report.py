"""``shpb report``: stored shots and campaigns as single HTML files, to hand over or print."""

from __future__ import annotations

import argparse
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.cli.say import say
from shpb.cli.usage import LACKING, require_folder, require_workers
from shpb.errors import InputError, StoreError

if TYPE_CHECKING:
    from shpb.cli.report_files import Campaign, ShotTask
    from shpb.store.shot_brief import ShotBrief
    from shpb.view.report.campaign_rows import CampaignRow

HELP = "write reports of shots and of a campaign as single HTML files"
DESCRIPTION = """\
Write reports to hand over or print: one HTML file for each shot, with its
verdict, curves, equilibrium, uncertainty budget, findings, calibration,
settings and hashes; and one for the campaign, with the list of its shots,
repeats, merged curves and laws. Everything is taken from stored results;
nothing is worked out anew. A file holds all it shows and needs no network.
Name shot files (.h5), the folder of a campaign (its shots, those in results/,
and merged.h5 in it or in merged/), or a merged.h5."""
EXAMPLE = """\
examples:
  shpb report results/S-014.h5
  shpb report first-campaign
  shpb report first-campaign --into handover

exit status: 0 done, 1 failed, 2 bad input or usage
"""

_MOST_NAMED = 8


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument(
        "sources", nargs="+", type=Path, metavar="SHOT", help="shot file, merged.h5 or folder of a campaign"
    )
    verb.add_argument(
        "--into", type=Path, metavar="FOLDER", help="where reports go (default: beside each result)"
    )
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")
    verb.add_argument(
        "--workers", type=int, metavar="N", help="processes for several shots (default: one a core)"
    )


def run(options: argparse.Namespace) -> int:
    """Report what was named."""
    from shpb.cli.report_files import plan
    from shpb.cli.status import BAD_INPUT, DONE, FAILED

    require_workers(options.workers)
    if options.into is not None:
        require_folder(options.into, "--into")
    found = plan(options.sources, options.into)
    for error in found.errors:
        say(str(error))
    shots = _report_shots(found.shots, options.workers)
    by_file = {one.file.resolve(): one for one in shots}
    campaigns = [
        _report_campaign(one, [by_file[path.resolve()] for path in one.shots]) for one in found.campaigns
    ]
    every = [*shots, *campaigns]
    for one in every:
        if one.error:
            say(one.error)
    if options.json:
        _print_json(shots, campaigns, found.errors)
    else:
        _print_text(shots, campaigns)
    if any(one.error and not one.bad_input for one in every):
        return FAILED
    return BAD_INPUT if found.errors or any(one.error for one in every) else DONE


# --- work ----------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class Reported:
    """What came of one report: small, fit to come from another process, and never an exception."""

    file: Path
    page: Path
    state: str = "failed"  # written, unchanged or failed
    shot_id: str = ""
    row: CampaignRow | None = None
    brief: ShotBrief | None = None  # what its repeats are held against
    shots: int = 0  # of a campaign
    error: str = ""
    bad_input: bool = False  # the file is at fault, not the disk


def _report_shots(tasks: Sequence[ShotTask], workers: int | None) -> list[Reported]:
    from shpb.cli.batch import in_parallel, usual_workers
    from shpb.cli.progress import progress

    # A process that has to load matplotlib first is worth it from a few shots on.
    usual = usual_workers() if len(tasks) >= 4 else 1
    found: dict[int, Reported] = {}
    with progress(len(tasks), "writing reports") as step:
        for index, one in in_parallel(report_shot, tasks, workers or usual, step):
            found[index] = one
    return [found[index] for index in range(len(tasks))]


def report_shot(task: ShotTask) -> Reported:
    """Write the report of one shot, unless the one that stands there was made from the same file."""
    from shpb.store.report_input import read_for_report
    from shpb.store.shot_brief import read_brief
    from shpb.view.report.campaign_rows import campaign_row
    from shpb.view.report.stored import ReportedShot

    failed = Reported(file=task.file, page=task.page)
    try:
        read = read_for_report(task.file)
        shot = ReportedShot(stored=read.stored, budget=read.budget, sha256=read.sha256)
        row, brief = campaign_row(shot), read_brief(task.file)
    except StoreError as error:
        return replace(failed, error=str(error), bad_input=True)
    except (InputError, *LACKING) as error:  # a record or a rig in it that cannot be
        return replace(failed, error=_lacks(task.file, error), bad_input=True)
    known = replace(failed, shot_id=shot.shot_id, row=row, brief=brief)
    try:
        return replace(known, state=_write_shot(task, shot))
    except StoreError as error:
        return replace(known, error=str(error))
    except (InputError, *LACKING) as error:
        return replace(known, error=_lacks(task.file, error), bad_input=True)


def _lacks(file: Path, error: Exception) -> str:
    problem = StoreError(
        f"cannot be reported: something in it is missing or wrong ({type(error).__name__}: {error})",
        where=str(file),
        mend="Reduce the raw record again",
    )
    return str(problem)


def _write_shot(task: ShotTask, shot: Any) -> str:
    from shpb.cli.report_files import require_ours, standing
    from shpb.view.report.html import shown
    from shpb.view.report.shot_page import CAMPAIGN, MADE_FROM, made_from, shot_page

    marks = standing(task.page)
    require_ours(task.page, marks, "shot", shown(shot.shot_id))
    before = {} if marks is None else marks
    campaign = task.campaign or before.get(CAMPAIGN, "")
    if before.get(MADE_FROM) == made_from(shot.sha256) and campaign == before.get(CAMPAIGN, ""):
        return "unchanged"
    return _write(task.page, shot_page(shot, campaign=campaign))


def _write(page: Path, text: str) -> str:
    """Write a page whole, unless the same stands there."""
    from shpb.whole_file import whole_file

    content = text.encode("utf-8")
    try:
        if page.read_bytes() == content:
            return "unchanged"
    except OSError:
        pass
    with whole_file(page) as part:
        part.write_bytes(content)
    return "written"


def _report_campaign(campaign: Campaign, shots: Sequence[Reported]) -> Reported:
    """Write the page of one campaign from the lines of its shots and its merge."""
    from shpb.cli.report_files import require_ours, standing
    from shpb.view.report.campaign_page import campaign_page

    read = [one for one in shots if one.row is not None]
    failed = Reported(file=campaign.merge or campaign.page.parent, page=campaign.page, shots=len(read))
    try:
        merge, changed = _merge_of(campaign)
    except StoreError as error:
        return replace(failed, error=str(error), bad_input=True)
    try:
        require_ours(campaign.page, standing(campaign.page), "campaign")
        page = campaign_page(
            campaign.name,
            [_with_addresses(one.row, one, campaign.page) for one in read if one.row is not None],
            repeats=[
                one.brief.repeat for one in read if one.brief is not None and one.brief.repeat is not None
            ],
            unreadable=[(one.file.name, one.error) for one in shots if one.row is None],
            merge=merge,
            changed=changed,
        )
        return replace(failed, state=_write(campaign.page, page))
    except StoreError as error:
        return replace(failed, error=str(error))
    except LACKING as error:
        return replace(failed, error=_lacks(campaign.merge or campaign.page, error), bad_input=True)


def _merge_of(campaign: Campaign) -> tuple[Any, list[str]]:
    """The campaign's merge, and what has changed since it was made, in words."""
    if campaign.merge is None:
        return None, []
    from shpb.cli.report_files import merged_root
    from shpb.store.merge_read import changed_since, load_merge

    merge = load_merge(campaign.merge)
    root = merged_root(campaign.merge, [one.place for one in merge.used])
    if root is None:
        return merge, ["none of the merged files is found where it lay, so whether they changed is not known"]
    return merge, [one.in_words() for one in changed_since(campaign.merge, root)]


def _with_addresses(row: CampaignRow, one: Reported, page: Path) -> CampaignRow:
    from shpb.cli.report_files import address

    written = address(one.page, page) if one.state != "failed" else ""
    return replace(row, page=written, file=address(one.file, page))


# --- words ---------------------------------------------------------------------------------------------


def _print_text(shots: Sequence[Reported], campaigns: Sequence[Reported]) -> None:
    from shpb.view.text import printable

    done = [one for one in shots if one.state != "failed"]
    if len(done) <= _MOST_NAMED:
        for one in done:
            print(f"{_state(one)} {printable(one.page)}")
    else:
        written = sum(one.state == "written" for one in done)
        folders = ", ".join(dict.fromkeys(printable(one.page.parent) for one in done))
        same = len(done) - written
        print(f"{written} reports of shots written to {folders}" + (f", {same} up to date" if same else ""))
    for one in campaigns:
        if one.state != "failed":
            print(f"{_state(one)} {printable(one.page)}")


def _state(one: Reported) -> str:
    return "written:" if one.state == "written" else "up to date:"


def _print_json(
    shots: Iterable[Reported], campaigns: Iterable[Reported], errors: Iterable[InputError]
) -> None:
    from shpb.view.summary import error_json, head, json_text

    def said(one: Reported, more: Mapping[str, Any]) -> dict[str, Any]:
        report = None if one.state == "failed" else str(one.page)
        return {
            **more,
            "file": str(one.file),
            "report": report,
            "state": one.state,
            "problem": one.error or None,
        }

    content = {
        **head("shpb report"),
        "shots": [
            said(one, {"shot_id": one.shot_id or None, "verdict": one.row.verdict if one.row else None})
            for one in shots
        ],
        "campaigns": [said(one, {"shots": one.shots}) for one in campaigns],
        "not_reported": [error_json(error) for error in errors],
    }
    print(json_text(content))
