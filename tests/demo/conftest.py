"""The demo campaign, written once for all tests that only read it."""

from __future__ import annotations

from pathlib import Path

import pytest

from shpb.demo import DemoCampaign, write_demo


@pytest.fixture(scope="session")
def campaign(tmp_path_factory: pytest.TempPathFactory) -> DemoCampaign:
    folder: Path = tmp_path_factory.mktemp("lab") / "demo"
    return write_demo(folder)
