"""What holds for every check: its place in the table, its source, the order and weight of what it says."""

from __future__ import annotations

import dataclasses

import pytest

from shpb.limits import LIMIT_FACTS, Limits, key_of
from shpb.quantity import Quantity
from shpb.reduction import ShotResult, reduce
from shpb.settings import DEFAULT
from shpb.trust.finding import Answer, Finding, Verdict, Weight, graded, verdict_of
from shpb.trust.judge import CAUSES_FIRST, all_checks, check
from tests.synthetic import FaceStrains, gauge, record_of, rig
from tests.trust.shots import finding, good_sheet, run


def test_a_good_shot_is_accepted_without_a_word(good: ShotResult) -> None:
    assert good.verdict is Verdict.ACCEPT
    loud = {f.check for f in good.findings if f.weight is not Weight.FINE}
    # A flat pulse on a hardening specimen: the rate falls, which is a note and no fault.
    # It is in equilibrium by construction, sooner than waves could even out.
    assert loud <= {"rate constancy", "reverberations"}


def test_every_finding_is_complete(good: ShotResult) -> None:
    names = {one.name for one in all_checks()}
    assert {f.check for f in good.findings} <= names
    for f in good.findings:
        assert f.measured, f.check
        assert f.limit, f.check
        assert f.source, f.check
        assert f.action or f.weight is Weight.FINE, f.check


def test_checks_are_found_by_themselves_and_tell_what_they_look_at() -> None:
    checks = all_checks()
    names = [one.name for one in checks]
    assert len(names) == len(set(names)) >= 25
    for one in checks:
        assert one.what.endswith("."), one.name
        assert one.limits or one.source, one.name
    homes = [one.ask.__module__.rsplit(".", 1)[1] for one in checks]
    assert list(dict.fromkeys(homes)) == list(CAUSES_FIRST)


def test_every_limit_is_used_by_a_check_or_by_the_repeats() -> None:
    used = {name for one in all_checks() for name in one.limits}
    assert set(LIMIT_FACTS) - used == {"repeat_scatter"}


@pytest.mark.parametrize(
    ("value", "weight"),
    [(0.02, Weight.FINE), (0.0201, Weight.NOTE), (0.05, Weight.NOTE), (0.0501, Weight.REJECT)],
)
def test_grading(value: float, weight: Weight) -> None:
    answer = graded(value, 0.02, 0.05, measured="m", action="a")
    assert (answer.weight, answer.limit) == (weight, "2 %, reject beyond 5 %")
    assert graded(1.0, 0.5, measured="m", action="a", beyond=Weight.RESTRICT).weight is Weight.RESTRICT


def test_a_check_must_say_where_its_limit_comes_from() -> None:
    def some(evidence: object) -> Answer | None:
        """Nothing."""

    with pytest.raises(TypeError, match="found neither"):
        check(gravest=Weight.NOTE)(some)
    with pytest.raises(TypeError, match="overlapp"):
        check("overlapp", gravest=Weight.NOTE)
    made = check("overlap", "striker", source="a law", gravest=Weight.NOTE)(some)
    assert made.source_with(Limits()) == "a law; common practice ([limits] overlap, striker)"
    assert made.source_with(Limits(overlap=0.03)) == (
        "a law; set by this lab (usual: 2 %, common practice) ([limits] overlap); common practice ([limits] striker)"
    )


def test_a_limit_that_the_lab_sets_moves_the_finding_and_says_so(
    faces: FaceStrains, good: ShotResult
) -> None:
    assert finding(good, "noise").weight is Weight.FINE
    assert finding(good, "noise").source == "common practice ([limits] noise)"
    strict = run(faces, settings=DEFAULT.replaced(limits=Limits(noise=1e-4)))
    said = finding(strict, "noise")
    assert (said.weight, said.limit) == (Weight.NOTE, "0.01 %")
    assert said.source == "set by this lab (usual: 2 %, common practice) ([limits] noise)"


def _value_beyond(name: str) -> float:
    """Another value of the limit that still lies in its range."""
    fact, usual = LIMIT_FACTS[name], getattr(Limits(), name)
    return type(usual)(usual + 1 if isinstance(usual, int) else (usual + fact.low) / 2)


def test_every_limit_shows_in_the_source_of_its_checks() -> None:
    for name in LIMIT_FACTS:
        limits = Limits().replaced(**{name: _value_beyond(name)})
        for one in all_checks():
            source = one.source_with(limits)
            assert ("set by this lab" in source) == (name in one.limits), (name, one.name)
            if name in one.limits:
                assert key_of(name) in source


def test_a_wrong_gain_names_the_gauges_before_what_follows(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    wrong = rig(transmitted_gauge=gauge("B", 0.6, gain=Quantity(400.0)))
    result = reduce(record, wrong, good_sheet())
    against = [f.check for f in result.findings if f.weight is Weight.REJECT]
    assert against[0] == "momentum balance"
    assert "force equilibrium" in against
    assert "gain" in finding(result, "momentum balance").action


def test_gravest_finding_decides() -> None:
    def of(*weights: Weight) -> tuple[Finding, ...]:
        return tuple(Finding(check="x", weight=w, measured="m", limit="l", source="s") for w in weights)

    assert verdict_of(()) is Verdict.ACCEPT
    assert verdict_of(of(Weight.FINE, Weight.NOTE)) is Verdict.ACCEPT
    assert verdict_of(of(Weight.NOTE, Weight.RESTRICT)) is Verdict.RESTRICT
    assert verdict_of(of(Weight.RESTRICT, Weight.REJECT)) is Verdict.REJECT


def test_findings_stand_gravest_first(faces: FaceStrains) -> None:
    record = record_of(faces, rig(), noise_v=0.002)
    loud = dataclasses.replace(record, remarks=("channel 'A': 2 samples over range",))
    wrong = rig(transmitted_gauge=gauge("B", 0.6, gain=Quantity(400.0)))
    findings = reduce(loud, wrong, good_sheet()).findings
    gravity = [f.weight.gravity for f in findings]
    assert gravity == sorted(gravity, reverse=True)
    assert findings[0].check == "over range"
