"""Outside strings made harmless, numbers rounded, lines wrapped."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shpb.view.text import columns_of, fitted, padded, printable, rounded, wrapped


def test_control_characters_are_spelt_out_and_nothing_else_is_changed() -> None:
    assert printable("AB-7 é 漢字 [/x] $x$") == "AB-7 é 漢字 [/x] $x$"
    assert printable("a\x1b[31mb") == r"a\x1b[31mb"
    assert printable("a\nb\tc\u00a0d") == "a b c d"
    assert printable("a\u202eb") == r"a\u202eb"  # right-to-left override
    assert printable("\udc80") == r"\udc80"  # half of a surrogate pair, from a file name that is no UTF-8
    assert printable("\x9b2J") == r"\x9b2J"  # the one-character form of an escape sequence


@given(st.text())
def test_whatever_comes_in_leaves_printable_on_one_line(text: str) -> None:
    assert printable(text).isprintable()
    assert printable(printable(text)) == printable(text)


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        (1258.585, "1259"), (23.94, "23.9"), (0.012345, "0.0123"), (-0.5, "-0.500"), (0.0, "0"),
        (2.06e11, "2.06e+11"), (3.21e-7, "3.21e-07"), (999.6, "1000"), (None, "not known"),
        (math.nan, "not known"), (math.inf, "not known"),
    ],
)  # fmt: skip
def test_numbers_keep_three_digits(value: float | None, expected: str) -> None:
    assert rounded(value) == expected


@given(
    st.text(st.characters(codec="utf-8", exclude_categories=("C", "Z")) | st.just(" ")), st.integers(12, 90)
)
def test_no_line_is_wider_and_no_letter_is_lost(text: str, width: int) -> None:
    lines = wrapped(text, width, "first  ")
    assert all(columns_of(line) <= width for line in lines)
    together = "".join(line[7:] for line in lines)
    assert together.replace(" ", "") == text.replace(" ", "")


def test_a_number_stays_with_its_unit() -> None:
    assert wrapped("the limit is 5 % of it", 14) == ["the limit is", "5 % of it"]
    assert wrapped("it took 12 us in all", 11) == ["it took", "12 us in", "all"]


def test_wide_characters_take_two_columns() -> None:
    assert columns_of("漢字ab") == 6
    assert fitted("漢字漢字漢字", 8) == "漢字..."
    assert padded("漢字", 6) == "漢字  "
    assert padded("a long name", 6) == "a l..."
