"""Where bars and specimen meet: contacts that bear no tension, and bar faces that give way.

A specimen narrower than the bar presses its face in, by ``u = K F (1 - nu^2)/(E a_s)`` more than the
plane face of one-dimensional theory moves: see :mod:`shpb.wave.indentation`. Here that is a spring without
mass between bar face and specimen, quasi-static, with the specimen's current radius at the face:
the bar face moves at the speed of the specimen's face and du/dt. With the bar behind it the spring has
the time constant Z u/F, a few microseconds, but none at all for a specimen that has grown to the bar's
width; so du/dt is the implicit difference of second order, stable at any step. All is linear in
the new force within a step, and is solved in closed form.

Source: C. W. Gear, Numerical Initial Value Problems in Ordinary Differential Equations (1971), the backward
differentiation formula of second order (from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shpb.arrays import FloatArray
from shpb.errors import InputError
from shpb.rig.bar import Bar
from shpb.wave.indentation import indentation_factor

_INWARD = np.array([1.0, -1.0])  # into the specimen, at the front and at the back face


@dataclass(frozen=True, slots=True, eq=False)
class FaceSprings:
    """How the bar faces of several specimens give way; arrays of shape (specimens, 2), front and back.

    ``give_per_pa`` is (1 - nu^2)/E of the bar, zero for a face that does not give way. ``rigid`` takes K
    of a stiff specimen for that of uniform pressure.
    """

    bar_radius_m: FloatArray
    give_per_pa: FloatArray
    rigid: bool = False

    @classmethod
    def of_bars(
        cls, bars: Sequence[tuple[Bar, Bar]], *, giving: Sequence[bool] | None = None, rigid: bool = False
    ) -> FaceSprings:
        """Faces of pairs of incident and transmitted bars; ``giving`` False leaves a pair's faces plane."""
        give = [[(1 - bar.poisson_ratio**2) / bar.young_modulus_pa for bar in pair] for pair in bars]
        share = np.ones(len(bars)) if giving is None else np.asarray(giving, dtype=float)
        radius = [[float(bar.radius_m) for bar in pair] for pair in bars]
        return cls(np.array(radius), np.array(give, dtype=float) * share[:, None], rigid)

    def compliance_m_per_n(self, specimen_radius_m: FloatArray) -> FloatArray:
        """Indentation by force at the specimen's radius, all of shape (specimens, 2) [m/N]."""
        factor = indentation_factor(specimen_radius_m / self.bar_radius_m, rigid=self.rigid)
        compliance: FloatArray = factor * self.give_per_pa / specimen_radius_m
        return compliance


class Contacts:
    """The two contacts of several specimens; arrays of shape (specimens, 2), front and back.

    Parameters
    ----------
    impedance_n_s_m : float array
        Force impedances of the bars [N s/m].
    half_mass_rate : float array, shape (specimens, 1)
        Mass of a specimen's face node by the time step [kg/s].
    radius_m : float array, shape (specimens, 1)
        Radius of the specimens at rest [m].
    time_step_s : float
    springs : FaceSprings or None
        None for faces that stay plane.

    Attributes
    ----------
    indentation_m : float array
        Of the bar faces now; zero where a contact is open [m].
    """

    def __init__(
        self,
        impedance_n_s_m: FloatArray,
        half_mass_rate: FloatArray,
        radius_m: FloatArray,
        time_step_s: float,
        springs: FaceSprings | None,
    ) -> None:
        if springs is not None and springs.give_per_pa.shape != impedance_n_s_m.shape:
            raise InputError(
                f"bar faces of shape {springs.give_per_pa.shape} for bars of shape {impedance_n_s_m.shape}",
                where="forward model",
                mend="Describe both bar faces of every specimen",
            )
        self._impedance, self._rate = impedance_n_s_m, half_mass_rate
        self._radius, self._step, self._springs = radius_m, time_step_s, springs
        self._gap = np.zeros_like(impedance_n_s_m)
        self.indentation_m = np.zeros_like(impedance_n_s_m)
        self._before = self.indentation_m  # a step earlier

    def meet(
        self, faces: FloatArray, inner_n: FloatArray, arriving_n: FloatArray, strain: FloatArray
    ) -> FloatArray:
        """Accelerate the specimens' faces by one step; return the forces on the bar faces.

        A bar gives 2 p - Z v (p: force of the arriving wave, v of its face into the specimen). The back
        is the mirror image of the front: there the bar comes from the other side.

        Parameters
        ----------
        faces : float array
            Velocities of the specimens' faces [m/s]; changed in place.
        inner_n : float array
            Force of the elements at the faces [N].
        arriving_n : float array
            Force p of the waves that come to the faces [N].
        strain : float array
            Engineering strain of the elements at the faces [1].
        """
        Z, rate, step = self._impedance, self._rate, self._step
        inward = faces * _INWARD
        driving, resisting = 2 * arriving_n, Z  # contact = driving - resisting * velocity of the face
        if self._springs is not None:
            compliance = self._springs.compliance_m_per_n(self._radius / np.sqrt(1.0 - strain))
            # F = 2 p - Z (v + du/dt), du/dt = (3 u - 4 u' + u'')/(2 h), u = compliance F.
            softer = 1.0 + 1.5 * Z * compliance / step
            known = (2.0 * self.indentation_m - 0.5 * self._before) / step
            driving, resisting = (driving + Z * known) / softer, Z / softer
        half = resisting / 2
        after: FloatArray = ((rate - half) * inward + driving - inner_n) / (rate + half)
        contact: FloatArray = driving - half * (inward + after)
        pressed = self.indentation_m
        apart = (contact < 0) | (self._gap > 0)
        if apart.any():
            free = inward - inner_n / rate
            opened = self._gap - pressed + step * (free - 2 * arriving_n / Z)
            self._gap = np.where(apart, np.maximum(opened, 0.0), 0.0)
            after, contact = np.where(apart, free, after), np.where(apart, 0.0, contact)
        if self._springs is not None:
            self._before, self.indentation_m = pressed, compliance * contact
        faces[:] = after * _INWARD
        return contact
