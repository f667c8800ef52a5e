"""What follows a hand at once is the very same as a whole reduction with these windows gives."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from shpb.adjust.following import Following
from shpb.errors import InputError
from shpb.settings import Alignment, Dispersion, Settings, Waves

Make = Callable[..., Following]

CHOICES = (
    {},
    {"incident_window_s": (-45e-6, 290e-6)},
    {"reflected_window_s": (360e-6, 540e-6)},
    {"transmitted_window_s": (280e-6, 470e-6)},
    {"incident_foot_s": 3e-6},
    {"reflected_foot_s": 401e-6},
    {"incident_foot_s": 2e-6, "transmitted_window_s": (290e-6, 480e-6), "transmitted_foot_s": 322e-6},
    {"reflected_window_s": (360e-6, 580e-6)},
    {},
)


@pytest.mark.parametrize("alignment", [Alignment.PHYSICAL, Alignment.FEET])
@pytest.mark.parametrize("dispersion", [Dispersion.PHASE, Dispersion.FULL])
def test_it_gives_what_a_whole_reduction_gives(
    following: Make, alignment: Alignment, dispersion: Dispersion
) -> None:
    # One after the other, so that everything kept from the last choice has its chance to be wrong.
    base = Settings(alignment=alignment, dispersion=dispersion)
    shot = following(base)
    for choice in CHOICES:
        settings = base.replaced(**choice)
        live, whole = shot.live(settings, shot.own), shot.reduced(settings)
        assert live.problem == ""
        assert live.response is not None
        for analysis in ("one_wave", "three_wave"):
            mine, its = getattr(live.response, analysis), getattr(whole.response, analysis)
            scale = float(np.abs(its.true_stress_pa).max())
            # FFTs of another length round otherwise, by some 1e-15 of the greatest value.
            assert np.abs(mine.true_stress_pa - its.true_stress_pa).max() < 1e-9 * scale
            assert np.abs(mine.true_strain - its.true_strain).max() < 1e-9
        assert live.response.span == whole.response.span
        assert live.response.equilibrium.mean_ratio == pytest.approx(whole.response.equilibrium.mean_ratio)
        for pulse, other in zip(live.pulses, whole.pulses, strict=True):
            assert pulse.window_s == other.window_s
            assert pulse.set_by_hand == other.set_by_hand
            assert np.array_equal(pulse.strain, other.strain)


def test_only_what_is_touched_is_cut_anew(following: Make) -> None:
    shot = following()
    first = shot.pulses(Settings())
    second = shot.pulses(Settings(reflected_window_s=(360e-6, 540e-6)))
    assert second.incident is first.incident
    assert second.transmitted is first.transmitted
    assert second.reflected is not first.reflected
    third = shot.pulses(Settings(reflected_window_s=(360e-6, 540e-6), incident_foot_s=2e-6))
    assert third.incident is not first.incident  # windows of the program hang on the incident foot


def test_windows_without_a_curve_are_said_and_not_raised(following: Make) -> None:
    shot = following()
    live = shot.live(Settings(transmitted_window_s=(500e-6, 619e-6), transmitted_foot_s=1.0), shot.own)
    assert live.response is None
    assert live.pulses is shot.own
    assert "outside its window" in live.problem
    short = shot.live(Settings(reflected_window_s=(200e-6, 225e-6)), shot.own)
    assert short.response is None
    assert "in common" in short.problem


def test_what_was_moved_knows_what_the_program_chose(following: Make) -> None:
    shot = following()
    own = shot.own
    after = Settings(reflected_window_s=(360e-6, 540e-6))
    (move,) = shot.moves(Settings(), after)
    assert (move.pulse, move.part, move.by_hand) == ("reflected", "window", True)
    assert move.automatic_s == move.before_s == own.reflected.window_s
    assert move.after_s == (360e-6, 540e-6)
    (back,) = shot.moves(after, Settings())
    assert not back.by_hand
    assert back.before_s == (360e-6, 540e-6)
    assert back.after_s == own.reflected.window_s
    assert shot.moves(after, after) == ()


def test_what_follows_another_change_was_moved_by_nobody(following: Make) -> None:
    # The incident foot ties all windows of the program; only the foot was moved by hand.
    shot = following()
    after = Settings(incident_foot_s=4e-6)
    assert shot.pulses(after).reflected.window_s != shot.own.reflected.window_s
    (move,) = shot.moves(Settings(), after)
    assert (move.pulse, move.part) == ("incident", "foot")


def test_stations_have_no_windows_to_move(following: Make) -> None:
    with pytest.raises(InputError, match="no windows to move"):
        following(Settings(waves=Waves.STATIONS))
