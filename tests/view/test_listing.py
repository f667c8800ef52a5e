"""Several shots, one line each."""

from __future__ import annotations

import json
import pickle
import re
from dataclasses import replace

from shpb.errors import InputError
from shpb.reduction import ShotResult
from shpb.view.listing import ListRow, list_row, list_row_of_error, list_text
from shpb.view.repeats import repeats_json


def _rows(shots: dict[str, ShotResult]) -> list[ListRow]:
    error = InputError("the record ends at 3 us\x1b[0m, but", where="x", mend="y")
    return [*(list_row(result) for result in shots.values()), list_row_of_error("X\x1b[2J-9", error)]


def test_table_fits_80_columns_and_obeys_no_name(shots: dict[str, ShotResult]) -> None:
    text = list_text(_rows(shots))
    assert max(map(len, text.splitlines())) <= 80
    assert text.isascii()
    assert "\x1b" not in text


def test_every_shot_has_its_line_with_its_numbers(shots: dict[str, ShotResult]) -> None:
    rows = _rows(shots)
    lines = list_text(rows).splitlines()[2 : 2 + len(rows)]
    good, bad, failed = lines[0], lines[2], lines[-1]
    response = shots["good"].response
    assert response.strain_span is not None
    rate, (start, stop) = f"{response.rate.mean_per_s:.0f}", response.strain_span
    stress = f"{response.flow[2].stress_pa / 1e6:.0f}"  # at 0.1
    assert re.fullmatch(rf"K-101 +ACCEPT +{rate} +{start:.4f}-{stop:.3f} +{stress} +reverberations.*", good)
    assert re.fullmatch(r"K-101 +REJECT +\d+ +momentum balance, forc\.\.\.", bad)
    assert re.fullmatch(r"X\\x1b\[2J-9 +FAILED +the record ends at 3 u\.\.\.", failed)


def test_verdicts_are_counted_and_units_explained(shots: dict[str, ShotResult]) -> None:
    text = list_text(_rows(shots))
    assert "10 shots: 7 accept, 2 reject, 1 failed." in text
    assert "MPa: true flow stress at true plastic strain 0.1." in text
    # One shot has no modulus: its number stands at another strain and is marked.
    assert re.search(r"\d\*  ", text)
    assert "* at total true strain" in text


def test_the_strain_shown_is_the_one_that_most_shots_reach() -> None:
    rows = [
        ListRow(shot_id="a", verdict="accept", flow=((0.02, True, 3e8), (0.05, True, 3.1e8))),
        ListRow(shot_id="b", verdict="accept", flow=((0.05, True, 3.2e8), (0.1, True, 3.3e8))),
    ]
    text = list_text(rows)
    assert "plastic strain 0.05" in text
    assert re.search(r"a +ACCEPT +310", text)
    assert re.search(r"b +ACCEPT +320", text)
    assert "2 shots: 2 accept." in text


def test_no_shots_is_said() -> None:
    assert list_text([]) == "No shots."


def test_a_line_can_come_from_another_process(shots: dict[str, ShotResult]) -> None:
    row = list_row(shots["good"])
    assert pickle.loads(pickle.dumps(row)) == row


def test_repeats_are_compared_below_the_table(shots: dict[str, ShotResult]) -> None:
    good = list_row(shots["good"])
    assert good.repeat is not None
    rows = [
        replace(good, shot_id=n, repeat=replace(good.repeat, shot_id=n)) for n in ("K-1", "K-2", "K-3\x1b")
    ]
    text = re.sub(r"\s+", " ", list_text(rows))
    assert r"repeats: K-1, K-2, K-3\x1b (" in text
    assert text.endswith(": agree.")
    flow = tuple(replace(point, stress_pa=1.15 * point.stress_pa) for point in good.repeat.flow)
    rows[1] = replace(rows[1], repeat=replace(good.repeat, shot_id="K-2", flow=flow))
    lines = list_text(rows)
    assert max(map(len, lines.splitlines())) <= 80
    assert "K-2 DISAGREES with the others" in re.sub(r"\s+", " ", lines)
    assert "+15.0 %" in lines
    assert "repeats" not in list_text([good])


def test_repeats_as_json(shots: dict[str, ShotResult]) -> None:
    repeat = list_row(shots["good"]).repeat
    assert repeat is not None
    other = replace(
        repeat, shot_id="other", flow=tuple(replace(p, stress_pa=0.8 * p.stress_pa) for p in repeat.flow)
    )
    (group,) = repeats_json([repeat, other])
    assert group["shot_ids"] == ["K-101", "other"]
    (one,) = group["disagreements"]
    assert one["shot_ids"] == ["K-101", "other"]
    assert abs(one["true_stress_pa"] - one["others_true_stress_pa"]) > one["allowed_difference_pa"] > 0
    json.dumps(group, allow_nan=False)
    assert repeats_json([repeat]) == []
