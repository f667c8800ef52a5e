"""A whole shot by Monte Carlo: the chain itself, the linear budget, closed forms; seeds, chunks, memory, stopping."""

from __future__ import annotations

import dataclasses
import tracemalloc
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.reduction import ShotResult, draw_shot, reduce
from shpb.rig.gauge import TestKind
from shpb.rig.rig import Rig
from shpb.settings import DEFAULT, Alignment, Analysis, Correction, Dispersion, Settings
from shpb.trust import draws as draws_module
from shpb.trust.budget import flow_stress_uncertainty_pa, uncertainty_budget
from shpb.trust.drawn_curves import CURVES, DrawnCurves
from shpb.trust.drawn_faces import Drawn, DrawnFaces
from shpb.trust.draws import Draws, draw_evidence
from shpb.trust.evidence import Evidence
from tests.synthetic import copper, gauge, record_of, rig, sheet, steel_bar, uniform_plastic_shot

Array = NDArray[np.float64]
SETTINGS = {
    "usual": DEFAULT,
    "feet": DEFAULT.replaced(alignment=Alignment.FEET),
    "amplitude, three-wave": DEFAULT.replaced(dispersion=Dispersion.FULL, analysis=Analysis.THREE_WAVE),
    "rigid": DEFAULT.replaced(dispersion=Dispersion.NONE),
}


@cache
def faces():  # type: ignore[no-untyped-def]
    return uniform_plastic_shot(rig(), copper(), interval_s=4e-7)[0]


def shot(
    settings: Settings = DEFAULT,
    lab: Rig | None = None,
    kind: TestKind = TestKind.COMPRESSION,
    noise_v: float = 0.004,
) -> ShotResult:
    lab = lab or rig()
    return reduce(record_of(faces(), lab, kind, noise_v=noise_v), lab, sheet(kind=kind), settings)


def evidence_of(result: ShotResult) -> Evidence:
    return Evidence(**{field.name: getattr(result, field.name) for field in dataclasses.fields(Evidence)})


@cache
def usual() -> ShotResult:
    return draw_shot(shot(), 4000, seed=5)


def of(result: ShotResult) -> Draws:
    assert result.draws is not None
    return result.draws


@pytest.mark.parametrize("settings", SETTINGS.values(), ids=SETTINGS)
@pytest.mark.parametrize("own", ["one stock", "two bars"])
def test_a_draw_of_nothing_is_the_chain(settings: Settings, own: str) -> None:
    """Bins, phases and formulas written for rows of draws give what the reduction gave."""
    lab = rig(transmitted_bar=steel_bar(diameter_m=Quantity(0.019), wave_speed_m_s=Quantity(5100.0)))
    result = shot(settings, rig() if own == "one stock" else lab)
    evidence = evidence_of(result)
    carried = DrawnFaces(evidence, {"in": (0.01, 0.002), "out": (0.01, 0.002)})
    strains = carried(Drawn({}, {}, {}, 1))
    for n, name in enumerate(("incident", "reflected", "transmitted")):
        pulse = getattr(result.faces, name)
        for found, expected in (
            (strains.force[n], pulse.force_strain),
            (strains.velocity[n], pulse.velocity_strain),
        ):
            there = CubicSpline(result.response.time_s, expected)(carried.time_s)
            # What a cubic between samples of the record leaves: a thirtieth of a per cent of what a shift by one does.
            assert np.abs(found[0] - there).max() <= 3e-5 * np.abs(there).max(), name
    curves = DrawnCurves(evidence, result.budget, carried.time_s, strains)
    one, three = result.response.one_wave, result.response.three_wave
    for found, expected in zip(
        curves.usual,
        (
            *result.response.motion[:2],
            one.stress_pa,
            one.strain_rate_per_s,
            three.stress_pa,
            three.strain_rate_per_s,
        ),
        strict=True,
    ):
        there = CubicSpline(result.response.time_s, expected)(carried.time_s)
        assert np.abs(found[0] - there).max() <= 1e-4 * np.abs(there).max()


@pytest.mark.parametrize("settings", SETTINGS.values(), ids=SETTINGS)
def test_draws_and_linear_budget_agree_where_the_chain_is_nearly_linear(settings: Settings) -> None:
    result = draw_shot(shot(settings), 3000, seed=2)
    draws, span = of(result), result.response.span or result.response.loading
    middle = slice(span[0] + (span[1] - span[0]) // 3, span[0] + 2 * (span[1] - span[0]) // 3)
    for name in CURVES[:-1]:
        ratio = draws.of("u", name)[middle] / result.budget.u_of(name)[middle]
        # 3000 draws know u within 1.3 %: 4 % is three times that.
        assert np.abs(np.median(ratio) - 1) < 0.04, (name, float(np.median(ratio)))
        centre = draws.of("mean", name)[middle]
        half = (draws.of("high", name) - draws.of("low", name))[middle] / 2
        # Nearly normal: 1.96 u to either side, about what the reduction gave.
        assert np.median(half / result.budget.u_of(name)[middle]) == pytest.approx(1.96, rel=0.06)
        assert (
            np.abs(centre - _curve(result, name)[middle]).max()
            < 0.25 * result.budget.u_of(name)[middle].max()
        )


def _curve(result: ShotResult, name: str) -> Array:
    one, three, curve = result.response.one_wave, result.response.three_wave, result.response.curve
    return {
        "stress_1w": one.stress_pa, "strain_rate_1w": one.strain_rate_per_s, "strain_1w": one.strain,
        "stress_3w": three.stress_pa, "strain_rate_3w": three.strain_rate_per_s, "strain_3w": three.strain,
        "true_strain": curve.true_strain, "true_stress": curve.true_stress_pa,
    }[name]  # fmt: skip


@pytest.mark.parametrize("off", [False, True])
def test_flow_stress_of_each_draws_own_curve(off: bool) -> None:
    corrections = (Correction.MISMATCH, Correction.INDENTATION) if off else (Correction.MISMATCH,)
    result = draw_shot(shot(DEFAULT.replaced(corrections=corrections)), 3000, seed=4)
    modulus = result.sheet.specimen.young_modulus_pa
    linear = flow_stress_uncertainty_pa(result.budget, result.response, modulus)
    points = {p.at_strain: (p.stress_pa, u) for p, u in zip(result.response.flow, linear, strict=True)}
    assert len(of(result).flow) >= 4
    for drawn in of(result).flow:
        stress, u = points[drawn.at_strain]
        assert stress is not None
        assert u is not None
        assert drawn.mean_pa == pytest.approx(stress, abs=0.3 * u)
        # 0.02 lies where the curve still bends: a few per cent more than a straight slope says.
        assert drawn.u_pa == pytest.approx(u, rel=0.08)
        assert drawn.low_pa < stress < drawn.high_pa


def test_tension_is_drawn_with_its_own_sign() -> None:
    result = draw_shot(shot(kind=TestKind.TENSION), 1000, seed=3)
    middle = sum(result.response.span or (0, 0)) // 2
    for name in ("true_stress", "true_strain"):
        assert of(result).of("u", name)[middle] == pytest.approx(result.budget.u_of(name)[middle], rel=0.1)
        assert of(result).of("mean", name)[middle] == pytest.approx(_curve(result, name)[middle], rel=0.01)


def test_r_is_folded_at_zero() -> None:
    # In equilibrium R is |D| of a normal D about 0: mean u sqrt(2/pi), u sqrt(1 - 2/pi), 97.5 % at 2.24 u.
    result = usual()
    span = result.response.span
    assert span is not None
    part = slice(span[0] + 150, span[0] + 400)
    u = result.budget.u_force_difference[part]
    draws = of(result)
    name = "equilibrium_ratio"
    assert np.median(draws.of("mean", name)[part] / u) == pytest.approx(np.sqrt(2 / np.pi), rel=0.06)
    assert np.median(draws.of("u", name)[part] / u) == pytest.approx(np.sqrt(1 - 2 / np.pi), rel=0.06)
    assert np.median(draws.of("high", name)[part] / u) == pytest.approx(2.24, rel=0.06)
    assert draws.of("low", name)[part].min() >= 0
    assert draws.of("mean", name)[0] == 2.0  # before any force, R says nothing


def test_what_is_not_linear_shows() -> None:
    # Stress is inverse to the gauge factor: E[1/(1 + x)] = 1 + u^2 + 3 u^4 for x of u = 0.1, and skew.
    lab = rig(transmitted_gauge=gauge("B", 0.6, gauge_factor=Quantity(2.1, 0.21)))
    result = draw_shot(shot(lab=lab), 10_000, seed=6)
    draws, middle = of(result), sum(result.response.span or (0, 0)) // 2
    stress = result.response.one_wave.stress_pa[middle]
    assert draws.of("mean", "stress_1w")[middle] / stress == pytest.approx(1.0103, abs=0.003)
    low, high = (draws.of(end, "stress_1w")[middle] / stress for end in ("low", "high"))
    # The ends are 1/(1 +- 1.96 x 0.1); the other sources, 1 % together, hardly widen them.
    assert (low, high) == (pytest.approx(1 / 1.196, rel=0.01), pytest.approx(1 / 0.804, rel=0.015))


def test_correlated_values_of_the_rig() -> None:
    # Gauge factor and gain of equal relative u with r = -1 cancel in the strain, product for product but for u^2.
    one = gauge("B", 0.6, gauge_factor=Quantity(2.1, 0.042), gain=Quantity(200.0, 4.0))
    result = shot(lab=rig(transmitted_gauge=one))
    names = ("transmitted gauge factor", "transmitted gain")
    middle = sum(result.response.span or (0, 0)) // 2
    stress = result.response.one_wave.stress_pa[middle]

    for r, strain_u in ((-1.0, 0.0), (1.0, 0.04)):
        correlations = {names: r}
        draws = draw_evidence(evidence_of(result), result.budget, 2000, seed=3, correlations=correlations)
        drawn = float(draws.of("u", "stress_1w")[middle] / stress)
        linear = uncertainty_budget(evidence_of(result), correlations).u_of("stress_1w")[middle] / stress
        assert drawn == pytest.approx(linear, rel=0.06), r
        # What is left without gauge factor and gain is below 1 %.
        assert strain_u <= drawn < np.hypot(strain_u, 0.01)


def test_a_seed_gives_the_same_draws_whatever_the_chunks() -> None:
    result = shot()
    evidence = evidence_of(result)

    def drawn(seed: int, chunk: int | None = None) -> Draws:
        return draw_evidence(evidence, result.budget, 600, seed=seed, chunk=chunk)

    first, again, other = drawn(7), drawn(7, 150), drawn(8)
    for what in ("mean", "u", "low", "high"):
        a, b, c = (getattr(draws, what) for draws in (first, again, other))
        scale = np.abs(a).max(axis=1, keepdims=True)
        assert np.abs(a - b).max() <= 1e-9 * scale.max()
        np.testing.assert_allclose(a / scale, b / scale, rtol=0, atol=1e-12)
        assert not np.allclose(a / scale, c / scale, rtol=0, atol=1e-6)
    assert first.flow[0].mean_pa == pytest.approx(again.flow[0].mean_pa, rel=1e-12)


def test_memory_is_bounded_whatever_the_number_of_draws() -> None:
    result = shot()
    evidence = evidence_of(result)
    peaks = []
    for count in (2000, 4000):
        tracemalloc.start()
        draw_evidence(evidence, result.budget, count)
        peaks.append(tracemalloc.get_traced_memory()[1])
        tracemalloc.stop()
    assert peaks[1] < 1.1 * peaks[0]
    assert max(peaks) < 200e6  # bytes


def test_progress_is_told() -> None:
    said: list[tuple[int, int | None]] = []
    draw_shot(shot(), 700, progress=lambda done, asked: said.append((done, asked)))
    assert said[-1] == (700, 700)
    assert [done for done, _ in said] == sorted(done for done, _ in said)


@pytest.mark.slow
def test_adaptive_draws_stop_when_settled_or_at_their_limit(monkeypatch: pytest.MonkeyPatch) -> None:
    # Two batches of 10,000 cannot settle every sample of every curve to 5 % of u: Student's factor for two is 12.7.
    monkeypatch.setattr(draws_module, "ADAPTIVE_LIMIT", 20_000)
    draws = of(draw_shot(shot(), None))
    assert (draws.draws, draws.settled) == (20_000, False)
    # One digit of what hardly any draw moves is settled at once.
    monkeypatch.setattr(draws_module, "ADAPTIVE_LIMIT", 100_000)
    monkeypatch.setattr(draws_module, "monte_carlo", _short_batches)
    assert of(draw_shot(shot(), None)).settled


def _short_batches(model, inputs, correlations, **options):  # type: ignore[no-untyped-def]
    """The engine on four samples of one curve alone, which settle within a few batches."""
    from shpb.trust.montecarlo import monte_carlo

    few: list[int] = []

    def thin(values):  # type: ignore[no-untyped-def]
        y = model(values)
        few[:] = [y.shape[1]]
        return y[:, :: y.shape[1] // 3]

    done = monte_carlo(thin, inputs, correlations, **options)
    full = {
        name: np.interp(np.arange(few[0]), np.arange(done.u.size) * (few[0] // 3), getattr(done, name))
        for name in ("mean", "u", "low", "high")
    }
    return dataclasses.replace(done, **full)


@pytest.mark.parametrize(
    ("draws", "seed", "message"), [(100, 1, "100 draws are too few"), (500, -1, "the seed is -1")]
)
def test_refusals(draws: int, seed: int, message: str) -> None:
    with pytest.raises(InputError, match=message):
        draw_shot(usual(), draws, seed=seed)


def test_poissons_ratio_must_stay_that_of_a_solid() -> None:
    lab = rig(incident_bar=steel_bar(poisson_ratio=Quantity(0.29, 0.1)))
    with pytest.raises(InputError, match=r"standard uncertainty of Poisson's ratio is 0\.1"):
        draw_shot(shot(lab=lab), 500)
