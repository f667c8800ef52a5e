"""The whole watch in one process: records land in every way, each shot is reduced once and none is missed."""

from __future__ import annotations

import shutil

import pytest

from shpb.watch.tasks import DrawShot, Look, ReduceShot
from tests.watch.conftest import Bench

# --- landing -------------------------------------------------------------------------------------------


def test_a_record_with_its_sheet(bench: Bench) -> None:
    bench.turn(1)
    bench.shot("W-02")
    bench.turn(2.0)  # seen at the first turn, so at rest for 1.5 s
    assert bench.shown == []
    bench.turn(1.0)
    (event,) = bench.shown
    assert (event.shown.shot_id, event.shown.verdict, event.names) == ("W-02", "accept", ("W-02.csv",))
    assert bench.stored == ["W-02.h5"]
    bench.turn(20)
    assert bench.reductions == 1
    assert bench.remarks == []


def test_a_record_written_slowly_in_pieces(bench: Bench) -> None:
    bench.put("W-02.toml")
    whole = (bench.demo / "records" / "W-02.csv").read_bytes()
    for part in range(1, 9):
        bench.write("W-02.csv", whole[: len(whole) * part // 9])
        bench.turn(1.5)  # shorter than the rest that is waited for
    assert not any(isinstance(task, Look) for task in bench.worker.asked)
    bench.write("W-02.csv", whole)
    bench.turn(4)
    assert [event.shown.shot_id for event in bench.shown] == ["W-02"]
    assert bench.refused == []


def test_a_record_that_pauses_in_mid_line_is_said_once_and_reduced_when_whole(bench: Bench) -> None:
    bench.put("W-02.toml")
    whole = (bench.demo / "records" / "W-02.csv").read_bytes()
    bench.write("W-02.csv", whole[:-5])  # without its last newline
    bench.turn(9)
    assert bench.remarks == []  # a pause of the scope is worth no word yet
    bench.turn(60)
    (said,) = bench.remarks
    assert "W-02.csv: is not a whole record" in said
    assert "looked at again when it changes" in said
    assert bench.reductions == 0
    assert bench.watch.waiting[0][0] == "W-02.csv"
    bench.write("W-02.csv", whole)
    bench.turn(4)
    assert bench.stored == ["W-02.h5"]
    assert bench.watch.waiting == []


def test_one_file_per_channel_waits_for_the_other(bench: Bench) -> None:
    bench.put("W-07.toml")
    bench.put("W-07_CH1.csv")
    bench.turn(20)
    assert bench.remarks == ["W-07_CH1.csv, W-07_CH2.csv: waits for W-07_CH2.csv"]
    bench.put("W-07_CH2.csv")
    bench.turn(4)
    assert [event.names for event in bench.shown] == [("W-07_CH1.csv", "W-07_CH2.csv")]


def test_channels_are_grouped_by_their_names_where_no_sheet_lists_them(bench: Bench) -> None:
    bench.put("W-07_CH2.csv")
    bench.turn(20)
    assert "waits for the other channels" in bench.remarks[0]
    assert bench.wanted == []  # half a shot is no reason to ask
    bench.put("W-07_CH1.csv")
    bench.turn(4)
    (wanted,) = bench.wanted
    assert [path.name for path in wanted.records] == ["W-07_CH1.csv", "W-07_CH2.csv"]
    assert wanted.stem == "W-07"
    sheet = "\n".join(
        line for line in bench.text_of("W-07.toml").splitlines() if not line.startswith("record")
    )
    bench.write("W-07.toml", sheet)  # names no files: it is called as they are
    bench.turn(4)
    assert [event.names for event in bench.shown] == [("W-07_CH1.csv", "W-07_CH2.csv")]


def test_what_is_no_record_is_left_alone(bench: Bench) -> None:
    record = (bench.demo / "records" / "W-02.csv").read_bytes()
    for name in (".W-02.csv", "W-02.csv.part", "W-02.csv~", "W-02.tmp"):
        bench.write(name, record)
    bench.write("empty.csv", b"")
    bench.write("screen.png", b"\x89PNG")
    bench.turn(30)
    assert bench.events == []
    assert bench.worker.asked == []


def test_a_result_of_the_program_in_the_folder_is_no_record(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    shutil.copyfile(bench.results / "W-02.h5", bench.scope / "copied.h5")
    bench.turn(6)
    assert len(bench.shown) == 1
    assert bench.wanted == []
    assert bench.remarks == []


def test_shots_that_land_together_are_shown_in_the_order_in_which_they_were_written(bench: Bench) -> None:
    for shot_id in ("W-04", "W-02", "W-03"):
        bench.shot(shot_id)
    bench.turn(5)
    assert [event.shown.shot_id for event in bench.shown] == ["W-04", "W-02", "W-03"]
    # The third is held against none, the second against the first: same material, temperature and rate.
    assert [event.comparison.shot_ids for event in bench.shown if event.comparison] == [(), ("W-04",), ()]


def test_it_is_busy_until_all_is_dealt_with_however_long_a_turn_takes(bench: Bench) -> None:
    bench.shot("W-02")
    turns = 0
    while turns == 0 or bench.watch.busy:
        bench.turn(60.0, step=60.0)  # one turn, as long as on a share that hardly answers
        turns += 1
        assert turns < 10
    assert bench.stored == ["W-02.h5"]
    assert turns >= 3


# --- renamed, twice, changed ---------------------------------------------------------------------------


def test_a_copy_is_not_reduced_twice_and_said_once(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    bench.put("W-02.csv", "again.csv")
    bench.turn(20)
    assert bench.reductions == 1
    assert bench.remarks == [
        "again.csv: has the very content of W-02.csv, which is shot W-02: not reduced twice"
    ]
    bench.start()
    bench.turn(10)
    assert bench.events == []


def test_the_same_content_twice_at_once(bench: Bench) -> None:
    bench.shot("W-02")
    bench.put("W-02.csv", "again.csv")
    bench.turn(10)
    assert bench.reductions == 1
    assert "not reduced twice" in bench.remarks[0]


def test_a_renamed_record_is_not_reduced_twice(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    (bench.scope / "W-02.csv").rename(bench.scope / "W-02_final.csv")
    bench.turn(10)
    assert bench.reductions == 1
    assert "was called W-02.csv before; it is shot W-02 already" in bench.remarks[0]


def test_a_record_that_is_only_touched_is_not_reduced_again(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    bench.touch(bench.scope / "W-02.csv")
    bench.turn(6)
    assert bench.reductions == 1
    assert bench.events == bench.shown
    bench.start()
    bench.turn(6)
    assert not any(isinstance(task, Look | ReduceShot) for task in bench.worker.asked)


def test_changed_content_under_an_old_name_is_a_revision_and_the_earlier_result_is_kept(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    first = (bench.results / "W-02.h5").read_bytes()
    record = (bench.demo / "records" / "W-02.csv").read_bytes()
    changed = record.replace(b"-0,002441", b"0,000000", 1)  # one sample of the zero line
    bench.write("W-02.csv", changed)
    bench.turn(5)
    event = bench.shown[-1]
    assert event.revision == 2
    assert event.why_again == "the record has changed under its name"
    assert event.shown.set_aside == ("W-02.h5.earlier-1",)
    assert (bench.results / "W-02.h5.earlier-1").read_bytes() == first
    assert (bench.results / "W-02.h5").read_bytes() != first
    bench.write("W-02.csv", record)
    bench.turn(5)
    assert bench.shown[-1].revision == 3
    assert bench.shown[-1].shown.set_aside == ("W-02.h5.earlier-2",)
    assert (bench.results / "W-02.h5.earlier-1").read_bytes() == first


# --- sheets and lists ----------------------------------------------------------------------------------


def test_a_record_without_a_sheet_waits_for_one(bench: Bench) -> None:
    bench.put("W-02.csv")
    bench.turn(10)
    (wanted,) = bench.wanted  # once
    assert wanted.stem == "W-02"
    bench.put("W-02.toml")
    bench.turn(4)
    assert bench.stored == ["W-02.h5"]


def test_a_list_row_and_a_row_that_comes_later(bench: Bench) -> None:
    lines = (bench.demo / "shot_list.csv").read_text("utf-8").replace("records/", "")
    lines = lines.replace("calibration/", "../calibration/").splitlines(keepends=True)
    head = [line for line in lines if line.startswith(("#", "shot_id"))]
    rows = {shot_id: [line for line in lines if line.startswith(shot_id)] for shot_id in ("H-02", "H-03")}
    bench.write("shots.csv", "".join(head + rows["H-02"]))
    bench.put("H-02.csv")
    bench.put("H-03.csv")
    bench.turn(5)
    assert [event.shown.shot_id for event in bench.shown] == ["H-02"]
    assert [wanted.stem for wanted in bench.wanted] == ["H-03"]
    bench.write("shots.csv", "".join(head + rows["H-03"] + rows["H-02"]))  # in another order, too
    bench.turn(5)
    assert [event.shown.shot_id for event in bench.shown] == ["H-02", "H-03"]
    assert bench.reductions == 2


def test_a_sheet_with_a_mistake_is_said_and_read_again_when_mended(bench: Bench) -> None:
    text = bench.text_of("W-02.toml")
    bench.write("W-02.toml", text.replace("diameter_mm", "diametre_mm"))
    bench.put("W-02.csv")
    bench.turn(20)
    assert any("diametre_mm" in said and "read again when it changes" in said for said in bench.remarks)
    assert any("W-02.csv: waits until W-02.toml is mended" in said for said in bench.remarks)
    assert len(bench.remarks) == 2
    assert bench.wanted == []
    bench.write("W-02.toml", text)
    bench.turn(4)
    assert bench.stored == ["W-02.h5"]


def test_a_corrected_sheet_has_its_shot_reduced_again(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    text = bench.text_of("W-02.toml")
    bench.write("W-02.toml", text + "# a remark changes nothing\n")
    bench.turn(4)
    assert bench.reductions == 1
    bench.write("W-02.toml", text.replace("length_mm = { value = 4.50", "length_mm = { value = 4.60"))
    bench.turn(4)
    assert bench.reductions == 2
    assert bench.shown[-1].why_again == "its sheet has changed"
    assert bench.shown[-1].revision == 1  # the record is the same
    # Strain rate goes with 1/length.
    first, second = (event.shown.rate_per_s for event in bench.shown)
    assert second / first == pytest.approx(4.50 / 4.60, rel=0.01)


def test_a_record_that_two_sheets_name_waits(bench: Bench) -> None:
    bench.shot("W-02")
    bench.write("other.toml", bench.text_of("W-02.toml").replace('"W-02"', '"W-99"'))
    bench.turn(20)
    (said,) = bench.remarks
    assert "named for more than one shot (W-02, W-99;" in said or "(W-99, W-02;" in said
    (bench.scope / "other.toml").unlink()
    bench.turn(4)
    assert bench.stored == ["W-02.h5"]


def test_a_shot_id_used_twice_waits(bench: Bench) -> None:
    bench.shot("W-02")
    bench.turn(4)
    bench.write("W-04.toml", bench.text_of("W-04.toml").replace('"W-04"', '"W-02"'))
    bench.put("W-04.npz")
    bench.turn(10)
    assert any("shot id W-02 is used twice" in said for said in bench.remarks)
    assert bench.reductions == 1
    bench.put("W-04.toml")
    bench.turn(4)
    assert bench.stored == ["W-02.h5", "W-04.h5"]


def test_a_sheet_without_a_rig_file(bench: Bench) -> None:
    text = bench.text_of("W-02.toml").replace('rig = "../calibration/bench_1.toml"\n', "")
    bench.write("W-02.toml", text)
    bench.put("W-02.csv")
    bench.turn(5)
    assert "names no rig file" in bench.remarks[0]
    assert "--rig" in bench.remarks[0]
    shutil.copyfile(bench.lab / "calibration" / "bench_1.toml", bench.scope / "rig.toml")
    bench.turn(5)  # the only rig file in the folder serves
    assert bench.stored == ["W-02.h5"]


def test_an_unusable_record_is_rejected_and_the_watch_goes_on(bench: Bench) -> None:
    noise = "time_s,CH1,CH2\n" + "".join(
        f"{i * 4e-7:.7e},{(i % 3) * 1e-4},{(i % 2) * 1e-4}\n" for i in range(2000)
    )
    bench.put("W-02.toml")
    bench.write("W-02.csv", noise)
    bench.shot("W-04")
    bench.turn(6)
    (refused,) = bench.refused
    assert (refused.shot_id, refused.names) == ("W-02", ("W-02.csv",))
    assert refused.unusable or refused.bad_input
    assert refused.text
    assert bench.stored == ["W-04.h5"]
    bench.turn(20)
    assert len(bench.refused) == 1


# --- the next shot -------------------------------------------------------------------------------------


def test_the_striker_speed_for_a_wanted_rate(bench: Bench) -> None:
    bench.start(rate_per_s=2000.0)
    bench.shot("W-02")
    bench.turn(4)
    speed = bench.shown[0].speed
    assert speed is not None
    assert speed.speed_m_s == pytest.approx(11.58 * 2000 / bench.shown[0].shown.rate_per_s)
    # Bars of one material and section: stress = rho c V / 2; the demo's bars say what share of their yield that is.
    assert speed.share_of_yield is not None


# --- figures -------------------------------------------------------------------------------------------


@pytest.mark.slow
def test_the_figure_comes_after_the_verdict_and_survives_a_restart(bench: Bench) -> None:
    bench.figure = "svg"
    bench.start()
    bench.shot("W-02")

    def killed(task: object) -> None:
        if isinstance(task, DrawShot):
            raise KeyboardInterrupt

    bench.worker.hook = killed
    with pytest.raises(KeyboardInterrupt):
        bench.turn(5)
    assert bench.stored == ["W-02.h5"]
    assert not (bench.results / "W-02.svg").exists()
    bench.start()
    bench.turn(3)
    assert [event.shot_id for event in bench.drawn] == ["W-02"]
    assert (bench.results / "W-02.svg").exists()
    assert bench.reductions == 0
