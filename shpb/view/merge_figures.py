"""The figures of a merge: four pages for each material, each a file.

Flow curves; stress against rate; stress against temperature; what each law leaves over and how its parameters hang
together. Nothing is interpreted: names from files are drawn letter by letter.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from shpb.merge.campaign import Merged, MergedMaterial
from shpb.view.figure import DPI, page_style, write_figure
from shpb.view.merge_flow_page import flow_page
from shpb.view.merge_laws_page import laws_page
from shpb.view.merge_rate_page import rate_page
from shpb.view.merge_temperature_page import temperature_page
from shpb.view.page import HEIGHT, WIDTH, Page

if TYPE_CHECKING:
    from matplotlib.figure import Figure

Draw = Callable[[Page, Merged, MergedMaterial], None]

PAGES: dict[str, Draw] = {
    "flow_curves": flow_page,
    "stress_against_rate": rate_page,
    "stress_against_temperature": temperature_page,
    "laws": laws_page,
}
_LONGEST = 80  # letters of a material's name in a file name


def merge_figure(merged: Merged, material: MergedMaterial, name: str) -> Figure:
    """Draw one page of a material on A4, landscape.

    Parameters
    ----------
    merged : Merged
    material : MergedMaterial
        One of ``merged.materials``.
    name : str
        Of :data:`PAGES`.

    Returns
    -------
    matplotlib.figure.Figure
        On no canvas but its own.
    """
    from matplotlib.figure import Figure

    with page_style():
        figure = Figure(figsize=(WIDTH, HEIGHT), dpi=DPI)
        PAGES[name](Page(figure), merged, material)
    return figure


def save_merge_figures(merged: Merged, folder: Path, kind: str) -> list[Path]:
    """Draw a merge and write its pages as ``MATERIAL_PAGE.kind``.

    The same merge gives the same bytes.

    Parameters
    ----------
    merged : Merged
    folder : Path
        Made if it is not there.
    kind : str
        "png", "pdf" or "svg"; "none" draws nothing.

    Returns
    -------
    list of Path
        What was written, by material and page.

    Raises
    ------
    InputError
        If ``kind`` is none of these.
    StoreError
        If a file cannot be written.
    """
    if kind == "none":
        return []
    written = []
    for stem, material in zip(material_stems(merged.materials), merged.materials, strict=True):
        for name in PAGES:
            written.append(_write(merged, material, name, Path(folder) / f"{stem}_{name}.{kind}"))
    return written


def _write(merged: Merged, material: MergedMaterial, name: str, path: Path) -> Path:
    return write_figure(lambda: merge_figure(merged, material, name), path)


def material_stems(materials: Sequence[MergedMaterial]) -> list[str]:
    """File names for the materials: harmless on every system, and different for different ones.

    A name of which something had to be replaced (a space alone becomes a plain underscore) or that two materials
    would share carries a hash. Where one material was tested in compression and in tension, that is said, too.
    """
    kinds: dict[str, set[str]] = {}
    for one in materials:
        kinds.setdefault(one.material, set()).add(one.kind.value)
    plain = [re.sub(r"[^A-Za-z0-9._-]", "_", one.material).strip(".")[:_LONGEST] for one in materials]
    owners: dict[
        str, set[str]
    ] = {}  # names that differ in upper and lower case alone are one to some systems
    for one, stem in zip(materials, plain, strict=True):
        owners.setdefault(stem.casefold(), set()).add(one.material)
    stems = []
    for one, stem in zip(materials, plain, strict=True):
        kept = stem == one.material.replace(" ", "_") and len(owners[stem.casefold()]) == 1
        mark = (
            ""
            if kept
            else "-" + hashlib.sha256(one.material.encode("utf-8", "surrogatepass")).hexdigest()[:8]
        )
        kind = f"_{one.kind.value}" if len(kinds[one.material]) > 1 else ""
        stems.append((stem or "material") + mark + kind)
    return stems


__all__ = ["PAGES", "material_stems", "merge_figure", "save_merge_figures"]
