"""The specimen between two bars against closed forms.

Elastic: E. D. H. Davies, S. C. Hunter, J. Mech. Phys. Solids 11 (1963) 155-179 and the method of
characteristics; values in data/closed_forms.json, made independently of this package.
"""

from __future__ import annotations

import dataclasses
import math
from typing import Any

import numpy as np
import pytest

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.forward.flow import FlowLaw
from shpb.forward.specimen import SpecimenHistory, SpecimenModel, SpecimenRun, longest_time_step_s
from tests.forward.conftest import bar

Z = bar().impedance_n_s_m
EA = bar().force_per_strain_n


def elastic(beta: float) -> SpecimenModel:
    """A specimen of impedance ``beta`` Z, 10 mm long."""
    area = beta * Z / (8900.0 * 3600.0)
    return SpecimenModel(
        diameter_m=math.sqrt(4 * area / math.pi),
        length_m=0.010,
        young_modulus_pa=8900.0 * 3600.0**2,
        density_kg_m3=8900.0,
    )


def run(
    specimen: SpecimenModel, incident: FloatArray, elements: int, step: float, **more: float
) -> SpecimenHistory:
    marching = SpecimenRun(
        [specimen], np.array([Z]), np.array([Z]), np.array([more.get("temperature", 293.15)]),
        elements=elements, time_step_s=step, damping=more.get("damping", 0.0),
    )  # fmt: skip
    return marching.march(incident[None, :], np.zeros((1, incident.size)))


@pytest.mark.parametrize("case", [0, 1, 2])
def test_elastic_specimen_under_a_step_rings_up_as_the_closed_form(
    closed_forms: dict[str, Any], case: int
) -> None:
    # With the step of one element's transit the scheme is the method of characteristics: exact.
    form = closed_forms["ring_up_step"][case]
    specimen = elastic(form["impedance_ratio_Zs_over_Zb"])
    elements = 8
    step = longest_time_step_s([specimen], elements)
    transits = len(form["n"])
    incident = np.ones(
        transits * elements + 1
    )  # 1 N: strains of some 1e-9, so that large strain plays no part
    incident[0] = 0.5  # the step stands on the first sample
    history = run(specimen, incident, elements, step)
    middle = np.array(form["n"]) * elements + elements // 2
    np.testing.assert_allclose(history.force_in_n[0, middle], form["front_force"], rtol=1e-7)
    np.testing.assert_allclose(history.force_out_n[0, middle], form["back_force"], rtol=1e-7, atol=1e-7)
    whole = np.arange(1, transits) * elements
    strain = np.array(form["nominal_strain_times_EsAs_over_FI_at_t_equal_n_tau"])[1:transits]
    scale = 1.0 / (specimen.young_modulus_pa * specimen.area_m2)
    np.testing.assert_allclose(history.eng_strain[0, whole], scale * strain, rtol=1e-6)


def test_elastic_specimen_under_a_ramp() -> None:
    # Exact characteristics, r(t) = Tf p(t) + Rf^2 r(t - 2 tau): 2|F1 - F2|/(F1 + F2) at whole transits.
    expected = {
        0.1: [0.09524, 0.20956, 0.04448, 0.07455, 0.02800],
        0.5: [0.40000, 0.25455, 0.16393, 0.12539, 0.09984],
        1.0: [2 / 3, 0.4, 2 / 7, 2 / 9, 2 / 11],
    }
    elements = 8
    for beta, alphas in expected.items():
        specimen = elastic(beta)
        step = longest_time_step_s([specimen], elements)
        history = run(specimen, 0.01 * np.arange(6 * elements + 1), elements, step)
        at = np.arange(2, 7) * elements
        front, back = history.force_in_n[0, at], history.force_out_n[0, at]
        np.testing.assert_allclose(2 * np.abs(front - back) / (front + back), alphas, atol=1e-5)  # as printed


def test_momentum_and_energy_balance_of_a_flowing_specimen() -> None:
    # Whatever the specimen does: impulse in less impulse out is its momentum; the work done on it is what
    # it stores as strain and motion.
    specimen = dataclasses.replace(
        elastic(0.3),
        flow=FlowLaw(initial_pa=200e6, hardening_pa=400e6, rate_coefficient=0.02),
        length_m=0.006,
    )
    elements, step = 8, 4e-8
    time = step * np.arange(2000)
    incident = 80e3 * np.sin(np.pi * np.clip(time / 140e-6, 0, 1)) ** 2
    marching = SpecimenRun([specimen], np.array([Z]), np.array([Z]), np.array([293.15]), elements=elements,
                           time_step_s=step)  # fmt: skip
    history = marching.march(incident[None, :], np.zeros((1, incident.size)))
    front, back = history.force_in_n[0], history.force_out_n[0]
    assert (front - back).sum() * step == pytest.approx(marching.momentum_n_s[0], rel=1e-10)
    assert marching.momentum_n_s[0] > 0.03

    v_in, v_out = (2 * incident - front) / Z, back / Z
    work = (front * v_in - back * v_out).sum() * step
    volume = specimen.area_m2 * specimen.length_m
    stored = volume * np.trapezoid(history.nominal_stress_pa[0], history.eng_strain[0])
    mass = specimen.density_kg_m3 * volume
    moving = 0.5 * marching.momentum_n_s[0] ** 2 / mass
    # Mean stress times mean strain leaves out how they vary along the specimen: some 0.1 % here.
    assert work == pytest.approx(stored + moving, rel=0.005)
    assert moving > 0.01 * work
    assert history.eng_strain[0, -1] > 0.05


class EngineeringHardening(FlowLaw):
    """Rate-independent: engineering stress 400 MPa + 1 GPa times engineering strain."""

    __slots__ = ()

    def static_pa(self, plastic_strain: FloatArray) -> FloatArray:
        # True flow stress over true strain: s (1 - e) with e = 1 - exp(-true strain).
        e = -np.expm1(-plastic_strain)
        return np.asarray((400e6 + 1e9 * e) * (1 - e))


def test_uniform_plastic_specimen_against_its_closed_form() -> None:
    # sigma = Y + H e, constant incident strain e_i: de/dt = (2 c0/L)(e_i - A_s Y/(E A)) exp(-t/theta),
    # theta = E A L/(2 c0 A_s H). Bars of 20 mm, E 200 GPa, c0 5000 m/s, specimen 10 x 5 mm, Y 400 MPa,
    # H 1 GPa, e_i 0.002: initially 3000 /s, theta 400 us, e(100 us) = 0.265439.
    # A specimen without mass to speak of and almost rigid stands for the closed form's.
    specimen = SpecimenModel(
        diameter_m=0.010, length_m=0.005, young_modulus_pa=2e13, density_kg_m3=320.0,
        flow=EngineeringHardening(initial_pa=400e6), heat_share=0.0,
    )  # fmt: skip
    step = 1.25e-8
    history = run(specimen, np.full(8001, 0.002 * EA), 1, step)
    time = step * np.arange(8001)
    theta = EA * 0.005 / (2 * 5000 * specimen.area_m2 * 1e9)
    assert theta == pytest.approx(400e-6, rel=1e-9)
    closed = 3000 * theta * (1 - np.exp(-time / theta))
    assert history.eng_strain[0, -1] == pytest.approx(0.265439, rel=1e-4)
    np.testing.assert_allclose(history.eng_strain[0, 500:], closed[500:], rtol=1e-3)
    rate = np.gradient(history.eng_strain[0], step)
    assert rate[160:224].mean() == pytest.approx(3000 * math.exp(-2.4e-6 / theta), rel=1e-3)


def test_plastic_work_heats_the_specimen(closed_forms: dict[str, Any]) -> None:
    # dT = share/(rho c) * plastic work; G. I. Taylor, H. Quinney, Proc. R. Soc. A 143 (1934) 307-326.
    # With softening linear in temperature: dT = (Tm - T0)(1 - exp(-share W/(rho c (Tm - T0)))).
    for case in closed_forms["adiabatic_coupled_johnson_cook_m1"]:
        law = FlowLaw(
            initial_pa=case["A_Pa"],
            hardening_pa=case["B_Pa"],
            hardening_exponent=case["n"],
            reference_temperature_k=case["T_room_K"],
            melting_temperature_k=case["T_melt_K"],
        )
        specimen = SpecimenModel(
            diameter_m=0.010, length_m=0.005, young_modulus_pa=2e12, density_kg_m3=case["rho_kg_m3"],
            flow=law, heat_capacity_j_kg_k=case["cp_J_kgK"], heat_share=case["beta"],
        )  # fmt: skip
        force = np.full(5000, 120e3) * np.minimum(1.0, np.arange(5000) / 750)
        history = run(specimen, force, 1, 4e-8, temperature=case["T_room_K"])
        warmer = np.interp(
            case["plastic_strain"], history.plastic_strain[0], history.temperature_k[0]
        ) - case["T_room_K"]  # fmt: skip
        # The heat of a step softens the next one; elastic strain is 2e-4 of the whole.
        assert warmer == pytest.approx(case["dT_K"], rel=2e-4)


def test_flow_stress_follows_the_law_in_equilibrium() -> None:
    law = FlowLaw(initial_pa=100e6, hardening_pa=250e6, hardening_exponent=0.5, rate_coefficient=0.02,
                  reference_rate_per_s=1e-4)  # fmt: skip
    specimen = SpecimenModel(diameter_m=0.012, length_m=0.004, young_modulus_pa=118e9, density_kg_m3=8900.0,
                             flow=law, heat_share=0.0)  # fmt: skip
    step = 0.5 * longest_time_step_s([specimen], 4)
    time = step * np.arange(1200)
    history = run(specimen, 80e3 * np.sin(0.5 * np.pi * np.clip(time / 20e-6, 0, 1)) ** 2, 4, step)
    plastic = history.plastic_strain[0]
    rate = np.gradient(plastic, step)
    late = plastic > 0.05
    expected = law.stress_pa(plastic, rate, 293.15)
    np.testing.assert_allclose(history.true_stress_pa[0, late], expected[late], rtol=2e-3)
    # Force by current area is the true stress (constant volume).
    area = specimen.area_m2 / (1 - history.eng_strain[0])
    mean = 0.5 * (history.force_in_n[0] + history.force_out_n[0])
    np.testing.assert_allclose((mean / area)[late], history.true_stress_pa[0, late], rtol=0.02)


def test_more_elements_change_little() -> None:
    law = FlowLaw(initial_pa=100e6, hardening_pa=250e6, hardening_exponent=0.5, rate_coefficient=0.02)
    specimen = SpecimenModel(diameter_m=0.012, length_m=0.005, young_modulus_pa=118e9, density_kg_m3=8900.0,
                             flow=law)  # fmt: skip
    strains, forces = [], []
    for elements in (4, 16):
        step = 0.5 * longest_time_step_s([specimen], elements)
        time = step * np.arange(int(90e-6 / step))
        incident = 80e3 * np.sin(0.5 * np.pi * np.clip(time / 15e-6, 0, 1)) ** 2
        history = run(specimen, incident, elements, step)
        at = np.array([20e-6, 40e-6, 80e-6])
        strains.append(np.interp(at, time, history.eng_strain[0]))
        forces.append(np.interp(at, time, history.force_in_n[0]))
    np.testing.assert_allclose(strains[0], strains[1], rtol=2e-3)
    np.testing.assert_allclose(forces[0], forces[1], rtol=5e-3)


def test_contacts_bear_no_tension() -> None:
    specimen = elastic(0.3)
    step = longest_time_step_s([specimen], 8)
    time = step * np.arange(2000)
    pulse = 20e3 * np.sin(np.pi * np.clip(time / 60e-6, 0, 1)) * (time < 60e-6)
    history = run(specimen, pulse - 0.5 * np.roll(pulse, 400), 8, step)
    assert history.force_in_n.min() >= 0.0
    assert history.force_out_n.min() >= 0.0
    assert (history.force_in_n[0, 800:] == 0).mean() > 0.5


def test_specimens_side_by_side_are_each_as_alone() -> None:
    soft = FlowLaw(initial_pa=100e6, hardening_pa=250e6, hardening_exponent=0.5, rate_coefficient=0.02)
    peaked = dataclasses.replace(soft, peak_height=0.3, peak_temperature_k=900.0, peak_rate_slope_per_k=1e-5)
    two = [dataclasses.replace(elastic(0.3), flow=law) for law in (soft, peaked)]
    incident = np.full((2, 800), 60e3)
    args = {"elements": 4, "time_step_s": 0.5 * longest_time_step_s(two, 4)}
    both = SpecimenRun(two, np.full(2, Z), np.full(2, Z), np.array([293.0, 700.0]), **args).march(
        incident, 0 * incident
    )
    for i, temperature in enumerate((293.0, 700.0)):
        alone = SpecimenRun(
            two[i : i + 1], np.full(1, Z), np.full(1, Z), np.array([temperature]), **args
        ).march(incident[:1], 0 * incident[:1])
        np.testing.assert_allclose(both.force_out_n[i], alone.force_out_n[0], rtol=1e-9)


def test_refuses_steps_that_are_too_long() -> None:
    specimen = elastic(0.5)
    with pytest.raises(InputError, match="longer than an element's transit"):
        SpecimenRun([specimen], np.array([Z]), np.array([Z]), np.array([293.0]), elements=8, time_step_s=1e-6)
    flowing = dataclasses.replace(specimen, flow=FlowLaw(initial_pa=20e6))
    step = 0.9 * longest_time_step_s([flowing], 4)
    with pytest.raises(InputError, match="smaller Courant number"):
        run(flowing, np.full(3000, 100e3), 4, step)


def test_refuses_a_specimen_without_size() -> None:
    with pytest.raises(InputError, match="specimen model length_m"):
        SpecimenModel(diameter_m=0.01, length_m=0.0, young_modulus_pa=1e11, density_kg_m3=8000.0)
