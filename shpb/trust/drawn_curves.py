"""From strains at the faces to every output of a shot, for rows of draws: each with its own bars and specimen.

The same formulas as :mod:`shpb.response.bar_analysis`, :mod:`shpb.response.equilibrium` and :mod:`shpb.response.flow`,
written for shape (draws, samples). What a draw changes is laid on the curves as they were reduced, corrections and all.

References
----------
As the three modules named.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from shpb.arrays import BoolArray, FloatArray
from shpb.response.flow import FlowStress
from shpb.rig.gauge import TestKind
from shpb.settings import Analysis, Correction
from shpb.trust.budget import Budget
from shpb.trust.carry import faces_by_force
from shpb.trust.drawn_faces import Drawn, FaceStrains
from shpb.trust.evidence import Evidence
from shpb.trust.sources import STRESS_CORRECTIONS

# Curves that draws give, in this order.
CURVES = (
    "stress_1w",
    "strain_rate_1w",
    "strain_1w",
    "stress_3w",
    "strain_rate_3w",
    "strain_3w",
    "true_strain",
    "true_stress",
    "equilibrium_ratio",
)
_SURE = 0.5  # R is drawn where u(R) by the budget is below this; elsewhere it says nothing and is 2


class Faces(NamedTuple):
    """Forces at the faces [N]; engineering stresses [Pa] and rates [1/s] of both analyses, shape (draws, samples)."""

    force_in: FloatArray
    force_out: FloatArray
    stress_1w: FloatArray
    rate_1w: FloatArray
    stress_3w: FloatArray
    rate_3w: FloatArray


class DrawnCurves:
    """Turns strains at the faces into outputs, on the thinned grid ``time_s``."""

    def __init__(self, evidence: Evidence, budget: Budget, time_s: FloatArray, usual: FaceStrains) -> None:
        self._evidence = evidence
        self._interval_s = float(time_s[1] - time_s[0])
        response, specimen = evidence.response, evidence.sheet.specimen
        self._first = response.analysis is Analysis.ONE_WAVE
        self._sign = 1.0 if evidence.sheet.kind is TestKind.TENSION else -1.0
        self._own_bars = evidence.settings.switched_on(Correction.MISMATCH)
        self._modulus = specimen.young_modulus_pa

        def laid(values: FloatArray) -> FloatArray:
            on_grid: FloatArray = np.interp(time_s, response.time_s, values)
            return on_grid

        self._indentation = np.gradient(laid(response.indentation_strain), self._interval_s)
        self._stress_off = {
            report.correction.value: tuple(
                laid(change) if isinstance(change, np.ndarray) else np.zeros(time_s.size)
                for change in (report.off.stress_1w_pa, report.off.stress_3w_pa)
            )
            for report in response.corrections
            if report.applied and report.correction in STRESS_CORRECTIONS
        }
        by_force = faces_by_force(evidence, slice(None))
        self._faces_m_n = None if by_force is None else (laid(by_force[0]), laid(by_force[1]))
        one, three = response.one_wave, response.three_wave
        reduced = Faces(
            *(
                laid(values)
                for values in (
                    response.motion.force_in_n, response.motion.force_out_n, one.stress_pa, one.strain_rate_per_s,
                    three.stress_pa, three.strain_rate_per_s,
                )
            )
        )  # fmt: skip
        self.usual = self._faces(usual, Drawn({}, {}, {}, 1))
        self._left = [(a - b)[0] for a, b in zip([row[None] for row in reduced], self.usual, strict=True)]
        transit = specimen.transit_time_s
        self._half = round(2 * transit / self._interval_s) // 2 if transit else 0
        self._sure: BoolArray = laid(budget.u_force_difference) < _SURE
        self._points = [point for point in response.flow if point.stress_pa is not None]
        self._part = slice(*np.searchsorted(time_s, response.time_s[np.array(response.loading) - (0, 1)]))

    @property
    def points(self) -> tuple[FlowStress, ...]:
        """The flow stresses that are drawn: those that lie in what counts."""
        return tuple(self._points)

    def __call__(self, strains: FaceStrains, drawn: Drawn) -> FloatArray:
        """All curves and then the flow stresses, side by side, shape (draws, curves * samples + points)."""
        faces = Faces(*(a + b for a, b in zip(self._faces(strains, drawn), self._left, strict=True)))
        strain_1w, strain_3w = (self._integrated(rate) for rate in (faces.rate_1w, faces.rate_3w))
        strain, stress = (strain_1w, faces.stress_1w) if self._first else (strain_3w, faces.stress_3w)
        stretch = np.maximum(1.0 + self._sign * strain, 1e-3)
        true_strain, true_stress = self._sign * np.log(stretch), stress * stretch
        return np.concatenate(
            (
                faces.stress_1w, faces.rate_1w, strain_1w, faces.stress_3w, faces.rate_3w, strain_3w,
                true_strain, true_stress, self._ratio(faces), self._flow(true_strain, true_stress),
            ),
            axis=1,
        )  # fmt: skip

    def _faces(self, strains: FaceStrains, drawn: Drawn) -> Faces:
        """Forces, stresses and rates with each draw's own bars and specimen."""
        rig, specimen = self._evidence.rig, self._evidence.sheet.specimen

        def bar(side: str) -> tuple[FloatArray, FloatArray, FloatArray]:
            """Wave speed, E A and 1/Z, shape (draws, 1) each."""
            usual = rig.incident_bar if side == "in" else rig.transmitted_bar
            speed = usual.wave_speed_m_s * drawn.factor(f"speed_{side}")
            density = usual.density_kg_m3 * drawn.factor(f"density_{side}")
            area = usual.area_m2 * drawn.factor(f"diameter_{side}") ** 2
            return speed, density * speed**2 * area, 1 / (density * speed * area)

        speed_in, stiff_in, by_z_in = bar("in")
        speed_out, stiff_out, by_z_out = bar("out")
        area = specimen.area_m2 * drawn.factor("specimen_diameter") ** 2
        length = specimen.length_m * drawn.factor("specimen_length")
        force_in = stiff_in * (strains.force[0] + strains.force[1])
        force_out = stiff_out * strains.force[2]
        incident, reflected, transmitted = strains.velocity
        closing_1w = -2 * speed_in * reflected
        if self._own_bars:
            closing_1w = closing_1w + force_out * (by_z_in - by_z_out)
            if rig.incident_bar.impedance_n_s_m != rig.transmitted_bar.impedance_n_s_m:
                # With amplitude correction F_out/Z_t is not quite v_out, which is what stands in the formula.
                closing_1w = closing_1w + force_out * by_z_out - speed_out * transmitted
        closing_3w = speed_in * (incident - reflected) - speed_out * transmitted
        added = drawn.sum("indentation") * self._indentation
        if self._faces_m_n is not None:
            taken = self._faces_m_n[0] * force_in + self._faces_m_n[1] * force_out
            added = added + np.gradient(taken, self._interval_s, axis=1) / length
        stress_1w, stress_3w = force_out / area, 0.5 * (force_in + force_out) / area
        for name, (off_1w, off_3w) in self._stress_off.items():
            stress_1w = stress_1w - drawn.sum(name) * off_1w
            stress_3w = stress_3w - drawn.sum(name) * off_3w
        return Faces(
            force_in,
            force_out,
            stress_1w,
            closing_1w / length - added,
            stress_3w,
            closing_3w / length - added,
        )

    def _integrated(self, rate: FloatArray) -> FloatArray:
        """Running integral by the trapezoidal rule, zero at the first sample."""
        total = np.cumsum(rate, axis=1)
        total -= 0.5 * (rate + rate[:, :1])
        total *= self._interval_s
        return total

    def _ratio(self, faces: Faces) -> FloatArray:
        difference = self._running_mean(np.abs(faces.force_in - faces.force_out))
        mean_force = self._running_mean(0.5 * (faces.force_in + faces.force_out))
        safe = np.where(self._sure & (mean_force > 0), mean_force, 1.0)
        return np.where(self._sure & (mean_force > 0), np.minimum(difference / safe, 2.0), 2.0)

    def _running_mean(self, values: FloatArray) -> FloatArray:
        """Over two transits, as :func:`shpb.pulse.front.moving_mean`; the ends average what there is."""
        samples = values.shape[1]
        total = np.zeros((values.shape[0], samples + 1))
        np.cumsum(values, axis=1, out=total[:, 1:])
        first = np.maximum(np.arange(samples) - self._half, 0)
        last = np.minimum(np.arange(samples) + self._half + 1, samples)
        mean: FloatArray = (total[:, last] - total[:, first]) / (last - first)
        return mean

    def _flow(self, true_strain: FloatArray, true_stress_pa: FloatArray) -> FloatArray:
        """Flow stress of each draw's own curve at each strain, shape (draws, points).

        A draw whose loading ends before that strain is read at its end.
        """
        strain, stress = true_strain[:, self._part], true_stress_pa[:, self._part]
        if self._modulus is not None:
            strain = strain - stress / self._modulus
        rising = np.maximum.accumulate(strain, axis=1)
        found = np.empty((strain.shape[0], len(self._points)))
        row = np.arange(strain.shape[0])
        for n, point in enumerate(self._points):
            after = np.clip((rising < point.at_strain).sum(axis=1), 1, rising.shape[1] - 1)
            low, high = rising[row, after - 1], rising[row, after]
            share = np.clip((point.at_strain - low) / np.maximum(high - low, 1e-12), 0.0, 1.0)
            found[:, n] = (1 - share) * stress[row, after - 1] + share * stress[row, after]
        return found
