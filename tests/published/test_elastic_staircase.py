"""An elastic specimen between equal bars through the whole chain, against its closed form.

The specimen's own waves bounce between the two faces: with relative impedance b, Rf = (1-b)/(1+b), Tf = 2b/(1+b) and
the incident force p(t), r(t) = Tf p(t) + Rf^2 r(t - 2 tau), F1 = r(t) + Rf r(t - 2 tau), F2 = (1 + Rf) r(t - tau)
(method of characteristics; Davies & Hunter 1963 give the case of a step).
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from shpb.quantity import Quantity
from shpb.reduction import reduce
from shpb.rig.sheet import Specimen
from shpb.wave.propagation import LowPass
from tests.synthetic import FaceStrains, record_of, rig, sheet, smooth_pulse

Array = NDArray[np.float64]
INTERVAL = 2e-7


def staircase(time: Array, force: Array, beta: float, transit_s: float) -> tuple[Array, Array]:
    """Forces on both faces for an incident force; ``transit_s`` is a whole number of samples."""
    steps = round(transit_s / (time[1] - time[0]))
    rf, tf = (1 - beta) / (1 + beta), 2 * beta / (1 + beta)
    r = tf * force.copy()
    for i in range(2 * steps, r.size):
        r[i] += rf**2 * r[i - 2 * steps]

    def late(values: Array, by: int) -> Array:
        return np.concatenate((np.zeros(by), values[: values.size - by]))

    return r + rf * late(r, 2 * steps), (1 + rf) * late(r, steps)


@pytest.mark.parametrize(
    ("beta", "expected"),
    [
        (0.5, [0.28571, 0.08000, 0.02532, 0.00830, 0.00275]),
        (0.1, [0.58065, 0.31094, 0.19834, 0.13749, 0.09999]),
        (0.25, [0.46154, 0.20225, 0.10445, 0.05784, 0.03317]),
    ],
)
def test_the_closed_form_itself(beta: float, expected: list[float]) -> None:
    # |F1 - F2|/mean during the k-th transit of a step, k = 2..6:
    # 2 b (1-b)^(k-1)/((1+b)^k - (1-b)^(k-1)), worked out apart from the program.
    time = np.arange(400.0)
    front, back = staircase(time, np.ones(400), beta, 20.0)
    middle_of_transit = np.array([20 * k - 10 for k in range(2, 7)])
    found = (np.abs(front - back) / (0.5 * (front + back)))[middle_of_transit]
    np.testing.assert_allclose(found, expected, atol=6e-6)


def elastic_specimen(transit_s: float) -> Specimen:
    # Relative impedance 0.25 on the 20 mm bar of Z = 12566.4: rho c A = 3141.6 with d = 10 mm, rho c = 40e6.
    speed = 5000.0
    return Specimen(
        material="elastic",
        diameter_m=Quantity(0.010),
        length_m=Quantity(speed * transit_s),
        young_modulus_pa=Quantity(8000 * speed**2),
        density_kg_m3=Quantity(8000.0),
        poisson_ratio=Quantity(0.29),
    )


@pytest.mark.parametrize("transit_s", [2e-6, 6e-6])
def test_forces_stress_and_strain_of_an_elastic_specimen(transit_s: float) -> None:
    specimen, lab = elastic_specimen(transit_s), rig()
    bar = lab.incident_bar
    time = np.arange(-40e-6, 220e-6, INTERVAL)
    incident = smooth_pulse(time, 1e-3, 100e-6, 30e-6)
    front, back = staircase(time, bar.force_per_strain_n * incident, 0.25, transit_s)
    reflected, transmitted = front / bar.force_per_strain_n - incident, back / bar.force_per_strain_n
    record = record_of(FaceStrains(time, incident, reflected, transmitted), lab)
    result = reduce(record, lab, sheet(specimen))
    response = result.response

    # Time zero is the tangent foot: shift the closed form by what the foot of a 30 us half cosine is late.
    own = response.time_s + result.faces.record_time_of_zero_s - (-200e-6 + 350e-6)
    counted = (own > 0) & (own < 130e-6)

    def expected(values: Array) -> Array:
        # What the one low-pass lets through.
        low_pass: LowPass = result.faces.low_pass
        spectrum = np.fft.rfft(values, 4096)
        gain = low_pass.gain(np.fft.rfftfreq(4096, INTERVAL))
        return np.interp(own, time, np.fft.irfft(spectrum * gain, 4096)[: values.size])

    peak = front.max()
    # 0.4 %: carried back to the gauge, the slowest part of the incident front stands before its window. One
    # sample (0.2 us) on this front would be 1 %.
    np.testing.assert_allclose(
        response.motion.force_in_n[counted], expected(front)[counted], atol=4e-3 * peak
    )
    np.testing.assert_allclose(
        response.motion.force_out_n[counted], expected(back)[counted], atol=4e-3 * peak
    )
    stress = expected(0.5 * (front + back)) / specimen.area_m2
    np.testing.assert_allclose(
        response.three_wave.stress_pa[counted], stress[counted], atol=4e-3 * stress.max()
    )

    # Closing of the faces: v1 - v2 = c (I - R - T).
    closing = bar.wave_speed_m_s * (incident - reflected - transmitted)
    strain = np.cumsum(closing) * INTERVAL / specimen.length_m
    np.testing.assert_allclose(
        response.three_wave.strain[counted], np.interp(own, time, strain)[counted], atol=8e-3 * strain.max()
    )
