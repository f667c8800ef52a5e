"""One closed-form shot to adjust, in SI, with no file at all."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import pytest

from shpb.adjust.desk import Desk
from shpb.adjust.following import Following
from shpb.record.record import Record
from shpb.settings import Settings
from tests.synthetic import copper, record_of, rig, sheet, uniform_plastic_shot


@cache
def closed_form_record() -> Record:
    """Elastic, then linearly hardening, in equilibrium throughout; 1 MS/s."""
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=1e-6)
    return record_of(faces, rig(), noise_v=0.002)


@pytest.fixture
def following() -> Callable[..., Following]:
    """The closed-form shot as it is adjusted."""

    def make(settings: Settings | None = None) -> Following:
        return Following(closed_form_record(), rig(), sheet(), settings or Settings())

    return make


@pytest.fixture
def desk(following: Callable[..., Following]) -> Desk:
    """A desk with nothing moved yet."""
    return Desk(following(), Settings())
