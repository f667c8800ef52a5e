"""Marks are moved, kept inside what is possible, taken back and done again."""

from __future__ import annotations

from shpb.adjust.desk import Desk
from shpb.adjust.marks import MARKS, Mark, pulse_of
from shpb.settings import Settings

INTERVAL_S = 1e-6
END, FOOT, START = Mark("reflected", "end"), Mark("reflected", "foot"), Mark("reflected", "start")


def place(desk: Desk, mark: Mark) -> float:
    time = desk.time(mark)
    assert time is not None
    return time


def test_a_nudge_is_one_sample(desk: Desk) -> None:
    desk.select(END)
    before = place(desk, END)
    assert desk.nudge(-1)
    assert abs(before - place(desk, END) - INTERVAL_S) < 1e-12
    assert desk.nudge(-10)
    assert abs(before - place(desk, END) - 11 * INTERVAL_S) < 1e-12
    assert desk.by_hand(END)
    assert desk.by_hand(START)  # a window is set by hand whole
    assert not desk.by_hand(FOOT)
    assert desk.live.pulses.reflected.strain.size == desk.shot.own.reflected.strain.size - 11


def test_nudges_of_one_mark_are_one_step_back(desk: Desk) -> None:
    desk.select(END)
    for _ in range(5):
        desk.nudge(-1)
    desk.select(FOOT)
    desk.nudge(1)
    assert desk.undo()
    assert not desk.by_hand(FOOT)
    assert desk.by_hand(END)
    assert desk.mark == FOOT
    assert desk.undo()
    assert not desk.changed
    assert desk.mark == END
    assert not desk.undo()
    assert desk.redo()
    assert desk.redo()
    assert not desk.redo()
    assert desk.by_hand(FOOT)


def test_a_drag_is_one_step_and_can_be_left(desk: Desk) -> None:
    desk.select(END)
    before = place(desk, END)
    for step in range(1, 6):
        desk.drag_to(before - step * 3e-6)
    assert desk.let_go()
    assert desk.undo()
    assert place(desk, END) == before
    assert not desk.let_go()
    desk.drag_to(before - 30e-6)
    desk.cancel()
    assert place(desk, END) == before
    assert desk.redo()  # the drag that was left did not take the way forward


def test_a_new_move_ends_what_could_be_done_again(desk: Desk) -> None:
    desk.select(END)
    desk.nudge(-1)
    desk.undo()
    desk.nudge(-2)
    assert not desk.redo()


def test_marks_stay_inside_what_is_possible(desk: Desk) -> None:
    first, last = desk.shot.record_s
    desk.select(END)
    desk.drag_to(10.0)
    assert place(desk, END) == last
    desk.drag_to(-10.0)
    # Seventeen samples are the least that a window holds.
    assert abs(place(desk, END) - place(desk, START) - 17 * INTERVAL_S) < 1e-12
    desk.cancel()
    desk.select(Mark("incident", "start"))
    desk.drag_to(-10.0)
    assert place(desk, Mark("incident", "start")) == first
    desk.cancel()
    desk.select(FOOT)
    desk.drag_to(0.0)
    assert place(desk, FOOT) == place(desk, START)


def test_a_window_cannot_leave_a_foot_set_by_hand(desk: Desk) -> None:
    desk.select(FOOT)
    desk.nudge(1)
    foot = place(desk, FOOT)
    desk.select(START)
    desk.drag_to(foot + 40e-6)
    assert place(desk, START) == foot
    desk.slide_to(foot + 90e-6)
    assert foot - 1e-6 < place(desk, START) <= foot
    assert desk.live.problem == ""


def test_a_window_slides_whole(desk: Desk) -> None:
    start, end = place(desk, START), place(desk, END)
    desk.select(END)
    desk.slide_to(start - 12e-6)
    assert abs(place(desk, START) - (start - 12e-6)) <= 0.5e-6  # to what a mouse can point at
    assert abs(place(desk, END) - place(desk, START) - (end - start)) < 1e-12


def test_reset_of_one_pulse_and_of_all(desk: Desk) -> None:
    for mark in (END, FOOT, Mark("transmitted", "start")):
        desk.select(mark)
        desk.nudge(2)
    assert desk.reset("reflected")
    assert not desk.by_hand(END)
    assert not desk.by_hand(FOOT)
    assert desk.by_hand(Mark("transmitted", "end"))
    assert not desk.reset("reflected")
    assert desk.reset()
    assert not desk.changed
    assert not desk.reset()
    assert desk.undo()
    assert desk.undo()
    assert desk.by_hand(FOOT)


def test_the_next_mark_is_the_next_in_time(desk: Desk) -> None:
    seen = []
    desk.select(MARKS[0])
    for _ in range(len(MARKS)):
        seen.append(desk.mark)
        desk.next()
    assert desk.mark == seen[0]
    assert set(seen) == set(MARKS)
    times = [place(desk, mark) for mark in seen if mark.pulse != "transmitted"]
    assert times == sorted(times)
    desk.next(-1)
    assert desk.mark == seen[-1]


def test_what_is_kept_is_no_longer_a_change(desk: Desk) -> None:
    desk.select(END)
    desk.nudge(-4)
    (move,) = desk.moves()
    assert (move.pulse, move.part) == ("reflected", "window")
    assert move.after_s == pulse_of(desk.live.pulses, "reflected").window_s
    desk.kept()
    assert not desk.changed
    assert desk.moves() == ()
    assert desk.undo()
    assert desk.changed
    assert not desk.moves()[0].by_hand


def test_a_foot_where_the_program_found_none(desk: Desk) -> None:
    # A window of noise alone has no foot; a hand may put one, in its middle first.
    window = (-190e-6, -60e-6)
    quiet = Desk(desk.shot, Settings(transmitted_window_s=window))
    mark = Mark("transmitted", "foot")
    quiet.select(mark)
    assert quiet.time(mark) is None
    assert not quiet.nudge(1)
    assert quiet.begin_foot()
    assert abs(place(quiet, mark) - sum(window) / 2) <= 0.5e-6
    assert not quiet.begin_foot()
