"""Reports as HTML: sound, reaching nowhere, nothing to run, and with the numbers that stand in the shot file."""

from __future__ import annotations

import dataclasses
import hashlib
import re
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pytest

from shpb.reduction import ShotResult
from shpb.rig.calibration import Calibration
from shpb.store.report_input import read_for_report
from shpb.store.shot_file import save_shot
from shpb.trust.budget import flow_stress_uncertainty_pa
from shpb.trust.finding import Weight
from shpb.view.report import html, svg
from shpb.view.report.campaign_page import campaign_page
from shpb.view.report.campaign_rows import CampaignRow, campaign_row, orders
from shpb.view.report.shot_figures import shot_figures
from shpb.view.report.shot_page import shot_page
from shpb.view.report.stored import ReportedShot
from shpb.view.wording import telling, verdict_sentence
from tests.strict_html import Strict, require_sound

NASTY = "</p><script>alert(1)</script>\"'&amp;<!-- ]]> \x00\x1b[2J\u202e\udc80 javascript:x =cmd()"


def stored(result: ShotResult, folder: Path, name: str = "shot.h5") -> ReportedShot:
    read = read_for_report(save_shot(result, folder / name))
    return ReportedShot(stored=read.stored, budget=read.budget, sha256=read.sha256)


def named(result: ShotResult, text: str) -> ShotResult:
    """The same shot with an outside string wherever one can stand."""
    specimen = dataclasses.replace(result.sheet.specimen, material=text, lubricant=text)
    sheet = dataclasses.replace(
        result.sheet, shot_id=text, specimen=specimen, remarks=text, operator=text, date=text, text=f"{text}\n{text}",
        source=text,
    )  # fmt: skip
    calibration = Calibration(
        name=text,
        rig=text,
        date=text,
        holds_days=3,
        methods={text: text},
        findings=(text,),
        remarks=text,
        text=text,
    )
    bar = dataclasses.replace(result.rig.incident_bar, material=text)
    rig = dataclasses.replace(
        result.rig, name=text, text=text, source=text, incident_bar=bar, calibration=calibration
    )
    findings = tuple(
        dataclasses.replace(one, measured=text, limit=text, source=text, action=text, check=text)
        if one.weight is Weight.FINE else dataclasses.replace(one, action=text)
        for one in result.findings
    )  # fmt: skip
    record = dataclasses.replace(result.record, remarks=(text,))
    return dataclasses.replace(result, sheet=sheet, rig=rig, findings=findings, record=record)


# --- building blocks -----------------------------------------------------------------------------------


def test_what_is_not_markup_is_escaped() -> None:
    made = html.element("p", "<i>", html.element("b", "a & b"), 3, class_='x"y', hidden=True, title=None)
    assert made == '<p class="x&quot;y" hidden="">&lt;i&gt;<b>a &amp; b</b>3</p>'


def test_an_endless_string_is_cut_and_that_is_said() -> None:
    said = html.escaped("<" * 10_000)
    assert said.count("&lt;") == html.LONGEST
    assert said.endswith("... and 8000 more letters")


def test_marks_are_read_back_and_a_file_of_others_has_none() -> None:
    text = html.page("t", {"shpb-report": "shot", "shpb-shot": html.shown(NASTY)})
    assert html.marks_of(text) == {"shpb-report": "shot", "shpb-shot": html.shown(NASTY)}
    assert html.marks_of('<html><meta name="shpb-report" content="shot">') == {}


def test_a_figure_loses_its_head_and_its_outside_names() -> None:
    raw = (
        '<?xml version="1.0"?><!DOCTYPE svg PUBLIC "x" "http://www.w3.org/x"><svg xmlns:xlink="http://www.w3.org/1999" '
        'width="9pt" viewBox="0 0 9 9" xmlns="http://www.w3.org/2000/svg"><metadata>http://a</metadata><!-- c -->'
        '<g id="g1"><path d="M 1.23456 2.5" clip-path="url(#g1)"/><text>0.12345</text><use xlink:href="#g1"/></g></svg>'
    )  # fmt: skip
    made = svg.inlined(raw, "p", "A & B", "5 < 6")
    assert made == (
        '<svg viewBox="0 0 9 9" role="img" aria-labelledby="p-title p-words"><title id="p-title">A &amp; B</title>'
        '<desc id="p-words">5 &lt; 6</desc><g id="p-g1"><path d="M 1.23 2.5" clip-path="url(#p-g1)"/>'
        '<text>0.12345</text><use href="#p-g1"/></g></svg>'
    )  # fmt: skip


# --- one shot ------------------------------------------------------------------------------------------


def test_every_sort_of_shot_becomes_a_sound_page(
    sort: str, shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    shot = stored(shots[sort], tmp_path)
    text = shot_page(shot)
    page = require_sound(text)
    assert len(text.encode("utf-8")) < 600_000
    assert len(page.of("svg")) == 6
    assert verdict_sentence(shots[sort]) in page.text
    assert "never about safety" in page.text
    assert "allowables" in page.text


def test_the_verdict_comes_first_and_the_gravest_finding_before_the_others(
    shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    result = shots["not in equilibrium"]
    text = Strict(shot_page(stored(result, tmp_path))).text
    said = telling(result.findings)
    places = [text.index(f"{one.check}: ") for one in said]
    assert result.verdict.value == "reject"
    assert text.index("REJECT") < places[0]
    assert places == sorted(places)
    for one in said:
        assert one.action.replace(" us", " µs").replace("<=", "≤") in text


def test_numbers_are_those_of_the_file(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    result = shots["good"]
    path = tmp_path / "shot.h5"
    page = Strict(shot_page(stored(result, tmp_path)))
    modulus = result.sheet.specimen.young_modulus_pa
    # How the budget was read when the shot was reduced, not how the report reads it from the file.
    uncertainties = flow_stress_uncertainty_pa(result.budget, result.response, modulus)
    with h5py.File(path) as file:
        rows = page.table("Flow stress, one-wave")[1:]
        for row, (strain, stress, rate), u in zip(
            rows, file["response/flow_stress"][()], uncertainties, strict=True
        ):
            assert float(row[0]) == pytest.approx(strain)
            if not np.isfinite(stress):
                assert row[1:] == ["not in what counts", "", ""]
                continue
            assert u is not None
            # To two digits of U, as it is printed: half a unit of the last.
            assert float(row[2]) == pytest.approx(2e-6 * u, rel=0.05)
            assert float(row[1]) == pytest.approx(1e-6 * stress, abs=0.06 * float(row[2]))
            assert float(row[3]) == pytest.approx(rate, rel=5e-3)
        assert sum(row[1] != "not in what counts" for row in rows) >= 3
        facts = file["response"].attrs
        rate = re.match(
            r"mean ([\d.]+) /s engineering, ([\d.]+) /s true", page.value("Read off", "Strain rate")
        )
        assert rate is not None
        assert float(rate[1]) == pytest.approx(facts["mean_strain_rate"], rel=5e-3)
        assert float(rate[2]) == pytest.approx(facts["mean_true_strain_rate"], rel=5e-3)
        work = re.findall(r"([\d.]+) J", page.value("Read off", "Work"))
        names = ("incident_work", "reflected_work", "transmitted_work", "specimen_work")
        assert [float(one) for one in work] == [pytest.approx(facts[name], rel=5e-3) for name in names]
        hashes = {row[0]: row[3] for row in page.table("What went in")[1:]}
        assert hashes["shot.h5"] == hashlib.sha256(path.read_bytes()).hexdigest()
        for name, sha256 in zip(
            file["record"].attrs["file_name"], file["record"].attrs["sha256"], strict=True
        ):
            assert hashes[name] == sha256
        assert file.attrs["created_utc"] in page.text


def test_the_budget_is_ranked_and_its_shares_add_up(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    page = Strict(shot_page(stored(shots["good"], tmp_path)))
    rows = page.table("Shares of the variance")[1:]
    shares = np.array([[float(cell) for cell in row[3:7]] for row in rows])
    greatest = np.abs(shares).max(axis=1)
    assert np.all(np.diff(greatest) <= 0.1)  # as printed
    # Lines below 0.05 % are only named; rounding to 0.1 % each.
    assert shares.sum(axis=0) == pytest.approx(100, abs=0.05 * len(rows) + 1.0)
    assert {row[1] for row in rows} == {"rig's", "shot's"}


def test_the_band_in_the_words_of_the_curve_is_that_of_the_budget(
    shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    result = shots["good"]
    figures = shot_figures(stored(result, tmp_path))
    words = re.search(r"from ([\d.]+) MPa at true strain ([\d.]+) to ([\d.]+) MPa at ([\d.]+)\. Band: k = 2, "
                      r"about 95 %, ± ([\d.]+) MPa at the middle", figures[0])  # fmt: skip
    assert words is not None
    span = result.response.span
    assert span is not None
    stress = 1e-6 * result.response.curve.true_stress_pa[slice(*span)]
    middle = sum(span) // 2
    expected = (stress[0], *result.response.strain_span[:1], stress[-1], result.response.strain_span[1])
    assert [float(one) for one in words.groups()[:4]] == [
        pytest.approx(one, rel=6e-3, abs=6e-4) for one in expected
    ]
    assert float(words[5]) == pytest.approx(2e-6 * result.budget.u_true_stress_pa[middle], rel=0.05)


def test_no_curve_holds_more_points_than_a_page_can_show(
    shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    for figure in shot_figures(stored(shots["noisy"], tmp_path)):
        for path in re.findall(r' d="([^"]*)"', figure):
            assert path.count("L") <= svg.POINTS


def test_what_was_set_by_hand_stands_beside_the_automatic_choice(
    shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    result = shots["by hand"]
    moved = [pulse for pulse in result.pulses if pulse.set_by_hand]
    page = Strict(shot_page(stored(result, tmp_path)))
    assert moved
    for pulse in moved:
        said = page.value("How the curve", f"By hand: {pulse.name} pulse")
        used, automatic = pulse.window_s, pulse.automatic_window_s
        assert f"window {1e6 * used[0]:.1f} to {1e6 * used[1]:.1f} µs" in said
        assert f"(automatic {1e6 * automatic[0]:.1f} to {1e6 * automatic[1]:.1f} µs)" in said


def test_the_calibration_in_force_is_named(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    page = Strict(shot_page(stored(shots["good"], tmp_path, "a.h5")))
    assert page.value("Calibration in force", "Calibration").startswith("none named")
    page = Strict(shot_page(stored(named(shots["good"], "spring"), tmp_path, "b.h5")))
    assert page.value("Calibration in force", "Calibration") == "spring"
    assert page.value("Calibration in force", "Holds for") == "3 days"


def test_outside_strings_stay_text(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    # Neither half a surrogate pair nor a zero byte can stand in an HDF5 file.
    nasty = NASTY.replace("\udc80", "").replace("\x00", "")
    shot = stored(named(shots["good"], nasty), tmp_path)
    text = shot_page(shot, campaign="campaign.html")
    page = require_sound(text)
    assert "<script" not in text
    assert not re.search(r"[\x00-\x08\x0b-\x1f\x7f\u202e\ud800-\udfff]", text)
    assert r"\x1b[2J\u202e" in page.text
    assert page.text.count("</p><script>alert(1)</script>") > 10


def test_a_very_long_name_makes_no_very_large_page(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    text = shot_page(stored(named(shots["good"], "x" * 50_000), tmp_path))
    require_sound(text)
    assert len(text) < 900_000


def test_the_same_file_gives_the_same_bytes(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    stored(shots["feet"], tmp_path)
    pages = []
    for _ in range(2):
        read = read_for_report(tmp_path / "shot.h5")
        pages.append(shot_page(ReportedShot(stored=read.stored, budget=read.budget, sha256=read.sha256)))
    assert pages[0] == pages[1]


def test_draws_give_the_band_and_a_column_of_their_own(shots: dict[str, ShotResult], tmp_path: Path) -> None:
    from shpb.reduction import draw_shot

    result = draw_shot(shots["good"], 400, seed=2)
    page = Strict(shot_page(stored(result, tmp_path)))
    rows = page.table("Flow stress")
    assert rows[0][4] == "95 % by the draws (MPa)"
    assert result.draws is not None
    for point in result.draws.flow:
        cell = next(row[4] for row in rows[1:] if float(row[0]) == point.at_strain)
        low, high = (float(end) for end in cell.split(" to "))
        assert (low, high) == (
            pytest.approx(1e-6 * point.low_pa, rel=1e-3),
            pytest.approx(1e-6 * point.high_pa, rel=1e-3),
        )
    assert "Band: 95 % of 400 draws" in page.text


# --- a campaign ----------------------------------------------------------------------------------------


def row(shot_id: str, **changes: object) -> CampaignRow:
    usual: dict[str, object] = {
        "material": "alloy", "kind": "compression", "temperature_k": 293.15, "date": "2031-02-01", "verdict": "accept",
        "rate_per_s": 1500.0, "strain_span": (0.02, 0.2), "flow": ((0.1, True, 400e6, 3e6),), "coverage_factor": 2.0,
        "outcome": "reached", "mean_ratio": 0.02, "reasons": "",
    }  # fmt: skip
    return CampaignRow(shot_id=shot_id, **{**usual, **changes})  # type: ignore[arg-type]


ROWS = [
    row("S-10", rate_per_s=900.0, flow=((0.1, True, 380e6, 2e6),), date="2031-02-03"),
    row(
        "S-2",
        rate_per_s=2400.0,
        verdict="reject",
        strain_span=None,
        flow=(),
        mean_ratio=0.4,
        reasons="clipping",
    ),
    row(
        "S-1", temperature_k=573.15, flow=((0.1, True, 310e6, 4e6), (0.2, True, 350e6, 4e6)), mean_ratio=0.03
    ),
    row("T-1", material="Brass", verdict="restrict", flow=((0.1, False, 405e6, 3e6),), date=""),
]


def test_every_order_of_the_list_is_the_one_it_says() -> None:
    def ids(name: str) -> list[str]:
        return [ROWS[i].shot_id for i in orders(ROWS, 0.1)[name][1]]

    assert ids("shot") == ["S-1", "S-2", "S-10", "T-1"]  # numbers as numbers
    assert ids("rate") == ["S-10", "S-1", "T-1", "S-2"]
    assert ids("verdict") == ["S-2", "T-1", "S-1", "S-10"]
    assert ids("stress") == ["S-1", "S-10", "T-1", "S-2"]  # none at the end
    assert ids("ratio") == ["S-2", "S-1", "S-10", "T-1"]
    assert ids("temperature") == ["S-10", "T-1", "S-2", "S-1"]
    assert ids("material") == ["S-10", "S-2", "S-1", "T-1"]
    assert ids("date") == ["S-1", "S-2", "S-10", "T-1"]


def test_the_list_holds_every_order_and_shows_one_where_no_style_is_known() -> None:
    text = campaign_page("lab", ROWS)
    page = require_sound(text)
    bodies = [one for one in page.of("tbody") if "sorted" in one.get("class", "")]
    assert len(bodies) == len(orders(ROWS, 0.1))
    assert [("hidden" in one) for one in bodies] == [False] + [True] * (len(bodies) - 1)
    choices = page.of("input")
    assert [("checked" in one) for one in choices] == [True] + [False] * (len(choices) - 1)
    assert {one["for"] for one in page.of("label")} == {one["id"] for one in choices}
    for one in choices:
        assert f"#{one['id']}:checked ~ .wide .{one['id']}" in text


def test_the_list_says_what_is_known_of_each_shot() -> None:
    rows = Strict(campaign_page("lab", ROWS)).table("Rate: mean")
    assert rows[0][6] == "Flow stress at 0.1 (MPa)"
    by_id = {one[0]: one for one in rows[1:]}
    assert by_id["S-1"][2:8] == ["573", "1500", "accept", "0.020 to 0.200", "310.0 ± 8.0", "3.0"]
    assert by_id["T-1"][6] == "405.0 ± 6.0*"  # at total strain
    assert by_id["S-2"][4:] == ["reject", "", "", "40.0", "clipping"]
    assert len(rows) == 1 + len(ROWS) * len(orders(ROWS, 0.1))


def test_counts_are_those_of_the_list() -> None:
    page = Strict(campaign_page("lab", ROWS, unreadable=[("x.h5", "damaged")]))
    assert "4 shots: 2 accept, 1 restrict, 1 reject" in page.text
    assert ["alloy", "compression", "293", "900", "1", "0", "1"] in page.table("Verdicts")
    assert page.table("Not in this report")[1] == ["x.h5", "damaged"]


def test_a_shot_that_does_not_count_lends_the_campaign_no_flow_stress(
    shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    assert campaign_row(stored(shots["not in equilibrium"], tmp_path, "a.h5")).flow == ()
    good = campaign_row(stored(shots["good"], tmp_path, "b.h5"))
    known = [one.stress_pa for one in shots["good"].response.flow if one.stress_pa is not None]
    assert [stress for _, _, stress, _ in good.flow] == known


def test_outside_strings_of_a_campaign_stay_text() -> None:
    rows = [row(NASTY, material=NASTY, reasons=NASTY, date=NASTY, page="a%22b.html", file="x.h5")]
    text = campaign_page(NASTY, rows, unreadable=[(NASTY, NASTY)], changed=[NASTY])
    require_sound(text)
    assert "<script" not in text


def test_an_empty_campaign_says_so() -> None:
    assert "There is no shot." in require_sound(campaign_page("lab", [])).text


@pytest.mark.parametrize("count", [400])
def test_a_large_campaign_stays_a_small_file(count: int) -> None:
    rows = [row(f"S-{i}", rate_per_s=1000.0 + i) for i in range(count)]
    assert len(campaign_page("lab", rows)) < 4000 * count


def test_a_shot_of_another_form_of_flow_curve_is_marked(
    shot: Callable[..., ShotResult], shots: dict[str, ShotResult], tmp_path: Path
) -> None:
    made = campaign_row(stored(shots["no modulus"], tmp_path))
    assert made.flow
    assert not any(plastic for _, plastic, _, _ in made.flow)
    assert "Total true strain" in Strict(shot_page(stored(shots["no modulus"], tmp_path))).text
