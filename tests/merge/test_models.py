"""What every law must do, whatever its formula; formulas and constants are checked in tests/published."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from shpb.errors import InputError
from shpb.merge.models.mechanical_threshold import hardened
from shpb.merge.models.model import Model
from shpb.merge.models.registry import all_models, model_named
from tests.merge.campaign import FACTS, PLANTED, grid_for, law, planted

MODELS = [law(model.key) for model in all_models()]


def test_every_law_is_found_once() -> None:
    keys = [model.key for model in all_models()]
    assert sorted(keys) == sorted(PLANTED)
    assert len(set(keys)) == len(keys)


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.key)
def test_says_what_it_is(model: Model) -> None:
    assert model.source
    assert any(character.isdigit() for character in model.source)  # a year
    assert model.cannot
    for parameter in model.parameters:
        assert parameter.meaning
        assert parameter.unit in ("Pa", "1", "1/s", "1/K")
        assert parameter.lower < parameter.upper
        assert parameter.lower <= parameter.held_at <= parameter.upper or not parameter.needs
        assert set(parameter.needs) <= {"rates", "temperatures"}


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.key)
def test_broadcasts_and_is_the_same_point_by_point(model: Model) -> None:
    p = np.array(PLANTED[model.key])
    strain, rate = np.array([0.05, 0.1, 0.3]), np.array([[1e-3], [1e3]])
    stress = model.stress_pa(p, strain, rate, 400.0)
    assert stress.shape == (2, 3)
    single = model.stress_pa(p, 0.1, 1e3, 400.0)
    assert single.shape == ()
    assert stress[1, 1] == pytest.approx(float(single), rel=1e-14)


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.key)
def test_uses_what_it_says_it_uses(model: Model) -> None:
    p = np.array(PLANTED[model.key])
    here = model.stress_pa(p, 0.1, 1.0, 400.0)
    assert (model.stress_pa(p, 0.1, 1e3, 400.0) > 1.001 * here) == model.uses_rate
    warmer = model.stress_pa(p, 0.1, 1.0, 500.0)
    assert (warmer != here) == model.uses_temperature
    if model.softening_only:
        temperatures = np.linspace(300, 1200, 50)
        assert (np.diff(model.stress_pa(p, 0.1, 1.0, temperatures)) <= 0).all()


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.key)
def test_start_is_inside_and_near(model: Model) -> None:
    points = planted(model, grid_for(model))
    start = model.start(points)
    assert (start > model.lower).all()
    assert (start < model.upper).all()
    stress = model.stress_pa(start, points.plastic_strain, points.rate_per_s, points.heated_k())
    # A coarse grid of the parameters that do not enter linearly: the search sets out from within a fifth.
    assert np.sqrt(np.mean((stress / points.stress_pa - 1) ** 2)) < 0.2


@pytest.mark.parametrize("start", [-0.3, 0.0, 0.4, 0.9, 1.3])
def test_closed_hardening_is_that_of_its_rate_equation(start: float) -> None:
    # dX/ds = 1 - tanh(2X)/tanh 2 (Follansbee & Kocks 1988), integrated by a general-purpose solver.
    steps = np.array([0.0, 0.01, 0.5, 3.0, 20.0])
    solved = solve_ivp(
        lambda _, x: 1 - np.tanh(2 * x) / np.tanh(2), (0, 20), [start], t_eval=steps, rtol=1e-12, atol=1e-13
    )
    assert hardened(np.full(5, start), steps) == pytest.approx(solved.y[0], abs=1e-11)


def test_hardening_stays_at_saturation() -> None:
    assert hardened(np.array([1.0, 1 - 1e-15]), np.array([0.5, 50.0])) == pytest.approx([1.0, 1.0], abs=1e-12)


def test_no_threshold_below_the_athermal_stress() -> None:
    p = np.array(PLANTED["mechanical-threshold"])
    p[3] = 0.5 * p[0]
    assert np.isnan(law("mechanical-threshold").stress_pa(p, 0.1, 1.0, 300.0))


def test_heat_alone_carries_the_glide_of_a_slow_hot_test() -> None:
    model, p = law("mechanical-threshold"), np.array(PLANTED["mechanical-threshold"])
    p[4] = 0.1
    assert model.stress_pa(p, 0.1, 1e-6, 1000.0) == pytest.approx(p[0], rel=1e-12)


def test_unknown_law_and_facts() -> None:
    with pytest.raises(InputError, match="no law is called 'jonson_cook'.*Did you mean johnson-cook"):
        model_named("jonson_cook")
    model = model_named("johnson-cook")
    with pytest.raises(InputError, match="needs melting_temperature_k: melting temperature .K."):
        model.stress_pa(np.array(PLANTED["johnson-cook"]), 0.1, 1.0, 300.0)
    with pytest.raises(InputError, match="takes no fact 'melting_temperature'.*mean melting_temperature_k"):
        model.with_facts(melting_temperature=1356.0)
    with pytest.raises(InputError, match="fact melting_temperature_k: found -5, expected more than 0"):
        model.with_facts(melting_temperature_k=-5.0)
    with pytest.raises(InputError, match="3 parameters, expected 5: A, B, n, C, m"):
        law("johnson-cook").stress_pa(np.ones(3), 0.1, 1.0, 300.0)


def test_facts_are_stated_on_a_copy() -> None:
    model = model_named("johnson-cook")
    other = model.with_facts(**FACTS["johnson-cook"]).with_facts(reference_rate_per_s=1e-3)
    assert other.known_facts() == {
        "reference_rate_per_s": 1e-3,
        "reference_temperature_k": 293.0,
        "melting_temperature_k": 1356.0,
    }
    assert not model.stated
