"""The examples in the docstrings run and print what they say."""

from __future__ import annotations

import doctest
from types import ModuleType

import pytest

from shpb.record import read, stated, text_cells, units


@pytest.mark.parametrize("module", [read, stated, text_cells, units], ids=lambda module: module.__name__)
def test_examples(module: ModuleType) -> None:
    outcome = doctest.testmod(module)
    assert outcome.attempted > 0
    assert outcome.failed == 0
