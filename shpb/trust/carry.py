"""One unit of change of a source, carried through the formulas to every output of a shot.

References
----------
The sensitivities are the derivatives of the formulas in :mod:`shpb.response.bar_analysis` and
:mod:`shpb.response.equilibrium`, written out.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.pulse.front import moving_mean
from shpb.response.response import Response
from shpb.rig.gauge import TestKind
from shpb.settings import Analysis, Correction
from shpb.trust.changes import SCALES, IntArray, PulseChanges, Scene, scale_changes
from shpb.trust.evidence import Evidence
from shpb.trust.sources import PULSES, STRESS_CORRECTIONS, Way
from shpb.wave.indentation import face_indentation_m

# Engineering curves of both analyses.
OUTPUTS = ("stress_1w", "strain_rate_1w", "strain_1w", "stress_3w", "strain_rate_3w", "strain_3w")
# What the budget carries besides: true curve put forward, its stress at a given strain, and D.
MORE_OUTPUTS = ("true_strain", "true_stress", "true_stress_at_strain", "force_difference")
ALL_OUTPUTS = OUTPUTS + MORE_OUTPUTS

_LEAST_FORCE = 0.05  # share of the greatest mean force below which R says nothing, as in the equilibrium


class PerUnit(NamedTuple):
    """Plain numbers of bars and specimen."""

    force_in_n: float  # E A of the incident bar
    force_out_n: float
    speed_in_m_s: float
    speed_out_m_s: float
    by_z_in: float  # 1/Z, or 0
    by_z_out: float
    area_m2: float
    length_m: float

    @classmethod
    def of(cls, evidence: Evidence) -> PerUnit:
        """Read them off the rig and the sheet."""
        rig, specimen = evidence.rig, evidence.sheet.specimen
        bar_i, bar_t = rig.incident_bar, rig.transmitted_bar
        # The one-wave rate looks at the difference of the impedances only where that is asked for.
        own_bars = float(
            evidence.settings.switched_on(Correction.MISMATCH) or evidence.faces.returning is not None
        )
        return cls(
            float(bar_i.force_per_strain_n),
            float(bar_t.force_per_strain_n),
            float(bar_i.wave_speed_m_s),
            float(bar_t.wave_speed_m_s),
            own_bars / float(bar_i.impedance_n_s_m),
            own_bars / float(bar_t.impedance_n_s_m),
            float(specimen.area_m2),
            float(specimen.length_m),
        )


_STRESS_CORRECTIONS = frozenset(which.value for which in STRESS_CORRECTIONS)


def _at(change: FloatArray | float, at: IntArray) -> FloatArray | float:
    return change if isinstance(change, float) else change[at]


def faces_by_force(evidence: Evidence, at: IntArray | slice) -> tuple[FloatArray, FloatArray] | None:
    """Indentation of either bar face by a unit of force [m/N] at some samples; None where it is not taken off."""
    response, specimen, rig = evidence.response, evidence.sheet.specimen, evidence.rig
    if not response.correction(Correction.INDENTATION).applied:
        return None
    stretch = np.clip(1.0 - response.three_wave.strain[at], 0.05, 2.0)
    radius = specimen.diameter_m / 2 / np.sqrt(stretch)
    one = np.ones_like(radius)
    return face_indentation_m(one, radius, rig.incident_bar), face_indentation_m(
        one, radius, rig.transmitted_bar
    )


class Carrier:
    """Carries changes of pulses and formulas to every output of one shot."""

    def __init__(self, scene: Scene) -> None:
        self.scene = scene
        evidence = scene.evidence
        response, specimen, motion, at = evidence.response, evidence.sheet.specimen, scene.motion, scene.at
        self.per = PerUnit.of(evidence)
        self.pulse_changes = PulseChanges(scene)
        self.first = response.analysis is Analysis.ONE_WAVE
        pairs = ((c.stress_pa, c.strain_rate_per_s) for c in (response.one_wave, response.three_wave))
        self.curves = [values[at] for pair in pairs for values in pair]
        self.closing_r_m_s = (
            self.curves[1] * self.per.length_m - (self.per.by_z_in - self.per.by_z_out) * motion.force_out_n
        )
        self.comes_back = evidence.faces.returning is not None
        if self.comes_back:
            # F_out/Z_i - v_out stands in place of F_out (1/Z_i - 1/Z_t).
            self.closing_r_m_s += motion.velocity_out_m_s - self.per.by_z_out * motion.force_out_n
        curve = response.curve
        self.sign = 1.0 if evidence.sheet.kind is TestKind.TENSION else -1.0
        self.stretch = np.maximum(1.0 + self.sign * curve.strain[at], 1e-3)
        self.stress = curve.stress_pa[at]
        self.slope, self.share = _hardening(response, specimen.young_modulus_pa, at)
        transit = specimen.transit_time_s
        self.mean_s = float(2 * transit) if transit else 0.0
        self.width = max(round(self.mean_s / scene.interval_s), 1)
        mean_force = 0.5 * (motion.force_in_n + motion.force_out_n)
        smooth_force = moving_mean(mean_force, self.width)
        part = (at >= response.loading[0]) & (at < response.loading[1])
        self.loaded = smooth_force > _LEAST_FORCE * max(float(mean_force[part].max(initial=0.0)), 0.0)
        self.by_force = np.where(self.loaded, 1 / np.where(self.loaded, smooth_force, 1.0), 0.0)
        half = 0.5 * moving_mean(motion.force_in_n - motion.force_out_n, self.width) * self.by_force
        self.weights = (1 - half, 1 + half)
        span = response.span or response.loading
        self.middle = int(np.searchsorted(at, (span[0] + span[1]) // 2))
        self.averaged = self._share_of_running_mean()
        self.faces_m_n = faces_by_force(evidence, at)

    def carried(self, ways: Sequence[Way]) -> dict[Way, FloatArray]:
        """Change of every output by a unit step in each way, shape (outputs, thinned samples) each."""
        scene = self.scene
        out = np.empty((len(ways), len(ALL_OUTPUTS), scene.time_s.size))
        for rows, way in zip(out, ways, strict=True):
            pulses: list[FloatArray | float] = [0.0, 0.0, 0.0, 0.0]
            by = dict.fromkeys(SCALES, 0.0)
            added_rate: FloatArray | float = 0.0
            added: tuple[FloatArray | float, FloatArray | float] = (0.0, 0.0)
            for parameter, power in way:
                for pulse, change in self.pulse_changes(parameter).items():
                    pulses[pulse] = pulses[pulse] + power * change
                for scale, share in scale_changes(parameter).items():
                    by[scale] += power * share
                if parameter == "indentation":
                    indentation = scene.evidence.response.indentation_strain[scene.at]
                    added_rate = -power * np.gradient(indentation, scene.interval_s)
                elif parameter in _STRESS_CORRECTIONS:
                    off = scene.evidence.response.correction(Correction(parameter)).off
                    added = -power * _at(off.stress_1w_pa, scene.at), -power * _at(off.stress_3w_pa, scene.at)
            self._at_faces(rows, pulses, by, added_rate)
            rows[0] += added[0]
            rows[3] += added[1]
        self._along_time(out)
        return dict(zip(ways, out, strict=True))

    def _at_faces(
        self,
        out: FloatArray,
        pulses: Sequence[FloatArray | float],
        by: Mapping[str, float],
        added_rate: FloatArray | float,
    ) -> None:
        """Fill in stresses and rates, and the difference of the forces for D."""
        motion, per, curves = self.scene.motion, self.per, self.curves
        incident, reflected, transmitted, returning = pulses
        force_in = per.force_in_n * (incident + reflected) + by["force_in"] * motion.force_in_n
        force_out = per.force_out_n * (transmitted + returning) + by["force_out"] * motion.force_out_n
        velocity_in = per.speed_in_m_s * (incident - reflected) + by["velocity_in"] * motion.velocity_in_m_s
        velocity_out = (
            per.speed_out_m_s * (transmitted - returning) + by["velocity_out"] * motion.velocity_out_m_s
        )
        closing = -2 * per.speed_in_m_s * reflected + by["velocity_in"] * self.closing_r_m_s
        # One-wave closing has F_out (1/Z_i - 1/Z_t) besides, for different bars alone.
        if self.comes_back:
            closing = closing + per.by_z_in * force_out - velocity_out
            by_z = -by["impedance_in"] * per.by_z_in
        else:
            closing = closing + (per.by_z_in - per.by_z_out) * force_out
            by_z = by["impedance_out"] * per.by_z_out - by["impedance_in"] * per.by_z_in
        if by_z:
            closing = closing + by_z * motion.force_out_n
        out[0] = force_out / per.area_m2 - by["area"] * curves[0]
        out[1] = closing / per.length_m - by["length"] * curves[1] + added_rate
        out[3] = 0.5 * (force_in + force_out) / per.area_m2 - by["area"] * curves[2]
        out[4] = (velocity_in - velocity_out) / per.length_m - by["length"] * curves[3] + added_rate
        if self.faces_m_n is not None:
            # The indentation was taken off by these very forces: what changes them changes it.
            taken = self.faces_m_n[0] * force_in + self.faces_m_n[1] * force_out
            sinks = np.gradient(taken, self.scene.interval_s) / per.length_m
            out[1] -= sinks
            out[4] -= sinks
        out[9] = self.weights[0] * force_in - self.weights[1] * force_out

    def _along_time(self, out: FloatArray) -> None:
        """Fill in strains, true values and D, for all ways at once."""
        rates, strains = out[:, 1:5:3], out[:, 2:6:3]
        np.cumsum(rates, axis=-1, out=strains)
        strains -= 0.5 * (rates + rates[..., :1])
        strains *= self.scene.interval_s
        stress, strain = (out[:, 0], out[:, 2]) if self.first else (out[:, 3], out[:, 5])
        out[:, 6] = strain / self.stretch
        out[:, 7] = self.stretch * stress + self.sign * self.stress * strain
        out[:, 8] = (out[:, 7] - self.slope * out[:, 6]) * self.share
        out[:, 9] = _running_mean(out[:, 9], self.width) * self.by_force

    def noise(self, way: Way) -> FloatArray:
        """Variance that unit white noise in one pulse leaves in every output, shape (outputs, thinned samples).

        A running integral of white noise grows as the root of time: variance S t/2 with the one-sided density
        S = 2 sigma^2 dt of a noise of sigma sampled at dt.
        """
        scene, per = self.scene, self.per
        faces = scene.evidence.faces
        which = way[0][0].removeprefix("noise_")
        if which not in PULSES:
            return self._noise_of_station(which)
        pulse = PULSES.index(which)
        sampled = scene.evidence.pulses.sample_interval_s
        passed = faces.low_pass.noise_share(sampled) ** 2
        summed = (scene.time_s - scene.time_s[0]) * sampled
        # What one unit of strain in this pulse is in each output.
        force, speed = (
            (per.force_out_n, per.speed_out_m_s) if pulse == 2 else (per.force_in_n, per.speed_in_m_s)
        )
        stress_1w = force / per.area_m2 if pulse == 2 else 0.0
        rate_1w = (0.0, -2 * speed, (per.by_z_in - per.by_z_out) * force)[pulse] / per.length_m
        stress_3w = 0.5 * force / per.area_m2
        rate_3w = speed / per.length_m * (1.0 if pulse == 0 else -1.0)
        out = np.empty((len(ALL_OUTPUTS), scene.time_s.size))
        for row, unit in ((0, stress_1w), (1, rate_1w), (3, stress_3w), (4, rate_3w)):
            out[row] = passed * unit**2
        out[2], out[5] = summed * rate_1w**2, summed * rate_3w**2
        if self.faces_m_n is not None:
            taken = (self.faces_m_n[1 if pulse == 2 else 0] * force / per.length_m) ** 2
            for rate_row, strain_row in ((1, 2), (4, 5)):
                out[rate_row] += self._noise_of_derivative() * taken
                out[strain_row] += passed * taken
        self._true_variances(out)
        out[9] = self.averaged * (self.weights[pulse == 2] * force * self.by_force) ** 2
        return out

    def _true_variances(self, out: FloatArray) -> None:
        """Fill in the variances of true values: noise of stress and noise of strain are taken as independent."""
        stress, strain = (out[0], out[2]) if self.first else (out[3], out[5])
        out[6] = strain / self.stretch**2
        out[7] = self.stretch**2 * stress + self.stress**2 * strain
        tilt = self.sign * self.stress - self.slope / self.stretch
        out[8] = (self.stretch**2 * stress + tilt**2 * strain) * self.share**2

    def _noise_of_station(self, station: str) -> FloatArray:
        """As :meth:`noise`, of a station that tells waves apart: it grows, and both waves of the bar have it."""
        scene, per = self.scene, self.per
        side = station.split("_", 1)[0]
        changes = self.pulse_changes.stations
        bar = scene.evidence.pulses.separated_bar(side)
        assert changes is not None, station
        assert bar is not None, station
        k, kernels, since = bar.stations.index(station), changes.kernels(side), changes.since_s(side)
        incident, interval = side == "incident", scene.evidence.pulses.sample_interval_s
        ea, speed = (per.force_in_n, per.speed_in_m_s) if incident else (per.force_out_n, per.speed_out_m_s)
        back = scene.evidence.faces.returning is not None
        by_z = per.by_z_in if back else per.by_z_in - per.by_z_out
        weight = self.weights[0 if incident else 1] * self.by_force
        taken = None if self.faces_m_n is None else (self.faces_m_n[0 if incident else 1] / per.length_m) ** 2
        width = max(round(self.mean_s / interval), 1)

        def variance(kernel: FloatArray) -> FloatArray:
            return kernels.variance(kernel, k, since)

        def filled(left: FloatArray) -> FloatArray:
            right = kernels.right[k]
            force, velocity = ea * (right + left), speed * (right - left)
            one = -2 * speed * left if incident else by_z * force - (velocity if back else 0.0 * velocity)
            three = velocity if incident else -velocity
            out = np.empty((len(ALL_OUTPUTS), scene.time_s.size))
            out[0] = 0.0 if incident else variance(force / per.area_m2)
            out[3] = variance(0.5 * force / per.area_m2)
            for row, rate in ((1, one / per.length_m), (4, three / per.length_m)):
                out[row], out[row + 1] = variance(rate), variance(np.cumsum(rate) * interval)
                if taken is not None:
                    out[row] += taken * variance(np.gradient(force, interval))
                    out[row + 1] += taken * variance(force)
            out[9] = variance(moving_mean(force, width)) * weight**2
            return out

        left = kernels.left[k]
        out: FloatArray = np.where(changes.has_left(side), filled(left), filled(np.zeros_like(left)))
        self._true_variances(out)
        return out

    def _noise_of_derivative(self) -> float:
        """Variance that unit white noise in the samples leaves in the time derivative after the low-pass [1/s^2]."""
        low_pass = self.scene.evidence.faces.low_pass
        frequency = np.linspace(0.0, low_pass.stop_hz, 400)
        density = (2 * np.pi * frequency * low_pass.gain(frequency)) ** 2
        return float(2 * self.scene.evidence.pulses.sample_interval_s * density.mean() * low_pass.stop_hz)

    def _share_of_running_mean(self) -> float:
        """Share of the variance of white noise that passes the low-pass and a running mean over two transits."""
        faces = self.scene.evidence.faces
        frequency = np.linspace(0.0, faces.low_pass.stop_hz, 200)
        passed = (faces.low_pass.gain(frequency) * np.sinc(frequency * self.mean_s)) ** 2
        sampled = self.scene.evidence.pulses.sample_interval_s
        return min(float(2 * sampled * passed.mean() * faces.low_pass.stop_hz), 1.0)


def _running_mean(values: FloatArray, width: int) -> FloatArray:
    """As :func:`shpb.pulse.front.moving_mean`, for rows."""
    samples = values.shape[-1]
    half = min(max(width // 2, 0), (samples - 1) // 2)
    total = np.zeros((*values.shape[:-1], samples + 2 * half + 1))
    np.cumsum(values, axis=-1, out=total[..., half + 1 : half + 1 + samples])
    total[..., half + 1 + samples :] = total[..., half + samples, None]
    place = np.arange(samples)
    count = np.minimum(place + half + 1, samples) - np.maximum(place - half, 0)
    mean: FloatArray = (total[..., 2 * half + 1 :] - total[..., :samples]) / count
    return mean


def _hardening(response: Response, modulus_pa: float | None, at: IntArray) -> tuple[FloatArray, FloatArray]:
    """Slope of the curve put forward [Pa], over a thirtieth of what counts to either side; and 1/(1 - slope/E), the
    strain of a flow stress being plastic. Shape of ``at`` each.
    """
    first, stop = response.span or response.loading
    strain, stress = response.curve.true_strain, response.curve.true_stress_pa
    reach = max((stop - first) // 30, 1)
    low, high = (np.clip(at + step, first, stop - 1) for step in (-reach, reach))
    low, high = np.minimum(low, stop - 1 - reach), np.maximum(high, first + reach)
    rise = np.maximum(strain[high] - strain[low], 1e-9)
    slope: FloatArray = (stress[high] - stress[low]) / rise
    if modulus_pa is None:
        return slope, np.ones_like(slope)
    return slope, 1 / (1 - np.clip(slope / modulus_pa, -0.5, 0.5))
