"""Checks of the response: quiet on a good shot, speaking on the fault."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.limits import Limits
from shpb.quantity import Quantity
from shpb.reduction import ShotResult, reduce
from shpb.settings import DEFAULT, Correction
from shpb.trust.finding import Verdict, Weight
from tests.synthetic import FaceStrains, gauge, record_of, rig
from tests.trust.shots import finding, good_sheet, run


def test_balances_of_a_front_force_out_by_a_third(faces: FaceStrains, good: ShotResult) -> None:
    assert finding(good, "work balance").weight is Weight.FINE
    assert finding(good, "force equilibrium").weight is Weight.FINE
    record = record_of(faces, rig(), noise_v=0.002)
    wrong = rig(transmitted_gauge=gauge("B", 0.6, gauge_factor=Quantity(2.1 / 1.35)))
    result = reduce(record, wrong, good_sheet())
    assert finding(result, "work balance").weight is Weight.NOTE
    assert finding(result, "force equilibrium").weight is Weight.REJECT
    assert result.verdict is Verdict.REJECT


def test_reverberations_are_counted_in_transits(good: ShotResult, faces: FaceStrains) -> None:
    start = good.response.equilibrium.start
    assert start is not None
    transit = 0.005 / np.sqrt(120e9 / 8900)
    passed = good.response.time_s[start] / transit
    assert good.response.equilibrium.reverberations == pytest.approx(passed)
    assert "transits" in finding(good, "reverberations").measured
    for limit, weight in ((passed - 0.1, Weight.FINE), (passed + 0.1, Weight.NOTE)):
        settings = DEFAULT.replaced(limits=Limits(reverberations=max(limit, 0.5)))
        assert finding(run(faces, settings=settings), "reverberations").weight is weight


def test_rate_constancy(faces: FaceStrains) -> None:
    for limit, weight in ((1.0, Weight.FINE), (0.01, Weight.NOTE)):
        settings = DEFAULT.replaced(limits=Limits(rate_variation=limit))
        assert finding(run(faces, settings=settings), "rate constancy").weight is weight


def test_indentation_is_always_shown(faces: FaceStrains, good: ShotResult) -> None:
    assert "not taken off" in finding(good, "indentation").measured
    corrected = run(faces, settings=DEFAULT.replaced(corrections=(Correction.INDENTATION,)))
    assert finding(corrected, "indentation").measured.endswith("(estimate, taken off)")
