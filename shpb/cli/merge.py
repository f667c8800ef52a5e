"""``shpb merge``: a campaign of shots with its quasi-static curves, over strain rate and temperature."""

from __future__ import annotations

import argparse
from collections.abc import Callable, Sequence
from contextlib import ExitStack
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from shpb.cli.usage import FIGURES, require_folder
from shpb.errors import InputError, StoreError

if TYPE_CHECKING:
    from shpb.cli.merge_files import Campaign
    from shpb.merge.campaign import Merged
    from shpb.merge.settings import MergeSettings
    from shpb.store.merge_read import ChangedFile

HELP = "merge shots with quasi-static curves: table, sensitivities, laws"
DESCRIPTION = """\
Merge the shots of a campaign with its quasi-static curves: means of repeats,
flow stress at chosen plastic strains, rate and temperature sensitivity, and
fitted constitutive laws, all with uncertainties. Name a folder: shot files
(.h5, as `shpb reduce` writes them) and quasi-static tables are looked for in
it, in results/, in quasistatic/ and its other subfolders; or name files.
Shots that are rejected stay out, restricted ones enter inside their span."""
EXAMPLE = """\
examples:
  shpb merge campaign
  shpb merge campaign --laws johnson-cook --fact melting_temperature_C=1083
  shpb merge results/W-0*.h5 quasistatic --strains 0.05,0.1 --csv --figure pdf

exit status: 0 done, 1 failed, 2 bad input or usage
"""


def add_arguments(verb: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    verb.add_argument(
        "sources", nargs="+", type=Path, metavar="FOLDER", help="folder of a campaign, or files and folders"
    )
    verb.add_argument(
        "--results", type=Path, metavar="FOLDER", help="where results go (default: merged/ in the folder)"
    )
    verb.add_argument("--figure", choices=FIGURES, default="png", help="kind of figures (default png)")
    verb.add_argument("--csv", action="store_true", help="write merged table and flow curves as CSV too")
    verb.add_argument("--full", action="store_true", help="show every curve, strain and law")
    verb.add_argument("--json", action="store_true", help="print JSON for other programs")
    choices = verb.add_argument_group("choices of the merge")
    choices.add_argument(
        "--strains", metavar="LIST", help="true plastic strains of the table (default 0.02,0.05,0.1,0.15,0.2)"
    )
    choices.add_argument(
        "--indentation", choices=("out", "in"), default="out",
        help="whether the bar faces' indentation is taken out of the strain of the bars (default out)",
    )  # fmt: skip
    choices.add_argument(
        "--laws", metavar="LIST", help="laws to fit, with commas between, or none (default all)"
    )
    choices.add_argument(
        "--fact", action="append", default=[], metavar="NAME=VALUE",
        help="what a law takes as known, its unit in the name, such as melting_temperature_C=1083",
    )  # fmt: skip
    choices.add_argument(
        "--curve", action="append", default=[], metavar="PER_S,C",
        help="a rate and a temperature in C at which flow curves are wanted too, such as 500,250 (with --csv)",
    )  # fmt: skip
    choices.add_argument(
        "--offset", metavar="STRAIN", help="plastic strain of the offset yield (default 0.002)"
    )
    choices.add_argument(
        "--reference-rate", metavar="PER_S", help="rate at which C of Johnson-Cook is stated (default 1)"
    )


def run(options: argparse.Namespace) -> int:
    """Merge what was named."""
    from shpb.cli.merge_files import find, root_of
    from shpb.cli.status import DONE

    root = _existing(options.sources)
    folder = options.results or root / "merged"
    require_folder(folder, "--results")
    settings = _settings(options)
    outputs = Outputs(folder, options.figure, csv=options.csv)
    outputs.require_free()
    changed = _changed(outputs.store, root)
    if not options.json:
        _say_changed(changed)
    found, others = find(options.sources, skip=folder)
    campaign = _read(found, root_of(options.sources), others)
    merged = _merged(campaign, settings)
    outputs.require_not_inputs(campaign)
    outputs.require_free_figures(merged)
    files = outputs.write(merged, campaign)
    if not options.json:
        _print_text(merged, full=options.full)
    files += outputs.draw(merged)
    if options.json:
        _print_json(merged, changed, files)
    else:
        _print_written(files)
    return DONE


def _existing(sources: Sequence[Path]) -> Path:
    from shpb.cli.merge_files import root_of

    for source in sources:
        if not source.exists():
            raise InputError("there is no such file or folder", where=str(source), mend="Check the name")
    return root_of(sources)


# --- choices -------------------------------------------------------------------------------------------


def _settings(options: argparse.Namespace) -> MergeSettings:
    from shpb.cli.merge_facts import facts_from
    from shpb.merge.settings import MergeSettings

    chosen: dict[str, Any] = {
        "indentation_out": options.indentation == "out",
        "facts": facts_from(options.fact),
    }
    if options.strains is not None:
        chosen["strains"] = _strains(options.strains)
    if options.laws is not None:
        chosen["models"] = _laws(options.laws)
    if options.reference_rate is not None:
        chosen["reference_rate_per_s"] = _number(
            options.reference_rate, "--reference-rate", "Give a rate in 1/s"
        )
    if options.offset is not None:
        chosen["offset"] = _number(options.offset, "--offset", "Give a strain: 0.002 is 0.2 %", most=0.2)
    chosen["asked"] = tuple(_asked(text) for text in options.curve)
    return MergeSettings(**chosen)


def _asked(text: str) -> tuple[float, float]:
    """Rate [1/s] and temperature [K] of ``--curve``."""
    mend = "Give a rate in 1/s and a temperature in C with a comma between, such as 500,250"
    parts = text.split(",")
    if len(parts) != 2:
        raise InputError(f"found {text!r}", where="--curve", mend=mend)
    try:
        celsius = float(parts[1])
    except ValueError:
        raise InputError(f"found {text!r}", where="--curve", mend=mend) from None
    if not -273.15 < celsius < 5000:
        raise InputError(f"a temperature of {celsius:g} C", where="--curve", mend=mend)
    return _number(parts[0], "--curve", mend), celsius + 273.15


def _strains(text: str) -> tuple[float, ...]:
    mend = "Give true plastic strains with commas between, such as 0.02,0.05 (0.05 is 5 %)"
    return tuple(_number(part, "--strains", mend, most=3.0) for part in text.split(","))


def _number(text: str, where: str, mend: str, most: float = 1e12) -> float:
    try:
        value = float(text)
    except ValueError:
        value = 0.0
    if not 0 < value <= most:
        raise InputError(f"found {text.strip()!r}", where=where, mend=mend)
    return value


def _laws(text: str) -> tuple[str, ...]:
    from shpb.merge.models.registry import model_named
    from shpb.merge.settings import NO_MODELS

    keys = tuple(part.strip() for part in text.split(",") if part.strip())
    if keys == NO_MODELS:
        return NO_MODELS
    for key in keys:
        try:
            model_named(key)
        except InputError as error:
            raise InputError(error.what, where="--laws", mend=error.mend or "Or give none") from None
    if not keys:
        raise InputError(f"found {text!r}", where="--laws", mend="Give laws with commas between, or none")
    return tuple(dict.fromkeys(keys))


# --- work ----------------------------------------------------------------------------------------------


def _read(found: Sequence[Any], root: Path, others: int) -> Campaign:
    from shpb.cli.merge_files import read_campaign
    from shpb.cli.progress import progress

    if not found:
        raise InputError(
            f"there is no shot file and no quasi-static table ({others} other files)",
            where=str(root),
            mend="Reduce the shots first (`shpb reduce`), or name their folder; quasi-static tables state their "
            "facts in lines such as `# material: ...` above the numbers",
        )
    with progress(len(found), "reading") as step:
        campaign = read_campaign(found, root, step, passed_over=others)
    for said in campaign.bad.values():
        _say(said)
    return campaign


def _merged(campaign: Campaign, settings: MergeSettings) -> Merged:
    """The merge, with the files that could not be read among those that stayed out."""
    import dataclasses

    from shpb.merge.campaign import merge_campaign

    if not campaign.shots and not campaign.tests:
        told = "; ".join(f"{one.origin}: {one.why}" for one in campaign.left_out[:3])
        raise InputError("no file can be merged", where=str(campaign.root), mend=told)
    with ExitStack() as stack:
        merged = merge_campaign(campaign.shots, campaign.tests, settings, _later_progress(stack))
    return dataclasses.replace(merged, left_out=(*campaign.left_out, *merged.left_out))


def _later_progress(stack: ExitStack) -> Callable[[int, int], None]:
    """Progress whose total is known with the first step only."""
    from shpb.cli.progress import progress

    step: Callable[[int], None] | None = None

    def done(count: int, total: int) -> None:
        nonlocal step
        if step is None:
            step = stack.enter_context(progress(total, "merging"))
        step(count)

    return done


@dataclass(frozen=True, slots=True)
class Outputs:
    """What is written, and where."""

    folder: Path
    figure: str
    csv: bool

    @property
    def store(self) -> Path:
        """The HDF5 file of the merge."""
        return self.folder / "merged.h5"

    @property
    def tables(self) -> tuple[Path, ...]:
        """CSV files that are asked for."""
        return (self.folder / "merged.csv", self.folder / "flow_curves.csv") if self.csv else ()

    def require_free(self) -> None:
        """Refuse to write over what is no merge of this program, before any work."""
        from shpb.store.merge_file import require_replaceable

        require_replaceable(self.store)
        for path in self.tables:
            self._require_ours(path)

    def require_free_figures(self, merged: Merged) -> None:
        """The same for the figures, whose names begin as their materials do."""
        if self.figure == "none" or not self.folder.is_dir():
            return
        from shpb.view.merge_figures import PAGES, material_stems

        for stem in material_stems(merged.materials):
            for name in PAGES:
                self._require_ours(self.folder / f"{stem}_{name}.{self.figure}")

    def _require_ours(self, path: Path) -> None:
        # Where a merge stands, the files beside it are of this program too.
        if path.exists() and not self.store.exists():
            raise StoreError(
                "a file of this name stands there and was not written with a merge",
                where=str(path),
                mend="Choose another folder with --results, or move that file away",
            )

    def require_not_inputs(self, campaign: Campaign) -> None:
        """Nothing that goes in is written over."""
        for path in (self.store, *self.tables):
            if path.resolve() in campaign.inputs:
                raise StoreError(
                    "the merge would be written over what it was made from",
                    where=str(path),
                    mend="Choose another folder with --results",
                )

    def write(self, merged: Merged, campaign: Campaign) -> list[Path]:
        """Write HDF5 and CSV."""
        from shpb.store.merge_file import save_merge

        files = [save_merge(merged, self.store, places=campaign.places)]
        if self.csv:
            from shpb.store.merge_csv import export_flow_curves, export_merged_table

            table, curves = self.tables
            files += [export_merged_table(merged, table), export_flow_curves(merged, curves)]
        return files

    def draw(self, merged: Merged) -> list[Path]:
        """Draw the figures."""
        if self.figure == "none":
            return []
        from shpb.view.merge_figures import save_merge_figures

        return list(save_merge_figures(merged, self.folder, self.figure))


# --- words ---------------------------------------------------------------------------------------------


def _changed(store: Path, root: Path) -> list[ChangedFile]:
    """What has changed since the merge that stands there; an unreadable one says nothing."""
    from shpb.store.merge_file import changed_since

    if not store.exists():
        return []
    try:
        return changed_since(store, root)
    except StoreError as error:
        _say(f"{error.where}: {error.what}; what has changed since it was written is not known")
        return []


def _say_changed(changed: Sequence[ChangedFile]) -> None:
    from shpb.view.text import printable, wrapped

    for one in changed:
        print("\n".join(wrapped(printable(one.in_words()), 80)))
    if changed:
        print(flush=True)


def _say(error: str) -> None:
    from shpb.cli.say import say

    say(error)


def _print_text(merged: Merged, *, full: bool) -> None:
    from shpb.view.merge_text import merge_text

    print(merge_text(merged, full=full), flush=True)


def _print_written(files: Sequence[Path]) -> None:
    from shpb.view.text import printable

    print()
    for path in files:
        print(f"written: {printable(path)}")


def _print_json(merged: Merged, changed: Sequence[ChangedFile], files: Sequence[Path]) -> None:
    from shpb.view.merge_json import merge_json
    from shpb.view.summary import json_text

    said = merge_json(merged)
    said["changed_since_last_merge"] = [{"file": one.place, "gone": one.gone} for one in changed]
    said["files_written"] = [str(path) for path in files]
    print(json_text(said))
