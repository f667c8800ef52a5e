"""The uniform specimen between two bars, against closed forms and the chain of elements."""

from __future__ import annotations

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.forward.flow import FlowLaw
from shpb.forward.specimen import SpecimenModel, SpecimenRun, longest_time_step_s
from shpb.forward.uniform import FlowCurve, UniformSpecimen, pass_through
from tests.synthetic import copper, rig, smooth_pulse, steel_bar, uniform_plastic_shot

AREA = copper().area_m2
Z = steel_bar().impedance_n_s_m
EA = steel_bar().force_per_strain_n


def hardening(yield_pa: float, slope_pa: float) -> FlowCurve:
    return FlowCurve(np.array([0.0, 1.0]), np.array([yield_pa, yield_pa + slope_pa]))


def test_linear_hardening_in_closed_form() -> None:
    # e' = (2c/L)(I - A_s Y/(E A)) exp(-t/theta), theta = E A L/(2 c A_s H): for 2e-3, 400 MPa, 1 GPa on 20 mm steel
    # 3000 /s, 400 us and e(100 us) = 0.265439. The first step, from no load at all, costs half a step's strain.
    step = 0.25e-6
    time = np.arange(0.0, 100e-6 + step / 2, step)
    specimen = UniformSpecimen(0.005, AREA, None, 0.0, hardening(400e6, 1e9))
    passage = pass_through(np.full(time.size, 2e-3 * EA), step, specimen, (Z, Z))
    assert passage.plastic[-1] == pytest.approx(0.265439, rel=1e-3)
    np.testing.assert_allclose(passage.force_out_n[1:], AREA * (400e6 + 1e9 * passage.plastic[1:]), rtol=1e-9)
    np.testing.assert_array_equal(passage.force_in_n, passage.force_out_n)  # without mass


def test_an_elastic_specimen_charges_like_a_spring() -> None:
    # C dF/dt = (2 p - F)/Z_i - F/Z_t: F = 2 p/(1 + Z_i/Z_t) (1 - exp(-t/tau)), tau = C/(1/Z_i + 1/Z_t).
    step, other = 0.05e-6, 0.4 * Z
    time = np.arange(0.0, 30e-6, step)
    faces = 3e-10
    specimen = UniformSpecimen(0.005, AREA, 100e9, 0.0, hardening(1e12, 1e9), faces)
    passage = pass_through(np.full(time.size, 1e4), step, specimen, (Z, other))
    tau = (0.005 / (100e9 * AREA) + faces) / (1 / Z + 1 / other)
    expected = 2e4 / (1 + Z / other) * (1 - np.exp(-time / tau))
    np.testing.assert_allclose(passage.force_out_n, expected, atol=0.01 * expected[-1])
    assert not passage.plastic.any()


def test_against_fine_integration() -> None:
    # tests/synthetic integrates the same specimen in steps two hundred times finer, by another scheme.
    faces, strain = uniform_plastic_shot(rig(), copper())
    specimen = UniformSpecimen(0.005, AREA, 100e9, 0.0, hardening(400e6, 1e9))
    passage = pass_through(EA * faces.incident, 2e-7, specimen, (Z, Z))
    loading = strain.argmax()
    np.testing.assert_allclose(
        passage.force_out_n[:loading],
        EA * faces.transmitted[:loading],
        atol=2e-3 * EA * faces.transmitted.max(),
    )


def test_against_the_chain_of_elements() -> None:
    # A thin specimen of mass: forces at both faces as in the chain that follows the waves inside it, over a smooth
    # pulse, within 2 % of the peak; a front face without its share of the mass would be 3 % off in the rise.
    model = SpecimenModel(
        diameter_m=0.010, length_m=0.004, young_modulus_pa=118e9, density_kg_m3=8900.0,
        flow=FlowLaw(initial_pa=200e6, hardening_pa=400e6, hardening_exponent=1.0, rate_coefficient=0.01),
        heat_share=0.0,
    )  # fmt: skip
    step = 0.5 * longest_time_step_s([model], 8)
    time = np.arange(-5e-6, 90e-6, step)
    force = EA * smooth_pulse(time, 1.5e-3, 120e-6, 25e-6)
    run = SpecimenRun([model], np.array([Z]), np.array([Z]), np.array([293.0]), elements=8, time_step_s=step)
    chain = run.march(force[None, :], np.zeros((1, time.size)))
    # The chain hardens in true strain: nominal stress s/(1 - e) at e = 1 - exp(-true). It needs some rate sensitivity
    # to be calm; 1 % an e-fold of the rate is 0.5 % either way over the rates of this shot, about 2500 /s.
    true = np.linspace(0.0, 0.5, 200)
    eng = 1 - np.exp(-true)
    specimen = UniformSpecimen(
        0.004, model.area_m2, 118e9, 8900.0 * model.area_m2 * 0.004,
        FlowCurve(eng, (200e6 + 400e6 * true) / (1 - eng) * (1 + 0.01 * np.log(2500))),
    )  # fmt: skip
    passage = pass_through(force, step, specimen, (Z, Z))
    peak = chain.force_out_n.max()
    late = time > 3e-6  # the first transits belong to the waves, the first flow to the rate
    late &= (time < 9e-6) | (time > 18e-6)
    for found, expected in (
        (passage.force_in_n, chain.force_in_n[0]),
        (passage.force_out_n, chain.force_out_n[0]),
    ):
        assert np.abs(found - expected)[late].max() < 0.02 * peak
    rise = (time > 4e-6) & (time < 8.5e-6)  # at the yield point the waves inside take over
    lead = (chain.force_in_n[0] - chain.force_out_n[0])[rise]
    np.testing.assert_allclose((passage.force_in_n - passage.force_out_n)[rise], lead, atol=0.003 * peak)
    assert lead.mean() > 0.02 * peak


def test_a_flow_curve_that_is_none_is_refused() -> None:
    specimen = UniformSpecimen(0.005, AREA, 100e9, 0.0, FlowCurve(np.array([0.0, 0.0]), np.array([1e8, 2e8])))
    with pytest.raises(InputError, match="does not rise"):
        pass_through(np.zeros(10), 1e-6, specimen, (Z, Z))
