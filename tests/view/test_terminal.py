"""One shot as text: width, order, and numbers against the closed form of the specimen."""

from __future__ import annotations

import dataclasses
import math
import re
from collections.abc import Callable

import pytest

from shpb.limits import Limits
from shpb.reduction import ShotResult, reduce
from shpb.response.equilibrium import R_DEFINITION
from shpb.view.summary import shot_json
from shpb.view.terminal import record_text, shot_text
from shpb.view.wording import processing_words


@pytest.mark.parametrize("full", [False, True])
def test_text_fits_80_columns_of_ascii(shots: dict[str, ShotResult], sort: str, full: bool) -> None:
    text = shot_text(shots[sort], full=full)
    assert max(map(len, text.splitlines())) <= 80
    assert text.isascii()  # the names are, and all else must be
    assert not re.search(r"[\x00-\x09\x0b-\x1f]", text)
    assert "nan" not in re.findall(r"[a-z]+", text.lower())


def test_narrower_text_keeps_to_its_width(shots: dict[str, ShotResult]) -> None:
    assert max(map(len, shot_text(shots["not in equilibrium"], width=60, full=True).splitlines())) <= 60


def test_the_verdict_comes_first_in_words(shots: dict[str, ShotResult]) -> None:
    good, bad = shot_text(shots["good"]), shot_text(shots["not in equilibrium"])
    span = shots["good"].response.strain_span
    assert span is not None
    assert good.startswith(f"ACCEPT  The shot counts from true strain {span[0]:.4f} to {span[1]:.3f}.\n")
    assert re.sub(r"\s+", " ", bad).startswith(
        "REJECT The shot does not count. Against it: momentum balance, force equilibrium not reached."
    )
    # The reason comes before any number, with what to do.
    assert bad.index("Use a pulse shaper") < bad.index("Strain rate")


def test_a_late_equilibrium_restricts(shots: dict[str, ShotResult]) -> None:
    feet = shots["feet"]
    late = feet.settings.replaced(limits=Limits(late_strain=0.01))
    result = reduce(feet.record, feet.rig, feet.sheet, late)
    first = shot_text(result).splitlines()[0]
    assert re.fullmatch(r"RESTRICT  The shot counts only from true strain 0\.0\d+ to 0\.31\d\.", first)
    start = result.response.strain_span
    assert start is not None
    assert f"{start[0]:.3f}" in first


@pytest.mark.parametrize("which", ["good", "tension"])
def test_flow_stresses_are_those_of_the_specimen(
    shots: dict[str, ShotResult], flow_stress_pa: Callable[..., float], which: str
) -> None:
    result = shots[which]
    lines = re.findall(
        r"^ +(0\.\d+) +(\d+) MPa, u [\d.]+ MPa, at +(\d+) /s true$", shot_text(result), re.MULTILINE
    )
    assert [float(strain) for strain, _, _ in lines] == [0.02, 0.05, 0.1, 0.15, 0.2]
    for strain, stress, _ in lines:
        expected = flow_stress_pa(float(strain), result.sheet.kind) / 1e6
        # 0.5 % for the low-pass and the travel time taken out; the text rounds to 1 MPa.
        assert float(stress) == pytest.approx(expected, rel=5e-3, abs=0.6)


def test_rate_work_and_length_stand_with_units(shots: dict[str, ShotResult]) -> None:
    text = shot_text(shots["good"])
    result = shots["good"]
    assert f"mean {result.response.rate.mean_per_s:.0f} /s engineering" in text
    assert re.search(r"Work +32\.3 J at the faces, 32\.3 J in the specimen", text)
    # The incident pulse 0.0015 high and 140 us long carries E A e t = 13.2 N s.
    momentum = 8000 * 5000**2 * math.pi * 0.02**2 / 4 * 0.0015 * 140e-6
    assert f"{momentum:.1f} N s in the incident pulse" in text
    assert re.search(r"Final length +strain 0\.2\d+ from the bars, 0\.2592 from the micrometer", text)
    assert "MPa true, from 3 to 8 % of strain back to the stated modulus of 70.0 GPa" in " ".join(
        text.split()
    )


def test_definition_of_r_and_the_low_pass_always_stand(shots: dict[str, ShotResult]) -> None:
    for result in shots.values():
        words = " ".join(shot_text(result).split())
        assert R_DEFINITION in words
        # f a/c0 = 0.234 with a = 10 mm and c0 = 5000 m/s
        assert "low-pass 117.0 kHz (half height, f a/c0 = 0.234)" in words


def test_what_a_hand_did_is_said(shots: dict[str, ShotResult]) -> None:
    text = " ".join(shot_text(shots["by hand"]).split())
    assert "incident window set by hand in shot sheet, list or rig file" in text
    assert "reflected foot set by hand in shot sheet, list or rig file" in text
    words = " ".join(shot_text(shots["feet"]).split())
    assert "feet laid on the incident foot (reflected moved +" in words
    assert "without the moved feet: " in words
    assert "three-wave: stress = (F_in + F_out)/(2 A_s)" in words


def test_without_a_modulus_the_strain_is_total_and_no_yield_is_given(shots: dict[str, ShotResult]) -> None:
    words = " ".join(shot_text(shots["no modulus"]).split())
    assert "at total true strain" in words
    assert "Yield not given: it needs the specimen's quasi-static Young's modulus" in words


def test_full_text_shows_every_check_with_limit_and_source(shots: dict[str, ShotResult]) -> None:
    result = shots["good"]
    text = shot_text(result, full=True)
    table = text[text.index("\nCheck ") :]
    for finding in result.findings:
        assert re.search(rf"^{re.escape(finding.check)} +{finding.weight.value} ", table, re.MULTILINE)
    assert table.count("limit: ") == table.count("source: ") == len(result.findings)


def test_names_are_shown_but_not_obeyed(shots: dict[str, ShotResult]) -> None:
    text = shot_text(shots["nasty names"])
    assert "\x1b" not in text
    assert "\u202e" not in text
    assert r"a$x^2$ [/x] \x1b[2J\x1b[31m" in text
    assert "\x1b" in shots["nasty names"].sheet.shot_id  # or there was nothing to obey


def test_a_record_is_described_in_80_columns(shots: dict[str, ShotResult]) -> None:
    record = dataclasses.replace(
        shots["nasty names"].record, channels=("A\x1b[2J", "B" * 100), remarks=("a remark " * 12,)
    )
    text = record_text(record)
    assert max(map(len, text.splitlines())) <= 80
    assert "\x1b" not in text
    # 3000 samples every 0.4 us from -200 us on
    assert re.search(r"^Interval +0\.4000 us \(2\.500 MS/s\)$", text, re.MULTILINE)
    assert re.search(r"^Clock +-200\.00 us to 999\.60 us$", text, re.MULTILINE)
    # The incident pulse, 0.0015 high, on half a bridge of factor 2.1 with 5 V and gain 100: below zero.
    peak = 0.0015 * 2.1 * 5.0 / 2 * 100
    assert re.search(rf"^Channel 1 +A\\x1b\[2J, -{peak:.3f} V to 0\.\d+ V$", text, re.MULTILINE)


def test_limits_of_this_lab_are_said_without_asking_for_more(shots: dict[str, ShotResult]) -> None:
    good = shots["good"]
    assert "limits set by this lab" not in shot_text(good, full=True)
    own = good.settings.replaced(limits=Limits(overlap=0.03, misalignment_s=4e-6))
    result = reduce(good.record, good.rig, good.sheet, own)
    short, full = (re.sub(r"\s+", " ", shot_text(result, full=more)) for more in (False, True))
    assert "limits set by this lab: overlap 3 % (usual 2 %), misalignment 4 us (usual 3 us)." in short
    assert "source: set by this lab (usual: 2 %, common practice) ([limits] overlap)" in full
    assert "overlap 3 % (usual 2 %)" in processing_words(result)  # as the figure shows them too
    many = good.settings.replaced(limits=Limits(overlap=0.03, noise=0.03, work=0.1, bending=0.2, striker=0.1))
    assert processing_words(reduce(good.record, good.rig, good.sheet, many)).endswith("and 1 more")
    assert shot_json(result)["limits_set_by_lab"]["overlap"] == {"limit": 0.03, "usual": 0.02}
