"""Two waves told apart by stations: exact fields, the recursion in time, noise, what is lost, refusals."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from shpb.errors import InputError
from shpb.quantity import Quantity
from shpb.rig.bar import Bar
from shpb.rig.propagation_table import PropagationTable
from shpb.settings import Dispersion
from shpb.wave.laplace import LaplaceGrid, laplace_grid, propagation_at
from shpb.wave.pochhammer import complex_wavenumber, first_mode_at_frequency
from shpb.wave.separation import Separated, separate, steady_gain
from shpb.wave.stations import least_squares_operator
from tests.synthetic import smooth_pulse, steel_bar

DT, SAMPLES, STOP_HZ = 1e-6, 2000, 100e3
TWO, THREE = (-1.5, -0.7), (-1.5, -1.13, -0.7)
PLACE = -1.5


def grid_of(samples: int = SAMPLES) -> LaplaceGrid:
    return laplace_grid(samples, DT, STOP_HZ)


def polymer_bar() -> Bar:
    """Standard linear solid, E*(w) = E0 + E1 i w tau/(1 + i w tau): closed form, causal; as its table has it."""
    modulus, branch, tau, density = 3.2e9, 0.9e9, 8e-6, 1190.0
    frequency = np.linspace(500.0, 180e3, 150)
    omega = 2 * np.pi * frequency
    xi = 1j * omega / np.sqrt((modulus + branch * 1j * omega * tau / (1 + 1j * omega * tau)) / density)
    columns = (
        frequency,
        xi.real,
        omega / xi.imag,
        0.01 * xi.real,
        0.001 * omega / xi.imag,
        np.ones(frequency.size),
    )
    names = (
        "frequency_hz", "attenuation_per_m", "phase_speed_m_s", "u_attenuation_per_m", "u_phase_speed_m_s", "coherence",
    )  # fmt: skip
    table = PropagationTable(
        **{n: tuple(map(float, column)) for n, column in zip(names, columns, strict=True)}
    )
    speed = float(np.sqrt(modulus / density))
    return steel_bar(
        material="polymer", density_kg_m3=Quantity(density), wave_speed_m_s=Quantity(speed), propagation=table
    )


def exact_xi(p: np.ndarray) -> np.ndarray:
    """The standard linear solid of :func:`polymer_bar` at complex frequencies, no table between."""
    modulus, branch, tau, density = 3.2e9, 0.9e9, 8e-6, 1190.0
    return p / np.sqrt((modulus + branch * p * tau / (1 + p * tau)) / density)


def waves_at_place(time: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """A pulse of 560 us, and its reflection before it has passed; both run on beyond the end of the record."""
    right = smooth_pulse(time - 2e-4, 1e-3, 5.6e-4, 3e-5) - smooth_pulse(time - 1.2e-3, 4e-4, 2e-3, 3e-5)
    return right, -smooth_pulse(time - 6e-4, 7e-4, 1.8e-3, 3e-5)


def field(
    places: tuple[float, ...], xi: np.ndarray, grid: LaplaceGrid
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Strain at the stations of waves that are known at ``PLACE``; and the two, as far as the band carries them."""
    right, left = (grid.transform(wave) * grid.fade for wave in waves_at_place(DT * np.arange(grid.samples)))
    away = [x - PLACE for x in places]
    strains = np.stack([grid.back(right * np.exp(-xi * d) + left * np.exp(xi * d)) for d in away])
    return strains, grid.back(right), grid.back(left)


def separated_of(
    places: tuple[float, ...], bar: Bar, dispersion: Dispersion, xi_long: np.ndarray | None = None
) -> tuple[Separated, np.ndarray, np.ndarray]:
    """Cut the first 2 ms out of a field of 6 ms: nothing is at rest at the end of the record."""
    long, grid = grid_of(3 * SAMPLES), grid_of()
    xi = propagation_at(bar, long.p_per_s, dispersion) if xi_long is None else xi_long
    strains, right, left = field(places, xi, long)
    found = separate(
        strains[:, :SAMPLES], places, propagation_at(bar, grid.p_per_s, dispersion), np.full(len(places), 1e-6),
        grid, place_m=PLACE,
    )  # fmt: skip
    return found, right[:SAMPLES], left[:SAMPLES]


@pytest.mark.parametrize("dispersion", [Dispersion.NONE, Dispersion.PHASE])
def test_two_stations_give_both_waves_to_the_end_of_the_record(dispersion: Dispersion) -> None:
    found, right, left = separated_of(TWO, steel_bar(), dispersion)
    whole = slice(0, found.whole)
    # What wraps round is 1e-6 of the signal; the cut end rings within the last 100 us alone.
    assert SAMPLES - 102 <= found.whole <= SAMPLES - 100
    np.testing.assert_allclose(found.right[whole], right[whole], atol=2e-7)
    np.testing.assert_allclose(found.left[whole], left[whole], atol=2e-7)
    # They do lie on each other.
    assert (np.abs(right) > 3e-4).astype(int)[600:740].all()
    assert (np.abs(left) > 3e-4).astype(int)[640:740].all()


@pytest.mark.parametrize("dispersion", [Dispersion.NONE, Dispersion.PHASE])
@pytest.mark.parametrize("places", [THREE, (-1.5, -0.7, -0.3), (-0.7, -1.5, -0.4)])
def test_three_stations_give_both_waves(places: tuple[float, ...], dispersion: Dispersion) -> None:
    found, right, left = separated_of(places, steel_bar(), dispersion)
    # Weights by frequency look ahead, so the cut end is felt a little: 0.2 % of the peak at most, 0.1 % 400 us before.
    for wave, truth in ((found.right, right), (found.left, left)):
        np.testing.assert_allclose(wave[: found.whole], truth[: found.whole], atol=2.5e-6)
        np.testing.assert_allclose(wave[:1600], truth[:1600], atol=1e-6)
    assert SAMPLES - 345 < found.whole < SAMPLES - 250


@pytest.mark.parametrize("places", [(-0.6, -0.3), (-0.6, -0.47, -0.2)])
def test_bar_that_is_not_elastic(places: tuple[float, ...]) -> None:
    # Truth by the closed form of the standard linear solid; the bar knows its table alone.
    bar, long = polymer_bar(), grid_of(3 * SAMPLES)
    xi = exact_xi(long.p_per_s)
    right, left = (long.transform(wave) * long.fade for wave in waves_at_place(DT * np.arange(long.samples)))
    strains = np.stack(
        [
            long.back(right * np.exp(-xi * (x - places[0])) + left * np.exp(xi * (x - places[0])))
            for x in places
        ]
    )
    grid = grid_of()
    found = separate(
        strains[:, :SAMPLES], places, propagation_at(bar, grid.p_per_s, Dispersion.PHASE),
        np.full(len(places), 1e-6), grid, place_m=places[0],
    )  # fmt: skip
    for wave, truth in ((found.right, long.back(right)), (found.left, long.back(left))):
        np.testing.assert_allclose(wave[: found.whole], truth[: found.whole], atol=3e-6)
    # Without the attenuation of the bar the same strains give something else.
    elastic = propagation_at(dataclasses.replace(bar, propagation=None), grid.p_per_s, Dispersion.NONE)
    wrong = separate(
        strains[:, :SAMPLES], places, elastic, np.full(len(places), 1e-6), grid, place_m=places[0]
    )
    assert np.abs(wrong.left - long.back(left)[:SAMPLES])[: found.whole].max() > 3e-5


def test_recursion_in_time_without_dispersion() -> None:
    # B. Lundberg, A. Henchoz, Exp. Mech. 17 (1977) 213-218 (from memory): with tau = dx/c a whole number of samples,
    # p_A(t) = e_A(t) - e_B(t - tau) + p_A(t - 2 tau), from rest.
    grid, bar, tau = grid_of(), steel_bar(), 160  # 0.8 m at 5000 m/s, 1 us
    strains, _, _ = field(TWO, propagation_at(bar, grid.p_per_s, Dispersion.NONE), grid)
    p = np.zeros(SAMPLES)
    for n in range(SAMPLES):
        p[n] = strains[0, n]
        p[n] -= strains[1, n - tau] if n >= tau else 0.0
        p[n] += p[n - 2 * tau] if n >= 2 * tau else 0.0
    found = separate(
        strains, TWO, propagation_at(bar, grid.p_per_s, Dispersion.NONE), (1.0, 1.0), grid, place_m=PLACE
    )
    np.testing.assert_allclose(found.right[:1900], p[:1900], atol=1e-6)
    np.testing.assert_allclose(found.left[:1900], (strains[0] - p)[:1900], atol=1e-6)


def test_two_station_operator_is_the_published_formula() -> None:
    # H. Zhao, G. Gary, J. Mech. Phys. Solids 45 (1997) 1185-1202 (from memory): P and N at x = 0.
    grid = grid_of()
    xi = propagation_at(steel_bar(), grid.p_per_s, Dispersion.PHASE)
    found = least_squares_operator(TWO, xi, (1.0, 3.0), grid)
    a, b = TWO
    below = 2 * np.sinh(xi * (b - a))
    np.testing.assert_allclose(found.right, np.stack((np.exp(xi * b), -np.exp(xi * a))) / below, rtol=1e-9)
    np.testing.assert_allclose(found.left, np.stack((-np.exp(-xi * b), np.exp(-xi * a))) / below, rtol=1e-9)


def test_frequencies_that_no_spacing_tells_apart() -> None:
    # f = n c/(2 dx): 3125 Hz for 0.8 m; spacings 0.8, 0.4, 1.2 m share those of 0.4 m; 0.37, 0.43, 0.80 m share none.
    grid = grid_of()
    xi = propagation_at(steel_bar(), grid.p_per_s, Dispersion.NONE)
    noise = np.ones(3)

    def lost(places: tuple[float, ...]) -> tuple[float, ...]:
        zeros = np.zeros((len(places), SAMPLES))
        return separate(zeros, places, xi, noise[: len(places)], grid).singular_hz

    np.testing.assert_allclose(lost(TWO)[:4], [0.0, 3125.0, 6250.0, 9375.0], atol=40)
    np.testing.assert_allclose(lost((-1.5, -0.7, -0.3))[:3], [0.0, 6250.0, 12500.0], atol=40)
    near = lost(THREE)
    assert near[0] == 0.0
    assert len(near) <= 3  # by chance 13 x 0.37 and 15 x 0.43 waves nearly agree
    assert not [f for f in near[1:] if f < 30e3]
    frequency, gain = steady_gain(THREE, xi, noise, grid)
    assert gain[(frequency > 2e3) & (frequency < 30e3)].max() < 5
    assert steady_gain(TWO, xi, noise[:2], grid)[1].max() > 100


@pytest.mark.parametrize("places", [TWO, THREE])
def test_noise_gain_is_what_noise_does(places: tuple[float, ...]) -> None:
    grid, random = grid_of(), np.random.default_rng(3)
    xi = propagation_at(steel_bar(), grid.p_per_s, Dispersion.PHASE)
    levels = np.array([1e-6, 2e-6, 1.5e-6])[: len(places)]
    found = [
        separate(
            levels[:, None] * random.standard_normal((len(places), SAMPLES)),
            places,
            xi,
            levels,
            grid,
            place_m=PLACE,
        )
        for _ in range(40)
    ]
    usual = np.sqrt(np.mean(levels**2))
    for side in ("right", "left"):
        rows = np.stack([getattr(one, side) for one in found])
        gain = getattr(found[0].gain.by_time, side)
        # 40 runs, 200 samples that hold some 40 independent ones each: 2 % standard error; the end is left out.
        for start in (300, 900, 1300):
            part = slice(start, start + 200)
            assert np.sqrt(np.mean(rows[:, part] ** 2)) == pytest.approx(usual * gain[part].mean(), rel=0.08)
    # A third station helps, and noise grows with time.
    assert found[0].gain.by_time.right[1900] > found[0].gain.by_time.right[200]


def test_growth_of_noise_and_of_an_offset() -> None:
    # p_A sums e_A at t, t - 2 tau, ... and -e_B between: noise as the root of the number of terms, an offset of A's
    # zero as the number of A's terms, 1 + floor(t/(2 tau)); B's with the other sign from tau on.
    grid = grid_of()
    xi = propagation_at(steel_bar(), grid.p_per_s, Dispersion.NONE)
    strains = np.zeros((2, SAMPLES))
    strains[0] = 1e-6
    found = separate(strains, TWO, xi, (1.0, 1.0), grid, place_m=PLACE)
    for time, terms in ((100, 1), (240, 1), (500, 2), (800, 3), (1440, 5)):
        assert found.right[time] == pytest.approx(terms * 1e-6, rel=0.01)
    strains[0], strains[1] = 0.0, 1e-6
    found = separate(strains, TWO, xi, (1.0, 1.0), grid, place_m=PLACE)
    for time, terms in ((80, 0), (300, 1), (640, 2), (1280, 4)):
        assert found.right[time] == pytest.approx(-terms * 1e-6, rel=0.01, abs=1e-8)
    gain = found.gain.by_time.right
    assert gain[1520] / gain[100] == pytest.approx(np.sqrt(10), rel=0.02)


def test_contributions_add_to_the_waves_and_scale_with_their_station() -> None:
    grid = grid_of()
    xi = propagation_at(steel_bar(), grid.p_per_s, Dispersion.PHASE)
    strains, _, _ = field(THREE, xi, grid)
    plain = separate(strains, THREE, xi, (1.0, 1.0, 2.0), grid, place_m=PLACE)
    np.testing.assert_allclose(plain.contributions.left.sum(axis=0), plain.left, atol=1e-12)
    more = strains.copy()
    more[1] *= 1.01
    changed = separate(more, THREE, xi, (1.0, 1.0, 2.0), grid, place_m=PLACE)
    np.testing.assert_allclose(changed.right - plain.right, 0.01 * plain.contributions.right[1], atol=1e-12)


def test_first_mode_at_complex_frequencies_solves_the_equation() -> None:
    # D. Bancroft, Phys. Rev. 59 (1941) 588-593, with Bessel functions of complex argument by scipy.
    from scipy.special import jv

    nu = 0.29
    omega = np.linspace(0.05, 2.6, 60) - 0.02j
    k = complex_wavenumber(omega, nu)
    h = np.sqrt(omega**2 * (1 + nu) * (1 - 2 * nu) / (1 - nu) - k**2 + 0j)
    q = np.sqrt(omega**2 * 2 * (1 + nu) - k**2 + 0j)
    parts = (
        2 * h * (q**2 + k**2) * jv(1, h) * jv(1, q),
        -((q**2 - k**2) ** 2) * jv(0, h) * jv(1, q),
        -4 * k**2 * h * q * jv(1, h) * jv(0, q),
    )
    assert (np.abs(sum(parts)) / sum(np.abs(part) for part in parts)).max() < 1e-10
    # The first mode and no other: k falls by the imaginary part over the group speed.
    mode = first_mode_at_frequency(omega.real / (2 * np.pi), nu)
    # The next term is 0.02^2/2 times the slope of 1/c_g, at most 4 here.
    np.testing.assert_allclose(k, mode.wavenumber_ka - 0.02j / mode.group_speed, atol=8e-4)
    # At rest, and on the real axis.
    assert complex_wavenumber(np.array([0.0 - 0.01j]), nu)[0] == pytest.approx(-0.01j, rel=1e-5)
    np.testing.assert_allclose(complex_wavenumber(omega.real + 0j, nu), mode.wavenumber_ka, rtol=1e-12)


@pytest.mark.parametrize(
    ("places", "rows", "noise", "said"),
    [
        ((-1.5,), 1, (1.0,), "strain of 1 station"),
        ((-1.5, -1.5), 2, (1.0, 1.0), "two stations stand at one place"),
        ((-1.5, -0.7), 3, (1.0, 1.0), "strains of shape"),
        ((-1.5, -0.7), 2, (1.0, 0.0), "no positive number"),
    ],
)
def test_refusals(places: tuple[float, ...], rows: int, noise: tuple[float, ...], said: str) -> None:
    grid = grid_of()
    xi = propagation_at(steel_bar(), grid.p_per_s, Dispersion.NONE)
    with pytest.raises(InputError, match=said):
        separate(np.zeros((rows, SAMPLES)), places, xi, noise, grid)


def test_refuses_what_is_not_finite_and_another_clock() -> None:
    grid = grid_of()
    xi = propagation_at(steel_bar(), grid.p_per_s, Dispersion.NONE)
    strains = np.zeros((2, SAMPLES))
    with pytest.raises(InputError, match="a record of 2000"):
        separate(strains[:, :-1], TWO, xi, (1.0, 1.0), grid)
    strains[1, 5] = np.nan
    with pytest.raises(InputError, match="not finite"):
        separate(strains, TWO, xi, (1.0, 1.0), grid)
