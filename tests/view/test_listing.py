"""Several shots, one line each."""

from __future__ import annotations

import pickle
import re

from shpb.errors import InputError
from shpb.reduction import ShotResult
from shpb.view.listing import ListRow, list_row, list_row_of_error, list_text


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
    assert re.fullmatch(r"K-101 +REJECT +\d+ +force equilibrium", bad)
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
