"""Closure: the reduced curve and the measured incident pulse run forwards must give back what both gauges saw.

A uniform specimen with the reduced force-strain curve stands between the two bars; the measured incident pulse runs
into it, and what comes back and goes through is laid beside the measured reflected and transmitted pulse at the
faces. (Carrying both to the gauges would change them alike.) The curve was made from two of the three pulses, so the
third is a test: a pulse in the wrong place, one gauge out of scale, a wave speed of another bar leave a misfit. The
incident pulse, which is put in as it was measured, has a check of its own against the striker's momentum.

What it cannot see: whatever scales both stations alike (there the striker's momentum and the final length help);
the size of the specimen, as long as the curve stays below the line of the stated modulus (its mass and its final
length help); errors that distances, wave speeds and gauges leave open by their stated uncertainties; friction,
inertia and heating, which are in the curve and in the record alike.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from shpb.arrays import FloatArray, dot, frozen
from shpb.forward.uniform import FlowCurve, UniformSpecimen, pass_through
from shpb.settings import Analysis, Correction
from shpb.trust.budget import Budget
from shpb.trust.evidence import Evidence
from shpb.trust.sources import sources_of
from shpb.wave.indentation import face_indentation_m

_INTERVAL_S = 0.25e-6  # of the forward run, or the record's own where that is longer
_LEAD_S = 3e-6  # the comparison begins this long before the front
_LEAST_PLASTIC = 1e-6  # strain between points of the flow curve
# What a uniform specimen leaves out (waves inside it, contact closing up), of the peak and of the time.
MODEL_SHARE = 0.004
MODEL_DELAY_S = 0.15e-6
CONTACT_DELAY_S = 0.30e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Misfit:
    """One pulse against its forward run, over the loading.

    Attributes
    ----------
    pulse : str
        "reflected" or "transmitted".
    rms, expected : float
        Root mean square of measured less predicted, and its expected size from the budget; shares of the peak.
    delay_s, u_delay_s : float
        By how much the measured pulse comes later than the predicted one, least squares over the loading, and
        the standard uncertainty of that from distances and wave speeds [s].
    scale : float
        By what share the measured pulse is larger, same fit.
    """

    pulse: str
    rms: float
    expected: float
    delay_s: float
    u_delay_s: float
    scale: float

    @property
    def excess(self) -> float:
        """The misfit in units of its standard uncertainty: in size or in time, whichever is worse."""
        return max(self.rms / self.expected, abs(self.delay_s) / self.u_delay_s)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Closure:
    """A forward run beside the record; arrays of shape (samples,) on ``time_s``, strains at the faces [1]."""

    time_s: FloatArray
    measured_reflected: FloatArray
    predicted_reflected: FloatArray
    measured_transmitted: FloatArray
    predicted_transmitted: FloatArray
    reflected: Misfit
    transmitted: Misfit

    @property
    def worst(self) -> Misfit:
        """The pulse that fits worse."""
        return max((self.reflected, self.transmitted), key=lambda misfit: misfit.excess)


class _Grid(NamedTuple):
    """Samples of the response that the forward run steps through, from its first sample to the end of loading."""

    at: slice
    interval_s: float
    time_s: FloatArray


def close(evidence: Evidence, budget: Budget) -> Closure | None:
    """Run the reduced curve forwards and compare; None where the model does not hold.

    It does not hold with hot bar ends taken into account (the faces then have another impedance than the bars), for
    bars with a measured propagation table (their impedance is not one number) or where no plastic curve is left to
    run.
    """
    curve = _flow_curve(evidence)
    applied = {report.correction for report in evidence.response.corrections if report.applied}
    faces, rig = evidence.faces, evidence.rig
    bar_i, bar_t = rig.incident_bar, rig.transmitted_bar
    measured = bar_i.propagation is not None or bar_t.propagation is not None
    if curve is None or measured or Correction.BAR_TEMPERATURE in applied:
        return None
    grid = _grid(evidence)
    incident = faces.incident.force_strain[grid.at]
    passage = pass_through(
        bar_i.force_per_strain_n * incident,
        grid.interval_s,
        _specimen(evidence, curve),
        (bar_i.impedance_n_s_m, bar_t.impedance_n_s_m),
    )
    reflected = passage.force_in_n / bar_i.force_per_strain_n - incident
    transmitted = passage.force_out_n / bar_t.force_per_strain_n
    delays, noise = _delays(evidence), _noise(evidence)
    measured_reflected = faces.reflected.force_strain[grid.at]
    measured_transmitted = faces.transmitted.force_strain[grid.at]
    band_hz = faces.low_pass.cutoff_hz
    return Closure(
        time_s=frozen(grid.time_s),
        measured_reflected=measured_reflected,
        predicted_reflected=frozen(reflected),
        measured_transmitted=measured_transmitted,
        predicted_transmitted=frozen(transmitted),
        reflected=_misfit(
            _Comparison("reflected", measured_reflected, reflected, grid, noise[0], band_hz),
            _u_reflected(evidence, budget, grid),
            float(np.hypot(delays[0], MODEL_DELAY_S)),
        ),
        transmitted=_misfit(
            _Comparison("transmitted", measured_transmitted, transmitted, grid, noise[1], band_hz),
            _u_transmitted(evidence, grid, delays[1], noise[1]),
            float(np.hypot(delays[1], CONTACT_DELAY_S)),
        ),
    )


def _grid(evidence: Evidence) -> _Grid:
    faces, bar = evidence.faces, evidence.rig.transmitted_bar
    stride = max(int(_INTERVAL_S / faces.interval_s), 1)
    stop = evidence.response.loading[1]
    if faces.returning is not None:
        # The forward run knows nothing that comes back in the transmitted bar.
        stop = min(stop, faces.index(2 * bar.length_m / bar.wave_speed_m_s - _LEAD_S))
    at = slice(0, stop, stride)
    return _Grid(at, stride * faces.interval_s, faces.time_s[at])


def _flow_curve(evidence: Evidence) -> FlowCurve | None:
    """Nominal force by initial area against plastic engineering strain, over the whole loading.

    The force is that on the specimen's middle: what its mass takes is put back by the forward run.
    """
    response, specimen = evidence.response, evidence.sheet.specimen
    part = slice(*response.loading)
    motion = response.motion
    if response.analysis is Analysis.ONE_WAVE:
        mean_velocity = 0.5 * (motion.velocity_in_m_s + motion.velocity_out_m_s)
        inertia = 0.5 * _mass_kg(evidence) * np.gradient(mean_velocity, evidence.faces.interval_s)
        force = (motion.force_out_n + inertia)[part]
    else:
        force = 0.5 * (motion.force_in_n + motion.force_out_n)[part]
    stress = np.maximum(force / specimen.area_m2, 0.0)
    plastic = response.curve.strain[part]
    if specimen.young_modulus_pa is not None:
        plastic = plastic - stress / specimen.young_modulus_pa
    # A curve above the line of the modulus would need less than no plastic strain: there the run cannot follow it.
    plastic = np.maximum.accumulate(np.maximum(plastic, 0.0))
    rises = np.concatenate((np.array([True]), np.diff(plastic) > _LEAST_PLASTIC))
    if rises.sum() < 8:
        return None
    return FlowCurve(plastic[rises], stress[rises])


def _mass_kg(evidence: Evidence) -> float:
    specimen = evidence.sheet.specimen
    return (specimen.density_kg_m3 or 0.0) * specimen.area_m2 * specimen.length_m


def _specimen(evidence: Evidence, curve: FlowCurve) -> UniformSpecimen:
    specimen, rig = evidence.sheet.specimen, evidence.rig
    faces = 0.0
    if evidence.response.correction(Correction.INDENTATION).applied:
        # Taken out of the curve, so the forward run has to put it back.
        radius, one = np.array([specimen.diameter_m / 2]), np.array([1.0])
        faces = float(
            sum(face_indentation_m(one, radius, bar)[0] for bar in (rig.incident_bar, rig.transmitted_bar))
        )
    return UniformSpecimen(
        length_m=specimen.length_m,
        area_m2=specimen.area_m2,
        young_modulus_pa=specimen.young_modulus_pa,
        mass_kg=_mass_kg(evidence),
        curve=curve,
        faces_m_n=faces,
    )


class _Comparison(NamedTuple):
    """One pulse, measured and predicted, and the noise of their difference within the band."""

    pulse: str
    measured: FloatArray
    predicted: FloatArray
    grid: _Grid
    noise: float
    band_hz: float


def _misfit(pair: _Comparison, u: FloatArray, u_delay_s: float) -> Misfit:
    on = pair.grid.time_s >= -_LEAD_S
    found, model = pair.measured[on], pair.predicted[on]
    rest = found - model
    # measured = (1 + scale) predicted(t - delay), to first order.
    slope = -np.gradient(model, pair.grid.interval_s)
    mm, ms, ss = dot(model, model), dot(model, slope), dot(slope, slope)
    mr, sr = dot(model, rest), dot(slope, rest)
    determinant = max(mm * ss - ms * ms, 1e-300)
    # Noise that is white within the band repeats itself over 1/(2 band): that many samples count as one.
    alike = max(1.0 / (2 * pair.band_hz * pair.grid.interval_s), 1.0)
    by_noise = pair.noise * np.sqrt(alike * mm / determinant)
    peak = float(np.abs(found).max())
    floor = MODEL_SHARE * peak
    return Misfit(
        pulse=pair.pulse,
        rms=float(np.sqrt(np.mean(rest**2))) / peak,
        expected=float(np.sqrt(np.mean(u[on] ** 2 + floor**2))) / peak,
        delay_s=(mm * sr - ms * mr) / determinant,
        u_delay_s=float(np.hypot(u_delay_s, by_noise)),
        scale=(ss * mr - ms * sr) / determinant,
    )


def _noise(evidence: Evidence) -> tuple[float, float]:
    """Noise within the band, as strain, of measured less predicted: reflected, transmitted.

    The reflected pulse is predicted as force less the incident pulse; the transmitted one from a curve that holds its
    own noise at another time.
    """
    pulses, rig = evidence.pulses, evidence.rig
    share = evidence.faces.low_pass.noise_share(evidence.pulses.sample_interval_s)
    across = rig.transmitted_bar.force_per_strain_n / rig.incident_bar.force_per_strain_n
    end_s = evidence.faces.record_time_of_zero_s + evidence.response.time_s[evidence.response.loading[1] - 1]
    i, r, t = (pulses.noise_at(pulse, end_s) * share for pulse in pulses)
    return float(np.sqrt(i**2 + r**2 + (across * t) ** 2)), float(np.sqrt(2) * t)


def _u_reflected(evidence: Evidence, budget: Budget, grid: _Grid) -> FloatArray:
    """What the budget leaves open between the two face forces, as a strain of the incident bar."""
    motion = evidence.response.motion
    mean_force = 0.5 * (motion.force_in_n + motion.force_out_n)[grid.at]
    u_ratio = budget.u_force_difference[grid.at]
    u: FloatArray = u_ratio * np.abs(mean_force) / evidence.rig.incident_bar.force_per_strain_n
    return u


def _u_transmitted(evidence: Evidence, grid: _Grid, u_delay_s: float, noise: float) -> FloatArray:
    """Error of the pulse itself, its noise, and what its place in time leaves open."""
    strain = evidence.faces.transmitted.strain[grid.at]
    slope = np.gradient(strain, grid.interval_s)
    u: FloatArray = np.sqrt(
        (evidence.settings.pulse_error * strain) ** 2 + noise**2 + (slope * u_delay_s) ** 2
    )
    return u


def _delays(evidence: Evidence) -> tuple[float, float]:
    """Standard uncertainty of the places of reflected and transmitted pulse against the incident one [s]."""
    rig = evidence.rig
    travel_in = rig.incident_gauge.to_specimen_m / rig.incident_bar.wave_speed_m_s
    travel_out = rig.transmitted_gauge.to_specimen_m / rig.transmitted_bar.wave_speed_m_s
    # Where stations tell the waves apart, as if the first alone gave their places: approximate.
    reflected = {
        "distance_in": 2 * travel_in, "distance:incident_gauge": 2 * travel_in, "speed_in": -2 * travel_in,
    }  # fmt: skip
    transmitted = {
        "distance_in": travel_in, "speed_in": -travel_in, "distance_out": travel_out, "speed_out": -travel_out,
        "distance:incident_gauge": travel_in, "distance:transmitted_gauge": travel_out,
    }  # fmt: skip

    def u(by: dict[str, float]) -> float:
        sources = sources_of(evidence)
        each = (
            source.u * sum(by.get(key, 0.0) * power for key, power in source.acts.items())
            for source in sources
        )
        return float(np.sqrt(sum(change**2 for change in each)))

    return u(reflected), u(transmitted)
