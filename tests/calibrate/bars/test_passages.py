"""Which passages a shot shows: ways and signs, windows that hold one passage only, and plain words where that fails."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from shpb.calibrate.bars.passages import passages_of
from shpb.calibrate.bars.ways import lengths_of, ways_of
from shpb.calibrate.session import BarEnd, ShotKind
from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.rig.bar import Bar
from tests.calibrate.fired import fired, lab, shot
from tests.calibrate.runs import C0, LENGTH_M, STATION_M, Run, run_record, run_rig

L, X = LENGTH_M, STATION_M


@pytest.mark.parametrize(
    ("end", "ways"),
    [
        (BarEnd.FAR, [L - X, L + X, 3 * L - X, 3 * L + X]),  # y = L - x: y, 2L - y, 2L + y, 4L - y
        (BarEnd.SPECIMEN, [X, 2 * L - X, 2 * L + X, 4 * L - X]),
    ],
)
def test_ways_to_and_fro_turn_their_sign_at_every_end(end: BarEnd, ways: list[float]) -> None:
    written = shot("BA", ShotKind.BARS_APART, struck_end=end)
    lengths = {"incident": L, "incident_gauge": X}
    found = [way for (way, _), _ in zip(ways_of(written, "incident_gauge"), range(4), strict=False)]
    assert [way.length_m("incident", lengths) for way in found] == pytest.approx(ways)
    assert [way.sign for way in found] == [1, -1, 1, -1]
    assert found[1].time_s(lengths, {"incident": 5000.0}) == pytest.approx(ways[1] / 5000.0)


def test_ways_through_a_contact_are_counted_from_it() -> None:
    rig = lab()
    lengths, written = lengths_of(rig), shot("BT", ShotKind.BARS_TOGETHER)
    before, usable = next(iter(ways_of(written, "incident_gauge")))
    assert usable
    assert before.length_m("incident", lengths) == pytest.approx(-0.9)
    behind = [way for way, used in ways_of(written, "transmitted_gauge") if used]
    assert [way.length_m("transmitted", lengths) for way in behind] == pytest.approx([0.6, 2 * 1.6 - 0.6])
    assert [way.sign for way in behind] == [1, -1]
    assert all(way.crosses for way in behind)


def test_every_whole_passage_is_found() -> None:
    rig = run_rig()
    found, factor = passages_of(run_record(Run(), rig), rig)
    # 1500 us from 200 us before the first: passages after 0, 360, 720, 1080 us; the fifth comes at 1440 us.
    assert len(found.passages) == 4
    assert [one.way.sign for one in found.passages] == [1, -1, 1, -1]
    assert found.duration_s == pytest.approx(115e-6, abs=12e-6)
    # The rig file says 4950 m/s; a rough value is good to what cross-correlation is.
    assert 4950 * factor == pytest.approx(C0, rel=0.006)
    assert found.noise["incident_gauge"] == pytest.approx(0.003 * 1e-3, rel=0.1)
    assert abs(float(np.mean(found.traces["incident_gauge"][:200]))) < 0.3 * 1e-3 * 0.01


def test_a_wrong_stated_speed_is_no_matter() -> None:
    right = run_rig()
    for stated in (4500.0, 5600.0):
        rig = lab(incident_bar=_with_speed(right.incident_bar, stated), incident_gauge=right.incident_gauge)
        _, factor = passages_of(run_record(Run(), right), rig)
        assert stated * factor == pytest.approx(C0, rel=0.006)


def _with_speed(one: Bar, speed_m_s: float) -> Bar:
    return replace(one, wave_speed_m_s=Quantity(speed_m_s, 10.0))


# --- plain words --------------------------------------------------------------------------------------------------


def said(run: Run) -> str:
    rig = run_rig(run.station_m)
    with pytest.raises(InputError) as caught:
        passages_of(run_record(run, rig), rig)
    return str(caught.value)


def test_a_bar_shorter_than_the_pulse_is_refused_with_the_lengths_that_would_do() -> None:
    text = said(Run(pulse_s=400e-6))
    assert "BA-1" in text
    assert "no two passages can be told apart" in text
    assert "shorter pulse" in text
    # At least so much that twice the way to the end takes longer than the pulse: 0.9 m or more.
    metres = float(text.split("at least ")[1].split(" m")[0])
    assert 0.9 < metres < 1.3


def test_a_station_too_near_to_an_end_is_refused() -> None:
    text = said(Run(station_m=(0.05,), pulse_s=300e-6))
    assert "farther from both ends" in text
    assert "20 us after" in text


def test_a_short_record_is_refused() -> None:
    assert "record" in said(Run(samples=900))


def test_a_fixed_end_is_refused() -> None:
    """What comes back with its sign kept is not the pulse of a free end."""
    assert "free" in said(Run(end_sign=1.0))


def test_bars_in_contact_called_apart_are_refused() -> None:
    rig = lab()
    true = fired(rig, "BT-1", ShotKind.BARS_TOGETHER)
    with pytest.raises(InputError, match="BT-1"):
        passages_of(replace(true, shot=shot("BT-1", ShotKind.BARS_APART)), rig)


def test_no_quiet_before_the_pulse_is_refused() -> None:
    rig = run_rig()
    one = run_record(Run(), rig)
    cut = replace(one.record, voltage_v=one.record.voltage_v[:, 380:].copy())
    with pytest.raises(InputError, match="100 us before the pulse"):
        passages_of(replace(one, record=cut), rig)
