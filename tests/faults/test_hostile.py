"""Hostile names and remarks through the verbs: nothing acts on them, nothing breaks on them."""

from __future__ import annotations

import contextlib
import io
import json
import re
import xml.etree.ElementTree as ET
from pathlib import Path

import pytest

from shpb.cli.main import main
from tests.faults.hostile import CONTROLS, TEXTS
from tests.faults.kills import prepare


def said(*arguments: str) -> tuple[int, str]:
    out = io.StringIO()
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(out):
        status = main(arguments)
    text = out.getvalue()
    assert all(character.isprintable() or character == "\n" for character in text)
    return status, text


def sheet_with(records: Path, text: str) -> Path:
    """The sheet of W-02 with a hostile text wherever a text may stand."""
    quoted = json.dumps(text)  # TOML escapes as JSON does
    sheet = (records / "W-02.toml").read_text(encoding="utf-8")
    for key in ("operator", "material", "lubricant"):
        sheet = re.sub(rf"(?m)^{key} = .*$", lambda _, key=key: f"{key} = {quoted}", sheet)
    sheet = sheet.replace("[specimen]", f"remarks = {quoted}\n\n[specimen]")
    path = records / "hostile.toml"
    path.write_text(sheet, encoding="utf-8")
    return path


@pytest.mark.parametrize("name", ["markup", "html", "formula", "path", "mathtext", "braces", "xml", "quotes"])
def test_a_hostile_text_in_every_field_of_a_sheet(name: str, tmp_path: Path) -> None:
    text = TEXTS[name]
    records = prepare(tmp_path / "lab")
    results = tmp_path / "results"
    sheet = str(sheet_with(records, text))
    status, _ = said("reduce", sheet, "--results", str(results), "--csv", "--figure", "svg")
    assert status == 0
    assert sorted(path.name for path in results.iterdir()) == ["W-02.csv", "W-02.h5", "W-02.svg"]
    assert not any("cript" in one.tag.rpartition("}")[2] for one in ET.parse(results / "W-02.svg").iter())
    status, shown = said("reduce", sheet, "--results", str(results), "--csv", "--figure", "none", "--json")
    assert status == 0
    assert json.loads(shown)["shots"][0]["shot_id"] == "W-02"
    cells = (results / "W-02.csv").read_text(encoding="utf-8").replace("\n", ",").split(",")
    assert not [cell for cell in cells if re.match(r"[=+@\t\r]|-(?![\d.])", cell.strip('"'))]
    assert said("report", str(results))[0] == 0
    (page, *_) = [p for p in results.rglob("*.html") if "W-02" in p.name] or list(results.rglob("*.html"))
    assert "<script>alert" not in page.read_text(encoding="utf-8")
    assert said("show", str(results / "W-02.h5"))[0] == 0


@pytest.mark.parametrize("name", [*CONTROLS, "right-to-left"])
def test_control_characters_in_a_sheet_are_refused_and_spelt_out(name: str, tmp_path: Path) -> None:
    records = prepare(tmp_path / "lab")
    sheet = sheet_with(records, {**TEXTS, **CONTROLS}[name])
    status, text = said("reduce", str(sheet), "--results", str(tmp_path / "results"))
    assert status == 2
    assert "text without control characters" in text
    assert not (tmp_path / "results").exists()
