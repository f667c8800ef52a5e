"""A thin specimen between two bars, deformed uniformly: what comes back and what goes through, for one incident pulse.

The chain of elements in :mod:`shpb.forward.specimen` follows the waves inside a specimen; this model has one force for
all of it, and adds what its mass takes afterwards. It costs a thousandth of the chain and is meant for specimens in
equilibrium, where it serves as a check of a reduction.

    closing velocity  w = (2 p - F)/Z_i - F/Z_t = C dF/dt + L de_p/dt,     F = A0 s(e_p) while it flows

p is the force of the incident wave, C = L/(E A0) + the compliance of both bar faces, s the nominal stress against
plastic engineering strain. Trapezoidal rule; the flow condition is met at the end of each step. Then, with the mass m
and the mean velocity v of the two faces, F_in - F_out = m dv/dt.
"""

from __future__ import annotations

import itertools
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError

_TABLE = 512  # points of the flow curve, evenly spaced in plastic strain


class FlowCurve(NamedTuple):
    """Nominal flow stress [Pa] against plastic engineering strain, both of shape (points,), strain rising from 0."""

    plastic: FloatArray
    stress_pa: FloatArray


class UniformSpecimen(NamedTuple):
    """A thin cylinder; ``faces_m_n`` is the approach of both bar faces by a unit of force [m/N]."""

    length_m: float
    area_m2: float
    young_modulus_pa: float | None  # None: rigid up to the flow stress
    mass_kg: float
    curve: FlowCurve
    faces_m_n: float = 0.0


class Passage(NamedTuple):
    """What happens at the faces, shape (samples,) each: forces [N] on both bar faces, plastic engineering strain."""

    force_in_n: FloatArray
    force_out_n: FloatArray
    plastic: FloatArray


def pass_through(
    incident_n: FloatArray, interval_s: float, specimen: UniformSpecimen, impedances: tuple[float, float]
) -> Passage:
    """Run an incident pulse through a uniform specimen.

    Parameters
    ----------
    incident_n : float array, shape (samples,)
        Force of the incident wave at the front face [N], loading positive.
    interval_s : float
        Sample interval; a tenth of the shortest period or less.
    specimen : UniformSpecimen
    impedances : (float, float)
        Force impedance of the incident and of the transmitted bar [N s/m].

    Raises
    ------
    InputError
        If the flow curve is empty, or its strain does not rise.
    """
    z_i, z_t = impedances
    force, plastic = _march(incident_n, interval_s, specimen, z_i, z_t)
    velocity = 0.5 * ((2 * incident_n - force) / z_i + force / z_t)
    inertia = 0.5 * specimen.mass_kg * np.gradient(velocity, interval_s)
    return Passage(force + inertia, force - inertia, plastic)


def _march(
    incident_n: FloatArray, interval_s: float, specimen: UniformSpecimen, z_i: float, z_t: float
) -> tuple[FloatArray, FloatArray]:
    """The common force and the plastic strain, step by step, in plain floats: each step needs the one before."""
    flow_n, slope_n, step_of_table = _flow_force(specimen)
    elastic = (
        0.0
        if specimen.young_modulus_pa is None
        else specimen.length_m / (specimen.young_modulus_pa * specimen.area_m2)
    )
    # Half a step's worth of closing, for the trapezoidal rule; a little compliance keeps a rigid specimen solvable.
    by_step = max(elastic + specimen.faces_m_n, 1e-3 * interval_s / z_i) / interval_s
    length_by_step = specimen.length_m / interval_s
    drag = 0.5 * (1 / z_i + 1 / z_t)
    push = (incident_n / z_i).tolist()  # half of 2 p/Z_i: the mean of two steps adds up to the whole
    last = len(flow_n) - 2
    force = plastic = 0.0
    forces, plastics = [0.0], [0.0]
    for before, after in itertools.pairwise(push):
        known = (by_step - drag) * force + before + after
        trial = known / (by_step + drag)
        cell = min(int(plastic / step_of_table), last)
        limit = flow_n[cell] + slope_n[cell] * (plastic - cell * step_of_table)
        if trial > limit:
            # (by_step + drag) (limit + slope d) + length_by_step d = known, for the plastic step d.
            stiff = by_step + drag
            grown = (known - stiff * limit) / (length_by_step + stiff * slope_n[cell])
            plastic += grown
            force = limit + slope_n[cell] * grown
        else:
            force = trial if trial > 0.0 else 0.0
        forces.append(force)
        plastics.append(plastic)
    return np.array(forces), np.array(plastics)


def _flow_force(specimen: UniformSpecimen) -> tuple[list[float], list[float], float]:
    """Flow force [N] at even steps of plastic strain, its slope, and the step; constant beyond the last point."""
    plastic, stress = specimen.curve
    if plastic.size < 2 or plastic[0] < 0 or np.any(np.diff(plastic) <= 0):
        raise InputError(
            f"{plastic.size} points, or strain that does not rise",
            where="flow curve",
            mend="Give two points or more of rising plastic strain",
        )
    even = np.linspace(0.0, float(plastic[-1]), _TABLE)
    force = specimen.area_m2 * np.interp(even, plastic, stress)
    step = float(even[1])
    slope = np.append(np.diff(force) / step, 0.0)
    return [*force.tolist(), float(force[-1])], slope.tolist(), step
