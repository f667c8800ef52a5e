"""The specimen between the bars: a chain of elements that waves really run through.

A specimen that is long, slow or loaded too fast is out of equilibrium here because the waves have
not gone to and fro often enough, not because anything was told to be so.

Model: one-dimensional, material (undeformed) coordinates, equal elements with half masses at the two
faces, central differences in time; elastic-viscoplastic with large strain. In an element of engineering
strain e (compression positive) the true strain is -ln(1 - e), the area A0/(1 - e) (constant volume),
the nominal stress (force by initial area) is the true stress by (1 - e), and the true stress is E times the
elastic part of the true strain. Plastic work heats the element adiabatically. The contacts at
the faces bear no tension: when they would, a gap opens and closes again later. The bar faces
give way under the specimen if they are told to, see :mod:`shpb.forward.contact`.

Left out: radial inertia, friction, heat flow into the bars, and yielding in tension.

With the time step equal to one element's elastic transit, the scheme carries elastic waves exactly.
Sources: R. D. Richtmyer, K. W. Morton, Difference Methods for Initial-Value Problems, 2nd ed. (1967, from memory); for
the return to the flow stress, J. C. Simo, T. J. R. Hughes, Computational Inelasticity (1998), chapter 1 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.errors import InputError
from shpb.forward.contact import Contacts, FaceSprings
from shpb.forward.flow import ELASTIC, FlowLaw, side_by_side

_NEWTON_STEPS = 2  # from the last step's rate: within 1e-4 at the yield point, 1e-6 in steady flow
_STEPS_PER_YIELD_CHECK = 8  # the flow stress at rest hardly moves from step to step


@dataclass(frozen=True, slots=True, kw_only=True)
class SpecimenModel:
    """A solid cylinder and what it is made of."""

    diameter_m: float
    length_m: float
    young_modulus_pa: float
    density_kg_m3: float
    flow: FlowLaw = ELASTIC
    heat_capacity_j_kg_k: float = 400.0
    heat_share: float = 0.9  # of plastic work (G. I. Taylor, H. Quinney, Proc. R. Soc. A 143 (1934) 307-326)

    def __post_init__(self) -> None:
        for name in ("diameter_m", "length_m", "young_modulus_pa", "density_kg_m3", "heat_capacity_j_kg_k"):
            value = getattr(self, name)
            if not (value > 0 and math.isfinite(value)):
                raise InputError(
                    f"value is {value}", where=f"specimen model {name}", mend="Give a positive number"
                )

    @property
    def area_m2(self) -> float:
        """Initial area [m^2]."""
        return math.pi * self.diameter_m**2 / 4

    @property
    def wave_speed_m_s(self) -> float:
        """Elastic bar speed sqrt(E/rho) [m/s]."""
        return math.sqrt(self.young_modulus_pa / self.density_kg_m3)

    @property
    def transit_time_s(self) -> float:
        """One elastic transit L/c [s]."""
        return self.length_m / self.wave_speed_m_s

    @property
    def impedance_n_s_m(self) -> float:
        """Force impedance rho c A [N s/m]."""
        return self.density_kg_m3 * self.wave_speed_m_s * self.area_m2


@dataclass(frozen=True, slots=True, eq=False)
class SpecimenHistory:
    """What happened to the specimens; arrays of shape (specimens, steps), compression positive.

    Forces are those on the two bar faces, at the times of the incoming waves; strain, stress and
    temperature are means over the specimen's length. While both contacts are closed the bar faces have
    come nearer by the specimen's shortening and both indentations.
    """

    force_in_n: FloatArray
    force_out_n: FloatArray
    indentation_in_m: FloatArray
    indentation_out_m: FloatArray
    eng_strain: FloatArray
    nominal_stress_pa: FloatArray
    true_stress_pa: FloatArray
    plastic_strain: FloatArray
    temperature_k: FloatArray


class SpecimenRun:
    """Several specimens marched side by side in time; keeps their state between calls of ``march``.

    Parameters
    ----------
    specimens : sequence of SpecimenModel
    incident_impedance, transmitted_impedance : float array, shape (specimens,)
        Force impedances of the two bars [N s/m].
    temperature_k : float array, shape (specimens,)
        At the start [K].
    elements : int
        Elements in each specimen.
    time_step_s : float
        At most one element's elastic transit, see :func:`longest_time_step_s`. An element that is
        shortened to 1 - e of its length needs a step shorter by as much.
    springs : FaceSprings or None
        How the bar faces give way; None for faces that stay plane.
    damping : float
        Stills the ringing of a specimen that has flowed and is unloaded: an element of length h then has
        the further stress ``damping * (h/c) d(stress)/dt``. Elements that flow, or never have, have none.
    """

    def __init__(
        self,
        specimens: Sequence[SpecimenModel],
        incident_impedance: FloatArray,
        transmitted_impedance: FloatArray,
        temperature_k: FloatArray,
        *,
        elements: int,
        time_step_s: float,
        springs: FaceSprings | None = None,
        damping: float = 0.0,
    ) -> None:
        longest = longest_time_step_s(specimens, elements)
        if time_step_s > longest * (1 + 1e-9):
            raise InputError(
                f"time step {time_step_s:.4g} s is longer than an element's transit, {longest:.4g} s",
                where="forward model",
                mend="Take a shorter step or fewer elements",
            )
        self._step = time_step_s
        self._damping = damping * _column(s.transit_time_s / elements for s in specimens) / time_step_s
        self._flow = side_by_side([s.flow for s in specimens])
        self._area = _column(s.area_m2 for s in specimens)
        self._modulus = _column(s.young_modulus_pa for s in specimens)
        self._size = _column(s.length_m / elements for s in specimens)
        self._density = _column(s.density_kg_m3 for s in specimens)
        self._mass = self._density * self._area * self._size  # of an element
        self._step_by_mass = time_step_s / self._mass
        self._contacts = Contacts(
            np.stack((incident_impedance, transmitted_impedance), axis=1),
            0.5 * self._mass / time_step_s,
            _column(s.diameter_m / 2 for s in specimens),
            time_step_s,
            springs,
        )
        self._warming = _column(s.heat_share / (s.density_kg_m3 * s.heat_capacity_j_kg_k) for s in specimens)
        # One step's plastic strain at the reference rate: the unit of the return to the flow stress.
        self._unit = np.asarray(self._flow.reference_rate_per_s) * time_step_s
        shape = (len(specimens), elements)
        self._velocity = np.zeros((shape[0], elements + 1))
        self._strain = np.zeros(shape)
        self._plastic = np.zeros(shape)
        self._increment = np.zeros(shape)
        self._log_rate = np.zeros(shape)
        self._true = np.zeros(shape)
        self._damped = np.zeros(shape)  # true stress with the damping
        self._at_rest: FloatArray | None = None  # flow stress at no rate
        self._flowing = 0  # steps with plastic flow so far
        self._temperature = np.repeat(np.asarray(temperature_k, dtype=float)[:, None], elements, axis=1)

    @np.errstate(invalid="ignore", over="ignore")  # _check_stable says in words what went wrong
    def march(self, incident_n: FloatArray, returning_n: FloatArray) -> SpecimenHistory:
        """March over the next steps.

        Parameters
        ----------
        incident_n : float array, shape (specimens, steps)
            Force of the wave that comes to the front face in the incident bar [N].
        returning_n : float array, same shape
            Force of the wave that comes to the back face in the transmitted bar [N].
        """
        shape = incident_n.shape
        arriving = np.stack((incident_n, returning_n), axis=2)
        force, indentation = np.empty((*shape, 2)), np.empty((*shape, 2))
        # Elements last in memory order of the steps: one plain copy a step, all means at the end.
        kept = np.empty((5, shape[1], *self._strain.shape))
        for n in range(shape[1]):
            nominal = self._true / (1.0 - self._strain)
            kept[0, n], kept[1, n], kept[2, n] = self._strain, nominal, self._true
            kept[3, n], kept[4, n] = self._plastic, self._temperature
            inside = self._damped / (1.0 - self._strain) * self._area
            force[:, n] = self._move(inside, arriving[:, n])
            indentation[:, n] = self._contacts.indentation_m
            self._deform()
        self._check_stable(kept[0])
        means = kept.mean(axis=3).transpose(0, 2, 1)
        at_faces = (*force.transpose(2, 0, 1), *indentation.transpose(2, 0, 1))
        return SpecimenHistory(*(np.ascontiguousarray(each) for each in (*at_faces, *means)))

    @property
    def momentum_n_s(self) -> FloatArray:
        """Momentum of each specimen now, shape (specimens,) [N s]."""
        share = np.ones(self._velocity.shape[1])
        share[[0, -1]] = 0.5
        return np.asarray((self._velocity * share).sum(axis=1) * self._mass[:, 0])

    def _check_stable(self, strain: FloatArray) -> None:
        """A shortened element rings faster than the step can follow once (1 - e) h/c is below it."""
        courant = self._step / self._size * np.sqrt(self._modulus / self._density)
        # A strain of some 1e-3, as elastic specimens have, does no harm at the exact step.
        too_short = ~(1.0 - strain > courant - 0.01)
        if too_short.any():
            which = int(np.argwhere(too_short)[0, 1])
            bound = max(0.0, 1.0 - float(courant[which, 0]))
            raise InputError(
                f"specimen {which + 1} is shortened by more than {bound:.2f} of its length, beyond "
                "what the time step can follow",
                where="forward model",
                mend="Take a smaller Courant number, a slower striker or a shorter time",
            )

    def _move(self, force: FloatArray, arriving: FloatArray) -> FloatArray:
        """Accelerate the nodes by one step; return the forces on the two bar faces, shape (specimens, 2)."""
        velocity = self._velocity
        velocity[:, 1:-1] += self._step_by_mass * (force[:, :-1] - force[:, 1:])
        faces = velocity[:, :: velocity.shape[1] - 1]  # a view of the first and the last node
        ends = [0, -1]
        return self._contacts.meet(faces, force[:, ends], arriving, self._strain[:, ends])

    def _deform(self) -> None:
        """Strain the elements by one step and return their stress to the flow stress."""
        velocity, E = self._velocity, self._modulus
        self._strain += self._step * (velocity[:, :-1] - velocity[:, 1:]) / self._size
        trial = -E * (np.log1p(-self._strain) + self._plastic)
        flow = self._flow
        if self._at_rest is None:
            static, soft = flow.static_pa(self._plastic), flow.softening(self._temperature)
            self._at_rest, _ = flow.at_log_rate(static, soft, np.zeros_like(static), self._temperature)
        yields = trial > self._at_rest
        if yields.any():
            self._return_to_flow(trial, yields)
        else:
            self._increment = np.zeros_like(trial)
            self._set_stress(trial, ~yields)

    def _set_stress(self, stress: FloatArray, elastic: BoolArray) -> None:
        still = elastic & (self._plastic > 0)
        self._damped = stress + np.where(still, self._damping * (stress - self._true), 0.0)
        self._true = stress

    def _return_to_flow(self, trial: FloatArray, yields: BoolArray) -> None:
        """Turn the elastic excess over the flow stress into plastic strain and heat."""
        flow, E = self._flow, self._modulus
        # The hardening that this step brings is taken from the last step's plastic strain.
        static, soft = flow.static_pa(self._plastic + self._increment), flow.softening(self._temperature)
        # Unknown y = ln(1 + rate/r0): trial - E unit (e^y - 1) - flow(y) = 0, concave in y, so
        # Newton's method from above the root cannot miss it.
        safe = np.where(yields, trial, 0.0)
        highest = np.log1p(safe / (E * self._unit))
        y = np.minimum(np.maximum(self._log_rate, 1e-3), highest)
        for _ in range(_NEWTON_STEPS):
            stress, slope = flow.at_log_rate(static, soft, y, self._temperature)
            plastic_step = self._unit * np.expm1(y)
            excess = safe - E * plastic_step - stress
            y = np.clip(y + excess / (E * (plastic_step + self._unit) + slope), 0.0, highest)
        increment = np.where(yields, self._unit * np.expm1(y), 0.0)
        self._log_rate = np.where(yields, y, 0.0)
        self._increment = increment
        self._plastic += increment
        self._set_stress(trial - E * increment, ~yields)
        self._flowing += 1
        if self._flowing % _STEPS_PER_YIELD_CHECK == 0:
            self._at_rest = None
        self._temperature += self._warming * self._true * increment


def longest_time_step_s(specimens: Sequence[SpecimenModel], elements: int) -> float:
    """The longest stable step: the shortest elastic transit of an element [s]."""
    return min(s.transit_time_s for s in specimens) / elements


def _column(values: Iterable[float]) -> FloatArray:
    return np.array(list(values), dtype=float).reshape(-1, 1)
