"""Every call that the system may refuse, refused in turn; all kinds of refusal: ``python -m tests.faults.refusals``."""

from __future__ import annotations

import pytest

from tests.faults.refusals import REFUSALS, refuse_each


def test_templates_are_whole_or_not_there() -> None:
    counts, faults = refuse_each("forms")
    assert faults == []
    assert counts["refusals"] == len(REFUSALS) * counts["calls of a clean run"] > 60


@pytest.mark.slow
def test_reduce_keeps_the_old_result_or_has_the_new_one() -> None:
    counts, faults = refuse_each("reduce", rotate=True)
    assert faults == []
    assert counts["calls of a clean run"] > 20
    assert counts["status 1"] > 10
