"""The examples in the docstrings of the public names, run as a reader would run them.

In them ``folder`` is a demo campaign as ``shpb demo`` writes it, and ``result`` its shot W-02 reduced.
"""

from __future__ import annotations

import doctest
import importlib
from pathlib import Path

import pytest

import shpb
from shpb.demo.campaign import write_demo


@pytest.fixture(scope="module")
def names(tmp_path_factory: pytest.TempPathFactory) -> dict[str, object]:
    folder = tmp_path_factory.mktemp("examples") / "demo"
    write_demo(folder)
    sheet = shpb.read_sheet(folder / "records" / "W-02.toml")
    assert sheet.rig_file is not None
    result = shpb.reduce(shpb.read_record(sheet.record_files), shpb.read_rig(sheet.rig_file), sheet)
    return {"folder": folder, "result": result, "Path": Path}


@pytest.mark.parametrize("name", [name for name in shpb.__all__ if name != "__version__"])
def test_example(name: str, names: dict[str, object]) -> None:
    value = getattr(shpb, name)
    module = importlib.import_module(value.__module__)
    tests = doctest.DocTestFinder(recurse=False).find(value, name, globs={**vars(module), **names})
    examples = [test for test in tests if test.examples]
    assert examples, f"shpb.{name} has no example"
    runner = doctest.DocTestRunner(optionflags=doctest.NORMALIZE_WHITESPACE)
    for test in examples:
        report: list[str] = []
        runner.run(test, out=report.append)
        assert not runner.failures, "".join(report)
