"""Which name in the code is which name, unit and label in the file: the one table of the HDF5 layout."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from shpb.arrays import FloatArray
from shpb.reduction import ShotResult
from shpb.trust.budget import COVERAGE_FACTOR

if TYPE_CHECKING:
    from shpb.trust.draws import Draws

FORMAT = "shpb-shot"
FORMAT_VERSION = 1


class Field(NamedTuple):
    """One array in the file."""

    name: str
    units: str
    label: str
    of: Callable[[ShotResult], FloatArray]


RESPONSE: tuple[Field, ...] = (
    Field("time", "s", "Time since the front reached the incident face", lambda r: r.response.time_s),
    Field("force_in", "N", "Force on the incident face", lambda r: r.response.motion.force_in_n),
    Field("force_out", "N", "Force on the transmitted face", lambda r: r.response.motion.force_out_n),
    Field("velocity_in", "m/s", "Velocity of the incident face", lambda r: r.response.motion.velocity_in_m_s),
    Field(
        "velocity_out",
        "m/s",
        "Velocity of the transmitted face",
        lambda r: r.response.motion.velocity_out_m_s,
    ),
    Field("strain_rate_1w", "1/s", "Strain rate, one-wave", lambda r: r.response.one_wave.strain_rate_per_s),
    Field("strain_1w", "", "Engineering strain, one-wave", lambda r: r.response.one_wave.strain),
    Field("stress_1w", "Pa", "Engineering stress, one-wave", lambda r: r.response.one_wave.stress_pa),
    Field("strain_rate_2w", "1/s", "Strain rate, two-wave", lambda r: r.response.two_wave.strain_rate_per_s),
    Field("strain_2w", "", "Engineering strain, two-wave", lambda r: r.response.two_wave.strain),
    Field("stress_2w", "Pa", "Engineering stress, two-wave", lambda r: r.response.two_wave.stress_pa),
    Field(
        "strain_rate_3w", "1/s", "Strain rate, three-wave", lambda r: r.response.three_wave.strain_rate_per_s
    ),
    Field("strain_3w", "", "Engineering strain, three-wave", lambda r: r.response.three_wave.strain),
    Field("stress_3w", "Pa", "Engineering stress, three-wave", lambda r: r.response.three_wave.stress_pa),
    Field("true_strain_1w", "", "True strain, one-wave", lambda r: r.response.one_wave.true_strain),
    Field("true_stress_1w", "Pa", "True stress, one-wave", lambda r: r.response.one_wave.true_stress_pa),
    Field("true_strain_3w", "", "True strain, three-wave", lambda r: r.response.three_wave.true_strain),
    Field("true_stress_3w", "Pa", "True stress, three-wave", lambda r: r.response.three_wave.true_stress_pa),
    Field("true_strain", "", "True strain", lambda r: r.response.curve.true_strain),
    Field("true_stress", "Pa", "True stress", lambda r: r.response.curve.true_stress_pa),
    Field("true_strain_rate", "1/s", "True strain rate", lambda r: r.response.curve.true_strain_rate_per_s),
    Field("equilibrium_ratio", "", "R", lambda r: r.response.equilibrium.ratio),
    Field(
        "indentation_strain",
        "",
        "Strain added by the bar faces, an estimate, not taken off",
        lambda r: r.response.indentation_strain,
    ),
)

WAVE: tuple[Field, ...] = (
    Field("time", "s", "Time since the front reached the incident face", lambda r: r.faces.time_s),
    Field("incident", "", "Incident strain at the incident face", lambda r: r.faces.incident.strain),
    Field("reflected", "", "Reflected strain at the incident face", lambda r: r.faces.reflected.strain),
    Field(
        "transmitted", "", "Transmitted strain at the transmitted face", lambda r: r.faces.transmitted.strain
    ),
)

TRUST: tuple[Field, ...] = (
    Field("time", "s", "Time since the front reached the incident face", lambda r: r.response.time_s),
    Field("equilibrium_floor", "", "Measurement floor of R", lambda r: r.response.equilibrium.floor),
    Field("u_true_strain", "", "Standard uncertainty of true strain", lambda r: r.budget.u_true_strain),
    Field("u_true_stress", "Pa", "Standard uncertainty of true stress", lambda r: r.budget.u_true_stress_pa),
    Field(
        "u_true_stress_at_strain",
        "Pa",
        "Standard uncertainty of true stress at a given true strain",
        lambda r: r.budget.u_of("true_stress_at_strain"),
    ),
    Field(
        "u_shared_true_stress_at_strain",
        "Pa",
        "The part of it that all shots of the rig share",
        lambda r: r.budget.u_shared_of("true_stress_at_strain"),
    ),
    Field(
        "u_force_difference",
        "",
        "Standard uncertainty of R by all sources, as the signed 2 (F_in - F_out)/(F_in + F_out)",
        lambda r: r.budget.u_force_difference,
    ),
    Field("equilibrium_ratio_low", "", "Lower end of the interval of R, k = 2", lambda r: _ratio_end(r, 0)),
    Field("equilibrium_ratio_high", "", "Upper end of the interval of R, k = 2", lambda r: _ratio_end(r, 1)),
)


def _ratio_end(result: ShotResult, end: int) -> FloatArray:
    """One end of the interval of R by the linear budget, folded at zero."""
    return result.budget.interval("force_difference", result.response.equilibrium.ratio)[end]


_UNITS = {"stress": "Pa", "strain": "", "strain_rate": "1/s"}
_WAVES = {"1w": "one", "3w": "three"}


def budget_fields(result: ShotResult) -> tuple[Field, ...]:
    """Standard uncertainty of each analysis, whole and the part that all shots of the rig share."""

    def field(prefix: str, label: str, name: str, array: FloatArray) -> Field:
        what, wave = name.rsplit("_", 1)
        words = f"{label} of {what.replace('_', ' ')}, {'one' if wave == '1w' else 'three'}-wave"
        return Field(f"{prefix}_{name}", _UNITS[what], words, lambda _: array)

    budget = result.budget
    whole = [field("u", "Standard uncertainty", *item) for item in budget.u.items()]
    shared = [
        field("u_shared", "Shared part of the standard uncertainty", *item)
        for item in budget.u_shared.items()
    ]
    return (*whole, *shared)


def draw_fields(draws: Draws) -> tuple[Field, ...]:
    """Mean, standard uncertainty and symmetric 95 % interval of every curve by the draws, on their own thinned grid."""
    from shpb.trust.drawn_curves import CURVES

    words = {
        "mean": "Mean of the draws",
        "u": "Standard uncertainty by the draws",
        "low": "Lower end of the 95 % interval by the draws",
        "high": "Upper end of the 95 % interval by the draws",
    }

    def field(name: str, units: str, label: str, array: FloatArray) -> Field:
        return Field(name, units, label, lambda _: array)

    found = [field("time", "s", "Time since the front reached the incident face", draws.time_s)]
    for number, curve in enumerate(CURVES):
        what, _, wave = curve.rpartition("_")
        if wave in _WAVES:
            units, name = _UNITS[what], f"{what.replace('_', ' ')}, {_WAVES[wave]}-wave"
        elif curve == "equilibrium_ratio":
            units, name = "", "R"
        else:
            units, name = _UNITS[curve.removeprefix("true_")], curve.replace("_", " ")
        for which, label in words.items():
            found.append(field(f"{which}_{curve}", units, f"{label}: {name}", getattr(draws, which)[number]))
    return tuple(found)


def draw_table(draws: Draws) -> FloatArray:
    """Flow stresses by the draws, shape (points, 5): strain, then mean, u, low and high of true stress [Pa]."""
    rows = [(point.at_strain, point.mean_pa, point.u_pa, point.low_pa, point.high_pa) for point in draws.flow]
    return np.array(rows, dtype=float).reshape(-1, 5)


class Attribute(NamedTuple):
    """One number or word kept as an attribute; None is left out."""

    name: str
    of: Callable[[ShotResult], object]


def _span_time(result: ShotResult, end: int) -> float | None:
    span = result.response.span
    if span is None:
        return None
    return float(result.response.time_s[span[0] if end == 0 else span[1] - 1])


def _span_strain(result: ShotResult, end: int) -> float | None:
    strains = result.response.strain_span
    return None if strains is None else strains[end]


RESPONSE_ATTRIBUTES: tuple[Attribute, ...] = (
    Attribute("record_time_of_zero", lambda r: r.faces.record_time_of_zero_s),  # [s]
    Attribute("analysis", lambda r: r.response.analysis.value),
    Attribute("span_start_time", lambda r: _span_time(r, 0)),  # [s]
    Attribute("span_end_time", lambda r: _span_time(r, 1)),
    Attribute("span_start_true_strain", lambda r: _span_strain(r, 0)),
    Attribute("span_end_true_strain", lambda r: _span_strain(r, 1)),
    Attribute("loading_end_time", lambda r: float(r.response.time_s[r.response.loading[1] - 1])),
    Attribute("equilibrium_outcome", lambda r: r.response.equilibrium.outcome.value),
    Attribute("equilibrium_limit", lambda r: r.response.equilibrium.limit),
    Attribute("equilibrium_mean_ratio", lambda r: r.response.equilibrium.mean_ratio),
    Attribute("equilibrium_nrms", lambda r: r.response.equilibrium.nrms),
    Attribute("equilibrium_impulse_ratio", lambda r: r.response.equilibrium.impulse_ratio),
    Attribute("equilibrium_share_within", lambda r: r.response.equilibrium.share_within),
    Attribute("reverberations", lambda r: r.response.equilibrium.reverberations),
    Attribute(
        "equilibrium_mean_ratio_untuned",
        lambda r: r.response.untuned_equilibrium and r.response.untuned_equilibrium.mean_ratio,
    ),
    Attribute("mean_strain_rate", lambda r: r.response.rate.mean_per_s),  # [1/s]
    Attribute("mean_true_strain_rate", lambda r: r.response.rate.mean_true_per_s),
    Attribute("least_strain_rate", lambda r: r.response.rate.least_per_s),
    Attribute("greatest_strain_rate", lambda r: r.response.rate.greatest_per_s),
    Attribute("strain_rate_variation", lambda r: r.response.rate.variation),
    Attribute("yield_back_extrapolated", lambda r: r.response.yield_back_extrapolated_pa),  # [Pa]
    Attribute("apparent_slope", lambda r: r.response.apparent_slope_pa),  # [Pa], not a modulus
    Attribute("incident_work", lambda r: r.response.balance.incident_work_j),  # [J]
    Attribute("reflected_work", lambda r: r.response.balance.reflected_work_j),
    Attribute("transmitted_work", lambda r: r.response.balance.transmitted_work_j),
    Attribute("specimen_work", lambda r: r.response.balance.specimen_work_j),
)

TRUST_ATTRIBUTES: tuple[Attribute, ...] = (
    Attribute("coverage_factor", lambda _: COVERAGE_FACTOR),
)  # k of intervals

DRAW_ATTRIBUTES: tuple[Attribute, ...] = (
    Attribute("draws", lambda r: r.draws and r.draws.draws),
    Attribute("seed", lambda r: r.draws and r.draws.seed),
    Attribute("probability", lambda r: r.draws and r.draws.probability),
    Attribute("settled", lambda r: r.draws and r.draws.settled),  # adaptive alone
)

WAVE_ATTRIBUTES: tuple[Attribute, ...] = (
    Attribute("record_time_of_zero", lambda r: r.faces.record_time_of_zero_s),  # [s]
    Attribute("dispersion", lambda r: r.settings.dispersion.value),
    Attribute("alignment", lambda r: r.settings.alignment.value),
    Attribute("low_pass_cutoff", lambda r: r.faces.low_pass.cutoff_hz),  # [Hz], half height
    Attribute("reflected_shift", lambda r: r.faces.reflected_shift_s),  # [s], the tuned part
    Attribute("transmitted_shift", lambda r: r.faces.transmitted_shift_s),
    Attribute("reflected_misalignment", lambda r: r.faces.reflected_misalignment_s),  # [s]
    Attribute("transmitted_misalignment", lambda r: r.faces.transmitted_misalignment_s),
    Attribute("u_misalignment", lambda r: r.faces.u_misalignment_s),
)


def spread_of_amplitude(result: ShotResult) -> tuple[Field, ...]:
    """The extra arrays of an amplitude correction, where force and velocity strains differ."""
    if result.faces.incident.force_strain is result.faces.incident.strain:
        return ()
    fields = []
    for name in ("incident", "reflected", "transmitted"):
        for kind in ("force", "velocity"):
            label = f"{name.capitalize()} strain for {kind}"

            def values(r: ShotResult, name: str = name, kind: str = kind) -> FloatArray:
                array: FloatArray = getattr(getattr(r.faces, name), f"{kind}_strain")
                return array

            fields.append(Field(f"{name}_{kind}", "", label, values))
    return tuple(fields)


def untuned_ratio(result: ShotResult) -> tuple[Field, ...]:
    """R(t) without the tuned part of the shifts, where there is one."""
    untuned = result.response.untuned_equilibrium
    if untuned is None:
        return ()
    return (
        Field(
            "equilibrium_ratio_untuned", "", "R without the tuned part of the shifts", lambda _: untuned.ratio
        ),
    )


def flow_table(result: ShotResult) -> FloatArray:
    """Flow stress at given strains, shape (points, 3): strain, stress [Pa], rate [1/s]; NaN outside the span."""
    rows = [
        (
            f.at_strain,
            np.nan if f.stress_pa is None else f.stress_pa,
            np.nan if f.rate_per_s is None else f.rate_per_s,
        )
        for f in result.response.flow
    ]
    return np.array(rows, dtype=float).reshape(-1, 3)
