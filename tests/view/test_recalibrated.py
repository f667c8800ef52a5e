"""The table of a campaign by another calibration: changes in percent, what is not known, names from outside."""

from __future__ import annotations

import json

from shpb.rig.calibration import Calibration
from shpb.trust.compared import Compared, Numbers
from shpb.view.recalibrated import compared_json, recalibrated_json, recalibrated_text
from shpb.view.summary import json_text

CALIBRATION = Calibration(name="spring", rig="bench", date="2031-02-03", holds_days=365)


def numbers(
    stress: dict[float, float], strain: float = 0.2, verdict: str = "accept", **changes: str
) -> Numbers:
    values = {"calibration": "", "date": "", **changes}
    return Numbers(verdict=verdict, flow_stress_pa=stress, strain=strain, rate_per_s=1000.0, **values)


def compared(shot_id: str, before: Numbers, after: Numbers, rate: float | None = 0.01) -> Compared:
    return Compared(shot_id=shot_id, before=before, after=after, rate_change=rate)


def test_changes_are_those_of_the_strains_that_both_know() -> None:
    one = compared("A", numbers({0.05: 100e6, 0.1: 200e6}), numbers({0.1: 204e6, 0.15: 1.0}, 0.202))
    assert one.flow_stress_changes == {0.1: 204 / 200 - 1}
    text = recalibrated_text([one], CALIBRATION)
    assert next(line for line in text.splitlines() if line.startswith("A")).split() == [
        "A", "ACCEPT", "ACCEPT", "+2.00", "+1.00", "+1.00",
    ]  # fmt: skip
    assert "No verdict changed." in text
    assert "Before: the values of the rig file." in text


def test_what_is_not_known_is_a_dash_and_null() -> None:
    one = compared("A", numbers({}, 0.0), numbers({0.1: 1e6}), None)
    text = recalibrated_text([one], CALIBRATION)
    assert next(line for line in text.splitlines() if line.startswith("A")).split()[-3:] == ["-", "-", "-"]
    assert "flow stress not known in both" in text
    said = json.loads(json_text(recalibrated_json([compared_json(one)], CALIBRATION)))
    assert said["shots"][0]["flow_stress_change"] is None
    assert said["shots"][0]["after"]["flow_stress_pa"] == [{"at_strain": 0.1, "stress_pa": 1e6}]


def test_a_changed_verdict_is_named_and_lines_keep_their_width() -> None:
    before, after = (
        numbers({0.1: 1e8}, calibration="old", date="2030-01-01"),
        numbers({0.1: 1e8}, verdict="reject"),
    )
    names = ("\x1b[31m" + "x" * 40, "名" * 30)
    rows = [compared(name, before, after) for name in names]
    text = recalibrated_text(
        rows, CALIBRATION, other_rigs=[("B", "fired on another rig")], failed=[("C", "damaged")], width=76
    )
    assert "\x1b" not in text
    assert all(len(line) <= 76 for line in text.splitlines() if line.isascii())
    assert "from accept to reject" in " ".join(text.split())
    assert "the calibration old of 2030-01-01" in " ".join(text.split())
    assert "B: left alone, fired on another rig." in text
    assert "Not reduced: C." in text


def test_nothing_reduced() -> None:
    text = recalibrated_text([], CALIBRATION, other_rigs=[("B", "fired on another rig")])
    assert text.startswith("0 shots reduced again by the calibration spring of 2031-02-03.")
