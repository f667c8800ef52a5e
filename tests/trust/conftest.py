"""The good shot, made once."""

from __future__ import annotations

import pytest

from shpb.reduction import ShotResult
from tests.synthetic import FaceStrains
from tests.trust.shots import faces_of, run


@pytest.fixture(scope="session", name="faces")
def _faces() -> FaceStrains:
    return faces_of()


@pytest.fixture(scope="session", name="good")
def _good(faces: FaceStrains) -> ShotResult:
    return run(faces)
