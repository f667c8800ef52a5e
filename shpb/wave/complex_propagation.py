"""Waves in a bar whose propagation was measured: complex speed at any frequency, impedance, section factors.

A wave travels as exp(i w t - xi x) with xi = alpha + i w/c. Its complex speed c* = i w/xi varies slowly with frequency,
so the table is interpolated in it. With compression positive, momentum and continuity give for one wave of strain e

    v = c* e        F = A E* e        E* = rho c*^2

whatever the material, as long as the section moves as one. The section's own part of c* (lateral inertia, the first
mode's c/c0 at the same wavelength) is divided out for the material's speed and modulus, and the section factors M1, M2
are those of an elastic bar: for loss tangents up to some 0.1 their imaginary part is below 1e-3.

References
----------
C. Bacon, Exp. Mech. 38 (1998) 242-249; H. Zhao, G. Gary, J. Mech. Phys. Solids 43 (1995) 1335-1348.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.arrays import ComplexArray, FloatArray
from shpb.rig.bar import Bar
from shpb.rig.propagation_table import PropagationTable
from shpb.wave.pochhammer import FirstMode, first_mode_at_wavelength


class MeasuredWave(NamedTuple):
    """What a bar with a measured table does at a set of frequencies, shape (frequencies,)."""

    slowness_s_m: ComplexArray  # 1/c* = xi/(i w)
    material_speed_m_s: ComplexArray  # c* with the section's dispersion taken out: E* = rho c_m*^2
    mode: FirstMode  # of an elastic bar at the same wavelength


def complex_speed_m_s(table: PropagationTable, frequency_hz: FloatArray) -> ComplexArray:
    """Complex speed c* = i w/xi between the points of a table.

    Below the first point the modulus is held, and so are speed and loss tangent; beyond the last one nothing is known:
    the low-pass ends there (:func:`shpb.wave.faces.low_pass_of`), and the last value is held.

    Parameters
    ----------
    table : PropagationTable
    frequency_hz : float array, shape (frequencies,)
        Zero or positive.

    Returns
    -------
    complex array, shape (frequencies,)
        [m/s]; its imaginary part is positive where the bar takes energy.
    """
    at = np.asarray(table.frequency_hz)
    omega = 2 * np.pi * at
    xi = np.asarray(table.attenuation_per_m) + 1j * omega / np.asarray(table.phase_speed_m_s)
    return _smooth(np.clip(frequency_hz, at[0], at[-1]), at, 1j * omega / xi)


def propagation_coefficient_per_m(table: PropagationTable, frequency_hz: FloatArray) -> ComplexArray:
    """Return xi = alpha + i w/c at any frequency [1/m], see :func:`complex_speed_m_s`; zero at rest."""
    xi: ComplexArray = 2j * np.pi * frequency_hz / complex_speed_m_s(table, frequency_hz)
    return xi


def u_attenuation_per_m(table: PropagationTable, frequency_hz: FloatArray) -> FloatArray:
    """Standard uncertainty of alpha between the points [1/m]; below the first it falls to zero with the frequency."""
    at = np.concatenate(([0.0], table.frequency_hz))
    u: FloatArray = np.interp(frequency_hz, at, (0.0, *table.u_attenuation_per_m))
    return u


def measured_wave(bar: Bar, frequency_hz: FloatArray) -> MeasuredWave:
    """One wave in a bar with a measured table.

    Parameters
    ----------
    bar : Bar
        ``bar.propagation`` is not None.
    frequency_hz : float array, shape (frequencies,)
        Zero or positive.
    """
    assert bar.propagation is not None
    slowness = 1.0 / complex_speed_m_s(bar.propagation, frequency_hz)
    # a/Lambda = f a/c with the phase speed c = 1/Re(1/c*): no wave speed has to be known for it.
    mode = first_mode_at_wavelength(frequency_hz * bar.radius_m * slowness.real, bar.poisson_ratio)
    return MeasuredWave(slowness, 1.0 / (slowness * mode.phase_speed), mode)


def velocity_of_one_wave_m_s(force_n: FloatArray, interval_s: float, bar: Bar, stop_hz: float) -> FloatArray:
    """Velocity that a single wave with the given force has in a bar, F/(rho c* A), shape of ``force_n`` [m/s].

    Only the small difference from F/(rho c0 A) goes through the spectrum: the ends of the history hardly matter.
    """
    velocity: FloatArray = force_n / bar.impedance_n_s_m
    if bar.propagation is None:
        return velocity
    length = 2 * force_n.size
    frequency: FloatArray = np.fft.rfftfreq(length, interval_s).astype(np.float64, copy=False)
    frequency = frequency[: int(np.searchsorted(frequency, stop_hz))]
    change = bar.wave_speed_m_s / measured_wave(bar, frequency).material_speed_m_s - 1.0
    spectrum = np.zeros(length // 2 + 1, dtype=np.complex128)
    spectrum[: frequency.size] = np.fft.rfft(velocity, length)[: frequency.size] * change
    return velocity + np.fft.irfft(spectrum, length)[: force_n.size]


def _smooth(x: FloatArray, at: FloatArray, values: ComplexArray) -> ComplexArray:
    """Cubic Hermite interpolation with the slopes of parabolas through three neighbours each."""
    slope = np.gradient(values, at, edge_order=2)
    left = np.clip(np.searchsorted(at, x, side="right") - 1, 0, at.size - 2)
    step = (at[1:] - at[:-1])[left]
    t = (x - at[left]) / step
    found: ComplexArray = (
        (1 + 2 * t) * (1 - t) ** 2 * values[left]
        + t * (1 - t) ** 2 * step * slope[left]
        + t**2 * (3 - 2 * t) * values[left + 1]
        - t**2 * (1 - t) * step * slope[left + 1]
    )
    return found
