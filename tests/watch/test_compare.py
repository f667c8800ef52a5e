"""A shot against its repeats, and the next striker speed, held against numbers worked out by hand."""

from __future__ import annotations

import pytest

from shpb.trust.finding import Finding, Verdict, Weight
from shpb.trust.repeats import FlowPoint, RepeatShot
from shpb.watch.compare import compared, next_steps, speed_step
from shpb.watch.tasks import PastShot, Shown


def past(
    shot_id: str, stress_mpa: float, *, end: float = 0.2, verdict: str = "accept", **changes: object
) -> PastShot:
    values: dict[str, object] = {
        "shot_id": shot_id,
        "material": "Wrenmoor 3",
        "kind": "compression",
        "temperature_k": 293.0,
        "rate_per_s": 1500.0,
        "rig": "one",
        "scatter": 0.02,
        "flow": (
            FlowPoint(strain=0.1, plastic=True, stress_pa=stress_mpa * 1e6, u_own_pa=1e6, u_shared_pa=3e6),
        ),
    }
    repeat = RepeatShot(**{**values, **changes}) if verdict != "reject" else None  # type: ignore[arg-type]
    return PastShot(shot_id=shot_id, verdict=verdict, repeat=repeat, end_strain=end)


def shown(**changes: object) -> Shown:
    values: dict[str, object] = {
        "shot_id": "S-9", "verdict": "accept", "sentence": "The shot counts.", "line": "S-9, Wrenmoor 3",
        "findings": (), "past": past("S-9", 200.0), "rate_per_s": 1500.0, "true_rate_per_s": 1600.0,
        "strain_span": (0.02, 0.2), "flow": ((0.1, True, 200e6, 2e6),), "equilibrium": "reached",
        "striker_speed_m_s": 12.0, "stress_per_speed": 20e6, "bar_yield_pa": 1e9, "result": "S-9.h5",
        "files": ("S-9.h5",),
    }  # fmt: skip
    return Shown(**{**values, **changes})  # type: ignore[arg-type]


def finding(weight: Weight, action: str, check: str = "a check") -> Finding:
    return Finding(check=check, weight=weight, measured="1", limit="2", source="-", action=action)


def test_mean_and_scatter_of_the_others() -> None:
    comparison = compared(
        past("S-9", 210.0, end=0.19), [past("S-1", 198.0), past("S-2", 200.0), past("S-3", 202.0)]
    )
    assert comparison is not None
    assert comparison.shot_ids == ("S-1", "S-2", "S-3")
    rate, stress, strain = comparison.numbers
    # By hand: mean 200, sample standard deviation sqrt((4 + 0 + 4)/2) = 2; 210/200 - 1 = 5 %.
    assert (stress.value, stress.mean, stress.scatter, stress.count) == pytest.approx((210.0, 200.0, 2.0, 3))
    assert stress.share == pytest.approx(0.05)
    assert (rate.share, rate.scatter) == (0.0, 0.0)
    assert strain.share == pytest.approx(-0.05)


def test_one_other_has_no_scatter() -> None:
    comparison = compared(past("S-9", 210.0), [past("S-1", 200.0)])
    assert comparison is not None
    assert comparison.numbers[1].scatter is None


@pytest.mark.parametrize(
    "other",
    [
        past("S-1", 200.0, material="Hexalune 7"),
        past("S-1", 200.0, kind="tension"),
        past("S-1", 200.0, temperature_k=473.0),
        past("S-1", 200.0, rate_per_s=3000.0),
        past("S-1", 200.0, verdict="reject"),
        past("s-9", 200.0),  # the shot itself, as it was before
    ],
)
def test_other_conditions_are_not_compared(other: PastShot) -> None:
    comparison = compared(past("S-9", 210.0), [other])
    assert comparison is not None
    assert comparison.shot_ids == ()
    assert comparison.numbers == ()


def test_a_shot_that_does_not_count_is_not_compared() -> None:
    assert compared(past("S-9", 210.0, verdict="reject"), [past("S-1", 200.0)]) is None


def test_a_shot_far_off_disagrees_and_a_near_one_does_not() -> None:
    # Allowed: 2 sqrt(v + pi/2 v/3) with v = u_own^2 + (2 % of 200 MPa)^2 = 17 MPa^2: about 10 MPa.
    others = [past("S-1", 198.0), past("S-2", 200.0), past("S-3", 202.0)]
    for stress, disagrees in ((207.0, False), (215.0, True)):
        comparison = compared(past("S-9", stress), others)
        assert comparison is not None
        assert comparison.repeats is not None
        named = [one.shot_ids for one in comparison.repeats.disagreements]
        assert named == ([("S-9",)] if disagrees else [])


# --- the next shot -------------------------------------------------------------------------------------


def test_the_gravest_action_comes_first_and_each_once() -> None:
    findings = [
        finding(Weight.FINE, "never said"),
        finding(Weight.RESTRICT, "second"),
        finding(Weight.REJECT, "first"),
        finding(Weight.REJECT, "first", "another"),
        finding(Weight.NOTE, "of no weight here"),
        finding(Weight.REJECT, ""),
    ]
    assert next_steps(findings) == ["first", "second"]
    assert next_steps([finding(Weight.NOTE, "a note alone is said")]) == ["a note alone is said"]
    assert next_steps([]) == []


def test_the_speed_goes_with_the_rate() -> None:
    step = speed_step(shown(), 2000.0)
    assert step is not None
    assert step.speed_m_s == pytest.approx(16.0)  # 12 * 2000/1500
    assert step.share_of_yield == pytest.approx(0.32)  # 16 m/s * 20 MPa s/m of 1 GPa
    assert not step.too_fast


def test_beyond_half_the_yield_strength_it_is_not_advised() -> None:
    step = speed_step(shown(), 3200.0)
    assert step is not None
    assert step.share_of_yield == pytest.approx(0.512)
    assert step.too_fast


def test_no_speed_from_a_shot_that_does_not_count_or_states_none() -> None:
    rejected = speed_step(shown(verdict=Verdict.REJECT.value), 2000.0)
    unstated = speed_step(shown(striker_speed_m_s=None), 2000.0)
    assert rejected is not None
    assert unstated is not None
    assert (rejected.speed_m_s, rejected.counts) == (None, False)
    assert (unstated.speed_m_s, unstated.counts) == (None, True)
    assert speed_step(shown(), None) is None
    assert speed_step(shown(rate_per_s=float("nan")), 2000.0) is None
