"""Correlations of a rig: read with every mistake named, kept with the result, and felt in the budget."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.errors import FileMistakes, InputError
from shpb.reduction import ShotResult, reduce
from shpb.rig.correlations import NAMES, Correlation
from shpb.rig.rig import Rig
from shpb.rig.rig_file import rig_from_text
from shpb.store.plain import from_plain, to_plain
from tests.rig.conftest import RIG
from tests.synthetic import copper, record_of, rig, sheet, uniform_plastic_shot


def read(table: str) -> Rig:
    return rig_from_text(f"{RIG}\n[correlations]\n{table}\n", "rig.toml")


def test_pairs_are_read() -> None:
    found = read(
        '"incident gauge factor | transmitted gauge factor" = 0.8\n"bars: wave speed|bars: density" = -1'
    )
    assert found.correlations == (
        Correlation("incident gauge factor", "transmitted gauge factor", 0.8),
        Correlation("bars: wave speed", "bars: density", -1.0),
    )
    assert from_plain(Rig, to_plain(found)).correlations == found.correlations


@pytest.mark.parametrize(
    ("line", "said"),
    [
        ('"incident gain" = 0.5', "two different names"),
        ('"incident gain | incident gain" = 0.5', "two different names"),
        ('"incident gian | transmitted gain" = 0.5', "Did you mean incident gain"),
        ('"incident gain | transmitted gain" = 1.5', "from -1 to 1"),
        ('"incident gain | transmitted gain" = true', "from -1 to 1"),
        (
            '"incident gain | transmitted gain" = 0.5\n"transmitted gain | incident gain" = 0.5',
            "each pair once",
        ),
    ],
)
def test_mistakes_are_named(line: str, said: str) -> None:
    with pytest.raises(FileMistakes, match=said):
        read(line)


def _reduced(*correlations: Correlation) -> ShotResult:
    lab = dataclasses.replace(rig(), correlations=correlations)
    faces, _ = uniform_plastic_shot(lab, copper())
    return reduce(record_of(faces, lab), lab, sheet())


def test_gauges_of_one_packet_agree_better_about_equilibrium() -> None:
    # F_in and F_out scale together: the budget of R loses what the two factors do against each other, the stress by
    # one wave keeps all of its own.
    apart = _reduced()
    together = _reduced(Correlation("incident gauge factor", "transmitted gauge factor", 1.0))
    at = sum(apart.response.loading) // 2
    assert together.budget.u_force_difference[at] < 0.96 * apart.budget.u_force_difference[at]
    np.testing.assert_allclose(together.budget.u["stress_1w"], apart.budget.u["stress_1w"], rtol=1e-9)
    # Three-wave stress, the mean of both, is less certain: 2 r c_a c_b is added.
    assert together.budget.u["stress_3w"][at] > apart.budget.u["stress_3w"][at]
    assert any(line.source == "correlations" for line in together.budget.contributions)


def test_a_name_of_another_rig_is_refused() -> None:
    assert "incident bar: density" in NAMES
    with pytest.raises(InputError, match="incident bar: density"):
        _reduced(Correlation("incident bar: density", "incident gain", 0.5))  # these bars are of one stock
