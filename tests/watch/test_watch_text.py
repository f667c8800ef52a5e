"""What stands on the screen at the bench: fits it, says the gravest first, and takes no orders from a file name."""

from __future__ import annotations

import json
from dataclasses import replace

import pytest

from shpb.trust.finding import Finding, Weight
from shpb.view.summary import SCHEMA_VERSION
from shpb.view.watch_text import bench_text, json_line, notice_text, refused_record, refused_text, shot_record
from shpb.watch.compare import compared, next_steps, speed_step
from shpb.watch.events import ShotRefused, ShotShown
from tests.watch.test_compare import finding, past, shown

NASTY = "S\x1b[2J\n\x07<script>=cmd()"


def event(*findings: Finding, verdict: str = "accept", **changes: object) -> ShotShown:
    what = shown(findings=findings, verdict=verdict)
    values: dict[str, object] = {
        "shown": what,
        "names": ("S-9.csv",),
        "revision": 1,
        "why_again": "",
        "comparison": compared(what.past, [past("S-1", 199.0), past("S-2", 203.0)]),
        "steps": tuple(next_steps(findings)),
        "speed": speed_step(what, 2000.0),
    }
    return ShotShown(**{**values, **changes})  # type: ignore[arg-type]


def many() -> tuple[Finding, ...]:
    weights = [Weight.NOTE, Weight.RESTRICT, Weight.REJECT] * 4
    return tuple(
        finding(weight, f"Do number {number}: {'long ' * 12}", f"check {number}")
        for number, weight in enumerate(weights)
    )


def test_the_verdict_stands_alone_at_the_top() -> None:
    lines = bench_text(event()).splitlines()
    assert lines[:3] == ["=" * 80, "  ACCEPT   S-9", "=" * 80]
    assert lines[3] == "The shot counts."


def test_the_comparison_in_numbers() -> None:
    text = " ".join(bench_text(event()).split())
    # By hand: the others' mean is 201 MPa, their standard deviation sqrt((4 + 4)/1) = 2.83 MPa; 200/201 - 1 = -0.5 %.
    assert "stress at plastic strain 0.1, MPa 200 201 2.8 -0.5 %" in text
    assert "Against 2 earlier shots at this condition: S-1, S-2" in text
    assert "They agree." in text


def test_a_disagreement_is_said() -> None:
    what = shown()
    off = compared(past("S-9", 260.0), [past("S-1", 199.0), past("S-2", 203.0)])
    assert "S-9 DISAGREES with the others" in " ".join(bench_text(event(comparison=off)).split())
    assert what.shot_id == "S-9"


@pytest.mark.parametrize("verdict", ["accept", "restrict", "reject"])
@pytest.mark.parametrize("width", [74, 80, 132])
def test_no_line_is_wider_than_the_screen(verdict: str, width: int) -> None:
    text = bench_text(event(*many(), verdict=verdict), width=width)
    assert max(map(len, text.splitlines())) <= width


@pytest.mark.parametrize("height", [24, 30, 40, 60])
def test_what_matters_most_stays_on_a_small_screen(height: int) -> None:
    text = bench_text(event(*many(), verdict="reject"), height=height)
    assert text.splitlines()[1] == "  REJECT   S-9"
    assert "REJECT    check 2" in text
    assert "Next shot" in text
    if height >= 30:
        assert len(text.splitlines()) <= height


def test_it_is_ascii_and_plain_unless_stressed() -> None:
    plain = bench_text(event(*many()))
    assert plain.isascii()
    assert "\x1b" not in plain
    stressed = bench_text(event(*many()), stressed=True)
    assert stressed.count("\x1b[1;7m") == 3
    assert stressed.splitlines()[3:] == plain.splitlines()[3:]  # the rest is the same


def test_a_shot_reduced_again_says_why_and_where_the_earlier_one_is() -> None:
    again = event(why_again="the record has changed under its name", revision=2)
    again = replace(again, shown=replace(again.shown, set_aside=("S-9.h5.earlier-1",)))
    assert (
        "REDUCED AGAIN: the record has changed under its name. This is revision 2. The earlier result is kept as "
        "S-9.h5.earlier-1."
    ) in " ".join(bench_text(again).split())


def test_hostile_names_do_nothing_to_the_terminal() -> None:
    nasty = replace(event(), names=(NASTY,), steps=(NASTY,))
    nasty = replace(nasty, shown=replace(nasty.shown, shot_id=NASTY))
    refused = ShotRefused(names=(NASTY,), shot_id=NASTY, text=NASTY, unusable=False, bad_input=True)
    texts = [bench_text(nasty), refused_text(refused), "\n".join(notice_text(NASTY, NASTY))]
    for text in texts:
        assert not set(text) & {"\x1b", "\x07", "\r"}


def test_a_speed_that_would_overload_the_bar_is_not_advised() -> None:
    fast = event(speed=speed_step(shown(), 3200.0))
    text = " ".join(bench_text(fast).split())
    assert "striker about 25.6 m/s, a first estimate in simple proportion. NOT ADVISED" in text
    assert "51 % of its yield strength" in text


def test_a_refusal_says_what_comes_next() -> None:
    text = refused_text(
        ShotRefused(names=("S-9.csv",), shot_id="S-9", text="it crashed", unusable=False, bad_input=False)
    )
    assert text.splitlines()[1] == "  NOT REDUCED   S-9"
    assert "It is tried again when record, sheet or rig file change." in " ".join(text.split())


def test_json_is_one_strict_line_in_ascii() -> None:
    content = shot_record(event(*many()))
    content["unknown"] = float("nan")
    line = json_line(content)
    assert "\n" not in line
    assert line.isascii()
    back = json.loads(line)
    assert back["unknown"] is None
    assert back["next_shot"]["striker_speed_m_s"] == pytest.approx(16.0)
    assert back["compared"]["shot_ids"] == ["S-1", "S-2"]


def test_a_crash_is_an_error_object_of_the_same_schema() -> None:
    crashed = ShotRefused(
        names=("S-9.h5",),
        shot_id="S-9",
        text="the reading crashed (SIGSEGV)",
        unusable=False,
        bad_input=False,
    )
    back = json.loads(json_line(refused_record(crashed)))
    assert (back["schema_version"], back["verdict"]) == (SCHEMA_VERSION, "failed")
    assert back["error"]["message"] == "the reading crashed (SIGSEGV)"
